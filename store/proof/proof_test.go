package proof

import (
	"crypto/rand"
	"encoding/hex"
	"fmt"
	"strings"
	"testing"
	"time"

	"golang.org/x/mod/sumdb/tlog"
)

// RFC 6962 (and RFC 9162), 2.1: the leaves and roots are the test vectors published with the reference implementation of
// Certificate Transparency.
var (
	vectorLeaves = []string{"", "00", "10", "2021", "3031", "40414243", "5051525354555657", "606162636465666768696a6b6c6d6e6f"}
	vectorRoots  = []string{
		"e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855",
		"6e340b9cffb37a989ca544e6bb780a2c78901d3fb33738768511a30617afa01d",
		"fac54203e7cc696cf0dfcb42c92a1d9dbaf70ad9e621f4bd8d98662f00e3c125",
		"aeb6bcfe274b70a14fb067a5e5578264db0fa9b51af5e0ba159158f329e06e77",
		"d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
		"4e3bbb1f7b478dcfe71fb631631519a3bca12c9aefca1612bfce4c13a86264d4",
		"76e67dadbcdf1e10e1b74ddc608abd2f98dfb16fbce75277b5232a127f2087ef",
		"ddb89be403809e325750d3d263cd78929c2942b7942a34b77e122c9594a74c8c",
		"5dc9da79a70659a9ad559cb701ded9a2ab9d823aad2f4960cfe370eff4604328",
	}
	vectorInclusion = []string{
		"96a296d224f285c67bee93c30f8a309157f0daa35dc5b87e410b78630a09cfc7",
		"5f083f0a1a33ca076a95279832580db3e0ef4584bdff1f54c8a360f50de3031e",
		"6b47aaf29ee3c2af9af889bc1fb9254dabd31177f16232dd6aab035ca39bf6e4",
	}
)

// grow builds a tree and keeps what is stored with each leaf.
func grow(leaves [][]byte) (Edge, [][]Hash) {
	var e Edge
	var stored [][]Hash
	for _, l := range leaves {
		stored = append(stored, e.Append(LeafHash(l)))
	}
	return e, stored
}

func serve(stored [][]Hash) Stored {
	return func(n int64) ([]Hash, error) { return stored[n], nil }
}

func TestTree_PublishedVectors(t *testing.T) {
	var leaves [][]byte
	for size := 0; ; size++ {
		e, stored := grow(leaves)
		if got := hex.EncodeToString(hash(e.Root())); got != vectorRoots[size] {
			t.Errorf("root of %d leaves: got %s, want %s", size, got, vectorRoots[size])
		}
		root, err := Root(int64(size), serve(stored))
		if err != nil || root != e.Root() {
			t.Errorf("root of %d from stored hashes: got %v %v, want %v", size, root, err, e.Root())
		}
		if size == len(vectorLeaves) {
			break
		}
		b, _ := hex.DecodeString(vectorLeaves[size])
		leaves = append(leaves, b)
	}
	e, stored := grow(leaves)
	p, err := Inclusion(8, 0, serve(stored))
	if err != nil {
		t.Fatal(err)
	}
	for i, h := range p {
		if got := hex.EncodeToString(hash(h)); got != vectorInclusion[i] {
			t.Errorf("inclusion %d: got %s, want %s", i, got, vectorInclusion[i])
		}
	}
	if err := CheckInclusion(p, 8, e.Root(), 0, LeafHash(leaves[0])); err != nil {
		t.Error(err)
	}
	if CheckInclusion(p, 8, e.Root(), 0, LeafHash(leaves[1])) == nil {
		t.Error("a proof of leaf 0 was taken for leaf 1")
	}
}

func hash(h Hash) []byte { return h[:] }

func TestTree_StoredHashesAreThoseOfTlog(t *testing.T) {
	var flat []Hash
	read := tlog.HashReaderFunc(func(ix []int64) ([]Hash, error) {
		var out []Hash
		for _, i := range ix {
			out = append(out, flat[i])
		}
		return out, nil
	})
	var e Edge
	var stored [][]Hash
	for n := range int64(200) {
		data := fmt.Appendf(nil, "leaf %d", n)
		want, err := tlog.StoredHashes(n, data, read)
		if err != nil {
			t.Fatal(err)
		}
		flat = append(flat, want...)
		got := e.Append(LeafHash(data))
		if fmt.Sprint(got) != fmt.Sprint(want) {
			t.Fatalf("leaf %d: got %v, want %v", n, got, want)
		}
		stored = append(stored, got)
		back, err := ReadEdge(e.Size, e.Bytes())
		if err != nil || back.Root() != e.Root() {
			t.Fatalf("edge of %d leaves does not come back: %v", e.Size, err)
		}
	}
	for old := int64(1); old < 200; old += 13 {
		p, err := Consistency(200, old, serve(stored))
		if err != nil {
			t.Fatal(err)
		}
		before, _ := Root(old, serve(stored))
		if err := CheckConsistency(p, 200, e.Root(), old, before); err != nil {
			t.Errorf("from %d: %v", old, err)
		}
		if CheckConsistency(p, 200, e.Root(), old, LeafHash(nil)) == nil {
			t.Errorf("from %d: another old root was taken", old)
		}
	}
}

func TestHead_SaysWhatItCovers(t *testing.T) {
	private, public, err := NewKey(rand.Reader, "tripwell/o/s")
	if err != nil {
		t.Fatal(err)
	}
	logs := []LogRoot{{"org", 2, LeafHash([]byte("a"))}, {"office", 1, LeafHash([]byte("b"))}}
	h := Head{"tripwell/o/s/1", time.Date(2026, 12, 1, 8, 0, 0, 5e6, time.UTC), logs}
	signed, err := h.Sign(private)
	if err != nil {
		t.Fatal(err)
	}
	got, err := Verify(signed, public, []LogRoot{logs[1], logs[0]}) // the order given has no say
	if err != nil || got.Origin != h.Origin || !got.Time.Equal(h.Time) {
		t.Fatalf("got %+v %v, want %+v", got, err, h)
	}
	if _, err := Verify(strings.Replace(signed, "08:00", "09:00", 1), public, logs); err == nil {
		t.Error("an altered time was taken")
	}
	logs[0].Size = 3
	if _, err := Verify(signed, public, logs); err == nil {
		t.Error("a longer log was taken for the one that was signed")
	}
	if _, err := Verify(signed, public, logs[:1]); err == nil {
		t.Error("a missing log was not missed")
	}
}
