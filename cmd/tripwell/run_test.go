package main

import (
	"bytes"
	"context"
	"strings"
	"testing"
)

// tripwell runs one command in this process and gives its output and exit code.
func tripwell(t *testing.T, stdin string, args ...string) (stdout, stderr string, code int) {
	t.Helper()
	var out, errs bytes.Buffer
	err := run(context.Background(), args, strings.NewReader(stdin), &out, &errs)
	if err != nil {
		errs.WriteString(err.Error())
	}
	return out.String(), errs.String(), exitCode(err)
}

func TestRun_ExitCodes(t *testing.T) {
	for _, c := range []struct {
		args []string
		want int
	}{
		{[]string{"version"}, 0},
		{[]string{"--help"}, 0},
		{nil, 0},
		{[]string{"no-such-command"}, 2},
		{[]string{"version", "--no-such-flag"}, 2},
	} {
		if _, stderr, got := tripwell(t, "", c.args...); got != c.want {
			t.Errorf("tripwell %v: exit %d, want %d (%s)", c.args, got, c.want, stderr)
		}
	}
}
