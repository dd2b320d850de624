package store

import (
	"context"
	"encoding/json"
	"fmt"
	"strings"
	"time"

	"go.etcd.io/bbolt"
	"golang.org/x/text/cases"
	"golang.org/x/text/unicode/norm"
)

// secret is what a person signs in with besides links: a password, and a second step where they want one. It lies in the
// directory and is really deleted when they leave.
type secret struct {
	Password *password   `json:"password,omitempty"`
	Second   *secondStep `json:"second,omitempty"`
	Offered  []byte      `json:"offered,omitempty"` // key of a second step that is still to be proved, sealed
}

// SecretState is what may be shown of it.
type SecretState struct {
	Password    bool
	PasswordSet time.Time
	Second      bool
	SecondSince time.Time
	CodesLeft   int
	Least       int // characters a new password needs
}

// freshLink is how long after a sign-in by link or code a forgotten password may be replaced without knowing it.
const freshLink = 15 * time.Minute

// errPassword says the same for a name nobody has, one of several people and a wrong password.
var errPassword = &Error{Code: "not_found", Field: "password", Text: "Name or password is wrong, or there is no password for this name. Try again, or ask a manager for a link."}

func readSecret(tx *bbolt.Tx, person string) (sec secret, err error) {
	v := tx.Bucket(bktSecret).Get(idKey(person))
	if v == nil {
		return sec, nil
	}
	if err := json.Unmarshal(v, &sec); err != nil {
		return sec, fmt.Errorf("secret of %s: %w", person, err)
	}
	return sec, nil
}

// Secret says what a person signs in with.
func (s *Store) Secret(person string) (st SecretState, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		sec, err := readSecret(tx, person)
		st = SecretState{Password: sec.Password != nil, Second: sec.Second != nil, Least: PasswordLeast}
		if sec.Password != nil {
			st.PasswordSet = sec.Password.Set
		}
		if sec.Second != nil {
			st.SecondSince, st.CodesLeft, st.Least = sec.Second.Since, len(sec.Second.Codes), PasswordLeastTwice
		}
		return err
	})
	return st, err
}

// foldName is a name as it is compared: nobody must remember capitals or how many spaces.
func foldName(s string) string {
	return cases.Fold().String(norm.NFKC.String(strings.Join(strings.Fields(s), " ")))
}

// namedWithPassword finds the one person who signs in under a typed name or mail address; nil where there is none, or more than one.
func namedWithPassword(tx *bbolt.Tx, typed string, now time.Time) (found *Person, sec secret, err error) {
	typed = foldName(typed)
	several := false
	err = tx.Bucket(bktPerson).ForEach(func(_, v []byte) error {
		var p Person
		if err := json.Unmarshal(v, &p); err != nil {
			return fmt.Errorf("person: %w", err)
		}
		if typed == "" || !p.mayEnter(now) || foldName(p.Name) != typed && foldName(p.Contact) != typed {
			return nil
		}
		own, err := readSecret(tx, p.ID)
		if err != nil || own.Password == nil {
			return err
		}
		several = several || found != nil
		found, sec = &p, own
		return nil
	})
	if several {
		return nil, secret{}, err
	}
	return found, sec, err
}

// SignIn signs in by name and password. Where a second step follows, session is "" and half stands for the first; it is
// spent by SecondStep within five minutes. A name nobody has takes as long as a wrong password.
func (s *Store) SignIn(ctx context.Context, name, typed string, from Arrival) (session, half string, err error) {
	var p *Person
	var sec secret
	if err := s.view(func(tx *bbolt.Tx) (err error) {
		p, sec, err = namedWithPassword(tx, name, s.now())
		return err
	}); err != nil {
		return "", "", err
	}
	holds, err := sec.Password.holds(ctx, typed)
	if err != nil {
		return "", "", err
	}
	if !holds || p == nil {
		return "", "", errPassword
	}
	if sec.Second != nil {
		token, key := newToken()
		return "", token, s.putLink(p.ID, key, link{Until: s.now().Add(halfLife), Use: linkHalf})
	}
	from.How = ByPassword
	session, err = s.signIn(ctx, from, func(g *group) (Person, error) {
		now, err := readSecret(g.tx, p.ID)
		if err != nil {
			return Person{}, err
		}
		if now.Password == nil || string(now.Password.Hash) != string(sec.Password.Hash) || now.Second != nil {
			return Person{}, errPassword // changed while it was looked at
		}
		return readPerson(g.tx, p.ID)
	})
	return session, "", err
}

// SetPassword gives a person a password, or another one. It needs the current one, or a session that a link or a code began
// within the last quarter of an hour: that is how a forgotten one is replaced. All other sessions of the person end.
func (s *Store) SetPassword(ctx context.Context, person, current, typed, session string) error {
	var p Person
	var sec secret
	var fresh bool
	err := s.view(func(tx *bbolt.Tx) (err error) {
		if p, err = readPerson(tx, person); err != nil {
			return err
		}
		if sec, err = readSecret(tx, person); err != nil {
			return err
		}
		held, _, err := readSession(tx, tokenKey(session), s.now())
		if err != nil {
			return err
		}
		fresh = held.Person == person && (held.How == ByLink || held.How == ByCode) && s.now().Sub(held.Began) <= freshLink
		return nil
	})
	if err != nil {
		return err
	}
	if sec.Password != nil && !fresh {
		if holds, err := sec.Password.holds(ctx, current); err != nil {
			return err
		} else if !holds {
			return &Error{Code: "invalid", Field: "current", Text: "This is not your present password. If you forgot it, ask a manager for a sign-in link and set a new one with it."}
		}
	}
	least := PasswordLeast
	if sec.Second != nil {
		least = PasswordLeastTwice
	}
	if err := checkPassword(typed, least, p.Name); err != nil {
		return err
	}
	fresher, err := newPassword(ctx, typed, s.now())
	if err != nil {
		return err
	}
	return s.do(ctx, 1, func(g *group) error {
		now, err := readSecret(g.tx, person)
		if err != nil {
			return err
		}
		if err := g.nameAlone(p); err != nil {
			return err
		}
		if fresher.Short && now.Second == nil {
			return checkPassword(typed, PasswordLeast, p.Name)
		}
		now.Password = &fresher
		if err := g.putJSON(bktSecret, idKey(person), now); err != nil {
			return err
		}
		return g.dropSessions(person, func(key []byte) bool { return string(key) == string(tokenKey(session)) })
	})
}

// nameAlone refuses a password for a name that somebody else with a password has too: nobody could tell whose it is.
func (g *group) nameAlone(p Person) error {
	return g.tx.Bucket(bktPerson).ForEach(func(_, v []byte) error {
		var other Person
		if err := json.Unmarshal(v, &other); err != nil {
			return fmt.Errorf("person: %w", err)
		}
		if other.ID == p.ID || !other.Active || foldName(other.Name) != foldName(p.Name) {
			return nil
		}
		sec, err := readSecret(g.tx, other.ID)
		if err != nil || sec.Password == nil {
			return err
		}
		return &Error{Code: "conflict", Field: "password", Text: "Somebody else called " + p.Name + " signs in by password already. Ask a manager to write your name so that it is yours alone."}
	})
}
