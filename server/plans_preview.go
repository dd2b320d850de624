package server

import (
	"context"
	"net/http"
	"net/url"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// planPreviewed shows what a revision of a plan does to the dates there are, and asks to accept it.
type planPreviewed struct {
	Frame
	Crumbs                []link
	Heading, Lead, Partly string
	Says                  []change
	Counts                []string
	Rows                  []dateMoved
	More                  string
	Hidden                []hidden
	Back                  string
}

// dateMoved is one date before and after.
type dateMoved struct {
	Href, Spot, Where, Task, Was, Becomes string
	WasLate, Late                         bool
}

func (s *Server) planPreviewPage(c echo.Context, f *typedForm, draft store.RuleDraft, plan *forms.Plan) error {
	k, name := s.ink(), s.planName(plan)
	view := planPreviewed{Frame: s.frame(c, name, "set-up"), Heading: k.say("config.preview_head", "name", name), Back: planHref(plan.ID, draft.Site),
		Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: "/plans", Text: k.say("plans.title")}}}
	err := s.store.View(scope(c), func(v *store.View) error {
		if f.Get("new") == "yes" {
			held, err := v.PlanRevisions(draft.Site, plan.ID)
			if err != nil {
				return err
			}
			if len(held) > 0 {
				return refuse(codeConflict, "id", k.say("plans.taken"))
			}
		}
		next, same, err := v.Next(draft, plan.InForce, plan.InForce)
		if err != nil {
			return err
		}
		if same {
			return refuse(codeInvalid, "", k.say("config.nothing_changed"))
		}
		ctx, stop := context.WithTimeout(c.Request().Context(), previewTime)
		defer stop()
		p, err := v.PreviewPlan(ctx, next)
		if err != nil {
			return err
		}
		if view.Says, err = s.planChanges(v, draft.Site, plan); err != nil {
			return err
		}
		view.Hidden = []hidden{{recordField, f.Get(recordField)}, {"done", planHref(plan.ID, draft.Site)}, {"kind", next.Kind}, {"site", next.Site}, {"json", string(next.JSON)}, {"reason", next.Reason}}
		return s.planPreviewShown(v, p, plan, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "plan_preview.html", view)
}

// planChanges lists what a plan says otherwise than the revision before it.
func (s *Server) planChanges(v *store.View, site string, plan *forms.Plan) ([]change, error) {
	held, err := v.PlanRevisions(site, plan.ID)
	if err == nil && len(held) == 0 && site != "" {
		held, err = v.PlanRevisions("", plan.ID)
	}
	if err != nil || len(held) == 0 {
		return nil, err
	}
	was := map[string]string{}
	before := newestRevisions(held)[0].Plan
	for _, f := range append(s.planFacts(before), planFact{s.words.Say("office.col.every"), s.every(before)}) {
		was[f.Name] = f.Value
	}
	var out []change
	for _, f := range append([]planFact{{s.words.Say("office.col.every"), s.every(plan)}}, s.planFacts(plan)...) {
		if was[f.Name] != f.Value {
			out = append(out, change{Name: f.Name, Was: orDash(was[f.Name]), Became: orDash(f.Value)})
		}
		delete(was, f.Name)
	}
	for _, name := range sortedKeys(was) {
		out = append(out, change{Name: name, Was: was[name], Became: dash})
	}
	return out, nil
}

func orDash(text string) string {
	if text == "" {
		return dash
	}
	return text
}

func (s *Server) planPreviewShown(v *store.View, p store.PlanPreview, plan *forms.Plan, view *planPreviewed) error {
	k := s.ink()
	view.Lead = k.say("plans.preview_lead", "day", k.day(plan.InForce), "n", p.Devices, "count", count(p.Devices), "looked", count(p.Looked))
	if !p.Whole {
		view.Partly = k.say("plans.preview_partly", "looked", count(p.Looked))
	}
	for _, one := range []struct {
		key string
		n   int
	}{{"earlier", p.Earlier}, {"later", p.Later}, {"asked", p.Asked}, {"dropped", p.Dropped}} {
		if one.n > 0 {
			view.Counts = append(view.Counts, k.say("plans.moved."+one.key, "n", one.n, "count", count(one.n)))
		}
	}
	if p.Overdue+p.Becomes > 0 {
		view.Counts = append(view.Counts, k.say("plans.moved.overdue", "was", count(p.Overdue), "becomes", count(p.Becomes)))
	}
	for _, m := range p.First {
		d, err := v.Device(m.Device, forms.DayOf(s.store.Now()))
		if err != nil {
			return err
		}
		view.Rows = append(view.Rows, dateMoved{Href: "/devices/" + url.PathEscape(m.Device), Spot: s.spot(d.DeviceRow), Where: joined(d.SiteName, d.Place.Context()), Task: k.named("task", m.Task),
			Was: s.dateOrNone(m.Was), Becomes: s.dateOrNone(m.Becomes), WasLate: late(m.Was), Late: late(m.Becomes)})
	}
	if more := p.Earlier + p.Later + p.Asked + p.Dropped - len(p.First); more > 0 {
		view.More = k.say("plans.moved_more", "n", more)
	}
	return nil
}

func late(d store.Due) bool { return d.Due != forms.NoDay && d.State == forms.Overdue }

func (s *Server) dateOrNone(d store.Due) string {
	if d.Due == forms.NoDay {
		return s.words.Say("plans.not_asked")
	}
	return s.ink().day(d.Due)
}
