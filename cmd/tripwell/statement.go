package main

import "net/url"

type statementCmd struct {
	folder
	author
	outFile
	Site  string `name:"site" required:"" placeholder:"CODE" help:"Site of the statement."`
	Paper string `name:"paper" default:"letter" placeholder:"SIZE" help:"Paper: letter or a4."`
	period
}

// Help gives an example.
func (statementCmd) Help() string {
	return "Writes what was due at a site and what became of it, what is open, and the signed head, on two pages as a PDF; the last twelve months where no period is said. That it was taken is itself recorded.\n\nExample:\n\n" +
		"    tripwell statement -o kiln-lane-2026.pdf --data /srv/tripwell --site KILN-LANE --from 2026-01-01 --to 2026-12-31"
}

// Run writes the statement to the file.
func (c statementCmd) Run(e *env) error {
	if err := c.period.check(); err != nil {
		return err
	}
	query := url.Values{"site": {c.Site}, "paper": {c.Paper}}
	setIf(query, "from", c.From.text())
	setIf(query, "to", c.To.text())
	setIf(query, "by", c.By)
	return c.fetch(e, c.folder, "/own/statement", query, "statement")
}
