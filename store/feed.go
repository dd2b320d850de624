package store

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// feed is the secret address under which a person's calendar is read without signing in. Only the SHA-256 of its token is
// kept; what it shows is what the person may see at each reading.
type feed struct {
	Person string    `json:"person"`
	Since  time.Time `json:"since"`
}

var errNoFeed = &Error{Code: "not_found", Field: "feed", Text: "This calendar address is not in use. Whoever had it makes a new one under Calendar and mail."}

// NewFeed makes a calendar address for a person; the one before it leads nowhere from then on.
func (s *Store) NewFeed(ctx context.Context, person string) (token string, err error) {
	token, key := newToken()
	err = s.do(ctx, 1, func(g *group) error {
		p, err := readPerson(g.tx, person)
		if err != nil {
			return err
		}
		if err := g.dropFeeds(p.ID); err != nil {
			return err
		}
		return g.putJSON(bktCalendar, key, feed{p.ID, s.now()})
	})
	if err != nil {
		return "", err
	}
	return token, nil
}

// DropFeed revokes a person's calendar address; one that is not there is no error.
func (s *Store) DropFeed(ctx context.Context, person string) error {
	return s.do(ctx, 1, func(g *group) error { return g.dropFeeds(person) })
}

func (g *group) dropFeeds(person string) error {
	var keys [][]byte
	err := g.tx.Bucket(bktCalendar).ForEach(func(k, v []byte) error {
		var f feed
		if json.Unmarshal(v, &f) != nil || f.Person == person {
			keys = append(keys, slices.Clone(k))
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("calendar addresses: %w", err)
	}
	for _, k := range keys {
		if err := g.drop(bktCalendar, k); err != nil {
			return err
		}
	}
	return nil
}

// FeedSince says since when a person has a calendar address; ok is false where they have none.
func (s *Store) FeedSince(person string) (since time.Time, ok bool, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		return tx.Bucket(bktCalendar).ForEach(func(_, v []byte) error {
			var f feed
			if json.Unmarshal(v, &f) == nil && f.Person == person {
				since, ok = f.Since, true
			}
			return nil
		})
	})
	return since, ok, err
}

// FeedPerson says whose calendar an address is; not_found where it is revoked, or its person may not sign in any more.
func (s *Store) FeedPerson(token string) (p Person, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		v := tx.Bucket(bktCalendar).Get(tokenKey(token))
		var f feed
		if v == nil || json.Unmarshal(v, &f) != nil {
			return errNoFeed
		}
		if p, err = readPerson(tx, f.Person); err != nil || !p.Active {
			return errNoFeed
		}
		return nil
	})
	return p, err
}

// DueCount is how many tests of one task have one date at a site.
type DueCount struct {
	Day   forms.Day
	Task  string
	State string
	N     int
}

// DueCounts gives a site's dates until a day, counted by day and task, from the counts kept of them: nothing of single devices is read.
func (v *View) DueCounts(site string, on, until forms.Day) ([]DueCount, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	var out []DueCount
	err = v.scan(bktSum, put32(nil, sv.ord), func(k, row []byte) error {
		d, u := readSum(k), unpacker{b: row}
		if n := int(u.uint()); n > 0 && d.Due <= until {
			one := DueCount{d.Due, d.Task, d.State(on), n}
			if i := slices.IndexFunc(out, func(o DueCount) bool { return o.Day == one.Day && o.Task == one.Task && o.State == one.State }); i >= 0 {
				out[i].N += n
			} else {
				out = append(out, one)
			}
		}
		return u.err()
	})
	return out, err
}

// Changed is when the last record came.
func (v *View) Changed() (time.Time, error) {
	_, row := v.tx.Bucket(bktRec).Cursor().Last()
	k, err := readRec(row)
	if err != nil {
		return time.Time{}, err
	}
	st, err := record.ParseStamp(k.stamp)
	return st.Received, err
}
