package forms

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"os/exec"
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

// node runs the JavaScript judge over lines and gives what testdata/verdicts_run.mjs writes.
func node(t *testing.T, c *Catalogue, lines []json.RawMessage) (out struct {
	Judge   int
	Codes   []Code
	Missing []string
	Answers []string
	Limits  []json.RawMessage
}) {
	t.Helper()
	path, err := exec.LookPath("node")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("node is not installed: the JavaScript judge cannot be run")
		}
		t.Skip("node is not installed: the JavaScript judge is not run")
	}
	stdin, err := json.Marshal(map[string]any{"catalogue": c, "lines": lines})
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.CommandContext(t.Context(), path, "../testdata/verdicts_run.mjs")
	cmd.Stdin = bytes.NewReader(stdin)
	var stdout, stderr bytes.Buffer
	cmd.Stdout, cmd.Stderr = &stdout, &stderr
	if err := cmd.Run(); err != nil {
		t.Fatalf("node: %v\n%s", err, stderr.Bytes())
	}
	if err := json.Unmarshal(stdout.Bytes(), &out); err != nil {
		t.Fatal(err)
	}
	return out
}

// Both judges must write the same bytes.
func TestVerdicts_JavaScriptAnswersTheSame(t *testing.T) {
	v, catalogue := readVectors(t)
	var lines []json.RawMessage
	for _, c := range v.Cases {
		lines = append(lines, c.In)
	}
	out := node(t, catalogue, lines)
	if out.Judge != JudgeVersion {
		t.Errorf("judge version %d, want %d", out.Judge, JudgeVersion)
	}
	if diff := cmp.Diff(Codes(), out.Codes); diff != "" {
		t.Errorf("reading codes (-Go +JavaScript):\n%s", diff)
	}
	if diff := cmp.Diff(MissingReasons(), out.Missing); diff != "" {
		t.Errorf("missing reasons (-Go +JavaScript):\n%s", diff)
	}
	for i, c := range v.Cases {
		want := judged(t, catalogue, c.In)
		if c.Out.Error != nil {
			want = sameNames(t, want)
		}
		if out.Answers[i] != string(want) {
			t.Errorf("%s:\n      Go %s\nnode %s", c.Name, want, out.Answers[i])
		}
		if c.Out.Error == nil {
			compareLimits(t, catalogue, c.Name, c.In, out.Limits[i])
		}
	}
}

// sameNames writes an error with its members in the order of the JavaScript judge, none left out.
func sameNames(t *testing.T, raw []byte) []byte {
	t.Helper()
	var e struct{ Error *Error }
	if err := json.Unmarshal(raw, &e); err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(map[string]any{"error": struct {
		Code  string `json:"code"`
		Field string `json:"field"`
		Text  string `json:"text"`
	}(*e.Error)}); err != nil {
		t.Fatal(err)
	}
	return bytes.TrimSpace(b.Bytes())
}

// compareLimits holds the limits each side draws under a number against each other.
func compareLimits(t *testing.T, c *Catalogue, name string, raw, got json.RawMessage) {
	t.Helper()
	var line Line
	if err := DecodeLine(raw, &line); err != nil {
		t.Fatal(err)
	}
	form, _ := c.Form(line.Form)
	set, _ := c.LimitSet(form.LimitSet)
	e := Entry{Form: line.Form, Given: line.Given, Readings: line.Readings, Series: line.Series}
	var want [][]Applied
	for _, code := range []string{"trip_time_ms", "trip_current_ma", "retention_g"} {
		want = append(want, LimitsFor(form, set, &e, code, nil))
	}
	var theirs [][]Applied
	if err := json.Unmarshal(got, &theirs); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(want, theirs, cmpopts.EquateEmpty(), cmpopts.IgnoreUnexported(Applied{})); diff != "" {
		t.Errorf("%s: limits (-Go +JavaScript):\n%s", name, diff)
	}
}

// The two judges compute a limit from math.Pow of two languages; over the whole range the rounded figures are equal.
func TestVerdicts_JavaScriptComputesTheSameLimits(t *testing.T) {
	_, catalogue := readVectors(t)
	var lines []json.RawMessage
	for i := range 600 {
		current := 6 * math.Pow(44, float64(i)/600)
		rate := 0.01 * math.Pow(1000, float64(i)/600)
		over := ClassARampMA(rate)
		line, err := json.Marshal(map[string]any{"form": "gfci-receptacle/instrument", "rated_residual_ma": current,
			"given":    map[string]any{"ramp": map[string]any{"ma_per_s": rate}},
			"readings": map[string]any{"test_current_ma": current, "trip_time_ms": 700, "trip_current_ma": over}})
		if err != nil {
			t.Fatal(err)
		}
		rcd, err := json.Marshal(map[string]any{"form": "rcd/instrument", "rated_residual_ma": current * 3,
			"readings": map[string]any{"trip_current_ma": current, "electrode_ohm": 300}})
		if err != nil {
			t.Fatal(err)
		}
		lines = append(lines, line, rcd)
	}
	out := node(t, catalogue, lines)
	for i, line := range lines {
		if want := string(judged(t, catalogue, line)); out.Answers[i] != want {
			t.Errorf("%s:\n      Go %s\nnode %s", line, want, out.Answers[i])
		}
	}
}
