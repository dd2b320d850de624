package bundle

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// earlierLine is what an earlier head covers of a log.
type earlierLine struct {
	proof.Line
	kept *kept // of a head signed before a restore; nil: the book has all of it still
}

// headTime is how moments of heads are said.
const headTime = "2006-01-02 15:04:05 UTC"

// earlierHead shows that what was signed earlier still stands: the first records of each log give the root they gave then.
func (v *verifier) earlierHead() error {
	if len(v.ask.Earlier) == 0 {
		return nil
	}
	if bytes.HasPrefix(v.ask.Earlier, []byte("PK")) {
		return v.earlierBundle()
	}
	note := strings.TrimSpace(string(bytes.ReplaceAll(v.ask.Earlier, []byte("\r\n"), []byte("\n")))) + "\n"
	was, err := proof.Open(note, v.key)
	if err != nil {
		v.report.find("earlier head", "The earlier head is not signed by the key of this bundle: %v.", err)
		return nil
	}
	if note == v.head {
		v.report.checked("the earlier head: it is the head of this bundle")
		return nil
	}
	lines, known := v.linesUnder(note, was)
	if !known {
		why := "it cannot show that what was signed then still stands"
		if r := v.restoredAfter(was); r != nil && r.sizes != nil {
			why = "the store was put back from a backup on " + r.when + ", and what was signed between that backup and then is not known to it any more"
		}
		v.report.find("earlier head", "The bundle knows nothing of the head of %s that you hold: %s.", was.Time.Format(headTime), why)
		return nil
	}
	v.stillStands(was, lines, nil)
	return nil
}

// linesUnder finds what earlier.json proves of a head.
func (v *verifier) linesUnder(note string, was proof.Signed) (lines map[string]earlierLine, known bool) {
	var list []earlier
	if err := v.json(earlierFile, &list); err != nil {
		v.report.find(earlierFile, "%s.", sentence(err))
		return nil, false
	}
	at := slices.IndexFunc(list, func(e earlier) bool { return e.Head == note })
	if at < 0 {
		return nil, false
	}
	lines = map[string]earlierLine{}
	for _, l := range list[at].Logs {
		line, err := l.line()
		if err == nil {
			err = was.Covers(line)
		}
		if err != nil {
			v.report.find(earlierFile, "The earlier head does not cover the log %s with %d records as the bundle states them.", v.code(l.Log), l.Size)
			continue
		}
		lines[l.Log] = earlierLine{line, l.Kept}
	}
	return lines, true
}

// earlierBundle takes the earlier sizes, roots and records from a bundle that was taken then.
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
	known, _ := v.linesUnder(string(head), was)
	lines := map[string]earlierLine{}
	for _, l := range r.doc.Logs {
		line, err := l.line()
		if err == nil {
			err = was.Covers(line)
		}
		if err != nil {
			return errors.New("the earlier bundle does not agree with its own head: check it by itself first")
		}
		lines[l.Log] = earlierLine{line, known[l.Log].kept}
	}
	v.stillStands(was, lines, r)
	return nil
}

// stillStands compares the first records of each log with what an earlier head covered. then is the bundle taken then, if that is
// what was given.
func (v *verifier) stillStands(was proof.Signed, lines map[string]earlierLine, then *reader) {
	if !sameStore(was.Origin, v.signed.Origin) {
		v.report.find("earlier head", "It is of %s; this bundle is of %s.", was.Origin, v.signed.Origin)
		return
	}
	back := v.restoredAfter(was)
	if back != nil {
		v.report.note("The store was put back from a backup on %s, after the earlier head was signed.", back.when)
	}
	when := was.Time.Format(headTime)
	for _, l := range v.doc.Logs {
		line, known := lines[l.Log]
		f, code := v.logs[l.Log], v.code(l.Log)
		left := line.Size // how much of what was signed a restore left in the book
		if back != nil && back.sizes != nil {
			left = min(left, back.sizes[l.Log])
		}
		if line.kept != nil {
			left = min(left, line.kept.Size)
		}
		switch {
		case !known && len(f.stamps) > 0 && began(f.stamps[0], was):
			v.report.find(code, "The log had records when the head of %s was signed, and the bundle does not say which.", when)
		case !known:
			v.report.note("Log %s began after the head of %s.", code, when)
		case int64(len(f.leaves)) < left:
			v.report.find(code, "The log held %d records when the head of %s was signed; now it holds %d.", line.Size, when, len(f.leaves))
		case left < line.Size:
			v.leftBehind(l.Log, line, left, when, then)
		case rootOf(f.leaves[:line.Size]) != line.Root:
			v.report.find(code, "The first %d records are not those that the head of %s was signed over: history was rewritten.", line.Size, when)
		default:
			v.report.checked("log %s: the first %d records are those that the head of %s was signed over", code, line.Size, when)
		}
	}
}

func rootOf(leaves []proof.Hash) proof.Hash {
	var edge proof.Edge
	for _, h := range leaves {
		edge.Append(h)
	}
	return edge.Root()
}

// leftBehind shows, of a log that went further under an earlier head than a restore brought back, that what was brought back is what
// was signed, and names the rest.
func (v *verifier) leftBehind(log string, line earlierLine, left int64, when string, then *reader) {
	f, code := v.logs[log], v.code(log)
	if then != nil {
		v.heldAgainst(log, line, left, when, then)
		return
	}
	if line.kept == nil || line.kept.Size != left {
		v.report.find(code, "%d records were signed over by the head of %s, and the backup that took the book's place held %d. The bundle cannot show that those are the same; a bundle taken then can.", line.Size, when, left)
		return
	}
	p, err := hashes(line.kept.Proof)
	if err == nil && left > 0 {
		err = proof.CheckConsistency(p, line.Size, line.Root, left, rootOf(f.leaves[:left]))
	}
	if err != nil {
		v.report.find(code, "The first %d records are not those that the head of %s was signed over: history was rewritten.", left, when)
		return
	}
	v.report.checked("log %s: the first %d records, which the backup brought back, are among those that the head of %s was signed over", code, left, when)
	v.report.find(code, "%s that the head of %s was signed over lay beyond the backup and are not shown to be in the book again. A bundle taken then can name them.", places(left+1, line.Size), when)
}

func places(from, to int64) string {
	if from == to {
		return "The record of place " + strconv.FormatInt(from, 10)
	}
	return fmt.Sprintf("The records of places %d to %d", from, to)
}

// heldAgainst does the same with the records of a bundle that was taken then: each is looked for among those that are here now.
func (v *verifier) heldAgainst(log string, line earlierLine, left int64, when string, then *reader) {
	f, code := v.logs[log], v.code(log)
	records, err := then.logLeaves(log)
	if err != nil || int64(len(records)) != line.Size || rootOf(leavesOf(records)) != line.Root {
		v.report.find("earlier bundle", "Its records of the log %s do not agree with its own head: check it by itself first.", code)
		return
	}
	for i, r := range records[:left] {
		if r.leaf != f.leaves[i] {
			v.report.find(code, "The record at place %d is not the one that the head of %s was signed over: history was rewritten.", i+1, when)
			return
		}
	}
	v.report.checked("log %s: the first %d records, which the backup brought back, are those that the head of %s was signed over", code, left, when)
	beyond := map[string]leafRecord{}
	for _, r := range records[left:] {
		beyond[r.sum] = r
	}
	if err := v.lines(recordsName(log), func(b []byte) error { delete(beyond, sumOf(b)); return nil }); err != nil {
		v.report.find(code, "%s.", sentence(err))
		return
	}
	if again := int(line.Size-left) - len(beyond); again > 0 {
		v.report.note("Log %s: %d records that lay beyond the backup came again, from the phones that kept them.", code, again)
	}
	for i, r := range records[left:] {
		if _, lost := beyond[r.sum]; lost {
			v.report.find(code, "The record %s (%s, place %d when the head of %s was signed) lay beyond the backup that took the book's place, and is not in the book again.", r.id, r.kind, left+int64(i)+1, when)
		}
	}
}

// leafRecord is a record of a bundle that was taken earlier.
type leafRecord struct {
	leaf          proof.Hash
	sum, id, kind string
}

func leavesOf(list []leafRecord) []proof.Hash {
	out := make([]proof.Hash, len(list))
	for i, r := range list {
		out[i] = r.leaf
	}
	return out
}

// logLeaves reads the records of a log.
func (r *reader) logLeaves(log string) (list []leafRecord, err error) {
	var stamps [][]byte
	if err := r.lines(stampsName(log), func(b []byte) error { stamps = append(stamps, bytes.Clone(b)); return nil }); err != nil {
		return nil, err
	}
	err = r.lines(recordsName(log), func(b []byte) error {
		if len(list) == len(stamps) {
			return errors.New("there are fewer stamps than records")
		}
		var said struct{ ID, Kind string }
		if err := json.Unmarshal(b, &said); err != nil {
			return err
		}
		list = append(list, leafRecord{proof.LeafHash(record.Leaf(stamps[len(list)], b)), sumOf(b), said.ID, said.Kind})
		return nil
	})
	return list, err
}

// restored reads where a backup took the book's place.
func (v *verifier) restored() error {
	var list []officeRecord
	if err := v.json(restoresFile, &list); err != nil {
		v.report.find(restoresFile, "%s.", sentence(err))
		return nil
	}
	for _, r := range v.inOffice(restoresFile, "restore", list) {
		var said struct {
			At   string
			Kind string
			Body struct {
				Epoch int
				Logs  []struct {
					Log  string
					Size int64
				}
			}
		}
		if err := json.Unmarshal([]byte(r.Record), &said); err != nil || said.Kind != "book.restored" {
			v.report.find(restoresFile, "The record at place %d of the office log says nothing of a restore.", r.Pos)
			continue
		}
		at := slices.IndexFunc(v.restores, func(r restored) bool { return r.epoch == said.Body.Epoch })
		if at < 0 {
			at = len(v.restores)
			v.restores = append(v.restores, restored{said.Body.Epoch, said.At, map[string]int64{}})
		}
		for _, l := range said.Body.Logs {
			v.restores[at].sizes[l.Log] = l.Size
		}
	}
	return nil
}

// restoredAfter sums the restores up that came after a head was signed: the least that each log was brought back to. It is nil where
// there was none; without sizes where the bundle does not say.
func (v *verifier) restoredAfter(was proof.Signed) *restored {
	then, now := epochOf(was.Origin), epochOf(v.signed.Origin)
	if then == now {
		return nil
	}
	sum := &restored{when: "a day the bundle does not state"}
	for _, r := range v.restores {
		if r.epoch <= then || r.epoch > now {
			continue
		}
		if sum.sizes == nil {
			sum.sizes = map[string]int64{}
			for _, l := range v.doc.Logs {
				sum.sizes[l.Log] = l.Size
			}
		}
		sum.when = r.when
		for _, l := range v.doc.Logs {
			sum.sizes[l.Log] = min(sum.sizes[l.Log], r.sizes[l.Log])
		}
	}
	return sum
}

// began reports whether a log's first record had been received when a head was signed.
func began(stamp []byte, was proof.Signed) bool {
	st, err := record.ParseStamp(stamp)
	return err == nil && !st.Received.After(was.Time)
}

// cutOrigin takes an origin apart: the store, and its epoch.
func cutOrigin(origin string) (store, epoch string) {
	i := strings.LastIndexByte(origin, '/')
	if i < 0 {
		return origin, ""
	}
	return origin[:i], origin[i+1:]
}

func epochOf(origin string) int {
	_, text := cutOrigin(origin)
	n, err := strconv.Atoi(text)
	if err != nil {
		return -1
	}
	return n
}

func sameStore(a, b string) bool {
	x, _ := cutOrigin(a)
	y, _ := cutOrigin(b)
	return x == y
}
