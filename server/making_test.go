package server

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"tripwell/export/bundle"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// heldTurns keeps every workbook waiting until the function it gives is called.
func (r *rig) heldTurns() (free func()) {
	for range makingsAtOne {
		r.server.makings.turn <- struct{}{}
	}
	return func() {
		for range makingsAtOne {
			<-r.server.makings.turn
		}
	}
}

// making gives the workbook that is kept for a person.
func (r *rig) making(p store.Person) *making {
	r.server.makings.mu.Lock()
	defer r.server.makings.mu.Unlock()
	for key, m := range r.server.makings.of {
		if key.person == p.ID {
			return m
		}
	}
	return nil
}

// temporaryFiles counts the workbooks that have a name in the temp folder.
func temporaryFiles(t *testing.T) int {
	t.Helper()
	names, err := filepath.Glob(filepath.Join(os.TempDir(), "tripwell-download-*"))
	must(t, err)
	return len(names)
}

func TestWorkbookMake_PageLooksAgainUntilTheFileIsThere(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir())
	r := newRig(t, 3)
	b := r.signIn(r.auditor)
	free := r.heldTurns()
	res := r.submit(b, "/workbook", url.Values{"site": {"KILN-LANE"}, "from": {"2026-01-01"}}.Encode())
	at := res.header.Get("Location")
	if res.status != http.StatusSeeOther || !strings.HasPrefix(at, "/workbook/") {
		t.Fatalf("got %d to %q", res.status, at)
	}
	page := r.open(b, at)
	if page.header.Get("Refresh") != "2; url="+at || !strings.Contains(page.body, "Others are being made before it.") || !strings.Contains(page.body, "KILN-LANE") {
		t.Errorf("waiting: refresh %q, page:\n%s", page.header.Get("Refresh"), page.body)
	}
	if res := r.open(b, at+"/tripwell-KILN-LANE.xlsx"); res.status != http.StatusNotFound {
		t.Errorf("a file that is not there yet: got %d", res.status)
	}
	free()
	<-r.making(r.auditor).ended
	page = r.open(b, at)
	file := at + "/tripwell-KILN-LANE.xlsx"
	if page.header.Get("Refresh") != "1; url="+file || !strings.Contains(page.body, "The workbook is ready.") || !strings.Contains(page.body, `href="`+file+`"`) {
		t.Errorf("ready: refresh %q, page:\n%s", page.header.Get("Refresh"), page.body)
	}
	if again := r.open(b, at); again.header.Get("Refresh") != "" {
		t.Error("the file is sent by itself a second time")
	}
	got := r.open(b, file)
	book, err := excelize.OpenReader(strings.NewReader(got.body))
	must(t, err)
	defer book.Close()
	if rows, err := book.GetRows("Register"); err != nil || len(rows) != 4 {
		t.Errorf("%d rows in the register, %v; want the heading and three devices", len(rows), err)
	}
	if n := temporaryFiles(t); n != 0 {
		t.Errorf("%d temporary files have names", n)
	}
	// Another person has no part in it, whatever address they try.
	for _, path := range []string{at, file} {
		if res := r.open(r.signIn(r.manager), path); res.status != http.StatusNotFound {
			t.Errorf("somebody else's %s: got %d, want 404", path, res.status)
		}
	}
	// Another workbook takes the place of the first.
	next := r.submit(b, "/workbook", "").header.Get("Location")
	if res := r.open(b, file); res.status != http.StatusNotFound || next == at {
		t.Errorf("the former workbook: got %d, want 404", res.status)
	}
	// Who lost the site may not have what was read before.
	<-r.making(r.auditor).ended
	r.auditor.Sites = nil
	_, err = r.store.PutPerson(context.Background(), r.manager.ID, r.auditor)
	must(t, err)
	if res := r.open(b, next); res.status == http.StatusOK {
		t.Error("the workbook of a site that was taken away is still shown")
	}
}

func TestWorkbookMake_SaysHowFarItIs(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	reached, goOn := make(chan struct{}), make(chan struct{})
	m := &making{kind: madeWorkbook, person: r.manager.ID, site: "All your sites", from: forms.NoDay, to: forms.NoDay, file: "tripwell-all.xlsx", scope: r.manager.Scope()}
	r.server.makings.begin(m, func(_ context.Context, _ io.Writer, progress func(done, total int) error) error {
		must(t, progress(1250, 4000))
		close(reached)
		<-goOn
		return progress(4000, 4000)
	})
	<-reached
	if page := r.open(b, "/workbook/"+m.id); !strings.Contains(page.body, count(1250)+" of about "+count(4000)+" tests are written.") || !strings.Contains(page.body, `<progress max="4000" value="1250"`) {
		t.Errorf("half way:\n%s", page.body)
	}
	// What is no longer wanted stops at its next word of progress, and says so nowhere.
	second := &making{kind: madeWorkbook, person: r.manager.ID, file: "tripwell-all.xlsx", scope: r.manager.Scope()}
	r.server.makings.begin(second, func(context.Context, io.Writer, func(done, total int) error) error { return fmt.Errorf("disk full") })
	close(goOn)
	<-m.ended
	m.mu.Lock()
	fault, out := m.err, m.out
	m.mu.Unlock()
	if fault == nil || out != nil {
		t.Errorf("the first went on: %v", fault)
	}
	<-second.ended
	if page := r.open(b, "/workbook/"+second.id); !strings.Contains(page.body, "could not be made") || !strings.Contains(page.body, "Reference") || page.header.Get("Refresh") != "" {
		t.Errorf("a fault:\n%s", page.body)
	}
}

// officeLog counts the records of the office's log.
func (r *rig) officeLog() (n int64) {
	must(r.t, r.store.View(ownerScope, func(v *store.View) error {
		heads, err := v.Logs()
		for _, head := range heads {
			if head.Log == record.Office {
				n = head.Size
			}
		}
		return err
	}))
	return n
}

func TestBundleMake_IsMadeBehindThePageAndProvesItself(t *testing.T) {
	r := newRig(t, 3)
	b := r.signIn(r.auditor)
	if page := r.open(b, "/downloads").body; !strings.Contains(page, `action="/bundle"`) || !strings.Contains(page, "the whole log of each site") {
		t.Error("the downloads page does not offer the bundle")
	}
	free, before := r.heldTurns(), r.officeLog()
	at := r.submit(b, "/bundle", url.Values{"site": {"KILN-LANE"}}.Encode()).header.Get("Location")
	if page := r.open(b, at); !strings.HasPrefix(at, "/bundle/") || page.header.Get("Refresh") != "2; url="+at || !strings.Contains(page.body, "The bundle is being made.") {
		t.Errorf("waiting at %q: refresh %q, page:\n%s", at, page.header.Get("Refresh"), page.body)
	}
	free()
	<-r.making(r.auditor).ended
	file := at + "/tripwell-KILN-LANE.zip"
	if page := r.open(b, at); page.header.Get("Refresh") != "1; url="+file || !strings.Contains(page.body, "The bundle is ready.") {
		t.Errorf("ready: refresh %q, page:\n%s", page.header.Get("Refresh"), page.body)
	}
	got := r.open(b, file)
	if got.header.Get("Content-Type") != zipKind {
		t.Errorf("sent as %q", got.header.Get("Content-Type"))
	}
	report, err := bundle.Verify(context.Background(), strings.NewReader(got.body), int64(len(got.body)), bundle.Check{})
	if must(t, err); len(report.Findings) != 0 || len(report.Checked) == 0 {
		t.Errorf("the bundle does not prove itself: %+v", report)
	}
	// What leaves the house is written down before it leaves, and so is that its page was opened.
	if n := r.officeLog(); n != before+2 {
		t.Errorf("%d records were made, want 2", n-before)
	}
}

func TestWorkbookMake_WrongPeriodComesBack(t *testing.T) {
	r := newRig(t, 1)
	res := r.submit(r.signIn(r.manager), "/workbook", url.Values{"site": {"KILN-LANE"}, "from": {"2026-05-02"}, "to": {"2026-05-01"}}.Encode())
	for _, want := range []string{"The period ends before it begins", `value="2026-05-02"`, `value="KILN-LANE" selected`} {
		if !strings.Contains(res.body, want) {
			t.Errorf("the page does not hold %q", want)
		}
	}
	if res.status != http.StatusUnprocessableEntity {
		t.Errorf("got %d, want 422", res.status)
	}
}

func TestMaking_IsStoppedAndLetGo(t *testing.T) {
	r := newRig(t, 2)
	b := r.signIn(r.auditor)
	free := r.heldTurns()
	at := r.submit(b, "/bundle", url.Values{"site": {"KILN-LANE"}, "from": {"2026-01-01"}, "to": {"2026-06-30"}}.Encode()).header.Get("Location")
	m := r.making(r.auditor)
	if list := r.open(b, "/downloads").body; !strings.Contains(list, "Made for you") || !strings.Contains(list, `href="`+at+`"`) || !strings.Contains(list, "Stop making it") {
		t.Errorf("the downloads page does not show what is being made:\n%s", list)
	}
	if res := r.submit(r.signIn(r.manager), at+"/stop", ""); res.status != http.StatusNotFound {
		t.Errorf("somebody else stops it: got %d, want 404", res.status)
	}
	if res := r.submit(b, at+"/stop", ""); res.status != http.StatusSeeOther || res.header.Get("Location") != "/downloads" {
		t.Errorf("stopped: got %d to %q", res.status, res.header.Get("Location"))
	}
	<-m.ended // it ends while others still have the turn
	free()
	if res := r.open(b, at); res.status != http.StatusNotFound {
		t.Errorf("after it was stopped: got %d, want 404", res.status)
	}
	// A workbook and a bundle are kept beside each other; either is let go of by its button.
	workbook := r.submit(b, "/workbook", "").header.Get("Location")
	made := r.submit(b, "/bundle", "").header.Get("Location")
	for _, m := range r.server.makings.ofPerson(r.auditor.ID) {
		<-m.ended
	}
	for _, path := range []string{workbook, made} {
		if res := r.open(b, path); !strings.Contains(res.body, " is ready.") || !strings.Contains(res.body, "Do not keep it") {
			t.Errorf("%s: got %s", path, res.body)
		}
	}
	r.submit(b, made+"/stop", "")
	if list := r.open(b, "/downloads").body; strings.Contains(list, made) || !strings.Contains(list, workbook) {
		t.Error("the bundle is still offered, or the workbook is not")
	}
}

func TestMaking_TakesNoMoreDiskThanThereIs(t *testing.T) {
	area := newMakingArea()
	defer area.close()
	area.room = 1000
	make := func(person string, size int) *making {
		m := &making{kind: madeWorkbook, person: person, file: "x"}
		area.begin(m, func(_ context.Context, w io.Writer, _ func(done, total int) error) error {
			_, err := w.Write(bytes.Repeat([]byte("x"), size))
			return err
		})
		<-m.ended
		return m
	}
	if m := make("a", 1001); m.err == nil || !strings.Contains(m.err.Error(), "larger than is kept here") {
		t.Errorf("too large: got %v", m.err)
	}
	make("a", 600)
	make("b", 300)
	make("c", 500)
	for person, want := range map[string]int{"a": 0, "b": 1, "c": 1} {
		if got := len(area.ofPerson(person)); got != want {
			t.Errorf("%s has %d files, want %d: the oldest makes room", person, got, want)
		}
	}
}
