package main

import (
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"path/filepath"
	"strconv"
	"strings"
)

// labelPaper is the flags of commands that print labels.
type labelPaper struct {
	Sheet string   `name:"sheet" placeholder:"SHEET" help:"Label sheet by its grid: letter-3x10, letter-2x5, letter-4x20, a4-3x8, a4-3x7, a4-2x7 or a4-5x13."`
	Roll  string   `name:"roll" placeholder:"WxH" help:"Labels of a roll instead, one on a page, width by height in mm, for example 50x25."`
	Lines []string `name:"lines" placeholder:"LINE,…" help:"What stands beside the tag: spot, room, circuit, kind, site. Without: spot, room, circuit."`
}

func (p labelPaper) query() url.Values {
	query := url.Values{}
	setIf(query, "sheet", p.Sheet)
	setIf(query, "roll", p.Roll)
	setIf(query, "line", strings.Join(p.Lines, ","))
	return query
}

type labelsCmd struct {
	folder
	author
	outFile
	labelPaper
	Site    string `name:"site" placeholder:"CODE" help:"Only this site; all sites when left out."`
	Start   int    `name:"start" default:"1" placeholder:"N" help:"Label of the first sheet to begin with, from 1, for a sheet that is partly used."`
	Nudge   string `name:"nudge" placeholder:"X,Y" help:"Move everything this many mm to the right and down, for a printer that feeds askew: --nudge=0.5,-1."`
	Align   bool   `name:"align" help:"Write a page for plain paper that shows where labels will lie, instead of labels."`
	Batch   int    `name:"batch" placeholder:"N" help:"Draw this many new tags and write their labels, without a place: they are bound on site."`
	Marking string `name:"marking" placeholder:"NAME" help:"Write a marking instead of tags: gfci-protected, no-equipment-ground or both."`
	Count   int    `name:"count" placeholder:"N" help:"How many labels of a marking; a full sheet when left out."`
}

// Help gives an example.
func (labelsCmd) Help() string {
	return "Writes label sheets as a PDF, in walking order. Print at 100 %, without fitting to the page. Look at --align on plain paper first.\n\nExamples:\n\n" +
		"    tripwell labels -o labels.pdf --sheet letter-3x10 --data /srv/tripwell --site KILN-LANE --start 7\n" +
		"    tripwell labels -o new.pdf --roll 50x25 --data /srv/tripwell --batch 100"
}

// Run writes the sheets to the file.
func (c labelsCmd) Run(e *env) error {
	if err := c.check(); err != nil {
		return usageError{err}
	}
	query := c.query()
	query.Set("start", strconv.Itoa(c.Start))
	setIf(query, "nudge", c.Nudge)
	setIf(query, "site", c.Site)
	setIf(query, "by", c.By)
	setIf(query, "marking", c.Marking)
	if c.Align {
		query.Set("align", "yes")
	}
	if n := max(c.Count, c.Batch); n > 0 {
		query.Set("count", strconv.Itoa(n))
	}
	return c.write(e, func(w io.Writer) error {
		return e.with(c.Data, func(d *door) error {
			method, path := http.MethodGet, "/own/labels"
			if c.Batch > 0 {
				method, path = http.MethodPost, "/own/labels/batch"
			}
			body, err := d.Ask(d.ctx, method, path, query, nil)
			if err != nil {
				return wrongFlag(err)
			}
			defer body.Close()
			return copyOut(e, w, body, "labels")
		})
	})
}

func (c labelsCmd) check() error {
	asked := 0
	for _, given := range []bool{c.Align, c.Batch != 0, c.Marking != ""} {
		if given {
			asked++
		}
	}
	switch {
	case c.Sheet == "" && c.Roll == "":
		return errors.New("say what to print on: --sheet SHEET or --roll WxH")
	case c.Sheet != "" && c.Roll != "":
		return errors.New("--sheet and --roll exclude each other")
	case c.Start < 1:
		return fmt.Errorf("--start %d: labels on a sheet are counted from 1", c.Start)
	case c.Batch < 0 || c.Count < 0:
		return errors.New("the number of labels is counted from 1")
	case asked > 1:
		return errors.New("--align, --batch and --marking exclude each other")
	case c.Count > 0 && c.Marking == "":
		return errors.New("--count goes with --marking; for new tags say --batch N")
	}
	return nil
}

type labelCmd struct {
	folder
	author
	outFile
	labelPaper
	Tag string `arg:"" placeholder:"TAG" help:"Tag of the label, as K7Q-M2P-3."`
}

// Help gives an example.
func (labelCmd) Help() string {
	return "Writes one label as a picture: PNG at 600 dpi or SVG, by the file's name. A tag that is bound to nothing gets a label without a place.\n\nExample:\n\n" +
		"    tripwell label K7Q-M2P-3 -o sink.svg --data /srv/tripwell"
}

// Run writes the picture to the file.
func (c labelCmd) Run(e *env) error {
	if c.Sheet != "" && c.Roll != "" {
		return usageError{errors.New("--sheet and --roll exclude each other")}
	}
	as := strings.ToLower(strings.TrimPrefix(filepath.Ext(c.Output), "."))
	if as != "png" && as != "svg" {
		return usageError{fmt.Errorf("-o %s: a label is written as FILE.png or FILE.svg", c.Output)}
	}
	query := c.query()
	query.Set("tag", c.Tag)
	query.Set("as", as)
	setIf(query, "by", c.By)
	return c.fetch(e, c.folder, "/own/label", query, "label")
}
