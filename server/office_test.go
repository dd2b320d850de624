package server

import (
	"net/http"
	"net/url"
	"strings"
	"testing"

	"golang.org/x/net/html"

	"tripwell/store"
	"tripwell/store/record"
)

// openForm opens a page with a form and gives its fields as the browser would send them.
func (r *rig) openForm(client *http.Client, path string) url.Values {
	r.t.Helper()
	res := r.open(client, path)
	if res.status != http.StatusOK {
		r.t.Fatalf("%s: got %d %s", path, res.status, res.body)
	}
	checkPage(r.t, []byte(res.body), "normal")
	return fieldsOf(r.t, res.body)
}

func fieldsOf(t testing.TB, page string) url.Values {
	t.Helper()
	doc, err := html.Parse(strings.NewReader(page))
	must(t, err)
	values := url.Values{}
	for n := range doc.Descendants() {
		if n.Type != html.ElementNode {
			continue
		}
		attrs := map[string]string{}
		for _, a := range n.Attr {
			attrs[a.Key] = a.Val
		}
		_, checked := attrs["checked"]
		switch n.Data {
		case "input":
			if attrs["name"] != "" && (attrs["type"] != "checkbox" || checked) {
				values.Add(attrs["name"], attrs["value"])
			}
		case "textarea":
			if attrs["name"] != "" {
				values.Add(attrs["name"], text(n))
			}
		case "select":
			for o := range n.Descendants() {
				if o.Type != html.ElementNode || o.Data != "option" {
					continue
				}
				for _, a := range o.Attr {
					if a.Key == "selected" {
						values.Set(attrs["name"], attrOf(o, "value"))
					}
				}
			}
		}
	}
	return values
}

func attrOf(n *html.Node, key string) string {
	for _, a := range n.Attr {
		if a.Key == key {
			return a.Val
		}
	}
	return ""
}

func setAll(values url.Values, pairs ...string) url.Values {
	for i := 0; i+1 < len(pairs); i += 2 {
		values.Set(pairs[i], pairs[i+1])
	}
	return values
}

// wantTo submits a form and wants it taken; it gives where it leads.
func (r *rig) wantTo(client *http.Client, path string, values url.Values) string {
	r.t.Helper()
	res := r.submit(client, path, values.Encode())
	if res.status != http.StatusSeeOther {
		r.t.Fatalf("%s: got %d, want 303: %s", path, res.status, messagesOf(res.body))
	}
	return res.header.Get("Location")
}

// wantBack submits a form and wants it back with a message at a field and with what was typed.
func (r *rig) wantBack(client *http.Client, path string, values url.Values, field string) string {
	r.t.Helper()
	res := r.submit(client, path, values.Encode())
	if res.status != http.StatusUnprocessableEntity {
		r.t.Fatalf("%s: got %d, want 422", path, res.status)
	}
	checkPage(r.t, []byte(res.body), "normal")
	if !strings.Contains(res.body, `href="#f-`+field+`"`) {
		r.t.Errorf("%s: no message leads to the field %s: %s", path, field, messagesOf(res.body))
	}
	back := fieldsOf(r.t, res.body)
	for name := range values {
		if strings.HasPrefix(name, wasPrefix) || values.Get(name) == "" {
			continue
		}
		if got, want := strings.TrimSpace(back.Get(name)), strings.TrimSpace(values.Get(name)); got != want {
			r.t.Errorf("%s: %s came back as %q, want what was typed, %q", path, name, got, want)
		}
	}
	return res.body
}

func messagesOf(page string) string {
	_, after, _ := strings.Cut(page, `class="wrongs"`)
	before, _, _ := strings.Cut(after, "</section>")
	return before
}

func (r *rig) devicesOf(site string) (out []store.DeviceRow) {
	r.t.Helper()
	must(r.t, r.store.View(store.Scope{All: true, Role: "manager"}, func(v *store.View) error {
		for d, err := range v.Devices(site) {
			if err != nil {
				return err
			}
			out = append(out, d)
		}
		return nil
	}))
	return out
}

func TestOffice_EveryRoleReadsItsPages(t *testing.T) {
	r := newRig(t, 6)
	h := r.enrol(r.crew)
	passed, failed := h.entry(r.devices[0], 5.1), h.entry(r.devices[1], 19)
	h.push(passed.bytes(t), failed.bytes(t))
	pages := []string{"/", "/sites", "/sites/KILN-LANE", "/sites/KILN-LANE?state=failed&q=outlet", "/devices/" + r.devices[1], "/devices/" + r.devices[5], "/entries/" + failed.ID, "/dates", "/dates?site=KILN-LANE&within=all&on=2027-12-31", "/dates?on=31.12.", "/set-up", "/limits/us-class-a"}
	for role, p := range map[string]store.Person{"manager": r.manager, "crew": r.crew, "auditor": r.auditor} {
		b := r.signIn(p)
		for _, path := range pages {
			res := r.open(b, path)
			if res.status != http.StatusOK {
				t.Errorf("%s as %s: got %d", path, role, res.status)
			}
			checkPage(t, []byte(res.body), "normal")
			if role != "manager" && (strings.Contains(res.body, "/edit") || strings.Contains(res.body, "/new") || strings.Contains(res.body, "/correct") || strings.Contains(res.body, `href="/people"`)) {
				t.Errorf("%s shows %s a way to change something", path, role)
			}
		}
		for path, who := range map[string]string{"/downloads": "manager auditor", "/people": "manager", "/sites/new": "manager", "/devices/" + r.devices[0] + "/edit": "manager"} {
			want := http.StatusForbidden
			if strings.Contains(who, role) {
				want = http.StatusOK
			}
			if res := r.open(b, path); res.status != want {
				t.Errorf("%s as %s: got %d, want %d", path, role, res.status, want)
			}
		}
		if raw := r.open(b, "/records/"+failed.ID); raw.body != failed.bytes(t) || !strings.HasPrefix(raw.header.Get("Content-Type"), "text/plain") {
			t.Errorf("the record as %s: got %q, want the bytes the phone sent", role, raw.body)
		}
	}
	b := r.signIn(r.manager)
	if first := r.open(b, "/"); !strings.Contains(first.body, "1 failed, still in use for") || !strings.Contains(first.body, "Outlet 2") {
		t.Error("the overview does not begin with the failed device")
	}
	entry := r.open(b, "/entries/"+failed.ID).body
	// UL 943 Class A: the device must trip between 4 and 6 mA.
	for _, want := range []string{"19" + thin + "mA", "4 to 6" + thin + "mA", "UL 943", `class="mark fail"`, failed.ID} {
		if !strings.Contains(entry, want) {
			t.Errorf("the entry's page does not show %q", want)
		}
	}
}

func TestSiteForm_TwiceMakesOneSite(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	form := setAll(r.openForm(b, "/sites/new"), "name", "Ottermoor <b>Swim</b> Hall", "code", "otter", "zone", "Europe/Nowhere", "address", "1 Pool Row")
	if body := r.wantBack(b, "/sites", form, "zone"); strings.Contains(body, "<b>Swim") {
		t.Error("typed markup came back as markup")
	}
	form.Set("zone", "America/New_York")
	form.Set("code", "TOO LONG A CODE")
	r.wantBack(b, "/sites", form, "code")
	form.Set("code", "otter")
	for range 2 {
		if to := r.wantTo(b, "/sites", form); to != "/sites/OTTER" {
			t.Errorf("got %s, want the new site", to)
		}
	}
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		sites, err := v.Sites()
		if len(sites) != 2 {
			t.Errorf("got %d sites, want 2", len(sites))
		}
		return err
	}))
	edit := setAll(r.openForm(b, "/sites/OTTER/edit"), "address", "2 Pool Row")
	r.wantTo(b, "/sites/OTTER/edit", edit)
	if page := r.open(b, "/sites/OTTER"); !strings.Contains(page.body, "2 Pool Row") || !strings.Contains(page.body, "America/New_York") {
		t.Error("the edited address is not on the site's page, or the zone was lost")
	}
}

func TestDeviceForm_RegisterEditRetireReplace(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	form := setAll(r.openForm(b, "/sites/KILN-LANE/devices/new"), "room", "Kitchen", "rating_a", "twenty", "kind", "gfci-receptacle", "panel", "LP-2", "mint", "yes")
	body := r.wantBack(b, "/sites/KILN-LANE/devices", form, "rating_a")
	for _, field := range []string{"name", "circuit"} {
		if !strings.Contains(body, `href="#f-`+field+`"`) {
			t.Errorf("no message at %s", field)
		}
	}
	setAll(form, "name", "Pantry, by the sink", "rating_a", "20", "circuit", "14", "breaker_a", "20")
	first, second := r.wantTo(b, "/sites/KILN-LANE/devices", form), r.wantTo(b, "/sites/KILN-LANE/devices", form)
	rows := r.devicesOf(r.site)
	if len(rows) != 1 || first != second || !record.IsTag(rows[0].Tag) || rows[0].Panel != "LP-2" || rows[0].Circuit != "14" || rows[0].RatingA != 20 {
		t.Fatalf("got %+v after the form was sent twice, want one device with a tag on LP-2 / 14", rows)
	}
	path, tag := "/devices/"+rows[0].ID, rows[0].Tag
	other := setAll(r.openForm(b, "/sites/KILN-LANE/devices/new"), "name", "Pantry, door", "panel", "lp-2", "circuit", "14", "tag", "AAAAAAB")
	r.wantBack(b, "/sites/KILN-LANE/devices", other, "tag")
	r.wantTo(b, "/sites/KILN-LANE/devices", setAll(other, "tag", ""))
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		circuits, err := v.Circuits(r.site)
		if len(circuits) != 1 {
			t.Errorf("got %d circuits, want the two devices on one", len(circuits))
		}
		return err
	}))
	for _, q := range []string{tag, strings.ToLower(record.ShowTag(tag)), "lp-2/14 sink", "pantry sink"} {
		if page := r.open(b, "/sites/KILN-LANE?q="+url.QueryEscape(q)); !strings.Contains(page.body, path) {
			t.Errorf("%q does not find the device", q)
		}
	}

	// Two pages are open; each sets only what its reader changed, and the later one is told of the earlier.
	one, two := r.openForm(b, path+"/edit"), r.openForm(b, path+"/edit")
	r.wantTo(b, path+"/edit", setAll(one, "make", "Make A", "note", "first"))
	body = r.wantBack(b, path+"/edit", setAll(two, "model", "M-2", "note", "second"), "note")
	if again := fieldsOf(t, body); again.Get("note") != "second" {
		t.Errorf("got note %q, want the typed one", again.Get("note"))
	} else {
		r.wantTo(b, path+"/edit", again)
	}
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		d, err := v.Device(rows[0].ID, 20000)
		if d.Fields["make"] != "Make A" || d.Fields["model"] != "M-2" || d.Fields["note"] != "second" {
			t.Errorf("got fields %v, want both readers' changes", d.Fields)
		}
		return err
	}))

	retire := r.openForm(b, path+"/retire")
	r.wantBack(b, path+"/retire", retire, "reason")
	r.wantTo(b, path+"/retire", setAll(retire, "reason", "cracked face"))
	next := r.openForm(b, "/sites/KILN-LANE/devices/new?after="+rows[0].ID)
	if next.Get("name") != "Pantry, by the sink" || next.Get("circuit") != "14" {
		t.Errorf("got %v, want the place and circuit of the retired device", next)
	}
	successor := r.wantTo(b, "/sites/KILN-LANE/devices", next)
	page := r.open(b, successor).body
	if !strings.Contains(page, path) || !strings.Contains(page, strings.ReplaceAll(record.ShowTag(tag), "-", hyphen)) {
		t.Error("the new device's page lacks the earlier device of its place, or the place's tag")
	}
}

func TestInstrumentForm_TwiceMakesOne(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	form := setAll(r.openForm(b, "/instruments/new"), "name", "Instrument B", "serial", "0042", "calibration_due", "2026-11-27", "percent.trip_time_ms", "2", "plus.trip_time_ms", "1", "ramp_step", "0,5")
	r.wantBack(b, "/instruments", form, "ramp_dwell")
	setAll(form, "ramp_dwell", "200")
	for range 2 {
		r.wantTo(b, "/instruments", form)
	}
	var found []store.Instrument
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) (err error) {
		found, err = v.Instruments()
		return err
	}))
	if len(found) != 1 || found[0].Ramp == nil || found[0].Ramp.StepMA != 0.5 || found[0].Accuracy["trip_time_ms"].Percent != 2 {
		t.Fatalf("got %+v, want one instrument with its accuracy and ramp", found)
	}
	edit := setAll(r.openForm(b, "/instruments/"+found[0].ID), "retired", "yes")
	r.wantTo(b, "/instruments/"+found[0].ID, edit)
	if page := r.open(b, "/set-up"); !strings.Contains(page.body, "No longer in use") {
		t.Error("the set-up page does not say that the instrument is no longer in use")
	}
}

func TestPersonForm_LinkSignsInOnce(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	form := setAll(r.openForm(b, "/people/new"), "name", "Crew 7", "role", "crew")
	r.wantBack(b, "/people", form, "sites")
	form.Set("sites", r.site)
	res := r.submit(b, "/people", form.Encode())
	checkPage(t, []byte(res.body), "normal")
	_, after, found := strings.Cut(res.body, r.url+"/in/")
	if res.status != http.StatusOK || !found {
		t.Fatalf("got %d, want a page with the link", res.status)
	}
	token, _, _ := strings.Cut(after, "<")
	phone := browser(t)
	if res := r.submit(phone, "/in/"+token, ""); res.status != http.StatusSeeOther {
		t.Errorf("the link: got %d, want 303", res.status)
	}
	if res := r.open(phone, "/sites/KILN-LANE"); res.status != http.StatusOK {
		t.Errorf("the new person's site: got %d", res.status)
	}
	if people := r.open(b, "/people"); strings.Contains(people.body, "/in/") || !strings.Contains(people.body, "Crew 7") {
		t.Error("the list of people lacks the new one, or shows a link again")
	}
	r.submit(b, "/people", form.Encode())
	people, err := r.store.People()
	must(t, err)
	n := 0
	for _, p := range people {
		if p.Name == "Crew 7" {
			n++
		}
	}
	if n != 1 {
		t.Errorf("got %d people after the form was sent twice, want 1", n)
	}
	own := setAll(r.openForm(b, "/people/"+r.manager.ID+"/edit"), "role", "auditor")
	r.wantBack(b, "/people/"+r.manager.ID, own, "role")
}

func TestCorrectForm_KeepsTheFirstVersion(t *testing.T) {
	r := newRig(t, 1)
	h := r.enrol(r.crew)
	entry := h.entry(r.devices[0], 51)
	h.push(entry.bytes(t))
	b := r.signIn(r.manager)
	path := "/entries/" + entry.ID + "/correct"
	form := r.openForm(b, path)
	r.wantBack(b, path, setAll(form, "reading.trip_current_ma", "5,1"), "reason")
	setAll(form, "reason", "typed without its point")
	for range 2 {
		r.wantTo(b, path, form)
	}
	page := r.open(b, "/entries/"+entry.ID).body
	checkPage(t, []byte(page), "normal")
	for _, want := range []string{"51" + thin + "mA", "5.1" + thin + "mA", "typed without its point", "in force"} {
		if !strings.Contains(page, want) {
			t.Errorf("the entry's page lacks %q", want)
		}
	}
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		e, err := v.Entry(entry.ID)
		if len(e.Corrections) != 1 || e.Verdict.Result != "pass" || e.Body.Readings["trip_time_ms"].Typed != "24" {
			t.Errorf("got %d corrections and %s, want one, a pass, and the other readings as they were", len(e.Corrections), e.Verdict.Result)
		}
		return err
	}))
}
