package bundle

import (
	"archive/zip"
	"bufio"
	"context"
	"crypto/sha256"
	_ "embed"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"slices"
	"time"

	"github.com/klauspost/compress/flate"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/proof"
	"tripwell/store/record"
)

// deflateLevel is that of workbooks: about as small as the usual level in less than half the time.
const deflateLevel = 5

//go:embed READ-ME.txt
var readmeText string

//go:embed CHECKING.txt
var stepsText string

//go:embed verify.html
var pageText string

// writer is a bundle being written.
type writer struct {
	ctx    context.Context
	zip    *zip.Writer
	view   *store.View
	ask    Ask
	doc    Doc
	head   proof.Head
	signed string // the head's signed text

	people   map[string]store.Person // of the directory, by id
	named    map[string]bool         // people the records name
	files    []store.NamedFile
	done     int64
	total    int64
	foldable int64
}

// Write signs a head, and writes everything it covers of a scope as a bundle. Nothing is written that the scope may not
// see, but for the sizes that the head's proofs need.
func Write(ctx context.Context, out io.Writer, s *store.Store, scope store.Scope, ask Ask) error {
	note, err := s.SignedHead()
	if err != nil {
		return err
	}
	key, err := s.HeadKey()
	if err != nil {
		return err
	}
	people, err := s.People()
	if err != nil {
		return err
	}
	signed, err := proof.Open(note, key)
	if err != nil {
		return fmt.Errorf("bundle: %w", err)
	}
	if ask.Progress == nil {
		ask.Progress = func(done, total int64) {}
	}
	w := &writer{ctx: ctx, zip: zip.NewWriter(out), ask: ask, people: map[string]store.Person{}, named: map[string]bool{}}
	w.zip.RegisterCompressor(zip.Deflate, func(out io.Writer) (io.WriteCloser, error) { return flate.NewWriter(out, deflateLevel) })
	for _, p := range people {
		w.people[p.ID] = p
	}
	w.doc = Doc{Tripwell: "bundle", V: 1, Organisation: ask.Organisation, Org: s.Org(), Store: s.ID(), Epoch: s.Epoch(), Demo: s.Demo(),
		Judge: forms.JudgeVersion, AsOf: s.Now().UTC().Truncate(time.Millisecond), From: ask.From.String(), To: ask.To.String(), AllSites: scope.All && ask.Site == ""}
	return s.View(scope, func(v *store.View) error {
		w.view, w.signed = v, note
		if err := w.write(note, key, signed); err != nil {
			return fmt.Errorf("bundle: %w", err)
		}
		return w.zip.Close()
	})
}

func (w *writer) write(note, key string, signed proof.Signed) error {
	if err := w.choose(note, signed); err != nil {
		return err
	}
	for _, f := range []struct{ name, text string }{{readmeFile, readmeText}, {stepsFile, stepsText}, {pageFile, pageText}, {headFile, note}, {keyFile, key + "\n"}} {
		if err := w.file(f.name, func(out io.Writer) error { _, err := io.WriteString(out, f.text); return err }); err != nil {
			return err
		}
	}
	for _, l := range w.doc.Logs {
		if err := w.log(l); err != nil {
			return err
		}
	}
	for _, step := range []func() error{w.refusals, w.grants, w.restores, w.earlier, w.peopleStated, w.namedFiles, w.workbook} {
		if err := step(); err != nil {
			return err
		}
	}
	return w.json(docFile, func() any { return w.doc })
}

// choose fixes what the bundle covers: the logs as the head has them.
func (w *writer) choose(note string, signed proof.Signed) error {
	kept, err := w.view.KeptHeads()
	if err != nil {
		return err
	}
	at := slices.IndexFunc(kept, func(h store.KeptHead) bool { return h.Note == note })
	if at < 0 {
		return errors.New("the head that was just signed is not among those kept")
	}
	if w.head, err = w.view.HeadAt(kept[at].Seq); err != nil {
		return err
	}
	w.head.Origin, w.head.Time = signed.Origin, signed.Time
	sites, err := w.view.Sites()
	if err != nil {
		return err
	}
	if w.ask.Site != "" {
		one, err := w.view.Site(w.ask.Site)
		if err != nil {
			return err
		}
		sites = []store.Site{one}
	}
	logs := []string{}
	for _, s := range sites {
		if slices.ContainsFunc(w.head.Logs, func(l proof.LogRoot) bool { return l.Log == s.ID }) {
			w.doc.Sites = append(w.doc.Sites, Site{s.ID, s.Code, s.Name})
			logs = append(logs, s.ID)
		}
	}
	lines, err := w.head.Lines()
	if err != nil {
		return err
	}
	for _, log := range append(logs, record.Org) {
		l, ok := lines[log]
		if !ok {
			return fmt.Errorf("the head covers no log %s", log)
		}
		w.doc.Logs = append(w.doc.Logs, lineOf(l))
		w.total += 3 * l.Size // written, read again, computed
		w.foldable += l.Size
	}
	if l, ok := lines[record.Office]; ok { // a new store has none yet
		office := lineOf(l)
		w.doc.Office = &office
	}
	return nil
}

// file writes one file and notes its hash.
func (w *writer) file(name string, fill func(io.Writer) error) error {
	if err := w.ctx.Err(); err != nil {
		return err
	}
	out, err := w.zip.CreateHeader(&zip.FileHeader{Name: name, Method: zip.Deflate, Modified: w.doc.AsOf})
	if err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	sum, count := sha256.New(), &counter{}
	buffered := bufio.NewWriterSize(io.MultiWriter(out, sum, count), 1<<16)
	if err := errors.Join(fill(buffered), buffered.Flush()); err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	w.doc.Files = append(w.doc.Files, File{name, count.n, hex.EncodeToString(sum.Sum(nil))})
	return nil
}

type counter struct{ n int64 }

func (c *counter) Write(b []byte) (int, error) { c.n += int64(len(b)); return len(b), nil }

func (w *writer) json(name string, value func() any) error {
	return w.file(name, func(out io.Writer) error {
		e := json.NewEncoder(out)
		e.SetEscapeHTML(false)
		e.SetIndent("", " ")
		return e.Encode(value())
	})
}

// log writes the three files of a log.
func (w *writer) log(l Line) error {
	lines := func(name string, line func(store.LogRecord) []byte) error {
		return w.file(name, func(out io.Writer) error {
			for r, err := range w.view.LogRecords(l.Log, l.Size) {
				if err != nil {
					return err
				}
				if _, err := out.Write(append(line(r), '\n')); err != nil {
					return err
				}
				if r.Pos%1000 == 0 && w.ctx.Err() != nil {
					return w.ctx.Err()
				}
			}
			return nil
		})
	}
	err := lines(recordsName(l.Log), func(r store.LogRecord) []byte {
		w.note(r)
		w.progress()
		return r.Record
	})
	if err == nil {
		err = lines(stampsName(l.Log), func(r store.LogRecord) []byte { return r.Stamp })
	}
	if err == nil {
		err = lines(treeName(l.Log), func(r store.LogRecord) []byte {
			h := store.LeafOf(r.Stamp, r.Record)
			return hex.AppendEncode(nil, h[:])
		})
	}
	return err
}

func (w *writer) progress() {
	if w.done++; w.done%1000 == 0 {
		w.ask.Progress(w.done, w.total)
	}
}

// note looks a record through for people and files.
func (w *writer) note(r store.LogRecord) {
	for id := range quotedIDs(r.Record) {
		if _, known := w.people[string(id)]; known {
			w.named[string(id)] = true
		}
	}
	w.files = append(w.files, store.FilesOf(r.Record)...)
}

// quotedIDs gives what stands between quotes and is as long as an id.
func quotedIDs(raw []byte) func(yield func([]byte) bool) {
	return func(yield func([]byte) bool) {
		const length = 36
		for i := 0; i+length+1 < len(raw); i++ {
			if raw[i] == '"' && raw[i+length+1] == '"' && raw[i+9] == '-' {
				if !yield(raw[i+1 : i+1+length]) {
					return
				}
			}
		}
	}
}

// ours reports whether a log is in the bundle.
func (w *writer) ours(log string) bool {
	return slices.ContainsFunc(w.doc.Logs, func(l Line) bool { return l.Log == log })
}

func (w *writer) refused() (list []store.Refusal, err error) {
	all, err := w.view.Refused()
	for _, r := range slices.Backward(all) {
		if w.ours(r.Log) && !r.Received.After(w.head.Time) {
			list = append(list, r)
		}
	}
	return list, err
}

func (w *writer) refusals() error {
	list, err := w.refused()
	if err != nil {
		return err
	}
	out := []refusal{}
	for _, r := range list {
		out = append(out, refusal{r.Log, r.Record, r.SHA256, r.From, r.N, r.Code, r.Text, r.Received, r.Bytes, r.Sealed})
	}
	return w.json(refusalsFile, func() any { return out })
}

func (w *writer) granted() ([]store.OfficeRecord, error) {
	if w.doc.Office == nil {
		return nil, nil
	}
	return w.view.Grants(w.named, w.doc.Office.Size)
}

func (w *writer) grants() error {
	list, err := w.granted()
	if err != nil {
		return err
	}
	return w.json(grantsFile, func() any { return ofOffice(list) })
}

func ofOffice(list []store.OfficeRecord) []officeRecord {
	out := []officeRecord{}
	for _, g := range list {
		out = append(out, officeRecord{g.Pos, string(g.Stamp), string(g.Record), texts(g.Proof)})
	}
	return out
}

// stated are the people whom the records name, or who may see one of the sites.
func (w *writer) stated() []person {
	out := []person{}
	for _, id := range slices.Sorted(maps.Keys(w.people)) {
		p := w.people[id]
		sees := p.Active && (p.All || slices.ContainsFunc(w.doc.Sites, func(s Site) bool { return slices.Contains(p.Sites, s.ID) }))
		if w.named[id] || sees {
			out = append(out, personOf(p))
		}
	}
	return out
}

func (w *writer) peopleStated() error {
	return w.json(peopleFile, func() any { return w.stated() })
}

// workbook makes a store of what stands in the bundle and writes its workbook, so that no cell can say what the records
// do not.
func (w *writer) workbook() error {
	refusals, err := w.refused()
	if err != nil {
		return err
	}
	grants, err := w.granted()
	if err != nil {
		return err
	}
	logs := []logSource{{records: func(yield func(store.Replayed, error) bool) {
		for _, g := range grants {
			if !yield(store.Replayed{Stamp: g.Stamp, Record: g.Record}, nil) {
				return
			}
		}
	}}}
	for _, l := range w.doc.Logs {
		logs = append(logs, logSource{records: func(yield func(store.Replayed, error) bool) {
			for r, err := range w.view.LogRecords(l.Log, l.Size) {
				w.progress()
				if !yield(store.Replayed{Stamp: r.Stamp, Record: r.Record}, err) || err != nil {
					return
				}
			}
		}})
	}
	return w.file(workbookFile, func(out io.Writer) error {
		return remake(w.ctx, out, w.doc, w.signed, w.stated(), attach(merged(logs), refusals), false, func(done, _ int64) { w.ask.Progress(w.total-w.foldable+done, w.total) })
	})
}
