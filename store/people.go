package store

import (
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// Person is someone who may sign in; the book knows the id and role only.
type Person struct {
	ID, Name, Role string // manager | crew | auditor
	All            bool
	Sites          []string
	Active         bool
	Contact        string
	Period         *Period    `json:",omitempty"` // an auditor's: the test days they may see; nil = all
	Until          *forms.Day `json:",omitempty"` // the last day of their access; nil = no end
	Licence        string     `json:",omitempty"` // number and kind, as written; kept here only, never in the book
	LicenceUntil   *forms.Day `json:",omitempty"`
	May            []string   `json:",omitempty"` // what they are qualified for; none = nobody said
}

// Scope is what the person may see; nothing once they are no longer active.
func (p Person) Scope() Scope {
	if !p.Active {
		return Scope{Person: p.ID, Role: p.Role}
	}
	return Scope{Person: p.ID, Role: p.Role, All: p.All, Sites: p.Sites, Period: p.Period, Until: p.Until}
}

// lastZone is where a day ends last: an access given until a day ends when that day is over everywhere.
var lastZone = time.FixedZone("", -12*60*60)

// mayEnter reports whether the person may sign in, or stay signed in, at a moment.
func (p Person) mayEnter(now time.Time) bool {
	return p.Active && (p.Until == nil || forms.DayOf(now.In(lastZone)) <= *p.Until)
}

// People lists everybody, by name.
func (s *Store) People() ([]Person, error) {
	var all []Person
	err := s.view(func(tx *bbolt.Tx) error {
		return tx.Bucket(bktPerson).ForEach(func(_, v []byte) error {
			var p Person
			if err := json.Unmarshal(v, &p); err != nil {
				return fmt.Errorf("person: %w", err)
			}
			all = append(all, p)
			return nil
		})
	})
	slices.SortFunc(all, func(a, b Person) int { return cmp.Or(cmp.Compare(a.Name, b.Name), cmp.Compare(a.ID, b.ID)) })
	return all, err
}

// Person gives one person.
func (s *Store) Person(id string) (p Person, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		p, err = readPerson(tx, id)
		return err
	})
	return p, err
}

func readPerson(tx *bbolt.Tx, id string) (p Person, err error) {
	key := idKey(id)
	var v []byte
	if key != nil {
		v = tx.Bucket(bktPerson).Get(key)
	}
	if v == nil {
		return p, &Error{Code: "not_found", Field: "person", Text: "There is no such person here. Choose one from the list of people."}
	}
	if err := json.Unmarshal(v, &p); err != nil {
		return p, fmt.Errorf("person %s: %w", id, err)
	}
	return p, nil
}

// Person gives a person of the directory; ok is false for an id it does not hold.
func (v *View) Person(id string) (p Person, ok bool) {
	p, err := readPerson(v.tx, id)
	return p, err == nil
}

// PersonName gives a name from the directory, "" where there is none.
func (v *View) PersonName(id string) string {
	p, err := readPerson(v.tx, id)
	if err != nil {
		return ""
	}
	return p.Name
}

// What a person may be qualified for.
const (
	MayButton  = "button"  // press TEST and RESET
	MayMeasure = "measure" // test with an instrument, at live parts
	MayReplace = "replace" // repair and replace
)

// Qualifications lists them in order.
func Qualifications() []string { return []string{MayButton, MayMeasure, MayReplace} }

// check holds a person against what each role can have.
func (p *Person) check() error {
	switch {
	case p.Name == "":
		return &Error{Code: "invalid", Field: "name", Text: "A person needs a name, or at least what they are called on a round, such as Crew 1."}
	case p.Role != "manager" && p.Role != "crew" && p.Role != "auditor":
		return &Error{Code: "invalid", Field: "role", Text: "A person is manager, crew or auditor. Choose one of these."}
	case p.Period != nil && p.Role != "auditor":
		return &Error{Code: "invalid", Field: "period_from", Text: "Only an auditor's access can be for a period of tests. Leave both days empty, or choose auditor."}
	case p.Period != nil && p.Period.To < p.Period.From:
		return &Error{Code: "invalid", Field: "period_to", Text: "The period ends before it begins. Swap its two days."}
	}
	for _, site := range p.Sites {
		if !record.IsID(site) {
			return &Error{Code: "invalid", Field: "sites", Text: "One of the sites chosen is none of this store's. Choose sites from the list."}
		}
	}
	for _, may := range p.May {
		if !slices.Contains(Qualifications(), may) {
			return &Error{Code: "invalid", Field: "may", Text: "Choose what the person may do from the list."}
		}
	}
	return nil
}

// granted is the body of the grant.set that gives a person what they have.
func (p *Person) granted() json.RawMessage {
	body := map[string]any{"role": p.Role, "all": p.All, "sites": append([]string{}, p.Sites...), "active": p.Active}
	if p.Period != nil {
		body["from"], body["to"] = p.Period.From.String(), p.Period.To.String()
	}
	if p.Until != nil {
		body["until"] = p.Until.String()
	}
	if len(p.May) > 0 {
		body["may"] = p.May
	}
	return mustJSON(body)
}

// PutPerson keeps a person (empty ID = new) and appends person.set and grant.set by whoever does it: a manager of all
// sites, or the store's own id for the owner of the folder. What is in force already is not written again.
func (s *Store) PutPerson(ctx context.Context, by string, p Person) (Person, error) {
	p.Name = strings.TrimSpace(p.Name)
	if err := p.check(); err != nil {
		return Person{}, err
	}
	if p.ID == "" {
		p.ID = newID(s.now())
	} else if !record.IsID(p.ID) {
		return Person{}, &Error{Code: "invalid", Field: "id", Text: "The person's id is no UUID of version 7 or 8 in lower case."}
	}
	if by == "" {
		by = s.id
	}
	p.Sites = slices.Compact(slices.Sorted(slices.Values(p.Sites)))
	err := s.do(ctx, 2, func(g *group) error {
		old, err := readPerson(g.tx, p.ID)
		known := err == nil
		if known && old.Role == p.Role && old.Active == p.Active && string(old.granted()) == string(p.granted()) {
			return g.putJSON(bktPerson, idKey(p.ID), p)
		}
		if known && old.leads() && !p.leads() {
			if last, err := lastManager(g.tx, p.ID); err != nil || last {
				return cmp.Or(err, error(&Error{Code: "conflict", Field: "role", Text: "This is the last manager of all sites. Make somebody else one first, so that the store can still be run."}))
			}
		}
		_, err = g.appendDrafts([]Draft{
			{Kind: "person.set", Log: record.Org, Subject: p.ID, By: by, Body: mustJSON(map[string]any{"role": p.Role, "active": p.Active})},
			{Kind: "grant.set", Log: record.Office, Subject: p.ID, By: by, Body: p.granted()},
		})
		if err != nil {
			return err
		}
		// A page that is open shows what its reader had; a new sign-in shows what they have.
		if err := g.dropSessions(p.ID, nil); err != nil {
			return err
		}
		if known && old.Active && !p.Active {
			if err := g.leave(by, p.ID); err != nil {
				return err
			}
		}
		return g.putJSON(bktPerson, idKey(p.ID), p)
	})
	if err != nil {
		return Person{}, err
	}
	return p, nil
}

// leads reports whether the person is a manager of all sites, without an end.
func (p *Person) leads() bool { return p.Active && p.All && p.Role == "manager" && p.Until == nil }

// leave takes from somebody who leaves what signs in and sends: links, password and second step, and their phones. Work that a
// phone of theirs has not sent is not lost: it is taken in as a file, or sent when the next person signs in on that phone.
func (g *group) leave(by, person string) error {
	if err := g.dropLinks(person, nil); err != nil {
		return err
	}
	if err := g.drop(bktSecret, idKey(person)); err != nil {
		return err
	}
	phones, err := readPhones(g.tx, person)
	for _, p := range phones {
		if err == nil {
			err = g.revoke(by, p.Installation)
		}
	}
	return err
}

// lastManager reports whether nobody but this person is an active manager of all sites.
func lastManager(tx *bbolt.Tx, id string) (bool, error) {
	last := true
	err := tx.Bucket(bktPerson).ForEach(func(_, v []byte) error {
		var p Person
		if err := json.Unmarshal(v, &p); err != nil {
			return fmt.Errorf("person: %w", err)
		}
		last = last && (p.ID == id || !p.leads())
		return nil
	})
	return last, err
}

// mustJSON marshals a body made of texts, flags and lists of texts.
func mustJSON(v any) json.RawMessage {
	b, err := encodeBody(v)
	if err != nil {
		panic(err) // cannot happen: see above
	}
	return b
}

// putJSON writes a directory entry.
func (g *group) putJSON(bucket, key []byte, v any) error {
	b, err := json.Marshal(v)
	if err != nil {
		return fmt.Errorf("write %s: %w", bucket, err)
	}
	return g.put(bucket, key, b)
}

func (g *group) put(bucket, key, value []byte) error {
	g.changes++
	if err := g.tx.Bucket(bucket).Put(key, value); err != nil {
		return fmt.Errorf("write %s: %w", bucket, err)
	}
	return nil
}

func (g *group) drop(bucket, key []byte) error {
	g.changes++
	if err := g.tx.Bucket(bucket).Delete(key); err != nil {
		return fmt.Errorf("drop from %s: %w", bucket, err)
	}
	return nil
}
