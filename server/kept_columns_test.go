package server

import (
	"encoding/json"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"testing"

	"tripwell/forms"
)

// keep sends the form that keeps the columns a preview shows.
func (r *rig) keep(client *http.Client, at, name string) string {
	r.t.Helper()
	r.submit(client, at, url.Values{"do": {"keep"}, "keep_as": {name}}.Encode())
	return r.open(client, at).body
}

func TestKeptColumns_AreOfferedWhenTheHeadingsComeAgain(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	first := "Outlets of the mill;;;\n\nBldg;Wo;Typ of thing;Pnl\nMill;Hall, door;GFI outlet;LP-1\n"
	at := r.upload(b, "mill.csv", []byte(first), "").header.Get("Location")
	page := r.open(b, at).body
	if strings.Contains(page, "These headings came before") {
		t.Error("columns are offered before any were kept")
	}
	form := typed(t, page)
	form.Set(nameOf(t, form, "c", "Wo"), "place")
	form.Set(nameOf(t, form, "c", "Typ of thing"), "kind")
	form.Set("site.0", "MILL")
	r.submit(b, at, form.Encode())
	if page := r.keep(b, at, "  "); !strings.Contains(page, "need a name") {
		t.Error("columns without a name are kept")
	}
	if page := r.keep(b, at, "Mill <lists>"); !strings.Contains(page, "kept as Mill &lt;lists&gt;") {
		t.Fatalf("keep:\n%s", page)
	}
	// A later file: other titles, other order, other case of the headings, other rows; and one that only shares some.
	later := "List 2027\nPNL,TYP OF THING,WO,BLDG\nLP-2,GFI outlet,\"Store, rear\",Mill\n"
	at = r.upload(b, "later.csv", []byte(later), "").header.Get("Location")
	page = r.open(b, at).body
	if !strings.Contains(page, "Read as Mill &lt;lists&gt;") || !strings.Contains(page, "not known") {
		t.Fatalf("not offered:\n%s", page)
	}
	if other := r.open(b, r.upload(b, "other.csv", []byte("Bldg,Wo,Pnl\nMill,Hall,LP-1\n"), "").header.Get("Location")).body; strings.Contains(other, "These headings came before") {
		t.Error("offered for other headings")
	}
	at = r.upload(b, "later.csv", []byte(later), "").header.Get("Location")
	r.submit(b, at, url.Values{"use": {"Mill <lists>"}}.Encode())
	if page = r.open(b, at).body; !strings.Contains(page, "read by the columns kept as") || strings.Contains(page, "not known") || strings.Contains(page, "These headings came before") {
		t.Errorf("not used:\n%s", page)
	}
	if n := len(r.devicesOf(r.site)); n != 0 {
		t.Errorf("reading by kept columns imported %d devices", n)
	}
	// The list where a file is chosen deletes it, for everybody.
	if page := r.open(b, "/import").body; !strings.Contains(page, "Mill &lt;lists&gt;") || !strings.Contains(page, r.manager.Name) {
		t.Errorf("not listed:\n%s", page)
	}
	if res := r.submit(r.signIn(r.crew), "/import/columns", url.Values{"name": {"Mill <lists>"}}.Encode()); res.status != http.StatusForbidden {
		t.Errorf("crew deletes: got %d, want 403", res.status)
	}
	r.submit(b, "/import/columns", url.Values{"name": {"Mill <lists>"}}.Encode())
	if page := r.open(b, "/import").body; strings.Contains(page, "Mill &lt;lists&gt;") {
		t.Error("still listed after it was deleted")
	}
	at = r.upload(b, "later.csv", []byte(later), "").header.Get("Location")
	if page := r.open(b, at).body; strings.Contains(page, "These headings came before") {
		t.Error("still offered after it was deleted")
	}
	if res := r.submit(b, at, url.Values{"use": {"Mill <lists>"}}.Encode()); res.status != http.StatusNotFound || !strings.Contains(res.body, "no longer kept") {
		t.Errorf("used after it was deleted: got %d", res.status)
	}
}

func TestKeptColumns_OfTestsMadeElsewhere(t *testing.T) {
	r := newRig(t, 2)
	b := r.signIn(r.manager)
	rows := r.devicesOf(r.site)
	sheet := func(day forms.Day) []byte {
		return []byte(fmt.Sprintf("Place;When;t;I\n%s;%s;24;6,8\n", placeText(rows[0].Place), day))
	}
	today := forms.DayOf(r.store.Now())
	at := r.uploadTo(b, "/results", "round.csv", sheet(today-40), "", "readings").header.Get("Location")
	form := typed(t, r.open(b, at).body)
	form.Set(nameOf(t, form, "c", "When"), "day")
	form.Set(nameOf(t, form, "c", "I"), "test_current_ma")
	form.Set("read_by", r.crew.ID)
	form.Set("do", "import")
	r.submit(b, at, form.Encode())
	form = typed(t, r.open(b, at).body)
	form.Set("do", "import")
	r.submit(b, at, form.Encode())
	if n := len(r.siteEntries()); n != 1 {
		t.Fatalf("%d entries, want 1", n)
	}
	// Kept after the import too, and apart from what is kept of registers.
	if page := r.keep(b, at, "Meter"); !strings.Contains(page, "kept as Meter") {
		t.Fatalf("keep after the import:\n%s", page)
	}
	if page := r.open(b, "/import").body; strings.Contains(page, "Meter") {
		t.Error("columns of tests are listed among those of registers")
	}
	at = r.uploadTo(b, "/results", "next.csv", sheet(today-5), "", "readings").header.Get("Location")
	if page := r.open(b, at).body; !strings.Contains(page, "Read as Meter") {
		t.Fatalf("not offered:\n%s", page)
	}
	r.submit(b, at, url.Values{"use": {"Meter"}}.Encode())
	form = typed(t, r.open(b, at).body)
	form.Set("read_by", r.crew.ID)
	form.Set("do", "import")
	r.submit(b, at, form.Encode()) // what was said of the reader comes again first
	form = typed(t, r.open(b, at).body)
	form.Set("do", "import")
	r.submit(b, at, form.Encode())
	if n := len(r.siteEntries()); n != 2 {
		t.Errorf("%d entries, want 2", n)
	}
	list, err := r.store.KeptColumns(ofResults)
	must(t, err)
	if len(list) != 1 || !json.Valid(list[0].Said) || list[0].By != r.manager.ID {
		t.Errorf("kept %+v", list)
	}
	r.submit(b, "/results/columns", url.Values{"name": {"Meter"}}.Encode())
	if page := r.open(b, "/results").body; strings.Contains(page, "Meter") {
		t.Error("still listed after it was deleted")
	}
}
