package store

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// Phone is a device that sends for somebody, by a token of its own.
type Phone struct {
	Installation string
	Person       string // whoever signed in on it last
	Since        time.Time
	Heard        time.Time // when it last asked anything, to about ten minutes; zero = never
	Sent         []SentUpTo
}

// SentUpTo is how far a device counted in a log: whatever has a larger number was not sent.
type SentUpTo struct {
	Log  string
	Last int64
}

var errPhone = &Error{Code: "not_found", Field: "phone", Text: "There is no such phone with this person, or it was taken off already."}

// Phones lists the devices a person sends from, the newest first.
func (s *Store) Phones(person string) (list []Phone, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		list, err = readPhones(tx, person)
		return err
	})
	return list, err
}

func readPhones(tx *bbolt.Tx, person string) (list []Phone, err error) {
	err = tx.Bucket(bktToken).ForEach(func(_, v []byte) error {
		var b bearer
		if err := json.Unmarshal(v, &b); err != nil {
			return fmt.Errorf("token: %w", err)
		}
		if b.Person == person {
			list = append(list, Phone{Installation: b.Installation, Person: person, Since: b.Since, Heard: b.Heard, Sent: sentUpTo(tx, b.Installation)})
		}
		return nil
	})
	slices.SortFunc(list, func(a, b Phone) int {
		return cmp.Or(b.Since.Compare(a.Since), cmp.Compare(a.Installation, b.Installation))
	})
	return list, err
}

func sentUpTo(tx *bbolt.Tx, installation string) (sent []SentUpTo) {
	prefix := idKey(installation)
	c := tx.Bucket(bktCount).Cursor()
	for k, row := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, row = c.Next() {
		sent = append(sent, SentUpTo{string(tx.Bucket(bktNames).Get(k[16:])), readRuns(row).last()})
	}
	return sent
}

// RevokePhone takes a device off: its token opens nothing any more, and installation.revoked is appended. What it had not sent
// stays on it; whoever finds it hands that over as a file, or signs in on it again.
func (s *Store) RevokePhone(ctx context.Context, by, person, installation string) error {
	return s.do(ctx, 1, func(g *group) error {
		phones, err := readPhones(g.tx, person)
		if err != nil {
			return err
		}
		if !slices.ContainsFunc(phones, func(p Phone) bool { return p.Installation == installation }) {
			return errPhone
		}
		return g.revoke(by, installation)
	})
}

func (g *group) revoke(by, installation string) error {
	body := mustJSON(map[string]string{"installation": installation})
	if _, err := g.appendDrafts([]Draft{{Kind: "installation.revoked", Log: record.Office, Subject: installation, By: by, Body: body}}); err != nil {
		return err
	}
	inst := idKey(installation)
	token := bytes.Clone(g.tx.Bucket(bktInst).Get(inst))
	if token == nil {
		return nil
	}
	if err := g.drop(bktToken, token); err != nil {
		return err
	}
	return g.drop(bktInst, inst)
}

// heard notes that a device asked something, now and then.
func (s *Store) heard(key []byte) {
	_ = s.do(context.Background(), 1, func(g *group) error { // a busy store notes it the next time
		var b bearer
		if json.Unmarshal(g.tx.Bucket(bktToken).Get(key), &b) != nil {
			return nil
		}
		b.Heard = s.now()
		return g.putJSON(bktToken, key, b)
	})
}
