package store

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

func TestCode_SignsInOnceWithinTenMinutes(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	typed, err := r.NewCode(r.manager.ID)
	if err != nil {
		t.Fatal(err)
	}
	bare := strings.ReplaceAll(typed, "-", "")
	if _, err := r.LinkPerson(bare); code(err) != "not_found" {
		t.Errorf("a code opened as a link: got %v, want not_found", err)
	}
	if _, err := r.SpendLink(ctx, bare, Arrival{}); code(err) != "not_found" {
		t.Errorf("a code spent as a link: got %v, want not_found", err)
	}
	session, err := r.SpendCode(ctx, " "+strings.ToLower(typed)+" ", Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	if p, err := r.Session(session); err != nil || p.ID != r.manager.ID {
		t.Errorf("got %+v %v", p, err)
	}
	if _, err := r.SpendCode(ctx, typed, Arrival{}); code(err) != "not_found" {
		t.Errorf("typed twice: got %v, want not_found", err)
	}
	first, _ := r.NewCode(r.manager.ID)
	second, err := r.NewCode(r.manager.ID)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := r.SpendCode(ctx, first, Arrival{}); code(err) != "not_found" {
		t.Errorf("the code before the last: got %v, want not_found", err)
	}
	r.pass(10 * time.Minute)
	if _, err := r.SpendCode(ctx, second, Arrival{}); code(err) != "not_found" {
		t.Errorf("after ten minutes: got %v, want not_found", err)
	}
	file, err := os.ReadFile(filepath.Join(r.dir, BookFile))
	if err != nil || bytes.Contains(file, []byte(bare)) {
		t.Errorf("the code stands in the file (%v)", err)
	}
}

func TestBareCode(t *testing.T) {
	for typed, want := range map[string]string{"k7qm-2p3h": "K7QM2P3H", " K7QM 2P3H ": "K7QM2P3H", "KIQM-LP3O": "K1QM1P30", "K7QM-2P3": "", "K7QM-2P3HH": "", "K7QM-2P3U": "", "": "", "https://a/": "", "ǅǅǅǅǅǅǅǅ": ""} {
		if got := BareCode(typed); got != want {
			t.Errorf("%q: got %q, want %q", typed, got, want)
		}
	}
}
