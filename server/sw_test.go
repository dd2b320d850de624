package server

import (
	"encoding/json"
	"regexp"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"tripwell/static"
)

func TestWorker_LaysInEveryFileTheClientAsksForAndNoOther(t *testing.T) {
	s, err := New(nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	rec := get200(t, s.Handler(), "/sw.js")
	if got := rec.Header().Get("Cache-Control"); got != "no-cache" {
		t.Errorf("got Cache-Control %q, want no-cache: a kept worker would keep a phone on an old version", got)
	}
	if got := rec.Header().Get("Content-Type"); !strings.HasPrefix(got, "text/javascript") {
		t.Errorf("got type %q, want text/javascript", got)
	}
	m := regexp.MustCompile(`^const BUILD = (.*);\n`).FindStringSubmatch(rec.Body.String())
	if m == nil {
		t.Fatal("the script does not begin with its build")
	}
	var build workerBuild
	if err := json.Unmarshal([]byte(m[1]), &build); err != nil {
		t.Fatal(err)
	}
	laidIn := map[string]bool{}
	for _, f := range append(build.Files, build.Words["en"], build.Words["es"]) {
		laidIn[f[0].(string)] = true
	}
	for _, f := range build.Alone {
		laidIn[f[0]] = true
	}
	shell := get200(t, s.Handler(), "/field").Body.String()
	byBrowser := map[string]bool{"field.webmanifest": true, "icons/mark-180.png": true} // read when it is installed, with a line
	for _, asked := range regexp.MustCompile(`/assets/[0-9a-f]{16}/([^"]+)"`).FindAllStringSubmatch(shell, -1) {
		if !laidIn[asked[1]] && !byBrowser[asked[1]] {
			t.Errorf("the page asks for %s, which is not laid in", asked[1])
		}
	}
	for _, name := range []string{"field.mjs", "vendor/idb.mjs", "words/phone-en.json", "words/phone-es.json", "vendor/qr-decode.mjs", "icons/mark.svg"} {
		if !laidIn[name] {
			t.Errorf("%s is not laid in", name)
		}
	}
	for _, name := range []string{"style.css", "words/en.json"} {
		if laidIn[name] {
			t.Errorf("%s of the office pages is laid in on phones", name)
		}
	}
}

// shellBudget bounds what comes over the line until a phone has the client: page, worker and the pack of one language, as
// they are sent, without the decoder of codes that only some browsers need.
const shellBudget = 120_000

func TestShell_FitsItsBudgetInEveryLanguage(t *testing.T) {
	s, err := New(nil, Options{})
	must(t, err)
	sh, err := s.assets.shell()
	must(t, err)
	for _, lang := range static.Languages {
		sum := 0
		first := s.assets.root()
		for _, address := range []string{"/field", first + "boot.mjs", first + "tokens.css", first + "field.css", first + "icons/mark.svg", "/sw.js", first + packName(lang)} {
			body := get200(t, s.Handler(), address, "Accept-Encoding", "gzip").Body
			size := body.Len()
			t.Logf("%s: %-40s %6d bytes", lang, address, size)
			sum += size
		}
		t.Logf("%s: %d parts, %d bytes in all", lang, len(sh.parts)+1, sum)
		if sum > shellBudget {
			t.Errorf("%s: the client comes as %d bytes, more than %d", lang, sum, shellBudget)
		}
	}
}

func TestShell_APackHoldsItsPartsInTheirOrder(t *testing.T) {
	s, err := New(nil, Options{})
	must(t, err)
	sh, err := s.assets.shell()
	must(t, err)
	for _, lang := range static.Languages {
		rest := get200(t, s.Handler(), s.assets.root()+packName(lang)).Body.Bytes()
		if got := wholeOf(packName(lang), rest); got != sh.sums[lang] {
			t.Errorf("got %v, want what the worker holds it to, %v", got, sh.sums[lang])
		}
		for _, p := range append(slices.Clone(sh.parts), sh.words[lang]) {
			name, size := p[0].(string), p[1].(int)
			if string(rest[:size]) != string(s.assets.files[name].plain) {
				t.Fatalf("%s: %s does not stand where the worker cuts it out", lang, name)
			}
			rest = rest[size:]
		}
		if len(rest) != 0 {
			t.Errorf("%s: %d bytes behind the last part", lang, len(rest))
		}
	}
}

// The Spanish words of a phone stand over the English ones; no office section travels.
func TestShell_WordsOfAPhone(t *testing.T) {
	raw, err := static.PhoneWords(fstest.MapFS{
		"words/en.json": {Data: []byte(`{"field":{"a":"one <b>","c":{"one":"{n} day","other":"{n} days"}},"office":{"d":"no"}}`)},
		"words/es.json": {Data: []byte(`{"field":{"c":{"one":"{n} día","other":"{n} días"},"gone":"x"}}`)},
	}, "es")
	must(t, err)
	if got, want := strings.TrimSpace(string(raw)), `{"field":{"a":"one <b>","c":{"one":"{n} día","other":"{n} días"}}}`; got != want {
		t.Errorf("got %s, want %s", got, want)
	}
}

func TestWorker_ItsBytesChangeWithAnyFile(t *testing.T) {
	s, err := New(nil, Options{})
	if err != nil {
		t.Fatal(err)
	}
	one, err := s.worker([]byte("page"))
	if err != nil {
		t.Fatal(err)
	}
	same, _ := s.worker([]byte("page"))
	other, _ := s.worker([]byte("page of another build"))
	if one != same || one == other {
		t.Error("the worker must be the same for the same build and another for another page")
	}
}

func TestAssets_WhatFilesAskForIsFollowedToTheEnd(t *testing.T) {
	a, err := readAssets(fstest.MapFS{
		"a.mjs":         {Data: []byte(`import { b } from "./in/b.mjs"; const later = () => import("./c.mjs");`)},
		"in/b.mjs":      {Data: []byte(`export * from "../d.mjs"; new URL("./e.json", import.meta.url);`)},
		"c.mjs":         {Data: []byte(``)},
		"d.mjs":         {Data: []byte(`import "./a.mjs";`)},
		"in/e.json":     {Data: []byte(`{}`)},
		"unasked.mjs":   {Data: []byte(``)},
		"f.webmanifest": {Data: []byte(`{"icons": [{ "src": "./g.svg" }]}`)},
		"g.svg":         {Data: []byte(`<svg/>`)},
	})
	if err != nil {
		t.Fatal(err)
	}
	got, err := a.needed("a.mjs", "f.webmanifest")
	if want := "a.mjs c.mjs d.mjs f.webmanifest g.svg in/b.mjs in/e.json"; err != nil || strings.Join(got, " ") != want {
		t.Errorf("got %v %v, want %s", got, err, want)
	}
	if _, err := a.needed("no.mjs"); err == nil {
		t.Error("a file that is not there passed")
	}
}
