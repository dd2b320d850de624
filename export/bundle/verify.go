package bundle

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"iter"
	"slices"
	"strings"
	"time"

	"tripwell/store"
	"tripwell/store/proof"
	"tripwell/store/record"
)

// Check says what a bundle is to be held against.
type Check struct {
	Key      string // public key, as text; "" = the one in the bundle is trusted and named
	Earlier  []byte // a signed head, or a bundle, taken earlier; nil = none
	Progress func(step string)
}

// Report is what the check of a bundle found, in sentences.
type Report struct {
	Findings []Finding // empty: everything was found as it should be
	More     int       // findings beyond those listed
	Notes    []string  // what is true and worth knowing, and no fault
	Checked  []string  // what was held against what, with figures
}

// Finding is one thing that is not as it should be.
type Finding struct{ Where, Text string }

// findingsMost bounds the list; a log that was cut loses a line for every record.
const findingsMost = 500

func (r *Report) find(where, format string, args ...any) {
	if len(r.Findings) < findingsMost {
		r.Findings = append(r.Findings, Finding{where, fmt.Sprintf(format, args...)})
		return
	}
	r.More++
}

// take adds the findings of a part.
func (r *Report) take(part Report) {
	for _, f := range part.Findings {
		r.find(f.Where, "%s", f.Text)
	}
	r.More += part.More
}

func (r *Report) note(format string, args ...any) {
	r.Notes = append(r.Notes, fmt.Sprintf(format, args...))
}

func (r *Report) checked(format string, args ...any) {
	r.Checked = append(r.Checked, fmt.Sprintf(format, args...))
}

// restored is a book.restored: the epoch that began with it, and how far each log went in the backup.
type restored struct {
	epoch int
	when  string
	sizes map[string]int64
}

// verifier is one check under way.
type verifier struct {
	*reader
	ctx    context.Context
	ask    Check
	report *Report
	key    string
	signed proof.Signed
	head   string // its text
	logs   map[string]*logFile
	sound  bool // records are whole, so the workbook can be made anew from them

	refusals []refusal
	people   []person
	grants   []officeRecord
	restores []restored
}

// Verify checks a bundle. An error means that it could not be checked at all; whatever is wrong with it stands in the
// report.
func Verify(ctx context.Context, in io.ReaderAt, size int64, ask Check) (Report, error) {
	var report Report
	v, err := newVerifier(ctx, in, size, ask, &report)
	if err != nil {
		return report, err
	}
	return report, v.run(append(v.proofs(), step{"earlier head", v.earlierHead}, step{"photos and certificates", v.namedFiles}, step{"workbook", v.workbook}))
}

// step is a part of a check.
type step struct {
	name string
	do   func() error
}

func newVerifier(ctx context.Context, in io.ReaderAt, size int64, ask Check, report *Report) (*verifier, error) {
	r, err := open(in, size)
	if err != nil {
		return nil, err
	}
	if ask.Progress == nil {
		ask.Progress = func(string) {}
	}
	return &verifier{reader: r, ctx: ctx, ask: ask, report: report, logs: map[string]*logFile{}, sound: true}, nil
}

// proofs are the steps that hold the records against the head.
func (v *verifier) proofs() []step {
	return []step{{"files", v.list}, {"key and head", v.headAndKey}, {"records", v.records}, {"refusals", v.refused}, {"grants", v.granted}, {"restores", v.restored}}
}

func (v *verifier) run(steps []step) error {
	for _, s := range steps {
		if err := v.ctx.Err(); err != nil {
			return err
		}
		v.ask.Progress(s.name)
		if err := s.do(); err != nil {
			return fmt.Errorf("check of %s: %w", s.name, err)
		}
	}
	return nil
}

// list holds the files against the list in bundle.json. Those that have a better check of their own are only looked for.
func (v *verifier) list() error {
	listed := map[string]bool{docFile: true}
	for _, f := range v.doc.Files {
		listed[f.Name] = true
		if v.files[f.Name] == nil {
			v.report.find(f.Name, "This file is in the list of the bundle and is missing.")
			continue
		}
		if f.Name == workbookFile || strings.HasPrefix(f.Name, "records/") || strings.HasPrefix(f.Name, "stamps/") || strings.HasPrefix(f.Name, "tree/") {
			continue
		}
		sum, err := v.sum(f.Name)
		if err != nil || sum != f.SHA256 {
			v.report.find(f.Name, "This file is not the one that was put in: its SHA-256 is not the one in the list of the bundle.")
		}
	}
	for name := range v.files {
		if !listed[name] {
			v.report.find(name, "This file is not in the list of the bundle; somebody put it in later.")
		}
	}
	v.report.checked("%d files against the list of the bundle", len(v.doc.Files))
	return nil
}

// headAndKey checks the signature.
func (v *verifier) headAndKey() error {
	inside, err := v.read(keyFile, 1<<12)
	if err != nil {
		v.report.find(keyFile, "%s.", sentence(err))
	}
	v.key = strings.TrimSpace(string(inside))
	if v.ask.Key == "" {
		v.report.note("The key in the bundle was trusted as it stands. Its fingerprint is %s: compare it with the one you were given another way, and name that key with --key the next time.", proof.Fingerprint(v.key))
	} else if given := strings.TrimSpace(v.ask.Key); given != v.key {
		v.report.find(keyFile, "The bundle carries another key than the one you named: the fingerprint of yours is %s, that of the bundle %s.", proof.Fingerprint(given), proof.Fingerprint(v.key))
		v.key = given
	}
	head, err := v.read(headFile, 1<<16)
	if err != nil {
		v.report.find(headFile, "%s.", sentence(err))
		return nil
	}
	v.head = string(head)
	if v.signed, err = proof.Open(v.head, v.key); err != nil {
		v.report.find(headFile, "The head is not signed by this key: %v. Nothing below it can be proved.", err)
		return nil
	}
	if want := fmt.Sprintf("tripwell/%s/%s/%d", v.doc.Org, v.doc.Store, v.doc.Epoch); v.signed.Origin != want {
		v.report.find(headFile, "The head is of %s; the bundle says it is of %s.", v.signed.Origin, want)
	}
	v.report.checked("the head of %s, signed by the key with the fingerprint %s", v.signed.Time.Format("2006-01-02 15:04:05 UTC"), proof.Fingerprint(v.key))
	return nil
}

func sentence(err error) string {
	t := err.Error()
	return strings.ToUpper(t[:1]) + t[1:]
}

// code names a log for people: the code of its site.
func (v *verifier) code(log string) string {
	for _, s := range v.doc.Sites {
		if s.ID == log {
			return s.Code
		}
	}
	return log
}

// records checks every log of the bundle.
func (v *verifier) records() error {
	for _, s := range v.doc.Sites {
		if !slices.ContainsFunc(v.doc.Logs, func(l Line) bool { return l.Log == s.ID }) {
			v.report.find(docFile, "The bundle names the site %s and holds no log of it.", s.Code)
			v.sound = false
		}
	}
	if !slices.ContainsFunc(v.doc.Logs, func(l Line) bool { return l.Log == record.Org }) {
		v.report.find(docFile, "The bundle holds no log of the organisation.")
		v.sound = false
	}
	v.complete()
	ids := map[string]string{}
	total := 0
	for _, l := range v.doc.Logs {
		if err := v.ctx.Err(); err != nil {
			return err
		}
		f, err := v.log(l, ids)
		if err != nil {
			return err
		}
		v.logs[l.Log] = f
		total += len(f.leaves)
	}
	v.report.checked("%d records of %d logs against the head: bytes, places and number", total, len(v.doc.Logs))
	return nil
}

// complete holds the logs of the bundle against the number the head covers: bundle.json is not signed, and "all sites" is a
// claim that somebody could leave standing when he takes a site out.
func (v *verifier) complete() {
	named := map[string]bool{}
	for _, l := range v.doc.Logs {
		if named[l.Log] {
			v.report.find(docFile, "The bundle names the log %s twice.", v.code(l.Log))
			v.sound = false
		}
		named[l.Log] = true
	}
	held := int64(len(named))
	if v.doc.Office != nil {
		held++
	}
	switch {
	case v.signed.Logs == 0 || held == v.signed.Logs:
	case v.doc.AllSites:
		v.report.find(docFile, "The bundle says it holds all sites, but the head covers %d logs and only %d of them are here.", v.signed.Logs, held)
	default:
		v.report.note("The head covers %d logs, of which this bundle holds %d: it is a part of the organisation, as its cover says.", v.signed.Logs, held)
	}
}

// refused holds refusals.json against the record.refused of the logs: nothing can hide in quarantine.
func (v *verifier) refused() error {
	if err := v.json(refusalsFile, &v.refusals); err != nil {
		v.report.find(refusalsFile, "%s.", sentence(err))
	}
	listed := map[string]bool{}
	for _, r := range v.refusals {
		listed[r.Log+" "+r.SHA256] = true
		if f := v.logs[r.Log]; f == nil || f.refused[r.SHA256] == 0 {
			v.report.find(refusalsFile, "The list names a refusal (SHA-256 %s) that no log of the bundle knows.", short(r.SHA256))
			v.sound = false
		}
		if r.Sealed && len(r.Bytes) == 0 && v.sealedRefusal(r) {
			continue
		}
		if sumOf(r.Bytes) != r.SHA256 {
			v.report.find(refusalsFile, "The bytes of the refused record %s are not those that were refused.", r.Record)
			v.sound = false
		}
	}
	n := 0
	for _, l := range v.doc.Logs {
		for sum, pos := range v.logs[l.Log].refused {
			n++
			if !listed[l.Log+" "+sum] {
				v.report.find(refusalsFile, "The log %s says at place %d that a record was refused (SHA-256 %s), and the list of refusals leaves it out.", v.code(l.Log), pos, short(sum))
				v.sound = false
			}
		}
	}
	if n > 0 {
		v.report.note("%d records were refused and are kept with the reason in %s.", n, refusalsFile)
	}
	v.report.checked("%d refusals against the logs", n)
	return nil
}

// sealedRefusal reports whether the log says that the bytes of a refused record were dropped.
func (v *verifier) sealedRefusal(r refusal) bool {
	f := v.logs[r.Log]
	if f == nil || f.refused[r.SHA256] == 0 {
		return false
	}
	_, sealed := f.seals[f.ids[f.refused[r.SHA256]-1]]
	return sealed
}

func short(sum string) string { return sum[:min(12, len(sum))] }

// granted checks that each grant stands in the office log, whose other records are not in the bundle.
func (v *verifier) granted() error {
	if err := v.json(grantsFile, &v.grants); err != nil {
		v.report.find(grantsFile, "%s.", sentence(err))
		v.sound = false
	}
	if err := v.json(peopleFile, &v.people); err != nil {
		v.report.find(peopleFile, "%s.", sentence(err))
		v.sound = false
	}
	v.inOffice(grantsFile, "grant", v.grants)
	return nil
}

// inOffice holds records of the office log against the root the head covers; it gives those that stand there.
func (v *verifier) inOffice(file, what string, list []officeRecord) (good []officeRecord) {
	if len(list) == 0 {
		return nil
	}
	if v.doc.Office == nil {
		v.report.find(file, "The bundle gives %ss and no line of the log they stand in.", what)
		v.sound = false
		return nil
	}
	root, ok := v.covered(*v.doc.Office)
	if !ok {
		v.sound = false
		return nil
	}
	for _, g := range list {
		p, err := hashes(g.Proof)
		if err == nil {
			err = proof.CheckInclusion(p, root.Size, root.Root, g.Pos-1, proof.LeafHash(record.Leaf([]byte(g.Stamp), []byte(g.Record))))
		}
		if err != nil {
			v.report.find(file, "The %s at place %d of the office log is not the one that stands there.", what, g.Pos)
			v.sound = false
			continue
		}
		good = append(good, g)
	}
	v.report.checked("%d %ss against the log of the office", len(list), what)
	return good
}

// covered checks that the head covers a log at the size and root a line states.
func (v *verifier) covered(l Line) (proof.Line, bool) {
	line, err := l.line()
	if err == nil {
		err = v.signed.Covers(line)
	}
	if err != nil {
		v.report.find(docFile, "The head does not cover the log %s with %d records as the bundle states them.", v.code(l.Log), l.Size)
		return line, false
	}
	return line, true
}

// inOrder gives the records of the bundle in the order the workbook was made from.
func (v *verifier) inOrder() iter.Seq2[store.Replayed, error] {
	logs := []logSource{{records: func(yield func(store.Replayed, error) bool) {
		for _, g := range v.grants {
			if !yield(store.Replayed{Stamp: []byte(g.Stamp), Record: []byte(g.Record)}, nil) {
				return
			}
		}
	}}}
	for _, l := range v.doc.Logs {
		logs = append(logs, logSource{records: func(yield func(store.Replayed, error) bool) {
			stamps := v.logs[l.Log].stamps
			i := 0
			stop := errors.New("stop")
			err := v.lines(recordsName(l.Log), func(b []byte) error {
				one := store.Replayed{Stamp: stamps[i], Record: bytes.Clone(b)}
				i++
				if !yield(one, nil) {
					return stop
				}
				return nil
			})
			if err != nil && !errors.Is(err, stop) {
				yield(store.Replayed{}, err)
			}
		}})
	}
	kept := make([]store.Refusal, len(v.refusals))
	for i, r := range v.refusals {
		kept[i] = store.Refusal{Record: r.Record, SHA256: r.SHA256, From: r.From, N: r.N, Code: r.Code, Text: r.Text, Log: r.Log, Received: r.Received, Bytes: r.Bytes}
	}
	return attach(merged(logs), kept)
}

// lateAfter is from when on an entry is said to have arrived late.
const lateAfter = 7 * 24 * time.Hour
