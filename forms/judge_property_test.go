package forms

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestCodes_FitTheJudgesSets(t *testing.T) {
	if len(codes) > 64 || len(codes) != len(codeAt) {
		t.Errorf("%d codes, %d names: the judge keeps 64 places", len(codes), len(codeAt))
	}
}

// drawReading draws a reading that fits its code, or at times one that does not.
func drawReading(t *rapid.T, c Code) Reading {
	v := rapid.OneOf(rapid.SampledFrom([]float64{0, 0.5, 1, 3.9, 4, 5, 6, 20, 30, 115, 264, 300, 1000}), rapid.Float64Range(0, 10000)).Draw(t, "figure")
	switch rapid.IntRange(0, 9).Draw(t, "shape") {
	case 0:
		return MissingFor(rapid.SampledFrom(MissingReasons()).Draw(t, "reason"))
	case 1:
		return Reading{Above: &v}
	case 2:
		return Reading{Below: &v}
	case 3:
		return Reading{NoTrip: true}
	}
	if c.Type == TypeNumber {
		return Number(v)
	}
	return Answer(rapid.SampledFrom(answersOf(c)).Draw(t, "answer"))
}

// answersOf gives what may be answered to a code; a choice of an organisation's own has the answers its form gives it.
func answersOf(c Code) []string {
	if IsOwn(c.Code) && c.Type == TypeChoice {
		return []string{"fits", "loose"}
	}
	return c.Options
}

func drawEntry(t *rapid.T) (*Form, *LimitSet, Entry) {
	form := rapid.SampledFrom(Shipped().Forms).Draw(t, "form")
	var sets []*LimitSet
	for _, s := range Shipped().LimitSets {
		if slices.Contains(s.Kinds, form.Kinds[0]) {
			sets = append(sets, s)
		}
	}
	e := Entry{Form: form.ID, Readings: map[string]Reading{}}
	for _, c := range codes {
		if rapid.IntRange(0, 2).Draw(t, c.Code) > 0 {
			e.Readings[c.Code] = drawReading(t, c)
		}
	}
	for range rapid.IntRange(0, 5).Draw(t, "items") {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		e.Series = append(e.Series, SeriesReading{
			At:       map[string]any{"multiple": rapid.SampledFrom([]float64{0.5, 1, 2, 3, 5}).Draw(t, "multiple"), "face": rapid.SampledFrom([]string{"upper", "lower"}).Draw(t, "face")},
			Readings: map[string]Reading{c.Code: drawReading(t, c)},
		})
	}
	e.Given = Given{
		RatedResidualMA: rapid.SampledFrom([]float64{0, 10, 30, 100}).Draw(t, "rated"),
		EquipmentGround: rapid.SampledFrom([]string{"", "yes", "none-permitted"}).Draw(t, "ground"),
		Supply:          rapid.SampledFrom([]string{"", "isolated"}).Draw(t, "supply"),
		Faces:           rapid.IntRange(0, 4).Draw(t, "faces"),
		Gauge:           rapid.SampledFrom([]string{"", "115 g", "3 oz", "x"}).Draw(t, "gauge"),
		Ramp:            &Ramp{RateMAPerS: rapid.SampledFrom([]float64{0, 0.5}).Draw(t, "ramp")},
	}
	return form, rapid.SampledFrom(sets).Draw(t, "set"), e
}

func mustJudge(t *rapid.T, form *Form, set *LimitSet, e Entry) Verdict {
	v, err := Judge(form, set, e)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func TestJudge_ResultFollowsFromItsFindings(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		form, set, e := drawEntry(t)
		v := mustJudge(t, form, set, e)
		raw := v.AppendJSON(nil)
		var back Verdict
		if err := json.Unmarshal(raw, &back); err != nil {
			t.Fatalf("%s: %v", raw, err)
		}
		if again := back.AppendJSON(nil); string(again) != string(raw) {
			t.Fatalf("written again:\n%s\n%s", raw, again)
		}
		for i, f := range v.Findings {
			if f.Level == WatchOnly && f.Verdict != Pass && f.Verdict != Watch && f.Verdict != NotJudged {
				t.Fatalf("a watch limit gave %q", f.Verdict)
			}
			if (f.Text == "") != (f.Verdict == Pass) {
				t.Fatalf("finding %d: verdict %q, text %q", i, f.Verdict, f.Text)
			}
			if f.Verdict != Missing && f.Source == "" {
				t.Fatalf("finding %d has no source", i)
			}
		}
		if v.Result != NotTested && v.Result != resultOf(v.Findings) {
			t.Fatalf("result %q of %s", v.Result, raw)
		}
		if v.Result == Pass && !testedAtAll(e) {
			t.Fatal("passed without a test")
		}
	})
}

// testedAtAll reports whether the entry holds a reading that tests the device.
func testedAtAll(e Entry) bool {
	for code, r := range e.Readings {
		if i, ok := codeAt[code]; ok && codes[i].Test && r.Given() {
			return true
		}
	}
	for _, item := range e.Series {
		for code, r := range item.Readings {
			if i, ok := codeAt[code]; ok && codes[i].Test && r.Given() {
				return true
			}
		}
	}
	return false
}

// A larger trip time is never judged better.
func TestJudge_SlowerIsNeverBetter(t *testing.T) {
	form, _ := Shipped().Form("gfci-receptacle/instrument")
	set, _ := Shipped().LimitSet("us-class-a")
	rapid.Check(t, func(t *rapid.T) {
		current := rapid.Float64Range(6, 264).Draw(t, "current")
		a := rapid.Float64Range(0, 8000).Draw(t, "a")
		b := rapid.Float64Range(a, 9000).Draw(t, "b")
		rank := func(ms float64) int {
			v := mustJudge(t, form, set, Entry{Readings: map[string]Reading{"test_current_ma": Number(current), "trip_time_ms": Number(ms)}})
			for _, f := range v.Findings {
				if f.Reading == "trip_time_ms" {
					return worse(f.Verdict)
				}
			}
			t.Fatal("trip time was not judged")
			return 0
		}
		if rank(a) > rank(b) {
			t.Fatalf("at %v mA %v ms is worse than %v ms", current, a, b)
		}
	})
}

// A bound passes only where every value it allows passes, and fails only where every one fails.
func TestProve_ABoundClaimsNoMoreThanItKnows(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var b Bounds
		least := rapid.Float64Range(0, 100).Draw(t, "min")
		most := rapid.Float64Range(least, 200).Draw(t, "max")
		switch rapid.IntRange(0, 2).Draw(t, "shape") {
		case 0:
			b.Min = &least
		case 1:
			b.Max = &most
		default:
			b.Min, b.Max = &least, &most
		}
		edge := rapid.Float64Range(0, 250).Draw(t, "edge")
		r := Reading{Above: &edge}
		value := math.Nextafter(edge, 300) + rapid.Float64Range(0, 250).Draw(t, "beyond")
		if rapid.Bool().Draw(t, "below") {
			r = Reading{Below: &edge}
			value = edge * rapid.Float64Range(0, 0.999999).Draw(t, "share")
		}
		if edge == 0 {
			return
		}
		allowed := Number(value)
		bound, exact := prove(&b, &r, "ms", "ms"), prove(&b, &allowed, "ms", "ms")
		if bound != unproven && (bound == inside) != (exact == inside) {
			t.Fatalf("%+v against %+v: the bound gives %d, the value %v it allows %d", r, b, bound, value, exact)
		}
	})
}

// The worst of a series decides: adding a reading never makes the result better.
func TestJudge_WorstOfASeriesDecides(t *testing.T) {
	form, _ := Shipped().Form("rcd/instrument")
	set, _ := Shipped().LimitSet("iec-general")
	rapid.Check(t, func(t *rapid.T) {
		e := Entry{Given: Given{RatedResidualMA: 30}, Readings: map[string]Reading{"condition": Answer("sound"), "found": Answer("on"),
			"ground_continuous": Answer("yes"), "button_trips": Answer("yes"), "button_resets": Answer("yes"), "holds_at_half": Answer("yes")}}
		for _, at := range []map[string]any{{"multiple": 1.0, "phase_deg": 0.0}, {"multiple": 1.0, "phase_deg": 180.0}, {"multiple": 5.0, "phase_deg": 0.0}, {"multiple": 5.0, "phase_deg": 180.0}} {
			e.Series = append(e.Series, SeriesReading{At: at, Readings: map[string]Reading{"trip_time_ms": Number(20)}})
		}
		if v := mustJudge(t, form, set, e); v.Result != Pass {
			t.Fatalf("a sound device: %q", v.Result)
		}
		code, _ := CodeOf("trip_time_ms")
		more := SeriesReading{At: map[string]any{"multiple": rapid.SampledFrom([]float64{0.5, 1, 2, 5, 7}).Draw(t, "multiple")}, Readings: map[string]Reading{"trip_time_ms": drawReading(t, code)}}
		e.Series = append(e.Series, more)
		v := mustJudge(t, form, set, e)
		last := Pass
		for _, f := range v.Findings {
			if _, phase := f.At["phase_deg"]; f.At != nil && !phase {
				last = f.Verdict
			}
		}
		if want := resultOf([]Finding{{Verdict: last}}); v.Result != want {
			t.Fatalf("added %+v judged %q: result %q, want %q", more, last, v.Result, want)
		}
	})
}

// Random lines, good and bad: both judges write the same bytes.
func TestVerdicts_JavaScriptAgreesOnRandomLines(t *testing.T) {
	_, catalogue := readVectors(t)
	n := 2000
	if testing.Short() {
		n = 300
	}
	random := rand.New(rand.NewPCG(1, 2))
	var lines []json.RawMessage
	for range n {
		raw, err := json.Marshal(randomLine(random))
		if err != nil {
			t.Fatal(err)
		}
		lines = append(lines, raw)
	}
	for name, run := range engines {
		t.Run(name, func(t *testing.T) { compareRandom(t, catalogue, lines, run(t, catalogue, lines)) })
	}
}

func compareRandom(t *testing.T, catalogue *Catalogue, lines []json.RawMessage, out answers) {
	t.Helper()
	results := map[string]int{}
	for i, line := range lines {
		want := judged(t, catalogue, line)
		var got struct {
			Result   string
			Findings []Finding
			Error    *Error
		}
		if err := json.Unmarshal(want, &got); err != nil {
			t.Fatal(err)
		}
		if got.Error != nil {
			got.Result = "refused"
			want = sameNames(t, want)
		}
		results[got.Result]++
		for _, f := range got.Findings {
			results[f.Verdict]++
		}
		if out.Answers[i] != string(want) {
			t.Fatalf("%s:\n        Go %s\nJavaScript %s", line, want, out.Answers[i])
		}
	}
	for _, r := range []string{Fail, ConditionalFail, Incomplete, ConditionalPass, "refused"} {
		if results[r] == 0 {
			t.Errorf("no random line and no finding came out as %q: %v", r, results)
		}
	}
}

// randomLine makes a line of the command verdict that is mostly in order.
func randomLine(random *rand.Rand) map[string]any {
	shipped := Shipped()
	form := shipped.Forms[random.IntN(len(shipped.Forms))]
	readings := map[string]any{}
	form.asks(func(a ask) bool {
		if random.IntN(8) > 0 {
			readings[a.Reading] = randomReading(random, codes[codeAt[a.Reading]])
		}
		return true
	})
	if random.IntN(60) == 0 {
		c := codes[random.IntN(len(codes))]
		readings[c.Code] = "odd"
	}
	var series []any
	for range random.IntN(4) {
		c := codes[codeAt[[]string{"trip_time_ms", "retention_g", "retention_holds"}[random.IntN(3)]]]
		series = append(series, map[string]any{"at": map[string]any{"multiple": []float64{0.5, 1, 2, 5, 3}[random.IntN(5)], "phase_deg": 180 * random.IntN(2),
			"face": []string{"upper", "lower"}[random.IntN(2)]}, c.Code: randomReading(random, c)})
	}
	given := map[string]any{"faces": random.IntN(5), "delayed": random.IntN(4) == 0, "nominal_v": []int{0, 120, 240}[random.IntN(3)],
		"equipment_ground": []string{"", "yes", "none-permitted"}[random.IntN(3)], "supply": []string{"", "", "isolated"}[random.IntN(3)],
		"gauge": []string{"", "4 oz", "100 g", "14"}[random.IntN(4)], "retention_gauge": []string{"", "4 oz"}[random.IntN(2)],
		"test_resistor_ohm": []float64{0, 0, 16000}[random.IntN(3)], "test_nominal_v": []float64{0, 0, 120}[random.IntN(3)], "accuracy": randomAccuracy(random), "ramp": map[string]any{"ma_per_s": random.Float64()}, "loads": []string{"", "connected"}[random.IntN(2)]}
	line := map[string]any{"form": form.ID, "rated_residual_ma": []int{0, 10, 30, 100}[random.IntN(4)], "readings": readings, "series": series, "given": given}
	var sets []string
	for _, s := range shipped.LimitSets {
		if slices.Contains(s.Kinds, form.Kinds[0]) {
			sets = append(sets, s.ID)
		}
	}
	if random.IntN(2) == 0 {
		line["limit_set"] = sets[random.IntN(len(sets))]
	}
	return line
}

// randomAccuracy says of some numbers how accurately they were read.
func randomAccuracy(random *rand.Rand) map[string]any {
	out := map[string]any{}
	for _, c := range codes {
		if c.Type == TypeNumber && random.IntN(3) > 0 {
			out[c.Code] = map[string]any{"percent": math.Round(random.Float64()*1000) / 100, "plus": math.Round(random.Float64()*100) / 100}
		}
	}
	return out
}

func randomReading(random *rand.Rand, c Code) any {
	v := math.Round(math.Pow(10, random.Float64()*5-1)*100) / 100
	if likely, ok := map[string][2]float64{"trip_current_ma": {3.5, 7}, "test_current_ma": {5, 40}, "trip_time_ms": {5, 600}, "ground_ohm": {0, 2}}[c.Code]; ok && random.IntN(2) == 0 {
		v = math.Round((likely[0]+random.Float64()*(likely[1]-likely[0]))*10) / 10
	}
	if c.Type != TypeNumber {
		options := answersOf(c)
		switch n := random.IntN(len(options) + 8); {
		case n == len(options):
			return map[string]any{"missing": MissingReasons()[random.IntN(6)]}
		case n < len(options):
			return options[n]
		}
		return options[0]
	}
	switch random.IntN(12) {
	case 0:
		return map[string]any{"missing": MissingReasons()[random.IntN(6)]}
	case 1, 2:
		if c.Test {
			return map[string]any{[]string{"above", "below"}[random.IntN(2)]: v}
		}
	case 3:
		if mayNotTrip(c.Code) {
			return "no-trip"
		}
	case 4:
		return map[string]any{"value": v, "unit": c.Unit}
	}
	return v
}

func FuzzDecodeLine(f *testing.F) {
	v, catalogue := readVectors(f)
	for _, c := range v.Cases {
		f.Add([]byte(c.In))
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		var line Line
		if DecodeLine(raw, &line) != nil {
			return
		}
		verdict, err := catalogue.JudgeLine(&line)
		if err != nil {
			if e, ok := asError(err); !ok || e.Text == "" || e.Code == "" {
				t.Fatalf("%v is no refusal", err)
			}
			return
		}
		if !slices.Contains(Results(), verdict.Result) || !json.Valid(verdict.AppendJSON(nil)) {
			t.Fatalf("%+v", verdict)
		}
	})
}
