package store

import (
	"context"
	"slices"

	"tripwell/forms"
)

// PlanPreview is what a revision of a plan would change about the next dates there are.
type PlanPreview struct {
	Looked  int  // devices in use that were looked at
	Whole   bool // all were; else the time was up
	Devices int  // devices of which some date would change
	Earlier int  // dates that would come earlier
	Later   int  // dates that would come later
	Asked   int  // dates that are not asked for now
	Dropped int  // dates that would no longer be asked for
	Overdue int  // dates overdue today, of those that would change
	Becomes int  // of those that would change, overdue today afterwards
	First   []PlanMove
}

// PlanMove is one date before and after. Where one of the two is not asked for its Due is NoDay.
type PlanMove struct {
	Device, Site, Task string
	Was, Becomes       Due
}

// planMovesFirst is how many dates a preview names.
const planMovesFirst = 24

// PreviewPlan sets the dates of all devices twice, as things stand and as they would, and says where the two differ.
// Where ctx ends before all are looked at it gives what was found until then.
func (v *View) PreviewPlan(ctx context.Context, draft RuleDraft) (PlanPreview, error) {
	p := PlanPreview{Whole: true, First: []PlanMove{}}
	_, id, revision, _, err := draft.read()
	if err != nil {
		return p, err
	}
	sites, err := v.sitesAsked(draft.Site)
	if err != nil {
		return p, err
	}
	ord := v.orgLog()
	if draft.Site != "" {
		ord = sites[0].ord
	}
	raw, err := encodeBody(draft.JSON)
	if err != nil {
		return p, err
	}
	o := overlay{bucket: v.tx.Bucket(bktRule), changed: map[string][]byte{}}
	o.put(ruleKey(rulePlan, ord, id, revision), append(make([]byte, 24), raw...))
	then := newRules(o.list)
	for _, sv := range sites {
		if err := v.previewDates(ctx, sv, then, &p); err != nil || !p.Whole {
			return p, err
		}
	}
	return p, nil
}

func (v *View) previewDates(ctx context.Context, sv *siteView, then *rules, p *PlanPreview) error {
	whole := v.rules().wholeSite(sv.ord)
	return v.scan(bktWork, put32(nil, sv.ord), func(key, row []byte) error {
		if !p.Whole {
			return nil
		}
		if p.Looked%256 == 0 && ctx.Err() != nil {
			p.Whole = false
			return nil
		}
		w, err := unpackWork(row, false)
		if err != nil || !w.live {
			return err
		}
		p.Looked++
		becomes := then.schedule(sv.ord, v.orgLog(), w.kind).Dates(w.caseOf(whole), w.met)
		return v.compareDates(sv, read32(key[4:]), w.dates, becomes, p)
	})
}

func (v *View) compareDates(sv *siteView, n uint32, was, becomes []forms.DueDate, p *PlanPreview) error {
	moved := false
	for _, task := range forms.Tasks() {
		a, b := dateOf(was, task), dateOf(becomes, task)
		if a.Due == b.Due && a.Until == b.Until {
			continue
		}
		moved = true
		p.count(a, b, sv.today)
		if len(p.First) < planMovesFirst {
			id, err := v.deviceIDOf(sv, n)
			if err != nil {
				return err
			}
			p.First = append(p.First, PlanMove{Device: id, Site: sv.ID, Task: task, Was: stateOn(a, sv.today), Becomes: stateOn(b, sv.today)})
		}
	}
	if moved {
		p.Devices++
	}
	return nil
}

func (p *PlanPreview) count(was, becomes forms.DueDate, today forms.Day) {
	switch {
	case was.Due == forms.NoDay:
		p.Asked++
	case becomes.Due == forms.NoDay:
		p.Dropped++
	case becomes.Due < was.Due:
		p.Earlier++
	case becomes.Due > was.Due:
		p.Later++
	}
	if was.Due != forms.NoDay && was.State(today) == forms.Overdue {
		p.Overdue++
	}
	if becomes.Due != forms.NoDay && becomes.State(today) == forms.Overdue {
		p.Becomes++
	}
}

func dateOf(list []forms.DueDate, task string) forms.DueDate {
	if i := slices.IndexFunc(list, func(d forms.DueDate) bool { return d.Task == task }); i >= 0 {
		return list[i]
	}
	return forms.DueDate{Task: task, Last: forms.NoDay, Due: forms.NoDay, Until: forms.NoDay}
}

func (v *View) deviceIDOf(sv *siteView, n uint32) (string, error) {
	t, err := unpackThing(v.tx.Bucket(bktRegister).Get(registerKey(sv.ord, ofDevice, n)))
	return t.id.String(), err
}
