package store

import (
	"encoding/binary"
	"encoding/json"
	"fmt"

	"tripwell/store/record"
)

// granted keeps what a person may do from a moment on, and weighs again what that person had said of entries by then.
//
// Who may change an entry is decided here and not on arrival, which depends on no other record: the tester may, and
// whoever was a manager of the site at some time between the change and its first arrival anywhere. Grants are ordered
// by their own time (never later than the first holder had them), then by (clock, id); the order in which grants,
// entries and changes reach a store has no say.
func (f *fold) granted(r *record.Record, st record.Stamp) error {
	var fact accessFact
	if err := json.Unmarshal(r.Body, &fact); err != nil {
		return badBody("", "The access in %s cannot be read: %v.", r.Kind, err)
	}
	fact.At = happened(r, st).UnixMilli()
	row, err := json.Marshal(fact)
	if err != nil {
		return fmt.Errorf("access in %s: %w", r.ID, err)
	}
	person := parseID(r.Subject)
	f.on(bktGranted).put(grantedKey(person, fact.At, r.Clock, parseID(r.ID)), row)
	f.grants.forget()
	for _, c := range f.on(bktChange).list(person[:]) {
		if received := int64(binary.BigEndian.Uint64([]byte(c.key)[16:])); received < fact.At {
			continue
		}
		l, err := f.logOf(read32(c.value))
		if err != nil {
			return err
		}
		if err := f.weighAgain(l, id16(c.value[4:])); err != nil {
			return err
		}
	}
	return nil
}

// grants are what the book says of who may do what, and when.
type grants struct {
	list  func(prefix []byte) []row
	known map[string][]accessFact
}

func newGrants(list func(prefix []byte) []row) *grants {
	return &grants{list: list, known: map[string][]accessFact{}}
}

// forget makes the grants be read again.
func (gr *grants) forget() { clear(gr.known) }

// of gives what a person was granted, oldest first.
func (gr *grants) of(person string) ([]accessFact, error) {
	if facts, ok := gr.known[person]; ok {
		return facts, nil
	}
	var facts []accessFact
	for _, r := range gr.list(idKey(person)) {
		var fact accessFact
		if err := json.Unmarshal(r.value, &fact); err != nil {
			return nil, fmt.Errorf("access of %s: %w", person, err)
		}
		facts = append(facts, fact)
	}
	gr.known[person] = facts
	return facts, nil
}

// mayChange reports whether what was said of an entry is in force. A store's own command acts for the owner: then the
// record is by the store that made it. Only a store makes seals.
func (gr *grants) mayChange(entry *record.Record, s *saidRecord) (bool, error) {
	if s.By == entry.By || s.By == s.From || s.Kind == "record.sealed" {
		return true, nil
	}
	facts, err := gr.of(s.By)
	if err != nil {
		return false, err
	}
	from, to := workTime(s.Record, s.stamp)
	return grantsBetween(facts, from, to, func(f accessFact) bool { return f.covers(s.Log) && f.Role == "manager" }), nil
}

// accessEnded reports whether, and when, the author of a record lost the right to write it between making it and its
// first arrival anywhere.
func (gr *grants) accessEnded(r *record.Record, st record.Stamp) (at int64, ended bool, err error) {
	facts, err := gr.of(r.By)
	if err != nil {
		return 0, false, err
	}
	from, to := workTime(r, st)
	may := false
	for _, f := range facts {
		if f.At > to {
			break
		}
		had := may
		if may = mayWrite(f, r); had && !may {
			at, ended = f.At, f.At > from
		}
		if end := f.end(); may && end < to {
			may, at, ended = false, end, end > from
		}
	}
	return at, ended && !may, nil
}

// workTime is the time in which a record's author must have had access: from its own time to its first arrival anywhere.
func workTime(r *record.Record, st record.Stamp) (from, to int64) {
	return happened(r, st).UnixMilli(), st.Earliest().UnixMilli()
}

func grantedKey(person id16, at int64, clock uint64, id id16) []byte {
	b := binary.BigEndian.AppendUint64(append(make([]byte, 0, 48), person[:]...), uint64(at))
	return append(binary.BigEndian.AppendUint64(b, clock), id[:]...)
}

func changeKey(person id16, received int64, seq uint64) []byte {
	b := binary.BigEndian.AppendUint64(append(make([]byte, 0, 32), person[:]...), uint64(received))
	return binary.BigEndian.AppendUint64(b, seq)
}
