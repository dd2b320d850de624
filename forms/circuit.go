package forms

import (
	"regexp"
	"strconv"
	"strings"
)

// CircuitFacts is what a circuit's nameplate checks need of it.
type CircuitFacts struct {
	Standard  string // NEC | IEC | ""
	Conductor string // as written: "12 AWG", "10 AWG Al", "2.5 mm²"
	BreakerA  float64
	VoltageV  float64
	Outlets   int // receptacles known on it; a duplex counts twice
}

// CircuitCheck is one check of a circuit or of a receptacle on it. A check never fails anything: what lies outside is
// flagged for somebody with a licence to look at. Figures are the arithmetic, by name.
type CircuitCheck struct {
	Check   string // conductor | receptacle | voltage-drop
	Verdict string // pass | watch | not-judged
	Why     string // which sentence says it; with Check a key into the words
	Figures map[string]float64
	Source  string
}

// Why a check is not judged.
const (
	WhyNotNEC   = "not_nec"  // the checks are those of the NEC; another standard, or none said
	WhyMetric   = "metric"   // mm² is no size of the NEC tables
	WhyUnknown  = "unknown"  // conductor, breaker or rating is not said
	WhyLarger   = "larger"   // larger than 10 AWG: the small-conductor rule says nothing, the ampacity tables do
	WhyNoLoad   = "no_load"  // no drop under a known load was read
	WhyNoTable  = "no_table" // a circuit rating the table does not name
	whyInside   = "inside"   // within the figure
	whyOutside  = "outside"  // beyond it
	whySingle   = "single"   // one single receptacle, weaker than its circuit
	whyUnsaid   = "unsaid"   // would be outside as a single receptacle, inside as one of several
	sourceSmall = "NEC 240.4(D); (E) taps and (G) specific conductor applications are exceptions"
	sourceOne   = "NEC 210.21(B)(1)"
	sourceTable = "NEC 210.21(B)(3), Table 210.21(B)(3)"
	sourceDrop  = "NEC 210.19(A) informational note, not enforceable (90.5(C))"
)

var awgSize = regexp.MustCompile(`(?i)^(?:#\s*(\d{1,2})|(\d{1,2})\s*awg|awg\s*(\d{1,2}))\b(.*)$`)

// Conductor reads a conductor as people write it: AWG size and whether it is aluminum. metric is a size in mm²; ok is
// false for what is neither.
func Conductor(written string) (awg int, aluminum, metric, ok bool) {
	written = strings.TrimSpace(written)
	if strings.Contains(written, "mm") {
		return 0, false, true, false
	}
	m := awgSize.FindStringSubmatch(written)
	if m == nil {
		return 0, false, false, false
	}
	awg, err := strconv.Atoi(m[1] + m[2] + m[3])
	rest := strings.ToLower(m[4])
	if err != nil || strings.HasPrefix(strings.TrimSpace(rest), "/") { // 1/0 and larger
		return 0, false, false, false
	}
	return awg, strings.Contains(rest, "al") && !strings.Contains(rest, "thermal"), false, true
}

// SmallConductorMaxA gives the largest overcurrent device, in amperes, that may protect a small conductor: copper 14 AWG
// 15 A, 12 AWG 20 A, 10 AWG 30 A; aluminum or copper-clad aluminum 12 AWG 15 A, 10 AWG 25 A (NEC 240.4(D)(3) to (7)). ok is false
// for a size the clause does not name here.
func SmallConductorMaxA(awg int, aluminum bool) (amps float64, ok bool) {
	table := map[int]float64{14: 15, 12: 20, 10: 30}
	if aluminum {
		table = map[int]float64{12: 15, 10: 25}
	}
	amps, ok = table[awg]
	return amps, ok
}

// receptacleTable is NEC Table 210.21(B)(3): circuit rating → receptacle ratings allowed where there are two or more.
// 15 A says "not over 15".
var receptacleTable = map[float64][]float64{15: {15}, 20: {15, 20}, 30: {30}, 40: {40, 50}, 50: {50}}

// CheckConductor holds a circuit's breaker against its conductor.
func CheckConductor(c CircuitFacts) CircuitCheck {
	out := CircuitCheck{Check: "conductor", Verdict: NotJudged, Source: sourceSmall}
	awg, aluminum, metric, ok := Conductor(c.Conductor)
	switch {
	case metric:
		out.Why = WhyMetric
	case c.Standard != "NEC":
		out.Why = WhyNotNEC
	case !ok || c.BreakerA <= 0:
		out.Why = WhyUnknown
	default:
		most, named := SmallConductorMaxA(awg, aluminum)
		if !named {
			if out.Why = WhyUnknown; awg < 10 {
				out.Why = WhyLarger
			}
			return out
		}
		out.Figures = map[string]float64{"awg": float64(awg), "breaker_a": c.BreakerA, "most_a": most}
		if out.Verdict, out.Why = Pass, whyInside; c.BreakerA > most {
			out.Verdict, out.Why, out.Figures["over_a"] = Watch, whyOutside, c.BreakerA-most
		}
	}
	return out
}

// CheckReceptacle holds a receptacle's rating against its circuit. faces is 2 for a duplex, 1 for a single receptacle, 0 where
// nobody said.
func CheckReceptacle(c CircuitFacts, ratingA float64, faces int) CircuitCheck {
	out := CircuitCheck{Check: "receptacle", Verdict: NotJudged, Source: sourceTable}
	allowed, named := receptacleTable[c.BreakerA]
	switch {
	case c.Standard != "NEC":
		out.Why = WhyNotNEC
		return out
	case c.BreakerA <= 0 || ratingA <= 0:
		out.Why = WhyUnknown
		return out
	case !named:
		out.Why = WhyNoTable
		return out
	}
	out.Figures = map[string]float64{"rating_a": ratingA, "breaker_a": c.BreakerA, "least_a": allowed[0], "most_a": allowed[len(allowed)-1]}
	inside := c.BreakerA == 15 && ratingA <= 15
	for _, a := range allowed {
		inside = inside || a == ratingA
	}
	alone := c.Outlets <= 1 && faces != 2
	switch {
	case alone && ratingA >= c.BreakerA:
		out.Verdict, out.Why, out.Source = Pass, whyInside, sourceOne
	case alone && faces == 1:
		out.Verdict, out.Why, out.Source = Watch, whySingle, sourceOne
	case alone && inside:
		out.Why, out.Source = whyUnsaid, sourceOne
	case inside:
		out.Verdict, out.Why = Pass, whyInside
	default:
		out.Verdict, out.Why = Watch, whyOutside
	}
	return out
}

// DropMost is the drop on a branch circuit, in percent, that the informational note recommends not to pass.
const DropMost = 3.0

// CheckDrop works out a voltage drop under load: the volts lost, and the resistance of the loop of hot and neutral they
// imply at the load's current. openV is the voltage without the load, dropPct the drop in percent of it.
func CheckDrop(c CircuitFacts, openV, dropPct, loadA float64) CircuitCheck {
	out := CircuitCheck{Check: "voltage-drop", Verdict: NotJudged, Source: sourceDrop}
	if openV <= 0 {
		openV = c.VoltageV
	}
	switch {
	case c.Standard != "NEC":
		out.Why = WhyNotNEC
	case dropPct < 0 || openV <= 0 || loadA <= 0:
		out.Why = WhyNoLoad
	default:
		lost := openV * dropPct / 100
		out.Figures = map[string]float64{"open_v": openV, "drop_pct": dropPct, "lost_v": lost, "load_a": loadA, "loop_ohm": lost / loadA, "most_pct": DropMost}
		if out.Verdict, out.Why = Pass, whyInside; dropPct > DropMost {
			out.Verdict, out.Why = Watch, whyOutside
		}
	}
	return out
}

// DropPercent is the drop of a voltage under load in percent of the voltage without: (Voc − Vload) / Voc · 100.
func DropPercent(openV, loadedV float64) float64 { return (openV - loadedV) / openV * 100 }
