package forms

import (
	"bytes"
	"encoding/json"
	"io"
	"math"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"tripwell/static/chromium"
)

// answers is what testdata/verdicts_answers.mjs makes of lines.
type answers struct {
	Judge   int
	Codes   []Code
	Missing []string
	Answers []string
	Limits  []json.RawMessage
}

// engines run the JavaScript judge: under node, and in the browser that phones have, where numbers, sorting and texts are
// another engine's.
var engines = map[string]func(*testing.T, *Catalogue, []json.RawMessage) answers{"node": underNode, "browser": inBrowser}

func question(t *testing.T, c *Catalogue, lines []json.RawMessage) []byte {
	t.Helper()
	raw, err := json.Marshal(map[string]any{"catalogue": c, "lines": lines})
	if err != nil {
		t.Fatal(err)
	}
	return raw
}

func underNode(t *testing.T, c *Catalogue, lines []json.RawMessage) (out answers) {
	t.Helper()
	path, err := exec.LookPath("node")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("node is not installed: the JavaScript judge cannot be run")
		}
		t.Skip("node is not installed: the JavaScript judge is not run in it")
	}
	cmd := exec.CommandContext(t.Context(), path, "../testdata/verdicts_run.mjs")
	cmd.Stdin = bytes.NewReader(question(t, c, lines))
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

// inBrowser runs the page's own judge modules in Chromium: a page fetches the lines and sends the answers back, under the
// content policy of the program's pages.
func inBrowser(t *testing.T, c *Catalogue, lines []json.RawMessage) (out answers) {
	t.Helper()
	chromium.Need(t)
	said := make(chan []byte, 1)
	mux := http.NewServeMux()
	mux.Handle("/static/", http.StripPrefix("/static/", http.FileServer(http.Dir("../static"))))
	mux.Handle("/testdata/", http.StripPrefix("/testdata/", http.FileServer(http.Dir("../testdata"))))
	lots := question(t, c, lines)
	mux.HandleFunc("GET /lines", func(w http.ResponseWriter, _ *http.Request) { _, _ = w.Write(lots) })
	mux.HandleFunc("POST /said", func(_ http.ResponseWriter, r *http.Request) {
		raw, _ := io.ReadAll(r.Body)
		said <- raw
	})
	mux.HandleFunc("GET /judge.mjs", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", "text/javascript")
		_, _ = io.WriteString(w, `import { answersTo } from "/testdata/verdicts_answers.mjs";
const question = await (await fetch("/lines")).json();
let said;
try { said = JSON.stringify(answersTo(question)); } catch (e) { said = JSON.stringify({ failed: String(e.stack) }); }
await fetch("/said", { method: "POST", body: said });`)
	})
	mux.HandleFunc("GET /{$}", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		w.Header().Set("Content-Security-Policy", "default-src 'none'; script-src 'self'; connect-src 'self'")
		_, _ = io.WriteString(w, `<!doctype html><script type="module" src="/judge.mjs"></script>`)
	})
	srv := httptest.NewServer(mux)
	defer srv.Close()
	chromium.Phone(t).Open(srv.URL)
	select {
	case raw := <-said:
		var failed struct{ Failed string }
		if err := json.Unmarshal(raw, &failed); err != nil || failed.Failed != "" {
			t.Fatalf("the page's judge: %v %s", err, failed.Failed)
		}
		if err := json.Unmarshal(raw, &out); err != nil {
			t.Fatal(err)
		}
	case <-time.After(2 * time.Minute):
		t.Fatal("the page judged nothing within 2 minutes")
	}
	return out
}

// Both judges must write the same bytes, wherever the second one runs.
func TestVerdicts_JavaScriptAnswersTheSame(t *testing.T) {
	v, catalogue := readVectors(t)
	var lines []json.RawMessage
	for _, c := range v.Cases {
		lines = append(lines, c.In)
	}
	for name, run := range engines {
		t.Run(name, func(t *testing.T) { compareAnswers(t, v, catalogue, run(t, catalogue, lines)) })
	}
}

func compareAnswers(t *testing.T, v vectors, catalogue *Catalogue, out answers) {
	t.Helper()
	if len(out.Answers) != len(v.Cases) {
		t.Fatalf("%d answers to %d lines", len(out.Answers), len(v.Cases))
	}
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
			t.Errorf("%s:\n        Go %s\nJavaScript %s", c.Name, want, out.Answers[i])
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
	for name, run := range engines {
		t.Run(name, func(t *testing.T) {
			out := run(t, catalogue, lines)
			for i, line := range lines {
				if want := string(judged(t, catalogue, line)); out.Answers[i] != want {
					t.Errorf("%s:\n        Go %s\nJavaScript %s", line, want, out.Answers[i])
				}
			}
		})
	}
}
