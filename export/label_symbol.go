package export

import (
	"fmt"
	"sync"

	"github.com/skip2/go-qrcode"

	"tripwell/store"
)

// symbol is an encoded address without its quiet zone, row by row; bit x of a row is its module x, 1 is dark. It is shared
// between those who draw it and never changed.
type symbol []uint64

// symbolKey names an encoding: the same address is encoded once.
type symbolKey struct {
	address string
	level   qrcode.RecoveryLevel
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

// mostModules is a row in one machine word. A label's address needs about half of it.
const mostModules = 64

// encode gives the symbol of an address.
func encode(address string, level qrcode.RecoveryLevel) (symbol, error) {
	key := symbolKey{address, level}
	if s := symbols.get(key); s != nil {
		return s, nil
	}
	q, err := qrcode.New(address, level)
	if err != nil || q.VersionNumber*4+17 > mostModules {
		return nil, &store.Error{Code: "invalid", Field: "url", Text: fmt.Sprintf("The address %s is too long for a code. Start the server with a shorter --url.", cut(address))}
	}
	q.DisableBorder = true
	s := symbolOf(q.Bitmap())
	symbols.put(key, s)
	return s, nil
}

func symbolOf(bitmap [][]bool) symbol {
	s := make(symbol, len(bitmap))
	for y, row := range bitmap {
		for x, dark := range row {
			if dark {
				s[y] |= 1 << x
			}
		}
	}
	return s
}
