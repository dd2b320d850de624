package store

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// Sealing takes the bytes of a record out of the book for good and leaves a stub with its leaf hash in its place, so that
// trees, heads and proofs stay as they were (FORMATS 12). What the read models drew from the bytes goes with them: they are
// computed anew from the sealed book, and the pages of the file that held any of it are overwritten (wipe.go).

// Seal says that a record lost its bytes.
type Seal struct {
	Record string // the record.sealed
	Reason string
	By     string
	At     time.Time
}

// Sealing is what sealing a record would do.
type Sealing struct {
	ID, Kind, Log, By string
	At                time.Time
	Restated          []string // fields that only this record states: they are stated anew, in its owner's name, before it goes
	Photos            []string // names of files that go with it
	First             string   // a sentence: what has to be done before; "" = nothing
	Sealed            *Seal    // it was sealed before
}

var errNotSealable = &Error{Code: "conflict", Field: "record", Text: "Records of this kind cannot be sealed: they hold no text of a person's, or all results depend on them."}

// sealOf gives the seal of a record of a log by the model's number of that log; nil where nobody sealed it.
func (v *View) sealOf(site uint32, id id16) (*Seal, error) {
	var first *record.Record
	for u := (unpacker{b: v.tx.Bucket(bktSeal).Get(sealKey(id, site))}); len(u.b) > 0; {
		seq := u.uint()
		if u.bad {
			return nil, errPacked
		}
		r, _, _, err := readBook(v.tx, seq)
		if err != nil {
			return nil, err
		}
		if first == nil || cmp.Or(cmp.Compare(r.Clock, first.Clock), cmp.Compare(r.ID, first.ID)) < 0 {
			first = r
		}
	}
	if first == nil {
		return nil, nil
	}
	body, err := readCorrection(first)
	if err != nil {
		return nil, err
	}
	return &Seal{Record: first.ID, Reason: body.Reason, By: first.By, At: first.At}, nil
}

// Sealed gives the seal of a record by its id; nil where nobody sealed it, or the scope does not hold its log.
func (v *View) Sealed(id string) (*Seal, error) {
	r, _, _, _, err := v.recordAt(parseID(id))
	if err != nil || r.Sealed == "" {
		return nil, nil
	}
	if r.Log == record.Org {
		return v.sealOf(v.orgLog(), parseID(id))
	}
	sv, err := v.open(r.Log)
	if err != nil {
		return nil, err
	}
	return v.sealOf(sv.ord, parseID(id))
}

// SealedIDs lists the records of the scope's logs that lost their bytes, for phones that may still hold them.
func (v *View) SealedIDs() (ids []string, err error) {
	err = v.scan(bktSeal, nil, func(k, _ []byte) error {
		row := v.tx.Bucket(bktSite).Get(k[16:])
		if len(row) < 16 {
			return errPacked
		}
		if log := id16(row[:16]).String(); v.scope.mayRead(cmp.Or(log, record.Org)) {
			ids = append(ids, id16(k).String())
		}
		return nil
	})
	return ids, err
}

// Sealing says what sealing a record would do, and what has to be done before.
func (v *View) Sealing(id string) (s Sealing, err error) {
	r, _, _, _, err := v.recordAt(parseID(id))
	if err != nil {
		return s, &Error{Code: "not_found", Field: "record", Text: "There is no record of this id here. Copy the id from the page of the test or the record."}
	}
	s = Sealing{ID: r.ID, Kind: r.Kind, Log: r.Log, By: r.By, At: r.At}
	if r.Kind == "record.refused" {
		return s, nil
	}
	if !record.Sealable(r.Kind) {
		return s, errNotSealable
	}
	if r.Sealed != "" {
		s.Sealed, err = v.Sealed(id)
		return s, err
	}
	for _, f := range FilesOf(r.Raw) {
		s.Photos = append(s.Photos, f.Name)
	}
	fields, err := v.standingFields(r)
	if err != nil {
		return s, err
	}
	s.Restated = slices.Sorted(maps.Keys(fields))
	s.First, err = v.beforeSealing(r)
	return s, err
}

// beforeSealing holds "correct first": what an entry measured must stand in a correction, or not count any more.
func (v *View) beforeSealing(r *record.Record) (string, error) {
	switch r.Kind {
	case "entry.made", "entry.imported":
		e, err := v.Entry(r.ID)
		if err != nil {
			return "", err
		}
		if e.Withdrawn == nil && !slices.ContainsFunc(e.Corrections, func(c Correction) bool { return c.InForce }) {
			return "Correct this test first, without what must go, or withdraw it: its readings are lost with its bytes.", nil
		}
	case "entry.corrected":
		e, err := v.Entry(r.Subject)
		if err == errNoEntry {
			return "", nil
		}
		if err != nil {
			return "", err
		}
		for _, c := range e.Corrections {
			if c.Record == r.ID && c.InForce && e.Withdrawn == nil {
				return "This correction is what counts of its test. Correct the test once more, without what must go, then seal this one.", nil
			}
		}
	}
	return "", nil
}

// standingFields gives the fields of a thing that this record states and nobody has stated since.
func (v *View) standingFields(r *record.Record) (map[string]json.RawMessage, error) {
	typ, ok := registerKinds[r.Kind]
	if !ok {
		return nil, nil
	}
	ord := v.orgLog()
	if r.Log != record.Org {
		sv, err := v.open(r.Log)
		if err != nil {
			return nil, err
		}
		ord = sv.ord
	}
	n := v.tx.Bucket(bktThing).Get(thingKey(parseID(r.Subject), ord, typ))
	if len(n) != 4 {
		return nil, nil
	}
	row := v.tx.Bucket(bktRegister).Get(registerKey(ord, typ, read32(n)))
	if row == nil {
		return nil, nil
	}
	reg, err := unpackRegister(row)
	if err != nil {
		return nil, err
	}
	fields := map[string]json.RawMessage{}
	for _, f := range reg.fields {
		if f.said[0].ID == r.ID && !strings.HasPrefix(f.name, "#") {
			fields[f.name] = f.said[0].Value
		}
	}
	return fields, nil
}

// SealDone is what a sealing came to.
type SealDone struct {
	Seal
	Photos int  // files removed
	Wiped  bool // the file's free pages were overwritten; false: somebody is reading for long, and it is done when they are through
	Before bool // it was sealed already
}

// Seal drops the bytes of a record: record.sealed with the reason is appended and a stub takes the place of the bytes, in one
// transaction; then the read models are computed anew, photo files no other record names are removed, and what the file still
// held in free pages is overwritten. A power cut in between is made good when the store is next opened. Only the owner may.
func (s *Store) Seal(ctx context.Context, sc Scope, id, reason string) (done SealDone, err error) {
	if sc.Role != "owner" {
		return done, &Error{Code: "forbidden", Field: "record", Text: "Only the owner of the store seals records, with the command seal on the server. Ask them."}
	}
	if reason = strings.TrimSpace(reason); reason == "" {
		return done, &Error{Code: "invalid", Field: "reason", Text: "Say why these bytes are dropped, without what must go: the reason stays for good."}
	}
	err = s.alone(ctx, func() error {
		done, err = s.seal(sc, id, reason)
		if err != nil || done.Before {
			return err
		}
		s.rebuilding.Store(true)
		defer s.rebuilding.Store(false)
		if err := s.faults.at("sealed"); err != nil {
			return err
		}
		return rebuild(ctx, s, s.db, nil)
	})
	if err != nil {
		return done, err
	}
	done.Wiped, err = s.Wipe(ctx)
	return done, err
}

// seal does what is one transaction: the seal, what has to be stated anew, the stub, and the note of what is left to do.
func (s *Store) seal(sc Scope, id, reason string) (done SealDone, err error) {
	var what Sealing
	var restate map[string]json.RawMessage
	var r *record.Record
	err = s.View(sc, func(v *View) error {
		if what, err = v.Sealing(id); err != nil {
			return err
		}
		one, _, _, _, err := v.recordAt(parseID(id))
		if err != nil {
			return err
		}
		if one, f := record.Reread(bytes.Clone(one.Raw)); f == nil {
			r = one
		}
		restate, err = v.standingFields(one)
		return err
	})
	switch {
	case err != nil:
		return done, err
	case what.Sealed != nil:
		return SealDone{Seal: *what.Sealed, Wiped: true, Before: true}, nil
	case what.First != "":
		return done, &Error{Code: "conflict", Field: "record", Text: what.First}
	case r == nil:
		return done, fmt.Errorf("record %s cannot be read", id)
	}
	now := s.now()
	by := cmp.Or(sc.Person, s.id)
	drafts := []Draft{{ID: newID(now), Kind: "record.sealed", Log: r.Log, Subject: r.ID, At: now, By: by, Body: map[string]string{"reason": reason}}}
	if len(restate) > 0 {
		kind := strings.NewReplacer(".registered", ".set", ".made", ".set").Replace(r.Kind)
		drafts = append([]Draft{{Kind: kind, Log: r.Log, Subject: r.Subject, At: now, By: by, Body: map[string]any{"set": restate}}}, drafts...)
	}
	if drafts, err = encodeBodies(drafts); err != nil {
		return done, err
	}
	one := &job{size: len(drafts), run: func(g *group) error { return g.seal(r, what.Photos, drafts) }}
	s.commit([]*job{one}, nil)
	done = SealDone{Seal: Seal{Record: drafts[len(drafts)-1].ID, Reason: reason, By: by, At: now}, Photos: len(what.Photos)}
	return done, one.err
}

func (g *group) seal(r *record.Record, files []string, drafts []Draft) error {
	if _, err := g.appendDrafts(drafts); err != nil {
		return err
	}
	var left wipeLeft
	var err error
	if r.Kind == "record.refused" {
		err = g.dropRefused(r)
	} else {
		if left.Files, err = g.filesOfNoOther(r, files); err != nil {
			return err
		}
		err = g.dropBytes(r)
	}
	if err != nil {
		return err
	}
	if err := g.put(bktMeta, metaModel, key64(0)); err != nil { // until they are computed anew, the read models hold what they drew from the bytes
		return err
	}
	return g.noteWipe(left)
}

// dropBytes puts a stub in the place of a record, and drops what came under its id with other values.
func (g *group) dropBytes(r *record.Record) error {
	key := g.ids.Get(idKey(r.ID))
	k, err := readRec(g.recs.Get(key))
	if err != nil {
		return fmt.Errorf("seal %s: %w", r.ID, err)
	}
	leaf := g.leaves.Get(logKey(k.ord, k.pos))
	if len(leaf) < 40 {
		return fmt.Errorf("seal %s: its leaf is not there", r.ID)
	}
	stub := record.Stub(r, [32]byte(leaf[8:40]))
	if again, f := record.Stored(stub); f != nil || again.Sealed == "" {
		return errNotSealable // what has to stay of it is as long as a record may be
	}
	if err := g.put(bktRec, bytes.Clone(key), stampedWith(record.Stamp{}, k.stamp, stub).at(k.ord, k.pos)); err != nil {
		return err
	}
	var differ [][]byte
	c := g.tx.Bucket(bktDiffer).Cursor()
	for key, _ := c.Seek(idKey(r.ID)); key != nil && bytes.HasPrefix(key, idKey(r.ID)); key, _ = c.Next() {
		differ = append(differ, bytes.Clone(key))
	}
	for _, key := range differ {
		if err := g.drop(bktDiffer, key); err != nil {
			return err
		}
	}
	for _, name := range photosOf(r) {
		if err := g.drop(bktSetting, refusedPhotoKey(r.ID, name)); err != nil {
			return err
		}
	}
	return nil
}

// sealedRefusal is an empty sentence and no bytes; what was refused by itself always has a sentence.
var sealedRefusal = []byte{0, 0}

// dropRefused drops what was kept of a refused record; an empty row says so.
func (g *group) dropRefused(r *record.Record) error {
	return g.put(bktQuar, bytes.Clone(g.ids.Get(idKey(r.ID))), sealedRefusal)
}

// filesOfNoOther gives those files that no other record of the book names.
func (g *group) filesOfNoOther(r *record.Record, files []string) ([]string, error) {
	if len(files) == 0 {
		return nil, nil
	}
	own := g.ids.Get(idKey(r.ID))
	alone := slices.Clone(files)
	err := g.recs.ForEach(func(k, v []byte) error {
		if len(alone) > 0 && !bytes.Equal(k, own) {
			alone = slices.DeleteFunc(alone, func(name string) bool { return bytes.Contains(v, []byte(name)) })
		}
		return nil
	})
	return alone, err
}

// leafOf gives the leaf of a record as it stands in a book: hashed, or as the stub states it.
func leafOf(r *record.Record, stamp []byte) proof.Hash {
	if leaf, ok := r.Leaf(); ok {
		return leaf
	}
	return proof.LeafHash(record.Leaf(stamp, r.Raw))
}

// LeafOf gives the leaf hash of a record's bytes, or the one its stub states.
func LeafOf(stamp, raw []byte) proof.Hash {
	r, f := record.Reread(raw)
	if f != nil {
		return proof.LeafHash(record.Leaf(stamp, raw))
	}
	r.Raw = raw
	return leafOf(r, stamp)
}

// isSame reports whether bytes that came are those of a record the book holds or held: of a stub, whether they give its leaf.
func (g *group) isSame(had fresh, raw []byte) (same, sealed bool, err error) {
	r, f := record.Reread(had.raw)
	if f != nil {
		return false, false, f
	}
	if r.Sealed == "" {
		return bytes.Equal(had.raw, raw), false, nil
	}
	k, err := readRec(g.recs.Get(key64(had.seq)))
	if err != nil {
		return false, true, err
	}
	return leafOf(r, nil) == proof.LeafHash(record.Leaf(k.stamp, raw)), true, nil
}
