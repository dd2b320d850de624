package store

import "tripwell/forms"

// KindMarks are the marks put on things of one kind after one test at a site.
type KindMarks struct {
	Kind, Task string
	*forms.Marks
}

// Marks gives the marks in use at a site on a day, by kind and task.
func (v *View) Marks(site string, on forms.Day) ([]KindMarks, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	var out []KindMarks
	for _, kind := range forms.Kinds() {
		schedule := v.rules().schedule(sv.ord, v.orgLog(), kind)
		for _, task := range forms.Tasks() {
			if m := schedule.Marks(task, on); m != nil {
				out = append(out, KindMarks{kind, task, m})
			}
		}
	}
	return out, nil
}

// SnapshotMark is what a phone needs to say which mark is put on: the periods from the one that holds the snapshot's day on,
// for once through all marks and one more.
type SnapshotMark struct {
	Kind    string               `json:"kind"`
	Task    string               `json:"task"`
	Periods []SnapshotMarkPeriod `json:"periods"`
}

// SnapshotMarkPeriod is one of them; both days are included.
type SnapshotMarkPeriod struct {
	Word   string    `json:"word"`
	Colour string    `json:"colour,omitempty"`
	From   forms.Day `json:"from"`
	Until  forms.Day `json:"until"`
}

func (v *View) snapshotMarks(site string, on forms.Day) ([]SnapshotMark, error) {
	all, err := v.Marks(site, on)
	var out []SnapshotMark
	for _, m := range all {
		one := SnapshotMark{Kind: m.Kind, Task: m.Task}
		p, ok := m.On(on)
		for i := 0; ok && i <= len(m.List); i++ {
			one.Periods = append(one.Periods, SnapshotMarkPeriod{p.Word, p.Colour, p.From, p.Until})
			p = m.After(p)
		}
		out = append(out, one)
	}
	return out, err
}
