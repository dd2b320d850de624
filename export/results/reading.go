package results

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"tripwell/export/intake"
	"tripwell/forms"
)

// fault is what is wrong with one cell. A doubt is possible and unlikely; everything else cannot be taken in.
type fault struct {
	text  string
	doubt bool
}

// unsaid are cells that say nothing: people fill the boxes they leave empty.
var unsaid = map[string]bool{"": true, "-": true, "--": true, "---": true, "–": true, "—": true, "n/a": true, "na": true, "n.a.": true, ".": true}

// reasons are ways people say why there is no figure.
var reasons = map[string]string{
	"locked": "no-access", "no access": "no-access", "no entry": "no-access", "not accessible": "no-access", "closed": "no-access", "blocked": "no-access", "room locked": "no-access",
	"dead": "circuit-dead", "circuit dead": "circuit-dead", "no power": "circuit-dead", "unsafe": "unsafe", "not measured, unsafe": "unsafe",
	"no instrument": "no-instrument", "no meter": "no-instrument", "not testable": "not-testable", "cannot be tested": "not-testable", "not tested": "other", "skipped": "other",
}

// noTrip are ways of saying that a device did not trip.
var noTrip = []string{"no trip", "no-trip", "did not trip", "not tripped", "dnt", "none", "no"}

// spokenAnswers are answers people give beside the words of the round sheet; common practice, no source.
var spokenAnswers = map[string]map[string]string{
	"wiring": {"ok": "correct", "good": "correct", "correct": "correct", "pass": "correct", "✓": "correct", "✔": "correct", "open gnd": "open-ground", "open ground": "open-ground", "open earth": "open-ground",
		"no ground": "open-ground", "open neutral": "open-neutral", "open hot": "open-hot", "reversed": "hot-neutral-reversed", "reversed polarity": "hot-neutral-reversed",
		"hot/neutral reversed": "hot-neutral-reversed", "hot neutral reversed": "hot-neutral-reversed", "hot/ground reversed": "hot-ground-reversed"},
	"condition": {"ok": "sound", "good": "sound", "✓": "sound", "✔": "sound", "cracked": "damaged", "broken": "damaged", "loose": "damaged", "discoloured": "burnt", "discolored": "burnt"},
	"found":     {"ok": "on", "live": "on", "off": "no-power", "dead": "no-power"},
	"indicator": {"ok": "normal", "green": "normal", "off": "dark"},
}

// reading reads one cell as a reading. said is false where the cell says nothing.
func (c column) cell(cell intake.Cell, comma bool) (r forms.Reading, said bool, why *fault) {
	text := strings.Join(strings.Fields(cell.Text), " ")
	low := strings.ToLower(text)
	if unsaid[low] {
		return r, false, nil
	}
	known, _ := forms.CodeOf(c.reading)
	if known.Type != forms.TypeNumber {
		return c.answer(known, low)
	}
	if reason, ok := reasons[low]; ok {
		return forms.MissingFor(reason), true, nil
	}
	trips := c.reading == "trip_time_ms" || c.reading == "trip_current_ma"
	if trips && slices.Contains(noTrip, low) {
		return forms.Reading{NoTrip: true}, true, nil
	}
	return c.figure(known, text, cell, comma, trips)
}

// answer reads a choice or a yes.
func (c column) answer(known forms.Code, low string) (forms.Reading, bool, *fault) {
	if value, ok := c.options[low]; ok {
		return forms.Answer(value), true, nil
	}
	if value, ok := spokenAnswers[c.reading][low]; ok {
		return forms.Answer(value), true, nil
	}
	if value := strings.ReplaceAll(low, " ", "-"); slices.Contains(known.Options, value) {
		return forms.Answer(value), true, nil
	}
	if reason, ok := reasons[low]; ok {
		return forms.MissingFor(reason), true, nil
	}
	if known.Type == forms.TypeYesNo {
		if yes, ok := intake.ParseYes(low); ok {
			return forms.Answer(map[bool]string{true: "yes", false: "no"}[yes]), true, nil
		}
		return forms.Reading{}, false, &fault{text: "This is no yes and no no. Write yes or no."}
	}
	options := known.Options
	if len(options) == 0 {
		options = slices.Sorted(maps.Values(c.options)) // of a choice an organisation added
	}
	return forms.Reading{}, false, &fault{text: fmt.Sprintf("This is no answer here. Write one of: %s.", strings.Join(options, ", "))}
}

// figure reads a figure, its unit and its bound.
func (c column) figure(known forms.Code, text string, cell intake.Cell, comma, trips bool) (forms.Reading, bool, *fault) {
	q := intake.Quantity{Unit: c.unit}
	if cell.Number != nil && !strings.ContainsAny(text, "<>") {
		q.Value = *cell.Number
	} else {
		var err error
		if q, err = (intake.Figures{DecimalComma: comma}).Parse(text, c.unit); err != nil {
			return forms.Reading{}, false, &fault{text: err.Error()}
		}
	}
	if q.Bound == intake.Over {
		if trips {
			return forms.Reading{NoTrip: true}, true, nil
		}
		return forms.Reading{}, false, &fault{text: "The instrument was over its range and no figure says how far it goes. Write the end of its range, such as >1999."}
	}
	own, ok := q.In(known.Unit)
	if !ok {
		return forms.Reading{}, false, &fault{text: fmt.Sprintf("This unit does not fit here. Write the figure in %s.", known.Unit)}
	}
	if math.IsNaN(own.Value) || math.Abs(own.Value) > 1<<53 {
		return forms.Reading{}, false, &fault{text: "This figure is beyond what can be kept exactly. Write the figure the instrument showed."}
	}
	if own.Value < 0 {
		return forms.Reading{}, false, &fault{text: "This cannot be negative. Write the figure the instrument showed."}
	}
	v := own.Value
	switch q.Bound {
	case intake.Below:
		return forms.Reading{Below: &v, Unit: known.Unit}, true, doubtOf(known, q, v)
	case intake.Above:
		return forms.Reading{Above: &v, Unit: known.Unit}, true, doubtOf(known, q, v)
	}
	r := forms.Reading{Value: v}
	if keptUnits[q.Unit] || q.Unit == known.Unit {
		r.Typed, r.Unit = typedFigure(text, q.Value), q.Unit
	}
	return r, true, doubtOf(known, q, v)
}

// keptUnits are those an entry can keep beside what was typed (forms: 1 s = 1000 ms, 1 oz, 1 N, 1 mV, 1 A, 1 kohm).
var keptUnits = map[string]bool{"s": true, "oz": true, "N": true, "mV": true, "A": true, "kohm": true}

// typedFigure is the figure as it stood in the cell, without its unit.
func typedFigure(text string, value float64) string {
	digits := strings.Trim(text, "=<>≤≥ abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZµμΩ°%×")
	if v, err := strconv.ParseFloat(strings.Replace(digits, ",", ".", 1), 64); err == nil && v == value && strings.Trim(digits, "0123456789.,") == "" {
		return digits
	}
	return strconv.FormatFloat(value, 'f', -1, 64)
}

// likely are the figures readings have in practice, in the code's own unit: what lies outside is more often a slip of
// the unit or of the hand than a measurement. The longest a Class A device may take is 9.99 s, at 4 mA (UL 943, 20/I to
// the power 1.43); the other spans are common practice, no source.
var likely = map[string][2]float64{
	"trip_time_ms": {1, 12_000}, "trip_current_ma": {0.5, 1500}, "test_current_ma": {0.5, 5000}, "voltage_v": {0, 1000}, "neutral_ground_v": {0, 400},
	"ground_ohm": {0, 20_000}, "load_a": {0, 400}, "voltage_drop_pct": {0, 60}, "retention_g": {20, 3000}, "electrode_ohm": {0, 50_000}, "loop_ohm": {0, 20_000},
	"touch_voltage_v": {0, 400}, "insulation_test_v": {50, 5000}, "insulation_mohm": {0, 200_000}, "multiple": {0.4, 12}, "phase_deg": {0, 360},
}

// slips are the units a figure may really be in, where the column says another.
var slips = map[string][]string{
	"trip_time_ms": {"s", "ms"}, "trip_current_ma": {"A", "mA"}, "test_current_ma": {"A", "mA"}, "ground_ohm": {"mohm", "ohm"}, "retention_g": {"oz", "kg", "g"},
	"insulation_mohm": {"kohm", "ohm"}, "loop_ohm": {"mohm"}, "voltage_v": {"kV", "mV"}, "neutral_ground_v": {"mV"},
}

// doubtOf names a figure that is possible and unlikely, and the slip that would explain it. A bound of zero or of the
// end of a range is what instruments print; only the far end of a bound can be a slip.
func doubtOf(known forms.Code, q intake.Quantity, v float64) *fault {
	span, ok := likely[known.Code]
	if !ok || v >= span[0] && v <= span[1] || q.Bound == intake.Below && v <= span[1] {
		return nil
	}
	written := strconv.FormatFloat(q.Value, 'f', -1, 64)
	for _, unit := range slips[known.Code] {
		if unit == q.Unit {
			continue
		}
		if other, ok := (intake.Quantity{Value: q.Value, Unit: unit}).In(known.Unit); ok && other.Value >= span[0] && other.Value <= span[1] {
			return &fault{doubt: true, text: fmt.Sprintf("%s %s is unlikely here; %s %s would be usual. Say the unit in the heading or behind the figure, or take the row in as it stands.", written, q.Unit, written, unit)}
		}
	}
	return &fault{doubt: true, text: fmt.Sprintf("%s %s is unlikely here. Compare it with the paper or the instrument, correct it, or take the row in as it stands.", written, q.Unit)}
}
