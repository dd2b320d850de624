package main

import (
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"

	"tripwell/export"
)

type importCmd struct {
	Register importRegisterCmd `cmd:"" help:"Take sites, places and devices in from a CSV file."`
}

type importRegisterCmd struct {
	folder
	author
	File string `arg:"" placeholder:"FILE" help:"CSV file whose first row names the columns; - reads standard input."`
	Site string `name:"site" placeholder:"CODE" help:"Site of rows that name none."`
	Tags bool   `name:"new-tags" help:"Give every place of the file that has no tag a new one."`
}

// Help gives an example.
func (importRegisterCmd) Help() string {
	return "Takes a register in: one row a device, with columns such as site, building, floor, room, place, kind, panel, circuit. What is there already stays; a changed cell changes that field. The same file a second time adds nothing.\n\nExample:\n\n    tripwell import register devices.csv --data /srv/tripwell --site KILN-LANE"
}

// Run sends the file and prints what became of its rows.
func (c importRegisterCmd) Run(e *env) error {
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
	setIf(query, "site", c.Site)
	if c.Tags {
		query.Set("tags", "new")
	}
	var report export.ImportReport
	err := e.with(c.Data, func(d *door) error {
		return e.follow(d, http.MethodPost, "/own/import/register", query, file, "import", &report)
	})
	if err != nil {
		return err
	}
	return errors.Join(c.print(e, report), c.failed(report))
}

// problemsShown is how many problems of a file are printed; whoever has more mends these first.
const problemsShown = 20

// print says what was done and what is wrong with single cells.
func (c importRegisterCmd) print(e *env, r export.ImportReport) error {
	for i, p := range r.Problems {
		if i == problemsShown {
			fmt.Fprintf(e.stderr, "and %d more\n", len(r.Problems)-i)
			break
		}
		where := fmt.Sprintf("line %d", p.Line)
		if p.Column != "" {
			where += ", " + p.Column
		}
		if p.Value != "" {
			where += fmt.Sprintf(" %q", p.Value)
		}
		fmt.Fprintf(e.stderr, "%s: %s\n", where, p.Text)
	}
	_, err := fmt.Fprintf(e.stdout, "%d rows: %d added, %d changed, %d as they were, %d left out. %d new sites, %d new tags, %d records.\n",
		r.Rows, r.Added, r.Changed, r.Unchanged, r.Skipped, r.Sites, r.Tags, r.Records)
	return err
}

// failed makes rows that were left out a failure, so that a script notices.
func (c importRegisterCmd) failed(r export.ImportReport) error {
	if r.Skipped == 0 {
		return nil
	}
	return fmt.Errorf("%d of %d rows of %s were left out. Correct them and import the file again: what is in already stays as it is", r.Skipped, r.Rows, c.File)
}
