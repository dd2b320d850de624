package bundle

import (
	"archive/zip"
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tripwell/export/register"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// house is a real store with a register, a crew's phone and a manager.
type house struct {
	*store.Store
	t       testing.TB
	dir     string
	now     time.Time
	site    store.Site
	devices []store.DeviceRow
	crew    store.Person
	manager store.Person
	phone   string
	n       int64
	clock   uint64
	entries []string
}

var everything = store.Scope{Role: "owner", All: true}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func newHouse(t testing.TB) *house {
	t.Helper()
	h := &house{t: t, dir: t.TempDir(), now: time.Date(2026, time.October, 1, 15, 0, 0, 0, time.UTC)}
	s, err := store.Open(h.dir, store.Options{Now: func() time.Time { return h.now }, Create: true})
	must(t, err)
	h.Store = s
	t.Cleanup(func() { s.Close() })
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "register.csv"))
	must(t, err)
	_, err = register.Import(context.Background(), s, "register.csv", bytes.NewReader(raw), register.Options{By: h.ID(), NewTags: true}, nil)
	must(t, err)
	must(t, s.View(everything, func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		h.site = sites[0]
		for d, err := range v.Devices(h.site.ID) {
			if err != nil {
				return err
			}
			h.devices = append(h.devices, d)
		}
		return nil
	}))
	h.crew = h.person("Crew 1", "crew")
	h.manager = h.person("Office 1", "manager")
	h.phone = h.newID("phone")
	_, err = s.Enrol(context.Background(), h.crew.ID, h.phone)
	must(t, err)
	return h
}

func (h *house) newID(parts ...string) string {
	return record.NamedID(append([]string{"test of bundles"}, parts...)...)
}

func (h *house) person(name, role string) store.Person {
	h.t.Helper()
	p := store.Person{Name: name, Role: role, All: true, Active: true}
	if role == "crew" {
		until := forms.DayOf(h.now) + 400
		p.Licence, p.LicenceUntil, p.May = "EL-2207, journeyman", &until, []string{"button", "measure"}
	}
	p, err := h.PutPerson(context.Background(), "", p)
	must(h.t, err)
	return p
}

// push sends one record from the phone; the state of its receipt is answered.
func (h *house) push(id, kind, subject string, body any) string {
	h.t.Helper()
	h.n++
	h.clock = max(uint64(h.now.UnixMilli())<<16, h.clock+1)
	raw, err := json.Marshal(body)
	must(h.t, err)
	line := record.Write(record.Record{ID: id, Kind: kind, V: 1, Log: h.site.ID, Subject: subject, At: h.now, Clock: h.clock, By: h.crew.ID, From: h.phone, N: h.n, Body: raw})
	got, err := h.Push(context.Background(), store.Sender{Installation: h.phone, Sent: h.now}, []store.Incoming{{Record: line}})
	must(h.t, err)
	return got[0].State
}

// press makes a button test of a device.
func (h *house) press(device int, trips string) string {
	h.t.Helper()
	h.now = h.now.Add(time.Minute)
	d := h.devices[device%len(h.devices)]
	id := h.newID("entry", fmt.Sprint(h.n))
	body := map[string]any{"form": d.Kind + "/button", "given": map[string]any{"kind": d.Kind},
		"readings": map[string]any{"condition": "sound", "found": "on", "button_trips": trips, "button_resets": "yes"},
		"shown":    map[string]any{"result": "pass", "judge": forms.JudgeVersion}, "source": "phone"}
	if state := h.push(id, "entry.made", d.ID, body); state != "stored" {
		h.t.Fatalf("a test of %s is %s", d.ID, state)
	}
	h.entries = append(h.entries, id)
	return id
}

// work is some days of a crew: tests, one refused record, a number that never came, and a manager's correction.
func (h *house) work(tests int) {
	h.t.Helper()
	for i := range tests {
		trips := "yes"
		if i%17 == 3 {
			trips = "no"
		}
		h.press(i, trips)
		if i%10 == 9 {
			h.now = h.now.Add(24 * time.Hour)
		}
	}
	if state := h.push(h.newID("bad", fmt.Sprint(h.n)), "entry.made", h.devices[0].ID, map[string]any{"form": 7}); state != "refused" {
		h.t.Fatalf("a record that says nothing is %s", state)
	}
	h.n++ // a number that never comes
	h.press(1, "yes")
	_, err := h.Append(context.Background(), store.Draft{Kind: "entry.corrected", Log: h.site.ID, Subject: h.entries[0], By: h.manager.ID, Body: map[string]any{
		"entry": h.entries[0], "reason": "Pressed the wrong one", "readings": map[string]any{"condition": "sound", "found": "on", "button_trips": "no", "button_resets": "yes"}}})
	must(h.t, err)
}

func (h *house) bundle() []byte {
	h.t.Helper()
	h.now = h.now.Add(time.Hour)
	var out bytes.Buffer
	must(h.t, Write(context.Background(), &out, h.Store, everything, Ask{From: forms.NoDay, To: forms.NoDay, Organisation: "Kiln Lane Buildings"}))
	return out.Bytes()
}

func (h *house) key() string {
	h.t.Helper()
	key, err := h.HeadKey()
	must(h.t, err)
	return key
}

func verify(t testing.TB, b []byte, ask Check) Report {
	t.Helper()
	r, err := Verify(context.Background(), bytes.NewReader(b), int64(len(b)), ask)
	must(t, err)
	return r
}

func (r Report) text() string {
	var b strings.Builder
	for _, f := range r.Findings {
		fmt.Fprintf(&b, "%s: %s\n", f.Where, f.Text)
	}
	return b.String()
}

// unpack gives the files of a bundle.
func unpack(t testing.TB, b []byte) map[string][]byte {
	t.Helper()
	z, err := zip.NewReader(bytes.NewReader(b), int64(len(b)))
	must(t, err)
	files := map[string][]byte{}
	for _, f := range z.File {
		in, err := f.Open()
		must(t, err)
		files[f.Name], err = io.ReadAll(in)
		must(t, err)
		must(t, in.Close())
	}
	return files
}

func pack(t testing.TB, files map[string][]byte) []byte {
	t.Helper()
	var out bytes.Buffer
	z := zip.NewWriter(&out)
	for name, b := range files {
		w, err := z.Create(name)
		must(t, err)
		_, err = w.Write(b)
		must(t, err)
	}
	must(t, z.Close())
	return out.Bytes()
}

// altered gives a bundle in which one file is another.
func altered(t testing.TB, b []byte, name string, change func(old []byte) []byte) []byte {
	t.Helper()
	files := unpack(t, b)
	if files[name] == nil {
		t.Fatalf("the bundle holds no %s", name)
	}
	if files[name] = change(files[name]); files[name] == nil {
		delete(files, name)
	}
	return pack(t, files)
}

// lines changes a file line by line.
func lines(change func(all [][]byte) [][]byte) func(old []byte) []byte {
	return func(old []byte) []byte {
		all := bytes.SplitAfter(old, []byte("\n"))
		return bytes.Join(change(all[:len(all)-1]), nil)
	}
}
