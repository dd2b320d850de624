package store

import (
	"cmp"
	"slices"
)

// binding is what was last said, by (clock, id), of one tag on one subject.
type binding struct {
	live  bool
	clock uint64
	id    id16
}

func (b binding) before(o binding) bool {
	return cmp.Or(cmp.Compare(b.clock, o.clock), slices.Compare(b.id[:], o.id[:])) < 0
}

func (b binding) pack() []byte {
	p := packer{make([]byte, 0, 25)}
	if b.live {
		p.byte(1)
	} else {
		p.byte(0)
	}
	p.fixed(b.clock)
	p.id(b.id)
	return p.b
}

// unpackBinding reads a binding; of no row it makes one that comes before all others.
func unpackBinding(v []byte) (binding, error) {
	if v == nil {
		return binding{}, nil
	}
	u := unpacker{b: v}
	b := binding{live: u.byte() == 1, clock: u.fixed(), id: u.id()}
	return b, u.err()
}
