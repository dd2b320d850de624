package store

import (
	"encoding/binary"
	"errors"

	"tripwell/forms"
)

// errPacked says that a row of a read model is not what this program wrote.
var errPacked = errors.New("a row of the read models is damaged: run rebuild")

// id16 is a UUID in its 16 bytes; all zero is none.
type id16 [16]byte

// packer writes the compact rows of the read models.
type packer struct{ b []byte }

func (p *packer) byte(v byte)     { p.b = append(p.b, v) }
func (p *packer) uint(v uint64)   { p.b = binary.AppendUvarint(p.b, v) }
func (p *packer) int(v int64)     { p.b = binary.AppendVarint(p.b, v) }
func (p *packer) fixed(v uint64)  { p.b = binary.BigEndian.AppendUint64(p.b, v) }
func (p *packer) id(v id16)       { p.b = append(p.b, v[:]...) }
func (p *packer) text(s string)   { p.uint(uint64(len(s))); p.b = append(p.b, s...) }
func (p *packer) bytes(s []byte)  { p.uint(uint64(len(s))); p.b = append(p.b, s...) }
func (p *packer) day(d forms.Day) { p.int(int64(d)) }

// unpacker reads them; after the first misfit everything is zero and bad is set.
type unpacker struct {
	b   []byte
	bad bool
}

func (u *unpacker) fail() { u.b, u.bad = nil, true }

func (u *unpacker) byte() byte {
	if len(u.b) < 1 {
		u.fail()
		return 0
	}
	v := u.b[0]
	u.b = u.b[1:]
	return v
}

func (u *unpacker) uint() uint64 {
	v, n := binary.Uvarint(u.b)
	if n <= 0 {
		u.fail()
		return 0
	}
	u.b = u.b[n:]
	return v
}

func (u *unpacker) int() int64 {
	v, n := binary.Varint(u.b)
	if n <= 0 {
		u.fail()
		return 0
	}
	u.b = u.b[n:]
	return v
}

func (u *unpacker) fixed() uint64 {
	if len(u.b) < 8 {
		u.fail()
		return 0
	}
	v := binary.BigEndian.Uint64(u.b)
	u.b = u.b[8:]
	return v
}

func (u *unpacker) id() (v id16) {
	if len(u.b) < 16 {
		u.fail()
		return v
	}
	copy(v[:], u.b)
	u.b = u.b[16:]
	return v
}

// bytes points into the row.
func (u *unpacker) bytes() []byte {
	n := u.uint()
	if uint64(len(u.b)) < n {
		u.fail()
		return nil
	}
	v := u.b[:n:n]
	u.b = u.b[n:]
	return v
}

func (u *unpacker) text() string   { return string(u.bytes()) }
func (u *unpacker) day() forms.Day { return forms.Day(u.int()) }

func (u *unpacker) err() error {
	if u.bad {
		return errPacked
	}
	return nil
}

func bit(v bool) byte {
	if v {
		return 1
	}
	return 0
}
