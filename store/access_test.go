package store

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"testing"
	"time"
)

func TestLink_SignsInOnce(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	token, err := r.NewLink(r.manager.ID, time.Hour)
	if err != nil {
		t.Fatal(err)
	}
	for range 2 { // looking does not spend
		if p, err := r.LinkPerson(token); err != nil || p.ID != r.manager.ID {
			t.Fatalf("got %+v %v", p, err)
		}
	}
	session, err := r.SpendLink(ctx, token, Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := r.SpendLink(ctx, token, Arrival{}); code(err) != "not_found" {
		t.Errorf("spent twice: got %v, want not_found", err)
	}
	if p, err := r.Session(session); err != nil || p.ID != r.manager.ID {
		t.Errorf("got %+v %v", p, err)
	}
	late, err := r.NewLink(r.manager.ID, time.Hour)
	if err != nil {
		t.Fatal(err)
	}
	r.pass(time.Hour)
	if _, err := r.SpendLink(ctx, late, Arrival{}); code(err) != "not_found" {
		t.Errorf("too old: got %v, want not_found", err)
	}
	file, err := os.ReadFile(filepath.Join(r.dir, BookFile))
	if err != nil {
		t.Fatal(err)
	}
	for _, secret := range []string{token, session, late} {
		if bytes.Contains(file, []byte(secret)) {
			t.Error("a token stands in the file")
		}
	}
}

func TestSession_EndsIdleAndInAll(t *testing.T) {
	r := newRig(t)
	sign := func() string {
		token, err := r.NewLink(r.manager.ID, time.Hour)
		if err != nil {
			t.Fatal(err)
		}
		session, err := r.SpendLink(context.Background(), token, Arrival{})
		if err != nil {
			t.Fatal(err)
		}
		return session
	}
	idle := sign()
	r.pass(SessionIdle + time.Minute)
	if _, err := r.Session(idle); code(err) != "not_signed_in" {
		t.Errorf("idle: got %v, want not_signed_in", err)
	}
	used := sign()
	for passed := time.Duration(0); passed < SessionLife; passed += 11 * time.Hour {
		if _, err := r.Session(used); err != nil {
			t.Fatalf("after %v of use: %v", passed, err)
		}
		r.pass(11 * time.Hour)
	}
	if _, err := r.Session(used); code(err) != "not_signed_in" {
		t.Errorf("after 14 days: got %v, want not_signed_in", err)
	}
	left := sign()
	if err := r.EndSession(left); err != nil {
		t.Fatal(err)
	}
	if _, err := r.Session(left); code(err) != "not_signed_in" {
		t.Errorf("signed out: got %v, want not_signed_in", err)
	}
	if err := r.EndSession(left); err != nil {
		t.Errorf("signed out twice: %v", err)
	}
}

func TestEnrol_ReplacesTheToken(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	site := r.site("ELM-4")
	crew := r.person("crew", false, site)
	phone := newID(r.clock())
	first, err := r.Enrol(ctx, crew.ID, phone)
	if err != nil {
		t.Fatal(err)
	}
	second, err := r.Enrol(ctx, crew.ID, phone)
	if err != nil {
		t.Fatal(err)
	}
	if _, _, err := r.Bearer(first); code(err) != "not_signed_in" {
		t.Errorf("the first token: got %v, want not_signed_in", err)
	}
	if id, p, err := r.Bearer(second); err != nil || id != phone || p.ID != crew.ID || !p.Scope().May(site) {
		t.Errorf("got %s %+v %v", id, p, err)
	}
	crew.Active = false
	if _, err := r.PutPerson(ctx, r.manager.ID, crew); err != nil {
		t.Fatal(err)
	}
	if _, _, err := r.Bearer(second); code(err) != "not_signed_in" {
		t.Errorf("no longer active: got %v, want not_signed_in", err)
	}
	if _, err := r.NewLink(crew.ID, time.Hour); code(err) != "conflict" {
		t.Errorf("a link for somebody not active: got %v, want conflict", err)
	}
	if _, err := r.Enrol(ctx, r.manager.ID, r.ID()); code(err) != "conflict" {
		t.Errorf("the store's own id: got %v, want conflict", err)
	}
}

func TestPutPerson_TheLastManagerStays(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	m := r.manager
	m.Role = "auditor"
	if _, err := r.PutPerson(ctx, r.manager.ID, m); code(err) != "conflict" {
		t.Errorf("got %v, want conflict", err)
	}
	second := r.person("manager", true)
	if _, err := r.PutPerson(ctx, second.ID, m); err != nil {
		t.Error(err)
	}
	crew := r.person("crew", false)
	if _, err := r.PutPerson(ctx, crew.ID, Person{Name: "Crew 9", Role: "manager", All: true, Active: true}); code(err) != "forbidden" {
		t.Errorf("made by crew: got %v, want forbidden", err)
	}
}

func TestMintTags_NobodyHoldsThemYet(t *testing.T) {
	r := newRig(t)
	seen := map[string]bool{}
	for range 3 {
		tags, err := r.MintTags(context.Background(), r.manager.ID, 400)
		if err != nil {
			t.Fatal(err)
		}
		for _, tag := range tags {
			if seen[tag] {
				t.Fatalf("%s was made twice", tag)
			}
			seen[tag] = true
		}
	}
	if _, err := r.MintTags(context.Background(), r.person("crew", false).ID, 1); code(err) != "forbidden" {
		t.Errorf("by crew: got %v, want forbidden", err)
	}
}
