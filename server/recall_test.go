package server

import (
	"net/http"
	"strings"
	"testing"
	"time"

	"tripwell/store"
)

// An instrument found to read 5 % too low: 5.8 mA was 6.105 mA, beyond the 6 mA of UL 943 Class A; 5.0 was 5.26 mA, inside.
func TestRecall_FromTheCertificateToTheTests(t *testing.T) {
	r := newRig(t, 3)
	b := r.signIn(r.manager)
	instrument := newID()
	r.append(store.Draft{Kind: "instrument.set", Log: "org", Subject: instrument, Body: set{"set": set{"name": "Instrument B", "serial": "7"}}},
		store.Draft{Kind: "instrument.calibrated", Log: "org", Subject: instrument, Body: set{"on": "2025-01-10", "due": "2027-01-10"}})
	h := r.handset(r.crew)
	var entries []string
	for i, tripMA := range []float64{5.0, 5.8, 4.6} {
		body := entryBody(tripMA)
		if i < 2 {
			body["given"].(set)["instrument"] = instrument
		}
		e := h.record("entry.made", r.site, r.devices[i], body)
		e.At = time.Now().AddDate(0, 0, -3).Format("2006-01-02T15:04:05.000Z07:00")
		entries = append(entries, e.ID)
		h.push(e.bytes(t))
	}
	at := "/instruments/" + instrument
	form := setAll(r.openForm(b, at+"/certificate"), "out", "yes", "certificate", "C-77", "file_name", "c-77.pdf")
	if res := r.sendFile(b, at+"/certificate", form, []byte("%PDF-1.7\n…")); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "Say by how much it was out") {
		t.Errorf("out of tolerance without a figure: got %d", res.status)
	}
	form.Set("percent.trip_current_ma", "-5")
	if res := r.sendFile(b, at+"/certificate", form, []byte("MZ")); res.status != http.StatusUnprocessableEntity {
		t.Errorf("a program as certificate: got %d", res.status)
	}
	res := r.sendFile(b, at+"/certificate", form, []byte("%PDF-1.7\n…"))
	if res.status != http.StatusSeeOther {
		t.Fatalf("certificate: got %d %s", res.status, res.body)
	}
	recall := res.header.Get("Location")
	page := r.open(b, recall).body
	wantIn(t, page, "2 tests are in doubt; with the true figures 1 fail.", "was 6.105"+thin+"mA", "after its good certificate of")
	if first, second := strings.Index(page, entries[1]), strings.Index(page, entries[0]); first < 0 || second < first || strings.Contains(page, entries[2]) {
		t.Errorf("got places %d and %d, want the one beyond its limit first and the other instrument's not at all", first, second)
	}
	wantIn(t, r.open(b, "/entries/"+entries[0]).body, "found out of tolerance on")
	file := r.open(b, hrefOf(t, r.open(b, at+"/past").body, at+`/certificates/[0-9a-f-]{36}`))
	if file.body != "%PDF-1.7\n…" || file.header.Get("Content-Type") != "application/pdf" {
		t.Errorf("the certificate's file: got %q, %s", file.body, file.header.Get("Content-Type"))
	}
	ask := fieldsOf(t, page)
	if res := r.submit(b, recall, setAll(ask, "reach", "fail").Encode()); res.status != http.StatusSeeOther {
		t.Fatalf("make due: got %d %s", res.status, res.body)
	}
	dates := r.open(b, "/dates?task=instrument").body
	if !strings.Contains(dates, r.devices[1]) || strings.Contains(dates, r.devices[0]) {
		t.Error("the test that fails with the true figure is not due, or another one is")
	}
	r.submit(b, recall, ask.Encode()) // twice is once
	// Tested again with another instrument: the page says so, and asks for it no more.
	h.push(h.entry(r.devices[1], 5).bytes(t))
	page = r.open(b, recall).body
	wantIn(t, page, "1 was tested again since.", "tested again ", "the 1 in doubt")
	if res := r.submit(b, recall, setAll(fieldsOf(t, page), "reach", "fail").Encode()); res.status == http.StatusSeeOther {
		t.Error("what was tested again is made due once more")
	}
	crew := r.signIn(r.crew)
	if res := r.open(crew, recall); res.status != http.StatusForbidden {
		t.Errorf("the recall as crew: got %d", res.status)
	}
	wantIn(t, r.open(crew, at+"/past").body, "Out of tolerance")
	r.say(b, at+"/proved", "where", "Workshop, bench outlet", "works", "yes")
	wantIn(t, r.open(b, at+"/past").body, "Workshop, bench outlet")
}
