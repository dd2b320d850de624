package static

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// TestModules_PassTheirOwnTests runs tests/*.test.mjs under node: the client's pure modules with storage, network and
// clock passed in.
func TestModules_PassTheirOwnTests(t *testing.T) {
	node, err := exec.LookPath("node")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("node is missing; the client's modules cannot be tested")
		}
		t.Skip("node is missing; the client's modules are not tested here")
	}
	files, err := filepath.Glob("tests/*.test.mjs")
	if err != nil || len(files) == 0 {
		t.Fatalf("no tests found in tests/: %v", err)
	}
	out, err := exec.Command(node, append([]string{"--test", "--test-reporter=tap"}, files...)...).CombinedOutput()
	if err != nil {
		t.Fatalf("node --test: %v\n%s", err, failures(string(out)))
	}
}

// failures keeps what explains a red run: the lines of failed tests and what follows each until its end.
func failures(tap string) string {
	var kept []string
	inside := false
	for _, line := range strings.Split(tap, "\n") {
		if strings.Contains(line, "not ok ") {
			inside = true
		}
		if inside {
			kept = append(kept, line)
		}
		if strings.TrimSpace(line) == "..." {
			inside = false
		}
	}
	if len(kept) == 0 {
		return tap
	}
	return strings.Join(kept, "\n")
}
