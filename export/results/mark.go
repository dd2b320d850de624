package results

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"
	"unicode"

	"tripwell/export/intake"
	"tripwell/forms"
)

// mark is what a cell of an older list says of one test.
type mark struct {
	result string
	day    forms.Day
	note   string // what the cell said, where the day or the result was taken from less than that
}

// Words of older lists; common practice, no source.
var (
	doneWords = words("ok, okay, pass, passed, good, done, yes, y, x, ✓, ✔, ☑, √, ✅, tested, complete, completed, p")
	failWords = words("fail, failed, f, bad, ng, not ok, nok, faulty, defective, ✗, ✘, ❌, replaced, replace, did not trip, no trip")
	lostWords = words("locked, no access, no entry, not accessible, not tested, nt, skipped, closed, vacant, occupied, circuit dead, no power")
	openWords = words("n, no, 0, false, due, todo, to do, missed, missing, ?")
)

func words(list string) map[string]bool {
	m := map[string]bool{}
	for _, w := range strings.Split(list, ", ") {
		m[w] = true
	}
	return m
}

var (
	initials = regexp.MustCompile(`^\pL\.?(?:\s?\pL\.?){0,3}$`)
	dayOnly  = regexp.MustCompile(`^(\d{1,2})(?:st|nd|rd|th|\.)?$`)
	dayMonth = regexp.MustCompile(`^(\d{1,2})[-/.](\d{1,2})\.?$`)
)

// resultWord reads a word for a result; ok is false for everything else.
func resultWord(text string) (result string, ok bool) {
	low := strings.ToLower(strings.TrimRight(strings.Join(strings.Fields(text), " "), ".!"))
	low = strings.TrimSuffix(low, "\ufe0f") // the mark that asks for a coloured picture
	switch {
	case doneWords[low]:
		return forms.Pass, true
	case failWords[low]:
		return forms.Fail, true
	case lostWords[low]:
		return forms.NotTested, true
	}
	return "", false
}

// monthMark reads a cell under a month: OK, initials, a tick or x, a day, a date, locked, or several of these. A month
// without a day counts from its first: the date that follows from it then never comes too late.
func (p *planner) monthMark(cell intake.Cell, c column) (mark, *fault) {
	text := strings.Join(strings.Fields(cell.Text), " ")
	first := forms.Date(c.year, c.month, 1)
	named := fmt.Sprintf("%04d-%02d: %s", c.year, int(c.month), text)
	m := mark{result: forms.Pass, day: first, note: named}
	if cell.Date != nil {
		return m.on(*cell.Date, first)
	}
	if result, ok := resultWord(text); ok {
		m.result = result
		return m, nil
	}
	if openWords[strings.ToLower(text)] {
		return m, &fault{text: "This does not say whether the test was done. Write OK, fail or locked, or leave the cell empty."}
	}
	met := false
	for _, word := range strings.Fields(strings.NewReplacer(",", " ", ";", " ", "(", " ", ")", " ").Replace(text)) {
		if result, ok := resultWord(word); ok && (!met || result != forms.Pass) {
			m.result, met = result, true
			continue
		}
		if day, ok := dayIn(word, c); ok {
			m.day, met = day, true
			continue
		}
		if initials.MatchString(word) && strings.IndexFunc(word, unicode.IsUpper) == 0 {
			met = true
			continue
		}
		day, ambiguous, err := intake.ParseDate(word, p.ask.Dates)
		if err != nil || ambiguous {
			return p.wholeDate(text, m, first)
		}
		on, why := m.on(day, first)
		if why != nil {
			return on, why
		}
		m, met = on, true
	}
	if !met {
		return m, &fault{text: "This says neither a result, a day nor who. Write OK, fail, locked, a date or initials."}
	}
	return m, nil
}

// wholeDate takes a cell that is one date written in words.
func (p *planner) wholeDate(text string, m mark, first forms.Day) (mark, *fault) {
	day, _, err := intake.ParseDate(text, p.ask.Dates)
	if err != nil {
		return m, &fault{text: "This is no result, no day and no initials that can be understood. Write OK, fail, locked, or a date as 2026-12-31."}
	}
	return m.on(day, first)
}

// on sets the day a cell states, which must lie in the month of its column.
func (m mark) on(day, first forms.Day) (mark, *fault) {
	if day < first || day >= first.AddMonths(1) {
		return m, &fault{text: fmt.Sprintf("%s does not lie in the month of this column. Correct the date, or move it.", day)}
	}
	m.day = day
	return m, nil
}

// dayIn reads "14", "14th", "3/14" or "14.3." under March.
func dayIn(word string, c column) (forms.Day, bool) {
	try := func(text string) (forms.Day, bool) {
		n, _ := strconv.Atoi(text)
		t := time.Date(c.year, c.month, n, 0, 0, 0, 0, time.UTC)
		return forms.DayOf(t), n >= 1 && t.Month() == c.month
	}
	if m := dayOnly.FindStringSubmatch(word); m != nil {
		return try(m[1])
	}
	m := dayMonth.FindStringSubmatch(word)
	if m == nil {
		return 0, false
	}
	month := strconv.Itoa(int(c.month))
	switch a, b := strings.TrimLeft(m[1], "0"), strings.TrimLeft(m[2], "0"); {
	case a == month:
		return try(b)
	case b == month:
		return try(a)
	}
	return 0, false
}

// lastMark reads the day a test was last done: a date, or a month, which counts from its first day.
func (p *planner) lastMark(cell intake.Cell) (mark, *fault) {
	text := strings.Join(strings.Fields(cell.Text), " ")
	m := mark{result: forms.Pass}
	if cell.Date != nil {
		m.day = *cell.Date
		return m, nil
	}
	if y, month, ok := intake.ParseMonth(text); ok {
		if y == 0 {
			return m, &fault{text: "This month names no year. Write it as 2026-12."}
		}
		m.day, m.note = forms.Date(y, month, 1), text
		return m, nil
	}
	day, _, err := intake.ParseDate(text, p.ask.Dates)
	if err != nil {
		return m, &fault{text: err.Error()}
	}
	m.day = day
	return m, nil
}
