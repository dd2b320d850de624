package demo

import (
	"fmt"
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/store"
)

// asked tells what made tests due at once, and the days on which none are asked for: a storm that was followed by a round, a
// blow to an outlet nobody has looked at since, a pause that is over and one that goes on.
func (b *builder) asked() {
	for _, s := range b.sites {
		switch s.code {
		case bracken:
			round := workday(firstOfMonth(b.today, -1), s.firstWorkday)
			b.note(s, round, 6, "occasion.noted", map[string]any{"cause": forms.Storm, "on": round, "tasks": []string{forms.TaskButton}, "text": "Lightning over the river at four in the morning",
				"devices": s.named(func(d *device) bool { return d.building == "North row" && slices.Index(s.devices, d) < s.perDay })})
			b.note(s, b.today-52, 9, "pause.set", map[string]any{"from": b.today - 50, "until": b.today - 32, "reason": "Garage doors rebuilt, no way in",
				"devices": s.named(func(d *device) bool { return d.building == "South row" && d.room == "Garages" })})
		case kilnLane:
			day := lastWorkday(b.today - 1)
			b.note(s, day, 17, "occasion.noted", map[string]any{"cause": forms.Damage, "on": day, "text": "A trolley ran into it; the cover is scratched",
				"devices": s.named(func(d *device) bool { return d.room == "Kitchen" && d.name == "Coffee machine" })})
			b.note(s, b.today-13, 10, "pause.set", map[string]any{"from": b.today - 12, "until": b.today + 20, "reason": "Washroom being rebuilt, its circuits are locked off",
				"devices": s.named(func(d *device) bool { return d.room == "Washroom 5" })})
		}
	}
}

// named gives the ids of a site's devices that somebody means.
func (s *site) named(is func(*device) bool) []string {
	var ids []string
	for _, d := range s.devices {
		if is(d) {
			ids = append(ids, d.id)
		}
	}
	return ids
}

// note lets the manager say something of a site's devices on a day at an hour; nothing where there are none.
func (b *builder) note(s *site, day forms.Day, hour int, kind string, body map[string]any) {
	if len(body["devices"].([]string)) == 0 {
		return
	}
	at := s.at(day, hour, 20)
	b.on(at, func() error {
		return b.office(s.id, store.Draft{ID: newID(at, kind, s.code), Kind: kind, Subject: newID(at, kind, s.code), Body: body})
	})
}

// setMarks gives the plan of cord sets its marks: a word and a colour for each quarter, which are the house's own choice.
func (b *builder) setMarks() error {
	plans := forms.Shipped().Plans
	i := slices.IndexFunc(plans, func(p *forms.Plan) bool { return strings.HasPrefix(p.ID, "cord-set") })
	if i < 0 {
		return fmt.Errorf("no plan for cord sets is shipped")
	}
	p := *plans[i]
	p.Revision, p.InForce = 2, forms.DayOf(b.clock.Now())
	p.Marks = &forms.Marks{Every: "P3M", List: []forms.Mark{{Word: "Heron", Colour: "grey"}, {Word: "Gorse", Colour: "yellow"}, {Word: "Sloe", Colour: "violet"}, {Word: "Bracken", Colour: "brown"}}}
	return b.office("org", store.Draft{Kind: "plan.set", Subject: store.PlanSubject(p.ID), Body: map[string]any{"plan": p, "reason": "Leads carry a mark for the quarter they were tested in"}})
}
