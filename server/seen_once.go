package server

import "sync"

// seenOnce remembers what was noted already, so that looking again costs nothing. Forgetting is safe: a note has an id of its own.
type seenOnce struct {
	mu   sync.Mutex
	held map[string]bool
}

const seenMost = 8192

func (s *seenOnce) first(key string) bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.held[key] {
		return false
	}
	if s.held == nil || len(s.held) >= seenMost {
		s.held = map[string]bool{}
	}
	s.held[key] = true
	return true
}
