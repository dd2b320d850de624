package server

import (
	"tripwell/forms"
	"tripwell/store"
)

// checkShown is one check of a circuit, with its arithmetic in a sentence.
type checkShown struct {
	kind              string
	What, Href        string // what was held against it
	Mark              mark
	Text, Why, Source string
}

// circuitFacts are a circuit's nameplate as the checks read it.
func circuitFacts(p *store.Protection, c store.Circuit) forms.CircuitFacts {
	f := forms.CircuitFacts{Standard: c.Text("standard"), Conductor: c.Text("conductor"), BreakerA: c.Number("breaker_a"), VoltageV: c.Number("voltage_v")}
	for _, d := range alongCircuit(p, c.ID) {
		if forms.IsOutlet(d.Kind) {
			f.Outlets += max(1, d.Faces)
		}
	}
	return f
}

// circuitChecks holds a circuit's conductor against its breaker, each receptacle's rating against the circuit, and works out
// the drops that were read under load. Receptacles inside the table are told in one line.
func (s *Server) circuitChecks(p *store.Protection, c store.Circuit) []checkShown {
	k, facts := s.ink(), circuitFacts(p, c)
	out := []checkShown{s.checkShown(forms.CheckConductor(facts), c.Text("conductor"), "")}
	same := map[string]int{}
	for _, d := range alongCircuit(p, c.ID) {
		if !forms.IsOutlet(d.Kind) {
			continue
		}
		check := forms.CheckReceptacle(facts, d.RatingA, d.Faces)
		shown := s.checkShown(check, s.spot(d.DeviceRow), "/devices/"+d.ID)
		if check.Verdict == forms.Watch {
			out = append(out, shown)
		} else if at, ok := same[shown.Text]; ok {
			out[at].What += "; " + shown.What
			out[at].Href = ""
		} else {
			same[shown.Text] = len(out)
			out = append(out, shown)
		}
	}
	for _, d := range alongCircuit(p, c.ID) {
		for _, task := range sortedKeys(d.Last) {
			r := d.Measured[task]
			pct, read := r["voltage_drop_pct"]
			if !read {
				continue
			}
			shown := s.checkShown(forms.CheckDrop(facts, r["voltage_v"], pct, r["load_a"]), s.spot(d.DeviceRow), "/entries/"+d.Last[task].Entry)
			shown.Why = k.say("office.circuit.check.read_on", "day", k.day(d.Last[task].Day))
			out = append(out, shown)
		}
	}
	return out
}

func (s *Server) checkShown(c forms.CircuitCheck, what, href string) checkShown {
	k := s.ink()
	out := checkShown{kind: c.Check, What: what, Href: href, Source: c.Source, Mark: mark{"none", k.say("office.circuit.check.not_judged")}}
	switch c.Verdict {
	case forms.Pass:
		out.Mark = mark{"pass", k.say("office.circuit.check.inside")}
	case forms.Watch:
		out.Mark = mark{"watch", k.say("office.circuit.check.look")}
	}
	if out.What == "" {
		out.What = k.say("office.device.not_said")
	}
	pairs := []any{}
	for _, name := range sortedKeys(c.Figures) {
		pairs = append(pairs, name, limitFigure(c.Figures[name]))
	}
	key := "office.circuit.check." + c.Check + "." + c.Why
	if !k.words.Has(key) {
		key = "office.circuit.check.any." + c.Why
	}
	out.Text = k.say(key, pairs...)
	return out
}
