package forms

import (
	"encoding/json"
	"fmt"
	"os"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// vectors is testdata/verdicts.json: lines and what they must give, written by hand from the rules.
type vectors struct {
	LimitSets []*LimitSet `json:"limit_sets"`
	Cases     []struct {
		Name, Rule, Source string
		In                 json.RawMessage
		Out                struct {
			Result   string
			Findings []map[string]any
			Error    *Error
		}
	}
}

func readVectors(t testing.TB) (vectors, *Catalogue) {
	t.Helper()
	raw, err := os.ReadFile("../testdata/verdicts.json")
	if err != nil {
		t.Fatal(err)
	}
	var v vectors
	if err := json.Unmarshal(raw, &v); err != nil {
		t.Fatal(err)
	}
	shipped := Shipped()
	return v, &Catalogue{Forms: shipped.Forms, LimitSets: slices.Concat(shipped.LimitSets, v.LimitSets), Plans: shipped.Plans}
}

// judged judges one line as the command does and gives its answer as JSON.
func judged(t testing.TB, c *Catalogue, raw []byte) []byte {
	t.Helper()
	var line Line
	err := DecodeLine(raw, &line)
	var v Verdict
	if err == nil {
		v, err = c.JudgeLine(&line)
	}
	if err == nil {
		return v.AppendJSON(nil)
	}
	e, ok := asError(err)
	if !ok {
		t.Fatalf("%s: %v is no refusal", raw, err)
	}
	out, err := json.Marshal(map[string]any{"error": e})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func TestVerdicts_Vectors(t *testing.T) {
	v, catalogue := readVectors(t)
	if len(v.Cases) < 80 {
		t.Fatalf("only %d cases", len(v.Cases))
	}
	for _, c := range v.Cases {
		t.Run(c.Rule+"/"+c.Name, func(t *testing.T) {
			if c.Rule == "" || c.Out.Result == "" && c.Out.Error == nil {
				t.Fatal("a case wants a rule and what it must give")
			}
			raw := judged(t, catalogue, c.In)
			var got struct {
				Result   string
				Findings []map[string]any
				Error    *Error
			}
			if err := json.Unmarshal(raw, &got); err != nil {
				t.Fatal(err)
			}
			if diff := cmp.Diff(c.Out.Error, got.Error); diff != "" {
				t.Fatalf("error (-want +got):\n%s\n%s", diff, raw)
			}
			if got.Result != c.Out.Result {
				t.Errorf("result %q, want %q:\n%s", got.Result, c.Out.Result, raw)
			}
			if problem := compareFindings(c.Out.Findings, got.Findings); problem != "" {
				t.Errorf("%s:\n%s", problem, raw)
			}
		})
	}
}

// compareFindings holds wanted findings, in order, against those given: each must be there, and every one given that is
// no pass must be wanted.
func compareFindings(want, got []map[string]any) string {
	next := 0
	for _, g := range got {
		if next < len(want) && holdsAll(want[next], g) {
			next++
			continue
		}
		if g["verdict"] != Pass {
			return fmt.Sprintf("finding %v is not wanted there", g)
		}
	}
	if next < len(want) {
		return fmt.Sprintf("finding %v is wanted and not given", want[next])
	}
	return ""
}

func holdsAll(want, got map[string]any) bool {
	for name, w := range want {
		tolerance := 0.0
		if name == "limit" {
			tolerance = 1e-5
		}
		if !cmp.Equal(w, got[name], cmpopts.EquateApprox(tolerance, 0)) {
			return false
		}
	}
	return true
}
