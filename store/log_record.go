package store

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"iter"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// LogRecord is a record at its place in a log: the exact bytes of the record and of its stamp.
type LogRecord struct {
	Pos           int64
	Stamp, Record []byte // copies
}

var errPartOfLog = &Error{Code: "forbidden", Field: "from", Text: "Your access is for a period, and a whole log goes beyond it. Ask a manager to make the bundle for you."}

// LogRecords gives the first size records of a log in order; a log outside the scope is not_found.
func (v *View) LogRecords(log string, size int64) iter.Seq2[LogRecord, error] {
	return func(yield func(LogRecord, error) bool) {
		ord, _, err := v.readableLog(log)
		if err != nil {
			yield(LogRecord{}, err)
			return
		}
		recs, c, prefix := v.tx.Bucket(bktRec), v.tx.Bucket(bktLog).Cursor(), key32(ord)
		for k, leaf := c.Seek(logKey(ord, 1)); k != nil && bytes.HasPrefix(k, prefix); k, leaf = c.Next() {
			pos := int64(binary.BigEndian.Uint64(k[4:]))
			if pos > size {
				return
			}
			kept, err := readRec(recs.Get(leaf[:8]))
			if err != nil {
				err = fmt.Errorf("log %s at %d: %w", log, pos, err)
			}
			if !yield(LogRecord{pos, bytes.Clone(kept.stamp), bytes.Clone(kept.raw)}, err) || err != nil {
				return
			}
		}
	}
}

// OfficeRecord is a record of the office log with the proof that it stands there.
type OfficeRecord struct {
	LogRecord
	Proof []proof.Hash
}

// Grants gives what the office log says of who may do what, among its first size records, for the people of a bundle:
// without it nobody could tell which corrections are in force. It holds person and site ids, no names.
func (v *View) Grants(people map[string]bool, size int64) ([]OfficeRecord, error) {
	return v.officeRecords(size, func(kind, subject string) bool { return kind == "grant.set" && people[subject] })
}

// Restores gives the book.restored among the first size records of the office log: how far each log went in the backups that were
// put in the book's place.
func (v *View) Restores(size int64) ([]OfficeRecord, error) {
	return v.officeRecords(size, func(kind, _ string) bool { return kind == "book.restored" })
}

func (v *View) officeRecords(size int64, wanted func(kind, subject string) bool) (list []OfficeRecord, err error) {
	row := v.tx.Bucket(bktLogs).Get([]byte(record.Office))
	if row == nil {
		return nil, nil
	}
	ord, _, err := readLog(row)
	if err != nil {
		return nil, fmt.Errorf("office log: %w", err)
	}
	for pos := int64(1); pos <= size; pos++ {
		leaf := v.tx.Bucket(bktLog).Get(logKey(ord, pos))
		if len(leaf) < 8 {
			return nil, fmt.Errorf("office log at %d: its leaf is not there", pos)
		}
		kept, err := readRec(v.tx.Bucket(bktRec).Get(leaf[:8]))
		if err != nil {
			return nil, fmt.Errorf("office log at %d: %w", pos, err)
		}
		var r struct{ Kind, Subject string }
		if json.Unmarshal(kept.raw, &r) != nil || !wanted(r.Kind, r.Subject) {
			continue
		}
		p, err := proof.Inclusion(size, pos-1, storedHashes(v.tx, ord))
		if err != nil {
			return nil, fmt.Errorf("office log at %d: %w", pos, err)
		}
		list = append(list, OfficeRecord{LogRecord{pos, bytes.Clone(kept.stamp), bytes.Clone(kept.raw)}, p})
	}
	return list, nil
}
