package server

import (
	"strings"
	"sync"

	"golang.org/x/time/rate"
)

// guesses counts wrong passwords, for each name from each address, and for each name from all addresses together (OWASP ASVS
// 5.0 V6.3.1; NIST SP 800-63B-4 3.2.2: no more than a hundred in a row). Only what failed counts. Where a name is tried from everywhere, an address from which its
// owner has signed in goes on as before, links and codes work for anybody all the time, and a phone needs neither: nobody
// can lock a crew out by guessing.
type guesses struct {
	mu    sync.Mutex
	by    map[string]*rate.Limiter
	known map[string]bool // address and name that belonged together once since the server began
}

const (
	guessAtOnce    = 5
	guessPerSec    = 1.0 / 30
	guessAllAtOnce = 50
	guessAllPerSec = 1.0 / 300
	guessesMost    = 16384
)

func newGuesses() *guesses {
	return &guesses{by: map[string]*rate.Limiter{}, known: map[string]bool{}}
}

// mayTry reports whether a name may be tried from an address now; it counts nothing.
func (g *guesses) mayTry(address, name string) bool {
	g.mu.Lock()
	defer g.mu.Unlock()
	pair, all := guessKeys(address, name)
	return g.of(pair).Tokens() >= 1 && (g.known[pair] || g.of(all).Tokens() >= 1)
}

// wrong counts one that failed.
func (g *guesses) wrong(address, name string) {
	g.mu.Lock()
	defer g.mu.Unlock()
	pair, all := guessKeys(address, name)
	g.of(pair).Allow()
	if !g.known[pair] {
		g.of(all).Allow()
	}
}

// right notes that a name signed in from an address.
func (g *guesses) right(address, name string) {
	g.mu.Lock()
	defer g.mu.Unlock()
	if len(g.known) >= guessesMost {
		clear(g.known)
	}
	pair, _ := guessKeys(address, name)
	g.known[pair] = true
	delete(g.by, pair)
}

// guessKeys names both counts. A name counts as the store compares it: without capitals and spaces.
func guessKeys(address, name string) (pair, all string) {
	name = strings.ToLower(strings.Join(strings.Fields(name), " "))
	if len(name) > 128 {
		name = name[:128]
	}
	return address + "|" + name, "*|" + name
}

func (g *guesses) of(key string) *rate.Limiter {
	l, ok := g.by[key]
	if ok {
		return l
	}
	if len(g.by) >= guessesMost {
		for k, l := range g.by { // whatever has recovered is as if it had never been
			if l.Tokens() >= float64(l.Burst()) {
				delete(g.by, k)
			}
		}
		if len(g.by) >= guessesMost {
			clear(g.by)
		}
	}
	l = rate.NewLimiter(guessPerSec, guessAtOnce)
	if strings.HasPrefix(key, "*|") {
		l = rate.NewLimiter(guessAllPerSec, guessAllAtOnce)
	}
	g.by[key] = l
	return l
}
