package store

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"iter"
	"slices"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// NoteUsed appends that a read-only person opened something: access.used, once a person, day (UTC), kind of page and site.
func (s *Store) NoteUsed(ctx context.Context, person string, on forms.Day, what, site string) error {
	body := map[string]any{"on": on.String(), "what": what}
	if site != "" {
		body["site"] = site
	}
	id := record.NamedID("access.used", s.id, person, on.String(), what, site)
	_, err := s.Append(ctx, Draft{ID: id, Kind: "access.used", Log: record.Office, Subject: person, By: person, Body: body})
	return err
}

// Used is one thing a person did with their access: signed in, opened something, or took something.
type Used struct {
	At         time.Time
	Kind       string // signed.in | access.used | export.taken
	What, Site string
	From, To   string // of an export
}

// officeLooked bounds how far back a page looks in the office log.
const officeLooked = 50_000

// officeAbout gives the records of the office log about a person, the newest first, as far back as a page looks. Whoever calls it
// has asked whether the scope may see them.
func (v *View) officeAbout(person string) iter.Seq2[*record.Record, error] {
	return func(yield func(*record.Record, error) bool) {
		row := v.tx.Bucket(bktLogs).Get([]byte(record.Office))
		if row == nil {
			return
		}
		ord, edge, err := readLog(row)
		needle := []byte(`"subject":"` + person + `"`)
		for pos := edge.Size; err == nil && pos > max(0, edge.Size-officeLooked); pos-- {
			var r *record.Record
			if r, err = v.officeRecord(ord, pos, needle); err == nil && r != nil && r.Subject == person && !yield(r, nil) {
				return
			}
		}
		if err != nil {
			yield(nil, fmt.Errorf("office log: %w", err))
		}
	}
}

// officeRecord reads a record by its place; nil where its bytes do not hold a text.
func (v *View) officeRecord(ord uint32, pos int64, text []byte) (*record.Record, error) {
	leaf := v.tx.Bucket(bktLog).Get(logKey(ord, pos))
	if len(leaf) < 8 {
		return nil, fmt.Errorf("the leaf at %d is not there", pos)
	}
	k, err := readRec(v.tx.Bucket(bktRec).Get(leaf[:8]))
	if err != nil || !bytes.Contains(k.raw, text) {
		return nil, err
	}
	r, f := record.Reread(k.raw)
	if f != nil {
		return nil, f
	}
	return r, nil
}

// Uses lists what a person did with their access, the newest first, at most so many; for whoever may read the office log.
func (v *View) Uses(person string, most int) (out []Used, err error) {
	if !v.scope.mayRead(record.Office) {
		return nil, nil
	}
	for r, err := range v.officeAbout(person) {
		if err != nil {
			return nil, err
		}
		switch r.Kind {
		case "signed.in", "access.used", "export.taken":
			var body struct{ What, Site, From, To string }
			if err := json.Unmarshal(r.Body, &body); err != nil {
				return nil, fmt.Errorf("office log: %s: %w", r.ID, err)
			}
			out = append(out, Used{At: r.At, Kind: r.Kind, What: body.What, Site: body.Site, From: body.From, To: body.To})
		}
		if len(out) == most {
			break
		}
	}
	slices.SortStableFunc(out, func(a, b Used) int {
		return cmp.Or(b.At.Compare(a.At), strings.Compare(a.What, b.What))
	})
	return out, nil
}

// signInsMost is how many sign-ins are shown of a person.
const signInsMost = 20

// SignIns gives when a person last signed in, the newest first, as the office log has it. Everybody may ask for their own.
func (v *View) SignIns(person string) (times []time.Time, err error) {
	if v.scope.Person != person && !v.scope.mayRead(record.Office) {
		return nil, errNoEntry
	}
	for r, err := range v.officeAbout(person) {
		if err != nil {
			return nil, err
		}
		if r.Kind == "signed.in" {
			times = append(times, r.At)
		}
		if len(times) == signInsMost {
			break
		}
	}
	slices.SortFunc(times, func(a, b time.Time) int { return b.Compare(a) })
	return times, nil
}
