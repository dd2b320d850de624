package store

import (
	"cmp"
	"encoding/json"
	"slices"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// States of a round.
const (
	RoundMade     = "made"     // nothing done yet
	RoundWalking  = "walking"  // something done
	RoundEnded    = "ended"    // closed by everybody it was given to, or by somebody where it was given to nobody
	RoundAccepted = "accepted" // by a manager
	RoundOff      = "off"      // called off
)

// Round is a list of tests in walking order, with how far it is. What counts for it is worked out when it is read: tests
// of its stops made after it was made, and those that name it.
type Round struct {
	ID, Site  string
	Code      string // the last eight digits of the id, which paper carries
	Made      time.Time
	By        string    // who made it; "" for a walk nobody made in the office
	Day       forms.Day // planned for; NoDay where nobody said
	Starts    string    // 15:04 at the site; ""
	Until     forms.Day // last due day of its tests; NoDay
	People    []string  // to whom it was given; none = whoever walks the site
	Crew      string
	Note      string
	Minutes   int // as reckoned when it was made
	Conflicts []Conflict
	Stops     []RoundStop
	Closings  []RoundClosing // oldest first
	Accepted  *RoundAcceptance
	State     string
	Counts    map[string]int // stops by state
	seen      uint64
}

// Walk reports a round that a crew walked without one made in the office.
func (r *Round) Walk() bool { return r.By == "" }

// Seen is the stamp a change of the round says it knew of.
func (r *Round) Seen() string { return seenText(r.seen) }

// RoundClosing is what somebody said on closing a round.
type RoundClosing struct {
	Record                    string
	By                        string
	At                        time.Time
	Day                       forms.Day
	Done, Left, Skipped, Back int
	ProvedFirst, ProvedLast   *RoundProof // the tester tried on an outlet known to be live
	Passed                    []RoundPassed
	Instrument                string // what was tested with; "" where nobody said
	clock                     uint64
}

// RoundProof is the tester tried on a live outlet.
type RoundProof struct {
	At    time.Time `json:"at"`
	Works bool      `json:"works"`
}

// RoundPassed is a stop that was passed over, and why.
type RoundPassed struct {
	Device string `json:"device"`
	Task   string `json:"task"`
	Reason string `json:"reason"`
}

// RoundAcceptance is a manager's word that a round is done with.
type RoundAcceptance struct {
	By, Note, Record string
	At               time.Time
	Day              forms.Day // at the site
}

// roundBody is the body of round.closed and round.accepted.
type roundBody struct {
	Day                       string
	Done, Left, Skipped, Back float64
	Proved                    struct{ First, Last *RoundProof }
	Passed                    []RoundPassed
	Instrument                string
	Note                      string
}

func readRoundSaid(r *record.Record) (roundBody, error) {
	var b roundBody
	if err := json.Unmarshal(r.Body, &b); err != nil {
		return b, badBody("", "What %s says is not readable: %v.", r.Kind, err)
	}
	return b, nil
}

var errNoRound = &Error{Code: "not_found", Field: "round", Text: "There is no such round here, or it is not yours to see. Choose one from the list of rounds."}

// RoundCode is how a round is named on paper: the last eight digits of its id, in capitals.
func RoundCode(id string) string { return strings.ToUpper(id[max(0, len(id)-8):]) }

// Round gives one round with its stops.
func (v *View) Round(id string) (Round, error) {
	sv, n, t, err := v.findRound(id)
	if err != nil {
		return Round{}, err
	}
	r, err := v.round(sv, n, t)
	if err == nil && !v.showsRound(sv.zone, &r) {
		return Round{}, errNoRound
	}
	return r, err
}

// Rounds gives the rounds of a site, or of all of the scope where site is "": those that wait for somebody first, then
// the newest.
func (v *View) Rounds(site string) ([]Round, error) {
	var sites []*siteView
	if site != "" {
		sv, err := v.siteNamed(site)
		if err != nil {
			return nil, err
		}
		sites = append(sites, sv)
	} else {
		all, err := v.Sites()
		if err != nil {
			return nil, err
		}
		for _, s := range all {
			sv, err := v.open(s.ID)
			if err != nil {
				return nil, err
			}
			sites = append(sites, sv)
		}
	}
	var out []Round
	for _, sv := range sites {
		err := v.each(sv, ofRound, func(n uint32, t *thing) error {
			r, err := v.round(sv, n, t)
			if err == nil && v.showsRound(sv.zone, &r) {
				out = append(out, r)
			}
			return err
		})
		if err != nil {
			return nil, err
		}
	}
	rank := map[string]int{RoundEnded: 0, RoundWalking: 1, RoundMade: 1, RoundAccepted: 2, RoundOff: 2}
	slices.SortFunc(out, func(a, b Round) int {
		return cmp.Or(cmp.Compare(rank[a.State], rank[b.State]), b.Made.Compare(a.Made), cmp.Compare(a.ID, b.ID))
	})
	return out, nil
}

// RoundsWaiting names the rounds of the scope, made or walked since a moment, that have ended and wait to be accepted. It counts no
// stops.
func (v *View) RoundsWaiting(since time.Time) (ids []string, err error) {
	sites, err := v.Sites()
	if err != nil {
		return nil, err
	}
	for _, s := range sites {
		sv, err := v.open(s.ID)
		if err != nil {
			return nil, err
		}
		err = v.each(sv, ofRound, func(n uint32, t *thing) error {
			if t.born != 0 && t.born < since.UnixMilli() {
				return nil
			}
			r := Round{ID: t.id.String(), People: textList(t.value("people")), Counts: map[string]int{}}
			if err := v.roundSaid(sv, n, &r); err != nil {
				return err
			}
			if len(r.Closings) > 0 && r.Closings[0].At.After(since) && r.stateOf(string(t.value("off")) == "true") == RoundEnded {
				ids = append(ids, r.ID)
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return ids, nil
}

// findRound finds a round within the scope by its id.
func (v *View) findRound(round string) (*siteView, uint32, *thing, error) {
	id := parseID(round)
	sites, err := v.Sites()
	if err != nil || id == (id16{}) {
		return nil, 0, nil, cmp.Or(err, error(errNoRound))
	}
	for _, s := range sites {
		sv, err := v.open(s.ID)
		if err != nil {
			return nil, 0, nil, err
		}
		n, ok := v.number(sv, ofRound, id)
		if !ok {
			continue
		}
		if row := v.tx.Bucket(bktRegister).Get(registerKey(sv.ord, ofRound, n)); row != nil {
			t, err := unpackThing(row)
			return sv, n, &t, err
		}
	}
	return nil, 0, nil, errNoRound
}

// round reads a round from its row, with what was said of it and how far its stops are.
func (v *View) round(sv *siteView, n uint32, t *thing) (Round, error) {
	id := t.id.String()
	r := Round{ID: id, Site: sv.ID, Code: RoundCode(id), Day: forms.NoDay, Until: forms.NoDay, Starts: t.text("starts"), Crew: t.text("crew"),
		Note: t.text("note"), Minutes: int(t.number("minutes")), People: textList(t.value("people")), seen: t.seen(), Counts: map[string]int{}}
	if d, err := forms.ParseDay(t.text("day")); err == nil {
		r.Day = d
	}
	if d, err := forms.ParseDay(t.text("until")); err == nil {
		r.Until = d
	}
	if err := v.roundSaid(sv, n, &r); err != nil {
		return r, err
	}
	if t.born == 0 {
		if len(r.Closings) > 0 {
			r.Made, r.Day = r.Closings[0].At, r.Closings[0].Day
		}
	} else {
		r.Made = time.UnixMilli(t.born)
		r.By = v.sayer(t)
	}
	if err := v.stops(sv, &r, textList(t.value("stops"))); err != nil {
		return r, err
	}
	r.State = r.stateOf(string(t.value("off")) == "true")
	return r, nil
}

// sayer gives who made the record that stands for a round's stops.
func (v *View) sayer(t *thing) string {
	u := unpacker{b: t.said}
	for i := range t.fields {
		for j, said := uint64(0), u.uint(); j < said && !u.bad; j++ {
			u.fixed()
			id := u.id()
			u.id()
			u.uint()
			if j > 0 {
				u.bytes()
			} else if t.fields[i].name == "stops" {
				r, _, _, _, err := v.recordAt(id)
				if err != nil {
					return ""
				}
				return r.By
			}
		}
	}
	return ""
}

func textList(v []byte) []string {
	var list []string
	if v == nil || json.Unmarshal(v, &list) != nil {
		return nil
	}
	return list
}

// roundSaid reads who closed and who accepted a round; the last acceptance by (clock, id) stands.
func (v *View) roundSaid(sv *siteView, n uint32, r *Round) error {
	type accepted struct {
		RoundAcceptance
		clock uint64
	}
	var all []accepted
	for u := (unpacker{b: v.tx.Bucket(bktRound).Get(workKey(sv.ord, n))}); len(u.b) > 0; {
		seq := u.uint()
		if u.bad {
			return errPacked
		}
		rec, st, _, err := readBook(v.tx, seq)
		if err != nil {
			return err
		}
		body, err := readRoundSaid(rec)
		if err != nil {
			return err
		}
		at := happened(rec, st)
		if rec.Kind == "round.accepted" {
			all = append(all, accepted{RoundAcceptance{rec.By, body.Note, rec.ID, at, forms.DayOf(at.In(sv.zone))}, rec.Clock})
			continue
		}
		day, err := forms.ParseDay(body.Day)
		if err != nil {
			day = forms.DayOf(at.In(sv.zone))
		}
		r.Closings = append(r.Closings, RoundClosing{Record: rec.ID, By: rec.By, At: at, Day: day, Done: int(body.Done), Left: int(body.Left), Skipped: int(body.Skipped),
			Back: int(body.Back), ProvedFirst: body.Proved.First, ProvedLast: body.Proved.Last, Passed: body.Passed, Instrument: body.Instrument, clock: rec.Clock})
	}
	slices.SortFunc(r.Closings, func(a, b RoundClosing) int {
		return cmp.Or(cmp.Compare(a.clock, b.clock), cmp.Compare(a.Record, b.Record))
	})
	slices.SortFunc(all, func(a, b accepted) int {
		return cmp.Or(cmp.Compare(a.clock, b.clock), cmp.Compare(a.Record, b.Record))
	})
	if len(all) > 0 {
		r.Accepted = &all[len(all)-1].RoundAcceptance
	}
	return nil
}

// stateOf says how far a round is, from its stops and what was said of it.
func (r *Round) stateOf(off bool) string {
	for _, s := range r.Stops {
		r.Counts[s.State]++
	}
	if len(r.Stops) == 0 {
		for _, c := range r.Closings {
			r.Counts[StopDone], r.Counts[StopLeft] = r.Counts[StopDone]+c.Done, r.Counts[StopLeft]+c.Left
			r.Counts[StopPassed], r.Counts[StopBack] = r.Counts[StopPassed]+c.Skipped, r.Counts[StopBack]+c.Back
		}
	}
	closed := func(person string) bool {
		return slices.ContainsFunc(r.Closings, func(c RoundClosing) bool { return c.By == person })
	}
	switch {
	case r.Accepted != nil:
		return RoundAccepted
	case off:
		return RoundOff
	case len(r.Closings) > 0 && !slices.ContainsFunc(r.People, func(p string) bool { return !closed(p) }):
		return RoundEnded
	case r.Counts[StopDone]+r.Counts[StopBack] > 0 || len(r.Closings) > 0:
		return RoundWalking
	}
	return RoundMade
}
