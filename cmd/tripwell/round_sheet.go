package main

import (
	"fmt"
	"io"
	"net/url"
	"path/filepath"
	"strings"
)

type roundSheetCmd struct {
	folder
	author
	outFile
	Site  string  `name:"site" required:"" placeholder:"CODE" help:"Site of the round."`
	Task  string  `name:"task" placeholder:"TASK" help:"Only this test: button, instrument or receptacle; all when left out."`
	Until dayFlag `name:"due-until" placeholder:"DATE" help:"Only tests due up to this day, as 2026-12-31; every device that has the test when left out."`
	Paper string  `name:"paper" default:"letter" placeholder:"SIZE" help:"Paper of the PDF: letter or a4."`
}

// Help gives an example.
func (roundSheetCmd) Help() string {
	return "Writes a round for paper, in walking order: a PDF with empty boxes and codes, or a worksheet to fill in, by the file's name. What was typed into the worksheet comes back with tripwell import readings.\n\nExample:\n\n" +
		"    tripwell round-sheet -o round.pdf --data /srv/tripwell --site KILN-LANE --task button --due-until 2026-12-31"
}

// Run writes the sheet to the file.
func (c roundSheetCmd) Run(e *env) error {
	as := strings.ToLower(strings.TrimPrefix(filepath.Ext(c.Output), "."))
	if as != "pdf" && as != "xlsx" {
		return usageError{fmt.Errorf("-o %s: a round sheet is written as FILE.pdf or FILE.xlsx", c.Output)}
	}
	query := url.Values{"site": {c.Site}, "as": {as}, "paper": {c.Paper}}
	setIf(query, "task", c.Task)
	setIf(query, "until", c.Until.text())
	setIf(query, "by", c.By)
	return c.fetch(e, c.folder, "/own/round-sheet", query, "round sheet")
}

type deviceSheetCmd struct {
	folder
	author
	outFile
	Tag   string `arg:"" placeholder:"TAG" help:"Tag of the device, as K7Q-M2P-3."`
	Paper string `name:"paper" default:"letter" placeholder:"SIZE" help:"Paper: letter or a4."`
}

// Help gives an example.
func (deviceSheetCmd) Help() string {
	return "Writes what is filed of one device as a PDF: register, dates, all tests with their readings.\n\nExample:\n\n    tripwell device-sheet K7Q-M2P-3 -o sink.pdf --data /srv/tripwell"
}

// Run writes the sheet to the file.
func (c deviceSheetCmd) Run(e *env) error {
	query := url.Values{"tag": {c.Tag}, "paper": {c.Paper}}
	setIf(query, "by", c.By)
	return c.fetch(e, c.folder, "/own/device-sheet", query, "device sheet")
}

// fetch writes to the file what the store answers.
func (o outFile) fetch(e *env, f folder, path string, query url.Values, what string) error {
	return o.write(e, func(w io.Writer) error {
		return e.with(f.Data, func(d *door) error {
			body, err := d.get(path, query)
			if err != nil {
				return err
			}
			defer body.Close()
			return copyOut(e, w, body, what)
		})
	})
}
