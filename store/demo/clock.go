package demo

import (
	"crypto/sha256"
	"encoding/binary"
	"math/rand/v2"
	"strings"
	"sync"
	"time"

	"github.com/google/uuid"
)

// clock is the store's clock while the months are built: it stands where the last event put it and never goes back.
type clock struct {
	mu sync.Mutex
	t  time.Time
}

// Now gives the time of the event being built.
func (c *clock) Now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.t
}

func (c *clock) walkTo(t time.Time) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if t.After(c.t) {
		c.t = t
	}
}

// seed is the same for the same key parts, so one story can change without moving all others.
func seed(parts ...string) [32]byte {
	return sha256.Sum256([]byte(strings.Join(parts, "\x1f")))
}

// chance is a source of pseudo-random numbers of its own for the thing the parts name.
func chance(parts ...string) *rand.Rand {
	sum := seed(parts...)
	return rand.New(rand.NewPCG(binary.BigEndian.Uint64(sum[:]), binary.BigEndian.Uint64(sum[8:])))
}

// newID makes a version 7 UUID (RFC 9562 5.7) of time t whose random bits come from the key parts: the same plan makes
// the same ids again.
func newID(t time.Time, parts ...string) string {
	sum := seed(parts...)
	var id uuid.UUID
	copy(id[6:], sum[:10])
	ms := uint64(t.UnixMilli())
	for i := range 6 {
		id[i] = byte(ms >> (40 - 8*i))
	}
	id[6] = id[6]&0x0f | 0x70
	id[8] = id[8]&0x3f | 0x80
	return id.String()
}
