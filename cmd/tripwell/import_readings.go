package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"net/http"
	"net/url"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"tripwell/export/intake"
	"tripwell/export/results"
)

// importResultsFlags are what both imports of tests ask.
type importResultsFlags struct {
	sheetFlags
	Source     string `name:"source" enum:",paper,spreadsheet,instrument-file" default:"" placeholder:"SOURCE" help:"What was typed from or read: paper, spreadsheet or instrument-file; spreadsheet when left out."`
	ReadBy     string `name:"read-by" placeholder:"PERSON" help:"Who read, in rows that name nobody."`
	TypedBy    string `name:"typed-by" placeholder:"PERSON" help:"Who typed, in rows that name nobody."`
	Instrument string `name:"instrument" placeholder:"NAME" help:"Name or serial of the instrument, in rows that name none."`
	Test       string `name:"test" enum:",button,instrument,receptacle" default:"" placeholder:"TEST" help:"Which test it was, in rows that do not say: button, instrument or receptacle."`
	Rejects    string `name:"rejects" placeholder:"FILE" help:"Write the rows that are not in, with the reasons, as CSV."`
	Doubted    bool   `name:"doubted" help:"Take rows with doubtful values in as they stand."`
}

type importReadingsCmd struct{ importResultsFlags }

type importResultsCmd struct {
	importResultsFlags
	Year int `name:"year" placeholder:"YEAR" help:"Year of columns that name a month only, where no title of the sheet says it."`
}

// Help gives an example.
func (importReadingsCmd) Help() string {
	return "Takes in tests that were made on paper, in a spreadsheet or by an instrument that writes a file: one row a test, with a tag or a place, the day, who read, and the readings. Headings may state their unit, as in \"Trip time (s)\"; <0.1, >1999 and \"no trip\" are taken as they are. Unlikely figures, dates to come and unknown tags are named and left out. The same file a second time adds nothing.\n\nExample:\n\n    tripwell import readings round.xlsx --data /srv/tripwell --source paper --read-by \"Crew 1\" --rejects to-correct.csv --dry-run"
}

// Help gives an example.
func (importResultsCmd) Help() string {
	return "Takes in what older lists say was done before: the day of the last test, one column a month with OK, initials, a date or locked, or rows of readings. Dates count from these tests; they stand apart everywhere as not witnessed here. A month without a day counts from its first. The same file a second time adds nothing.\n\nExample:\n\n    tripwell import results monthly-2026.xlsx --data /srv/tripwell --site ELM-4 --dates mdy --rejects to-correct.csv --dry-run"
}

// Run sends the file and prints what became of its rows.
func (c importReadingsCmd) Run(e *env) error { return c.run(e, results.Ask{}) }

// Run sends the file and prints what became of its rows.
func (c importResultsCmd) Run(e *env) error { return c.run(e, results.Ask{Past: true, Year: c.Year}) }

func (c importResultsFlags) run(e *env, ask results.Ask) error {
	ask, err := c.ask(ask)
	if err != nil {
		return err
	}
	file, err := c.open(e)
	if err != nil {
		return err
	}
	defer file.Close()
	before, err := json.Marshal(ask)
	if err != nil {
		return err
	}
	query := url.Values{"ask": {strconv.Itoa(len(before))}, "name": {filepath.Base(c.File)}}
	setIf(query, "by", c.By)
	var report results.Report
	err = e.with(c.Data, func(d *door) error {
		return e.follow(d, http.MethodPost, "/own/import/readings", query, io.MultiReader(bytes.NewReader(before), file), "import", &report)
	})
	if err != nil {
		return err
	}
	return errors.Join(c.print(e, report), c.save(e, ask, report), c.failed(report))
}

// ask is what the kept file says of its columns, and over it what the flags say.
func (c importResultsFlags) ask(ask results.Ask) (results.Ask, error) {
	raw, err := c.mapped()
	if err != nil {
		return ask, err
	}
	if c.Map != "" {
		kept, err := results.ParseAsk(raw)
		if err != nil {
			return ask, usageError{fmt.Errorf("%s: %w", c.Map, err)}
		}
		kept.Past, kept.Year = ask.Past, max(ask.Year, kept.Year)
		ask = kept
	}
	for _, f := range []struct {
		into *string
		flag string
	}{{&ask.Site, c.Site}, {&ask.Source, c.Source}, {&ask.ReadBy, c.ReadBy}, {&ask.TypedBy, c.TypedBy}, {&ask.Instrument, c.Instrument}, {&ask.Task, c.Test},
		{(*string)(&ask.Dates), strings.ToLower(c.Dates)}} {
		if f.flag != "" {
			*f.into = f.flag
		}
	}
	if ask.Dates != intake.UnknownOrder && ask.Dates != intake.DMY && ask.Dates != intake.MDY {
		return ask, usageError{fmt.Errorf("--dates is dmy, with the day first, or mdy, with the month first")}
	}
	ask.Doubted, ask.DryRun = ask.Doubted || c.Doubted, c.DryRun
	return ask, nil
}

// print says what was done and what is wrong with single cells.
func (c importResultsFlags) print(e *env, r results.Report) error {
	for _, told := range r.Told {
		fmt.Fprintln(e.stderr, told)
	}
	for _, h := range r.Headings {
		if h.Column == "" {
			fmt.Fprintf(e.stderr, "%snot read: no column is called %q\n", rowName(h.Sheet, 0), h.Heading)
		}
	}
	shown := 0
	for _, o := range r.Outcomes {
		if o.State == results.Taken && c.DryRun && shown < problemsShown || o.State != results.Taken && o.State != results.There && o.State != results.Silent {
			if shown++; shown <= problemsShown {
				fmt.Fprintln(e.stderr, outcomeLine(o))
			}
		}
	}
	if more := r.Held() - problemsShown; more > 0 {
		fmt.Fprintf(e.stderr, "and %d more\n", more)
	}
	would := ""
	if r.DryRun {
		would = "Nothing was imported. It would be: "
	}
	var by []string
	for _, result := range slices.Sorted(maps.Keys(r.Results)) {
		by = append(by, fmt.Sprintf("%d %s", r.Results[result], result))
	}
	judged := ""
	if len(by) > 0 {
		judged = " (" + strings.Join(by, ", ") + ")"
	}
	_, err := fmt.Fprintf(e.stdout, "%s%d rows: %d tests added%s, %d in already, %d left out, %d doubted, %d of unknown devices, %d without a test.\n",
		would, r.Rows, r.Taken, judged, r.There, r.LeftOut, r.Doubted, r.Parked, r.Silent)
	return err
}

// outcomeLine is one row of a report for people.
func outcomeLine(o results.Outcome) string {
	where := strings.TrimSuffix(rowName(o.Sheet, o.Row), ", ")
	if o.State == results.Taken {
		return fmt.Sprintf("%s: %s, %s test on %s: %s", where, strings.TrimSpace(o.Tag+" "+o.Place), o.Task, o.Day, o.Result)
	}
	if o.Column != "" {
		where += ", " + o.Column
	}
	if o.Value != "" {
		where += fmt.Sprintf(" %q", o.Value)
	}
	return where + ": " + o.Text
}

// save writes the rows that are not in and how the columns were read, where they were asked for.
func (c importResultsFlags) save(e *env, ask results.Ask, r results.Report) error {
	var wrong []error
	if c.Rejects != "" && r.Rest != "" {
		wrong = append(wrong, outFile{Output: c.Rejects}.write(e, func(w io.Writer) error {
			_, err := io.WriteString(w, r.Rest)
			return err
		}))
	}
	return errors.Join(append(wrong, c.saveMap(e, r.Kept(ask)))...)
}

// failed makes rows that are not in a failure, so that a script notices.
func (c importResultsFlags) failed(r results.Report) error {
	if r.Held() == 0 {
		return nil
	}
	return fmt.Errorf("%d tests of %s are not in. Correct them, or write them out with --rejects, and import again: what is in already stays as it is", r.Held(), c.File)
}
