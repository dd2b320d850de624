package main

import (
	"fmt"
	"net/url"
	"path/filepath"
	"strings"
)

type tableCmd struct {
	folder
	author
	outFile
	Sheet string `name:"sheet" required:"" placeholder:"SHEET" help:"Sheet of the workbook, such as register, entries, readings, due, compliance, defects or limits; a wrong name lists all."`
	As    string `name:"as" placeholder:"FORMAT" help:"csv or jsonl; by the file's name when left out."`
	Site  string `name:"site" placeholder:"CODE" help:"Only this site; all sites when left out."`
	period
}

// Help gives an example.
func (tableCmd) Help() string {
	return "Writes one sheet of the workbook, with the same columns, for other programs: CSV (UTF-8; a text that would be a formula is led by an apostrophe) or JSON Lines. That it was taken is itself recorded.\n\nExample:\n\n" +
		"    tripwell table --sheet readings -o readings.csv --data /srv/tripwell --site KILN-LANE --from 2026-01-01"
}

// Run writes the table to the file.
func (c tableCmd) Run(e *env) error {
	if err := c.period.check(); err != nil {
		return err
	}
	as := c.As
	if as == "" {
		as = strings.ToLower(strings.TrimPrefix(filepath.Ext(c.Output), "."))
	}
	if as != "csv" && as != "jsonl" {
		return usageError{fmt.Errorf("-o %s: a table is written as FILE.csv or FILE.jsonl; for other names say --as csv or --as jsonl", c.Output)}
	}
	query := url.Values{"sheet": {c.Sheet}, "as": {as}}
	setIf(query, "site", c.Site)
	setIf(query, "from", c.From.text())
	setIf(query, "to", c.To.text())
	setIf(query, "by", c.By)
	return c.fetch(e, c.folder, "/own/table", query, "table")
}
