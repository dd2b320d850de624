package server

import (
	"strings"
	"testing"
	"time"

	"tripwell/store"
	"tripwell/store/proof"
)

func TestWitness_AHeadOnceAMonthWhichProvesItself(t *testing.T) {
	p := newPostOffice(t, "", "", false)
	b := newBureau(t, time.Date(2026, 12, 3, 8, 0, 0, 0, time.UTC))
	b.settle(t, p, store.MailPlain, "", "")
	m, _, err := b.store.MailSettings()
	must(t, err)
	b.sendDue(t.Context())
	if p.count() != 0 {
		t.Fatal("a head was sent though nobody is to get one")
	}
	m.Witnesses = []string{"records@example.com", "insurer@example.net"}
	must(t, b.store.SetMailSettings(t.Context(), m, nil))
	for range 3 {
		b.sendDue(t.Context())
		b.now = b.now.Add(10 * time.Hour)
	}
	if p.count() != 2 {
		t.Fatalf("%d messages in one month, want one for each of two witnesses", p.count())
	}
	_, text, _ := parts(t, p.taken[0])
	text = strings.ReplaceAll(text, "\r\n", "\n")
	_, rest, _ := strings.Cut(text, "\n\n")
	head, after, ok := strings.Cut(rest, "\n\nThe public key")
	if !ok {
		t.Fatalf("the message holds no head:\n%s", text)
	}
	key := strings.TrimSpace(strings.Split(after, "\n")[2])
	if _, err := proof.Open(strings.TrimRight(head, "\n")+"\n", key); err != nil {
		t.Errorf("the head in the message does not prove itself: %v\n%s\n%s", err, head, key)
	}
	if !strings.Contains(text, proof.Fingerprint(key)) {
		t.Error("the message does not name the fingerprint")
	}
	b.now = b.now.AddDate(0, 1, 0)
	p.turn("550 no such mailbox")
	b.sendDue(t.Context())
	if w, err := b.store.Witnessed(); err != nil || !strings.Contains(w.Fault, "no such mailbox") {
		t.Errorf("what the mail server said is not told: %+v %v", w, err)
	}
	p.turn("")
	b.sendDue(t.Context())
	before := p.count()
	b.now = b.now.Add(7 * time.Hour)
	b.sendDue(t.Context())
	if p.count() != before+2 {
		t.Errorf("a month that failed was not tried again: %d messages, want %d", p.count(), before+2)
	}
}
