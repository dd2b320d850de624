package store

import (
	"context"
	"testing"
	"time"

	"pgregory.net/rapid"

	"tripwell/forms"
)

// TestCompliance_AsKnownThenAndNow follows one device through four months: tested in January; in March the February test
// comes in from a phone that had no signal, and the January one is withdrawn.
func TestCompliance_AsKnownThenAndNow(t *testing.T) {
	r := newRig(t)
	r.pass(time.Date(2027, 1, 4, 15, 0, 0, 0, time.UTC).Sub(r.clock()))
	site, p := newID(r.clock()), r.phone(r.manager)
	send := func(lines ...[]byte) {
		t.Helper()
		for _, rc := range p.push(lines...) {
			if rc.State != "stored" {
				t.Fatalf("%+v", rc)
			}
		}
	}
	device := newID(r.clock())
	send(p.make("site.registered", site, site, map[string]any{"set": map[string]any{"code": "ELM", "name": "Elm", "zone": "America/Chicago", "standard": "NEC"}}))
	send(p.make("device.registered", site, device, map[string]any{"set": map[string]any{"kind": "gfci-receptacle"}}))
	pressed := map[string]any{"form": "gfci-receptacle/button", "readings": map[string]any{"found": "on", "button_trips": "yes", "button_resets": "yes"}, "source": "phone"}
	r.pass(8 * 24 * time.Hour)
	entry := newID(r.clock())
	first := p.makeWith(entry, "entry.made", site, device, pressed)
	send(first)
	r.pass(31 * 24 * time.Hour)
	late := p.make("entry.made", site, device, pressed) // 12 February, sent in March
	r.pass(21 * 24 * time.Hour)
	send(late)
	send(p.make("entry.withdrawn", site, entry, map[string]any{"entry": entry, "reason": "another outlet"}))
	r.pass(27 * 24 * time.Hour) // 1 April

	month := func(m time.Month, known forms.Day) (c forms.Count) {
		t.Helper()
		err := r.View(all, func(v *View) error {
			from := forms.Date(2027, m, 1)
			got, err := v.Compliance(ComplianceAsk{Site: site, From: from, To: from.AddMonths(1) - 1, Known: known})
			for _, row := range got.Rows {
				if row.Task == "button" {
					c.Join(row.Count)
				}
			}
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return c
	}
	for _, c := range []struct {
		month time.Month
		known forms.Day
		want  forms.Count
	}{
		{time.January, forms.Date(2027, 1, 31), forms.Count{InTime: 1}},
		{time.January, forms.NoDay, forms.Count{Missed: 1}},
		{time.February, forms.Date(2027, 2, 28), forms.Count{Open: 1}},
		{time.February, forms.Date(2027, 3, 1), forms.Count{Missed: 1}},
		{time.February, forms.NoDay, forms.Count{InTime: 1}},
		{time.March, forms.NoDay, forms.Count{Missed: 1}},
		{time.April, forms.NoDay, forms.Count{Open: 1}},
	} {
		if got := month(c.month, c.known); got != c.want {
			t.Errorf("%s as known %q: got %+v, want %+v", c.month, c.known, got, c.want)
		}
	}
	// The strip is the same sum, read from the site's own rows.
	err := r.View(all, func(v *View) error {
		sums, err := v.SiteSums(site, forms.DayOf(r.clock()))
		if err != nil {
			return err
		}
		got := map[int32]forms.Count{}
		for _, m := range sums.Year {
			got[m.Month] = m.Count
		}
		for m := time.January; m <= time.April; m++ {
			if want, have := month(m, forms.NoDay), got[forms.MonthOf(forms.Date(2027, m, 1))]; want != have {
				t.Errorf("%s: the strip says %+v, want %+v", m, have, want)
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

// The strip of a site is read from sums of its own, the table from every device's tests: months that are missed one after
// another, occasions nobody met, closed doors and pauses must come to the same in both, on that day and on later ones.
func TestStrip_IsTheTable(t *testing.T) {
	if testing.Short() {
		t.Skip("long property run")
	}
	rapid.Check(t, func(rt *rapid.T) {
		r := newRig(t)
		site, lines := year(r, rt)
		now := r.clock().Add(time.Hour)
		dir := t.TempDir()
		for later := range 3 {
			s, err := Open(dir, Options{Now: func() time.Time { return now }, Create: later == 0})
			if err != nil {
				rt.Fatal(err)
			}
			batch := make([]Incoming, len(lines))
			for i := range lines {
				batch[i].Record = lines[i]
			}
			if _, err := s.Push(context.Background(), Sender{Owner: true}, batch); err != nil {
				rt.Fatal(err)
			}
			lines = nil
			err = s.View(all, func(v *View) error {
				sv, err := v.open(site)
				if err != nil {
					return err
				}
				last := forms.MonthOf(sv.today)
				sums, err := v.SiteSums(site, sv.today)
				if err != nil {
					return err
				}
				table, err := v.Compliance(ComplianceAsk{Site: site, From: forms.MonthStart(last - 11), To: forms.MonthStart(last+1) - 1, Known: forms.NoDay})
				if err != nil {
					return err
				}
				want := map[int32]forms.Count{}
				for _, row := range table.Rows {
					c := want[row.Month]
					c.Join(row.Count)
					want[row.Month] = c
				}
				for _, m := range sums.Year {
					if m.Count != want[m.Month] {
						rt.Errorf("on %s, month %d: the strip says %+v, the table %+v", sv.today, m.Month%12+1, m.Count, want[m.Month])
					}
				}
				return nil
			})
			if err != nil {
				rt.Fatal(err)
			}
			if err := s.Close(); err != nil {
				rt.Fatal(err)
			}
			now = now.Add(time.Duration(rapid.IntRange(20, 90).Draw(rt, "days later")) * 24 * time.Hour)
		}
	})
}
