package server

import (
	"net/http"
	"net/url"
	"strings"
	"testing"

	"tripwell/forms"
	"tripwell/store"
)

// circuitRig registers a panel with a circuit of a GFCI and three receptacles by the office's own pages.
func circuitRig(t *testing.T) (r *rig, manager *http.Client, circuit string, device map[string]string) {
	t.Helper()
	r, device = newRig(t, 0), map[string]string{}
	manager = r.signIn(r.manager)
	form := r.openForm(manager, "/sites/KILN-LANE/panels/new")
	form.Set("name", "LP-2")
	form.Set("location", "Corridor")
	if res := r.submit(manager, "/sites/KILN-LANE/panels", form.Encode()); res.status != http.StatusSeeOther {
		t.Fatalf("panel: got %d %s", res.status, res.body)
	}
	panel := form.Get("subject")
	form = r.openForm(manager, "/sites/KILN-LANE/circuits/new?panel="+panel)
	for name, value := range map[string]string{"numbers": "14", "breaker_a": "30", "conductor": "12 AWG", "voltage_v": "120", "poles": "1", "feeds": "Kitchen"} {
		form.Set(name, value)
	}
	circuit = form.Get("subject")
	if res := r.submit(manager, "/sites/KILN-LANE/circuits", form.Encode()); res.status != http.StatusSeeOther {
		t.Fatalf("circuit: got %d %s", res.status, res.body)
	}
	for _, d := range [][2]string{{"Pantry, by the sink", forms.GFCIReceptacle}, {"Pantry, door", forms.ProtectedReceptacle}, {"Nurses' room", forms.ProtectedReceptacle}, {"Hall, north", forms.GFCIReceptacle}} {
		id, place := newID(), newID()
		device[d[0]] = id
		load := map[string]any{"name": d[0], "room": "Kitchen"}
		if d[0] == "Nurses' room" {
			load["critical_load"] = "Vaccine refrigerator"
		}
		r.append(store.Draft{Kind: "place.registered", Log: r.site, Subject: place, By: r.manager.ID, Body: map[string]any{"set": load}},
			store.Draft{Kind: "device.registered", Log: r.site, Subject: id, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"kind": d[1], "place": place, "circuit": circuit, "rating_a": 20}}})
	}
	return r, manager, circuit, device
}

// order sends the order form of a circuit with some fields changed.
func (r *rig) order(client *http.Client, circuit string, change map[string]string) answer {
	r.t.Helper()
	form := r.openForm(client, "/circuits/"+circuit+"/order")
	for name, value := range change {
		form.Set(name, value)
	}
	return r.submit(client, "/circuits/"+circuit+"/order", form.Encode())
}

func TestCircuit_DrawnToldAndHeldAgainstItsNameplate(t *testing.T) {
	r, manager, circuit, device := circuitRig(t)
	res := r.order(manager, circuit, map[string]string{"fed." + device["Pantry, door"]: device["Pantry, by the sink"], "fed." + device["Nurses' room"]: device["Pantry, by the sink"], "at." + device["Hall, north"]: "0.5"})
	if res.status != http.StatusSeeOther {
		t.Fatalf("order: got %d %s", res.status, res.body)
	}
	page := r.open(manager, "/circuits/"+circuit)
	if page.status != http.StatusOK {
		t.Fatalf("got %d", page.status)
	}
	checkPage(t, []byte(page.body), "normal")
	// NEC 240.4(D): 12 AWG is protected at 20 A at most; Table 210.21(B)(3): a 30 A circuit takes 30 A receptacles.
	for _, want := range []string{"LP‑2", "feeds 4 devices.", "This takes the power from: Vaccine refrigerator.", "30 A breaker − 20 A for 12 AWG = 10 A too much", "240.4(E)", "20 A on a 30 A circuit, which takes 30 to 30 A.", "<svg class=\"circuit\"", "LOAD", "class=\"critical\""} {
		if !strings.Contains(page.body, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
	if hall, pantry := strings.Index(page.body, "Hall, north"), strings.LastIndex(page.body, "Pantry, by the sink</a>"); hall < 0 || hall > pantry {
		t.Errorf("the order along the circuit was not kept: hall at %d, pantry at %d", hall, pantry)
	}
	directory := r.open(manager, "/sites/KILN-LANE/circuits")
	checkPage(t, []byte(directory.body), "normal")
	if !strings.Contains(directory.body, "Hall, north</a> · <a") || !strings.Contains(directory.body, "Breaker and conductor") {
		t.Errorf("the directory lacks the devices in order, or the flag")
	}
	one := r.open(manager, "/devices/"+device["Pantry, by the sink"])
	for _, want := range []string{"TEST here takes the power from 2 other outlets.", "Vaccine refrigerator", "/circuits/" + circuit} {
		if !strings.Contains(one.body, want) {
			t.Errorf("the device's page does not say %q", want)
		}
	}
}

func TestCircuit_ARingIsRefusedHereAndLeftOutWhereItCame(t *testing.T) {
	r, manager, circuit, device := circuitRig(t)
	pantry, door := device["Pantry, by the sink"], device["Pantry, door"]
	if res := r.order(manager, circuit, map[string]string{"fed." + door: pantry}); res.status != http.StatusSeeOther {
		t.Fatalf("got %d", res.status)
	}
	res := r.order(manager, circuit, map[string]string{"fed." + pantry: door})
	if res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "close a ring") {
		t.Errorf("a ring typed here: got %d", res.status)
	}
	phone := r.enrol(r.manager)
	line := phone.record("device.set", r.site, pantry, set{"set": set{"fed_by": door}})
	if rc := phone.push(line.bytes(t)); rc[0].State != "stored" {
		t.Fatalf("a ring that came by the exchange: got %+v", rc)
	}
	for _, path := range []string{"/circuits/" + circuit, "/sites/KILN-LANE/protection", "/devices/" + pantry} {
		if page := r.open(manager, path); !strings.Contains(page.body, "Pantry, by the sink") || !strings.Contains(page.body, "Pantry, door") || page.status != http.StatusOK {
			t.Errorf("%s does not name both ends of the ring (%d)", path, page.status)
		}
	}
	if page := r.open(manager, "/circuits/"+circuit); !strings.Contains(page.body, "Left out of the map") {
		t.Error("the circuit's page does not show what was left out")
	}
}

func TestProtection_GapsAndTheListBehindThem(t *testing.T) {
	r, manager, _, device := circuitRig(t)
	page := r.open(manager, "/sites/KILN-LANE/protection")
	checkPage(t, []byte(page.body), "normal")
	if !strings.Contains(page.body, "No protection known") || !strings.Contains(page.body, "kitchens (NEC") && !strings.Contains(page.body, "nobody said by what") {
		t.Errorf("got %s", page.body)
	}
	if strings.Count(page.body, "/devices/"+device["Pantry, by the sink"]) > 0 {
		t.Error("an outlet that protects itself is listed")
	}
	form := r.openForm(manager, "/sites/KILN-LANE/usual-places")
	keep := url.Values{}
	for name, values := range form {
		if !strings.HasPrefix(name, "on.") {
			keep[name] = values
		}
	}
	res := r.submit(manager, "/sites/KILN-LANE/usual-places", keep.Encode())
	if res.status != http.StatusUnprocessableEntity {
		t.Errorf("without a reason: got %d", res.status)
	}
	keep.Set("reason", "insurer asks for less")
	if res := r.submit(manager, "/sites/KILN-LANE/usual-places", keep.Encode()); res.status != http.StatusSeeOther {
		t.Fatalf("got %d %s", res.status, res.body)
	}
	if page := r.open(manager, "/sites/KILN-LANE/protection"); !strings.Contains(page.body, "This site&#39;s own list looks for: .") {
		t.Errorf("got %s", page.body)
	}
	back := r.openForm(manager, "/sites/KILN-LANE/usual-places")
	back.Set("follow", "yes")
	back.Set("reason", "agreed with the insurer")
	if res := r.submit(manager, "/sites/KILN-LANE/usual-places", back.Encode()); res.status != http.StatusSeeOther {
		t.Fatalf("back to the organisation's: got %d %s", res.status, res.body)
	}
	if page := r.open(manager, "/sites/KILN-LANE/protection"); strings.Contains(page.body, "own list looks for") {
		t.Error("the site's own list still stands")
	}
	if form := r.openForm(manager, "/sites/KILN-LANE/usual-places"); form.Has("follow") || form.Get("on.kitchen") != "yes" {
		t.Errorf("gone back, the form is of the organisation's list: %v", form)
	}
	wantIn(t, r.open(manager, "/set-up").body, "/usual-places")
	crew := r.signIn(r.person("Crew 9", "crew", r.site))
	if page := r.open(crew, "/sites/KILN-LANE/protection"); page.status != http.StatusOK || strings.Contains(page.body, "usual-places") {
		t.Errorf("crew: got %d, or a way to change the list", page.status)
	}
	if res := r.open(crew, "/usual-places"); res.status != http.StatusForbidden {
		t.Errorf("crew may open the list's form: %d", res.status)
	}
}

// What somebody found when a protector was tripped stands beside the map, with who and when; what the map cannot explain stands first.
func TestCircuit_ShowsWhatWasFoundAgainstTheMap(t *testing.T) {
	r, manager, circuit, device := circuitRig(t)
	pantry, door, nurses := device["Pantry, by the sink"], device["Pantry, door"], device["Nurses' room"]
	if res := r.order(manager, circuit, map[string]string{"fed." + door: pantry}); res.status != http.StatusSeeOther {
		t.Fatalf("got %d", res.status)
	}
	h := r.handset(r.crew)
	found := func(id, dead string) {
		h.push(h.record("entry.made", r.site, id, set{"form": "protected-receptacle/receptacle", "given": set{"kind": "protected-receptacle"}, "readings": set{"load_dead_when_tripped": dead}, "source": "phone", "read_by": r.crew.ID}).bytes(t))
	}
	found(door, "yes")
	page := r.open(manager, "/circuits/"+circuit).body
	wantIn(t, page, "Went dark with its protector, ", "seen by "+r.crew.Name)
	if strings.Contains(page, "otherwise than the map") {
		t.Error("what agrees with the map is called a difference")
	}
	found(door, "no")
	found(nurses, "yes")
	page = r.open(manager, "/circuits/"+circuit).body
	checkPage(t, []byte(page), "normal")
	wantIn(t, page, "Found otherwise than the map says", "Still live while its protector was tripped", "The map has it behind Pantry, by the sink", "The map shows nothing ahead of it that trips")
	// A sweep that opens a defect instead of a failing test says the same.
	opened := h.record("defect.opened", r.site, newID(), set{"device": device["Nurses' room"], "cause": "protection-lost", "protector": pantry, "text": "stayed live", "severity": "unsafe"})
	if res := r.order(manager, circuit, map[string]string{"fed." + nurses: pantry}); res.status != http.StatusSeeOther {
		t.Fatalf("got %d", res.status)
	}
	h.push(opened.bytes(t))
	if page := r.open(manager, "/circuits/"+circuit).body; strings.Count(page, "The map has it behind") != 4 { // both, above and in the words of the drawing
		t.Errorf("got %d", strings.Count(page, "The map has it behind"))
	}
}

// A source on another circuit of the site is found by what is typed, and the page says that the two circuits differ.
func TestDevice_HangsOnADeviceOfAnotherCircuit(t *testing.T) {
	r, manager, _, device := circuitRig(t)
	far, place := newID(), newID()
	r.append(store.Draft{Kind: "circuit.set", Log: r.site, Subject: newID(), Body: set{"set": set{"panel": "LP-9", "numbers": "3"}}})
	r.append(store.Draft{Kind: "place.registered", Log: r.site, Subject: place, Body: set{"set": set{"name": "Cellar, by the pump"}}},
		store.Draft{Kind: "device.registered", Log: r.site, Subject: far, Body: set{"set": set{"kind": forms.GFCIReceptacle, "place": place}}})
	edit := "/devices/" + device["Pantry, door"] + "/edit"
	for typed, want := range map[string]string{"nowhere": "No device of this site answers", "Pantry": "devices answer to that"} {
		if typed == "Pantry" {
			typed = "Kitchen"
		}
		if res := r.submit(manager, edit, setAll(r.openForm(manager, edit), "fed_find", typed).Encode()); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, want) {
			t.Errorf("%q: got %d", typed, res.status)
		}
	}
	r.wantTo(manager, edit, setAll(r.openForm(manager, edit), "fed_find", "cellar pump"))
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		d, err := v.Device(device["Pantry, door"], 0)
		if d.Fields["fed_by"] != far {
			t.Errorf("got %v", d.Fields["fed_by"])
		}
		return err
	}))
	if form := r.openForm(manager, edit); form.Get("fed_by") != far {
		t.Errorf("the form does not show the source it has: %v", form.Get("fed_by"))
	}
	// The far one hung on the near one would close a ring over two circuits.
	ring := "/devices/" + far + "/edit"
	if res := r.submit(manager, ring, setAll(r.openForm(manager, ring), "fed_find", "Pantry, door").Encode()); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "close a ring") {
		t.Errorf("a ring over two circuits: got %d", res.status)
	}
}
