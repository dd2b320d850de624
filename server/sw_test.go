package server

import (
	"encoding/json"
	"regexp"
	"strings"
	"testing"
	"testing/fstest"
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
	laidIn, packed := map[string]bool{}, 0
	for _, f := range build.Files {
		laidIn[f[0]] = true
		file := s.assets.files[f[0]]
		if file.packed != nil {
			packed += len(file.packed)
		} else {
			packed += len(file.plain)
		}
	}
	shell := get200(t, s.Handler(), "/field").Body.String()
	for _, asked := range regexp.MustCompile(`/assets/[0-9a-f]{16}/([^"]+)"`).FindAllStringSubmatch(shell, -1) {
		if !laidIn[asked[1]] {
			t.Errorf("the page asks for %s, which is not laid in", asked[1])
		}
	}
	for _, name := range []string{"field.mjs", "vendor/idb.mjs", "words/en.json", "icons/mark-192.png"} {
		if !laidIn[name] {
			t.Errorf("%s is not laid in", name)
		}
	}
	if laidIn["style.css"] {
		t.Error("style.css of the office pages is laid in on phones")
	}
	t.Logf("%d files, %d bytes packed", len(build.Files), packed)
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
