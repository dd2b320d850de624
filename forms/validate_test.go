package forms

import (
	"encoding/json"
	"strings"
	"testing"
)

func TestValidate_WhatIsShippedCanBeMeant(t *testing.T) {
	for _, s := range Shipped().LimitSets {
		for _, e := range CheckLimitSet(s) {
			t.Errorf("limit set %s: %s: %s", s.ID, e.Field, e.Text)
		}
	}
	for _, f := range Shipped().Forms {
		for _, e := range CheckForm(f) {
			t.Errorf("form %s: %s: %s", f.ID, e.Field, e.Text)
		}
	}
}

// edited is shipped data with one thing changed.
func edited(t *testing.T, shipped any, was, is string) []byte {
	t.Helper()
	raw, err := json.Marshal(shipped)
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(raw), was) {
		t.Fatalf("%q does not stand in %s", was, raw)
	}
	return []byte(strings.Replace(string(raw), was, is, 1))
}

func TestParseLimitSet_NonsenseIsRefusedWithItsPlace(t *testing.T) {
	set, _ := Shipped().LimitSet("us-class-a")
	rcd, _ := Shipped().LimitSet("iec-general")
	for _, c := range []struct {
		name  string
		of    *LimitSet
		was   string
		is    string
		place string
	}{
		{"least above most", set, `"min":4,"max":6`, `"min":6,"max":4`, "limits.trip-current.min"},
		{"unknown reading", set, `"reading":"restored"`, `"reading":"restarted"`, "limits.restored.reading"},
		{"unknown curve", set, `"curve":"ul943"`, `"curve":"ul944"`, "limits.trip-time.curve"},
		{"curve on another reading", set, `"reading":"trip_time_ms"`, `"reading":"ground_ohm"`, "limits.trip-time.curve"},
		{"unknown level", set, `"level":"must"`, `"level":"shall"`, "limits.condition.level"},
		{"no source", set, `"source":"ANSI/ESD S6.1, 6.2.1"`, `"source":" "`, "limits.ground-ohm.source"},
		{"no sentence", set, `"text":"limit.damaged"`, `"text":""`, "limits.condition.text"},
		{"answer that cannot be given", set, `"one_of":["sound"]`, `"one_of":["fine"]`, "limits.condition.one_of"},
		{"words for a figure", set, `"curve":"ul943"`, `"one_of":["fast"]`, "limits.trip-time.one_of"},
		{"figure for a word", set, `"one_of":["sound"]`, `"max":3`, "limits.condition"},
		{"another unit", set, `"max":1,"unit":"ohm"`, `"max":1,"unit":"ms"`, "limits.ground-ohm.unit"},
		{"below nothing", set, `"max":1,"unit":"ohm"`, `"max":-1,"unit":"ohm"`, "limits.ground-ohm.max"},
		{"nothing stated", set, `"curve":"ul943",`, ``, "limits.trip-time"},
		{"two things at once", set, `"curve":"ul943"`, `"curve":"ul943","max":25`, "limits.trip-time"},
		{"flag without a condition", rcd, `"flag":true,"level":"watch","source":"common practice, no source","status":"common practice","text":"limit.delayed_under_general","when":[{"field":"delayed","is":"yes"}]`, `"flag":true,"level":"watch","source":"a","status":"b","text":"c"`, "limits.not-delayed.when"},
		{"unknown field", set, `"field":"nominal_v"`, `"field":"nominal"`, "limits.supply-a-120.when.1"},
		{"unknown member", set, `"level":"must"`, `"levle":"must"`, "limits.0.levle"},
		{"unknown rule", set, `"rule":"simple"`, `"rule":"by ear"`, "rule"},
		{"unknown kind", set, `"kinds":["gfci-receptacle"`, `"kinds":["gfci-socket"`, "kinds"},
		{"unknown kind to stand for", set, `"rule":"simple"`, `"rule":"simple","stands_for":["gfci"]`, "stands_for"},
		{"doubled id", set, `"id":"restored"`, `"id":"condition"`, "limits.condition"},
		{"share of the rated current upside down", rcd, `{"min":0.5,"max":1}`, `{"min":1.5,"max":1}`, "limits.trip-current-ac.of_rated.min"},
		{"condition that never holds", rcd, `"above":10`, `"above":10,"below":10`, "limits.trip-current-pulsating.when.2"},
		{"two that exclude one another", set, `"id":"restored","reading":"restored","one_of":["yes"],"level":"watch"`, `"id":"restored","reading":"button_trips","one_of":["no"],"level":"must"`, "limits.restored"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, wrong := ParseLimitSet(edited(t, c.of, c.was, c.is))
			refusedAt(t, wrong, c.place)
		})
	}
}

func refusedAt(t *testing.T, wrong []*Error, place string) {
	t.Helper()
	for _, e := range wrong {
		if e.Field == place && e.Code == "invalid" && strings.HasSuffix(e.Text, ".") {
			return
		}
	}
	if len(wrong) == 0 {
		t.Errorf("was taken, want a refusal at %s", place)
	}
	for _, e := range wrong {
		t.Errorf("refused at %s (%s), want %s", e.Field, e.Text, place)
	}
}

func TestParseForm_NonsenseIsRefusedWithItsPlace(t *testing.T) {
	button, _ := Shipped().Form("gfci-receptacle/button")
	rcd, _ := Shipped().Form("rcd/instrument")
	for _, c := range []struct {
		name  string
		of    *Form
		was   string
		is    string
		place string
	}{
		{"unknown reading", button, `"reading":"indicator"`, `"reading":"lamp"`, "steps.found.lamp"},
		{"another type", button, `"reading":"restored","type":"yes-no"`, `"reading":"restored","type":"number"`, "steps.restored.restored.type"},
		{"required and expected", button, `"expected":true`, `"required":true,"expected":true`, "steps.look.condition.required"},
		{"ends at no answer", button, `"ends":["burnt"`, `"ends":["charred"`, "steps.look.condition.ends"},
		{"one tap that leaves what is required open", button, `"reading":"restored","type":"yes-no"`, `"reading":"restored","type":"yes-no","required":true},{"reading":"marking_present","type":"yes-no","required":true`, "quick.marking_present"},
		{"one tap answers what is not asked", button, `"restored":"yes"`, `"marking_present":"yes"`, "quick.marking_present"},
		{"condition on what is not asked", button, `{"reading":"button_trips","is":"yes"}`, `{"reading":"ground_continuous","is":"yes"}`, "steps.button.load_dead_when_tripped.when.1"},
		{"required in a series with no question", rcd, `"any_of":["trip_time_ms"]`, `"any_of":["retention_g"]`, "series.conditions.1.any_of"},
		{"series of no step", rcd, `"series":{"step":"inject"`, `"series":{"step":"injection"`, "series.step"},
		{"scale upside down", rcd, `"from":190,"to":260`, `"from":260,"to":190`, "steps.power.voltage_v.scale.to"},
		{"log scale from nothing", rcd, `"shape":"log","from":0.1`, `"shape":"log","from":0`, "steps.wiring.insulation_mohm.scale.from"},
		{"another unit", rcd, `"units":["ms","s"]`, `"units":["ms","V"]`, "steps.inject.trip_time_ms.units"},
		{"task that is none", button, `"task":"button"`, `"task":"press"`, "task"},
		{"own check without words", button, `"reading":"restored","type":"yes-no"`, `"reading":"own_yes_no_1","type":"yes-no"`, "steps.restored.own_yes_no_1.name"},
		{"choice of one", button, `"reading":"restored","type":"yes-no"`, `"reading":"own_choice_1","name":"Cover","type":"choice","options":["fits"]`, "steps.restored.own_choice_1.options"},
		{"unknown member", button, `"type":"yes-no"`, `"typ":"yes-no"`, "steps.2.asks.0.typ"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, wrong := ParseForm(edited(t, c.of, c.was, c.is))
			refusedAt(t, wrong, c.place)
		})
	}
}

func TestOwnCheck_IsJudgedByItsLimit(t *testing.T) {
	button, _ := Shipped().Form("gfci-receptacle/button")
	set, _ := Shipped().LimitSet("us-class-a")
	form, wrong := ParseForm(edited(t, button, `"asks":[{"reading":"restored","type":"yes-no"}]`,
		`"asks":[{"reading":"own_number_1","name":"Temperature of the cover, °C","type":"number","expected":true},{"reading":"own_choice_1","name":"Cover","type":"choice","options":["fits","loose"],"required":true},{"reading":"restored","type":"yes-no"}]`))
	if form.Quick = nil; len(wrong) != 1 || wrong[0].Field != "quick.own_choice_1" {
		t.Fatalf("form: %v, want only the one tap refused", wrong)
	}
	own := `"limits":[{"id":"cover","reading":"own_choice_1","one_of":["fits"],"level":"must","source":"house rule","status":"the owner's own","text":"Fit a new cover."},{"id":"warm","reading":"own_number_1","max":50,"level":"must","source":"house rule","status":"the owner's own","text":"Too warm."},`
	limits, wrong := ParseLimitSet(edited(t, set, `"limits":[`, own))
	if len(wrong) > 0 {
		t.Fatal(wrong[0])
	}
	judge := func(readings map[string]Reading) string {
		t.Helper()
		for code, word := range map[string]string{"condition": "sound", "found": "on", "button_trips": "yes", "button_resets": "yes"} {
			readings[code] = Reading{Value: word}
		}
		v, err := Judge(form, limits, Entry{Form: form.ID, Readings: readings})
		if err != nil {
			t.Fatal(err)
		}
		return v.Result
	}
	for _, c := range []struct {
		readings map[string]Reading
		want     string
	}{
		{map[string]Reading{}, Incomplete},
		{map[string]Reading{"own_choice_1": {Value: "fits"}}, Pass},
		{map[string]Reading{"own_choice_1": {Value: "loose"}}, Fail},
		{map[string]Reading{"own_choice_1": {Value: "fits"}, "own_number_1": {Value: 50.0}}, Pass},
		{map[string]Reading{"own_choice_1": {Value: "fits"}, "own_number_1": {Value: 50.1}}, Fail},
	} {
		if got := judge(c.readings); got != c.want {
			t.Errorf("%v: %s, want %s", c.readings, got, c.want)
		}
	}
}
