package server

import (
	"net/http"
	"net/url"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"tripwell/forms"
)

var hiddenInput = regexp.MustCompile(`<input type="hidden" name="([^"]+)" value="([^"]*)">`)

func TestSample_DrawnByAnAuditorAndMadeARound(t *testing.T) {
	r := newRig(t, 60)
	_, err := r.store.SignedHead()
	must(t, err)
	manager, auditor := r.signIn(r.manager), r.signIn(r.auditor)
	const asked = "/sample?word=rain&site=KILN-LANE"
	n := forms.SampleSize(60, forms.SampleBad(60, 0.05), 0.95)
	page := r.open(auditor, asked+"&found=1").body
	for _, want := range []string{"devices and", "Find each one", "1 of " + strconv.Itoa(n) + " were wrong: of all 60 devices"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
	if strings.Contains(page, "Make it a round") {
		t.Error("an auditor is offered to make a round")
	}
	if got := strings.Count(page, `href="/devices/`); got != n {
		t.Errorf("%d devices are shown, want %d", got, n)
	}
	if res := r.open(auditor, "/sample.pdf?word=rain&site=KILN-LANE"); res.status != http.StatusOK || !strings.HasPrefix(res.body, "%PDF") {
		t.Errorf("the sheet: %d", res.status)
	}
	for _, bad := range []string{"/sample?word=", "/sample?word=x&share=0", "/sample?word=x&confidence=100", "/sample?word=x&share=much"} {
		if got := r.open(auditor, bad).status; got != http.StatusUnprocessableEntity {
			t.Errorf("%s: %d, want 422", bad, got)
		}
	}
	form := url.Values{}
	_, offered, ok := strings.Cut(r.open(manager, asked).body, `<form method="post" action="/rounds">`)
	if !ok {
		t.Fatal("a manager is not offered to make a round")
	}
	offered, _, _ = strings.Cut(offered, "</form>")
	for _, m := range hiddenInput.FindAllStringSubmatch(offered, -1) {
		form.Set(m[1], m[2])
	}
	r.wantTo(manager, "/rounds", form)
	if rounds := r.rounds(); len(rounds) != 1 || len(rounds[0].Stops) != n {
		t.Errorf("got %d rounds, want one of %d tests", len(rounds), n)
	}
}
