package bundle

import (
	"bytes"
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"tripwell/static/chromium"
)

// TestPage_ChecksInABrowserFromAFolder opens verify.html as an auditor does, from a folder and without a server.
func TestPage_ChecksInABrowserFromAFolder(t *testing.T) {
	chromium.Need(t)
	h := newHouse(t)
	h.work(40)
	first := h.bundle()
	backup := h.backup()
	h.press(2, "yes")
	b := h.bundle()
	dir := t.TempDir()
	keep := func(name string, content []byte) string {
		path := filepath.Join(dir, name)
		must(t, os.WriteFile(path, content, 0o600))
		return path
	}
	files := unpack(t, b)
	w := chromium.Desk(t)
	check := func(content []byte, key, earlier string) string {
		t.Helper()
		w.Open("file://" + keep(pageFile, files[pageFile]))
		w.Hand("#bundle", keep("bundle.zip", content))
		w.JS(`document.getElementById("key").value = ` + chromium.Quote(key))
		w.JS(`document.getElementById("earlier").value = ` + chromium.Quote(earlier))
		w.Tap("#go", "Check")
		w.Until("the answer", `!document.getElementById("go").disabled && document.getElementById("answer").children.length > 0 || document.getElementById("answer").textContent.startsWith("The file")`)
		return w.Text("#answer")
	}
	good := check(b, h.key(), string(unpack(t, first)[headFile]))
	for _, want := range []string{"Nothing is wrong with the records", "1 refusals against the logs", "grants against the log of the office", "was signed over", "never came"} {
		if !strings.Contains(good, want) {
			t.Errorf("a bundle as it was made: the page does not say %q:\n%s", want, good)
		}
	}
	w.Picture("verify-page")
	records := recordsName(h.site.ID)
	cases := map[string]struct {
		bundle       []byte
		key, earlier string
		want         string
	}{
		"a byte": {altered(t, b, records, func(old []byte) []byte {
			return bytes.Replace(old, []byte(`"button_trips":"yes"`), []byte(`"button_trips":"noo"`), 1)
		}), "", "", "has been changed"},
		"a dropped record": {altered(t, b, records, lines(func(all [][]byte) [][]byte { return slices.Delete(all, 60, 61) })), "", "", "The record at place 61 is missing"},
		"the end cut off":  {altered(t, b, records, lines(func(all [][]byte) [][]byte { return all[:len(all)-1] })), "", "", "is missing"},
		"a hidden refusal": {altered(t, b, refusalsFile, func([]byte) []byte { return []byte("[]") }), "", "", "leaves it out"},
		"a site left out": {altered(t, b, docFile, func(old []byte) []byte {
			var doc Doc
			must(t, json.Unmarshal(old, &doc))
			doc.Sites, doc.Logs = []Site{}, doc.Logs[len(doc.Logs)-1:]
			out, err := json.Marshal(doc)
			must(t, err)
			return out
		}), "", "", "says it holds all sites"},
		"another head":  {altered(t, b, headFile, func(old []byte) []byte { return bytes.Replace(old, []byte("2026"), []byte("2025"), 1) }), "", "", "does not belong to its text"},
		"another grant": {altered(t, b, grantsFile, func(old []byte) []byte { return bytes.Replace(old, []byte("crew"), []byte("boss"), 1) }), "", "", "is not the one that stands there"},
		"rebuilt trees": {h.doctored(b), h.key(), string(unpack(t, first)[headFile]), "history was rewritten"},
		"a text":        {[]byte("hello"), "", "", "could not be checked"},
		"an unknown earlier": {altered(t, b, earlierFile, func(old []byte) []byte {
			var list []earlier
			must(t, json.Unmarshal(old, &list))
			out, err := json.Marshal(list[len(list)-1:])
			must(t, err)
			return out
		}), "", string(unpack(t, first)[headFile]), "knows nothing of the head that you hold"},
	}
	for name, c := range cases {
		if got := check(c.bundle, c.key, c.earlier); !strings.Contains(got, c.want) {
			t.Errorf("%s: the page does not say %q:\n%s", name, c.want, got)
		}
	}

	h.restore(backup)
	after := h.bundle()
	got := check(after, h.key(), string(files[headFile]))
	for _, want := range []string{"was put back from a backup on 2026-", "which the backup brought back, are among those", "lay beyond the backup", "1 restores against the log"} {
		if !strings.Contains(got, want) {
			t.Errorf("across a restore: the page does not say %q:\n%s", want, got)
		}
	}
	if got := check(after, h.key(), string(unpack(t, first)[headFile])); !strings.Contains(got, "Nothing is wrong") || !strings.Contains(got, "was signed over") {
		t.Errorf("a head the backup holds: got %s", got)
	}
	if got := check(h.doctored(after), h.key(), string(files[headFile])); !strings.Contains(got, "history was rewritten") {
		t.Errorf("rebuilt trees across a restore: got %s", got)
	}
}
