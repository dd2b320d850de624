package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"

	"go.etcd.io/bbolt"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// CheckReport is what Check found. Problems are sentences; Gaps counts numbers n that never arrived (information: the
// phone may still hold them), Reused numbers used twice.
type CheckReport struct {
	Records, Logs, Refused int64
	Gaps, Reused           int64
	Sealed                 int64 // records whose bytes were dropped
	ViewHash               string
	Head                   string // signed note text, when one can be signed
	Problems               []string
}

// problemsMost bounds the list: a damaged file has one for every page.
const problemsMost = 50

func (c *CheckReport) problem(format string, args ...any) {
	if len(c.Problems) < problemsMost {
		c.Problems = append(c.Problems, fmt.Sprintf(format, args...))
	}
}

// Check reads the whole store as it stands at one moment: file structure, every record against its leaf and its place,
// every log's root, ids, n, quarantine, and the read models against a rebuild. It takes one read transaction to copy
// the file beside itself and works on the copy, so that pushes go on meanwhile; it needs as much room on the disk again.
func (s *Store) Check(ctx context.Context, progress func(done, total int64)) (CheckReport, error) {
	var report CheckReport
	if err := s.checkCopy(ctx, &report, progress); err != nil {
		return report, err
	}
	if len(report.Problems) == 0 {
		var e *Error
		var err error
		if report.Head, err = s.SignedHead(); errors.As(err, &e) && e.Code == "conflict" {
			report.problem("%s", e.Text)
		} else if err != nil {
			return report, err
		}
	}
	return report, nil
}

// checkCopy copies the book beside itself and checks the copy.
func (s *Store) checkCopy(ctx context.Context, report *CheckReport, progress func(done, total int64)) error {
	if progress == nil {
		progress = func(done, total int64) {}
	}
	path, err := s.imageBeside()
	if path != "" {
		defer os.Remove(path)
	}
	if err != nil {
		return err
	}
	return s.checkImage(ctx, path, report, progress)
}

func (s *Store) imageBeside() (path string, err error) {
	f, err := os.CreateTemp(s.dir, BookFile+".check-*")
	if err != nil {
		return "", fmt.Errorf("check: %w", err)
	}
	_, err = s.Backup(f)
	if err := errors.Join(err, f.Close()); err != nil {
		return f.Name(), &Error{Code: "unavailable", Text: "The check needs room for a copy of the book in " + s.dir + " and could not write it (" + err.Error() + "). Make room and check again."}
	}
	return f.Name(), nil
}

// checkImage checks the copy; its own read models are thrown away and computed anew in it.
func (s *Store) checkImage(ctx context.Context, path string, report *CheckReport, progress func(done, total int64)) (err error) {
	o := *bbolt.DefaultOptions
	o.FreelistType = bbolt.FreelistMapType
	o.NoSync, o.NoGrowSync, o.NoStatistics = true, true, true
	db, err := bbolt.Open(path, 0o600, &o)
	if err != nil {
		report.problem("The file cannot be opened: %v.", err)
		return nil
	}
	defer func() { err = errors.Join(err, db.Close()) }()
	var before map[string]string
	err = db.View(func(tx *bbolt.Tx) (err error) {
		for e := range tx.Check() {
			report.problem("The file's structure is damaged: %v.", e)
		}
		if len(report.Problems) > 0 {
			return nil // what follows would stumble over the same pages
		}
		c := &checker{tx: tx, report: report, logs: map[uint32]*proof.Edge{}, unsealed: map[string]string{}}
		total := int64(0)
		if k, _ := tx.Bucket(bktRec).Cursor().Last(); k != nil {
			total = int64(binary.BigEndian.Uint64(k))
		}
		return c.book(ctx, func(done int64) { progress(done, 2*total) })
	})
	if err != nil || len(report.Problems) > 0 {
		return err
	}
	if err := finish(db); err != nil { // read models are equal only with nothing left to do
		report.problem("The work that records left for later cannot be done: %v.", err)
		return nil
	}
	err = db.View(func(tx *bbolt.Tx) (err error) {
		report.ViewHash, before, err = viewHash(tx)
		return err
	})
	if err != nil {
		return err
	}
	if err := rebuild(ctx, s, db, func(done, total int64) { progress(total+done, 2*total) }); err != nil {
		if ctx.Err() != nil {
			return err
		}
		report.problem("The read models cannot be computed from the book: %v.", err)
		return nil
	}
	return db.View(func(tx *bbolt.Tx) error {
		_, after, err := viewHash(tx)
		for _, name := range derivedBuckets() {
			if before[string(name)] != after[string(name)] {
				report.problem("The read model %q is not what the book gives. Run rebuild.", name)
			}
		}
		return err
	})
}

// checker walks the book of one image.
type checker struct {
	tx       *bbolt.Tx
	report   *CheckReport
	logs     map[uint32]*proof.Edge
	unsealed map[string]string // records without bytes, by id → their log, until a record.sealed names them
}

func (c *checker) book(ctx context.Context, progress func(done int64)) error {
	ids, leaves := c.tx.Bucket(bktID), c.tx.Bucket(bktLog)
	names := map[uint32]string{}
	err := c.tx.Bucket(bktNames).ForEach(func(k, v []byte) error {
		names[binary.BigEndian.Uint32(k)] = string(v)
		return nil
	})
	if err != nil {
		return err
	}
	seq := uint64(0)
	cur := c.tx.Bucket(bktRec).Cursor()
	for k, v := cur.First(); k != nil; k, v = cur.Next() {
		if seq++; binary.BigEndian.Uint64(k) != seq {
			c.report.problem("Record %d of the book is missing.", seq)
			seq = binary.BigEndian.Uint64(k)
		}
		if seq%1000 == 0 {
			if err := ctx.Err(); err != nil {
				return err
			}
			progress(int64(seq))
		}
		c.record(seq, k, v, ids, leaves, names)
	}
	c.report.Records = int64(seq)
	for id := range c.unsealed {
		c.report.problem("The bytes of record %s were dropped, and no record says that it was sealed.", id)
	}
	c.totals(ids, leaves, names)
	c.quarantine()
	return nil
}

// record holds one record against its own rules, its id, its place and its leaf.
func (c *checker) record(seq uint64, k, v []byte, ids, leaves *bbolt.Bucket, names map[uint32]string) {
	rec, err := readRec(v)
	if err != nil {
		c.report.problem("Record %d of the book cannot be read: %v.", seq, err)
		return
	}
	r, f := record.Stored(rec.raw)
	if f != nil {
		c.report.problem("Record %d of the book breaks a rule: %s", seq, f.Text)
		return
	}
	if _, err := record.ParseStamp(rec.stamp); err != nil {
		c.report.problem("The stamp of record %s cannot be read.", r.ID)
	}
	if !bytes.Equal(ids.Get(idKey(r.ID)), k) {
		c.report.problem("The id %s does not lead to its record.", r.ID)
	}
	if names[rec.ord] != r.Log {
		c.report.problem("Record %s stands in log %q, not in its own.", r.ID, names[rec.ord])
	}
	edge := c.logs[rec.ord]
	if edge == nil {
		edge = &proof.Edge{}
		c.logs[rec.ord] = edge
	}
	hashes := edge.Append(leafOf(r, rec.stamp))
	if rec.pos != edge.Size {
		c.report.problem("Record %s says it stands at %d of its log; it stands at %d.", r.ID, rec.pos, edge.Size)
	}
	want := bytes.Clone(k)
	for _, h := range hashes {
		want = append(want, h[:]...)
	}
	if !bytes.Equal(leaves.Get(logKey(rec.ord, edge.Size)), want) {
		c.report.problem("The leaf of record %s at %d of log %s does not belong to its bytes.", r.ID, edge.Size, r.Log)
	}
	switch {
	case r.Sealed != "":
		c.report.Sealed++
		c.unsealed[r.ID] = r.Log
	case r.Kind == "record.refused":
		c.refusal(k, r)
	case r.Kind == "record.sealed" && c.unsealed[r.Subject] == r.Log:
		delete(c.unsealed, r.Subject)
	}
}

// totals holds what is stored of every log against what was counted, and looks for entries too many.
func (c *checker) totals(ids, leaves *bbolt.Bucket, names map[uint32]string) {
	if n := int64(ids.Stats().KeyN); n != c.report.Records {
		c.report.problem("There are %d ids for %d records.", n, c.report.Records)
	}
	if n := int64(leaves.Stats().KeyN); n != c.report.Records {
		c.report.problem("There are %d leaves for %d records.", n, c.report.Records)
	}
	logs := c.tx.Bucket(bktLogs)
	if n := logs.Stats().KeyN; n != len(c.logs) || len(names) != len(c.logs) {
		c.report.problem("There are %d logs and %d names for the %d logs of the records.", n, len(names), len(c.logs))
	}
	for ord, edge := range c.logs {
		c.report.Logs++
		want := append(logKey(ord, edge.Size), edge.Bytes()...)
		if !bytes.Equal(logs.Get([]byte(names[ord])), want) {
			c.report.problem("The end and root of log %s are not those of its %d records.", names[ord], edge.Size)
		}
	}
	counts := c.tx.Bucket(bktCount).Cursor()
	for k, v := counts.First(); k != nil; k, v = counts.Next() {
		c.report.Gaps += readRuns(v).gaps()
	}
	c.report.Reused = int64(c.tx.Bucket(bktReused).Stats().KeyN)
	slices.Sort(c.report.Problems)
}

func (c *checker) refusal(seq []byte, r *record.Record) {
	c.report.Refused++
	kept := c.tx.Bucket(bktQuar).Get(seq)
	if bytes.Equal(kept, sealedRefusal) {
		c.unsealed[r.ID] = r.Log
		return
	}
	var body refusedBody
	if err := json.Unmarshal(r.Body, &body); err != nil || len(kept) < 2 || len(kept) < 2+int(binary.BigEndian.Uint16(kept)) {
		c.report.problem("The bytes that record %s says were refused are not kept.", r.ID)
		return
	}
	sum := sha256.Sum256(kept[2+int(binary.BigEndian.Uint16(kept)):])
	if hex.EncodeToString(sum[:]) != body.SHA256 {
		c.report.problem("The bytes kept for the refusal %s are not those that were refused.", r.ID)
	}
	if !bytes.Equal(c.tx.Bucket(bktQuarSHA).Get(sum[:]), seq) {
		c.report.problem("The refused bytes of %s cannot be found by their hash.", r.ID)
	}
}

func (c *checker) quarantine() {
	if n := int64(c.tx.Bucket(bktQuar).Stats().KeyN); n != c.report.Refused {
		c.report.problem("The quarantine holds %d records; the book says %d were refused.", n, c.report.Refused)
	}
}

// Backup copies a consistent image of the file.
func (s *Store) Backup(w io.Writer) (n int64, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		n, err = tx.WriteTo(w)
		return err
	})
	if err != nil {
		return n, fmt.Errorf("copy the book: %w", err)
	}
	return n, nil
}

// leftovers are copies a check or a restore left behind when it was killed.
func leftovers(dir string) []string {
	found, _ := filepath.Glob(filepath.Join(dir, BookFile+".check-*")) // the patterns are good ones
	more, _ := filepath.Glob(filepath.Join(dir, restoring+"*"))
	return append(found, more...)
}
