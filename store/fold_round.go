package store

import (
	"bytes"

	"tripwell/store/record"
)

// roundSaid keeps that a round was closed or accepted beside the round, which may come later or never: a walk that a crew
// began by itself was made by nobody.
func (f *fold) roundSaid(r *record.Record) error {
	if _, err := readRoundSaid(r); err != nil {
		return err
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	key, reg, err := f.register(l, ofRound, parseID(r.Subject))
	if err != nil {
		return err
	}
	reg.dirty = true // a row of its own, so that lists find it
	row := workKey(key.site, key.n)
	p := packer{bytes.Clone(f.on(bktRound).get(row))}
	p.uint(f.seq)
	f.on(bktRound).put(row, p.b)
	return nil
}
