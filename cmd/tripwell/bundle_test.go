package main

import (
	"archive/zip"
	"bytes"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestBundle_FromTheCommandLine(t *testing.T) {
	dir, out := demoFolder(t), t.TempDir()
	first, second := filepath.Join(out, "first.zip"), filepath.Join(out, "second.zip")
	for _, path := range []string{first, second} {
		if _, errs, code := tripwell(t, "", "bundle", "-o", path, "--data", dir, "--site", "KILN-LANE", "--from", "2026-01-01"); code != 0 {
			t.Fatalf("bundle: exit %d: %s", code, errs)
		}
	}
	z, err := zip.OpenReader(first)
	if err != nil {
		t.Fatal(err)
	}
	defer z.Close()
	keep := func(name string) string {
		f, err := z.Open(name)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		b, err := io.ReadAll(f)
		if err != nil {
			t.Fatal(err)
		}
		path := filepath.Join(out, name)
		if err := os.WriteFile(path, b, 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	key, head := keep("key.txt"), keep("head.txt")
	said, errs, code := tripwell(t, "", "verify", second, "--key", key, "--earlier", head)
	if code != 0 || !strings.Contains(said, "Nothing is wrong") || !strings.Contains(said, "was signed over") {
		t.Errorf("verify: exit %d\n%s\n%s", code, said, errs)
	}
	if said, _, code := tripwell(t, "", "verify", second); code != 0 || !strings.Contains(said, "fingerprint") {
		t.Errorf("verify without a key: exit %d\n%s", code, said)
	}
	if _, errs, code := tripwell(t, "", "verify", key); code != 1 || !strings.Contains(errs, "no bundle") {
		t.Errorf("a file that is no bundle: exit %d: %s", code, errs)
	}
	if _, errs, code := tripwell(t, "", "verify", second, "--key", "nothing"); code != 2 || !strings.Contains(errs, "--key") {
		t.Errorf("no key: exit %d: %s", code, errs)
	}
}

func TestSample_DrawnFromABundle(t *testing.T) {
	dir, out := demoFolder(t), t.TempDir()
	zipped, sheet, again := filepath.Join(out, "b.zip"), filepath.Join(out, "a.pdf"), filepath.Join(out, "b.pdf")
	if _, errs, code := tripwell(t, "", "bundle", "-o", zipped, "--data", dir, "--site", "KILN-LANE"); code != 0 {
		t.Fatalf("bundle: exit %d: %s", code, errs)
	}
	_, errs, code := tripwell(t, "", "sample", zipped, "--word", "thunderstorm", "-o", sheet, "--wrong", "1")
	if code != 0 || !strings.Contains(errs, "devices and") || !strings.Contains(errs, "were wrong: of all") {
		t.Fatalf("sample: exit %d: %s", code, errs)
	}
	if _, _, code := tripwell(t, "", "sample", zipped, "--word", "thunderstorm", "-o", again); code != 0 {
		t.Fatal("the same word draws nothing")
	}
	a, err := os.ReadFile(sheet)
	if err != nil {
		t.Fatal(err)
	}
	b, err := os.ReadFile(again)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(a, b) || !bytes.HasPrefix(a, []byte("%PDF")) {
		t.Error("the same word did not draw the same sheet")
	}
	if _, errs, code := tripwell(t, "", "sample", zipped, "--word", "x", "--share", "0", "-o", again); code != 2 || !strings.Contains(errs, "share") {
		t.Errorf("a share of nothing: exit %d: %s", code, errs)
	}
}
