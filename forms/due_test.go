package forms

import (
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

func day(t testing.TB, s string) Day {
	t.Helper()
	d, err := ParseDay(s)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

func TestDay_AddMonthsClamps(t *testing.T) {
	// Clamp convention: java.time.LocalDate.plusMonths and PostgreSQL "date + interval '1 month'", library documentation.
	for _, c := range []struct {
		from string
		n    int
		want string
	}{
		{"2007-03-31", 1, "2007-04-30"},
		{"2019-01-31", 1, "2019-02-28"},
		{"2020-01-31", 1, "2020-02-29"},
		{"2024-02-29", 12, "2025-02-28"},
		{"2026-12-31", 2, "2027-02-28"},
		{"2026-03-31", -1, "2026-02-28"},
	} {
		if got := day(t, c.from).AddMonths(c.n).String(); got != c.want {
			t.Errorf("%s + %d months: got %s, want %s", c.from, c.n, got, c.want)
		}
	}
}

func TestDay_AddTimesCountsFromTheAnchor(t *testing.T) {
	anchor, month := day(t, "2026-01-31"), Interval{Months: 1}
	for k, want := range []string{"2026-01-31", "2026-02-28", "2026-03-31", "2026-04-30"} {
		if got := anchor.AddTimes(month, k).String(); got != want {
			t.Errorf("%d months after 31 January: got %s, want %s", k, got, want)
		}
	}
}

func TestInterval_Reads(t *testing.T) {
	for s, want := range map[string]Interval{
		"P1Y": {Months: 12}, "P12M": {Months: 12}, "P3M": {Months: 3}, "P2W": {Days: 14}, "P90D": {Days: 90},
		"P1Y6M": {Months: 18}, "P1M10D": {Months: 1, Days: 10}, "P0D": {},
	} {
		if got, err := ParseInterval(s); err != nil || got != want {
			t.Errorf("%s: got %v %v, want %v", s, got, err, want)
		}
	}
	for _, s := range []string{"", "P", "1M", "P1H", "PT1H", "P1.5M", "-P1M", "P1D1M", "P1M ", "p1m", "P99999M"} {
		if got, err := ParseInterval(s); err == nil {
			t.Errorf("%q: got %v, want a refusal", s, got)
		}
	}
}

func plan(duty, every string) *Plan {
	return &Plan{ID: "p", Revision: 1, Task: "button", Kinds: []string{"gfci-receptacle"}, Every: every, Duty: duty,
		InForce: Date(1900, time.January, 1)}
}

func TestPlan_RefusesCalendarForNotToExceed(t *testing.T) {
	p := plan(NotToExceed, "P3M")
	p.Count = Calendar
	err := p.Check()
	if err == nil || !strings.Contains(err.Error(), "179 days") {
		t.Fatalf("got %v, want a refusal that gives the reason", err)
	}
	// The reason itself: the two days lie in neighbouring calendar quarters and 179 days apart.
	jan, jun := day(t, "2026-01-02"), day(t, "2026-06-30")
	_, end := Interval{Months: 3}.period(jan)
	first, last := Interval{Months: 3}.period(end + 1)
	if jun-jan != 179 || jun < first || jun > last {
		t.Errorf("2 January and 30 June: %d days apart, second quarter %s to %s", jun-jan, first, last)
	}
}

func TestPlan_Refuses(t *testing.T) {
	for name, spoil := range map[string]func(*Plan){
		"no id":                   func(p *Plan) { p.ID = "" },
		"no task":                 func(p *Plan) { p.Task = "" },
		"revision 0":              func(p *Plan) { p.Revision = 0 },
		"no day in force":         func(p *Plan) { p.InForce = NoDay },
		"unreadable interval":     func(p *Plan) { p.Every = "monthly" },
		"no time at all":          func(p *Plan) { p.Every = "P0D" },
		"unknown duty":            func(p *Plan) { p.Duty = "often" },
		"grace on not-to-exceed":  func(p *Plan) { p.Duty, p.Grace = NotToExceed, "P7D" },
		"five-month periods":      func(p *Plan) { p.Every = "P5M" },
		"periods of days":         func(p *Plan) { p.Every = "P30D" },
		"grace of a whole period": func(p *Plan) { p.Grace = "P1M" },
		"rolling once-each":       func(p *Plan) { p.Count = Rolling },
		"unreadable grace":        func(p *Plan) { p.Grace = "a week" },
		"count by the moon":       func(p *Plan) { p.Duty, p.Count = NotToExceed, "moon" },
	} {
		p := plan(OnceEachPeriod, "P1M")
		spoil(p)
		if p.Check() == nil {
			t.Errorf("%s: accepted", name)
		}
	}
	if err := plan(OnceEachPeriod, "P1M").Check(); err != nil {
		t.Errorf("a good plan: %v", err)
	}
}

func TestInterval_Periods(t *testing.T) {
	for _, c := range []struct{ every, on, first, last string }{
		{"P1M", "2026-02-10", "2026-02-01", "2026-02-28"},
		{"P3M", "2026-12-01", "2026-10-01", "2026-12-31"},
		{"P6M", "2026-07-01", "2026-07-01", "2026-12-31"},
		{"P1Y", "2024-02-29", "2024-01-01", "2024-12-31"},
		{"P2Y", "2027-06-01", "2026-01-01", "2027-12-31"},
		// ISO 8601: 2026-W01 runs from Monday 29 December 2025 to Sunday 4 January 2026.
		{"P1W", "2026-01-01", "2025-12-29", "2026-01-04"},
		{"P1W", "1969-12-28", "1969-12-22", "1969-12-28"},
		{"P1D", "2026-01-01", "2026-01-01", "2026-01-01"},
	} {
		every, err := ParseInterval(c.every)
		if err != nil {
			t.Fatal(err)
		}
		first, last := every.period(day(t, c.on))
		if first.String() != c.first || last.String() != c.last {
			t.Errorf("%s on %s: got %s to %s, want %s to %s", c.every, c.on, first, last, c.first, c.last)
		}
	}
}

func TestSchedule_Dates(t *testing.T) {
	const start = "2026-01-31"
	for _, c := range []struct{ name, duty, every, last, due, opens string }{
		{"a new device is due by the end of its first month", OnceEachPeriod, "P1M", "", "2026-01-31", "2026-01-01"},
		{"a press in January makes the next one due in February", OnceEachPeriod, "P1M", "2026-01-03", "2026-02-28", "2026-02-01"},
		{"the next half-year", OnceEachPeriod, "P6M", "2026-02-01", "2026-12-31", "2026-07-01"},
		{"a new device gets its whole interval", NotToExceed, "P12M", "", "2027-01-31", "2026-12-31"},
		{"rolling from the last test, clamped", NotToExceed, "P3M", "2026-11-30", "2027-02-28", "2027-01-28"},
		{"rolling over a leap day", NotToExceed, "P1Y", "2024-02-29", "2025-02-28", "2025-01-28"},
	} {
		s := ScheduleOf("gfci-receptacle", []*Plan{plan(c.duty, c.every)}, nil)
		last := NoDay
		if c.last != "" {
			last = day(t, c.last)
		}
		got := s.Dates(Case{Start: day(t, start), Ended: NoDay}, func(string) Day { return last })
		if len(got) != 1 || got[0].Due.String() != c.due || got[0].Opens.String() != c.opens {
			t.Errorf("%s: got %+v, want due %s, opens %s", c.name, got, c.due, c.opens)
		}
	}
}

func TestSchedule_SitePlansGoBeforeTheOrganisations(t *testing.T) {
	org, site := plan(OnceEachPeriod, "P1M"), plan(NotToExceed, "P14D")
	site.ID = "site"
	yearly := plan(NotToExceed, "P1Y")
	yearly.ID, yearly.Task = "yearly", "instrument"
	s := ScheduleOf("gfci-receptacle", []*Plan{org, yearly}, []*Plan{site})
	got := s.Dates(Case{Start: day(t, "2026-01-01"), Ended: NoDay}, func(string) Day { return NoDay })
	if len(got) != 2 || got[0].Plan != "site" || got[1].Plan != "yearly" {
		t.Errorf("got %+v, want the site's button plan and the organisation's yearly one", got)
	}
	if s := ScheduleOf("receptacle", []*Plan{org}, nil); len(s) != 0 {
		t.Errorf("a plan that does not list the kind: got %d dates", len(s))
	}
	org.Kinds = append(org.Kinds, "receptacle")
	if s := ScheduleOf("receptacle", []*Plan{org}, nil); len(s) != 0 {
		t.Errorf("a receptacle has no TEST button, yet a button date was made")
	}
}

func TestSchedule_ANewRevisionDecidesFromItsDayInForce(t *testing.T) {
	first, second := plan(NotToExceed, "P1Y"), plan(NotToExceed, "P1M")
	second.Revision, second.InForce = 2, day(t, "2026-06-01")
	dates := func(last string) string {
		s := ScheduleOf("gfci-receptacle", []*Plan{second, first}, nil)
		return s.Dates(Case{Start: day(t, "2020-01-01"), Ended: NoDay}, func(string) Day { return day(t, last) })[0].Due.String()
	}
	for last, want := range map[string]string{
		"2025-03-01": "2026-03-01", // missed under the first revision: stays that date
		"2026-03-01": "2026-06-01", // the second asks at once, never before it is in force
		"2026-05-20": "2026-06-20",
		"2026-07-01": "2026-08-01",
	} {
		if got := dates(last); got != want {
			t.Errorf("last test %s: got due %s, want %s", last, got, want)
		}
	}
}

func TestDueDate_States(t *testing.T) {
	d := DueDate{Last: day(t, "2026-10-05"), Opens: day(t, "2026-11-01"), Due: day(t, "2026-11-30"), Until: day(t, "2026-12-07")}
	never := d
	never.Last = NoDay
	for on, want := range map[string][2]string{
		"2026-10-31": {Upcoming, NeverTested},
		"2026-11-01": {DueNow, NeverTested},
		"2026-11-30": {DueNow, NeverTested},
		"2026-12-01": {InGrace, InGrace},
		"2026-12-07": {InGrace, InGrace},
		"2026-12-08": {Overdue, Overdue},
	} {
		if got := [2]string{d.State(day(t, on)), never.State(day(t, on))}; got != want {
			t.Errorf("%s: got %v, want %v", on, got, want)
		}
	}
}

func TestMeets(t *testing.T) {
	yes, no := Reading{Value: "yes"}, Reading{Value: "no"}
	pressed := map[string]Reading{"button_trips": yes, "button_resets": yes}
	for _, c := range []struct {
		name, task, result string
		readings           map[string]Reading
		want               string
	}{
		{"a button test", "button", Pass, pressed, "button"},
		{"a fail was done too", "button", Fail, nil, "button"},
		{"what was not tested moves nothing", "button", NotTested, nil, ""},
		{"what is incomplete moves nothing", "instrument", Incomplete, pressed, ""},
		{"an instrument test with the button", "instrument", Pass, pressed, "instrument button"},
		{"an injected trip alone is no button test", "instrument", Pass, map[string]Reading{"trip_time_ms": {Value: 25.0}}, "instrument"},
		{"a button nobody could press", "instrument", Pass, map[string]Reading{"button_trips": {Missing: "no-access"}, "button_resets": yes}, "instrument"},
		{"pressed, and nobody looked whether it resets", "instrument", Pass, map[string]Reading{"button_trips": yes}, "instrument"},
		{"a button that does not trip", "instrument", Fail, map[string]Reading{"button_trips": no}, "instrument button"},
		{"a receptacle test is no button test", "receptacle", Pass, pressed, "receptacle"},
	} {
		if got := strings.Join(Meets(c.task, c.result, c.readings), " "); got != c.want {
			t.Errorf("%s: got %q, want %q", c.name, got, c.want)
		}
	}
}

func TestDueDate_Properties(t *testing.T) {
	everys := []string{"P1D", "P1W", "P1M", "P2M", "P3M", "P4M", "P6M", "P1Y", "P2Y"}
	rapid.Check(t, func(t *rapid.T) {
		last := Day(rapid.IntRange(-20000, 40000).Draw(t, "last"))
		every, err := ParseInterval(rapid.SampledFrom(everys).Draw(t, "every"))
		if err != nil {
			t.Fatal(err)
		}
		rolling, err := ruleOf(plan(NotToExceed, every.String()))
		if err != nil {
			t.Fatal(err)
		}
		calendar, err := ruleOf(plan(OnceEachPeriod, every.String()))
		if err != nil {
			t.Fatal(err)
		}
		rolling.InForce, calendar.InForce = -40000, -40000

		r := rolling.next(&Case{Start: last, Ended: NoDay}, last)
		if r.Due > last+Day(31*every.Months+every.Days) || r.Due <= last {
			t.Fatalf("rolling %s after %s: due %s", every, last, r.Due)
		}
		if k := rapid.IntRange(1, 40).Draw(t, "k"); last.AddTimes(every, k) < last.AddTimes(every, k-1)+1 {
			t.Fatalf("%d times %s after %s does not move on", k, every, last)
		}
		c := calendar.next(&Case{Start: last, Ended: NoDay}, last)
		first, end := every.period(last)
		if last < first || last > end || c.Opens != end+1 || c.Due < c.Opens {
			t.Fatalf("calendar %s after %s: period %s to %s, next %s to %s", every, last, first, end, c.Opens, c.Due)
		}
		// A test on any day of the period that closes moves the date by exactly one period.
		within := c.Opens + Day(rapid.IntRange(0, int(c.Due-c.Opens)).Draw(t, "within"))
		if n := calendar.next(&Case{Start: last, Ended: NoDay}, within); n.Opens != c.Due+1 {
			t.Fatalf("calendar %s tested %s: next period opens %s, want %s", every, within, n.Opens, c.Due+1)
		}
		// A later test never gives an earlier date.
		later := last + Day(rapid.IntRange(0, 800).Draw(t, "later"))
		if n := rolling.next(&Case{Start: last, Ended: NoDay}, later); n.Due < r.Due {
			t.Fatalf("rolling %s: test on %s due %s, test on %s due %s", every, last, r.Due, later, n.Due)
		}
	})
}
