package store

import (
	"context"
	"errors"
	"testing"
	"time"
)

// A person who was removed is found by name in no file of the store, and the book goes on.
func TestRemovePerson_LeavesNoNameAnywhere(t *testing.T) {
	const name, contact = "Ambrosia Quillfeather", "quillfeather@mail.example"
	r := newRig(t)
	site := r.site("ELM")
	device := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	ctx := context.Background()
	p, err := r.PutPerson(ctx, r.manager.ID, Person{Name: name, Contact: contact, Role: "crew", Sites: []string{site}, Active: true})
	if err != nil {
		t.Fatal(err)
	}
	phone := r.phone(p)
	phone.push(phone.make("entry.made", site, device, button("yes", "yes")))
	link, err := r.NewLink(p.ID, time.Hour)
	if err != nil {
		t.Fatal(err)
	}
	session, err := r.SpendLink(ctx, link, Arrival{How: ByLink, Agent: "Browser of " + name})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := r.NewFeed(ctx, p.ID); err != nil {
		t.Fatal(err)
	}
	if err := r.PutDigest(ctx, Digest{Person: p.ID, Every: "daily", Hour: 6, Zone: "UTC", To: contact}); err != nil {
		t.Fatal(err)
	}
	if files := r.holding(name); len(files) == 0 {
		t.Fatal("the name is nowhere before: the test shows nothing")
	}
	r.look(Scope{Person: p.ID, Role: "crew", Sites: []string{site}}, func(v *View) {
		if times, err := v.SignIns(p.ID); err != nil || len(times) != 1 {
			t.Errorf("own sign-ins %v %v, want one", times, err)
		}
		if _, err := v.SignIns(r.manager.ID); err == nil {
			t.Error("crew sees when a manager signed in")
		}
	})
	if err := r.RemovePerson(ctx, r.manager.ID, p.ID); err != nil {
		t.Fatal(err)
	}
	for _, text := range []string{name, contact, "Ambrosia", "quillfeather"} {
		if files := r.holding(text); len(files) > 0 {
			t.Errorf("%q is still in %v", text, files)
		}
	}
	if _, err := r.Session(session); err == nil {
		t.Error("their session still opens")
	}
	r.look(all, func(v *View) {
		list, err := v.Entries(device)
		if err != nil || len(list) != 1 || list[0].By != p.ID || v.PersonName(p.ID) != "" {
			t.Errorf("the test of the person: %+v %v", list, err)
		}
	})
	if rc := phone.push(phone.make("entry.made", site, device, button("yes", "yes"))); rc[0].State == "" {
		t.Error("what the phone still held got no receipt")
	}
	var e *Error
	if err := r.RemovePerson(ctx, r.manager.ID, r.manager.ID); !errors.As(err, &e) || e.Code != "conflict" {
		t.Errorf("removed themselves: %v", err)
	}
	if err := r.RemovePerson(ctx, r.ID(), r.manager.ID); !errors.As(err, &e) || e.Code != "conflict" {
		t.Errorf("the last manager of all sites: %v", err)
	}
	if err := r.RemovePerson(ctx, r.manager.ID, p.ID); !errors.As(err, &e) || e.Code != "not_found" {
		t.Errorf("removed twice: %v", err)
	}
}
