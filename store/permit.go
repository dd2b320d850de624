package store

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// accessFact is something the book says about what a person may do, and when the store heard of it.
type accessFact struct {
	At           int64    `json:"at"`             // received, ms
	Role         string   `json:"role,omitempty"` // of a grant
	All          bool     `json:"all,omitempty"`
	Sites        []string `json:"sites,omitempty"`
	Active       bool     `json:"active,omitempty"`
	Until        string   `json:"until,omitempty"`        // the last day of the access, where it was given an end
	May          []string `json:"may,omitempty"`          // what the person is qualified for; absent = nobody said
	Installation string   `json:"installation,omitempty"` // enrolled by the person
	Revoked      string   `json:"revoked,omitempty"`      // installation
}

func (a accessFact) covers(log string) bool {
	return a.Active && (a.All || slices.Contains(a.Sites, log))
}

// end is the moment (ms) after which a grant with an end covers nothing; a day is over when it is over everywhere.
func (a accessFact) end() int64 {
	day, err := forms.ParseDay(a.Until)
	if a.Until == "" || err != nil {
		return math.MaxInt64
	}
	return day.Time().Add(36*time.Hour).UnixMilli() - 1
}

// facts gives what the book says of a person, oldest first.
func (g *group) facts(person string) ([]accessFact, error) {
	if f, ok := g.access[person]; ok {
		return f, nil
	}
	var all []accessFact
	prefix := idKey(person)
	c := g.tx.Bucket(bktGrant).Cursor()
	for k, v := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, v = c.Next() {
		var f accessFact
		if err := json.Unmarshal(v, &f); err != nil {
			return nil, fmt.Errorf("access of %s: %w", person, err)
		}
		all = append(all, f)
	}
	g.access[person] = all
	return all, nil
}

// noteAccess keeps what a record says about access.
func (g *group) noteAccess(r *record.Record, stamp record.Stamp) error {
	var f accessFact
	person := r.Subject
	switch r.Kind {
	case "grant.set":
		if err := json.Unmarshal(r.Body, &f); err != nil {
			return fmt.Errorf("access in %s: %w", r.ID, err)
		}
	case "installation.enrolled":
		if err := json.Unmarshal(r.Body, &f); err != nil {
			return fmt.Errorf("access in %s: %w", r.ID, err)
		}
		person = r.By
	default:
		return nil
	}
	f.At = stamp.Received.UnixMilli()
	before, err := g.facts(person)
	if err != nil {
		return err
	}
	v, err := json.Marshal(f)
	if err != nil {
		return fmt.Errorf("access in %s: %w", r.ID, err)
	}
	g.access[person] = append(before, f)
	if err := g.tx.Bucket(bktGrant).Put(binary.BigEndian.AppendUint64(idKey(person), g.seq), v); err != nil {
		return fmt.Errorf("write access of %s: %w", person, err)
	}
	return nil
}

// crewKinds are what crew may write in the log of a site they have.
var crewKinds = map[string]bool{
	"entry.made": true, "entry.corrected": true, "entry.withdrawn": true,
	"place.registered": true, "place.set": true, "panel.set": true, "circuit.set": true,
	"device.registered": true, "device.set": true, "device.retired": true, "device.replaced": true,
	"tag.bound": true, "tag.freed": true, "round.made": true, "round.set": true, "round.closed": true,
	"defect.opened": true, "defect.noted": true, "defect.made_safe": true, "defect.assigned": true,
	"defect.repaired": true, "defect.closed": true, "defect.reopened": true, "occasion.noted": true,
}

// storeKinds are made by a store of what happened to it, and taken from nobody else.
var storeKinds = map[string]bool{
	"record.refused": true, "record.admitted": true, "record.sealed": true, "person.set": true, "tags.minted": true,
	"grant.set": true, "signed.in": true, "export.taken": true, "access.used": true, "installation.enrolled": true, "installation.revoked": true,
	"book.restored": true,
}

// permit is the one place that decides who may write what. It looks at the time of the work: access that held at some
// time between a record's at and its arrival is enough; what ended in between is a flag, never a refusal.
func (g *group) permit(from Sender, r *record.Record, received time.Time) (*record.Fault, error) {
	if from.Owner {
		return nil, nil
	}
	if from.Rescue {
		if r.From == g.s.id {
			return no("from", "The record says this store made it, but it is not here. Restore the store from its backup instead."), nil
		}
		from.Installation = r.From
	}
	if from.Installation != g.s.id && !from.Rescue && from.Via == "" && isSiteLog(r.Log) && r.Kind != "site.registered" && !g.hasLog(r.Log) {
		return &record.Fault{Code: "wrong_log", Field: "log", Text: "No site of this organisation has this log. A site begins with its registration; send that first, or make the record for the site it belongs to."}, nil
	}
	own := from.Installation == g.s.id
	if r.From != from.Installation {
		return no("from", "The record was made on another device than the one that sent it. Send it from the device it was made on, or load its rescue file as the owner of the store."), nil
	}
	if own && r.By == g.s.id {
		return nil, nil // the owner, by a command
	}
	if !own && storeKinds[r.Kind] {
		return no("kind", "Records of kind "+r.Kind+" are written by the store itself and taken from no device."), nil
	}
	facts, err := g.facts(r.By)
	if err != nil {
		return nil, err
	}
	if !own && !slices.ContainsFunc(facts, func(f accessFact) bool { return f.Installation == from.Installation }) {
		return no("by", "The person named in the record never signed in on this device. Sign in on it, then send the record again."), nil
	}
	if !grantsIn(facts, r, received, func(f accessFact) bool { return mayWrite(f, r) }) {
		return no("by", "The person named in the record may not write "+r.Kind+" in this log. A manager of all sites can give them the site or the role."), nil
	}
	if own && (r.Kind == "entry.corrected" || r.Kind == "entry.withdrawn") {
		return g.permitChange(r, facts, received)
	}
	return nil, nil
}

// permitChange lets crew change their own entries and managers everybody's. Forms alone ask this: a push never depends
// on whether the entry has come yet, and the read models ask it again (fold_grant.go).
func (g *group) permitChange(r *record.Record, facts []accessFact, received time.Time) (*record.Fault, error) {
	first, ok, err := g.find(r.Subject)
	if err != nil || !ok {
		return nil, err
	}
	entry, f := record.Reread(first.raw)
	if f != nil {
		return nil, f
	}
	manager := func(f accessFact) bool { return f.covers(r.Log) && f.Role == "manager" }
	if entry.By != r.By && !grantsIn(facts, r, received, manager) {
		return no("by", "Somebody else made this entry. Ask them or a manager to change it."), nil
	}
	return nil, nil
}

func isSiteLog(log string) bool {
	class := record.LogClass(log)
	return class != record.Org && class != record.Office
}

func no(field, sentence string) *record.Fault {
	return &record.Fault{Code: "not_permitted", Field: field, Text: sentence}
}

func mayWrite(f accessFact, r *record.Record) bool {
	switch record.LogClass(r.Log) {
	case record.Org, record.Office:
		switch r.Kind {
		case "signed.in", "installation.enrolled", "installation.revoked", "export.taken", "access.used":
			return f.Active // everybody signs in, enrols a phone, takes what they may see
		}
		return f.Active && f.All && f.Role == "manager"
	}
	if !f.covers(r.Log) {
		return false
	}
	return f.Role == "manager" || f.Role == "crew" && crewKinds[r.Kind]
}

// grantsIn reports whether any grant in force between the record's at and its arrival satisfies may.
func grantsIn(facts []accessFact, r *record.Record, received time.Time, may func(accessFact) bool) bool {
	to := received.UnixMilli()
	return grantsBetween(facts, min(r.At.UnixMilli(), to), to, may)
}

// grantsBetween reports whether any grant in force at some time between two moments (ms) satisfies may.
func grantsBetween(facts []accessFact, from, to int64, may func(accessFact) bool) bool {
	for i := len(facts) - 1; i >= 0; i-- { // newest first
		f := facts[i]
		if f.Role == "" || f.At > to {
			continue
		}
		if may(f) && f.end() >= max(from, f.At) {
			return true
		}
		if f.At <= from {
			return false // what came before this grant had ended
		}
	}
	return false
}
