package store

import (
	"fmt"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// The first records of every store are the shipped forms, limit sets and plans. Their ids, author, installation and
// times are fixed, so that their bytes and their leaves are equal everywhere and two stores can be compared. A newer
// program offers what it ships as a revision; it never changes these by itself.
var (
	shippedBy = record.NamedID("tripwell", "shipped")
	shippedAt = time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
)

// Subjects of forms, limit sets and plans are made from their names, so that revisions meet on every store.
func FormSubject(id string) string     { return record.NamedID("forms.set", id) }
func LimitSetSubject(id string) string { return record.NamedID("limits.set", id) }
func PlanSubject(id string) string     { return record.NamedID("plan.set", id) }
func UsualSubject() string             { return record.NamedID("usual.set", forms.UsualPlacesID) }

// ship appends the first records.
func (g *group) ship() error {
	c := forms.Shipped()
	n := int64(0)
	put := func(kind, subject, member string, v any) error {
		n++
		body, err := encodeBody(map[string]any{member: v})
		if err != nil {
			return err
		}
		raw := record.Write(record.Record{
			ID: record.NamedID("tripwell", "shipped", subject, "1"), Kind: kind, V: 1, Log: record.Org, Subject: subject,
			At: shippedAt, Clock: uint64(shippedAt.UnixMilli())<<16 + uint64(n), By: shippedBy, From: shippedBy, N: n, Body: body,
		})
		r, f := record.Parse(raw)
		if f != nil {
			return f
		}
		_, err = g.accept(r, stampFor(raw, record.Stamp{Received: shippedAt}))
		return err
	}
	for _, f := range c.Forms {
		if err := put("forms.set", FormSubject(f.ID), "form", f); err != nil {
			return fmt.Errorf("shipped form %s: %w", f.ID, err)
		}
	}
	for _, s := range c.LimitSets {
		if err := put("limits.set", LimitSetSubject(s.ID), "limits", s); err != nil {
			return fmt.Errorf("shipped limit set %s: %w", s.ID, err)
		}
	}
	for _, p := range c.Plans {
		if err := put("plan.set", PlanSubject(p.ID), "plan", p); err != nil {
			return fmt.Errorf("shipped plan %s: %w", p.ID, err)
		}
	}
	if err := put("usual.set", UsualSubject(), "usual", c.Usual); err != nil {
		return fmt.Errorf("shipped list of usual places: %w", err)
	}
	return nil
}
