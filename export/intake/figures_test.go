package intake

import (
	"encoding/json"
	"math"
	"os"
	"testing"
)

// The same figures the phone reads (static/tests/figures.test.mjs).
func TestParseQuantity_ReadsWhatThePhoneReads(t *testing.T) {
	raw, err := os.ReadFile("../../testdata/figures.json")
	if err != nil {
		t.Fatal(err)
	}
	var table struct {
		Figures []struct {
			Text, Unit, Bound string
			Value             float64
			Refused, Blank    bool
			Negative          bool
		}
	}
	if err := json.Unmarshal(raw, &table); err != nil {
		t.Fatal(err)
	}
	if len(table.Figures) < 30 {
		t.Fatalf("only %d figures", len(table.Figures))
	}
	for _, c := range table.Figures {
		q, err := ParseQuantity(c.Text, c.Unit)
		if c.Refused || c.Blank {
			if err == nil {
				t.Errorf("%q in %s: read as %+v, want a refusal", c.Text, c.Unit, q)
			}
			continue
		}
		if c.Negative || c.Bound == string(Over) {
			if err != nil || c.Negative && q.Value >= 0 || string(q.Bound) != c.Bound {
				t.Errorf("%q in %s: %+v (%v)", c.Text, c.Unit, q, err)
			}
			continue
		}
		in, ok := q.In(c.Unit)
		if err != nil || !ok || math.Abs(in.Value-c.Value) > 1e-8*c.Value || string(in.Bound) != c.Bound {
			t.Errorf("%q in %s: %+v (%v), want %v %s", c.Text, c.Unit, in, err, c.Value, c.Bound)
		}
	}
}
