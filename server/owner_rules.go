package server

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// rulesLimit bounds a file of forms or limit sets. One set or form is a record, at most 64 KiB.
const rulesLimit = 8 << 20

// ruleKinds are the two kinds of rules that come and go as files.
var ruleKinds = map[string]string{"limits": "limits.set", "forms": "forms.set"}

// ownRules sends the newest revision of limit sets or forms, laid out as files: one document where one is named, else a
// list. Query: id, site (id or code: the site's own limit sets).
func (s *Server) ownRules(c echo.Context) error {
	kind, id, site := ruleKinds[c.Param("rules")], c.QueryParam("id"), c.QueryParam("site")
	if kind == "" {
		return refuse(codeNotFound, "", "There are limits and forms.")
	}
	var newest []store.Revision
	err := s.store.View(ownerScope, func(v *store.View) error {
		all, err := revisionsOf(v, kind, site, id)
		if err != nil {
			return err
		}
		newest = newestRevisions(all)
		return nil
	})
	if err != nil {
		return err
	}
	if id != "" && len(newest) == 0 {
		return refuse(codeNotFound, "id", fmt.Sprintf("There is no %q here. The command forms lists what there is.", id))
	}
	body, err := layoutRules(newest, id != "")
	if err != nil {
		return err
	}
	return sendBytes(c, http.StatusOK, "application/json", body)
}

func revisionsOf(v *store.View, kind, site, id string) ([]store.Revision, error) {
	if kind == "forms.set" {
		return v.FormRevisions(id)
	}
	return v.LimitRevisions(site, id)
}

// newestRevisions keeps the largest revision of each, by id.
func newestRevisions(all []store.Revision) []store.Revision {
	var out []store.Revision
	for _, r := range all {
		switch last := len(out) - 1; {
		case last < 0 || out[last].ID != r.ID:
			out = append(out, r)
		case out[last].Revision < r.Revision:
			out[last] = r
		}
	}
	return out
}

func layoutRules(list []store.Revision, one bool) ([]byte, error) {
	var docs []string
	for _, r := range list {
		laid, err := forms.Layout(r.JSON)
		if err != nil {
			return nil, fmt.Errorf("lay out %s: %w", r.ID, err)
		}
		docs = append(docs, strings.TrimRight(string(laid), "\n"))
	}
	if one {
		return []byte(docs[0] + "\n"), nil
	}
	return []byte("[\n" + strings.Join(docs, ",\n") + "\n]\n"), nil
}

// RuleReport says what an import of forms or limit sets did, or would do.
type RuleReport struct {
	Rules   []RuleTaken   `json:"rules"`
	Preview store.Preview `json:"preview"` // of all of them together
}

// RuleTaken is one set or form of a file. Same: the newest revision says this already, nothing was made.
type RuleTaken struct {
	ID       string    `json:"id"`
	Revision int       `json:"revision"`
	InForce  forms.Day `json:"in_force"`
	Same     bool      `json:"same"`
}

// ownRulesImport takes limit sets or forms from a file: one document or a list. Query: in_force (day), reason, by, site,
// dry_run=yes. It answers as work does; its report is RuleReport.
func (s *Server) ownRulesImport(c echo.Context) error {
	kind := ruleKinds[c.Param("rules")]
	if kind == "" {
		return refuse(codeNotFound, "", "There are limits and forms.")
	}
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	inForce, err := dayParam(c, "in_force")
	if err != nil {
		return err
	}
	docs, err := ruleDocuments(c)
	if err != nil {
		return err
	}
	dry := c.QueryParam("dry_run") == "yes"
	return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
		var report RuleReport
		var drafts []store.Draft
		err := s.store.View(ownerScope, func(v *store.View) error {
			next, err := s.nextRules(v, kind, c.QueryParam("site"), c.QueryParam("reason"), docs, inForce, &report)
			if err != nil {
				return err
			}
			if report.Preview, err = v.Preview(ctx, next...); err != nil {
				return err
			}
			for _, d := range next {
				draft, err := d.Draft("", by)
				if err != nil {
					return err
				}
				drafts = append(drafts, draft)
			}
			return nil
		})
		if err != nil || dry || len(drafts) == 0 {
			return report, err
		}
		_, err = s.store.Append(ctx, drafts...)
		return report, err
	})
}

// ruleDocuments splits a file into its documents.
func ruleDocuments(c echo.Context) ([]json.RawMessage, error) {
	raw, err := readBody(c.Request())
	if err != nil {
		return nil, err
	}
	var docs []json.RawMessage
	if text := strings.TrimSpace(string(raw)); strings.HasPrefix(text, "[") {
		if err := json.Unmarshal(raw, &docs); err != nil {
			return nil, refuse(codeInvalid, "file", "The file is not well-formed JSON: "+err.Error()+". Mend it there.")
		}
	} else {
		docs = []json.RawMessage{raw}
	}
	if len(docs) == 0 {
		return nil, refuse(codeInvalid, "file", "The file holds nothing. Export what is there and start from that.")
	}
	return docs, nil
}

// nextRules makes the following revision of every document that says something new.
func (s *Server) nextRules(v *store.View, kind, site, reason string, docs []json.RawMessage, inForce forms.Day, report *RuleReport) ([]store.RuleDraft, error) {
	today := forms.DayOf(s.store.Now())
	if site != "" {
		at, err := v.Site(site)
		if err != nil {
			return nil, err
		}
		site, today = at.ID, s.today(at)
	}
	var out []store.RuleDraft
	for i, doc := range docs {
		next, same, err := v.Next(store.RuleDraft{Kind: kind, Site: site, JSON: doc, Reason: reason}, inForce, today)
		if err != nil {
			return nil, inDocument(err, i, len(docs))
		}
		var head struct {
			Set      string    `json:"limit_set"`
			Form     string    `json:"form"`
			Revision int       `json:"revision"`
			InForce  forms.Day `json:"in_force"`
		}
		if err := json.Unmarshal(next.JSON, &head); err != nil {
			return nil, fmt.Errorf("document %d: %w", i+1, err)
		}
		taken := RuleTaken{ID: head.Set, Revision: head.Revision, InForce: head.InForce, Same: same}
		if kind == "forms.set" {
			taken.ID = head.Form
		}
		if report.Rules = append(report.Rules, taken); !same {
			out = append(out, next)
		}
	}
	return out, nil
}

// inDocument says which document of several a refusal is about.
func inDocument(err error, i, of int) error {
	w, fault := wrongOf(err)
	if fault {
		return err
	}
	place := w.Field
	if of > 1 {
		place = fmt.Sprintf("%d.%s", i+1, place)
	}
	return refuse(w.Code, place, place+": "+w.Text)
}
