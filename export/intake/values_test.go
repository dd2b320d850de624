package intake

import (
	"testing"
	"time"

	"pgregory.net/rapid"

	"tripwell/forms"
)

func TestParseDate_FormsPeopleType(t *testing.T) {
	for _, c := range []struct {
		text  string
		order Order
		want  string // "" = refused, "?" = asked
	}{
		{"2026-12-31", "", "2026-12-31"}, {"2026/1/2", "", "2026-01-02"}, {"2026.01.02", "", "2026-01-02"}, {"20260102", "", "2026-01-02"},
		{"31.12.2026", "", "2026-12-31"}, {"31/12/26", "", "2026-12-31"}, {"12/31/2026", "", "2026-12-31"}, {"12-31-26", "", "2026-12-31"}, {"5/5/26", "", "2026-05-05"},
		{"03/04/2026", "", "?"}, {"3.4.26", "", "?"}, {"03/04/2026", DMY, "2026-04-03"}, {"03/04/2026", MDY, "2026-03-04"}, {"31/12/26", MDY, "2026-12-31"},
		{"31 Dec 2026", "", "2026-12-31"}, {"31-Dec-26", "", "2026-12-31"}, {"Dec 31, 2026", "", "2026-12-31"}, {"December 31st, 2026", "", "2026-12-31"}, {"1st of March 2026", "", "2026-03-01"},
		{"3 de marzo de 2026", "", "2026-03-03"}, {"3. März 2026", "", "2026-03-03"}, {"12 août 2026", "", "2026-08-12"}, {"Tue 3 Mar 2026", "", "2026-03-03"}, {"Tuesday, March 3, 2026", "", "2026-03-03"},
		{"2026-12-31 14:30", "", "2026-12-31"}, {"31/12/2026 2:30 PM", "", "2026-12-31"}, {"2026-12-31T14:30:00Z", "", "2026-12-31"},
		// POSIX.1-2017, strptime: %y from 69 to 99 is 1969 to 1999, from 00 to 68 it is 2000 to 2068.
		{"31.12.69", "", "1969-12-31"}, {"31.12.68", "", "2068-12-31"},
		{"31.02.2026", "", ""}, {"29 Feb 2026", "", ""}, {"29 Feb 2028", "", "2028-02-29"}, {"32/13/2026", "", ""}, {"2026", "", ""}, {"03/2026", "", ""}, {"March 2026", "", ""}, {"soon", "", ""}, {"", "", ""},
		{"14/16", "", ""}, {"3 Market 2026", "", ""}, {"20A", "", ""},
	} {
		day, ambiguous, err := ParseDate(c.text, c.order)
		switch {
		case c.want == "?" && !ambiguous, c.want != "?" && ambiguous:
			t.Errorf("%q %s: ambiguous %v", c.text, c.order, ambiguous)
		case (c.want == "" || c.want == "?") != (err != nil):
			t.Errorf("%q: %v, %v", c.text, day, err)
		case err == nil && day.String() != c.want:
			t.Errorf("%q %s: got %s, want %s", c.text, c.order, day, c.want)
		}
	}
}

// Every day comes back from each of its spellings.
func TestParseDate_EveryDay(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		day := forms.Day(rapid.IntRange(0, 30_000).Draw(t, "day"))
		for layout, order := range map[string]Order{"2006-01-02": "", "02.01.2006": DMY, "1/2/2006": MDY, "2 January 2006": "", "Jan 2, 2006": "", "2-Jan-2006": "", "2006/1/2": ""} {
			text := day.Time().Format(layout)
			got, _, err := ParseDate(text, order)
			if err != nil || got != day {
				t.Fatalf("%q: got %s, %v; want %s", text, got, err, day)
			}
		}
	})
}

func TestParseMonth(t *testing.T) {
	for text, want := range map[string]struct {
		year  int
		month time.Month
	}{"Jan": {0, 1}, "January 2026": {2026, 1}, "Jan-26": {2026, 1}, "Sept. '25": {2025, 9}, "2026-03": {2026, 3}, "03/2026": {2026, 3}, "marzo": {0, 3}, "Room": {}, "Mark": {}, "13/2026": {}, "Decor": {}} {
		year, month, ok := ParseMonth(text)
		if year != want.year || month != want.month || ok != (want.month != 0) {
			t.Errorf("%q: %d %s %v", text, year, month, ok)
		}
	}
}

func TestParseQuantity_FormsPeopleType(t *testing.T) {
	for _, c := range []struct {
		text, unit string
		value      float64
		in         string
		bound      Bound
		bad        bool
	}{
		{"20A", "A", 20, "A", Exact, false}, {"20", "A", 20, "A", Exact, false}, {"20 amps", "A", 20, "A", Exact, false}, {"0,3 s", "ms", 0.3, "s", Exact, false}, {".5", "s", 0.5, "s", Exact, false},
		{"<0.1", "ohm", 0.1, "ohm", Below, false}, {"≤ 0,10 Ω", "ohm", 0.1, "ohm", Below, false}, {">1999", "ms", 1999, "ms", Above, false}, {"> 300 ms", "ms", 300, "ms", Above, false},
		{"OL", "ohm", 0, "ohm", Over, false}, {"O.L.", "ohm", 0, "ohm", Over, false}, {"OL MΩ", "ohm", 0, "Mohm", Over, false}, {"over", "ms", 0, "ms", Over, false},
		{"1,234.5", "", 1234.5, "", Exact, false}, {"1.234,5", "", 1234.5, "", Exact, false}, {"1 234,5 V", "V", 1234.5, "V", Exact, false}, {"0,300", "s", 0.3, "s", Exact, false}, {"1.999", "s", 1.999, "s", Exact, false},
		{"1,999", "ms", 0, "", Exact, true}, {"-5", "mA", -5, "mA", Exact, false}, {"6 µA", "mA", 6, "uA", Exact, false}, {"120V", "A", 0, "", Exact, true}, {"20 parsecs", "A", 0, "", Exact, true},
		{"n/a", "A", 0, "", Exact, true}, {"", "A", 0, "", Exact, true}, {"14/16", "A", 0, "", Exact, true}, {"1.2.3", "A", 0, "", Exact, true}, {"1,2,3", "A", 0, "", Exact, true}, {"4 oz", "g", 4, "oz", Exact, false},
	} {
		q, err := ParseQuantity(c.text, c.unit)
		if (err != nil) != c.bad || err == nil && (q != Quantity{c.value, c.in, c.bound}) {
			t.Errorf("%q in %s: got %+v, %v", c.text, c.unit, q, err)
		}
	}
	if q, err := (Figures{DecimalComma: true}).Parse("1,999", "s"); err != nil || q.Value != 1.999 {
		t.Errorf("1,999 with a decimal comma: %+v, %v", q, err)
	}
}

func TestQuantity_In(t *testing.T) {
	for _, c := range []struct {
		from  float64
		unit  string
		to    string
		value float64
	}{
		{0.57, "s", "ms", 570}, {0.3, "s", "ms", 300}, {28, "ms", "s", 0.028}, {6500, "uA", "mA", 6.5}, {1, "Mohm", "ohm", 1e6},
		// NIST Special Publication 811 (2008), appendix B.8: 1 oz (avoirdupois) = 28.34952 g, 1 ft = 0.3048 m.
		{4, "oz", "g", 113.398093}, {10, "ft", "m", 3.048},
	} {
		if q, ok := (Quantity{Value: c.from, Unit: c.unit}).In(c.to); !ok || q.Value != c.value {
			t.Errorf("%v %s: got %v %s", c.from, c.unit, q.Value, c.to)
		}
	}
	if _, ok := (Quantity{Value: 1, Unit: "A"}).In("V"); ok {
		t.Error("amperes became volts")
	}
}

func TestParseYes(t *testing.T) {
	for text, want := range map[string]string{"Y": "yes", "yes": "yes", "✓": "yes", "✔️": "yes", "x": "yes", "X": "yes", "OK": "yes", "1": "yes", "TRUE": "yes", "N": "no", "No.": "no", "✗": "no", "0": "no", "": "", "n/a": "", "maybe": "", "-": ""} {
		yes, ok := ParseYes(text)
		got := map[bool]string{true: "yes", false: "no"}[yes]
		if !ok {
			got = ""
		}
		if got != want {
			t.Errorf("%q: got %q, want %q", text, got, want)
		}
	}
}

func FuzzValues(f *testing.F) {
	for _, s := range []string{"31.12.2026", "0,3 s", "OL", "Sept 3rd, '26", "1 234,5 V"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if day, ambiguous, err := ParseDate(s, UnknownOrder); err == nil && (ambiguous || day == forms.NoDay) {
			t.Fatalf("%q: neither a day nor a refusal", s)
		}
		if q, err := ParseQuantity(s, "ms"); err == nil && (q.Value != q.Value || measures[q.Unit].of != "time") {
			t.Fatalf("%q: %+v", s, q)
		}
		ParseMonth(s)
		ParseYes(s)
	})
}
