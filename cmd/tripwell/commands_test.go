package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"net"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"tripwell/store"
	"tripwell/store/demo"
)

// demoMade is one demo store for all tests of the package, which work on copies of it.
var demoMade = sync.OnceValue(func() (err error) {
	if demoDir, err = os.MkdirTemp("", "tripwell-test-demo-"); err != nil {
		return err
	}
	return demo.Build(context.Background(), demoDir, time.Now(), nil)
})

// demoDir is where it lies; TestMain removes it.
var demoDir string

// demoFolder gives a test a demo store of its own.
func demoFolder(t *testing.T) string {
	t.Helper()
	if err := demoMade(); err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(t.TempDir(), "demo")
	if err := os.CopyFS(dir, os.DirFS(demoDir)); err != nil {
		t.Fatal(err)
	}
	return dir
}

// emptyStore gives a test a store that has nobody, nothing and no label address.
func emptyStore(t *testing.T) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "empty")
	s, err := store.Open(dir, store.Options{Now: time.Now, Create: true})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := firstLink(t.Context(), s); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	return dir
}

// Every command says in its help how it is used, with an example that this program understands.
func TestHelp_HasAnExample(t *testing.T) {
	for _, command := range [][]string{{"demo"}, {"serve"}, {"import", "register"}, {"import", "readings"}, {"import", "results"}, {"due"}, {"workbook"}, {"labels"}, {"check"}, {"rebuild"}, {"seal"}, {"verdict"}, {"forms"}} {
		out, _, code := tripwell(t, "", append(command, "--help")...)
		if code != 0 || !strings.Contains(out, "Example") || !strings.Contains(out, "tripwell "+strings.Join(command, " ")) {
			t.Errorf("%v --help: exit %d, want an example in\n%s", command, code, out)
		}
	}
}

// Wrong use is told apart from failing, and both say in a sentence what is wrong.
func TestCommands_RefuseInSentences(t *testing.T) {
	dir, empty := demoFolder(t), emptyStore(t)
	nowhere := filepath.Join(t.TempDir(), "nowhere")
	notes := t.TempDir()
	if err := os.WriteFile(filepath.Join(notes, "notes.txt"), []byte("not a store"), 0o600); err != nil {
		t.Fatal(err)
	}
	busy, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer busy.Close()
	port := busy.Addr().String()
	out := filepath.Join(t.TempDir(), "out")
	for _, c := range []struct {
		name string
		args []string
		code int
		says string
	}{
		{"a site that is not there", []string{"due", "--data", dir, "--site", "NOWHERE"}, 2, "site"},
		{"the same for the workbook", []string{"workbook", "-o", out, "--data", dir, "--site", "NOWHERE"}, 2, "site"},
		{"the same for labels", []string{"labels", "-o", out, "--sheet", "letter-3x10", "--data", dir, "--site", "NOWHERE"}, 2, "site"},
		{"a day that is none", []string{"due", "--data", dir, "--on", "31.12.2026"}, 2, "2026-12-31"},
		{"a day that is not in the calendar", []string{"due", "--data", dir, "--on", "2026-02-30"}, 2, "2026-12-31"},
		{"a period that ends before it begins", []string{"workbook", "-o", out, "--data", dir, "--from", "2026-02-01", "--to", "2026-01-01"}, 2, "begins"},
		{"a sheet that is not known", []string{"labels", "-o", out, "--sheet", "a4-9x9", "--data", dir}, 2, "letter-3x10"},
		{"a label before the first", []string{"labels", "-o", out, "--sheet", "letter-3x10", "--start", "0", "--data", dir}, 2, "counted from 1"},
		{"a person who is not there", []string{"workbook", "-o", out, "--data", dir, "--by", "somebody"}, 2, "person"},
		{"no folder named", []string{"due"}, 2, "--data"},
		{"a folder that holds no store", []string{"due", "--data", nowhere}, 1, "no Tripwell store"},
		{"labels without an address", []string{"labels", "-o", out, "--sheet", "letter-3x10", "--data", empty}, 1, "--url"},
		{"a file that is not there", []string{"import", "register", filepath.Join(notes, "missing.csv"), "--data", empty}, 2, "missing.csv"},
		{"a file that is no register", []string{"import", "register", filepath.Join(notes, "notes.txt"), "--data", empty}, 1, "column"},
		{"a folder for output that is not there", []string{"workbook", "-o", filepath.Join(nowhere, "w.xlsx"), "--data", dir}, 1, "cannot write"},
		{"a demo in a folder with something else", []string{"demo", "--data", notes, "--listen", "127.0.0.1:0"}, 1, "no demo store"},
		{"a demo in a real store", []string{"demo", "--data", empty, "--listen", "127.0.0.1:0"}, 1, "no demo store"},
		{"a demo for everybody", []string{"demo", "--data", nowhere, "--listen", "0.0.0.0:0"}, 2, "this machine only"},
		{"a demo on another address", []string{"demo", "--data", nowhere, "--listen", "192.0.2.1:8080"}, 2, "this machine only"},
		{"a demo on a busy port", []string{"demo", "--data", nowhere, "--listen", port}, 1, "in use"},
		{"a server on a busy port", []string{"serve", "--data", nowhere, "--listen", port}, 1, "in use"},
		{"a server on no port", []string{"serve", "--data", nowhere, "--listen", "localhost"}, 2, "127.0.0.1:8080"},
		{"a server of a demo store", []string{"serve", "--data", dir, "--listen", "127.0.0.1:0"}, 1, "demo store"},
		{"a label address that is none", []string{"serve", "--data", nowhere, "--listen", "127.0.0.1:0", "--url", "http://x"}, 2, "https://"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, stderr, code := tripwell(t, "", c.args...)
			if code != c.code || !strings.Contains(stderr, c.says) {
				t.Errorf("exit %d, says %q; want exit %d and %q in it", code, stderr, c.code, c.says)
			}
		})
	}
	if _, err := os.Stat(nowhere); err == nil {
		t.Error("a refused start made its folder")
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(out), "*")); len(left) > 0 {
		t.Errorf("refused commands left %v", left)
	}
}

// A command gives the same answer on a store it opens itself and beside the server that runs on it.
func TestCommands_SameBesideAServer(t *testing.T) {
	if testing.Short() {
		t.Skip("starts a server; left out with -short")
	}
	dir := demoFolder(t)
	ask := func() (due, labels, sums string) {
		t.Helper()
		var code int
		var stderr string
		if due, stderr, code = tripwell(t, "", "due", "--data", dir, "--json"); code != 0 {
			t.Fatalf("due: exit %d, %s", code, stderr)
		}
		if labels, stderr, code = tripwell(t, "", "labels", "-o", "-", "--sheet", "letter-3x10", "--site", "KILN-LANE", "--data", dir); code != 0 {
			t.Fatalf("labels: exit %d, %s", code, stderr)
		}
		if sums, stderr, code = tripwell(t, "", "check", "--data", dir); code != 0 {
			t.Fatalf("check: exit %d, %s%s", code, sums, stderr)
		}
		return due, labels, sums
	}
	due, labels, sums := ask()
	if !strings.HasPrefix(labels, "%PDF-") {
		t.Errorf("labels begin with %.20q, want a PDF", labels)
	}
	if !strings.Contains(sums, "Nothing is wrong.") {
		t.Errorf("check says %q", sums)
	}
	p := start(t, "demo", "--data", dir, "--listen", "127.0.0.1:0")
	dueBeside, labelsBeside, _ := ask()
	if due != dueBeside {
		t.Error("due gives another list beside the server")
	}
	if len(labels) != len(labelsBeside) {
		t.Errorf("labels are %d bytes, beside the server %d", len(labels), len(labelsBeside))
	}
	if _, stderr, code := tripwell(t, "", "rebuild", "--data", dir); code != 1 || !strings.Contains(stderr, "Stop it") {
		t.Errorf("rebuild beside the server: exit %d, says %q; want a refusal that says to stop it", code, stderr)
	}
	if _, stderr, code := tripwell(t, "", "serve", "--data", dir, "--listen", "127.0.0.1:0"); code != 1 || !strings.Contains(stderr, "in use") {
		t.Errorf("a second server on the folder: exit %d, says %q; want that it is in use", code, stderr)
	}
	if err := p.stop(syscall.SIGTERM); err != nil {
		t.Errorf("the server stopped with %v, want exit code 0", err)
	}
	if _, err := os.Stat(filepath.Join(dir, "tripwell.sock")); err == nil {
		t.Error("the stopped server left its socket")
	}
	if out, stderr, code := tripwell(t, "", "rebuild", "--data", dir); code != 0 || !strings.Contains(out, "Rebuilt") {
		t.Errorf("rebuild: exit %d, %s%s", code, out, stderr)
	}
}

// The demo fell behind at Ottermoor, and only there by much.
func TestDue_OnADay(t *testing.T) {
	dir := demoFolder(t)
	overdue := map[string]int{}
	out, stderr, code := tripwell(t, "", "due", "--data", dir, "--json")
	if code != 0 {
		t.Fatalf("exit %d, %s", code, stderr)
	}
	for _, raw := range strings.Split(strings.TrimSpace(out), "\n") {
		var line map[string]any
		if err := json.Unmarshal([]byte(raw), &line); err != nil {
			t.Fatalf("%s: %v", raw, err)
		}
		for _, name := range []string{"device", "tag", "site", "place", "task", "due", "state", "last"} {
			if _, ok := line[name]; !ok {
				t.Errorf("line %s has no %s", raw, name)
			}
		}
		if line["state"] == "overdue" {
			overdue[line["site"].(string)]++
		}
	}
	t.Log(overdue)
	if overdue["OTTERMOOR"] < 15 || overdue["OTTERMOOR"] < 2*overdue["KILN-LANE"] || overdue["BRACKEN"] > 6 {
		t.Errorf("overdue %v, want Ottermoor behind by far", overdue)
	}
	long, _, _ := tripwell(t, "", "due", "--data", dir, "--on", time.Now().AddDate(1, 0, 0).Format(time.DateOnly), "--json")
	if strings.Count(long, "\n") <= strings.Count(out, "\n") {
		t.Error("in a year no more is due than today, though nobody tested")
	}
	people, _, _ := tripwell(t, "", "due", "--data", dir, "--site", "ottermoor")
	if !strings.Contains(people, "Ottermoor") && !strings.Contains(people, "OTTERMOOR") {
		t.Errorf("the list for people names no site: %.300s", people)
	}
}

func TestWorkbook_Opens(t *testing.T) {
	dir := demoFolder(t)
	out, stderr, code := tripwell(t, "", "workbook", "-o", "-", "--data", dir, "--site", "OTTERMOOR", "--by", "manager")
	if code != 0 {
		t.Fatalf("exit %d, %s", code, stderr)
	}
	book, err := excelize.OpenReader(strings.NewReader(out))
	if err != nil {
		t.Fatal(err)
	}
	defer book.Close()
	want := []string{"Cover", "Register", "Entries", "Readings", "Flags", "Due", "Defects", "Corrections", "Compliance", "Protection gaps", "Instruments", "Plans", "Limits",
		"People", "Imported", "Refused", "Sample", "Columns", "Months"}
	if got := book.GetSheetList(); !reflect.DeepEqual(got, want) {
		t.Errorf("sheets %v, want %v", got, want)
	}
}

func TestImport_SecondTimeAddsNothing(t *testing.T) {
	dir := emptyStore(t)
	file := filepath.Join(t.TempDir(), "devices.csv")
	var csv bytes.Buffer
	csv.WriteString("site_name,zone,standard,building,floor,room,place,kind,panel,circuit,rating_a\n")
	for i := 1; i <= 40; i++ {
		fmt.Fprintf(&csv, "Mill,America/Chicago,NEC,Mill,Ground floor,Hall,Post %d,gfci-receptacle,MP-1,%d,20\n", i, i)
	}
	if err := os.WriteFile(file, csv.Bytes(), 0o600); err != nil {
		t.Fatal(err)
	}
	first, stderr, code := tripwell(t, "", "import", "register", file, "--data", dir, "--site", "MILL", "--new-tags")
	if code != 0 || !strings.Contains(first, "40 added") || !strings.Contains(first, "40 new tags") {
		t.Fatalf("exit %d: %s%s", code, first, stderr)
	}
	again, stderr, code := tripwell(t, "", "import", "register", file, "--data", dir, "--site", "MILL", "--new-tags")
	if code != 0 || !strings.Contains(again, "0 added, 0 changed, 40 as they were") || !strings.Contains(again, "0 records") {
		t.Errorf("the second time: exit %d: %s%s", code, again, stderr)
	}
	if out, stderr, code := tripwell(t, "", "check", "--data", dir); code != 0 {
		t.Errorf("check after the import: exit %d, %s%s", code, out, stderr)
	}
	piped, stderr, code := tripwell(t, csv.String()+"Mill,America/Chicago,NEC,Mill,Ground floor,Hall,Post 41,toaster,MP-1,41,20\n", "import", "register", "-", "--data", dir, "--site", "MILL")
	if code != 1 || !strings.Contains(stderr, "toaster") {
		t.Errorf("a row that cannot be taken: exit %d: %s%s; want exit 1 and the row named", code, piped, stderr)
	}
}

// The first start prints one link for the first manager; a restart before anybody signed in prints another, later ones none.
func TestServe_FirstStart(t *testing.T) {
	if testing.Short() {
		t.Skip("starts servers; left out with -short")
	}
	dir := filepath.Join(t.TempDir(), "store")
	p := start(t, "serve", "--data", dir, "--listen", "127.0.0.1:0", "--url", "https://tests.example.org")
	link := p.link("on this machine")
	if elsewhere := p.link("from elsewhere"); !strings.HasPrefix(elsewhere, "https://tests.example.org/in/") {
		t.Errorf("the link from elsewhere is %s", elsewhere)
	}
	info, err := os.Stat(filepath.Join(dir, "tripwell.sock"))
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("owner's socket: %v, %v; want mode 0600", info, err)
	}
	if err := p.stop(syscall.SIGINT); err != nil {
		t.Errorf("stopped with %v, want exit code 0", err)
	}
	p = start(t, "serve", "--data", dir, "--listen", "127.0.0.1:0")
	if second := p.link("on this machine"); strings.HasSuffix(link, second[len(second)-20:]) {
		t.Error("the second start printed the same link")
	}
	if err := p.stop(syscall.SIGTERM); err != nil {
		t.Errorf("stopped with %v, want exit code 0", err)
	}
	signIn(t, dir)
	p = start(t, "serve", "--data", dir, "--listen", "127.0.0.1:0")
	if strings.Contains(p.output(), "/in/") {
		t.Errorf("a start after somebody signed in prints a link:\n%s", p.output())
	}
}

// signIn lets the only person of a store sign in.
func signIn(t *testing.T, dir string) {
	t.Helper()
	s, err := store.Open(dir, store.Options{Now: time.Now})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	token, err := firstLink(t.Context(), s)
	if err == nil {
		_, err = s.SpendLink(t.Context(), token, store.Arrival{})
	}
	if err != nil {
		t.Fatal(err)
	}
}

// Nothing is lost when the output cannot be finished: the old file stays.
func TestOutput_KeepsTheOldFile(t *testing.T) {
	dir := demoFolder(t)
	file := filepath.Join(t.TempDir(), "w.xlsx")
	if err := os.WriteFile(file, []byte("the old one"), 0o600); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	var out, errs bytes.Buffer
	if err := run(ctx, []string{"workbook", "-o", file, "--data", dir}, strings.NewReader(""), &out, &errs); err == nil {
		t.Error("a cancelled workbook is no error")
	}
	if got, _ := os.ReadFile(file); string(got) != "the old one" {
		t.Errorf("the file holds %q, want the old one", got)
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(file), ".tripwell-*")); len(left) > 0 {
		t.Errorf("left %v", left)
	}
}
