package forms

import "strings"

// Types of reading codes.
const (
	TypeNumber = "number"
	TypeChoice = "choice"
	TypeYesNo  = "yes-no"
)

// Code is one reading code: its type, the unit its value is in, and for a choice what may be answered.
type Code struct {
	Code    string   `json:"reading"`
	Type    string   `json:"type"`
	Unit    string   `json:"unit,omitempty"`
	Options []string `json:"options,omitempty"`
	// Test marks a code whose answer is a test of the device; the others only say what was found before one.
	Test bool `json:"test,omitzero"`
}

func choice(code string, test bool, options ...string) Code {
	return Code{Code: code, Type: TypeChoice, Options: options, Test: test}
}

func yesNo(code string) Code {
	return Code{Code: code, Type: TypeYesNo, Options: []string{"yes", "no"}, Test: true}
}

func number(code, unit string) Code {
	return Code{Code: code, Type: TypeNumber, Unit: unit, Test: true}
}

func before(c Code) Code { c.Test = false; return c }

// codes is every reading code, in the order findings outside a form's own order are given.
var codes = []Code{
	choice("condition", false, "sound", "damaged", "burnt", "hot", "wet"),
	choice("found", false, "on", "tripped", "no-power"),
	choice("indicator", false, "normal", "fault", "dark", "none"),
	number("voltage_v", "V"),
	choice("wiring", true, "correct", "open-ground", "open-neutral", "open-hot", "hot-neutral-reversed", "hot-ground-reversed", "other", "not-testable"),
	choice("wiring_method", false, "lamps", "meter", "analyser"),
	before(yesNo("marking_present")),
	yesNo("ground_continuous"),
	yesNo("ground_at_terminal"),
	number("ground_ohm", "ohm"),
	number("ground_point_v", "V"),
	number("neutral_ground_v", "V"),
	number("load_a", "A"),
	number("voltage_drop_pct", "%"),
	number("retention_g", "g"),
	yesNo("retention_holds"),
	number("electrode_ohm", "ohm"),
	number("loop_ohm", "ohm"),
	number("touch_voltage_v", "V"),
	number("insulation_test_v", "V"),
	number("insulation_mohm", "Mohm"),
	yesNo("button_trips"),
	yesNo("load_dead_when_tripped"),
	yesNo("button_resets"),
	before(yesNo("loads_disconnected")),
	before(number("multiple", "x")),
	before(number("phase_deg", "deg")),
	choice("waveform", false, "ac", "pulsating-dc", "smooth-dc"),
	before(number("test_current_ma", "mA")),
	number("trip_time_ms", "ms"),
	number("trip_current_ma", "mA"),
	yesNo("holds_at_half"),
	yesNo("restored"),
	before(yesNo("mark")),
	yesNo("own_yes_no_1"), yesNo("own_yes_no_2"), yesNo("own_yes_no_3"),
	choice("own_choice_1", true), choice("own_choice_2", true), choice("own_choice_3", true),
	number("own_number_1", ""), number("own_number_2", ""), number("own_number_3", ""),
}

// OwnCodes lists the codes kept for checks an organisation adds of its own, by type; what each asks, and in which unit,
// stands in the name its form gives it.
func OwnCodes(typ string) []string {
	var out []string
	for _, c := range codes {
		if c.Type == typ && IsOwn(c.Code) {
			out = append(out, c.Code)
		}
	}
	return out
}

// IsOwn reports whether a code is kept for checks of an organisation's own.
func IsOwn(code string) bool { return strings.HasPrefix(code, "own_") }

var codeAt = func() map[string]int {
	at := make(map[string]int, len(codes))
	for i, c := range codes {
		at[c.Code] = i
	}
	return at
}()

// Codes lists every reading code.
func Codes() []Code { return append([]Code(nil), codes...) }

// CodeOf gives what is known of a reading code.
func CodeOf(code string) (Code, bool) {
	i, ok := codeAt[code]
	if !ok {
		return Code{}, false
	}
	return codes[i], true
}

// mayNotTrip lists the codes for which "no-trip" is an answer.
func mayNotTrip(code string) bool { return code == "trip_time_ms" || code == "trip_current_ma" }

// perUnit gives how many of a code's own unit one of another unit is: 1 s = 1000 ms, 1 oz = 28.349523125 g
// (international avoirdupois ounce), 1 N = 1000/9.80665 g (standard acceleration of free fall), 1 mV = 0.001 V.
func perUnit(own, other string) (float64, bool) {
	switch {
	case own == other:
		return 1, true
	case own == "ms" && other == "s":
		return 1000, true
	case own == "g" && other == "oz":
		return 28.349523125, true
	case own == "g" && other == "N":
		return 101.97162129779283, true
	case own == "V" && other == "mV":
		return 0.001, true
	case own == "mA" && other == "A":
		return 1000, true
	case own == "ohm" && other == "kohm":
		return 1000, true
	}
	return 0, false
}

// MissingReasons lists why a reading may be missing.
func MissingReasons() []string {
	return []string{"no-access", "circuit-dead", "unsafe", "no-instrument", "not-testable", "other"}
}
