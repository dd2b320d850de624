package bundle

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"slices"

	"tripwell/store"
	"tripwell/store/proof"
	"tripwell/store/record"
)

// logFile is what was read of a log.
type logFile struct {
	leaves  []proof.Hash
	stamps  [][]byte
	refused map[string]int64 // SHA-256 of what was refused → place of the record.refused
	counts  map[string][]int64
}

func sumOf(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

func isRefusal(raw []byte) bool { return bytes.Contains(raw, []byte(`"record.refused"`)) }

// log reads a log's files, rebuilds its tree and holds it against the head. ids are those of the logs before.
func (v *verifier) log(l Line, ids map[string]string) (*logFile, error) {
	f := &logFile{refused: map[string]int64{}, counts: map[string][]int64{}}
	code := v.code(l.Log)
	bad := func(err error) *logFile {
		v.report.find(code, "%s.", sentence(err))
		v.sound = false
		return f
	}
	if err := v.lines(stampsName(l.Log), func(b []byte) error {
		f.stamps = append(f.stamps, bytes.Clone(b))
		return nil
	}); err != nil {
		return bad(err), nil
	}
	var names []string // ids, in the order of the file
	late := 0
	err := v.lines(recordsName(l.Log), func(b []byte) error {
		var stamp []byte
		if n := len(f.leaves); n < len(f.stamps) {
			stamp = f.stamps[n]
		}
		f.leaves = append(f.leaves, proof.LeafHash(record.Leaf(stamp, b)))
		id, wasLate := v.one(f, l.Log, code, b, stamp, ids)
		names = append(names, id)
		if wasLate {
			late++
		}
		return nil
	})
	if err != nil {
		return bad(err), nil
	}
	if len(f.stamps) > len(f.leaves) {
		v.report.find(code, "There are %d stamps for %d records.", len(f.stamps), len(f.leaves))
		v.sound = false
	}
	v.against(l, f, code, names)
	if late > 0 {
		v.report.note("Log %s: %d entries arrived more than seven days after they were made.", code, late)
	}
	v.gaps(f, code)
	return f, nil
}

// one looks at a record by itself.
func (v *verifier) one(f *logFile, log, code string, raw, stamp []byte, ids map[string]string) (id string, late bool) {
	place := len(f.leaves)
	r, fault := record.Parse(bytes.Clone(raw))
	if fault != nil {
		v.report.find(code, "The record at line %d breaks a rule: %s", place, fault.Text)
		v.sound = false
		return r.ID, false
	}
	if r.Log != log {
		v.report.find(code, "The record %s at line %d is of another log.", r.ID, place)
		v.sound = false
	}
	if other, twice := ids[r.ID]; twice {
		v.report.find(code, "The record %s stands twice: here and in log %s.", r.ID, other)
		v.sound = false
	}
	ids[r.ID] = code
	st, err := record.ParseStamp(stamp)
	if err != nil {
		v.report.find(code, "The stamp of record %s at line %d cannot be read.", r.ID, place)
		v.sound = false
		return r.ID, false
	}
	v.named = append(v.named, store.PhotosOf(r.Raw)...)
	f.counts[r.From] = append(f.counts[r.From], r.N)
	if sum := refusedSum(r.Raw); sum != "" {
		f.refused[sum] = int64(place)
	}
	return r.ID, r.Kind == "entry.made" && st.Earliest().Sub(r.At) > lateAfter
}

// against holds a log's records against its tree and the tree against the head, and names what differs.
func (v *verifier) against(l Line, f *logFile, code string, names []string) {
	line, covered := v.covered(l)
	if !covered {
		v.sound = false
	}
	var edge proof.Edge
	for _, h := range f.leaves {
		edge.Append(h)
	}
	if line.Size == edge.Size && line.Root == edge.Root() {
		if tree, err := v.tree(l.Log); err != nil || !slices.Equal(tree, f.leaves) {
			v.report.find(treeName(l.Log), "The list of leaf hashes is not that of the log's records. The records themselves are whole.")
		}
		return
	}
	v.sound = false
	tree, err := v.tree(l.Log)
	var of proof.Edge
	for _, h := range tree {
		of.Append(h)
	}
	if err != nil || of.Size != line.Size || of.Root() != line.Root {
		v.report.find(code, "The %d records give another root than the %d the head covers, and the list of leaf hashes does not help to say where.", edge.Size, line.Size)
		return
	}
	id := func(line int64) string {
		if n := names[line-1]; n != "" {
			return n
		}
		return "without a readable id"
	}
	for _, d := range proof.CompareLeaves(tree, f.leaves) {
		switch d.What {
		case proof.Changed:
			v.report.find(code, "The record at place %d (line %d, %s) or its stamp has been changed.", d.Place, d.Line, id(d.Line))
		case proof.Missing:
			v.report.find(code, "The record at place %d is missing.", d.Place)
		case proof.Foreign:
			v.report.find(code, "The record on line %d (%s) is none of this log: it was put in later.", d.Line, id(d.Line))
		case proof.Moved:
			v.report.find(code, "The record of place %d (%s) stands on line %d: the order has been changed.", d.Place, id(d.Line), d.Line)
		}
	}
}

// tree reads the list of leaf hashes.
func (v *verifier) tree(log string) (list []proof.Hash, err error) {
	err = v.lines(treeName(log), func(b []byte) error {
		h, err := hex.DecodeString(string(b))
		if err != nil || len(h) != len(proof.Hash{}) {
			return fmt.Errorf("the file %s holds a line that is no hash", treeName(log))
		}
		list = append(list, proof.Hash(h))
		return nil
	})
	return list, err
}

// gaps says which numbers of an installation never came. A phone may still hold them; a refusal has its own list.
func (v *verifier) gaps(f *logFile, code string) {
	from := make([]string, 0, len(f.counts))
	for id := range f.counts {
		from = append(from, id)
	}
	slices.Sort(from)
	for _, id := range from {
		seen := f.counts[id]
		slices.Sort(seen)
		missing, twice, last := []string{}, 0, int64(0)
		for _, n := range seen {
			switch {
			case n == last:
				twice++
			case n == last+2:
				missing = append(missing, fmt.Sprint(last+1))
			case n > last+2:
				missing = append(missing, fmt.Sprintf("%d to %d", last+1, n-1))
			}
			last = n
		}
		if len(missing) > 0 {
			v.report.note("Log %s: of installation %s the numbers %s never came, or were refused. They may still be on that phone.", code, id, join(missing, 20))
		}
		if twice > 0 {
			v.report.note("Log %s: installation %s used %d numbers twice: a phone that was copied or put back.", code, id, twice)
		}
	}
}

func join(list []string, most int) string {
	more := len(list) - most
	if more > 0 {
		list = list[:most]
	}
	text := ""
	for i, s := range list {
		if i > 0 {
			text += ", "
		}
		text += s
	}
	if more > 0 {
		text += fmt.Sprintf(" and %d more", more)
	}
	return text
}

// earlierHead shows that what was signed earlier still stands: the first records of each log give the root they gave then.
func (v *verifier) earlierHead() error {
	if len(v.ask.Earlier) == 0 {
		return nil
	}
	if bytes.HasPrefix(v.ask.Earlier, []byte("PK")) {
		return v.earlierBundle()
	}
	note := string(bytes.ReplaceAll(v.ask.Earlier, []byte("\r\n"), []byte("\n")))
	was, err := proof.Open(note, v.key)
	if err != nil {
		v.report.find("earlier head", "The earlier head is not signed by the key of this bundle: %v.", err)
		return nil
	}
	var known []earlier
	if err := v.json(earlierFile, &known); err != nil {
		v.report.find(earlierFile, "%s.", sentence(err))
		return nil
	}
	at := slices.IndexFunc(known, func(e earlier) bool { return e.Head == note })
	if at < 0 {
		if note == v.head {
			v.report.checked("the earlier head: it is the head of this bundle")
			return nil
		}
		v.report.find("earlier head", "The bundle knows nothing of the head of %s that you hold: it cannot show that what was signed then still stands.", was.Time.Format("2006-01-02 15:04:05 UTC"))
		return nil
	}
	lines := map[string]proof.Line{}
	for _, l := range known[at].Logs {
		line, err := l.line()
		if err == nil {
			err = was.Covers(line)
		}
		if err != nil {
			v.report.find(earlierFile, "The earlier head does not cover the log %s with %d records as the bundle states them.", v.code(l.Log), l.Size)
			continue
		}
		lines[l.Log] = line
	}
	v.stillStands(was, lines)
	return nil
}

// earlierBundle takes the earlier sizes and roots from a bundle that was taken then.
func (v *verifier) earlierBundle() error {
	r, err := open(bytes.NewReader(v.ask.Earlier), int64(len(v.ask.Earlier)))
	if err != nil {
		return err
	}
	head, err := r.read(headFile, 1<<16)
	if err != nil {
		return err
	}
	was, err := proof.Open(string(head), v.key)
	if err != nil {
		v.report.find("earlier bundle", "Its head is not signed by the key of this bundle: %v.", err)
		return nil
	}
	lines := map[string]proof.Line{}
	for _, l := range r.doc.Logs {
		line, err := l.line()
		if err == nil {
			err = was.Covers(line)
		}
		if err != nil {
			return errors.New("the earlier bundle does not agree with its own head: check it by itself first")
		}
		lines[l.Log] = line
	}
	v.stillStands(was, lines)
	return nil
}

// stillStands compares the first records of each log with what an earlier head covered.
func (v *verifier) stillStands(was proof.Signed, lines map[string]proof.Line) {
	if !sameStore(was.Origin, v.signed.Origin) {
		v.report.find("earlier head", "It is of %s; this bundle is of %s.", was.Origin, v.signed.Origin)
		return
	}
	restored := was.Origin != v.signed.Origin
	if restored {
		v.report.note("The store was put back from a backup since the earlier head was signed.")
	}
	when := was.Time.Format("2006-01-02 15:04:05 UTC")
	for _, l := range v.doc.Logs {
		line, known := lines[l.Log]
		f, code := v.logs[l.Log], v.code(l.Log)
		switch {
		case !known && len(f.stamps) > 0 && began(f.stamps[0], was):
			v.report.find(code, "The log had records when the head of %s was signed, and the bundle does not say which.", when)
		case !known:
			v.report.note("Log %s began after the head of %s.", code, when)
		case int64(len(f.leaves)) < line.Size:
			v.report.find(code, "The log held %d records when the head of %s was signed; now it holds %d.", line.Size, when, len(f.leaves))
		default:
			var edge proof.Edge
			for _, h := range f.leaves[:line.Size] {
				edge.Append(h)
			}
			if edge.Root() != line.Root {
				v.report.find(code, "The first %d records are not those that the head of %s was signed over: history was rewritten.", line.Size, when)
				continue
			}
			v.report.checked("log %s: the first %d records are those that the head of %s was signed over", code, line.Size, when)
		}
	}
}

// began reports whether a log's first record had been received when a head was signed.
func began(stamp []byte, was proof.Signed) bool {
	st, err := record.ParseStamp(stamp)
	return err == nil && !st.Received.After(was.Time)
}

// sameStore compares origins but for their epoch.
func sameStore(a, b string) bool {
	cut := func(s string) string {
		for i := len(s) - 1; i >= 0; i-- {
			if s[i] == '/' {
				return s[:i]
			}
		}
		return s
	}
	return cut(a) == cut(b)
}
