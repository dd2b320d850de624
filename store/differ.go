package store

import (
	"bytes"
	"cmp"
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"slices"
	"strconv"
	"time"

	"tripwell/store/record"
)

// A record with a named id (version 8: made of what it is about) that comes again with other values is answered
// `already` and the first stays. Its bytes are kept beside the book, once, for a manager to compare.

// keepDiffering keeps what came under a named id that is there already, where its sender might have written it and it
// says something else.
func (g *group) keepDiffering(from Sender, a arrival, had fresh, received time.Time) error {
	first, fault := record.Reread(had.raw)
	if fault != nil {
		return fmt.Errorf("record %s: %w", a.r.ID, fault)
	}
	if first.Kind == a.r.Kind && first.Log == a.r.Log && first.Subject == a.r.Subject && bytes.Equal(first.Body, a.r.Body) {
		return nil // taken in twice, at two times or places
	}
	if f, err := g.permit(from, a.r, received); f != nil || err != nil {
		return err
	}
	sum := sha256.Sum256(a.r.Raw)
	key, b := append(idKey(a.r.ID), sum[:]...), g.tx.Bucket(bktDiffer)
	if b.Get(key) != nil {
		return nil
	}
	v := binary.BigEndian.AppendUint64(make([]byte, 0, 8+len(a.r.Raw)), uint64(received.UnixMilli()))
	g.changes++
	if err := b.Put(key, append(v, a.r.Raw...)); err != nil {
		return fmt.Errorf("keep what differs from %s: %w", a.r.ID, err)
	}
	return nil
}

// Difference is a record that came under a named id the book holds already, and says something else. The first one
// stands.
type Difference struct {
	Record, Kind, Log, Subject string // of the one that stands
	By, From                   string // of the one that came later
	Received                   time.Time
	Values                     []DifferingValue
	Bytes                      []byte // the exact bytes that came later
}

// DifferingValue is one value of the body by its path, such as set.make; "" where one of them is silent.
type DifferingValue struct{ Path, Stands, Came string }

// Differences lists what came under named ids with other values, in the logs of the scope, newest first.
func (v *View) Differences() ([]Difference, error) {
	var all []Difference
	err := v.scan(bktDiffer, nil, func(key, row []byte) error {
		if len(key) != 48 || len(row) < 8 {
			return errPacked
		}
		seq, ok := v.seqOf(id16(key))
		if !ok {
			return errPacked
		}
		first, _, _, err := readBook(v.tx, seq)
		if err != nil {
			return err
		}
		if !v.scope.mayReadWhole(first.Log) {
			return nil
		}
		later, fault := record.Parse(bytes.Clone(row[8:]))
		if fault != nil {
			return fault
		}
		d := Difference{Record: first.ID, Kind: first.Kind, Log: first.Log, Subject: first.Subject, By: later.By, From: later.From,
			Received: time.UnixMilli(int64(binary.BigEndian.Uint64(row))).UTC(), Bytes: later.Raw}
		if d.Values, err = differing(first, later); err == nil && len(d.Values) > 0 {
			all = append(all, d)
		}
		return err
	})
	slices.SortFunc(all, func(a, b Difference) int {
		return cmp.Or(b.Received.Compare(a.Received), cmp.Compare(a.Record, b.Record), bytes.Compare(a.Bytes, b.Bytes))
	})
	return all, err
}

// differing compares two records value by value.
func differing(first, later *record.Record) ([]DifferingValue, error) {
	var out []DifferingValue
	add := func(path, stands, came string) {
		if stands != came {
			out = append(out, DifferingValue{path, stands, came})
		}
	}
	add("kind", first.Kind, later.Kind)
	add("log", first.Log, later.Log)
	add("subject", first.Subject, later.Subject)
	stands, came := map[string]string{}, map[string]string{}
	for _, one := range []struct {
		r    *record.Record
		flat map[string]string
	}{{first, stands}, {later, came}} {
		d := json.NewDecoder(bytes.NewReader(one.r.Body))
		d.UseNumber() // 4.50 stays 4.50
		var body any
		if err := d.Decode(&body); err != nil {
			return nil, fmt.Errorf("body of %s: %w", one.r.ID, err)
		}
		flatten("", body, one.flat)
	}
	delete(stands, "seen") // what the author knew of is no value
	delete(came, "seen")
	paths := map[string]bool{}
	for path := range stands {
		paths[path] = true
	}
	for path := range came {
		paths[path] = true
	}
	list := make([]string, 0, len(paths))
	for path := range paths {
		list = append(list, path)
	}
	slices.Sort(list)
	for _, path := range list {
		add(path, stands[path], came[path])
	}
	return out, nil
}

// flatten writes the single values of a body under their paths.
func flatten(path string, v any, into map[string]string) {
	under := func(name string) string {
		if path == "" {
			return name
		}
		return path + "." + name
	}
	switch v := v.(type) {
	case map[string]any:
		for name, one := range v {
			flatten(under(name), one, into)
		}
	case []any:
		for i, one := range v {
			flatten(under(strconv.Itoa(i+1)), one, into)
		}
	case nil:
	default:
		into[path] = fmt.Sprint(v)
	}
}
