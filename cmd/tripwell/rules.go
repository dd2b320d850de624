package main

import (
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"

	"tripwell/server"
	"tripwell/static"
	"tripwell/store"
)

type limitsCmd struct {
	Export limitsExportCmd `cmd:"" help:"Write limit sets to a file."`
	Import limitsImportCmd `cmd:"" help:"Take limit sets in from a file."`
}

type limitsExportCmd struct {
	folder
	outFile
	Site string `name:"site" placeholder:"CODE" help:"The limit sets this site has of its own."`
	Set  string `arg:"" optional:"" placeholder:"SET" help:"One limit set; all when left out."`
}

// Help gives an example.
func (limitsExportCmd) Help() string {
	return "Writes the newest revision of limit sets as JSON, a line for each limit: a file to change and to take in again.\n\nExample:\n\n    tripwell limits export us-class-a -o us-class-a.json --data /srv/tripwell"
}

// Run writes the file.
func (c limitsExportCmd) Run(e *env) error {
	query := url.Values{}
	setIf(query, "id", c.Set)
	setIf(query, "site", c.Site)
	return exportRules(e, c.Data, c.outFile, "limits", query)
}

type formsExportCmd struct {
	folder
	outFile
	Form string `arg:"" optional:"" placeholder:"FORM" help:"One form, such as gfci-receptacle/button; all when left out."`
}

// Help gives an example.
func (formsExportCmd) Help() string {
	return "Writes the newest revision of forms as JSON, a line for each question: a file to change and to take in again.\n\nExample:\n\n    tripwell forms export gfci-receptacle/button -o button.json --data /srv/tripwell"
}

// Run writes the file.
func (c formsExportCmd) Run(e *env) error {
	query := url.Values{}
	setIf(query, "id", c.Form)
	return exportRules(e, c.Data, c.outFile, "forms", query)
}

func exportRules(e *env, dir string, out outFile, what string, query url.Values) error {
	return out.write(e, func(w io.Writer) error {
		return e.with(dir, func(d *door) error {
			body, err := d.get("/own/rules/"+what, query)
			if err != nil {
				return err
			}
			defer body.Close()
			return copyOut(e, w, body, what)
		})
	})
}

// rulesIn is what the two imports have in common.
type rulesIn struct {
	folder
	author
	File    string  `arg:"" placeholder:"FILE" help:"File as the export writes it: one document or a list; - reads standard input."`
	InForce dayFlag `name:"in-force" placeholder:"DATE" help:"First day of the new revision; a past day judges the entries from then on again. Left out: today, or the file's day where its revision is new."`
	Reason  string  `name:"reason" placeholder:"TEXT" help:"Why it is changed; kept with the revision."`
	DryRun  bool    `name:"dry-run" help:"Say what would change, and change nothing."`
}

type limitsImportCmd struct {
	rulesIn
	Site string `name:"site" placeholder:"CODE" help:"Make them this site's own; they stand before the organisation's there."`
}

// Help gives an example.
func (limitsImportCmd) Help() string {
	return "Makes a new revision of every limit set of the file that says something new. What cannot be meant is refused with its place; then nothing is taken.\n\nExamples:\n\n    tripwell limits import us-class-a.json --data /srv/tripwell --in-force 2026-01-01 --dry-run\n    tripwell limits import us-class-a.json --data /srv/tripwell --reason \"Advice of the maker\""
}

// Run takes the file in.
func (c limitsImportCmd) Run(e *env) error { return c.take(e, "limits", c.Site) }

type formsImportCmd struct{ rulesIn }

// Help gives an example.
func (formsImportCmd) Help() string {
	return "Makes a new revision of every form of the file that says something new. What cannot be meant is refused with its place; then nothing is taken.\n\nExample:\n\n    tripwell forms import button.json --data /srv/tripwell --reason \"Ask for the cover plate\""
}

// Run takes the file in.
func (c formsImportCmd) Run(e *env) error { return c.take(e, "forms", "") }

func (c rulesIn) take(e *env, what, site string) error {
	file := io.NopCloser(e.stdin)
	if c.File != "-" {
		f, err := os.Open(c.File)
		if err != nil {
			return usageError{fmt.Errorf("cannot read %s: %w", c.File, unwrapPath(err))}
		}
		file = f
	}
	defer file.Close()
	query := url.Values{}
	setIf(query, "by", c.By)
	setIf(query, "site", site)
	setIf(query, "in_force", c.InForce.text())
	setIf(query, "reason", c.Reason)
	if c.DryRun {
		query.Set("dry_run", "yes")
	}
	var report server.RuleReport
	err := e.with(c.Data, func(d *door) error {
		return e.follow(d, http.MethodPost, "/own/rules/"+what, query, file, "import", &report)
	})
	if err != nil {
		return err
	}
	return c.print(e.stdout, report)
}

// print says what was taken and what it changes.
func (c rulesIn) print(w io.Writer, r server.RuleReport) error {
	words, err := static.ReadWords("en")
	if err != nil {
		return err
	}
	fresh := 0
	for _, taken := range r.Rules {
		if taken.Same {
			fmt.Fprintf(w, "%s: as it was, revision %d.\n", taken.ID, taken.Revision)
			continue
		}
		fresh++
		verb := "is now"
		if c.DryRun {
			verb = "would be"
		}
		fmt.Fprintf(w, "%s: %s revision %d, in force from %s.\n", taken.ID, verb, taken.Revision, taken.InForce)
	}
	if fresh == 0 {
		return nil
	}
	writePreview(w, words, r.Preview, c.DryRun)
	return nil
}

func writePreview(w io.Writer, words *static.Words, p store.Preview, dry bool) {
	verb := "are judged again; %d change their result.\n"
	if dry {
		verb = "would be judged again; %d would change their result.\n"
	}
	fmt.Fprintf(w, "%d entries from that day on, of which %d "+verb, p.Looked, p.Judged, p.Changed)
	for _, c := range p.Changes {
		fmt.Fprintf(w, "  %d: %s → %s\n", c.N, words.Say("verdict."+c.Was), words.Say("verdict."+c.Becomes))
	}
	for _, one := range p.First {
		fmt.Fprintf(w, "  %s  %s  %s  %s → %s\n", one.Day, one.Entry, words.Say("task."+one.Task), words.Say("verdict."+one.Was), words.Say("verdict."+one.Becomes))
	}
	if n := p.Changed - len(p.First); n > 0 {
		fmt.Fprintf(w, "  and %d more\n", n)
	}
}
