package forms

import (
	"fmt"
	"slices"
)

// Marks are the words and colours put on what was tested, one for each calendar period in turn. Which colour stands for
// which period is the employer's choice.
type Marks struct {
	Every string `json:"every"` // ISO 8601 duration that divides the calendar
	List  []Mark `json:"list"`
}

// Mark is one of them; colour is one of MarkColours, "" for a word alone.
type Mark struct {
	Word   string `json:"word"`
	Colour string `json:"colour,omitempty"`
}

// MarkColours are the colours a mark may be drawn in, all told apart in print by their word.
func MarkColours() []string {
	return []string{"white", "black", "red", "orange", "yellow", "green", "blue", "violet", "brown", "grey"}
}

func (m *Marks) check() error {
	every, err := ParseInterval(m.Every)
	if err != nil {
		return fmt.Errorf("every: %w", err)
	}
	if every.Months == 0 || every.Days != 0 || !wholePeriods(every) {
		return fmt.Errorf("a mark stands for whole calendar months: P1M, P2M, P3M, P4M, P6M or years, not %s", m.Every)
	}
	if len(m.List) < 2 {
		return fmt.Errorf("give two marks at least: with one, an old mark looks like a new one")
	}
	seen := map[string]bool{}
	for i, one := range m.List {
		if one.Word == "" || seen[one.Word] {
			return fmt.Errorf("mark %d needs a word of its own", i+1)
		}
		seen[one.Word] = true
		if one.Colour != "" && !slices.Contains(MarkColours(), one.Colour) {
			return fmt.Errorf("%q is no colour a mark can be drawn in; it is one of %v", one.Colour, MarkColours())
		}
	}
	return nil
}

// MarkPeriod is a calendar period with the mark that is put on in it.
type MarkPeriod struct {
	Mark
	From, Until Day
}

// On gives the mark put on on a day, with its period; ok is false where the plan has no marks.
func (m *Marks) On(d Day) (p MarkPeriod, ok bool) {
	if m == nil || len(m.List) == 0 {
		return p, false
	}
	every, err := ParseInterval(m.Every)
	if err != nil || every.Months == 0 {
		return p, false
	}
	p.From, p.Until = every.period(d)
	y, month, _ := p.From.Civil()
	p.Mark = m.List[floorMod((y*12+int(month)-1)/every.Months, len(m.List))]
	return p, true
}

// After gives the period that follows.
func (m *Marks) After(p MarkPeriod) MarkPeriod {
	next, _ := m.On(p.Until + 1)
	return next
}

// Marks gives the marks put on after a task's test on a day: those of its plans in force then, of several the first by id.
func (s Schedule) Marks(task string, on Day) *Marks {
	for i := range s {
		if s[i].task != task {
			continue
		}
		for _, chain := range s[i].chains {
			r := &chain[0]
			for j := range chain {
				if chain[j].InForce <= on {
					r = &chain[j]
				}
			}
			if r.Plan.Marks != nil {
				return r.Plan.Marks
			}
		}
	}
	return nil
}
