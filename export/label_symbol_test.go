package export

import (
	"math/bits"
	"slices"
	"strings"
	"testing"

	"github.com/skip2/go-qrcode"
	"rsc.io/qr/coding"
)

// maskOf reads the mask out of a symbol: bits 12 to 10 of its format, which stand in the row under the first finder
// under the pattern 101 (ISO/IEC 18004, 7.9.1).
func maskOf(s symbol) int {
	return int(bits.Reverse8(uint8(s[8]>>2&0b111)))>>5 ^ 0b101
}

// Another encoder, go-qrcode, gives the same modules under the same mask.
func TestSymbol_SameAsAnotherEncoder(t *testing.T) {
	for level, theirs := range map[coding.Level]qrcode.RecoveryLevel{coding.L: qrcode.Low, coding.M: qrcode.Medium} {
		for n := 1; n < 120; n++ {
			text := "HTTPS://" + strings.Repeat("TRIPWELL.", 14)[:n] + "/T/K7QM2P3"
			q, err := qrcode.New(text, theirs)
			if err != nil {
				t.Fatal(err)
			}
			q.DisableBorder = true
			want := symbolOf(q.Bitmap())
			got, err := drawSymbol(text, level)
			if err != nil {
				t.Fatal(err)
			}
			if len(got) != len(want) {
				t.Fatalf("%s, level %v: got %d modules a side, go-qrcode %d", text, level, len(got), len(want))
			}
			plan, err := planOf(coding.Version(q.VersionNumber), level)
			if err != nil {
				t.Fatal(err)
			}
			ours, theirs := maskOf(got), maskOf(want)
			same := slices.Clone(got) // under the mask that go-qrcode took
			for y := range same {
				same[y] ^= plan.turns[ours].rows[y] ^ plan.turns[theirs].rows[y]
			}
			if !slices.Equal(same, want) {
				t.Fatalf("%s, level %v: the modules differ from those of go-qrcode under mask %d", text, level, theirs)
			}
			unmasked := slices.Clone(got)
			for y := range unmasked {
				unmasked[y] ^= plan.turns[ours].rows[y]
			}
			columns := turned(unmasked)
			if a, b := plan.penalty(ours, unmasked, columns), plan.penalty(theirs, unmasked, columns); a > b {
				t.Errorf("%s, level %v: penalty %d under mask %d, but %d under mask %d", text, level, a, ours, b, theirs)
			}
		}
	}
}

func symbolOf(bitmap [][]bool) symbol {
	s := make(symbol, len(bitmap))
	for y, row := range bitmap {
		for x, dark := range row {
			if dark {
				s[y] |= 1 << x
			}
		}
	}
	return s
}

func TestSymbol_PenaltyRules(t *testing.T) {
	for name, c := range map[string]struct {
		line string
		want int
	}{
		// ISO/IEC 18004, table 11: a run of 5 + i modules weighs 3 + i, a finder beside four light modules 40.
		"no run":         {"0110101100", 0},
		"five":           {"0111110", 3},
		"seven":          {"1000000010", 5},
		"finder, after":  {"10111010000", 40},
		"finder, before": {"00001011101", 40},
		"finder, alone":  {"1010111010001", 0},
		"run and finder": {"000001011101", 43},
	} {
		var line uint64
		for i, m := range c.line {
			line |= uint64(m-'0') << i
		}
		if got := linePenalty(line, len(c.line)); got != c.want {
			t.Errorf("%s: %s weighs %d, want %d", name, c.line, got, c.want)
		}
	}
	// All light: no line of 2 modules has a run; one block (3), and half of the modules too few (100).
	var p symbolPlan
	p.turns[0].rows, p.turns[0].columns = make([]uint64, 2), make([]uint64, 2)
	if got := p.penalty(0, make([]uint64, 2), make([]uint64, 2)); got != 103 {
		t.Errorf("2 x 2 light modules weigh %d, want 103", got)
	}
}
