package bundle

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"tripwell/static/chromium"
	"tripwell/store"
	"tripwell/store/record"
)

const sealReason = "The note named a tenant"

// sealedHouse gives a bundle taken before and one taken after a test and a refusal were sealed.
func sealedHouse(t *testing.T) (h *house, before, after []byte, entry string) {
	h = newHouse(t)
	h.work(20)
	before = h.bundle()
	entry = h.entries[0]
	_, err := h.Seal(context.Background(), everything, entry, sealReason)
	must(t, err)
	must(t, h.View(everything, func(v *store.View) error {
		for r, err := range v.LogRecords(h.site.ID, 1000) {
			if err != nil {
				return err
			}
			if bytes.Contains(r.Record, []byte(`"kind":"record.refused"`)) {
				h.entries = append(h.entries, string(r.Record[7:43]))
			}
		}
		return nil
	}))
	_, err = h.Seal(context.Background(), everything, h.entries[len(h.entries)-1], sealReason)
	must(t, err)
	return h, before, h.bundle(), entry
}

func TestVerify_SealedRecordsAreNamedAndStillProved(t *testing.T) {
	h, before, after, entry := sealedHouse(t)
	for name, earlier := range map[string][]byte{"no earlier head": nil, "the bundle before": before, "the head before": unpack(t, before)[headFile]} {
		r := verify(t, after, Check{Key: h.key(), Earlier: earlier})
		if len(r.Findings) > 0 {
			t.Errorf("%s: %s", name, r.text())
		}
		if notes := strings.Join(r.Notes, "\n"); !strings.Contains(notes, entry) || !strings.Contains(notes, sealReason) {
			t.Errorf("%s: the sealed test is not named: %s", name, notes)
		}
	}
	files := unpack(t, after)
	records := recordsName(h.site.ID)
	if bytes.Contains(files[refusalsFile], []byte(`{"form":7}`)) || !bytes.Contains(files[refusalsFile], []byte(`"sealed": true`)) {
		t.Errorf("the refused bytes are still there: %s", files[refusalsFile])
	}
	line := slices.IndexFunc(bytes.Split(files[records], []byte("\n")), func(b []byte) bool { return bytes.HasPrefix(b, []byte(`{"sealed":`)) })
	if line < 0 {
		t.Fatal("no stub stands in the log")
	}
	for name, c := range map[string]struct {
		bundle []byte
		want   string
	}{
		"another hash": {altered(t, after, records, lines(func(all [][]byte) [][]byte {
			all[line] = bytes.Replace(all[line], []byte(`{"sealed":"`), []byte(`{"sealed":"AAAA`), 1)
			copy(all[line][15:], all[line][19:])
			all[line] = all[line][:len(all[line])-4]
			return all
		})), "has been changed"},
		"a stub nobody sealed": {h.stubbed(after, 30), "no record of the log says that it was sealed"},
		"a stub that says more": {altered(t, after, records, func(old []byte) []byte {
			return bytes.Replace(old, []byte(`"kept":{`), []byte(`"kept":{"note":"passed",`), 1)
		}), "breaks a rule"},
		"a refusal that is only said to be sealed": {altered(t, before, refusalsFile, func(old []byte) []byte {
			var list []refusal
			must(t, json.Unmarshal(old, &list))
			list[0].Bytes, list[0].Sealed = nil, true
			out, err := json.Marshal(list)
			must(t, err)
			return out
		}), "are not those that were refused"},
	} {
		if got := verify(t, c.bundle, Check{Key: h.key()}).text(); !strings.Contains(got, c.want) {
			t.Errorf("%s: %q is not said: %s", name, c.want, got)
		}
	}
}

// stubbed puts a stub with the right leaf hash in the place of a record that nobody sealed.
func (h *house) stubbed(b []byte, place int) []byte {
	h.t.Helper()
	files := unpack(h.t, b)
	stamps := bytes.Split(files[stampsName(h.site.ID)], []byte("\n"))
	return altered(h.t, b, recordsName(h.site.ID), lines(func(all [][]byte) [][]byte {
		for i, line := range all {
			if i >= place && !bytes.HasPrefix(line, []byte(`{"sealed"`)) && bytes.Contains(line, []byte(`"kind":"entry.made"`)) {
				line = bytes.TrimSuffix(line, []byte("\n"))
				r, fault := record.Parse(line)
				if fault != nil {
					h.t.Fatal(fault)
				}
				all[i] = append(record.Stub(r, store.LeafOf(stamps[i], line)), '\n')
				return all
			}
		}
		h.t.Fatal("no test to hide")
		return nil
	}))
}

func TestPage_NamesSealedRecords(t *testing.T) {
	chromium.Need(t)
	h, before, after, entry := sealedHouse(t)
	dir := t.TempDir()
	page := filepath.Join(dir, pageFile)
	must(t, os.WriteFile(page, unpack(t, after)[pageFile], 0o600))
	w := chromium.Desk(t)
	for name, c := range map[string]struct {
		bundle []byte
		want   []string
	}{
		"sealed":   {after, []string{"Nothing is wrong with the records", entry, sealReason, "was signed over"}},
		"unsealed": {h.stubbed(after, 30), []string{"no record of the log says that it was sealed"}},
	} {
		path := filepath.Join(dir, name+".zip")
		must(t, os.WriteFile(path, c.bundle, 0o600))
		w.Open("file://" + page)
		w.Hand("#bundle", path)
		w.JS(`document.getElementById("earlier").value = ` + chromium.Quote(string(unpack(t, before)[headFile])))
		w.Tap("#go", "Check")
		w.Until("the answer", `!document.getElementById("go").disabled && document.getElementById("answer").children.length > 0 || document.getElementById("answer").textContent.startsWith("The file")`)
		for _, want := range c.want {
			if got := w.Text("#answer"); !strings.Contains(got, want) {
				t.Errorf("%s: the page does not say %q: %s", name, want, got)
			}
		}
	}
}
