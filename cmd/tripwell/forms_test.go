package main

import (
	"encoding/json"
	"strings"
	"testing"

	"tripwell/forms"
	"tripwell/static"
)

func TestForms_ListsEveryFormAndSource(t *testing.T) {
	stdout, stderr, code := tripwell(t, "", "forms")
	if code != 0 {
		t.Fatalf("exit %d: %s", code, stderr)
	}
	for _, kind := range forms.Kinds() {
		if !strings.Contains(stdout, kind) {
			t.Errorf("kind %s is not listed", kind)
		}
	}
	for _, f := range forms.Shipped().Forms {
		if !strings.Contains(stdout, "FORM "+f.ID) {
			t.Errorf("form %s is not listed", f.ID)
		}
	}
	for _, s := range forms.Shipped().LimitSets {
		for _, l := range s.Limits {
			if !strings.Contains(stdout, l.Source+" ("+l.Status+")") {
				t.Errorf("%s %s: source is not listed", s.ID, l.ID)
			}
		}
	}
}

func TestForms_JSONIsOneDocument(t *testing.T) {
	stdout, stderr, code := tripwell(t, "", "forms", "--json")
	if code != 0 {
		t.Fatalf("exit %d: %s", code, stderr)
	}
	var doc struct {
		Kinds     []struct{ Kind string }
		Tasks     []string
		Readings  []struct{ Reading string }
		Forms     []forms.Form
		LimitSets []forms.LimitSet `json:"limit_sets"`
		Plans     []forms.Plan
	}
	if err := json.Unmarshal([]byte(stdout), &doc); err != nil {
		t.Fatal(err)
	}
	shipped := forms.Shipped()
	if len(doc.Kinds) != len(forms.Kinds()) || len(doc.Tasks) != 3 || len(doc.Readings) != len(forms.Codes()) ||
		len(doc.Forms) != len(shipped.Forms) || len(doc.LimitSets) != len(shipped.LimitSets) || len(doc.Plans) != len(shipped.Plans) {
		t.Errorf("%d kinds, %d tasks, %d readings, %d forms, %d limit sets, %d plans", len(doc.Kinds), len(doc.Tasks),
			len(doc.Readings), len(doc.Forms), len(doc.LimitSets), len(doc.Plans))
	}
}

// Every word a form, a limit, a verdict or a plan needs stands in the catalogue.
func TestWords_EveryKeyOfTheFormsIsThere(t *testing.T) {
	words, err := static.ReadWords("en")
	if err != nil {
		t.Fatal(err)
	}
	need := func(where string, keys ...string) {
		t.Helper()
		for _, key := range keys {
			if !words.Has(key) {
				t.Errorf("%s needs the words %q", where, key)
			}
		}
	}
	for _, c := range forms.Codes() {
		need(c.Code, "reading."+c.Code+".ask", "reading."+c.Code+".name")
		for _, o := range c.Options {
			need(c.Code, "option."+c.Code+"."+o)
		}
		if c.Unit != "" {
			need(c.Code, "unit."+c.Unit)
		}
	}
	for _, r := range append(forms.MissingReasons(), "none", "of_device") {
		need("missing", "missing."+r)
	}
	for _, r := range append(forms.Results(), forms.Watch, forms.Missing, forms.NotJudged) {
		need("verdict", "verdict."+r)
	}
	for _, k := range forms.Kinds() {
		need("kind", "kind."+k)
	}
	for _, k := range forms.Tasks() {
		need("task", "task."+k)
	}
	for _, f := range forms.Shipped().Forms {
		if f.Quick != nil {
			need(f.ID, f.Quick.Text)
			for _, text := range f.Quick.Texts {
				need(f.ID, text)
			}
		}
		for _, n := range f.Needs {
			need(f.ID, "reading."+n+".name")
		}
		for _, s := range f.Steps {
			need(f.ID, "step."+s.Step)
			for _, c := range s.Cautions {
				need(f.ID, "caution."+c)
			}
			if len(s.Asks) > 0 {
				need(f.ID, s.Proves, s.ProvesNot)
			}
			if s.ClosedText != "" {
				need(f.ID, s.ClosedText)
			}
			for _, a := range s.Asks {
				if a.Text != "" {
					need(f.ID, a.Text)
				}
				for _, text := range a.Texts {
					need(f.ID, text)
				}
				for _, u := range a.Units {
					need(f.ID, "unit."+u)
				}
			}
		}
		if f.Series != nil {
			for _, c := range f.Series.Conditions {
				if face, ok := c.At["face"].(string); ok {
					need(f.ID, "option.face."+face, "reading.face.name")
				}
			}
		}
	}
	for _, s := range forms.Shipped().LimitSets {
		need(s.ID, "limit_set."+s.ID, "verdict.rule."+s.Rule)
		for _, l := range s.Limits {
			need(s.ID+" "+l.ID, l.Text)
			for _, text := range l.Texts {
				need(s.ID+" "+l.ID, text)
			}
			for _, v := range l.Void {
				need(s.ID+" "+l.ID, v.Text)
			}
		}
	}
	for _, l := range forms.LampTable() {
		need("lamps", "option.wiring."+l.Wiring)
		for _, condition := range l.AlsoReads {
			need("lamps", "option.lamps."+condition)
		}
	}
	for _, p := range forms.Shipped().Plans {
		need(p.ID, "plan."+p.ID)
	}
	need("judge", "limit.stopped_before", "limit.not_proven", "limit.trips_low", "limit.trips_low_with_loads", "limit.ramp_over_reads",
		"limit.must_not_trip", "limit.no_test_current", "limit.below_curve", "limit.above_curve", "limit.no_rating", "limit.no_multiple",
		"limit.multiple_outside", "limit.bond_not_judged", "limit.gauge_too_light", "limit.gauge_too_heavy",
		"limit.guard_inside", "limit.guard_outside", "limit.accuracy_unknown", "limit.current_in_doubt", "limit.no_length")
}
