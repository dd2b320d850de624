package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"image"
	"image/jpeg"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// tooMuch is what must be gone: no part of it may be found in any file of the store.
const tooMuch = "Quillfeather lives behind the blue door"

var asOwner = Scope{Role: "owner", All: true}

// holding names the files of the store's folder that hold a text.
func (r *rig) holding(text string) (files []string) {
	r.Helper()
	err := filepath.Walk(r.dir, func(path string, info os.FileInfo, err error) error {
		if err != nil || info.IsDir() {
			return err
		}
		b, err := os.ReadFile(path)
		if bytes.Contains(b, []byte(text)) {
			files = append(files, filepath.Base(path))
		}
		return err
	})
	if err != nil {
		r.Fatal(err)
	}
	return files
}

// told is an entry with a note and photos, pushed by a phone, and the exact bytes of it.
func (r *rig) told(p *phone, site, device string, photos ...string) (id string, raw []byte) {
	r.Helper()
	body := button("yes", "yes")
	body["note"], body["photos"] = tooMuch, photos
	raw = p.make("entry.made", site, device, body)
	if got := states(p.push(raw)); got[0] != "stored" {
		r.Fatal(got)
	}
	rec, _ := record.Parse(raw)
	return rec.ID, raw
}

func (r *rig) heads() (all []LogHead) {
	r.Helper()
	r.look(asOwner, func(v *View) {
		var err error
		if all, err = v.Logs(); err != nil {
			r.Fatal(err)
		}
	})
	return all
}

func aPicture(t *testing.T, width int) (name string, raw []byte) {
	t.Helper()
	var b bytes.Buffer
	if err := jpeg.Encode(&b, image.NewGray(image.Rect(0, 0, width, 8)), nil); err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256(b.Bytes())
	return hex.EncodeToString(sum[:]), b.Bytes()
}

// sealable is a store with a test that tells too much, corrected and tested since.
func sealable(t *testing.T) (r *rig, p *phone, site, device, id string, raw []byte) {
	r = newRig(t)
	site = r.site("ELM")
	device = r.device(site, map[string]any{"kind": "gfci-receptacle"})
	crew := r.person("crew", false, site)
	p = r.phone(crew)
	r.pass(time.Minute)
	id, raw = r.told(p, site, device)
	return r, p, site, device, id, raw
}

func (r *rig) corrected(site, id string) string {
	r.Helper()
	return r.put("entry.corrected", site, id, map[string]any{"entry": id, "reason": "said too much", "readings": button("yes", "yes")["readings"]})
}

func TestSeal_DropsTheBytesAndKeepsTheTree(t *testing.T) {
	r, p, site, device, id, raw := sealable(t)
	r.corrected(site, id)
	before, note := r.heads(), ""
	if n, err := r.SignedHead(); err != nil {
		t.Fatal(err)
	} else {
		note = n
	}
	if r.entryOf(id).Verdict.Result != forms.Pass {
		t.Fatal("the test was to pass before")
	}
	done, err := r.Seal(context.Background(), asOwner, id, "names a tenant")
	if err != nil || !done.Wiped || done.Before {
		t.Fatalf("%+v %v", done, err)
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("still found in %v", files)
	}
	e := r.entryOf(id)
	if e.Sealed == nil || e.Sealed.Reason != "names a tenant" || e.Sealed.By != r.ID() || !e.Sealed.At.Equal(r.clock()) {
		t.Errorf("seal %+v", e.Sealed)
	}
	if e.Verdict.Result != forms.Incomplete || e.Note != "" || len(e.Body.Readings) == 0 || e.Form != "gfci-receptacle/button" || e.Task != "button" {
		t.Errorf("sealed entry %+v", e)
	}
	r.look(all, func(v *View) {
		for row, err := range v.Due(DueAsk{Site: site, On: forms.DayOf(r.clock()), Until: forms.DayOf(r.clock()) + 400}) {
			if err != nil || row.Device.ID == device && row.Task == "button" && row.Due.Last != forms.NoDay {
				t.Errorf("a sealed entry counts as passed: %+v %v", row, err)
			}
		}
	})
	for i, h := range r.heads() {
		if b := before[i]; h.Log == site && h.Size != b.Size+1 || h.Log != site && h != b {
			t.Errorf("log %s went from %+v to %+v", h.Log, b, h)
		}
	}
	if _, err := r.SignedHead(); err != nil {
		t.Errorf("the head signed before does not hold any more: %v", err)
	} else if note == "" {
		t.Error("no head was signed before")
	}
	// The phone sends it again, byte for byte, and one bit of it changed.
	if got := states(p.push(raw)); got[0] != "already" {
		t.Errorf("the same again: %v", got)
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("sent again, it is in %v", files)
	}
	again, err := r.Seal(context.Background(), asOwner, id, "once more")
	if err != nil || !again.Before || again.Reason != "names a tenant" {
		t.Errorf("sealed twice: %+v %v", again, err)
	}
}

func TestSeal_RebuildAndReopeningGiveTheSame(t *testing.T) {
	r, _, site, _, id, _ := sealable(t)
	r.corrected(site, id)
	if _, err := r.Seal(context.Background(), asOwner, id, "names a tenant"); err != nil {
		t.Fatal(err)
	}
	hash, err := r.ViewHash()
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Rebuild(context.Background(), nil); err != nil {
		t.Fatal(err)
	}
	if again, _ := r.ViewHash(); again != hash {
		t.Error("a rebuild gives other models")
	}
	r.reopen()
	if again, _ := r.ViewHash(); again != hash {
		t.Error("opened again, the models are others")
	}
	report, err := r.Check(context.Background(), nil)
	if err != nil || report.Sealed != 1 || len(report.Problems) > 0 {
		t.Errorf("check %+v %v", report, err)
	}
}

// bbolt leaves what it replaced in pages that are free: without overwriting them the bytes would still be in the file.
func TestWipe_OverwritesFreePages(t *testing.T) {
	r, _, site, _, id, _ := sealable(t)
	r.corrected(site, id)
	cut := errors.New("cut off")
	r.faults.stop = map[string]error{"sealed": cut}
	if _, err := r.Seal(context.Background(), asOwner, id, "names a tenant"); !errors.Is(err, cut) {
		t.Fatal(err)
	}
	if files := r.holding(tooMuch); len(files) != 1 {
		t.Fatalf("found in %v: the test shows nothing unless the file still holds it", files)
	}
	if done, err := r.Wipe(context.Background()); !done || err != nil {
		t.Fatal(done, err)
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("wiped, it is in %v", files)
	}
	r.reopen()
}

// Pages that somebody still reads are left alone until they are through.
func TestWipe_WaitsForReaders(t *testing.T) {
	r, _, site, device, id, _ := sealable(t)
	r.corrected(site, id)
	reading, read := make(chan bool), make(chan error)
	ask := func(v *View) error {
		list, err := v.Entries(device)
		if err == nil && (len(list) != 1 || list[0].Note != tooMuch) {
			err = errors.New("the state of the book that this view began with is not there any more")
		}
		return err
	}
	go func() {
		read <- r.View(all, func(v *View) error {
			close(reading)
			time.Sleep(300 * time.Millisecond)
			return ask(v)
		})
	}()
	<-reading
	done, err := r.Seal(context.Background(), asOwner, id, "names a tenant")
	if err != nil || !done.Wiped {
		t.Errorf("%+v %v", done, err)
	}
	if err := <-read; err != nil {
		t.Error(err)
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("still in %v", files)
	}
}

// A program that ends at any step of a sealing leaves a store that does the rest when it is next opened, or one that was not
// sealed at all.
func TestSeal_CutOffAnywhereIsDoneAtTheNextOpening(t *testing.T) {
	for _, step := range []string{"sealed", "wiping", "wiped"} {
		t.Run(step, func(t *testing.T) {
			r, _, site, _, id, _ := sealable(t)
			r.corrected(site, id)
			cut := errors.New("cut off")
			r.faults.stop = map[string]error{step: cut}
			if _, err := r.Seal(context.Background(), asOwner, id, "names a tenant"); !errors.Is(err, cut) {
				t.Fatalf("%v, want it to be cut off", err)
			}
			r.reopen()
			if files := r.holding(tooMuch); len(files) > 0 {
				t.Errorf("opened again, it is in %v", files)
			}
			if e := r.entryOf(id); e.Sealed == nil || e.Verdict.Result == forms.Pass {
				t.Errorf("entry %+v", e)
			}
		})
	}
	t.Run("before the commit nothing changed", func(t *testing.T) {
		r, _, site, _, id, raw := sealable(t)
		r.corrected(site, id)
		r.faults.commit = func() error { return errors.New("disk full") }
		if _, err := r.Seal(context.Background(), asOwner, id, "names a tenant"); err == nil {
			t.Fatal("sealed on a full disk")
		}
		r.reopen()
		r.look(all, func(v *View) {
			if rec, _, err := v.Record(id); err != nil || !bytes.Equal(rec, raw) {
				t.Errorf("the record is not as it was: %s %v", rec, err)
			}
		})
	})
}

func TestSeal_OnlyTheOwnerAndOnlyOnceCorrected(t *testing.T) {
	r, _, site, _, id, _ := sealable(t)
	ctx := context.Background()
	refusedAs := func(sc Scope, id, reason, code string) {
		t.Helper()
		var e *Error
		if _, err := r.Seal(ctx, sc, id, reason); !errors.As(err, &e) || e.Code != code {
			t.Errorf("%v, want %s", err, code)
		}
	}
	refusedAs(r.manager.Scope(), id, "names a tenant", "forbidden")
	refusedAs(asOwner, id, " ", "invalid")
	refusedAs(asOwner, newID(r.clock()), "names a tenant", "not_found")
	refusedAs(asOwner, id, "names a tenant", "conflict") // not corrected
	refusedAs(asOwner, site, "it is a site", "not_found")
	correction := r.corrected(site, id)
	refusedAs(asOwner, correction, "names a tenant", "conflict") // in force
	r.corrected(site, id)
	if _, err := r.Seal(ctx, asOwner, correction, "names a tenant"); err != nil {
		t.Errorf("a correction that another one followed: %v", err)
	}
	e := r.entryOf(id)
	if len(e.Corrections) != 2 || e.Corrections[0].Sealed == nil || e.Corrections[0].Reason != "" || e.Corrections[0].InForce || !e.Corrections[1].InForce {
		t.Errorf("corrections %+v", e.Corrections)
	}
	if e.Sealed != nil || e.Verdict.Result != forms.Pass {
		t.Errorf("the test itself was not sealed: %+v", e)
	}
}

func TestSeal_RegisterKeepsWhatStands(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	place := newID(r.clock())
	r.put("place.registered", site, place, map[string]any{"set": map[string]any{"name": "Flat 3", "floor": "2", "whom_to_tell": tooMuch, "room": "kitchen"}})
	device := r.device(site, map[string]any{"kind": "gfci-receptacle", "place": place, "note": tooMuch})
	r.put("place.set", site, place, map[string]any{"set": map[string]any{"whom_to_tell": "the office"}})
	var registered, deviceRecord string
	r.look(all, func(v *View) {
		for one, err := range v.LogRecords(site, 100) {
			if err != nil {
				t.Fatal(err)
			}
			rec, _ := record.Parse(one.Record)
			switch rec.Kind {
			case "place.registered":
				registered = rec.ID
			case "device.registered":
				deviceRecord = rec.ID
			}
		}
		what, err := v.Sealing(registered)
		if err != nil || strings.Join(what.Restated, " ") != "floor name room" {
			t.Errorf("%+v %v, want the three fields nobody stated since", what, err)
		}
	})
	r.put("device.set", site, device, map[string]any{"set": map[string]any{"note": nil}})
	for _, id := range []string{registered, deviceRecord} {
		if _, err := r.Seal(context.Background(), asOwner, id, "names a tenant"); err != nil {
			t.Fatal(err)
		}
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("still in %v", files)
	}
	d := r.deviceOn(device, forms.DayOf(r.clock()))
	if d.Place.Name != "Flat 3" || d.Place.Floor != "2" || d.Kind != "gfci-receptacle" || d.Place.WhomToTell != "the office" {
		t.Errorf("the register lost something: %+v", d)
	}
	if d.Fields["note"] != nil {
		t.Errorf("the note is back: %v", d.Fields["note"])
	}
}

func TestSeal_PhotosGoUnlessAnotherRecordNamesThem(t *testing.T) {
	r, p, site, device, _, _ := sealable(t)
	only, rawOnly := aPicture(t, 8)
	both, rawBoth := aPicture(t, 16)
	first, _ := r.told(p, site, device, only, both)
	r.pass(time.Minute)
	second, _ := r.told(p, site, device, both)
	for name, raw := range map[string][]byte{only: rawOnly, both: rawBoth} {
		if err := r.KeepPhoto(p.by.Scope(), first, name, raw); err != nil {
			t.Fatal(err)
		}
	}
	r.corrected(site, first)
	if done, err := r.Seal(context.Background(), asOwner, first, "a face"); err != nil || done.Photos != 2 {
		t.Fatalf("%+v %v", done, err)
	}
	if _, err := os.Stat(r.photoPath(only)); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the photo is still there: %v", err)
	}
	if _, err := os.Stat(r.photoPath(both)); err != nil {
		t.Errorf("a photo another test names is gone: %v", err)
	}
	r.look(all, func(v *View) {
		if _, _, err := v.Photo(first, both); err == nil {
			t.Error("a sealed test shows a photo")
		}
		if _, _, err := v.Photo(second, both); err != nil {
			t.Errorf("the other test lost its photo: %v", err)
		}
	})
	if err := r.KeepPhoto(p.by.Scope(), first, only, rawOnly); err == nil {
		t.Error("a photo of a sealed test is taken again")
	}
}

func TestSeal_RefusedBytes(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	crew := r.person("crew", false, site)
	p := r.phone(crew)
	bad := p.make("plan.set", site, newID(r.clock()), map[string]any{"plan": map[string]any{"plan": "x"}, "reason": tooMuch})
	if got := states(p.push(bad)); !strings.HasPrefix(got[0], "refused") {
		t.Fatal(got)
	}
	var refusal string
	r.look(all, func(v *View) {
		for one, err := range v.LogRecords(site, 100) {
			if rec, _ := record.Parse(one.Record); err == nil && rec.Kind == "record.refused" {
				refusal = rec.ID
			}
		}
	})
	if _, err := r.Seal(context.Background(), asOwner, refusal, "names a tenant"); err != nil {
		t.Fatal(err)
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("still in %v", files)
	}
	if got := states(p.push(bad)); !strings.HasPrefix(got[0], "refused") {
		t.Errorf("sent again: %v", got)
	}
	if files := r.holding(tooMuch); len(files) > 0 {
		t.Errorf("sent again, it is in %v", files)
	}
}

// A stub is no record: nobody can send one, and what is not written as the store writes it is none.
func TestSeal_AStubCannotBeSent(t *testing.T) {
	_, p, site, _, id, raw := sealable(t)
	rec, f := record.Parse(raw)
	if f != nil {
		t.Fatal(f)
	}
	stub := record.Stub(rec, [32]byte{1})
	if bytes.Contains(stub, []byte(tooMuch)) {
		t.Fatalf("%s", stub)
	}
	if _, f := record.Parse(stub); f == nil {
		t.Error("a stub is taken for a record")
	}
	if got := states(p.push(stub)); !strings.HasPrefix(got[0], "refused") {
		t.Errorf("a stub was %v", got)
	}
	for name, bad := range map[string][]byte{
		"another order":   bytes.Replace(stub, []byte(`"kept":{`), []byte(`"kept": {`), 1),
		"a word too many": bytes.Replace(stub, []byte(`"kept":{`), []byte(`"kept":{"note":"x",`), 1),
		"no hash":         bytes.Replace(stub, []byte(`{"sealed":"A`), []byte(`{"sealed":"`), 1),
	} {
		if bytes.Equal(bad, stub) {
			t.Fatalf("%s: the stub was not changed", name)
		}
		if _, f := record.Stored(bad); f == nil {
			t.Errorf("%s: taken for a stub: %s", name, bad)
		}
	}
	if got, f := record.Stored(stub); f != nil || got.ID != id || got.Log != site || got.N != rec.N || got.Clock != rec.Clock || !got.At.Equal(rec.At) {
		t.Errorf("%+v %v", got, f)
	}
}
