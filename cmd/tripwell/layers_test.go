package main

import (
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// rooms reads the layer table of DEVELOPERS.md: for each package what of ours it may import.
func rooms(t *testing.T) map[string][]string {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "..", "DEVELOPERS.md"))
	if err != nil {
		t.Fatal(err)
	}
	name := regexp.MustCompile("`([a-z/]+)`")
	table := map[string][]string{}
	for _, line := range strings.Split(string(raw), "\n") {
		cells := strings.Split(line, "|")
		if len(cells) != 5 || !name.MatchString(cells[1]) {
			if len(table) > 0 {
				break // the table has ended
			}
			continue
		}
		room := name.FindStringSubmatch(cells[1])[1]
		table[room] = nil
		for _, m := range name.FindAllStringSubmatch(cells[3], -1) {
			table[room] = append(table[room], m[1])
		}
		if strings.TrimSpace(cells[3]) == "all" {
			table[room] = []string{"*"}
		}
	}
	return table
}

// onlyIn says which single room may use a library; a prefix of the import path names it.
var onlyIn = map[string][]string{
	"github.com/labstack/echo":       {"server"},
	"go.etcd.io/bbolt":               {"store"},
	"github.com/xuri/excelize":       {"export", "export/paper", "export/intake", "export/register"},
	"github.com/skip2/go-qrcode":     {"export"},
	"codeberg.org/go-pdf/fpdf":       {"export", "export/paper"},
	"github.com/alecthomas/kong":     {"cmd/tripwell"},
	"github.com/schollz/progressbar": {"cmd/tripwell"},
	"github.com/arran4/golang-ical":  {"export/calendar"},
	"github.com/wneessen/go-mail":    {"server"},
	"github.com/chromedp":            {"static/chromium"},
	"tripwell/static/chromium":       {}, // tests only
}

// pure rooms do no I/O and know no clock of their own.
var pure = map[string][]string{
	"forms":        {"net", "net/http", "os", "os/exec", "math/rand", "math/rand/v2", "crypto/rand", "database/sql"},
	"store/record": {"net", "net/http", "os", "os/exec", "math/rand", "math/rand/v2", "crypto/rand"},
}

func TestLayers_ImportsRunOneWay(t *testing.T) {
	root := filepath.Join("..", "..")
	table := rooms(t)
	seen := map[string]bool{}
	err := filepath.WalkDir(root, func(file string, entry fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if entry.IsDir() {
			if name := entry.Name(); name != ".." && (strings.HasPrefix(name, ".") || name == "node_modules" || name == "testdata") {
				return fs.SkipDir
			}
			return nil
		}
		if !strings.HasSuffix(file, ".go") {
			return nil
		}
		rel, err := filepath.Rel(root, file)
		if err != nil {
			return err
		}
		room := path.Dir(filepath.ToSlash(rel))
		seen[room] = true
		checkImports(t, table, room, file)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	for room := range table {
		if !seen[room] && room != "testdata" {
			t.Errorf("the layer table has a row for %s, which holds no Go file", room)
		}
	}
	if len(seen) < 8 {
		t.Errorf("Go files found in %d packages only: the test looks in the wrong folder", len(seen))
	}
}

// checkImports holds one file against the tables.
func checkImports(t *testing.T, table map[string][]string, room, file string) {
	t.Helper()
	allowed, known := table[room]
	if !known {
		t.Errorf("%s: package %s stands in no row of the layer table: add it there and in DEVELOPERS.md, or put the file elsewhere", file, room)
		return
	}
	parsed, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ImportsOnly)
	if err != nil {
		t.Error(err)
		return
	}
	test := strings.HasSuffix(file, "_test.go")
	for _, spec := range parsed.Imports {
		name, err := strconv.Unquote(spec.Path.Value)
		if err != nil {
			t.Error(err)
			continue
		}
		if ours, ok := strings.CutPrefix(name, "tripwell/"); ok && ours != room && !slices.Contains(allowed, ours) && !slices.Contains(allowed, "*") && !test {
			t.Errorf("%s imports %s: the layer table lets %s import %v of ours", file, ours, room, allowed)
		}
		for library, homes := range onlyIn {
			if (name == library || strings.HasPrefix(name, library+"/")) && !slices.Contains(homes, room) && !test {
				t.Errorf("%s imports %s, which belongs in %v only", file, name, homes)
			}
		}
		if slices.Contains(pure[room], name) && !test {
			t.Errorf("%s imports %s: %s is pure", file, name, room)
		}
	}
}
