package server

import (
	"bytes"
	"encoding/json"
	"io/fs"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"tripwell/store"
)

func TestPrivacy_EverybodySeesTheirOwn(t *testing.T) {
	r := newRig(t, 1)
	for _, p := range []store.Person{r.crew, r.manager} {
		b := r.signIn(p)
		page := r.open(b, "/privacy")
		if page.status != http.StatusOK || !strings.Contains(page.body, p.Name) || !strings.Contains(page.body, p.ID) || !strings.Contains(page.body, "As long as the store") {
			t.Errorf("%s: %d %s", p.Name, page.status, page.body)
		}
		if has := strings.Contains(page.body, "/remove"); has != (p.Role == "manager") {
			t.Errorf("%s may remove people: %v", p.Name, has)
		}
		var about aboutPerson
		got := r.open(b, "/privacy/data.json")
		must(t, json.Unmarshal([]byte(got.body), &about))
		if about.ID != p.ID || about.Name != p.Name || len(about.Sessions) != 1 || len(about.SignIns) != 1 || about.Password != nil {
			t.Errorf("%s: %+v", p.Name, about)
		}
		if !strings.HasPrefix(got.header.Get("Content-Disposition"), "attachment") {
			t.Errorf("it is no file: %v", got.header)
		}
		for _, other := range []store.Person{r.crew, r.manager} {
			if other.ID != p.ID && strings.Contains(got.body, other.ID) {
				t.Errorf("%s sees %s", p.Name, other.Name)
			}
		}
	}
}

func TestPersonRemove_FromThePageToTheFile(t *testing.T) {
	r := newRig(t, 1)
	const name = "Ambrosia Quillfeather"
	leaver := r.person(name, "crew", r.site)
	phone := r.enrol(leaver)
	if got := phone.push(phone.entry(r.devices[0], 5).bytes(t)); got[0].State != "stored" {
		t.Fatalf("%+v", got)
	}
	b := r.signIn(r.manager)
	if page := r.open(b, "/people/"+leaver.ID+"/remove"); !strings.Contains(page.body, name) {
		t.Fatalf("%d %s", page.status, page.body)
	}
	if got := r.submit(b, "/people/"+leaver.ID+"/remove", ""); got.status != http.StatusSeeOther {
		t.Fatalf("%d %s", got.status, got.body)
	}
	page := r.open(b, "/entries/"+r.entries()[0].ID)
	if !strings.Contains(page.body, "a former member ("+leaver.ID[:8]+")") || strings.Contains(page.body, name) {
		t.Errorf("the page of their test: %s", page.body)
	}
	must(t, filepath.WalkDir(r.store.Dir(), func(path string, d fs.DirEntry, err error) error {
		if err != nil || !d.Type().IsRegular() {
			return err
		}
		raw, err := os.ReadFile(path)
		if bytes.Contains(raw, []byte("Quillfeather")) {
			t.Errorf("%s still holds the name", d.Name())
		}
		return err
	}))
	if got := r.open(r.signIn(r.crew), "/people/"+leaver.ID+"/remove"); got.status != http.StatusForbidden {
		t.Errorf("crew: got %d, want 403", got.status)
	}
}
