package main

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"io"
	"strings"
	"testing"
)

const goodButton = `{"form":"gfci-receptacle/button","readings":{"condition":"sound","found":"on","button_trips":true,"button_resets":true}}`

func TestVerdict_OneAnswerALine(t *testing.T) {
	long := `{"form":"gfci-receptacle/button","readings":{"condition":"` + strings.Repeat("x", maxLine) + `"}}`
	stdin := strings.Join([]string{goodButton, "", "   ", `{"form":"no-such/form","readings":{}}`, `{"form":`, long,
		`{"form":"rcd/button","limit_set":"us-class-a","readings":{}}`, goodButton}, "\n")
	stdout, stderr, code := tripwell(t, stdin, "verdict")
	if code != 1 || !strings.Contains(stderr, "4 of 6 lines could not be judged") {
		t.Errorf("exit %d, %s", code, stderr)
	}
	type answer struct {
		Result string
		Error  *struct{ Code, Field, Text string }
		Line   int
	}
	var got []answer
	for line := range strings.Lines(stdout) {
		var a answer
		if err := json.Unmarshal([]byte(line), &a); err != nil {
			t.Fatalf("%q: %v", line, err)
		}
		got = append(got, a)
	}
	want := []struct {
		result, code, field string
		line                int
	}{
		{result: "pass"}, {code: "invalid", field: "form", line: 4}, {code: "invalid", field: "form", line: 5}, {code: "too_large", line: 6},
		{code: "invalid", field: "limit_set", line: 7}, {result: "pass"},
	}
	if len(got) != len(want) {
		t.Fatalf("%d answers, want %d:\n%s", len(got), len(want), stdout)
	}
	for i, w := range want {
		g := got[i]
		if g.Result != w.result || g.Line != w.line || (g.Error != nil) != (w.code != "") {
			t.Errorf("answer %d: %+v, want %+v", i, g, w)
			continue
		}
		if g.Error != nil && (g.Error.Code != w.code || g.Error.Field != w.field || g.Error.Text == "") {
			t.Errorf("answer %d: %+v, want %+v", i, *g.Error, w)
		}
	}
}

func TestVerdict_LongestLineIsJudged(t *testing.T) {
	pad := maxLine - len(goodButton)
	for _, c := range []struct {
		name string
		line string
		want int
	}{
		{"exactly the limit", goodButton + strings.Repeat(" ", pad-1) + " ", 0},
		{"exactly the limit and a newline", goodButton + strings.Repeat(" ", pad) + "\r\n", 0},
		{"one byte over", strings.Repeat(" ", pad+1) + goodButton, 1},
		{"far over", strings.Repeat(" ", 3*maxLine) + goodButton + "\n" + goodButton, 1},
	} {
		if stdout, stderr, code := tripwell(t, c.line, "verdict"); code != c.want {
			t.Errorf("%s: exit %d, want %d: %s%s", c.name, code, c.want, stdout, stderr)
		}
	}
}

func TestVerdict_EmptyInputIsNoFault(t *testing.T) {
	for _, stdin := range []string{"", "\n", "\n\n"} {
		if stdout, stderr, code := tripwell(t, stdin, "verdict"); code != 0 || stdout != "" {
			t.Errorf("%q: exit %d, %s%s", stdin, code, stdout, stderr)
		}
	}
}

// The example in the help must work.
func TestVerdict_HelpExample(t *testing.T) {
	stdout, _, code := tripwell(t, "", "verdict", "--help")
	if code != 0 || !strings.Contains(stdout, "tripwell verdict") {
		t.Fatalf("exit %d: %s", code, stdout)
	}
	_, after, _ := strings.Cut(stdout, "echo '")
	example, _, _ := strings.Cut(after, "'")
	out, stderr, code := tripwell(t, strings.Join(strings.Fields(example), ""), "verdict")
	if code != 0 || !strings.HasPrefix(out, `{"result":"pass"`) {
		t.Errorf("exit %d: %s%s", code, out, stderr)
	}
}

// A program at the other end gets each answer before it sends the next line.
func TestVerdict_AnswersWhileMoreInputMayCome(t *testing.T) {
	stdin, lines := io.Pipe()
	answers, stdout := io.Pipe()
	done := make(chan error, 1)
	go func() {
		done <- run(t.Context(), []string{"verdict"}, stdin, stdout, io.Discard)
		stdout.Close()
	}()
	out := bufio.NewReader(answers)
	for range 3 {
		if _, err := io.WriteString(lines, goodButton+"\n"); err != nil {
			t.Fatal(err)
		}
		if answer, err := out.ReadString('\n'); err != nil || !strings.HasPrefix(answer, `{"result":"pass"`) {
			t.Fatalf("%q, %v", answer, err)
		}
	}
	lines.Close()
	if err := <-done; err != nil {
		t.Error(err)
	}
}

func TestVerdict_StopsWhileWaitingForInput(t *testing.T) {
	stdin, lines := io.Pipe()
	defer lines.Close()
	ctx, stop := context.WithCancel(t.Context())
	stop()
	if err := run(ctx, []string{"verdict"}, stdin, io.Discard, io.Discard); !errors.Is(err, context.Canceled) {
		t.Errorf("%v", err)
	}
}
