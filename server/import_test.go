package server

import (
	"bytes"
	"context"
	"mime/multipart"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"golang.org/x/net/html"

	"tripwell/export/register"
	"tripwell/store"
)

func previewSample() previewPage {
	list := choices("room", "", "Not read", "room", "Room")
	return previewPage{
		Frame: frameOf("Import a register", "sites"), Crumbs: []link{{Href: "/sites", Text: "Sites"}}, Heading: "outlets.xlsx: before it is imported", Lead: "This is how the file was read.", Note: "Columns were changed.",
		Told: []string{"Read as an XLSX workbook with 2 sheets."}, Sums: []sum{{"#rows", "12", "new devices", "not in the register yet", ""}, {"#problems", "2", "rows with a problem", "left out", "fail"}}, Action: "/import/x", Go: "Import 12 rows",
		Asks: []field{{Name: "zone", Type: "text", Label: "Time zone", Known: zonesOffered}}, NewSites: []siteOffer{{"ELM-4", "Elm Hall", "12"}},
		Kinds:    []kindAsk{{N: 0, Word: "Thing", Rows: "3 rows", Select: field{Name: "k.0", Label: "Thing is", Options: choices("", "", "Leave out", "rcd", "RCD")}}},
		Columns:  []columnAsk{{N: 0, Key: "Area", Heading: "Area", Sample: "Hall · Stair", Select: field{Name: "c.0", Label: "Area is read as", Value: "room", Options: list}}},
		Sheets:   []sheetAsk{{N: 0, Name: "Main", State: "12 rows", Header: field{Name: "header.0", Type: "number", Label: "Row of the headings", Value: "4"}, Site: field{Name: "site.0", Type: "text", Label: "Site"}, Skip: field{Name: "skip.0", Type: "check", Label: "Leave out"}}},
		Rows:     []previewRow{{"5", "ELM-4", "RCD", "Hall", "LP-1 / 2", "new"}},
		Problems: []problemLine{{"Main · row 9", "kind", "Thing", "This kind of device is not known.", true}}, More: "and 3 more", ProblemsHead: "4 things to look at", LeftOut: []string{"Main · row 12: a total (Total 12)"},
		Offers: []columnsKept{{"Mill lists", "1 Dec 2026, Manager 1"}}, KeepAs: field{Name: "keep_as", Type: "text", Label: "Name", Value: "Mill lists"}, Rejects: true, NewTags: field{Name: "new_tags", Type: "check", Label: "New tags"},
	}
}

// upload posts a file as the page's form does and gives where it leads.
func (r *rig) upload(client *http.Client, name string, file []byte, mapping string) answer {
	r.t.Helper()
	return r.uploadTo(client, "/import", name, file, mapping, "")
}

// uploadTo posts a file to a page that also asks what it is.
func (r *rig) uploadTo(client *http.Client, path, name string, file []byte, mapping, what string) answer {
	r.t.Helper()
	var body bytes.Buffer
	w := multipart.NewWriter(&body)
	part, err := w.CreateFormFile("file", name)
	must(r.t, err)
	_, err = part.Write(file)
	must(r.t, err)
	part, err = w.CreateFormFile("map", "")
	must(r.t, err)
	_, err = part.Write([]byte(mapping))
	must(r.t, err)
	if what != "" {
		must(r.t, w.WriteField("what", what))
	}
	must(r.t, w.Close())
	req, err := http.NewRequest(http.MethodPost, r.url+path, &body)
	must(r.t, err)
	req.Header.Set("Accept", "text/html")
	req.Header.Set("Content-Type", w.FormDataContentType())
	req.Header.Set("Sec-Fetch-Site", "same-origin")
	return r.do(client, req)
}

// typed gives the fields a page's last form would send as it stands.
func typed(t *testing.T, page string) url.Values {
	t.Helper()
	doc, err := html.Parse(strings.NewReader(page))
	must(t, err)
	values := url.Values{}
	for n := range doc.Descendants() {
		attrs := map[string]string{}
		for _, a := range n.Attr {
			attrs[a.Key] = a.Val
		}
		switch {
		case n.Type != html.ElementNode || attrs["name"] == "" || n.Data == "button":
		case n.Data == "input" && attrs["type"] == "checkbox":
			if _, on := attrs["checked"]; on {
				values.Add(attrs["name"], attrs["value"])
			}
		case n.Data == "input":
			values.Add(attrs["name"], attrs["value"])
		case n.Data == "select":
			chosen := ""
			for o := range n.Descendants() {
				for _, a := range o.Attr {
					if a.Key == "selected" {
						for _, b := range o.Attr {
							if b.Key == "value" {
								chosen = b.Val
							}
						}
					}
				}
			}
			values.Add(attrs["name"], chosen)
		}
	}
	return values
}

// nameOf finds the select of a heading.
func nameOf(t *testing.T, form url.Values, prefix, word string) string {
	t.Helper()
	for name, v := range form {
		if strings.HasPrefix(name, prefix+"w.") || strings.HasPrefix(name, prefix+"k.") {
			if v[0] == word {
				_, n, _ := strings.Cut(name, ".")
				return prefix + "." + n
			}
		}
	}
	t.Fatalf("the page does not ask about %q", word)
	return ""
}

const messy = "Outlets of the mill;;;;;\n\nBuilding;Wo;Typ of thing;Panel;Ckt;Installed\nMill;Hall, door;GFI outlet;LP-1;2;03/04/2021\nMill;Hall, window;Wall thing;LP-1;4;31.12.2020\nMill;;GFI outlet;LP-1;6;\nTotal;3;;;;\n"

func TestImport_PreviewMendImportAndRowsBack(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	res := r.upload(b, "mill.csv", []byte(messy), "")
	if res.status != http.StatusSeeOther {
		t.Fatalf("upload: got %d %s", res.status, res.body)
	}
	at := res.header.Get("Location")
	page := r.open(b, at)
	for _, want := range []string{"Columns are parted by a semicolon", "Wo", "not known", "a total"} {
		if !strings.Contains(page.body, want) {
			t.Errorf("the preview lacks %q", want)
		}
	}
	form := typed(t, page.body)
	form.Set(nameOf(t, form, "c", "Wo"), "place")
	form.Set(nameOf(t, form, "c", "Typ of thing"), "kind")
	form.Set("site.0", "MILL")
	form.Set("do", "import")
	if res := r.submit(b, at, form.Encode()); res.status != http.StatusSeeOther || res.header.Get("Location") != at {
		t.Fatalf("mend: got %d", res.status)
	}
	page = r.open(b, at)
	if !strings.Contains(page.body, "Nothing was imported yet") {
		t.Error("an import ran on columns the page had not shown")
	}
	form = typed(t, page.body)
	form.Set("zone", "America/Denver")
	form.Set("dates", "mdy")
	form.Set(nameOf(t, form, "k", "Wall thing"), "receptacle")
	form.Set("do", "look")
	r.submit(b, at, form.Encode())
	page = r.open(b, at)
	if !strings.Contains(page.body, "Import 2 rows") {
		t.Fatalf("the mended preview does not offer two rows:\n%s", page.body)
	}
	form = typed(t, page.body)
	form.Set("do", "import")
	r.submit(b, at, form.Encode())
	page = r.open(b, at)
	if !strings.Contains(page.body, "2 devices taken in") || !strings.Contains(page.body, "New sites: 1") {
		t.Fatalf("after the import:\n%s", page.body)
	}
	rejects := r.open(b, at+"/rejects.csv")
	if rejects.status != 200 || !strings.Contains(rejects.body, "What to correct") || !strings.Contains(rejects.body, "GFI outlet") || strings.Count(rejects.body, "\n") != 2 {
		t.Errorf("rows to correct: %d %q", rejects.status, rejects.body)
	}
	if xlsx := r.open(b, at+"/rejects.xlsx"); xlsx.status != 200 || !strings.HasPrefix(xlsx.body, "PK") {
		t.Errorf("rows to correct as a workbook: %d", xlsx.status)
	}
	kept := r.open(b, at+"/columns.json")
	if _, err := register.ParseMapping([]byte(kept.body)); err != nil || !strings.Contains(kept.body, `"Wo": "place"`) {
		t.Errorf("columns: %v, %s", err, kept.body)
	}
	// The same file with the kept columns has nothing new.
	res = r.upload(b, "mill.csv", []byte(messy), kept.body)
	page = r.open(b, res.header.Get("Location"))
	if !strings.Contains(page.body, "mill.csv") || strings.Contains(page.body, `value="import"`) {
		t.Errorf("the same file offers something to import:\n%s", page.body)
	}
}

func TestImport_OnlyManagersAndOnlyTheirOwnFile(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	at := r.upload(b, "mill.csv", []byte(messy), "").header.Get("Location")
	for _, p := range []store.Person{r.crew, r.auditor} {
		other := r.signIn(p)
		if res := r.open(other, "/import"); res.status != http.StatusForbidden {
			t.Errorf("%s: got %d, want 403", p.Role, res.status)
		}
		if res := r.upload(other, "mill.csv", []byte(messy), ""); res.status != http.StatusForbidden {
			t.Errorf("%s sends a file: got %d, want 403", p.Role, res.status)
		}
	}
	second, err := r.store.PutPerson(context.Background(), r.manager.ID, store.Person{Name: "Manager 2", Role: "manager", Sites: []string{r.site}, Active: true})
	must(t, err)
	if res := r.open(r.signIn(second), at); res.status != http.StatusNotFound {
		t.Errorf("another manager's file: got %d, want 404", res.status)
	}
	// A manager of some sites registers no site, and takes over none that he was not given.
	mine := r.signIn(second)
	res := r.upload(mine, "x.csv", []byte("site,zone,kind,place\nNEW-1,UTC,rcd,Hall\nKILN-LANE,,receptacle,Hall\n"), "")
	page := r.open(mine, res.header.Get("Location"))
	if !strings.Contains(page.body, "Import 1 row") || !strings.Contains(page.body, "not one of your sites") {
		t.Errorf("a site that is not theirs:\n%s", page.body)
	}
}

func TestImport_BadFilesAreToldOnThePage(t *testing.T) {
	r := newRig(t, 0)
	b := r.signIn(r.manager)
	for name, c := range map[string]struct{ file, text string }{
		"nothing":  {"", "No file came along"},
		"picture":  {"\x89PNG\r\n\x1a\n....", "picture"},
		"locked":   {"\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1....", "XLS"},
		"archive":  {"PK\x03\x04....", "damaged"},
		"too much": {strings.Repeat("a,b\n", 3<<20), "10 MiB"},
	} {
		res := r.upload(b, "x.xlsx", []byte(c.file), "")
		if res.status != http.StatusUnprocessableEntity && res.status != http.StatusRequestEntityTooLarge || !strings.Contains(res.body, c.text) && !strings.Contains(res.body, "taken at once") {
			t.Errorf("%s: got %d, want the page again with %q", name, res.status, c.text)
		}
	}
	if res := r.open(b, "/import/none"); res.status != http.StatusNotFound {
		t.Errorf("a file that is not kept: got %d", res.status)
	}
}

func TestImportArea_IsBounded(t *testing.T) {
	a, now := newImportArea(), time.Date(2026, 12, 1, 8, 0, 0, 0, time.UTC)
	first := a.put(upload{person: "p0", raw: make([]byte, uploadBytes)}, now)
	for i := range 8 {
		a.put(upload{person: string(rune('a' + i)), raw: make([]byte, uploadBytes)}, now)
	}
	if _, err := a.get(first, "p0", now); err == nil || len(a.uploads) > areaBytes/uploadBytes {
		t.Errorf("%d files are kept, the oldest among them", len(a.uploads))
	}
	own := a.put(upload{person: "a", raw: []byte("x")}, now)
	if _, err := a.get(own, "b", now); err == nil {
		t.Error("another person's file is given")
	}
	if _, err := a.get(own, "a", now.Add(importLife+time.Second)); err == nil {
		t.Error("a file outlives its time")
	}
}
