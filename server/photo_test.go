package server

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"image"
	"image/jpeg"
	"image/png"
	"net/http"
	"strings"
	"testing"
)

func picture(t *testing.T, width, height int, as string) (raw []byte, name string) {
	t.Helper()
	var b bytes.Buffer
	img := image.NewGray(image.Rect(0, 0, width, height))
	if as == "png" {
		must(t, png.Encode(&b, img))
	} else {
		must(t, jpeg.Encode(&b, img, nil))
	}
	sum := sha256.Sum256(b.Bytes())
	return b.Bytes(), hex.EncodeToString(sum[:])
}

func photoEntry(h *handset, device string, names ...any) envelope {
	e := h.entry(device, 4.5)
	body := entryBody(4.5)
	body["photos"] = names
	e.Body = body
	return e
}

func TestPhoto_IsKeptUnderItsHashAndReadThroughItsEntryOnly(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	raw, name := picture(t, 40, 30, "jpeg")
	e := photoEntry(h, r.devices[0], name, 7, "no name")
	send := func(entry, name string, raw []byte) answer {
		return h.send("/exchange/photo?sha256="+name+"&entry="+entry, raw)
	}
	wantWrong(t, send(e.ID, name, raw), 404, codeNotFound) // its entry has not come yet
	if got := h.push(e.bytes(t))[0]; got.State != "stored" {
		t.Fatalf("got %+v, want stored", got)
	}
	manager := r.signIn(r.manager)
	if page := r.open(manager, "/entries/"+e.ID); !strings.Contains(page.body, "still on the phone") {
		t.Error("the page does not say that the photo has not arrived")
	}
	for range 2 { // a lost answer: the same again changes nothing
		if res := send(e.ID, name, raw); res.status != http.StatusOK || !strings.Contains(res.body, name) {
			t.Fatalf("got %d %s", res.status, res.body)
		}
	}
	href := "/entries/" + e.ID + "/photos/" + name
	if page := r.open(manager, "/entries/"+e.ID); !strings.Contains(page.body, href) {
		t.Error("the page of the entry does not show the photo")
	}
	got := r.open(manager, href)
	if got.body != string(raw) || got.header.Get("Content-Type") != "image/jpeg" {
		t.Errorf("got %d bytes of %s, want the %d that were sent", len(got.body), got.header.Get("Content-Type"), len(raw))
	}
	other := photoEntry(h, r.devices[0])
	h.push(other.bytes(t))
	if res := r.open(manager, "/entries/"+other.ID+"/photos/"+name); res.status != 404 {
		t.Errorf("through an entry that does not name it: got %d, want 404", res.status)
	}
	stranger := r.signIn(r.person("Crew 9", "crew"))
	if res := r.open(stranger, href); res.status == http.StatusOK {
		t.Error("somebody without the site sees the photo")
	}
	if res := r.open(browser(t), href); res.status == http.StatusOK {
		t.Error("somebody signed out sees the photo")
	}
}

func TestPhoto_RefusesWhatIsNotThePhotoItIsNamedFor(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	good, name := picture(t, 40, 30, "png")
	_, other := picture(t, 41, 30, "jpeg")
	huge, hugeName := picture(t, 20000, 700, "png") // 14 million pixels in a few KiB
	text := []byte("GIF89a no picture")
	sum := sha256.Sum256(text)
	textName := hex.EncodeToString(sum[:])
	e := photoEntry(h, r.devices[0], name, other, hugeName, textName)
	h.push(e.bytes(t))
	for what, c := range map[string]struct {
		name   string
		raw    []byte
		status int
		code   string
	}{
		"another photo's bytes": {other, good, 400, codeInvalid},
		"too many pixels":       {hugeName, huge, 413, codeTooLarge},
		"no picture":            {textName, text, 400, codeInvalid},
		"a path for a name":     {"../../book.db", good, 400, codeInvalid},
		"a name in capitals":    {strings.ToUpper(name), good, 400, codeInvalid},
		"too many bytes":        {name, make([]byte, 2<<20+1), 413, codeTooLarge},
	} {
		t.Run(what, func(t *testing.T) {
			wantWrong(t, h.send("/exchange/photo?sha256="+c.name+"&entry="+e.ID, c.raw), c.status, c.code)
		})
	}
	if res := h.send("/exchange/photo?sha256="+name+"&entry="+e.ID, good); res.status != http.StatusOK {
		t.Errorf("the right bytes afterwards: got %d %s", res.status, res.body)
	}
}
