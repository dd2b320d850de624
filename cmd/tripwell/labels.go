package main

import (
	"fmt"
	"io"
	"net/url"
	"strconv"
)

type labelsCmd struct {
	folder
	author
	outFile
	Sheet string `name:"sheet" required:"" placeholder:"SHEET" help:"Label sheet by its grid; known: letter-3x10 (30 labels of 2 5/8 by 1 inch)."`
	Site  string `name:"site" placeholder:"CODE" help:"Only this site; all sites when left out."`
	Start int    `name:"start" default:"1" placeholder:"N" help:"Label of the first sheet to begin with, from 1, for a sheet that is partly used."`
}

// Help gives an example.
func (labelsCmd) Help() string {
	return "Writes label sheets as a PDF, in walking order. Print at 100 %, without fitting to the page.\n\nExample:\n\n    tripwell labels -o labels.pdf --sheet letter-3x10 --data /srv/tripwell --site KILN-LANE --start 7"
}

// Run writes the sheets to the file.
func (c labelsCmd) Run(e *env) error {
	if c.Start < 1 {
		return usageError{fmt.Errorf("--start %d: labels on a sheet are counted from 1", c.Start)}
	}
	query := url.Values{"sheet": {c.Sheet}, "start": {strconv.Itoa(c.Start)}}
	setIf(query, "site", c.Site)
	setIf(query, "by", c.By)
	return c.write(e, func(w io.Writer) error {
		return e.with(c.Data, func(d *door) error {
			body, err := d.get("/own/labels", query)
			if err != nil {
				return err
			}
			defer body.Close()
			return copyOut(e, w, body, "labels")
		})
	})
}
