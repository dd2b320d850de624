package proof

import (
	"encoding/json"
	"os"
	"testing"
)

// vector is a case of testdata/proofs.json, which static/proof.mjs runs too. A consistency case has from and from_root, an inclusion
// case index (from 0) and leaf.
type vector struct {
	Name     string `json:"name"`
	Source   string `json:"source"`
	Size     int64  `json:"size"`
	Root     Hash   `json:"root"`
	From     int64  `json:"from"`
	FromRoot *Hash  `json:"from_root"`
	Index    int64  `json:"index"`
	Leaf     *Hash  `json:"leaf"`
	Proof    []Hash `json:"proof"`
	Holds    bool   `json:"holds"`
}

// Cases named CT are the inclusion and consistency proofs published with the reference implementation of Certificate Transparency
// (RFC 6962, 2.1.1 and 2.1.2); the others were made by golang.org/x/mod/sumdb/tlog and then damaged.
func TestProofs_SharedCases(t *testing.T) {
	raw, err := os.ReadFile("../../testdata/proofs.json")
	if err != nil {
		t.Fatal(err)
	}
	var cases []vector
	if err := json.Unmarshal(raw, &cases); err != nil {
		t.Fatal(err)
	}
	held := 0
	for _, c := range cases {
		var err error
		if c.FromRoot != nil {
			err = CheckConsistency(c.Proof, c.Size, c.Root, c.From, *c.FromRoot)
		} else {
			err = CheckInclusion(c.Proof, c.Size, c.Root, c.Index, *c.Leaf)
		}
		if holds := err == nil; holds != c.Holds {
			t.Errorf("%s: got %v (%v), want %v", c.Name, holds, err, c.Holds)
		}
		if c.Holds {
			held++
		}
	}
	if held < 40 || len(cases)-held < 30 {
		t.Errorf("got %d cases that hold of %d, want 40 at least and 30 that do not", held, len(cases))
	}
}
