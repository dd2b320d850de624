package server

import (
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/static/chromium"
	"tripwell/store"
)

// openDesk signs a person in at a desk's browser.
func openDesk(t testing.TB, r *rig, who store.Person) *chromium.Window {
	t.Helper()
	token, err := r.store.NewLink(who.ID, time.Hour)
	must(t, err)
	d := chromium.Desk(t)
	d.Open(r.url + "/in/" + token)
	d.Press("main", "")
	d.Until("the overview", `location.pathname === "/"`)
	return d
}

// monthOf gives what became of this month's dates at the rig's site.
func (r *rig) monthOf() (sums store.SiteSums) {
	r.t.Helper()
	must(r.t, r.store.View(store.Scope{All: true, Role: "owner"}, func(v *store.View) error {
		site, err := v.Site(r.site)
		if err == nil {
			sums, err = v.SiteSums(r.site, forms.DayOf(r.store.Now().In(site.Location())))
		}
		return err
	}))
	return sums
}

// A plan is set and shows the dates it moves before it moves them; what is due becomes a round; the round is walked and ended on a
// phone without signal; a manager sees it and accepts it.
func TestRound_PlannedWalkedOfflineAndAccepted(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 4)
	device := r.devicesOf(r.site)[0].ID
	desk := openDesk(t, r, r.manager)

	was := r.dueOf(device, "instrument")
	strip := func() string {
		desk.Open(r.url + "/")
		return desk.Text(".strip") + desk.Value(`document.querySelector(".strip").outerHTML`)
	}
	bare := strip()
	desk.Open(r.url + "/plans/instrument-yearly/edit")
	desk.Until("the plan's form", `document.querySelector("[name='every_n']")`)
	desk.JS(`(document.querySelector("[name='every_n']").value = "7", document.querySelector("[name='every_unit']").value = "D", document.querySelector("[name='reason']").value = "Wet rooms", true)`)
	desk.JS(`(document.querySelector("[name='every_n']").form.requestSubmit(), true)`)
	desk.Sees("4 dates come earlier.")
	if now := r.dueOf(device, "instrument"); now.Due != was.Due {
		t.Fatalf("before accepting, the date moved from %s to %s", was.Due, now.Due)
	}
	desk.Press("main form[action='/revisions']", "")
	desk.Sees("Wet rooms")
	if now := r.dueOf(device, "instrument"); now.Due >= was.Due {
		t.Fatalf("after accepting: got %s, want earlier than %s", now.Due, was.Due)
	}

	desk.Open(r.url + "/rounds/new?site=KILN-LANE&task=button&until=2099-12-31")
	desk.Sees("4 tests")
	desk.JS(`(document.querySelector("[name='who.0']").value = ` + chromium.Quote(r.crew.ID) + `, document.querySelector("[name='note']").value = "Keys at the desk", true)`)
	desk.Press("main", "Make the round")
	desk.Sees("0 of 4 done.")
	round := desk.Value(`location.pathname`)

	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := openHandheld(t, "http://"+w.addr)
	p.signIn(r, r.crew)
	p.ready()
	p.Sees("Rounds for you")
	before := r.monthOf().Year[11].Count
	w.cut()
	p.Reload()
	p.Tap(".rounds a.row", "Round for")
	p.Sees("Keys at the desk")
	p.Tap("button.go", "Start this round")
	p.testNext()
	p.Sees("2 of 4")
	p.testNext()
	p.Sees("3 of 4")
	p.Tap("button.link", "Pass this one over")
	p.Tap("#pass-over button", "In use")
	p.Sees("4 of 4")
	p.testNext()
	p.Sees("3 done")
	p.Tap(".ask button", "It shows live")
	p.Tap("button.go", "End the round")
	p.Until("the first page", `location.hash === "#/" && !document.querySelector(".rounds")`)
	if n := p.waiting(); n != 4 {
		t.Fatalf("got %d records waiting, want three entries and the end of the round", n)
	}
	if got := r.rounds()[0]; got.State != store.RoundMade {
		t.Fatalf("the line is cut, and the round is %s", got.State)
	}
	w.mend()
	p.JS(`(dispatchEvent(new Event("online")), true)`)
	p.Sees("All sent")

	desk.Open(r.url + "/rounds")
	desk.Sees("1 round waits to be accepted.")
	desk.Open(r.url + round)
	desk.Sees("3 of 4 done.")
	desk.Sees("in use")
	desk.Sees("Tester shown to work before, not tried after.")
	desk.JS(`(document.querySelector("[name='accept_note']").value = "Outlet 3 next week", true)`)
	desk.Press(".accept", "Accept")
	desk.Sees("Outlet 3 next week")
	if got := r.rounds()[0]; got.State != store.RoundAccepted || got.Counts[store.StopDone] != 3 || got.Counts[store.StopPassed] != 1 {
		t.Errorf("got %s, %v", got.State, got.Counts)
	}
	if now := strip(); now == bare {
		t.Errorf("the overview's strip stayed as it was: %s", now)
	}
	for _, e := range r.entries() {
		if e.Shown != forms.Pass {
			t.Errorf("an entry came as %s", e.Shown)
		}
	}
	if after := r.monthOf().Year[11].Count; after.InTime != before.InTime+3 || after.Open != before.Open-3 {
		t.Errorf("the month went from %+v to %+v, want three more in time", before, after)
	}
}
