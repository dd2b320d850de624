package store

import (
	"context"
	"encoding/json"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
)

// Witnessed is what became of the head that goes to the mailboxes of witnesses once a month: people outside the house, who can
// later show that what it covers has not been rewritten.
type Witnessed struct {
	Month int32     `json:"month"` // forms.MonthOf, UTC; of the last one begun
	At    time.Time `json:"at"`
	Fault string    `json:"fault,omitempty"` // "": the mail server took it
	Tries int       `json:"tries,omitempty"`
}

// witnessTries and witnessPause bound how often a month's head is tried again.
const (
	witnessTries = 5
	witnessPause = 6 * time.Hour
)

// Witnessed tells what became of the last head for witnesses.
func (s *Store) Witnessed() (w Witnessed, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		w, err = readWitnessed(tx)
		return err
	})
	return w, err
}

func readWitnessed(tx *bbolt.Tx) (w Witnessed, err error) {
	if v := tx.Bucket(bktSetting).Get(settingWitness); v != nil {
		err = json.Unmarshal(v, &w)
	}
	return w, err
}

// BeginWitness notes on the disk that this month's head is being sent; false where that was done already. A failed try is repeated
// some hours later.
func (s *Store) BeginWitness(ctx context.Context) (begun bool, err error) {
	now := s.now()
	month := forms.MonthOf(forms.DayOf(now.UTC()))
	err = s.do(ctx, 1, func(g *group) error {
		w, err := readWitnessed(g.tx)
		if err != nil {
			return err
		}
		if w.Month == month && (w.Fault == "" || w.Tries >= witnessTries || now.Sub(w.At) < witnessPause) {
			return nil
		}
		if w.Month != month {
			w.Tries = 0
		}
		begun = true
		return g.putJSON(bktSetting, settingWitness, Witnessed{month, now, "", w.Tries + 1})
	})
	return begun && err == nil, err
}

// EndWitness notes why a month's head was not sent to all.
func (s *Store) EndWitness(ctx context.Context, fault string) error {
	return s.do(ctx, 1, func(g *group) error {
		w, err := readWitnessed(g.tx)
		if err != nil {
			return err
		}
		w.Fault = fault
		return g.putJSON(bktSetting, settingWitness, w)
	})
}
