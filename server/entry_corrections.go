package server

import (
	"fmt"
	"maps"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// correctedFrom lays the first version beside what stands: the values a correction struck out, each with what it came to,
// and the result the entry first had. A failing value stays to be seen.
func (s *Server) correctedFrom(v *store.View, e store.Entry, view *entryPage) error {
	if len(e.Corrections) == 0 || e.Sealed != nil {
		return nil
	}
	k := s.ink()
	first, err := v.JudgedAs(e, e.Original)
	if err != nil {
		return err
	}
	if first.Result != e.Verdict.Result {
		m := k.verdict(first.Result)
		view.First = &m
	}
	changed := map[string]change{}
	for _, c := range s.changes(e.OwnNames, e.Original, e.Body) {
		changed[c.Name] = c
	}
	for i := range view.Readings {
		r := &view.Readings[i]
		c, ok := changed[r.Name]
		if !ok {
			continue
		}
		delete(changed, r.Name)
		r.Was, r.WasVerdict = c.Was, s.verdictOf(e.OwnNames, first, r.Name)
	}
	for _, c := range s.changes(e.OwnNames, e.Original, e.Body) { // what the correction took out altogether
		if _, left := changed[c.Name]; left {
			view.Readings = append(view.Readings, readingShown{Name: c.Name, Value: c.Became, Was: c.Was, WasVerdict: s.verdictOf(e.OwnNames, first, c.Name)})
		}
	}
	return nil
}

// verdictOf gives the worst finding of a reading by its name, nil where nothing judged it.
func (s *Server) verdictOf(own map[string]string, v forms.Verdict, name string) *mark {
	k := s.ink()
	worst := ""
	for _, f := range v.Findings {
		if s.readingName(own, f.Reading, f.At) == name && (worst == "" || severity(f.Verdict) > severity(worst)) {
			worst = f.Verdict
		}
	}
	if worst == "" {
		return nil
	}
	m := k.verdict(worst)
	return &m
}

// readingName names a reading, with the conditions it was taken under.
func (s *Server) readingName(own map[string]string, code string, at map[string]any) string {
	name := s.ink().calling(own).reading(code)
	if len(at) > 0 {
		name += " " + s.conditions(at)
	}
	return name
}

func (s *Server) corrections(v *store.View, e store.Entry, zone *time.Location) ([]correctionShown, error) {
	k := s.ink()
	var out []correctionShown
	was := e.Original
	show := func(c store.Correction, head, state string) error {
		one := correctionShown{
			Head:   joined(k.say("office.entry."+head, "by", s.personName(v, c.By), "day", k.at(c.At, zone)), k.say("office.entry."+state)),
			Reason: c.Reason, Record: "/records/" + c.Record, Changes: s.changes(e.OwnNames, was, c.Body),
		}
		if c.Sealed != nil {
			one.Reason, one.Changes = s.sealedText(v, c.Sealed, zone), nil
		} else if !c.Withdraw && e.Sealed == nil {
			verdict, err := v.JudgedAs(e, c.Body)
			if err != nil {
				return err
			}
			m := k.verdict(verdict.Result)
			one.Verdict = &m
		}
		out = append(out, one)
		return nil
	}
	for _, c := range e.Corrections {
		state := "not_in_force"
		if c.InForce {
			state = "in_force"
		}
		if err := show(c, "correction_head", state); err != nil {
			return nil, err
		}
	}
	for _, c := range e.NotPermitted {
		head := "correction_head"
		if c.Withdraw {
			c.Body, head = was, "withdrawal_head" // it changes no reading
		}
		if err := show(c, head, "not_permitted"); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// changes lists the readings that differ between the first version and a correction, those of series with their
// conditions.
func (s *Server) changes(own map[string]string, was, became forms.Entry) []change {
	out := s.changed(own, was.Readings, became.Readings, nil)
	before, after := seriesAt(was.Series), seriesAt(became.Series)
	seen := map[string]bool{}
	for _, list := range [][]forms.SeriesReading{was.Series, became.Series} {
		for _, one := range list {
			if key := fmt.Sprint(one.At); !seen[key] {
				seen[key] = true
				out = append(out, s.changed(own, before[key], after[key], one.At)...)
			}
		}
	}
	return out
}

func seriesAt(list []forms.SeriesReading) map[string]map[string]forms.Reading {
	out := map[string]map[string]forms.Reading{}
	for _, one := range list {
		out[fmt.Sprint(one.At)] = one.Readings
	}
	return out
}

func (s *Server) changed(own map[string]string, was, became map[string]forms.Reading, at map[string]any) []change {
	k := s.ink()
	codes := maps.Clone(was)
	if codes == nil {
		codes = map[string]forms.Reading{}
	}
	maps.Copy(codes, became)
	var out []change
	for _, code := range readingOrder(codes) {
		a, b := dash, dash
		if r, ok := was[code]; ok {
			a = k.value(code, r)
		}
		if r, ok := became[code]; ok {
			b = k.value(code, r)
		}
		if a != b {
			out = append(out, change{s.readingName(own, code, at), a, b})
		}
	}
	return out
}

// defectNotices says which defects an entry began or closed, and where a correction or a withdrawal took one away.
func (s *Server) defectNotices(v *store.View, e store.Entry, view *entryPage) error {
	k := s.ink()
	list, _, err := v.DeviceDefects(e.Device, e.Day)
	if err != nil {
		return err
	}
	for i := range list {
		d := &list[i]
		if d.First == e.ID {
			view.Notices = append(view.Notices, notice{"fail", joined(k.say("office.defect.entry_began"), s.causeName(d)), "/defects/" + d.ID})
		}
		if d.Closed != nil && d.Closed.Record == e.ID {
			view.Notices = append(view.Notices, notice{"pass", joined(k.say("office.defect.entry_closed"), s.causeName(d)), "/defects/" + d.ID})
		}
	}
	if len(e.Corrections) == 0 && e.Withdrawn == nil || e.Withdrawn == nil && e.Verdict.Result == forms.Fail {
		return nil
	}
	first, err := v.JudgedAs(e, e.Original)
	if err == nil && first.Result == forms.Fail {
		key := "office.defect.entry_gone"
		if e.Withdrawn != nil {
			key = "office.defect.entry_withdrawn"
		}
		view.Notices = append(view.Notices, notice{Shape: "watch", Text: k.say(key)})
	}
	return err
}
