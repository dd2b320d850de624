package store

import (
	"cmp"
	"slices"

	"tripwell/forms"
)

// SnapshotRound is a round as a phone takes it along. State of a stop is "", done, back or passed.
type SnapshotRound struct {
	ID      string         `json:"id"`
	Code    string         `json:"code"`
	Made    int64          `json:"made"` // ms since 1970
	Day     forms.Day      `json:"day,omitempty"`
	Starts  string         `json:"starts,omitempty"`
	People  []string       `json:"people,omitempty"`
	Crew    string         `json:"crew,omitempty"`
	Note    string         `json:"note,omitempty"`
	Minutes int            `json:"minutes,omitempty"`
	Closed  []string       `json:"closed,omitempty"` // who has ended it
	Stops   []SnapshotStop `json:"stops"`
}

// SnapshotStop is one stop.
type SnapshotStop struct {
	Device string `json:"device"`
	Task   string `json:"task"`
	State  string `json:"state,omitempty"`
}

func (v *View) snapshotRounds(sv *siteView) ([]SnapshotRound, error) {
	var out []SnapshotRound
	err := v.each(sv, ofRound, func(n uint32, t *thing) error {
		if t.born == 0 || string(t.value("off")) == "true" {
			return nil
		}
		r, err := v.round(sv, n, t)
		if err != nil || r.State == RoundAccepted || r.State == RoundEnded {
			return err
		}
		one := SnapshotRound{ID: r.ID, Code: r.Code, Made: r.Made.UnixMilli(), Day: r.Day, Starts: r.Starts, People: r.People, Crew: r.Crew, Note: r.Note, Minutes: r.Minutes, Stops: []SnapshotStop{}}
		for _, c := range r.Closings {
			one.Closed = append(one.Closed, c.By)
		}
		for _, s := range r.Stops {
			if s.Retired {
				continue
			}
			state := s.State
			if state == StopLeft {
				state = ""
			}
			one.Stops = append(one.Stops, SnapshotStop{s.Device, s.Task, state})
		}
		out = append(out, one)
		return nil
	})
	slices.SortFunc(out, func(a, b SnapshotRound) int {
		return cmp.Or(cmp.Compare(a.Day, b.Day), cmp.Compare(a.Made, b.Made), cmp.Compare(a.ID, b.ID))
	})
	return out, err
}
