package store

import (
	"bytes"
	"encoding/binary"
	"maps"
	"slices"

	"tripwell/forms"
)

// overAllSites stands for the number of a log in the sums over all of them; logs count from 1.
const overAllSites = 0

// sumKey is what the dates have in common that a site counts together: enough to say on any day what they are.
func sumKey(site uint32, d forms.DueDate) []byte {
	b := putDay(put32(make([]byte, 0, 24+len(d.Task)), site), d.Due)
	b = binary.BigEndian.AppendUint16(b, graceDays(d))
	period := uint16(min(d.Every.Months, 0x3fff))
	if d.Every.Months == 0 {
		period = 0x4000 | uint16(min(d.Every.Days, 0x3fff))
	}
	if d.Tried {
		period |= 0x8000
	}
	b = append(binary.BigEndian.AppendUint16(b, period), d.Task...)
	if len(d.Pauses)+len(d.Shut) > 0 {
		b = binary.BigEndian.AppendUint16(append(b, 0), uint16(len(d.Pauses)))
		for _, p := range d.Pauses {
			b = putDay(putDay(b, p.From), p.Until)
		}
		for _, day := range d.Shut {
			b = putDay(b, day)
		}
	}
	return b
}

// sameSum says whether two dates of a task count in the same sum: whether their keys are equal.
func sameSum(a, b *forms.DueDate) bool {
	return a.Due == b.Due && a.Until == b.Until && a.Every == b.Every && a.Tried == b.Tried && slices.Equal(a.Pauses, b.Pauses) && slices.Equal(a.Shut, b.Shut)
}

// readSum gives a date as its sum's key tells it.
func readSum(key []byte) (d forms.DueDate) {
	if len(key) < 12 {
		return d
	}
	d.Due = readDay(key[4:])
	d.Until = d.Due + forms.Day(binary.BigEndian.Uint16(key[8:]))
	period := binary.BigEndian.Uint16(key[10:])
	d.Tried = period&0x8000 != 0
	if period &= 0x7fff; period&0x4000 != 0 {
		d.Every.Days = int(period & 0x3fff)
	} else {
		d.Every.Months = int(period)
	}
	task, tail, more := bytes.Cut(key[12:], []byte{0})
	d.Task, d.Last, d.Opens = taskName(task), forms.NoDay, d.Due
	if !more || len(tail) < 2 {
		return d
	}
	pauses := int(binary.BigEndian.Uint16(tail))
	for tail = tail[2:]; pauses > 0 && len(tail) >= 8; tail, pauses = tail[8:], pauses-1 {
		d.Pauses = append(d.Pauses, forms.Pause{From: readDay(tail), Until: readDay(tail[4:])})
	}
	for ; len(tail) >= 4; tail = tail[4:] {
		d.Shut = append(d.Shut, readDay(tail))
	}
	return d
}

func graceDays(d forms.DueDate) uint16 { return uint16(min(max(0, d.Until-d.Due), 1<<16-1)) }

// taskName spares the making of the same names.
func taskName(b []byte) string {
	for _, t := range taskCodes {
		if string(b) == t {
			return t
		}
	}
	return string(b)
}

// monthKept is what became of the dates that count in one month, by place in forms.Outcomes.
type monthKept [5]int64

// eachKept reads a row of m_keep from a month on.
func eachKept(row []byte, from int32, fn func(month int32, k *monthKept)) error {
	u := unpacker{b: row}
	month := int32(0)
	for len(u.b) > 0 && !u.bad {
		month += int32(u.int())
		var k monthKept
		for i := range k {
			k[i] = int64(u.uint())
		}
		if month >= from {
			fn(month, &k)
		}
	}
	return u.err()
}

// count adds what a row of m_keep says of a month.
func (k *monthKept) count(c *forms.Count) {
	c.Join(forms.Count{InTime: int(k[0]), Graced: int(k[1]), Late: int(k[2]), Missed: int(k[3]), NoAccess: int(k[4])})
}

// packMonths writes a row of m_keep, nil for none.
func packMonths(months map[int32]monthKept) []byte {
	var p packer
	last := int32(0)
	for _, month := range slices.Sorted(maps.Keys(months)) {
		p.int(int64(month - last))
		last = month
		for _, n := range months[month] {
			p.uint(uint64(n))
		}
	}
	return p.b
}
