package server

import (
	"context"
	"time"
)

// signEvery is how often a head is signed without being asked for: whoever holds one can later prove that what it covers still
// stands, so there should be one for every hour in which something came.
const signEvery = time.Hour

// signHeads signs a head now and then every hour until ctx ends. A store that must not sign says why in the log, and goes on.
func (s *Server) signHeads(ctx context.Context) {
	tick := time.NewTicker(signEvery)
	defer tick.Stop()
	for {
		if _, err := s.store.SignedHead(); err != nil && ctx.Err() == nil {
			s.log.Warn("no head was signed", "err", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
	}
}
