package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// changeFile writes a copy of a file with one thing changed.
func changeFile(t *testing.T, path, was, is string) string {
	t.Helper()
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	out := strings.Replace(string(raw), was, is, 1)
	if out == string(raw) {
		t.Fatalf("%s holds no %q:\n%s", path, was, raw)
	}
	to := filepath.Join(t.TempDir(), "changed.json")
	if err := os.WriteFile(to, []byte(out), 0o600); err != nil {
		t.Fatal(err)
	}
	return to
}

func TestLimits_OutChangedAndInAgain(t *testing.T) {
	dir, file := demoFolder(t), filepath.Join(t.TempDir(), "limits.json")
	must := func(args ...string) string {
		t.Helper()
		stdout, stderr, code := tripwell(t, "", append(args, "--data", dir)...)
		if code != 0 {
			t.Fatalf("%v: exit %d, %s", args, code, stderr)
		}
		return stdout
	}
	must("limits", "export", "us-class-a", "-o", file)
	before := must("limits", "export", "-o", "-")
	if out := must("limits", "import", file); !strings.Contains(out, "as it was") {
		t.Errorf("the same file: %q", out)
	}
	changed := changeFile(t, file, `"reading": "trip_current_ma", "min": 4, "max": 6`, `"reading": "trip_current_ma", "min": 4, "max": 5`)
	dry := must("limits", "import", changed, "--in-force", "2020-01-01", "--dry-run")
	if !strings.Contains(dry, "would be revision 2, in force from 2020-01-01") || !strings.Contains(dry, "Pass → Conditional fail") {
		t.Errorf("dry run: %s", dry)
	}
	if must("limits", "export", "-o", "-") != before {
		t.Error("a dry run changed something")
	}
	if out := must("limits", "import", changed, "--in-force", "2020-01-01", "--reason", "Advice of the maker"); !strings.Contains(out, "is now revision 2") {
		t.Errorf("import: %s", out)
	}
	must("limits", "export", "us-class-a", "-o", file)
	want := changeFile(t, changed, "\"revision\": 1,\n \"in_force\": \"1900-01-01\"", "\"revision\": 2,\n \"in_force\": \"2020-01-01\"")
	sameFiles(t, file, want)
	if out := must("limits", "import", file); !strings.Contains(out, "as it was") {
		t.Errorf("the file that came out: %q", out)
	}
	_, stderr, code := tripwell(t, "", "limits", "import", changeFile(t, file, `"min": 4`, `"min": 9`), "--data", dir)
	if code == 0 || !strings.Contains(stderr, "limits.trip-current.min") || !strings.Contains(stderr, "above the most") {
		t.Errorf("nonsense: exit %d, %s", code, stderr)
	}
	if _, stderr, code := tripwell(t, "", "limits", "export", "no-such-set", "-o", "-", "--data", dir); code != 2 || stderr == "" {
		t.Errorf("a set that is not there: exit %d, %s", code, stderr)
	}
}

func sameFiles(t *testing.T, a, b string) {
	t.Helper()
	one, err := os.ReadFile(a)
	if err != nil {
		t.Fatal(err)
	}
	two, err := os.ReadFile(b)
	if err != nil {
		t.Fatal(err)
	}
	if string(one) != string(two) {
		t.Errorf("%s\ndiffers from\n%s", one, two)
	}
}

func TestForms_OutChangedAndInAgain(t *testing.T) {
	dir, file := demoFolder(t), filepath.Join(t.TempDir(), "form.json")
	run := func(args ...string) string {
		t.Helper()
		stdout, stderr, code := tripwell(t, "", append(args, "--data", dir)...)
		if code != 0 {
			t.Fatalf("%v: exit %d, %s", args, code, stderr)
		}
		return stdout
	}
	run("forms", "export", "gfci-receptacle/button", "-o", file)
	changed := changeFile(t, file, `{"reading": "restored", "type": "yes-no"}`,
		`{"reading": "restored", "type": "yes-no"},`+"\n    "+`{"reading": "own_yes_no_1", "name": "Cover plate whole?", "type": "yes-no"}`)
	if out := run("forms", "import", changed); !strings.Contains(out, "is now revision 2") {
		t.Errorf("import: %s", out)
	}
	run("forms", "export", "gfci-receptacle/button", "-o", file)
	raw, err := os.ReadFile(file)
	if err != nil || !strings.Contains(string(raw), "Cover plate whole?") {
		t.Errorf("came out as %s %v", raw, err)
	}
	_, stderr, code := tripwell(t, "", "forms", "import", changeFile(t, file, `"Cover plate whole?"`, `""`), "--data", dir)
	if code == 0 || !strings.Contains(stderr, "own_yes_no_1.name") {
		t.Errorf("nonsense: exit %d, %s", code, stderr)
	}
}
