package server

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// previewTime is how long a page may take to look at what a revision would change; what it found until then is shown.
const previewTime = 8 * time.Second

// revisionPage shows what a revision changes, in itself and in the entries there are, and asks to accept it.
type revisionPage struct {
	Frame
	Crumbs                       []link
	Heading, Lead, Partly, Quiet string
	Past                         bool // in force from a day that has passed: entries are judged again
	Limits                       []change
	Counts                       []resultCount
	Entries                      []entryPreviewed
	More                         string
	Hidden                       []hidden
	Back                         string
}

type resultCount struct {
	N            string
	Was, Becomes mark
}

// entryPreviewed is one entry that would get another result.
type entryPreviewed struct {
	Href, Day, Where, Task string
	Was, Becomes           mark
}

// revisionAsked is what a form page wants to be previewed.
type revisionAsked struct {
	heading, back, done string
	day                 forms.Day
	drafts              []store.RuleDraft
}

func (s *Server) revisionPage(c echo.Context, f *typedForm, ask revisionAsked) error {
	k := s.ink()
	view := revisionPage{Frame: s.frame(c, ask.heading, "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: ask.done, Text: ask.heading}},
		Heading: k.say("config.preview_head", "name", ask.heading), Back: ask.back, Past: ask.day < forms.DayOf(s.store.Now())}
	err := s.store.View(scope(c), func(v *store.View) error {
		next := make([]store.RuleDraft, 0, len(ask.drafts))
		for _, d := range ask.drafts {
			n, same, err := v.Next(d, ask.day, ask.day)
			if err != nil {
				return err
			}
			if same {
				continue
			}
			if err := s.changedLimits(v, n, &view); err != nil {
				return err
			}
			next = append(next, n)
		}
		if len(next) == 0 {
			return refuse(codeInvalid, "", k.say("config.nothing_changed"))
		}
		ctx, stop := context.WithTimeout(c.Request().Context(), previewTime)
		defer stop()
		p, err := v.Preview(ctx, next...)
		if err != nil {
			return err
		}
		view.Hidden = []hidden{{recordField, f.Get(recordField)}, {"done", ask.done}}
		for _, n := range next {
			view.Hidden = append(view.Hidden, hidden{"kind", n.Kind}, hidden{"site", n.Site}, hidden{"json", string(n.JSON)}, hidden{"reason", n.Reason})
		}
		return s.previewShown(v, p, ask.day, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "revision.html", view)
}

// changedLimits lists what a revision of a limit set says otherwise than the one before it.
func (s *Server) changedLimits(v *store.View, d store.RuleDraft, view *revisionPage) error {
	if d.Kind != "limits.set" {
		return nil
	}
	set := new(forms.LimitSet)
	if err := json.Unmarshal(d.JSON, set); err != nil {
		return fmt.Errorf("revision: %w", err)
	}
	held, err := v.LimitRevisions(d.Site, set.ID)
	if err == nil && len(held) == 0 {
		held, err = v.LimitRevisions("", set.ID)
	}
	if err != nil {
		return err
	}
	asked, err := v.Forms()
	if err != nil {
		return err
	}
	own, was := forms.OwnNamesUnder(set, asked), map[string]limitRow{}
	if len(held) > 0 {
		old := newestRevisions(held)[0].LimitSet
		for i := range old.Limits {
			was[old.Limits[i].ID] = s.limitRow(&old.Limits[i], own)
		}
	}
	for i := range set.Limits {
		is, before := s.limitRow(&set.Limits[i], own), was[set.Limits[i].ID]
		delete(was, set.Limits[i].ID)
		if len(held) > 0 && (before.Limit != is.Limit || before.Level != is.Level) {
			text := dash
			if before.Reading != "" {
				text = before.Limit + ", " + before.Level
			}
			view.Limits = append(view.Limits, change{Name: is.Reading, Was: text, Became: is.Limit + ", " + is.Level})
		}
	}
	for _, id := range sortedKeys(was) {
		view.Limits = append(view.Limits, change{Name: was[id].Reading, Was: was[id].Limit + ", " + was[id].Level, Became: dash})
	}
	return nil
}

func (s *Server) previewShown(v *store.View, p store.Preview, day forms.Day, view *revisionPage) error {
	k := s.ink()
	view.Lead = k.say("config.preview_lead", "day", k.day(day), "n", p.Changed, "count", count(p.Changed), "looked", count(p.Looked))
	if !p.Whole {
		view.Partly = k.say("config.preview_partly", "looked", count(p.Looked))
	}
	if p.Changed == 0 {
		view.Quiet = k.say("config.preview_none")
	}
	for _, change := range p.Changes {
		view.Counts = append(view.Counts, resultCount{count(change.N), k.verdict(change.Was), k.verdict(change.Becomes)})
	}
	for _, e := range p.First {
		row := entryPreviewed{Href: "/entries/" + e.Entry, Day: k.day(e.Day), Task: k.named("task", e.Task), Was: k.verdict(e.Was), Becomes: k.verdict(e.Becomes)}
		if d, err := v.Device(e.Device, e.Day); err == nil {
			row.Where = joined(d.SiteName, s.spot(d.DeviceRow))
		} else if !isRefusal(err) {
			return err
		}
		view.Entries = append(view.Entries, row)
	}
	if more := p.Changed - len(p.First); more > 0 {
		view.More = k.say("config.preview_more", "n", more)
	}
	return nil
}

// revisionAccept makes the revisions that were previewed.
func (s *Server) revisionAccept(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	first, kinds := f.id(recordField), f.Values["kind"]
	if !f.ok() || len(kinds) == 0 || len(f.Values["json"]) != len(kinds) || len(f.Values["site"]) != len(kinds) || len(f.Values["reason"]) != len(kinds) {
		return refuse(codeInvalid, "", s.words.Say("office.form.broken"))
	}
	var drafts []store.Draft
	for i, kind := range kinds {
		id := first
		if i > 0 {
			id = record.NamedID(first, kind, fmt.Sprint(i))
		}
		d, err := (store.RuleDraft{Kind: kind, Site: f.Values["site"][i], JSON: json.RawMessage(f.Values["json"][i]), Reason: f.Values["reason"][i]}).Draft(id, person(c).ID)
		if err != nil {
			return err
		}
		drafts = append(drafts, d)
	}
	if err := s.append(c, drafts...); err != nil {
		return err
	}
	done := f.Get("done")
	if len(done) < 2 || done[0] != '/' || done[1] == '/' {
		done = "/set-up"
	}
	return toPage(c, done)
}
