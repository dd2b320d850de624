package bundle

import (
	"bytes"
	"encoding/json"
	"image"
	"image/color"
	"image/png"
	"slices"
	"strings"
	"testing"

	"tripwell/forms"
)

func picture(t *testing.T, shade uint8) []byte {
	img := image.NewGray(image.Rect(0, 0, 8, 8))
	img.SetGray(1, 1, color.Gray{Y: shade})
	var out bytes.Buffer
	must(t, png.Encode(&out, img))
	return out.Bytes()
}

// photographed makes a test with two photos, of which one arrives, and a defect with one.
func (h *house) photographed(t *testing.T) (arrived, late, defect string) {
	first, second, third := picture(t, 10), picture(t, 200), picture(t, 90)
	arrived, late, defect = sumOf(first), sumOf(second), sumOf(third)
	d := h.devices[2]
	id := h.newID("photographed")
	body := map[string]any{"form": d.Kind + "/button", "given": map[string]any{"kind": d.Kind}, "photos": []string{arrived, late},
		"readings": map[string]any{"condition": "sound", "found": "on", "button_trips": "yes", "button_resets": "yes"},
		"shown":    map[string]any{"result": "pass", "judge": forms.JudgeVersion}, "source": "phone"}
	if state := h.push(id, "entry.made", d.ID, body); state != "stored" {
		h.t.Fatalf("a test with photos is %s", state)
	}
	must(h.t, h.KeepPhoto(everything, id, arrived, first))
	id = h.newID("seen")
	if state := h.push(id, "defect.opened", id, map[string]any{"device": d.ID, "text": "Cover plate cracked", "photos": []string{defect}}); state != "stored" {
		h.t.Fatalf("a defect with a photo is %s", state)
	}
	must(h.t, h.KeepPhoto(everything, id, defect, third))
	return arrived, late, defect
}

func TestVerify_PhotosThatRecordsName(t *testing.T) {
	h := newHouse(t)
	h.work(3)
	arrived, late, defect := h.photographed(t)
	b := h.bundle()
	if unpack(t, b)["photos/"+defect+".png"] == nil {
		t.Error("the photo of a defect is not in the bundle")
	}
	file := "photos/" + arrived + ".png"
	r := verify(t, b, Check{Key: h.key()})
	if len(r.Findings) > 0 || !strings.Contains(strings.Join(r.Notes, "\n"), "1 photos that records name had not arrived") || !strings.Contains(strings.Join(r.Checked, "\n"), "2 photos against") {
		t.Fatalf("as it was made: %s %v %v", r.text(), r.Notes, r.Checked)
	}
	// Whoever takes a file out can take it off the unsigned list as well.
	without := func(no ...string) []byte {
		files := unpack(t, b)
		delete(files, file)
		var doc Doc
		must(t, json.Unmarshal(files[docFile], &doc))
		doc.NoPhotos = no
		doc.Files = slices.DeleteFunc(doc.Files, func(f File) bool { return f.Name == file })
		var err error
		files[docFile], err = json.Marshal(doc)
		must(t, err)
		return pack(t, files)
	}
	cases := map[string]struct {
		bent []byte
		want string
	}{
		"another picture": {altered(t, b, file, func(old []byte) []byte { return append(old, 0) }), "not the one that its record names"},
		"taken out":       {without(late), "names a photo (SHA-256 " + short(arrived) + ") that is not in the bundle"},
		"both":            {without(), "names a photo (SHA-256 " + short(late) + ") that is not in the bundle"},
	}
	for name, c := range cases {
		if got := verify(t, c.bent, Check{}).text(); !strings.Contains(got, c.want) {
			t.Errorf("%s: %s", name, got)
		}
	}
	if r := verify(t, without(late, arrived), Check{}); !strings.Contains(strings.Join(r.Notes, "\n"), "2 photos that records name had not arrived") {
		t.Errorf("called late: %v", r.Notes)
	}
}
