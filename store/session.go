package store

import (
	"bytes"
	"context"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"slices"
	"time"
	"unicode/utf8"

	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// How long a session lasts: unused, and in all.
const (
	SessionIdle = 12 * time.Hour
	SessionLife = 14 * 24 * time.Hour
	sessionStep = 10 * time.Minute // how exactly the last use is kept
)

// How somebody signed in.
const (
	ByLink     = "link"
	ByCode     = "code"
	ByPassword = "password"
)

// Arrival is how somebody came in; it is kept with the session, so that they know it again in the list of their own.
type Arrival struct {
	How     string `json:"how,omitempty"`
	Agent   string `json:"agent,omitempty"` // the browser, as it names itself
	Address string `json:"address,omitempty"`
	Former  string `json:"-"` // the token of the session this browser had; it ends, so that nobody goes on with one they planted
}

type session struct {
	Person string    `json:"person"`
	Began  time.Time `json:"began"`
	Used   time.Time `json:"used"`
	Arrival
}

// SessionRow is one browser somebody is signed in with. ID names it, and opens nothing.
type SessionRow struct {
	ID, Person  string
	Began, Used time.Time
	Arrival
	Own bool // the one that asks
}

// StartSession signs in a person whom something else has proved: another sign-in service, a key of their own. It is the one
// door for those; from.How says which. The session is new, signed.in is appended, all in one transaction.
func (s *Store) StartSession(ctx context.Context, person string, from Arrival) (token string, err error) {
	return s.signIn(ctx, from, func(g *group) (Person, error) { return readPerson(g.tx, person) })
}

// signIn begins a session for whoever proved gives, in the transaction in which it is proved.
func (s *Store) signIn(ctx context.Context, from Arrival, proved func(g *group) (Person, error)) (token string, err error) {
	fresh, key := newToken()
	err = s.do(ctx, 1, func(g *group) error {
		p, err := proved(g)
		if err != nil {
			return err
		}
		if !p.mayEnter(s.now()) {
			return errSession
		}
		if _, err := g.appendDrafts([]Draft{{Kind: "signed.in", Log: record.Office, Subject: p.ID, By: p.ID, Body: json.RawMessage("{}")}}); err != nil {
			return err
		}
		return g.beginSession(key, p.ID, from)
	})
	if err != nil {
		return "", err
	}
	return fresh, nil
}

// beginSession keeps a new session and deletes those that have ended, and the one this browser had before.
func (g *group) beginSession(key []byte, person string, from Arrival) error {
	now := g.s.now()
	var old [][]byte
	err := g.tx.Bucket(bktSession).ForEach(func(k, v []byte) error {
		var s session
		if err := json.Unmarshal(v, &s); err != nil || s.ended(now) || from.Former != "" && bytes.Equal(k, tokenKey(from.Former)) {
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
	from.Agent, from.Address = cutText(from.Agent, 200), cutText(from.Address, 64)
	return g.putJSON(bktSession, key, session{Person: person, Began: now, Used: now, Arrival: from})
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
	if p, err = readPerson(tx, held.Person); err != nil || !p.mayEnter(now) {
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

// Sessions lists where a person is signed in, the one used last first. own is the token that asks, or "".
func (s *Store) Sessions(person, own string) (list []SessionRow, err error) {
	now := s.now()
	err = s.view(func(tx *bbolt.Tx) error {
		return tx.Bucket(bktSession).ForEach(func(k, v []byte) error {
			var held session
			if err := json.Unmarshal(v, &held); err != nil {
				return fmt.Errorf("session: %w", err)
			}
			if held.Person == person && !held.ended(now) {
				list = append(list, SessionRow{ID: hex.EncodeToString(k), Person: person, Began: held.Began, Used: held.Used, Arrival: held.Arrival, Own: own != "" && bytes.Equal(k, tokenKey(own))})
			}
			return nil
		})
	})
	slices.SortFunc(list, func(a, b SessionRow) int {
		if c := b.Used.Compare(a.Used); c != 0 {
			return c
		}
		return bytes.Compare([]byte(a.ID), []byte(b.ID))
	})
	return list, err
}

// EndSessions ends one session of a person by its id, or with "" all of them but the one whose token is keep.
func (s *Store) EndSessions(ctx context.Context, person, id, keep string) error {
	return s.do(ctx, 1, func(g *group) error {
		return g.dropSessions(person, func(key []byte) bool {
			return id != "" && hex.EncodeToString(key) != id || keep != "" && bytes.Equal(key, tokenKey(keep))
		})
	})
}

// dropSessions ends a person's sessions but those that stay.
func (g *group) dropSessions(person string, stays func(key []byte) bool) error {
	var old [][]byte
	err := g.tx.Bucket(bktSession).ForEach(func(k, v []byte) error {
		var held session
		if err := json.Unmarshal(v, &held); err != nil {
			return fmt.Errorf("session: %w", err)
		}
		if held.Person == person && (stays == nil || !stays(k)) {
			old = append(old, bytes.Clone(k))
		}
		return nil
	})
	for _, k := range old {
		if err == nil {
			err = g.drop(bktSession, k)
		}
	}
	return err
}

// cutText cuts a text to at most n bytes of whole characters.
func cutText(s string, n int) string {
	if len(s) <= n {
		return s
	}
	for n > 0 && !utf8.RuneStart(s[n]) {
		n--
	}
	return s[:n]
}
