package store

import (
	"bytes"
	"cmp"
	"encoding/binary"
	"fmt"
	"slices"

	"go.etcd.io/bbolt"

	"tripwell/store/proof"
	"tripwell/store/record"
)

// fillSequential is how full pages of keys that arrive in order are made.
const fillSequential = 0.95

// group is what one transaction appends. Everything is looked up when first needed and written once at the end; the
// transaction is the only state, so a failed commit leaves nothing behind.
type group struct {
	s       *Store
	tx      *bbolt.Tx
	fold    *fold
	changes int // counts everything that would have to be undone

	recs, ids, leaves *bbolt.Bucket

	seq     uint64
	clock   uint64
	logs    map[string]*openLog
	counts  map[string]*runs
	access  map[string][]accessFact
	fresh   map[[16]byte]fresh // accepted in this group
	order   [][16]byte
	refused bool // the quarantine holds something
	reused  bool // the last record counted used an n that was taken
	buf     []byte
	hashes  []proof.Hash
}

// fresh is a record accepted in this group.
type fresh struct {
	seq uint64
	raw []byte
	log string
	pos int64
}

// openLog is a log this group appends to.
type openLog struct {
	name string
	ord  uint32
	edge proof.Edge
	grew bool
}

func newGroup(s *Store, tx *bbolt.Tx) *group {
	g := &group{
		s: s, tx: tx, fold: newFold(tx),
		recs: tx.Bucket(bktRec), ids: tx.Bucket(bktID), leaves: tx.Bucket(bktLog),
		clock: readKey64(tx.Bucket(bktMeta).Get(metaClock)),
		logs:  map[string]*openLog{}, counts: map[string]*runs{}, access: map[string][]accessFact{}, fresh: map[[16]byte]fresh{},
	}
	g.recs.FillPercent, g.leaves.FillPercent = fillSequential, fillSequential
	if k, _ := g.recs.Cursor().Last(); k != nil {
		g.seq = binary.BigEndian.Uint64(k)
	}
	k, _ := tx.Bucket(bktQuarSHA).Cursor().First()
	g.refused = k != nil
	return g
}

// accept appends a record: folds it, then gives it its place. A record the fold cannot take is a fault and leaves no
// trace.
func (g *group) accept(r *record.Record, st stamped) (pos int64, err error) {
	if err := g.fold.record(r, st.stamp, g.seq+1); err != nil {
		return 0, err
	}
	if pos, err = g.place(r, st); err != nil {
		return 0, err
	}
	return pos, g.note(r, st.stamp, g.logs[r.Log].ord)
}

// place gives a record its place in the book, and nothing else.
func (g *group) place(r *record.Record, st stamped) (pos int64, err error) {
	g.changes++
	g.seq++
	l, err := g.openLog(r.Log)
	if err != nil {
		return 0, err
	}
	g.hashes = l.edge.AppendTo(g.hashes[:0], st.leaf)
	l.grew = true
	pos = l.edge.Size
	id, _ := record.IDBytes(r.ID)
	g.fresh[id] = fresh{g.seq, r.Raw, r.Log, pos}
	g.order = append(g.order, id)
	g.clock = max(g.clock, r.Clock)
	if err := g.recs.Put(key64(g.seq), st.at(l.ord, pos)); err != nil {
		return 0, fmt.Errorf("append record %s: %w", r.ID, err)
	}
	if err := g.leaves.Put(logKey(l.ord, pos), g.leafValue()); err != nil {
		return 0, fmt.Errorf("append leaf %s: %w", r.ID, err)
	}
	return pos, nil
}

// note keeps what is counted from a record.
func (g *group) note(r *record.Record, stamp record.Stamp, ord uint32) error {
	if err := g.count(r, ord); err != nil {
		return err
	}
	if err := g.noteAccess(r, stamp); err != nil {
		return err
	}
	return g.noteTags(r)
}

// room gives n bytes that stay as they are until the transaction ends (bbolt keeps values by reference).
func (g *group) room(n int) []byte {
	if len(g.buf) < n {
		g.buf = make([]byte, max(n, 32<<10))
	}
	b := g.buf[:n:n]
	g.buf = g.buf[n:]
	return b
}

// recHead is how long a row of the bucket rec is before the stamp: ord 4 | pos 8 | length of the stamp 2.
const recHead = 14

// at gives the row of a record that takes a place. It stays as it is until the transaction ends.
func (st stamped) at(ord uint32, pos int64) []byte {
	binary.BigEndian.PutUint32(st.row, ord)
	binary.BigEndian.PutUint64(st.row[4:], uint64(pos))
	binary.BigEndian.PutUint16(st.row[12:], uint16(st.line))
	return st.row
}

func (g *group) leafValue() []byte {
	b := g.room(8 + 32*len(g.hashes))
	binary.BigEndian.PutUint64(b, g.seq)
	for i, h := range g.hashes {
		copy(b[8+32*i:], h[:])
	}
	return b
}

// openLog gives a log to append to, a new one where there is none of that name.
func (g *group) openLog(name string) (*openLog, error) {
	if l := g.logs[name]; l != nil {
		return l, nil
	}
	l := &openLog{name: name}
	if v := g.tx.Bucket(bktLogs).Get([]byte(name)); v != nil {
		var err error
		if l.ord, l.edge, err = readLog(v); err != nil {
			return nil, fmt.Errorf("log %s: %w", name, err)
		}
	} else {
		names := g.tx.Bucket(bktNames)
		if k, _ := names.Cursor().Last(); k != nil {
			l.ord = binary.BigEndian.Uint32(k)
		}
		l.ord++
		if err := names.Put(key32(l.ord), []byte(name)); err != nil {
			return nil, fmt.Errorf("open log %s: %w", name, err)
		}
	}
	g.logs[name] = l
	return l, nil
}

// hasLog reports whether a log has at least one record.
func (g *group) hasLog(name string) bool {
	return g.logs[name] != nil || g.tx.Bucket(bktLogs).Get([]byte(name)) != nil
}

func readLog(v []byte) (uint32, proof.Edge, error) {
	if len(v) < 12 {
		return 0, proof.Edge{}, fmt.Errorf("its entry is %d bytes long", len(v))
	}
	edge, err := proof.ReadEdge(int64(binary.BigEndian.Uint64(v[4:])), v[12:])
	return binary.BigEndian.Uint32(v), edge, err
}

// flush writes what was gathered: read models, ids, ends of logs, counts, the clock.
func (g *group) flush() error {
	if err := g.fold.flush(); err != nil {
		return fmt.Errorf("write read models: %w", err)
	}
	slices.SortFunc(g.order, func(a, b [16]byte) int { return bytes.Compare(a[:], b[:]) })
	for _, id := range g.order {
		v := g.room(8)
		binary.BigEndian.PutUint64(v, g.fresh[id].seq)
		if err := g.ids.Put(id[:], v); err != nil {
			return fmt.Errorf("write id: %w", err)
		}
	}
	grown := make([]*openLog, 0, len(g.logs))
	for _, l := range g.logs {
		if l.grew {
			grown = append(grown, l)
		}
	}
	slices.SortFunc(grown, func(a, b *openLog) int { return cmp.Compare(a.ord, b.ord) })
	for _, l := range grown {
		v := append(logKey(l.ord, l.edge.Size), l.edge.Bytes()...)
		if err := g.tx.Bucket(bktLogs).Put([]byte(l.name), v); err != nil {
			return fmt.Errorf("write log %s: %w", l.name, err)
		}
	}
	if err := g.flushCounts(); err != nil {
		return err
	}
	if err := g.tx.Bucket(bktMeta).Put(metaClock, key64(g.clock)); err != nil {
		return fmt.Errorf("write clock: %w", err)
	}
	return nil
}

// kept is a record as it stands in the book; its bytes point into the file.
type kept struct {
	ord        uint32
	pos        int64
	stamp, raw []byte
}

func readRec(v []byte) (kept, error) {
	if len(v) < recHead {
		return kept{}, fmt.Errorf("a record's entry is %d bytes long", len(v))
	}
	n := int(binary.BigEndian.Uint16(v[12:]))
	if len(v) < recHead+n {
		return kept{}, fmt.Errorf("a record's entry ends within its stamp")
	}
	return kept{binary.BigEndian.Uint32(v), int64(binary.BigEndian.Uint64(v[4:])), v[recHead : recHead+n], v[recHead+n:]}, nil
}

// find gives a record by id: its bytes, log and place. ok is false where there is none.
func (g *group) find(id string) (f fresh, ok bool, err error) {
	key, _ := record.IDBytes(id)
	if f, ok := g.fresh[key]; ok {
		return f, true, nil
	}
	v := g.ids.Get(key[:])
	if v == nil {
		return fresh{}, false, nil
	}
	k, err := readRec(g.recs.Get(v))
	if err != nil {
		return fresh{}, false, fmt.Errorf("record %s: %w", id, err)
	}
	name := g.tx.Bucket(bktNames).Get(key32(k.ord))
	return fresh{readKey64(v), k.raw, string(name), k.pos}, true, nil
}
