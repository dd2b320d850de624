package server

import (
	"net/http"
	"net/url"
	"strings"
	"testing"

	"tripwell/forms"
	"tripwell/store"
)

// A manager adds checks of three types to a form. What cannot be meant comes back with what was typed; what can is
// previewed, accepted, asked on the phone, judged, and shown under its own name wherever the entry is.
func TestFormsEdit_ChecksOfOnesOwn(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	const path = "/forms/gfci-receptacle/instrument/edit"
	add := func(pairs ...string) {
		t.Helper()
		res := r.submit(b, path, setAll(r.openForm(b, path), append([]string{"reason", "House rules"}, pairs...)...).Encode())
		if res.status != http.StatusOK || !strings.Contains(res.body, `action="/revisions"`) {
			t.Fatalf("got %d, want a preview: %s", res.status, messagesOf(res.body))
		}
		checkPage(t, []byte(res.body), "normal")
		r.wantTo(b, "/revisions", fieldsOf(t, res.body))
	}
	nonsense := func(field string, pairs ...string) {
		t.Helper()
		r.wantBack(b, path, setAll(r.openForm(b, path), append([]string{"reason", "House rules"}, pairs...)...), field)
	}
	nonsense("reason", "reason", "", "check.name", "Cover plate whole?")
	nonsense("check.options", "check.name", "Colour of the wall", "check.type", "choice", "check.options", "white")
	nonsense("check.min", "check.name", "Torque of the screws", "check.type", "number", "check.min", "1,234")
	// Least above most is found by the rules' own check, over the form, with everything typed still there.
	upside := setAll(r.openForm(b, path), "reason", "House rules", "check.name", "Torque of the screws", "check.type", "number", "check.min", "3", "check.max", "1")
	if res := r.submit(b, path, upside.Encode()); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "Torque of the screws") || !strings.Contains(res.body, "above the most") {
		t.Errorf("least above most: got %d %s", res.status, messagesOf(res.body))
	}
	add("check.name", "Torque of the screws", "check.type", "number", "check.min", "1.2", "check.max", "1.8", "check.need", "required", "check.level", forms.Must, "check.text", "Tighten the screws.")
	add("check.name", "Cover plate whole?", "check.type", "yes-no", "check.need", "optional")
	add("check.name", "Colour of the wall", "check.type", "choice", "check.options", "white, grey", "check.need", "expected")
	page := r.open(b, "/forms/gfci-receptacle/instrument").body
	for _, name := range []string{"Torque of the screws", "Cover plate whole?", "Colour of the wall", "white"} {
		if !strings.Contains(page, name) {
			t.Errorf("the form's page lacks %q", name)
		}
	}
	h := r.enrol(r.manager)
	snapshot := r.do(h.client, h.request(http.MethodGet, "/exchange/snapshot?log="+url.QueryEscape(r.site), nil)).body
	if !strings.Contains(snapshot, "Torque of the screws") || !strings.Contains(snapshot, "check-nu-1") {
		t.Error("the phone's copy lacks the check, or its limit")
	}
	e := h.entry(r.devices[0], 5)
	body := entryBody(5)
	body["given"].(set)["form_rev"] = 4
	body["readings"].(set)["own_number_1"] = set{"typed": "2.5", "unit": "", "value": 2.5}
	body["readings"].(set)["own_yes_no_1"] = set{"value": "no"}
	e.Body = body
	if res := h.send("/exchange/push", pushBody(t, e.bytes(t))); res.status != http.StatusOK || !strings.Contains(res.body, `"stored"`) {
		t.Fatal(res.status, res.body)
	}
	shown := r.open(b, "/entries/"+e.ID).body
	for _, want := range []string{"Torque of the screws", "Tighten the screws.", "Cover plate whole?", "1.2 to 1.8"} {
		if !strings.Contains(shown, want) {
			t.Errorf("the entry's page lacks %q", want)
		}
	}
	if _, readings, ok := strings.Cut(shown, `class="readings"`); !ok || strings.Contains(readings, "Own check 1") {
		t.Error("the entry's page names a check by its number")
	}
	ownNamesEverywhere(t, r, b, e.ID)
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		made, err := v.Entry(e.ID)
		if err == nil && made.Verdict.Result != forms.Fail {
			t.Errorf("2.5 against 1.2 to 1.8: %s", made.Verdict.Result)
		}
		return err
	}))
}

// ownNamesEverywhere looks wherever a failed check of the organisation's own is told of.
func ownNamesEverywhere(t *testing.T, r *rig, b *http.Client, entry string) {
	t.Helper()
	var defect string
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		list, err := v.Defects(store.DefectAsk{})
		for _, d := range list {
			if forms.IsOwn(d.Cause) {
				defect = d.ID
			}
		}
		return err
	}))
	if defect == "" {
		t.Fatal("2.5 against 1.2 to 1.8 began no defect")
	}
	for _, path := range []string{"/defects", "/defects/" + defect, "/devices/" + r.devices[0], "/entries/" + entry + "/correct", "/limits/us-class-a", "/limits/us-class-a/edit", "/", "/table?sheet=readings&as=csv", "/table?sheet=limits&as=csv"} {
		page := r.open(b, path)
		if page.status != http.StatusOK || !strings.Contains(page.body, "Torque of the screws") {
			t.Errorf("%s: %d, lacks the check's name", path, page.status)
		}
		if strings.Contains(page.body, "Own check") {
			t.Errorf("%s names a check by its number", path)
		}
	}
	correct := "/entries/" + entry + "/correct"
	form := r.open(b, correct).body
	for _, answer := range []string{`value="white"`, `value="grey"`} {
		if !strings.Contains(form, answer) {
			t.Errorf("a correction offers no %s for a choice of the organisation's own", answer)
		}
	}
	r.wantTo(b, correct, setAll(r.openForm(b, correct), "reason", "Read again", "reading.own_choice_1", "grey"))
	if shown := r.open(b, "/entries/"+entry).body; !strings.Contains(shown, "Colour of the wall") || !strings.Contains(shown, "grey") {
		t.Error("the corrected choice of the organisation's own is not shown under its name")
	}
}
