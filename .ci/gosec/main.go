// Command gosec runs the rules of github.com/securego/gosec over the packages of a module and fails on findings that
// allowed.txt does not give a reason for. The library is used without its command, whose further dependencies take ten
// times as long to build as the check itself.
package main

import (
	"bufio"
	"fmt"
	"io"
	"log"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/securego/gosec/v2"
	"github.com/securego/gosec/v2/analyzers"
	"github.com/securego/gosec/v2/rules"
)

func main() {
	if len(os.Args) != 3 {
		fmt.Fprintln(os.Stderr, "use: gosec FOLDER-OF-MODULE ALLOWED")
		os.Exit(2)
	}
	if err := run(os.Args[1], os.Args[2]); err != nil {
		fmt.Fprintln(os.Stderr, "gosec:", err)
		os.Exit(1)
	}
}

// allowance is a rule that may be broken in files whose path begins so; the rest of its line is the reason.
type allowance struct {
	rule, path string
	used       bool
}

func run(root, list string) error {
	allowed, err := read(list) // before the folder changes
	if err != nil {
		return err
	}
	if err := os.Chdir(root); err != nil {
		return err
	}
	if root, err = os.Getwd(); err != nil {
		return err
	}
	quiet := log.New(io.Discard, "", 0)
	a := gosec.NewAnalyzer(gosec.NewConfig(), false, true, false, 2, quiet)
	a.LoadRules(rules.Generate(false).RulesInfo())
	a.LoadAnalyzers(analyzers.Generate(false).AnalyzersInfo())
	folders, err := gosec.PackagePaths("./...", gosec.ExcludedDirsRegExp([]string{`\.ci`}))
	if err != nil {
		return err
	}
	if err := a.Process(nil, folders...); err != nil {
		return err
	}
	issues, metrics, failed := a.Report()
	for file, errs := range failed {
		return fmt.Errorf("%s cannot be read: %v", file, errs)
	}
	var found []string
	for _, i := range issues {
		file, err := filepath.Rel(root, i.File)
		if err != nil {
			return err
		}
		if at := slices.IndexFunc(allowed, func(a allowance) bool { return a.rule == i.RuleID && strings.HasPrefix(file, a.path) }); at >= 0 {
			allowed[at].used = true
			continue
		}
		found = append(found, fmt.Sprintf("%s:%s: %s %s", file, i.Line, i.RuleID, i.What))
	}
	for _, a := range allowed {
		if !a.used {
			found = append(found, fmt.Sprintf("%s: %s %s is broken nowhere any more: take the line out", list, a.rule, a.path))
		}
	}
	slices.Sort(found)
	for _, line := range found {
		fmt.Println(line)
	}
	fmt.Printf("gosec: %d files, %d findings, %d of them without a reason\n", metrics.NumFiles, len(issues), len(found))
	if len(found) > 0 {
		return fmt.Errorf("mend these, or give a reason in %s", list)
	}
	return nil
}

func read(list string) (out []allowance, err error) {
	f, err := os.Open(list)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		line := lines.Text()
		if line == "" || strings.HasPrefix(line, "#") {
			continue
		}
		parts := strings.Fields(line)
		if len(parts) < 4 {
			return nil, fmt.Errorf("%s: %q needs a rule, a path and a reason", list, line)
		}
		out = append(out, allowance{rule: parts[0], path: parts[1]})
	}
	return out, lines.Err()
}
