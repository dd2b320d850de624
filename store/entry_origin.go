package store

import (
	"slices"

	"tripwell/forms"
)

// Unwitnessed reports whether the test that moved a task's date to a day was brought in from older records. Where several
// tests of that day moved it, one that was made here is enough. A day on which no test moved the date is told by the last
// test of the task.
func (v *View) Unwitnessed(d *DeviceRow, task string, day forms.Day) (bool, error) {
	sv, thing, err := v.findDevice(d.ID)
	if err != nil {
		return false, err
	}
	list, err := v.history(sv, thing.n)
	if err != nil {
		return false, err
	}
	met := false
	for _, p := range list {
		if p.day != day || !slices.Contains(p.met, task) {
			continue
		}
		r, _, _, err := readBook(v.tx, p.seq)
		if err != nil {
			return false, err
		}
		if r.Kind != "entry.imported" {
			return false, nil
		}
		met = true
	}
	if last := d.Last[task]; !met && last.Day == day && last.id != (id16{}) {
		r, _, _, _, err := v.whole().recordAt(last.id)
		return err == nil && r.Kind == "entry.imported", err
	}
	return met, nil
}
