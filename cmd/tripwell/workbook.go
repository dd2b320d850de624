package main

import (
	"net/url"
)

type workbookCmd struct{ forAuditor }

// forAuditor are the flags of what an auditor gets: of which sites, and tests of which days.
type forAuditor struct {
	folder
	author
	outFile
	Site string `name:"site" placeholder:"CODE" help:"Only this site; all sites when left out."`
	period
}

// Help gives an example.
func (workbookCmd) Help() string {
	return "Writes the workbook an auditor gets: cover, register, entries, readings, flags, dates and limits. That it was taken is itself recorded.\n\nExample:\n\n    tripwell workbook -o kiln-lane-2026.xlsx --data /srv/tripwell --site KILN-LANE --from 2026-01-01 --to 2026-12-31"
}

// Run writes the workbook to the file.
func (c workbookCmd) Run(e *env) error { return c.take(e, "/own/workbook", "workbook") }

// take writes what the store gives to the file.
func (c forAuditor) take(e *env, path, what string) error {
	if err := c.period.check(); err != nil {
		return err
	}
	query := url.Values{}
	setIf(query, "site", c.Site)
	setIf(query, "from", c.From.text())
	setIf(query, "to", c.To.text())
	setIf(query, "by", c.By)
	return c.fetch(e, c.folder, path, query, what)
}
