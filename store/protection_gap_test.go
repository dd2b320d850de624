package store

import (
	"fmt"
	"strings"
	"testing"

	"tripwell/forms"
)

// wiredSite is a clinic with one outlet of every gap and some without any.
func (r *rig) wiredSite() (site string, device map[string]string) {
	site, device = r.site("ELM-4"), map[string]string{}
	panel, circuit, other := newID(r.clock()), newID(r.clock()), newID(r.clock())
	put := func(kind, subject string, set map[string]any) {
		r.append(Draft{Kind: kind, Log: site, Subject: subject, By: r.manager.ID, Body: map[string]any{"set": set}})
	}
	put("panel.set", panel, map[string]any{"name": "LP-2"})
	put("circuit.set", circuit, map[string]any{"panel": panel, "numbers": "14"})
	put("circuit.set", other, map[string]any{"panel": panel, "numbers": "16"})
	add := func(name, kind, room string, more ...any) {
		place, id := newID(r.clock()), newID(r.clock())
		device[name] = id
		put("place.registered", place, map[string]any{"room": room, "name": name})
		set := map[string]any{"kind": kind, "place": place}
		for i := 0; i < len(more); i += 2 {
			if set[more[i].(string)] = more[i+1]; more[i] == "fed_by" {
				set["fed_by"] = device[more[i+1].(string)]
			}
		}
		put("device.registered", id, set)
	}
	add("good", forms.GFCIReceptacle, "Kitchen", "circuit", circuit)
	add("bad", forms.GFCIReceptacle, "Kitchen", "circuit", circuit)
	add("new", forms.GFCIReceptacle, "Kitchen", "circuit", circuit)
	add("old", forms.GFCIReceptacle, "Kitchen", "circuit", circuit)
	add("safe", forms.ProtectedReceptacle, "Kitchen", "fed_by", "good")
	add("left", forms.ProtectedReceptacle, "Hall", "fed_by", "bad")
	add("right", forms.ProtectedReceptacle, "Hall", "fed_by", "new")
	add("gone", forms.ProtectedReceptacle, "Hall", "fed_by", "old")
	add("bare", forms.PlainReceptacle, "Washroom 3")
	add("desk", forms.PlainReceptacle, "Office")
	add("lost", forms.ProtectedReceptacle, "Office")
	add("two-wire", forms.PlainReceptacle, "Office", "equipment_ground", "none-permitted")
	add("two-wire behind", forms.ProtectedReceptacle, "Hall", "equipment_ground", "none-permitted", "fed_by", "good")
	add("two-wire itself", forms.GFCIReceptacle, "Hall", "equipment_ground", "none-permitted")
	add("live", forms.ProtectedReceptacle, "Hall", "fed_by", "good")
	put("device.set", device["good"], map[string]any{"fed_by": device["safe"]})
	for name, answer := range map[string]string{"good": "yes", "two-wire itself": "yes", "bad": "no"} {
		r.append(Draft{Kind: "entry.made", Log: site, Subject: device[name], By: r.manager.ID, Body: map[string]any{"form": "gfci-receptacle/button", "source": "office",
			"given":    map[string]any{"kind": forms.GFCIReceptacle},
			"readings": map[string]any{"condition": "sound", "found": "on", "button_trips": answer, "button_resets": "yes", "marking_present": "yes"}}})
	}
	r.append(Draft{Kind: "device.retired", Log: site, Subject: device["old"], By: r.manager.ID, Body: map[string]any{"reason": "taken out"}})
	r.append(Draft{Kind: "defect.opened", Log: site, Subject: newID(r.clock()), By: r.manager.ID,
		Body: map[string]any{"device": device["live"], "cause": "protection-lost", "protector": device["good"], "text": "stayed live"}})
	return site, device
}

func TestProtectionGaps_WorstFirst(t *testing.T) {
	r := newRig(t)
	site, device := r.wiredSite()
	names := map[string]string{"": ""}
	for name, id := range device {
		names[id] = name
	}
	on := forms.DayOf(r.clock())
	read := func(on forms.Day) string {
		var out []string
		err := r.View(all, func(v *View) error {
			gaps, _, err := v.ProtectionGaps(site, on)
			for _, g := range gaps {
				out = append(out, fmt.Sprintf("%s: %s by %s %s %s", names[g.Device.ID], g.Why, names[g.By], g.Usual.Place, g.Marking))
			}
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return strings.Join(out, "\n")
	}
	want := `live: live by good  
left: failed by bad  
gone: removed by old  
two-wire: ground by   
lost: none by   
bare: none by  bathroom 
right: untested by new  
two-wire behind: marking by good  both
good: loop by safe  `
	if got := read(on); got != want {
		t.Errorf("got\n%s\nwant\n%s", got, want)
	}
	if got := read(on + 400); !strings.Contains(got, "safe: overdue by good kitchen") {
		t.Errorf("a year on, got\n%s", got)
	}
	// An organisation, or one site, looks for other places.
	list := *forms.Shipped().Usual
	list.Revision, list.Places = 1, []forms.UsualPlace{{Place: "office", Name: "Offices", Words: []string{"office"}, Source: "own rule"}}
	r.append(Draft{Kind: "usual.set", Log: site, Subject: UsualSubject(), By: r.manager.ID, Body: map[string]any{"usual": list, "reason": "insurer"}})
	if got := read(on); !strings.Contains(got, "desk: none by  office") || strings.Contains(got, "bathroom") {
		t.Errorf("with a list of its own, got\n%s", got)
	}
	list.Places[0].Place = ""
	if _, err := r.Append(t.Context(), Draft{Kind: "usual.set", Log: site, Subject: UsualSubject(), By: r.manager.ID, Body: map[string]any{"usual": list}}); err == nil {
		t.Error("a list with a nameless kind was taken")
	}
}
