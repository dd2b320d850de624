package store

import "go.etcd.io/bbolt"

// View reads the store as it stood at one moment, within one scope.
type View struct {
	tx    *bbolt.Tx
	s     *Store
	scope Scope
}
