package server

import (
	"net/http"
	"strings"
	"testing"
)

// TestPersonEnd_SessionsAndPhonesEndAndTheWorkStays is somebody who leaves while a phone still holds a test.
func TestPersonEnd_SessionsAndPhonesEndAndTheWorkStays(t *testing.T) {
	r := newRig(t, 2)
	leaver := r.person("Crew 7", "crew", r.site)
	browser, phone := r.signIn(leaver), r.enrol(leaver)
	if got := phone.push(phone.entry(r.devices[0], 5).bytes(t)); got[0].State != "stored" {
		t.Fatalf("%+v", got)
	}
	made := r.entries()[0].ID
	waiting := phone.entry(r.devices[1], 5).bytes(t)

	office := r.signIn(r.manager)
	at := "/people/" + leaver.ID
	if page := r.open(office, at+"/end"); page.status != http.StatusOK || !strings.Contains(page.body, "up to its number 1 in") {
		t.Errorf("how far the phone had sent is not said: %d %s", page.status, page.body)
	}
	if strings.Contains(r.open(office, at).body, at+"/remove") {
		t.Error("somebody who works here is offered to be removed")
	}
	if got := r.submit(office, at+"/end", ""); got.status != http.StatusSeeOther {
		t.Fatalf("%d %s", got.status, got.body)
	}
	page := r.open(office, at+"?said=ended")
	for _, want := range []string{"The access has ended.", "May not sign in", "No phone sends for this person.", "Nowhere just now.", at + "/remove"} {
		if !strings.Contains(page.body, want) {
			t.Errorf("their page does not say %q", want)
		}
	}
	if strings.Contains(page.body, at+"/link") {
		t.Error("a link is offered for somebody who may not sign in")
	}
	if got := r.open(browser, "/me"); got.status == http.StatusOK {
		t.Error("the session goes on")
	}
	if got := phone.send("/exchange/push", []byte(`{"protocol":1,"records":[]}`)); got.status != http.StatusUnauthorized {
		t.Errorf("the phone still sends: %d", got.status)
	}
	if page := r.open(office, "/entries/"+made); !strings.Contains(page.body, "Crew 7") {
		t.Error("their test lost its name")
	}
	if got := r.submit(office, "/people/"+r.manager.ID+"/end", ""); got.status != http.StatusConflict {
		t.Errorf("a manager ended their own access: %d", got.status)
	}

	// What was still on the phone comes in a file; made while the access held, it is no refusal but a flag.
	body := "--x\r\nContent-Disposition: form-data; name=\"file\"; filename=\"t.json\"\r\n\r\n" + trayOf(t, waiting) + "\r\n--x--\r\n"
	if got := r.do(office, formRequest(t, r.url+"/tray", body)); got.status != http.StatusOK || !strings.Contains(got.body, "1 new") {
		t.Fatalf("the file of the phone: %d %s", got.status, got.body)
	}
	for _, e := range r.entries() {
		ended := strings.Contains(r.open(office, "/entries/"+e.ID).body, "had the site when testing and lost it on")
		if ended != (e.ID != made) {
			t.Errorf("entry %s: the flag that the access had ended is %v", e.ID, ended)
		}
	}
}

// TestPersonPhone_ALostOneEndsAloneAndSaysHowFarItHadSent takes one of two phones off.
func TestPersonPhone_ALostOneEndsAloneAndSaysHowFarItHadSent(t *testing.T) {
	r := newRig(t, 1)
	lost, kept := r.enrol(r.crew), r.enrol(r.crew)
	if got := lost.push(lost.entry(r.devices[0], 5).bytes(t)); got[0].State != "stored" {
		t.Fatalf("%+v", got)
	}
	office := r.signIn(r.manager)
	at := "/people/" + r.crew.ID + "/phones/" + lost.installation
	if page := r.open(office, at); page.status != http.StatusOK || !strings.Contains(page.body, "up to its number 1 in") {
		t.Errorf("%d %s", page.status, page.body)
	}
	if got := r.submit(office, at, ""); got.status != http.StatusSeeOther {
		t.Fatalf("%d %s", got.status, got.body)
	}
	if got := lost.fetch("/exchange/logs"); got.status != http.StatusUnauthorized {
		t.Errorf("the lost phone still reads: %d", got.status)
	}
	if got := kept.fetch("/exchange/logs"); got.status != http.StatusOK {
		t.Errorf("the other phone was taken off as well: %d", got.status)
	}
	if got := r.open(office, at); got.status != http.StatusNotFound {
		t.Errorf("it is still there: %d", got.status)
	}
	if got := r.open(r.signIn(r.crew), "/people/"+r.crew.ID+"/phones/"+kept.installation); got.status != http.StatusForbidden {
		t.Errorf("crew: %d", got.status)
	}
}
