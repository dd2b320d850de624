// Package proof holds the trees over logs and the signed heads: RFC 6962 hashes (golang.org/x/mod/sumdb/tlog) and
// signed notes (golang.org/x/mod/sumdb/note). It knows no store: hashes come and go through functions.
//
// Stored hashes are laid out by leaf: with leaf n (from 0) stand the hashes of all subtrees that leaf completes, from
// level 0 (the leaf itself) upwards. Level L of leaf n covers the 2^L leaves that end with n.
package proof

import (
	"crypto/sha256"
	"fmt"

	"golang.org/x/mod/sumdb/tlog"
)

// Hash is a node of a tree.
type Hash = tlog.Hash

// LeafHash hashes leaf data that may come in parts: SHA-256 over 0x00 and the data (RFC 6962, 2.1).
func LeafHash(data ...[]byte) (hash Hash) {
	h := sha256.New()
	h.Write([]byte{0})
	for _, part := range data {
		h.Write(part)
	}
	h.Sum(hash[:0])
	return hash
}

// Edge is the right edge of a tree: the hashes of the complete subtrees its size is made of, largest first. It is all
// that is needed to append and to give the root.
type Edge struct {
	Size   int64
	Hashes []Hash
}

// Append adds a leaf and gives the hashes to store with it, level 0 first.
func (e *Edge) Append(leaf Hash) []Hash {
	return e.AppendTo(nil, leaf)
}

// AppendTo is Append into a slice the caller owns.
func (e *Edge) AppendTo(stored []Hash, leaf Hash) []Hash {
	h := leaf
	stored = append(stored, h)
	for n := e.Size; n&1 == 1; n >>= 1 {
		last := len(e.Hashes) - 1
		h = tlog.NodeHash(e.Hashes[last], h)
		e.Hashes = e.Hashes[:last]
		stored = append(stored, h)
	}
	e.Hashes = append(e.Hashes, h)
	e.Size++
	return stored
}

// Root gives the root of the tree; the root of no leaves is SHA-256 of nothing.
func (e *Edge) Root() Hash {
	if len(e.Hashes) == 0 {
		h, _ := tlog.TreeHash(0, nil)
		return h
	}
	h := e.Hashes[len(e.Hashes)-1]
	for i := len(e.Hashes) - 2; i >= 0; i-- {
		h = tlog.NodeHash(e.Hashes[i], h)
	}
	return h
}

// Bytes writes the edge's hashes one after another.
func (e *Edge) Bytes() []byte {
	b := make([]byte, 0, len(e.Hashes)*tlog.HashSize)
	for _, h := range e.Hashes {
		b = append(b, h[:]...)
	}
	return b
}

// ReadEdge reads what Bytes wrote for a size.
func ReadEdge(size int64, b []byte) (Edge, error) {
	e := Edge{Size: size}
	for ; len(b) >= tlog.HashSize; b = b[tlog.HashSize:] {
		e.Hashes = append(e.Hashes, Hash(b[:tlog.HashSize]))
	}
	want := 0
	for n := size; n > 0; n &= n - 1 {
		want++
	}
	if len(e.Hashes) != want || len(b) != 0 {
		return Edge{}, fmt.Errorf("a tree of %d leaves has an edge of %d hashes, not %d and %d bytes", size, want, len(e.Hashes), len(b))
	}
	return e, nil
}

// Stored gives the hashes stored with leaf n, level 0 first.
type Stored func(n int64) ([]Hash, error)

// reader serves tlog from what is stored by leaf.
func reader(stored Stored) tlog.HashReader {
	return tlog.HashReaderFunc(func(indexes []int64) ([]Hash, error) {
		out := make([]Hash, len(indexes))
		for i, x := range indexes {
			level, n := tlog.SplitStoredHashIndex(x)
			leaf := (n+1)<<level - 1
			hashes, err := stored(leaf)
			if err != nil {
				return nil, err
			}
			if level >= len(hashes) {
				return nil, fmt.Errorf("leaf %d holds %d hashes; level %d is asked for", leaf, len(hashes), level)
			}
			out[i] = hashes[level]
		}
		return out, nil
	})
}

// Root gives the root over the first size leaves.
func Root(size int64, stored Stored) (Hash, error) { return tlog.TreeHash(size, reader(stored)) }

// Inclusion proves that leaf n is among the first size leaves.
func Inclusion(size, n int64, stored Stored) ([]Hash, error) {
	return tlog.ProveRecord(size, n, reader(stored))
}

// CheckInclusion holds a proof of Inclusion against a root.
func CheckInclusion(p []Hash, size int64, root Hash, n int64, leaf Hash) error {
	return tlog.CheckRecord(p, size, root, n, leaf)
}

// Consistency proves that the first size leaves are the same as when there were only old.
func Consistency(size, old int64, stored Stored) ([]Hash, error) {
	return tlog.ProveTree(size, old, reader(stored))
}

// CheckConsistency holds a proof of Consistency against both roots.
func CheckConsistency(p []Hash, size int64, root Hash, old int64, oldRoot Hash) error {
	return tlog.CheckTree(p, size, root, old, oldRoot)
}
