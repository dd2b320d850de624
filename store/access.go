package store

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/base64"
	"encoding/json"
	"fmt"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// Only the SHA-256 of a token is kept, so a copy of the file signs nobody in.
type link struct {
	Person string    `json:"person"`
	Until  time.Time `json:"until"`
	Use    string    `json:"use,omitempty"`   // what it is good for: linkOpened, linkTyped, linkHalf
	Wrong  int       `json:"wrong,omitempty"` // second steps that failed
}

// What a link is good for; none stands for another.
const (
	linkOpened = ""     // opened in a browser
	linkTyped  = "code" // a short code
	linkHalf   = "half" // its password was right, the second step is still to come
)

type bearer struct {
	Installation string    `json:"installation"`
	Person       string    `json:"person"`
	Since        time.Time `json:"since"`
	Heard        time.Time `json:"heard,omitzero"`
}

// newToken draws 256 bits and gives them as text with the key they are kept under.
func newToken() (token string, key []byte) {
	var b [32]byte
	_, _ = rand.Read(b[:]) // never fails (crypto/rand)
	token = base64.RawURLEncoding.EncodeToString(b[:])
	return token, tokenKey(token)
}

func tokenKey(token string) []byte {
	sum := sha256.Sum256([]byte(token))
	return sum[:]
}

var (
	errLink    = &Error{Code: "not_found", Field: "link", Text: "This sign-in link is used up or too old. Ask a manager for a new one."}
	errSession = &Error{Code: "not_signed_in", Text: "You are not signed in, or were away too long. Ask a manager for a sign-in link."}
	errBearer  = &Error{Code: "not_signed_in", Text: "This device is not known here any more. What it holds is safe; sign in again to send it."}
)

// NewLink makes a one-time sign-in link token for a person; only its SHA-256 is kept.
func (s *Store) NewLink(person string, valid time.Duration) (token string, err error) {
	token, key := newToken()
	if err := s.putLink(person, key, link{Until: s.now().Add(valid)}); err != nil {
		return "", err
	}
	return token, nil
}

func (s *Store) putLink(person string, key []byte, l link) error {
	return s.do(context.Background(), 1, func(g *group) error {
		p, err := readPerson(g.tx, person)
		if err != nil {
			return err
		}
		if !p.Active {
			return &Error{Code: "conflict", Field: "person", Text: p.Name + " may not sign in any more. Make them active first."}
		}
		if err := g.sweepLinks(); err != nil {
			return err
		}
		if l.Use == linkTyped {
			if err := g.dropCodes(p.ID); err != nil {
				return err
			}
		}
		l.Person = p.ID
		return g.putJSON(bktLink, key, l)
	})
}

// sweepLinks deletes links that are too old.
func (g *group) sweepLinks() error {
	var old [][]byte
	err := g.tx.Bucket(bktLink).ForEach(func(k, v []byte) error {
		var l link
		if err := json.Unmarshal(v, &l); err != nil || l.Until.Before(g.s.now()) {
			old = append(old, append([]byte(nil), k...))
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("sweep links: %w", err)
	}
	for _, k := range old {
		if err := g.drop(bktLink, k); err != nil {
			return err
		}
	}
	return nil
}

// LinkPerson says whom a link would sign in; it does not spend it.
func (s *Store) LinkPerson(token string) (p Person, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		p, err = s.linkOf(tx, token, linkOpened)
		return err
	})
	return p, err
}

// SpendLink signs in: the link is gone, a session begins, signed.in is appended, all in one transaction.
func (s *Store) SpendLink(ctx context.Context, token string, from Arrival) (session string, err error) {
	from.How = ByLink
	return s.spend(ctx, token, linkOpened, from)
}

func (s *Store) spend(ctx context.Context, token, use string, from Arrival) (session string, err error) {
	return s.signIn(ctx, from, func(g *group) (Person, error) {
		p, err := s.linkOf(g.tx, token, use)
		if err != nil {
			return p, err
		}
		return p, g.drop(bktLink, tokenKey(token))
	})
}

// Enrol gives an installation a bearer token for the signed-in person; appends installation.enrolled. Enrolling again
// replaces the token.
func (s *Store) Enrol(ctx context.Context, person, installation string) (token string, err error) {
	if !record.IsID(installation) {
		return "", &Error{Code: "invalid", Field: "installation", Text: "The device's id is no UUID of version 7 in lower case. Load the page again."}
	}
	if installation == s.id {
		return "", &Error{Code: "conflict", Field: "installation", Text: "This id is the store's own. The device must draw another."}
	}
	token, key := newToken()
	err = s.do(ctx, 1, func(g *group) error {
		if g.tx.Bucket(bktPerson).Get(idKey(installation)) != nil {
			// What a store makes for its owner is by the store itself; no device may look like that.
			return &Error{Code: "conflict", Field: "installation", Text: "This id is a person's. The device must draw another."}
		}
		p, err := readPerson(g.tx, person)
		if err != nil {
			return err
		}
		if !p.mayEnter(s.now()) {
			return errSession
		}
		body := mustJSON(map[string]string{"installation": installation})
		if _, err := g.appendDrafts([]Draft{{Kind: "installation.enrolled", Log: record.Office, Subject: installation, By: p.ID, Body: body}}); err != nil {
			return err
		}
		inst := idKey(installation)
		if old := g.tx.Bucket(bktInst).Get(inst); old != nil {
			if err := g.drop(bktToken, append([]byte(nil), old...)); err != nil {
				return err
			}
		}
		if err := g.put(bktInst, inst, key); err != nil {
			return err
		}
		return g.putJSON(bktToken, key, bearer{Installation: installation, Person: p.ID, Since: s.now()})
	})
	if err != nil {
		return "", err
	}
	return token, nil
}

// Bearer says who holds an installation token.
func (s *Store) Bearer(token string) (installation string, p Person, err error) {
	var b bearer
	err = s.view(func(tx *bbolt.Tx) error {
		v := tx.Bucket(bktToken).Get(tokenKey(token))
		if v == nil {
			return errBearer
		}
		if err := json.Unmarshal(v, &b); err != nil {
			return fmt.Errorf("token: %w", err)
		}
		if p, err = readPerson(tx, b.Person); err != nil || !p.mayEnter(s.now()) {
			return errBearer
		}
		installation = b.Installation
		return nil
	})
	if err == nil && s.now().Sub(b.Heard) >= sessionStep {
		s.heard(tokenKey(token))
	}
	return installation, p, err
}
