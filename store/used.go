package store

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
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

// usesLooked bounds how far back a page looks in the office log.
const usesLooked = 50_000

// Uses lists what a person did with their access, the newest first, at most so many; for whoever may read the office log.
func (v *View) Uses(person string, most int) (out []Used, err error) {
	if !v.scope.mayRead(record.Office) {
		return nil, nil
	}
	row := v.tx.Bucket(bktLogs).Get([]byte(record.Office))
	if row == nil {
		return nil, nil
	}
	ord, _, err := readLog(row)
	if err != nil {
		return nil, fmt.Errorf("office log: %w", err)
	}
	recs, c, prefix := v.tx.Bucket(bktRec), v.tx.Bucket(bktLog).Cursor(), key32(ord)
	needle := []byte(`"subject":"` + person + `"`)
	k, leaf := c.Seek(key32(ord + 1))
	if k == nil {
		k, leaf = c.Last()
	} else {
		k, leaf = c.Prev()
	}
	for looked := 0; k != nil && bytes.HasPrefix(k, prefix) && len(out) < most && looked < usesLooked; k, leaf = c.Prev() {
		looked++
		kept, err := readRec(recs.Get(leaf[:8]))
		if err != nil {
			return nil, fmt.Errorf("office log: %w", err)
		}
		if !bytes.Contains(kept.raw, needle) {
			continue
		}
		var r struct {
			Kind string
			At   time.Time
			Body struct{ What, Site, From, To string }
		}
		if err := json.Unmarshal(kept.raw, &r); err != nil {
			return nil, fmt.Errorf("office log: %w", err)
		}
		switch r.Kind {
		case "signed.in", "access.used", "export.taken":
			out = append(out, Used{At: r.At, Kind: r.Kind, What: r.Body.What, Site: r.Body.Site, From: r.Body.From, To: r.Body.To})
		}
	}
	slices.SortStableFunc(out, func(a, b Used) int {
		return cmp.Or(b.At.Compare(a.At), strings.Compare(a.What, b.What))
	})
	return out, nil
}
