package bundle

import (
	"bytes"
	"context"
	"encoding/json"
	"image"
	"image/png"
	"strings"
	"testing"

	"tripwell/store"
)

// TestBundle_FilesThatRecordsName holds photos of tests and defects and the certificates of instruments against what names them.
func TestBundle_FilesThatRecordsName(t *testing.T) {
	h := newHouse(t)
	picture := func(side int) (raw []byte, name string) {
		var out bytes.Buffer
		must(t, png.Encode(&out, image.NewGray(image.Rect(0, 0, side, side))))
		return out.Bytes(), sumOf(out.Bytes())
	}
	tested, testedName := picture(8)
	broken, brokenName := picture(9)
	_, awaited := picture(10)
	d := h.devices[0]
	entry, defect := h.newID("entry with a photo"), h.newID("defect with a photo")
	h.push(entry, "entry.made", d.ID, map[string]any{"form": d.Kind + "/button", "given": map[string]any{"kind": d.Kind}, "source": "phone", "photos": []string{testedName, awaited},
		"readings": map[string]any{"condition": "sound", "found": "on", "button_trips": "yes", "button_resets": "yes"}})
	h.push(defect, "defect.opened", h.newID("a defect"), map[string]any{"device": d.ID, "text": "Face cracked", "severity": "repair", "photos": []string{brokenName}})
	must(t, h.KeepPhoto(everything, entry, testedName, tested))
	must(t, h.KeepPhoto(everything, defect, brokenName, broken))
	certificate := []byte("%PDF-1.4 a certificate")
	instrument, calibrated := h.newID("instrument"), h.newID("calibrated")
	_, err := h.Append(context.Background(), store.Draft{Kind: "instrument.set", Log: "org", Subject: instrument, By: h.manager.ID, Body: map[string]any{"set": map[string]any{"name": "Trip tester"}}},
		store.Draft{ID: calibrated, Kind: "instrument.calibrated", Log: "org", Subject: instrument, By: h.manager.ID, Body: map[string]any{"on": "2026-09-01", "due": "2027-09-01", "certificate": "C-1", "file": sumOf(certificate), "file_name": "c-1.pdf"}})
	must(t, err)
	must(t, h.KeepFile(everything, calibrated, certificate))
	b := h.bundle()
	r := verify(t, b, Check{Key: h.key()})
	if len(r.Findings) > 0 {
		t.Fatalf("as it was made: %s", r.text())
	}
	said := strings.Join(append(r.Checked, r.Notes...), "\n")
	for _, want := range []string{"2 photos against the records", "1 certificates against the records", "1 photos that records name had not arrived"} {
		if !strings.Contains(said, want) {
			t.Errorf("nothing says %q:\n%s", want, said)
		}
	}
	photo, pdf := "photos/"+brokenName+".png", "certificates/"+sumOf(certificate)+".pdf"
	for name, c := range map[string]struct {
		bend func(files map[string][]byte)
		want string
	}{
		"a photo left out, of the list too":       {func(f map[string][]byte) { delete(f, photo); unlist(t, f, photo) }, "names a photo (SHA-256 " + short(brokenName)},
		"a certificate left out, of the list too": {func(f map[string][]byte) { delete(f, pdf); unlist(t, f, pdf) }, "names a certificate (SHA-256 " + short(sumOf(certificate))},
		"a photo left out":                        {func(f map[string][]byte) { delete(f, photo) }, "is in the list of the bundle and is missing"},
		"another certificate":                     {func(f map[string][]byte) { f[pdf] = []byte("%PDF-1.4 another") }, "not the one that its record names"},
		"a certificate put in":                    {func(f map[string][]byte) { f["certificates/"+testedName+".pdf"] = tested }, "No record of the bundle names this file"},
	} {
		files := unpack(t, b)
		c.bend(files)
		if got := verify(t, pack(t, files), Check{Key: h.key()}).text(); !strings.Contains(got, c.want) {
			t.Errorf("%s: nothing says %q:\n%s", name, c.want, got)
		}
	}
}

// unlist takes a file off the list of a bundle, as somebody would who hides it.
func unlist(t *testing.T, files map[string][]byte, name string) {
	t.Helper()
	var doc Doc
	must(t, json.Unmarshal(files[docFile], &doc))
	var left []File
	for _, f := range doc.Files {
		if f.Name != name {
			left = append(left, f)
		}
	}
	doc.Files = left
	var err error
	files[docFile], err = json.Marshal(doc)
	must(t, err)
}
