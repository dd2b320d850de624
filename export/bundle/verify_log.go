package bundle

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"slices"
	"strings"

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
	files   []store.NamedFile
	ids     []string // of its records, by place
	sealed  []stub
	seals   map[string]string // id of a sealed record → the reason
}

// stub is a record whose bytes its owner had dropped.
type stub struct {
	place    int
	id, kind string
}

func sumOf(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

func isRefusal(raw []byte) bool { return bytes.Contains(raw, []byte(`"record.refused"`)) }

// log reads a log's files, rebuilds its tree and holds it against the head. ids are those of the logs before.
func (v *verifier) log(l Line, ids map[string]string) (*logFile, error) {
	f := &logFile{refused: map[string]int64{}, counts: map[string][]int64{}, seals: map[string]string{}}
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
		f.leaves = append(f.leaves, store.LeafOf(stamp, b))
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
	f.ids = names
	v.stubs(f, code)
	v.gaps(f, code)
	return f, nil
}

// one looks at a record by itself.
func (v *verifier) one(f *logFile, log, code string, raw, stamp []byte, ids map[string]string) (id string, late bool) {
	place := len(f.leaves)
	r, fault := record.Stored(bytes.Clone(raw))
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
	f.counts[r.From] = append(f.counts[r.From], r.N)
	if sum := refusedSum(r.Raw); sum != "" {
		f.refused[sum] = int64(place)
	}
	f.files = append(f.files, store.FilesOf(r.Raw)...)
	if r.Kind == "record.sealed" {
		var body struct{ Reason string }
		_ = json.Unmarshal(r.Body, &body) // its kind asks for the reason, and the record was found good
		f.seals[r.Subject] = body.Reason
	}
	if r.Sealed != "" {
		f.sealed = append(f.sealed, stub{place, r.ID, r.Kind})
	}
	return r.ID, r.Kind == "entry.made" && st.Earliest().Sub(r.At) > lateAfter
}

// stubs names the records of which only a leaf hash is left, and asks of each that a record of its log says so.
func (v *verifier) stubs(f *logFile, code string) {
	for _, s := range f.sealed {
		reason, said := f.seals[s.id]
		if !said {
			v.report.find(code, "Of the record %s at place %d only a leaf hash is here, and no record of the log says that it was sealed.", s.id, s.place)
			v.sound = false
			continue
		}
		v.report.note("Log %s: the record at place %d (%s %s) was sealed by the owner: %s. Its leaf hash stands in the tree; what it said can no longer be shown, and it never counts as passed.", code, s.place, s.kind, s.id, strings.TrimSuffix(reason, "."))
	}
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
