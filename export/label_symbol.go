package export

import (
	"fmt"
	"math"
	"math/bits"
	"sync"

	"rsc.io/qr/coding"

	"tripwell/store"
)

// symbol is an encoded address without its quiet zone, row by row; bit x of a row is its module x, 1 is dark. It is shared
// between those who draw it and never changed.
type symbol []uint64

// symbolKey names an encoding: the same address is encoded once.
type symbolKey struct {
	address string
	level   coding.Level
}

// keptSymbols bounds the cache: about 400 bytes each.
const keptSymbols = 4096

// symbolCache keeps what was encoded last. Encoding is most of the work of a sheet, and people print a sheet again: for
// one label that came off badly, with another start, onto another size.
type symbolCache struct {
	mu sync.Mutex
	of map[symbolKey]symbol
}

var symbols = symbolCache{of: map[symbolKey]symbol{}}

func (c *symbolCache) get(key symbolKey) symbol {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.of[key]
}

func (c *symbolCache) put(key symbolKey, s symbol) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if len(c.of) >= keptSymbols {
		for old := range c.of { // any half: which ones decides only about time
			if delete(c.of, old); len(c.of) <= keptSymbols/2 {
				break
			}
		}
	}
	c.of[key] = s
}

// masks is how many ways of inverting modules ISO/IEC 18004 has (7.8.2).
const masks = 8

// mostVersion has 61 modules a side, so that a row is one machine word. A label's address is far shorter.
const mostVersion = 11

// symbolPlan holds what all symbols of one version and level have in common: how they are made under the first mask, and
// which modules every mask turns against that, by rows and by columns. It is made once and only read afterwards.
type symbolPlan struct {
	once  sync.Once
	err   error
	first *coding.Plan
	turns [masks]struct{ rows, columns []uint64 }
}

var symbolPlans [mostVersion + 1][coding.H + 1]symbolPlan

func planOf(v coding.Version, level coding.Level) (*symbolPlan, error) {
	p := &symbolPlans[v][level]
	p.once.Do(func() { p.err = p.make(v, level) })
	return p, p.err
}

func (p *symbolPlan) make(v coding.Version, level coding.Level) error {
	var first []uint64
	for mask := range masks {
		plan, err := coding.NewPlan(v, level, coding.Mask(mask))
		if err != nil {
			return err
		}
		code, err := plan.Encode(coding.Alpha("0")) // any text: what differs is the mask
		if err != nil {
			return err
		}
		if mask == 0 {
			p.first, first = plan, rowsOf(code)
		}
		rows := rowsOf(code)
		for y := range rows {
			rows[y] ^= first[y]
		}
		p.turns[mask].rows, p.turns[mask].columns = rows, turned(rows)
	}
	return nil
}

// rowsOf reads the modules of a code: bit x of a row is its module x.
func rowsOf(code *coding.Code) []uint64 {
	rows := make([]uint64, code.Size)
	for y := range rows {
		for i, eight := range code.Bitmap[y*code.Stride : y*code.Stride+(code.Size+7)/8] {
			rows[y] |= uint64(bits.Reverse8(eight)) << (8 * i)
		}
	}
	return rows
}

// turned gives the columns of rows.
func turned(rows []uint64) []uint64 {
	columns := make([]uint64, len(rows))
	for y, row := range rows {
		for ; row != 0; row &= row - 1 {
			columns[bits.TrailingZeros64(row)] |= 1 << y
		}
	}
	return columns
}

// drawSymbol encodes a text in the smallest symbol of a level, under the mask that ISO/IEC 18004 prefers (7.8.3).
func drawSymbol(text string, level coding.Level) (symbol, error) {
	var enc coding.Encoding = coding.Alpha(text)
	if enc.Check() != nil {
		enc = coding.String(text)
	}
	v := coding.Version(coding.MinVersion)
	for enc.Bits(v) > v.DataBytes(level)*8 {
		if v++; v > mostVersion {
			return nil, &store.Error{Code: "invalid", Field: "url", Text: fmt.Sprintf("The address %s is too long for a code. Start the server with a shorter --url.", cut(text))}
		}
	}
	plan, err := planOf(v, level)
	if err != nil {
		return nil, fmt.Errorf("code of %s: %w", cut(text), err)
	}
	code, err := plan.first.Encode(enc)
	if err != nil {
		return nil, fmt.Errorf("code of %s: %w", cut(text), err)
	}
	rows := rowsOf(code)
	columns := turned(rows)
	best, least := 0, math.MaxInt
	for mask := range masks {
		if p := plan.penalty(mask, rows, columns); p < least {
			best, least = mask, p
		}
	}
	for y, turn := range plan.turns[best].rows {
		rows[y] ^= turn
	}
	return rows, nil
}

// penalty weighs what would make a symbol hard to read under a mask, by the four rules of ISO/IEC 18004, table 11: long
// runs, blocks of one colour, what looks like a finder, and more dark than light or the other way round.
func (p *symbolPlan) penalty(mask int, rows, columns []uint64) (sum int) {
	n, dark := len(rows), 0
	turn := &p.turns[mask]
	above, aboveSame := uint64(0), uint64(0)
	for i := range n {
		row := rows[i] ^ turn.rows[i]
		sum += linePenalty(row, n) + linePenalty(columns[i]^turn.columns[i], n)
		dark += bits.OnesCount64(row)
		same := alike(row, n)
		if i > 0 {
			sum += 3 * bits.OnesCount64(same&aboveSame&^(row^above))
		}
		above, aboveSame = row, same
	}
	all := n * n
	off := max(2*dark-all, all-2*dark) // twice what is over or under half
	return sum + off*10/all*10
}

// alike has a bit for every module of a line of n that is like its next one.
func alike(line uint64, n int) uint64 { return ^(line ^ line>>1) & (1<<(n-1) - 1) }

// linePenalty weighs a row or a column of n modules: runs of five and more, and finders that are none.
func linePenalty(line uint64, n int) int {
	same := alike(line, n)
	five := same & (same >> 1) & (same >> 2) & (same >> 3) // where five alike begin
	p := bits.OnesCount64(five) + 2*bits.OnesCount64(five&^(five<<1))
	// Dark, light, three dark, light, dark, with four light modules on one side.
	light := ^line
	finder := line & (light >> 1) & (line >> 2) & (line >> 3) & (line >> 4) & (light >> 5) & (line >> 6)
	four := light & (light >> 1) & (light >> 2) & (light >> 3)
	places := uint64(0)
	if n >= 11 {
		places = 1<<(n-10) - 1
	}
	return p + 40*bits.OnesCount64(finder&(four>>7)&places) + 40*bits.OnesCount64(four&(finder>>4)&places)
}

// encode gives the symbol of an address.
func encode(address string, level coding.Level) (symbol, error) {
	key := symbolKey{address, level}
	if s := symbols.get(key); s != nil {
		return s, nil
	}
	s, err := drawSymbol(address, level)
	if err == nil {
		symbols.put(key, s)
	}
	return s, err
}
