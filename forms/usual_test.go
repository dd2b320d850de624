package forms

import "testing"

func TestUsualPlaces_TakenByTheirNames(t *testing.T) {
	u := Shipped().Usual
	if wrong := CheckUsualPlaces(u); len(wrong) > 0 {
		t.Fatal(wrong[0])
	}
	for _, c := range []struct {
		says, room, name, want string
		byName                 bool
	}{
		{"", "Apartment 12", "Bathroom", "bathroom", true}, {"", "Washrooms east", "by the door", "bathroom", true},
		{"", "Kitchen", "Counter, left", "kitchen", true}, {"", "Office", "Kitchener Street side", "", false},
		{"", "Lab", "Sinks, left", "sink", true}, {"", "Office", "Desk", "", false}, {"", "", "", "", false},
		{"garage", "Office", "Desk", "garage", false}, {"none", "Kitchen", "Counter", "", false}, {"gone-from-the-list", "Kitchen", "Counter", "", false},
		{"", "Café", "Terrace", "food", true},
	} {
		got, byName, ok := u.Match(c.says, c.room, c.name)
		if got.Place != c.want && ok || ok != (c.want != "") || byName != c.byName {
			t.Errorf("%q, %q (%q): got %q by name %v (%v), want %q", c.room, c.name, c.says, got.Place, byName, ok, c.want)
		}
	}
	off := UsualPlaces{ID: UsualPlacesID, Places: []UsualPlace{{Place: "kitchen", Name: "Kitchens", Words: []string{"kitchen"}, Off: true}}}
	if _, _, ok := off.Match("", "Kitchen"); ok {
		t.Error("a kind that is switched off is still looked for")
	}
}

// Every kind of NEC 2023 210.8(A)(1) to (12) is on the list, with a clause beside it.
func TestUsualPlaces_NameTheirClauses(t *testing.T) {
	u := Shipped().Usual
	for _, kind := range []string{"bathroom", "garage", "outdoors", "crawl-space", "basement", "kitchen", "food", "sink", "boathouse", "shower", "laundry", "wet"} {
		if p, ok := u.Kind(kind); !ok || p.Source == "" || p.Off {
			t.Errorf("%s: got %+v", kind, p)
		}
	}
}

func TestUsualPlaces_RefusesWhatCannotBeMeant(t *testing.T) {
	for name, u := range map[string]UsualPlaces{
		"another list": {ID: "mine"},
		"twice":        {ID: UsualPlacesID, Places: []UsualPlace{{Place: "a", Name: "A"}, {Place: "a", Name: "B"}}},
		"no name":      {ID: UsualPlacesID, Places: []UsualPlace{{Place: "a"}}},
		"none":         {ID: UsualPlacesID, Places: []UsualPlace{{Place: NoUsualPlace, Name: "None"}}},
		"empty word":   {ID: UsualPlacesID, Places: []UsualPlace{{Place: "a", Name: "A", Words: []string{" "}}}},
	} {
		if len(CheckUsualPlaces(&u)) == 0 {
			t.Errorf("%s: taken", name)
		}
	}
}
