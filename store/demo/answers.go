package demo

import (
	"fmt"
	"maps"
	"math"
	"math/rand/v2"
	"strconv"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// entryOf answers the form of a task at a device as it really is at that moment, or as its fate has it, and says what
// the phone shows of it. in is nil for tests without an instrument.
func (b *builder) entryOf(d *device, task string, f fate, at time.Time, in *instrument) (forms.Entry, store.Shown, error) {
	form, set, err := b.rules.form(d.kind, task)
	if err != nil {
		return forms.Entry{}, store.Shown{}, fmt.Errorf("%s: %w", d.name, err)
	}
	e := forms.Entry{Form: form.ID, Given: d.given(form, set, in)}
	r := chance("readings", d.id, task, at.UTC().String())
	switch {
	case f == locked:
		e.Readings = map[string]forms.Reading{"found": forms.MissingFor("no-access")}
	default:
		if task == forms.TaskInstrument && d.residualMA > 0 {
			e.Series = d.multiples(r)
		}
		if task == forms.TaskReceptacle && f != burnt && hasFaces(d.kind) {
			e.Series = d.faces(f, r)
		}
		known := d.seen(f)
		if task != forms.TaskButton {
			maps.Copy(known, d.measured(f, forms.DayOf(at)-b.first, in, r))
		}
		answer(form, set, &e, known)
	}
	told, err := shown(form, set, e)
	return e, told, err
}

// given is what the judgement needs to know, as a phone puts it into the entry.
func (d *device) given(form *forms.Form, set *forms.LimitSet, in *instrument) forms.Given {
	g := forms.Given{Kind: d.kind, RatingA: d.breakerA, NominalV: 120, RatedResidualMA: d.residualMA, EquipmentGround: "yes",
		Supply: "grounded", FormRev: form.Revision, LimitSet: set.ID, LimitRev: set.Revision}
	if d.residualMA > 0 {
		g.NominalV = 230
	}
	if d.noGround {
		g.EquipmentGround = "none-permitted"
	}
	if d.isolated {
		g.Supply = "isolated"
	}
	if hasFaces(d.kind) {
		g.Faces = 2
	}
	if in != nil && form.Task != forms.TaskButton {
		due := in.due
		g.Instrument, g.CalibrationDue, g.Accuracy, g.Ramp = in.id, &due, in.accuracy, in.ramp
	}
	return g
}

// hasFaces reports whether a kind is a duplex receptacle here.
func hasFaces(kind string) bool {
	return kind == forms.PlainReceptacle || kind == forms.ProtectedReceptacle || kind == forms.HospitalReceptacle || kind == forms.GFCIReceptacle
}

// number is a reading as typed, with digits after the point.
func number(v float64, digits int, unit string) forms.Reading {
	typed := strconv.FormatFloat(v, 'f', digits, 64)
	v, _ = strconv.ParseFloat(typed, 64)
	return forms.Reading{Typed: typed, Unit: unit, Value: v}
}

// seen are the answers that need no instrument.
func (d *device) seen(f fate) map[string]forms.Reading {
	known := map[string]forms.Reading{
		"condition": forms.Answer("sound"), "found": forms.Answer("on"), "marking_present": forms.Answer("yes"),
		"button_trips": forms.Answer("yes"), "load_dead_when_tripped": forms.Answer("yes"), "button_resets": forms.Answer("yes"),
		"restored": forms.Answer("yes"), "loads_disconnected": forms.Answer("yes"),
		"ground_continuous": forms.Answer("yes"), "ground_at_terminal": forms.Answer("yes"), "mark": forms.Answer("yes"),
		"wiring": forms.Answer("correct"), "wiring_method": forms.Answer("lamps"),
	}
	if f.fails() {
		delete(known, "restored") // it is taken out of service
	}
	switch f {
	case burnt:
		known["condition"] = forms.Answer("burnt")
	case reversed:
		known["wiring"] = forms.Answer("hot-neutral-reversed")
	case noTrip:
		known["button_trips"] = forms.Answer("no")
	case noReset:
		known["button_resets"] = forms.Answer("no")
	}
	if d.noGround {
		known["wiring"] = forms.Answer("open-ground")
	}
	return known
}

// tripLimitMS is the longest trip time in ms at a current in mA: T = (20/I)^1.43 s (UL 943 Class A, seen second-hand).
// The demo only needs it to make up believable times; forms judges them.
func tripLimitMS(ma float64) float64 { return 1000 * math.Pow(20/ma, 1.43) }

// measured are the answers of an instrument.
func (d *device) measured(f fate, sinceFirst forms.Day, in *instrument, r *rand.Rand) map[string]forms.Reading {
	scatter := func(share float64) float64 { return 1 + share*(2*r.Float64()-1) }
	current := 6.8
	if in != nil {
		current = in.currentMA
	}
	test := math.Round(10*current*scatter(0.02)) / 10
	trip := (d.tripMA + d.driftMAPerYr*float64(sinceFirst)/365) * scatter(0.008)
	share := d.slowness * scatter(0.15)
	switch f {
	case slow:
		share = 1.15 + 0.4*r.Float64()
	case highTrip:
		trip = 9.2 + r.Float64()
	}
	tripReading := number(trip, 1, "mA")
	if f == slipped {
		tripReading = number(10*math.Round(10*trip)/10, 0, "mA")
	}
	known := map[string]forms.Reading{
		"trip_current_ma": tripReading,
		"test_current_ma": number(test, 1, "mA"),
		"trip_time_ms":    number(share*tripLimitMS(test), 0, "ms"),
		"ground_ohm":      number(d.groundOhm*scatter(0.06), 2, "ohm"),
		"voltage_v":       number(119.4+2.6*(2*r.Float64()-1), 1, "V"),
	}
	if d.residualMA > 0 {
		known["trip_current_ma"] = number(d.residualMA*(0.66+0.2*r.Float64()), 1, "mA")
		known["voltage_v"] = number(231+3*r.Float64(), 0, "V")
		known["loop_ohm"] = number(0.4+0.3*r.Float64(), 2, "ohm")
		known["insulation_mohm"] = number(120+200*r.Float64(), 0, "Mohm")
		known["insulation_test_v"] = number(500, 0, "V")
	}
	return known
}

// retention is the mass in grams that the ground blade holds.
func (d *device) retention(f fate, r *rand.Rand) float64 {
	if f == loose {
		return 60 + 40*r.Float64()
	}
	return d.retentionG * (0.96 + 0.08*r.Float64())
}

// multiples are the conditions under which an RCD is measured: half, once and five times its rating, at both half-waves.
func (d *device) multiples(r *rand.Rand) []forms.SeriesReading {
	var out []forms.SeriesReading
	for _, m := range []float64{0.5, 1, 5} {
		for _, phase := range []float64{0, 180} {
			s := forms.SeriesReading{At: map[string]any{"multiple": m, "phase_deg": phase}}
			switch m {
			case 0.5:
				bound := 2000.0
				s.Readings = map[string]forms.Reading{"trip_time_ms": {Above: &bound, Unit: "ms", Typed: ">2000"}}
			case 1:
				s.Readings = map[string]forms.Reading{"trip_time_ms": number(20+16*r.Float64(), 1, "ms")}
			default:
				s.Readings = map[string]forms.Reading{"trip_time_ms": number(9+9*r.Float64(), 1, "ms")}
			}
			out = append(out, s)
		}
	}
	return out
}

// faces are both halves of a duplex receptacle.
func (d *device) faces(f fate, r *rand.Rand) []forms.SeriesReading {
	return []forms.SeriesReading{
		{At: map[string]any{"face": "upper"}, Readings: map[string]forms.Reading{"retention_g": number(d.retention(sound, r), 0, "g")}},
		{At: map[string]any{"face": "lower"}, Readings: map[string]forms.Reading{"retention_g": number(d.retention(f, r), 0, "g")}},
	}
}
