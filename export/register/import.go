// Package register takes a register of devices in from the sheets people have: it finds the headings, says what each
// column was taken for, turns rows into records, and compares them with what is there. Rows with a problem are left out,
// named, and handed back as a file.
//
// Ids of what an import makes come from (organisation, site code, where the device is), so the same file makes the same
// records on every server, and a second time none. It writes through store.Append only and opens no files.
package register

import (
	"context"
	"errors"
	"fmt"
	"io"
	"slices"
	"time"

	"tripwell/export/intake"
	"tripwell/store"
)

// Ask says how rows become drafts.
type Ask struct {
	Now            time.Time
	Org            string // id of the organisation
	Zone, Standard string // of new sites whose rows state none
	NoNewSites     bool   // who imports may register no site
}

// Options of an import.
type Options struct {
	By      string // person in whose name it is done, who must be allowed the sites
	Mapping Mapping
	NewTags bool // every place and portable item of the file that has no tag is given a new one
	DryRun  bool // nothing is appended
	Rejects bool // the report carries the rows that were left out
	Caps    intake.Caps
}

// Report counts what an import did, or would do.
type Report struct {
	Rows      int        `json:"rows"` // rows of devices, good or bad
	Added     int        `json:"added"`
	Changed   int        `json:"changed"`
	Unchanged int        `json:"unchanged"`
	Skipped   int        `json:"skipped"`  // rows left out for a problem
	LeftOut   int        `json:"left_out"` // rows that are no device: titles, totals, devices gone
	Sites     int        `json:"sites"`    // sites registered
	Tags      int        `json:"tags"`     // tags given
	Records   int        `json:"records"`
	DryRun    bool       `json:"dry_run,omitempty"`
	NewSites  []NewSite  `json:"new_sites,omitempty"`
	Ambiguous int        `json:"ambiguous,omitempty"` // dates that need Mapping.Dates
	Kinds     []KindWord `json:"unknown_kinds,omitempty"`
	Told      []string   `json:"told,omitempty"`
	Tables    []Table    `json:"tables,omitempty"`
	Mapping   Mapping    `json:"mapping"` // every column as it was read, to be corrected and used again
	Problems  []Problem  `json:"problems"`
	Rejects   []Reject   `json:"rejects,omitempty"`
}

// Prepared is an import that has been read and compared with the store, and not yet begun.
type Prepared struct {
	Report  Report
	Reading Reading
	Plan    Plan
	Shapes  map[string]bool // of the rows that could be headings (intake.Book.Shapes)
	options Options
}

// Prepare reads a file and finds what it would change. It writes nothing.
func Prepare(s *store.Store, name string, r io.Reader, o Options) (*Prepared, error) {
	book, err := intake.Open(name, r, o.Caps)
	if err != nil {
		return nil, asRefusal(err)
	}
	p := &Prepared{Shapes: book.Shapes(), options: o}
	scope := importScope(s, o.By)
	err = s.View(scope, func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		if p.Reading, err = Read(book, o.Mapping, sites); err != nil {
			return err
		}
		p.Plan, err = Drafts(v, o.By, p.Reading.Rows, Ask{Now: s.Now(), Org: s.Org(), Zone: o.Mapping.Zone, Standard: o.Mapping.Standard, NoNewSites: !scope.All})
		return err
	})
	if err != nil {
		return nil, err
	}
	p.report()
	return p, nil
}

// asRefusal makes the reader's refusal one of the store's, which every door knows how to tell.
func asRefusal(err error) error {
	var refused *intake.Error
	if errors.As(err, &refused) {
		return &store.Error{Code: refused.Code, Field: refused.Field, Text: refused.Text}
	}
	return err
}

func (p *Prepared) report() {
	r, plan := p.Reading, p.Plan
	report := Report{Added: plan.Added, Changed: plan.Changed, Unchanged: plan.Unchanged, NewSites: plan.NewSites, Ambiguous: r.Ambiguous, Kinds: r.Kinds, Told: r.Told, Tables: r.Tables,
		Problems: append(r.Problems, plan.Problems...), Mapping: p.options.Mapping, DryRun: p.options.DryRun}
	report.Skipped = len(skipped(report.Problems))
	report.Mapping.Columns = map[string]string{}
	for _, t := range r.Tables {
		report.Rows += t.Rows
		report.LeftOut += len(t.LeftOut)
		for _, c := range t.Columns {
			if t.Skipped == "" && (c.Name != "" || c.Known) {
				report.Mapping.Columns[c.Key] = c.Name
			}
		}
	}
	for _, s := range plan.NewSites {
		if s.Zone != "" {
			report.Sites++
		}
	}
	p.Report = report
}

// Shapes are those of the headings that were read, by which what was said of them is offered to the next file.
func (r Report) Shapes() (shapes []string) {
	for _, t := range r.Tables {
		headings := make([]string, len(t.Columns))
		for i, c := range t.Columns {
			headings[i] = c.Heading
		}
		if shape, ok := intake.Shape(headings); ok && t.Skipped == "" && !slices.Contains(shapes, shape) {
			shapes = append(shapes, shape)
		}
	}
	return shapes
}

// Append appends what is new or changed. An import that stopped half way is simply run again. progress may be nil.
func (p *Prepared) Append(ctx context.Context, s *store.Store, progress func(done, total int)) (Report, error) {
	if progress == nil {
		progress = func(int, int) {}
	}
	var err error
	if p.Report.Records, err = appendRows(ctx, s, p.Plan.Rows, progress); err != nil {
		return p.Report, err
	}
	if p.options.NewTags {
		if p.Report.Tags, err = mintTags(ctx, s, p.options.By, p.Plan.NeedTag); err != nil {
			return p.Report, err
		}
	}
	return p.Report, nil
}

// Import reads a register from CSV or XLSX and appends what is new or changed. The same file a second time adds nothing.
// Rows with a problem are left out and named in the report.
func Import(ctx context.Context, s *store.Store, name string, r io.Reader, o Options, progress func(done, total int)) (Report, error) {
	p, err := Prepare(s, name, r, o)
	if err != nil {
		return Report{}, err
	}
	if err := p.Reading.Refusal(); err != nil {
		return p.Report, err
	}
	if o.Rejects {
		p.Report.Rejects = p.Rejects()
	}
	if o.DryRun {
		return p.Report, nil
	}
	return p.Append(ctx, s, progress)
}

// importBatch is the most drafts of one append: the book commits them together.
const importBatch = 500

// importScope is what the person may see; the owner of the folder sees all.
func importScope(s *store.Store, by string) store.Scope {
	if p, err := s.Person(by); err == nil {
		return p.Scope()
	}
	return store.Scope{Person: by, Role: "owner", All: true}
}

// skipped are the rows that were left out for a problem.
func skipped(problems []Problem) map[RowAt]bool {
	rows := map[RowAt]bool{}
	for _, p := range problems {
		if p.Skipped {
			rows[RowAt{p.Sheet, p.Row}] = true
		}
	}
	return rows
}

// appendRows appends whole rows, as many to a batch as fit.
func appendRows(ctx context.Context, s *store.Store, rows []RowDrafts, progress func(done, total int)) (records int, err error) {
	var batch []store.Draft
	flush := func(done int) error {
		if len(batch) == 0 {
			return nil
		}
		if _, err := s.Append(ctx, batch...); err != nil {
			return fmt.Errorf("import register, up to row %d of %d: %w", done, len(rows), err)
		}
		records += len(batch)
		batch = batch[:0]
		progress(done, len(rows))
		return nil
	}
	for i, row := range rows {
		if len(batch)+len(row.Drafts) > importBatch {
			if err := flush(i); err != nil {
				return records, err
			}
		}
		batch = append(batch, row.Drafts...)
	}
	return records, flush(len(rows))
}

func mintTags(ctx context.Context, s *store.Store, by string, want []TagWant) (given int, err error) {
	for len(want) > 0 {
		part := want[:min(len(want), importBatch)]
		tags, err := s.MintTags(ctx, by, len(part))
		if err != nil {
			return given, fmt.Errorf("import register: new tags: %w", err)
		}
		drafts := make([]store.Draft, len(part))
		for i, w := range part {
			drafts[i] = store.Draft{Kind: "tag.bound", Log: w.Log, Subject: w.Subject, By: by, Body: map[string]any{"tag": tags[i]}}
		}
		if _, err := s.Append(ctx, drafts...); err != nil {
			return given, fmt.Errorf("import register: bind new tags: %w", err)
		}
		given += len(part)
		want = want[len(part):]
	}
	return given, nil
}
