package store

import (
	"go.etcd.io/bbolt"

	"tripwell/store/record"
)

// modelVersion names the shape of the read models; a store with another one is rebuilt when it is opened.
const modelVersion = 1

// modelBuckets are all read-model buckets.
var modelBuckets [][]byte

// fold computes read models from records, in book order.
type fold struct{}

func newFold(tx *bbolt.Tx) *fold { return &fold{} }

// record folds one accepted record in memory.
func (f *fold) record(r *record.Record, st record.Stamp, seq uint64) error { return nil }

// flush writes what changed into the read-model buckets.
func (f *fold) flush() error { return nil }
