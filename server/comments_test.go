package server

import (
	"bytes"
	"io/fs"
	"path"
	"strings"
	"testing"

	"github.com/tdewolff/parse/v2"
	"github.com/tdewolff/parse/v2/js"

	"tripwell/static"
)

func TestComments_OnlyWholeLinesGo(t *testing.T) {
	for _, c := range []struct{ in, want string }{
		{"// a\nlet b; // c\n", "\nlet b; // c\n"},
		{"/** a\n * b\n */\nlet c;\n", "\n\n\nlet c;\n"},
		{"/* a */ let b;\n", "/* a */ let b;\n"},
		{"  /* a */\n  let b = \"/* c\";\n", "\n  let b = \"/* c\";\n"},
		{"/* never ended\nlet b;\n", "/* never ended\nlet b;\n"},
	} {
		if got := string(withoutComments([]byte(c.in))); got != c.want {
			t.Errorf("%q: got %q, want %q", c.in, got, c.want)
		}
	}
}

// What a phone runs says the same as what stands in the source, by a parser of JavaScript that is not ours, on as many lines.
func TestComments_AModuleWithoutThemIsTheSameProgram(t *testing.T) {
	a, err := readAssets(static.Files)
	must(t, err)
	for name, file := range a.files {
		if path.Ext(name) != ".mjs" {
			continue
		}
		raw, err := fs.ReadFile(static.Files, name)
		must(t, err)
		sameProgram(t, name, string(raw), string(file.plain))
		if strings.HasPrefix(name, "vendor/") && !bytes.Equal(raw, file.plain) {
			t.Errorf("%s: a file of somebody else's, licence and all, was changed", name)
		}
	}
	sameProgram(t, "sw.js", workerText, string(withoutComments([]byte(workerText))))
}

func sameProgram(t *testing.T, name, source, sent string) {
	t.Helper()
	if got, want := strings.Count(sent, "\n"), strings.Count(source, "\n"); got != want {
		t.Errorf("%s: got %d lines, want %d", name, got, want)
	}
	program := func(text string) string {
		ast, err := js.Parse(parse.NewInputString(text), js.Options{})
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		var b strings.Builder
		ast.JS(&b)
		return b.String()
	}
	if program(source) != program(sent) {
		t.Errorf("%s is another program without its comments", name)
	}
}
