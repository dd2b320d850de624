package export

import (
	"context"
	"fmt"
	"io"
	"strings"
	"time"

	"tripwell/store"
)

// RegisterAsk says how a register is read into drafts.
type RegisterAsk struct {
	Now time.Time
	Org string // id of the organisation
}

// ImportOption is something an import does besides.
type ImportOption func(*importing)

type importing struct {
	mintTags bool
	site     string
}

// MintTags gives every place and portable item of the file that has no tag a new one.
var MintTags ImportOption = func(i *importing) { i.mintTags = true }

// SiteOfRows is the code of the site that rows which name none belong to.
func SiteOfRows(code string) ImportOption {
	return func(i *importing) { i.site = strings.ToUpper(strings.TrimSpace(code)) }
}

// ImportReport counts what an import did.
type ImportReport struct {
	Rows      int          `json:"rows"` // rows of the file, blank ones left out
	Added     int          `json:"added"`
	Changed   int          `json:"changed"`
	Unchanged int          `json:"unchanged"`
	Skipped   int          `json:"skipped"` // rows left out for a problem
	Sites     int          `json:"sites"`   // sites registered
	Tags      int          `json:"tags"`    // tags given
	Records   int          `json:"records"`
	Problems  []RowProblem `json:"problems"`
}

// importBatch is the most drafts of one append: the book commits them together.
const importBatch = 500

// ImportRegister reads a register from CSV and appends what is new or changed, as the person by, who must be allowed
// the sites. The same file a second time adds nothing. Rows with a problem are left out and named in the report; an
// import that stopped half way is simply run again. progress may be nil.
func ImportRegister(ctx context.Context, s *store.Store, by string, r io.Reader, progress func(done, total int), also ...ImportOption) (ImportReport, error) {
	var how importing
	for _, o := range also {
		o(&how)
	}
	if how.site != "" && !isSiteCode(how.site) {
		return ImportReport{}, &store.Error{Code: "invalid", Field: "site", Text: "A site code has 2 to 12 letters, digits or hyphens, such as ELM-4."}
	}
	rows, problems, err := readRegister(r, how.site)
	if err != nil {
		return ImportReport{Problems: problems}, err
	}
	if progress == nil {
		progress = func(int, int) {}
	}
	var plan RegisterPlan
	err = s.View(importScope(s, by), func(v *store.View) (err error) {
		plan, err = RegisterDrafts(v, by, rows, RegisterAsk{Now: s.Now(), Org: s.Org()})
		return err
	})
	if err != nil {
		return ImportReport{Problems: problems}, err
	}
	report := ImportReport{Added: plan.Added, Changed: plan.Changed, Unchanged: plan.Unchanged, Sites: plan.SitesAdded, Problems: append(problems, plan.Problems...)}
	report.Rows = len(rows) + skippedRows(problems)
	report.Skipped = skippedRows(report.Problems)
	if report.Records, err = appendRows(ctx, s, plan.Rows, progress); err != nil {
		return report, err
	}
	if how.mintTags {
		if report.Tags, err = mintTags(ctx, s, by, plan.NeedTag); err != nil {
			return report, err
		}
	}
	return report, nil
}

// importScope is what the person may see; the owner of the folder sees all.
func importScope(s *store.Store, by string) store.Scope {
	if p, err := s.Person(by); err == nil {
		return p.Scope()
	}
	return store.Scope{Person: by, Role: "owner", All: true}
}

func skippedRows(problems []RowProblem) int {
	lines := map[int]bool{}
	for _, p := range problems {
		if p.Skipped {
			lines[p.Line] = true
		}
	}
	return len(lines)
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
