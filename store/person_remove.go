package store

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"

	"tripwell/store/record"
)

// RemovePerson deletes everything the directory knows of a person: name, contact, what they sign in with, sessions, links,
// phones, calendar and digest. The book goes on holding their random id, which then names nobody. Access ends first, by
// records like any change of it. What the file still held of it in free pages is overwritten.
func (s *Store) RemovePerson(ctx context.Context, by, id string) error {
	if by = cmp.Or(by, s.id); by == id {
		return &Error{Code: "conflict", Field: "person", Text: "Nobody removes themselves. Ask another manager of all sites."}
	}
	err := s.do(ctx, 2, func(g *group) error {
		p, err := readPerson(g.tx, id)
		if err != nil {
			return err
		}
		if p.Active {
			if err := g.endAccess(by, p); err != nil {
				return err
			}
		}
		if err := g.dropPerson(by, id); err != nil {
			return err
		}
		return g.noteWipe(wipeLeft{})
	})
	if err != nil {
		return err
	}
	_, err = s.Wipe(ctx)
	return err
}

func (g *group) endAccess(by string, p Person) error {
	if p.Role == "manager" && p.All {
		if last, err := lastManager(g.tx, p.ID); err != nil || last {
			return cmp.Or(err, error(&Error{Code: "conflict", Field: "person", Text: "This is the last manager of all sites. Make somebody else one first, so that the store can still be run."}))
		}
	}
	_, err := g.appendDrafts([]Draft{
		{Kind: "person.set", Log: record.Org, Subject: p.ID, By: by, Body: mustJSON(map[string]any{"role": p.Role, "active": false})},
		{Kind: "grant.set", Log: record.Office, Subject: p.ID, By: by, Body: mustJSON(map[string]any{"role": p.Role, "all": p.All, "sites": append([]string{}, p.Sites...), "active": false})},
	})
	return err
}

// dropPerson deletes a person's rows of the directory.
func (g *group) dropPerson(by, id string) error {
	phones, err := readPhones(g.tx, id)
	if err != nil {
		return err
	}
	for _, p := range phones {
		if err := g.revoke(by, p.Installation); err != nil {
			return err
		}
	}
	for _, bucket := range [][]byte{bktPerson, bktSecret, bktDigest} {
		if err := g.drop(bucket, idKey(id)); err != nil {
			return err
		}
	}
	for _, bucket := range [][]byte{bktSession, bktLink} {
		if err := g.dropOf(bucket, id); err != nil {
			return err
		}
	}
	return g.dropFeeds(id)
}

// dropOf deletes the rows of a bucket that say they are a person's.
func (g *group) dropOf(bucket []byte, person string) error {
	var keys [][]byte
	err := g.tx.Bucket(bucket).ForEach(func(k, v []byte) error {
		var row struct {
			Person string `json:"person"`
		}
		if json.Unmarshal(v, &row) != nil || row.Person == person {
			keys = append(keys, bytes.Clone(k))
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("rows of %s: %w", bucket, err)
	}
	for _, k := range keys {
		if err := g.drop(bucket, k); err != nil {
			return err
		}
	}
	return nil
}
