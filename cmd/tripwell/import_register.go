package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"path/filepath"
	"strconv"
	"strings"

	"tripwell/export/register"
)

type importRegisterCmd struct {
	sheetFlags
	Zone    string `name:"zone" placeholder:"ZONE" help:"Time zone of new sites whose rows name none, such as America/Chicago."`
	Rejects string `name:"rejects" placeholder:"FILE" help:"Write the rows that were left out, with the reasons, as .csv or .xlsx."`
	Tags    bool   `name:"new-tags" negatable:"" default:"true" help:"Give every place of the file that has no tag a new one, ready for labels. --no-new-tags where pre-printed labels are put up instead."`
}

// Help gives an example.
func (importRegisterCmd) Help() string {
	return "Takes a register in: one row a device, with columns such as site, building, floor, room, place, kind, panel, circuit. Headings may stand below titles and in other words; several sheets may each be a building. What is there already stays; a changed cell changes that field. The same file a second time adds nothing.\n\nExample:\n\n    tripwell import register devices.xlsx --data /srv/tripwell --zone America/Chicago --dates mdy --rejects to-correct.xlsx --dry-run"
}

// Run sends the file and prints what became of its rows.
func (c importRegisterCmd) Run(e *env) error {
	query, mapping, err := c.ask()
	if err != nil {
		return err
	}
	file, err := c.open(e)
	if err != nil {
		return err
	}
	defer file.Close()
	var report register.Report
	err = e.with(c.Data, func(d *door) error {
		return e.follow(d, http.MethodPost, "/own/import/register", query, io.MultiReader(bytes.NewReader(mapping), file), "import", &report)
	})
	if err != nil {
		return err
	}
	return errors.Join(c.print(e, report), c.save(e, report), c.failed(report))
}

// ask is the query, and the mapping that goes before the file.
func (c importRegisterCmd) ask() (url.Values, []byte, error) {
	query := url.Values{}
	setIf(query, "by", c.By)
	setIf(query, "site", c.Site)
	setIf(query, "zone", c.Zone)
	setIf(query, "dates", strings.ToLower(c.Dates))
	setIf(query, "name", filepath.Base(c.File))
	for name, on := range map[string]bool{"dry": c.DryRun, "rejects": c.Rejects != ""} {
		if on {
			query.Set(name, "1")
		}
	}
	if c.Tags {
		query.Set("tags", "new")
	}
	if ext := strings.ToLower(filepath.Ext(c.Rejects)); c.Rejects != "" && ext != ".csv" && ext != ".xlsx" {
		return nil, nil, usageError{fmt.Errorf("--rejects writes .csv or .xlsx; %s is neither", c.Rejects)}
	}
	mapping, err := c.mapped()
	if len(mapping) > 0 {
		query.Set("map", strconv.Itoa(len(mapping)))
	}
	return query, mapping, err
}

// problemsShown is how many problems of a file are printed; whoever has more mends these first.
const problemsShown = 20

// print says what was done and what is wrong with single cells.
func (c importRegisterCmd) print(e *env, r register.Report) error {
	for _, told := range r.Told {
		fmt.Fprintln(e.stderr, told)
	}
	for _, t := range r.Tables {
		for _, left := range t.LeftOut {
			fmt.Fprintf(e.stderr, "%sleft out, %s: %s\n", rowName(t.Sheet, left.Row), leftOutWords[left.Why], left.Text)
		}
		if t.Skipped != "" && t.Skipped != "empty" {
			fmt.Fprintf(e.stderr, "sheet %s was not read: %s\n", t.Sheet, skippedWords[t.Skipped])
		}
	}
	for i, p := range r.Problems {
		if i == problemsShown {
			fmt.Fprintf(e.stderr, "and %d more\n", len(r.Problems)-i)
			break
		}
		where := rowName(p.Sheet, p.Row)
		if p.Column != "" {
			where += p.Column
		}
		if p.Value != "" {
			where += fmt.Sprintf(" %q", p.Value)
		}
		fmt.Fprintf(e.stderr, "%s: %s\n", strings.TrimSuffix(where, ", "), p.Text)
	}
	if r.Ambiguous > 0 {
		fmt.Fprintf(e.stderr, "%d dates could be either way round: say --dates dmy or --dates mdy.\n", r.Ambiguous)
	}
	would := ""
	if r.DryRun {
		would = "Nothing was imported. It would be: "
	}
	_, err := fmt.Fprintf(e.stdout, "%s%d rows: %d added, %d changed, %d as they were, %d left out. %d new sites, %d new tags, %d records.\n",
		would, r.Rows, r.Added, r.Changed, r.Unchanged, r.Skipped, r.Sites, r.Tags, r.Records)
	return err
}

var leftOutWords = map[string]string{"title": "a title", "total": "a total", "header": "the headings again", "gone": "no longer in use"}

var skippedWords = map[string]string{"asked": "as the map says", "hidden": "it is hidden; name it in the map to read it", "no-header": "it has no row of headings", "results": "it holds entries or dates, no register"}

func rowName(sheet string, row int) string {
	where := ""
	if sheet != "" {
		where = "sheet " + sheet + ", "
	}
	if row > 0 {
		where += fmt.Sprintf("row %d, ", row)
	}
	return where
}

// save writes the rows that were left out and the mapping, where they were asked for.
func (c importRegisterCmd) save(e *env, r register.Report) error {
	var wrong []error
	if c.Rejects != "" && len(r.Rejects) > 0 {
		wrong = append(wrong, outFile{Output: c.Rejects}.write(e, func(w io.Writer) error {
			if strings.EqualFold(filepath.Ext(c.Rejects), ".csv") {
				return register.WriteRejectsCSV(w, r.Rejects)
			}
			return register.WriteRejectsXLSX(w, r.Rejects)
		}))
	}
	return errors.Join(append(wrong, c.saveMap(e, r.Mapping))...)
}

// failed makes rows that were left out a failure, so that a script notices.
func (c importRegisterCmd) failed(r register.Report) error {
	if r.Skipped == 0 {
		return nil
	}
	return fmt.Errorf("%d of %d rows of %s were left out. Correct them and import the file again: what is in already stays as it is", r.Skipped, r.Rows, c.File)
}
