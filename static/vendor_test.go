package static

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"io/fs"
	"regexp"
	"strings"
	"testing"
)

// vendored is one line of vendor/MANIFEST.json.
type vendored struct {
	File, Name, Version, From, Licence, SHA256 string
	LicenceFiles                               []string `json:"licence_files"`
}

func readManifest(t *testing.T) []vendored {
	t.Helper()
	raw, err := Files.ReadFile("vendor/MANIFEST.json")
	if err != nil {
		t.Fatal(err)
	}
	var list []vendored
	if err := json.Unmarshal(raw, &list); err != nil {
		t.Fatal(err)
	}
	return list
}

func TestVendor_EveryFileIsTheOneInTheManifest(t *testing.T) {
	known := map[string]bool{"MANIFEST.json": true}
	for _, v := range readManifest(t) {
		raw, err := Files.ReadFile("vendor/" + v.File)
		if err != nil {
			t.Errorf("%s: %v", v.File, err)
			continue
		}
		sum := sha256.Sum256(raw)
		if got := hex.EncodeToString(sum[:]); got != v.SHA256 {
			t.Errorf("%s: got SHA-256 %s, want %s", v.File, got, v.SHA256)
		}
		if v.Name == "" || v.Version == "" || v.Licence == "" || len(v.LicenceFiles) == 0 {
			t.Errorf("%s: name, version, licence and licence files must be stated", v.File)
		}
		known[v.File] = true
		for _, l := range v.LicenceFiles {
			known[l] = true
			if text, err := Files.ReadFile("vendor/" + l); err != nil || len(text) < 200 {
				t.Errorf("%s: licence file %s is missing or too short", v.File, l)
			}
		}
	}
	entries, err := fs.ReadDir(Files, "vendor")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if !known[e.Name()] {
			t.Errorf("vendor/%s is not in the manifest", e.Name())
		}
	}
}

// Addresses that vendored files may name: an XML namespace and a comment; neither is ever fetched.
var harmless = map[string]bool{
	"http://www.w3.org/2000/svg":                                          true,
	"https://wicg.github.io/shape-detection-api/#barcode-detection-api":   true,
	"https://github.com/WICG/shape-detection-api/issues/66":               true,
	"https://github.com/microsoft/TypeScript-DOM-lib-generator/pull/1405": true,
}

func TestVendor_NamesNoHostItCouldFetchFrom(t *testing.T) {
	address := regexp.MustCompile(`https?://[^\s"'` + "`" + `)<>]+`)
	for _, v := range readManifest(t) {
		raw, err := Files.ReadFile("vendor/" + v.File)
		if err != nil {
			t.Fatal(err)
		}
		for _, found := range address.FindAllString(string(raw), -1) {
			if !harmless[found] {
				t.Errorf("%s names %s", v.File, found)
			}
		}
	}
}

// The field client draws through the template library or textContent only; a policy without 'unsafe-inline' and
// 'unsafe-eval' must be enough for it, and it must load nothing from elsewhere.
func TestClient_MakesNoMarkupFromTextAndNamesNoHost(t *testing.T) {
	banned := regexp.MustCompile(`innerHTML|outerHTML|insertAdjacentHTML|dangerouslySetInnerHTML|document\.write|\beval\(|new Function\(|setTimeout\(\s*["'` + "`" + `]|https?://[a-z]`)
	files, err := fs.Glob(Files, "*.mjs")
	if err != nil || len(files) == 0 {
		t.Fatalf("no modules found: %v", err)
	}
	css, err := fs.Glob(Files, "*.css")
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range append(files, css...) {
		raw, err := Files.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		for i, line := range strings.Split(string(raw), "\n") {
			if hit := banned.FindString(line); hit != "" {
				t.Errorf("%s:%d: %q", name, i+1, hit)
			}
		}
	}
}
