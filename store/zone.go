package store

import (
	"sync"
	"time"

	_ "time/tzdata" // the same zones on every machine
)

var zones sync.Map // name → *time.Location

// location loads a time zone by its IANA name, UTC where it is unknown. "Local" is unknown: it would be the machine's.
func location(name string) *time.Location {
	if z, ok := zones.Load(name); ok {
		return z.(*time.Location)
	}
	z, err := time.LoadLocation(name)
	if err != nil || name == "Local" {
		return time.UTC // not kept: names come from outside
	}
	zones.Store(name, z)
	return z
}
