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

// How long a session lasts: unused, and in all.
const (
	SessionIdle = 12 * time.Hour
	SessionLife = 14 * 24 * time.Hour
	sessionStep = 10 * time.Minute // how exactly the last use is kept
)

// Only the SHA-256 of a token is kept, so a copy of the file signs nobody in.
type link struct {
	Person string    `json:"person"`
	Until  time.Time `json:"until"`
	Typed  bool      `json:"typed,omitempty"` // a short code
}

type session struct {
	Person string    `json:"person"`
	Began  time.Time `json:"began"`
	Used   time.Time `json:"used"`
}

type bearer struct {
	Installation string    `json:"installation"`
	Person       string    `json:"person"`
	Since        time.Time `json:"since"`
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
		if l.Typed {
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
		p, err = s.linkOf(tx, token, false)
		return err
	})
	return p, err
}

// SpendLink signs in: the link is gone, a session begins, signed.in is appended, all in one transaction.
func (s *Store) SpendLink(ctx context.Context, token string) (session string, err error) {
	return s.spend(ctx, token, false)
}

func (s *Store) spend(ctx context.Context, token string, typed bool) (session string, err error) {
	fresh, key := newToken()
	err = s.do(ctx, 1, func(g *group) error {
		p, err := s.linkOf(g.tx, token, typed)
		if err != nil {
			return err
		}
		if _, err := g.appendDrafts([]Draft{{Kind: "signed.in", Log: record.Office, Subject: p.ID, By: p.ID, Body: json.RawMessage("{}")}}); err != nil {
			return err
		}
		if err := g.drop(bktLink, tokenKey(token)); err != nil {
			return err
		}
		return g.beginSession(key, p.ID)
	})
	if err != nil {
		return "", err
	}
	return fresh, nil
}

// beginSession keeps a new session and deletes those that have ended.
func (g *group) beginSession(key []byte, person string) error {
	now := g.s.now()
	var old [][]byte
	err := g.tx.Bucket(bktSession).ForEach(func(k, v []byte) error {
		var s session
		if err := json.Unmarshal(v, &s); err != nil || s.ended(now) {
			old = append(old, append([]byte(nil), k...))
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("sweep sessions: %w", err)
	}
	for _, k := range old {
		if err := g.drop(bktSession, k); err != nil {
			return err
		}
	}
	return g.putJSON(bktSession, key, session{Person: person, Began: now, Used: now})
}

func (s session) ended(now time.Time) bool {
	return now.Sub(s.Used) > SessionIdle || now.Sub(s.Began) > SessionLife
}

// Session says who a session token belongs to, and keeps it from going idle.
func (s *Store) Session(token string) (p Person, err error) {
	key, now := tokenKey(token), s.now()
	var held session
	err = s.view(func(tx *bbolt.Tx) error {
		held, p, err = readSession(tx, key, now)
		return err
	})
	if err != nil {
		return Person{}, err
	}
	if now.Sub(held.Used) < sessionStep {
		return p, nil
	}
	err = s.do(context.Background(), 1, func(g *group) error {
		held, _, err := readSession(g.tx, key, now)
		if err != nil {
			return err
		}
		held.Used = now
		return g.putJSON(bktSession, key, held)
	})
	if err == errBusy {
		err = nil // the use is noted the next time
	}
	return p, err
}

func readSession(tx *bbolt.Tx, key []byte, now time.Time) (held session, p Person, err error) {
	v := tx.Bucket(bktSession).Get(key)
	if v == nil {
		return held, p, errSession
	}
	if err := json.Unmarshal(v, &held); err != nil {
		return held, p, fmt.Errorf("session: %w", err)
	}
	if held.ended(now) {
		return held, p, errSession
	}
	if p, err = readPerson(tx, held.Person); err != nil || !p.Active {
		return held, p, errSession
	}
	return held, p, nil
}

// EndSession signs out. A session that is not there is no error.
func (s *Store) EndSession(token string) error {
	return s.do(context.Background(), 1, func(g *group) error {
		if g.tx.Bucket(bktSession).Get(tokenKey(token)) == nil {
			return nil
		}
		return g.drop(bktSession, tokenKey(token))
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
		if !p.Active {
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
		return g.putJSON(bktToken, key, bearer{installation, p.ID, s.now()})
	})
	if err != nil {
		return "", err
	}
	return token, nil
}

// Bearer says who holds an installation token.
func (s *Store) Bearer(token string) (installation string, p Person, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		v := tx.Bucket(bktToken).Get(tokenKey(token))
		if v == nil {
			return errBearer
		}
		var b bearer
		if err := json.Unmarshal(v, &b); err != nil {
			return fmt.Errorf("token: %w", err)
		}
		if p, err = readPerson(tx, b.Person); err != nil || !p.Active {
			return errBearer
		}
		installation = b.Installation
		return nil
	})
	return installation, p, err
}
