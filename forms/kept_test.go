package forms

import (
	"math/rand"
	"slices"
	"strings"
	"testing"
	"time"
	_ "time/tzdata"

	"pgregory.net/rapid"
)

func schedules(t testing.TB, plans ...*Plan) Schedule {
	t.Helper()
	for _, p := range plans {
		if err := p.Check(); err != nil {
			t.Fatal(err)
		}
	}
	return ScheduleOf("gfci-receptacle", plans, nil)
}

// followed gives what dates come to by the end of a day, as words: due day, outcome.
func followed(s Schedule, c Case, tests []Test, on Day) string {
	var out []string
	for _, tr := range s.Follow(c, func(string) Day { return NoDay }) {
		for _, test := range tests {
			tr.Take(test)
		}
		tr.End()
		for _, o := range tr.Done {
			out = append(out, o.Due.String()+" "+o.Outcome(on))
		}
		if _, ok := tr.Next(); ok {
			for _, o := range tr.Waiting(on) {
				out = append(out, o.Due.String()+" "+o.Outcome(on))
			}
		}
	}
	return strings.Join(out, ", ")
}

func TestDay_DoesNotRunOverAsTheStandardLibraryDoes(t *testing.T) {
	// Go's time.AddDate "normalizes its result" (its documentation): each of these runs past the month meant.
	for _, c := range []struct {
		from       string
		months     int
		want, lost string
	}{
		{"2024-01-31", 1, "2024-02-29", "2024-03-02"},
		{"2023-01-31", 1, "2023-02-28", "2023-03-03"},
		{"2024-03-31", 1, "2024-04-30", "2024-05-01"},
		{"2024-03-31", 6, "2024-09-30", "2024-10-01"},
		{"2024-02-29", 12, "2025-02-28", "2025-03-01"},
		// Gregorian century rule: 1900 had no 29 February, 2000 had.
		{"1900-01-31", 1, "1900-02-28", "1900-03-03"},
		{"2000-01-31", 1, "2000-02-29", "2000-03-02"},
	} {
		from := day(t, c.from)
		if got := from.AddMonths(c.months).String(); got != c.want {
			t.Errorf("%s + %d months: got %s, want %s", c.from, c.months, got, c.want)
		}
		if got := DayOf(from.Time().AddDate(0, c.months, 0)).String(); got != c.lost {
			t.Errorf("%s + %d months by the standard library: got %s, and not %s as its documentation says", c.from, c.months, got, c.lost)
		}
	}
}

func TestTrace_WhatBecameOfDates(t *testing.T) {
	monthly, graced := plan(OnceEachPeriod, "P1M"), plan(OnceEachPeriod, "P1M")
	graced.Grace = "P7D"
	rolling := plan(NotToExceed, "P3M")
	at := func(days ...string) (out []Test) {
		for _, d := range days {
			text, locked := strings.CutPrefix(d, "locked ")
			out = append(out, Test{day(t, text), !locked, locked})
		}
		return out
	}
	for _, c := range []struct {
		name  string
		plan  *Plan
		tests []Test
		on    string
		want  string
	}{
		{"two months, the third open", monthly, at("2026-01-20", "2026-02-28"), "2026-03-05",
			"2026-01-31 in-time, 2026-02-28 in-time, 2026-03-31 open"},
		{"a month left out, a test in April", monthly, at("2026-01-20", "2026-04-02"), "2026-04-02",
			"2026-01-31 in-time, 2026-02-28 missed, 2026-03-31 missed, 2026-04-30 in-time, 2026-05-31 open"},
		{"every month that went by is missed by itself", monthly, at("2026-01-20"), "2026-04-01",
			"2026-01-31 in-time, 2026-02-28 missed, 2026-03-31 missed, 2026-04-30 open"},
		{"two tests of one month meet it once", monthly, at("2026-01-20", "2026-01-25"), "2026-01-31", "2026-01-31 in-time, 2026-02-28 open"},
		{"within the grace: the month before and its own", graced, at("2026-02-03"), "2026-02-03", "2026-01-31 in-grace, 2026-02-28 in-time, 2026-03-31 open"},
		{"in grace and not done: both are open", graced, nil, "2026-02-03", "2026-01-31 open, 2026-02-28 open"},
		{"grace is over", graced, nil, "2026-02-08", "2026-01-31 missed, 2026-02-28 open"},
		{"closed doors in two of three months that went by", monthly, at("2026-01-20", "locked 2026-02-11", "locked 2026-04-03"), "2026-05-01",
			"2026-01-31 in-time, 2026-02-28 no-access, 2026-03-31 missed, 2026-04-30 no-access, 2026-05-31 open"},
		{"a closed door in February", monthly, at("2026-01-20", "locked 2026-02-11"), "2026-03-31",
			"2026-01-31 in-time, 2026-02-28 no-access, 2026-03-31 open"},
		{"rolling: in time, late, open", rolling, at("2026-04-09", "2026-07-20"), "2026-07-21",
			"2026-04-10 in-time, 2026-07-09 late, 2026-10-20 open"},
		{"rolling: a date missed for long is one date", rolling, nil, "2027-07-01", "2026-04-10 missed"},
		{"rolling: the door was closed, then late", rolling, at("locked 2026-04-01", "2026-05-01"), "2026-05-01", "2026-04-10 late, 2026-08-01 open"},
	} {
		got := followed(schedules(t, c.plan), Case{Start: day(t, "2026-01-10"), Ended: NoDay}, c.tests, day(t, c.on))
		if got != c.want {
			t.Errorf("%s:\ngot  %s\nwant %s", c.name, got, c.want)
		}
	}
}

func TestTrace_ADeviceTakenOutOfUse(t *testing.T) {
	c := Case{Start: day(t, "2026-01-10"), Ended: day(t, "2026-04-10")}
	got := followed(schedules(t, plan(OnceEachPeriod, "P1M")), c, []Test{{Day: day(t, "2026-02-03"), Meets: true}}, day(t, "2027-01-01"))
	if want := "2026-01-31 missed, 2026-02-28 in-time, 2026-03-31 missed"; got != want {
		t.Errorf("got %s, want %s: nothing is asked after the day it was retired", got, want)
	}
}

func TestOccasion_AsksAtOnce(t *testing.T) {
	button, measured := plan(OnceEachPeriod, "P1M"), plan(NotToExceed, "P1Y")
	measured.ID, measured.Task = "measured", "instrument"
	listed := plan(OnceEachPeriod, "P1M")
	listed.Occasions = map[string]string{Storm: "P7D"}
	for _, c := range []struct {
		name  string
		plans []*Plan
		o     Occasion
		last  string
		want  string // task: due cause
	}{
		{"a storm asks for every test that day", []*Plan{button, measured}, Occasion{Cause: Storm, On: day(t, "2026-03-10")}, "2026-03-09",
			"button 2026-03-10 storm, instrument 2026-03-10 storm"},
		{"a test of that day meets it", []*Plan{button}, Occasion{Cause: Storm, On: day(t, "2026-03-10")}, "2026-03-10", "button 2026-04-30 "},
		{"an instrument out of tolerance asks for what it measured, not for the button", []*Plan{button, measured}, Occasion{Cause: OutOfTolerance, On: day(t, "2026-03-10")}, "2026-03-09",
			"button 2026-04-30 , instrument 2026-03-10 instrument"},
		{"named tasks are asked for whatever the plan answers to", []*Plan{listed}, Occasion{Cause: Damage, On: day(t, "2026-03-10"), Tasks: []string{"button"}}, "2026-03-09", "button 2026-03-10 damage"},
		{"within a week, where the plan says so", []*Plan{listed}, Occasion{Cause: Storm, On: day(t, "2026-03-10")}, "2026-03-09", "button 2026-03-17 storm"},
		{"a plan that lists its causes answers to no other", []*Plan{listed}, Occasion{Cause: Damage, On: day(t, "2026-03-10")}, "2026-03-09", "button 2026-04-30 "},
		{"an occasion before the device came", []*Plan{button}, Occasion{Cause: Storm, On: day(t, "2025-03-10")}, "", "button 2026-01-31 "},
		{"a test of that day from before it happened does not meet it", []*Plan{button, measured}, Occasion{Cause: Repaired, On: day(t, "2026-03-10"), Before: []string{"button"}}, "2026-03-10",
			"button 2026-03-11 repaired, instrument 2027-03-10 "},
		{"the earlier date stands", []*Plan{button}, Occasion{Cause: Storm, On: day(t, "2026-06-10")}, "2026-03-09", "button 2026-04-30 "},
	} {
		last := NoDay
		if c.last != "" {
			last = day(t, c.last)
		}
		var got []string
		for _, d := range schedules(t, c.plans...).Dates(Case{Start: day(t, "2026-01-10"), Ended: NoDay, Occasions: []Occasion{c.o}}, func(string) Day { return last }) {
			got = append(got, d.Task+" "+d.Due.String()+" "+d.Cause)
		}
		if got := strings.Join(got, ", "); got != c.want {
			t.Errorf("%s: got %q, want %q", c.name, got, c.want)
		}
	}
	every := plan(OnceEachPeriod, "P1M")
	every.Occasions = map[string]string{Installed: "P0D", Repaired: "P0D", Damage: "P0D", Storm: "P0D", OutOfTolerance: "P0D"}
	for _, cause := range Causes() {
		c := Case{Start: day(t, "2026-01-10"), Ended: NoDay, Occasions: []Occasion{{Cause: cause, On: day(t, "2026-03-10")}}}
		for p, want := range map[*Plan]bool{every: true, button: cause != Installed && cause != OutOfTolerance} {
			d := schedules(t, p).Dates(c, func(string) Day { return day(t, "2026-03-02") })[0]
			if got := d.Due.String() == "2026-03-10" && d.State(d.Due+1) == Overdue; got != want {
				t.Errorf("%s, causes listed %t: due %s", cause, p == every, d.Due)
			}
		}
	}
	got := followed(schedules(t, button), Case{Start: day(t, "2026-01-10"), Ended: NoDay, Occasions: []Occasion{{Cause: Storm, On: day(t, "2026-02-10")}}},
		[]Test{{Day: day(t, "2026-02-05"), Meets: true}, {Day: day(t, "2026-02-12"), Meets: true}}, day(t, "2026-02-12"))
	if want := "2026-01-31 missed, 2026-02-28 in-time, 2026-02-10 late, 2026-03-31 open"; got != want {
		t.Errorf("a storm between two tests: got %s, want %s", got, want)
	}
}

func TestPause_MovesWhatFallsIntoIt(t *testing.T) {
	pause := []Pause{{From: day(t, "2026-03-01"), Until: day(t, "2026-06-05"), Reason: "ward closed"}}
	c := Case{Start: day(t, "2026-01-10"), Ended: NoDay, Pauses: pause}
	date := func(p *Plan, last string) DueDate {
		return schedules(t, p).Dates(c, func(string) Day { return day(t, last) })[0]
	}
	if d := date(plan(NotToExceed, "P3M"), "2026-01-20"); d.Due.String() != "2026-06-06" || d.State(day(t, "2026-05-01")) != Paused || d.State(day(t, "2026-06-06")) != DueNow || d.State(day(t, "2026-06-07")) != Overdue {
		t.Errorf("a rolling date in a pause: got %+v, want it due on the day after", d)
	}
	if d := date(plan(OnceEachPeriod, "P1M"), "2026-02-20"); d.Due.String() != "2026-06-30" {
		t.Errorf("months that end in a pause are not asked for: got %s, want 2026-06-30", d.Due)
	}
	d := date(plan(NotToExceed, "P1M"), "2026-01-15")
	if d.Due.String() != "2026-02-15" || d.State(day(t, "2026-03-10")) != Paused || d.State(day(t, "2026-06-06")) != Overdue {
		t.Errorf("what was overdue before: got %+v, want it overdue again after the pause", d)
	}
	got := followed(schedules(t, plan(OnceEachPeriod, "P1M")), c, []Test{{Day: day(t, "2026-02-20"), Meets: true}, {Day: day(t, "2026-06-20"), Meets: true}}, day(t, "2026-06-20"))
	if want := "2026-01-31 missed, 2026-02-28 in-time, 2026-06-30 in-time, 2026-07-31 open"; got != want {
		t.Errorf("got %s, want %s", got, want)
	}
}

func TestPlan_FirstDates(t *testing.T) {
	p := plan(NotToExceed, "P3M")
	p.Start = &Start{New: "P0D", Replaced: "P7D"}
	p.Lead = "P14D"
	for way, want := range map[string]string{New: "2026-01-31 2026-01-31", Replaced: "2026-02-07 2026-01-31", Imported: "2026-04-30 2026-04-16"} {
		d := schedules(t, p).Dates(Case{Start: day(t, "2026-01-31"), Way: way, Ended: NoDay}, func(string) Day { return NoDay })[0]
		if got := d.Due.String() + " " + d.Opens.String(); got != want {
			t.Errorf("%s: got due and open %s, want %s", way, got, want)
		}
	}
	p.Start.New = "P4M"
	if err := p.Check(); err == nil || !strings.Contains(err.Error(), "not to be exceeded") {
		t.Errorf("a first date later than a not-to-exceed interval: got %v, want a refusal", err)
	}
}

func TestPlan_FirstRound(t *testing.T) {
	monthly, rolling := plan(OnceEachPeriod, "P1M"), plan(NotToExceed, "P1Y")
	for _, p := range []*Plan{monthly, rolling} {
		p.FirstRound = &FirstRound{From: day(t, "2026-03-01"), Within: "P2M"}
	}
	for _, c := range []struct {
		name        string
		plan        *Plan
		start, last string
		want        string
	}{
		{"never tested, by the end of the first round", monthly, "2026-02-20", "", "2026-05-01"},
		{"taken in while it goes on", monthly, "2026-04-10", "", "2026-05-01"},
		{"after it, as ever", monthly, "2026-05-10", "", "2026-05-31"},
		{"done long ago", rolling, "2026-02-20", "2023-06-01", "2026-05-01"},
		{"a date not passed yet is not to be exceeded", rolling, "2026-02-20", "2025-03-10", "2026-03-10"},
		{"done since", rolling, "2026-02-20", "2026-03-05", "2027-03-05"},
	} {
		last := NoDay
		if c.last != "" {
			last = day(t, c.last)
		}
		d := schedules(t, c.plan).Dates(Case{Start: day(t, c.start), Way: Imported, Ended: NoDay}, func(string) Day { return last })[0]
		if d.Due.String() != c.want {
			t.Errorf("%s: got %s, want %s", c.name, d.Due, c.want)
		}
	}
}

func TestMarks_TurnWithTheCalendar(t *testing.T) {
	m := &Marks{Every: "P3M", List: []Mark{{"North", "white"}, {"East", "green"}, {"South", "red"}, {"West", "blue"}}}
	p := plan(NotToExceed, "P3M")
	p.Marks = m
	if err := p.Check(); err != nil {
		t.Fatal(err)
	}
	now, ok := m.On(day(t, "2026-12-01"))
	if !ok || now.Word != "West" || now.From.String() != "2026-10-01" || now.Until.String() != "2026-12-31" {
		t.Errorf("got %+v", now)
	}
	if next := m.After(now); next.Word != "North" || next.From.String() != "2027-01-01" {
		t.Errorf("then: got %+v", next)
	}
	for name, spoil := range map[string]func(*Marks){
		"one mark":       func(m *Marks) { m.List = m.List[:1] },
		"a word twice":   func(m *Marks) { m.List = []Mark{{"A", ""}, {"A", ""}} },
		"weeks":          func(m *Marks) { m.Every = "P2W" },
		"unknown colour": func(m *Marks) { m.List = []Mark{{"A", "puce"}, {"B", ""}} },
	} {
		spoilt := &Marks{m.Every, slices.Clone(m.List)}
		spoil(spoilt)
		p.Marks = spoilt
		if p.Check() == nil {
			t.Errorf("%s: accepted", name)
		}
	}
}

// drawnDevice is a device with plans, occasions and tests of any days.
func drawnDevice(t *rapid.T, duty string, pauses bool) (Schedule, *Plan, Case, []Test) {
	every := []string{"P1W", "P1M", "P2M", "P3M", "P6M", "P1Y"}
	p := plan(duty, rapid.SampledFrom(every).Draw(t, "every"))
	p.InForce = -40000
	if duty == OnceEachPeriod {
		p.Grace = rapid.SampledFrom([]string{"", "P3D", "P10D"}).Draw(t, "grace")
	}
	p.Lead = rapid.SampledFrom([]string{"", "P5D", "P1M"}).Draw(t, "lead")
	start := Day(rapid.IntRange(20000, 20400).Draw(t, "start"))
	c := Case{Start: start, Ended: NoDay}
	for range rapid.IntRange(0, 2).Draw(t, "occasions") {
		c.Occasions = append(c.Occasions, Occasion{Cause: Storm, On: start + Day(rapid.IntRange(-20, 400).Draw(t, "storm"))})
	}
	slices.SortFunc(c.Occasions, func(a, b Occasion) int { return int(a.On - b.On) })
	if pauses && rapid.Bool().Draw(t, "paused") {
		from := start + Day(rapid.IntRange(0, 300).Draw(t, "pause"))
		c.Pauses = []Pause{{From: from, Until: from + Day(rapid.IntRange(0, 120).Draw(t, "for"))}}
	}
	var tests []Test
	for range rapid.IntRange(0, 14).Draw(t, "tests") {
		meets := rapid.IntRange(0, 3).Draw(t, "locked") > 0
		tests = append(tests, Test{start + Day(rapid.IntRange(-30, 500).Draw(t, "day")), meets, !meets})
	}
	return ScheduleOf("gfci-receptacle", []*Plan{p}, nil), p, c, tests
}

func trace(s Schedule, c Case, last Day) *Trace {
	return &s.Follow(c, func(string) Day { return last })[0]
}

func TestTrace_Properties(t *testing.T) {
	never := func(s Schedule, c Case, tests []Test) *Trace {
		tr := trace(s, c, NoDay)
		sorted := slices.Clone(tests)
		SortTests(sorted)
		for _, test := range sorted {
			tr.Take(test)
		}
		return tr
	}
	t.Run("not-to-exceed is never later than the anchor and the interval", func(t *testing.T) {
		rapid.Check(t, func(t *rapid.T) {
			s, p, c, tests := drawnDevice(t, NotToExceed, false)
			every, _ := ParseInterval(p.Every)
			tr := never(s, c, tests)
			anchor := c.Start
			for _, test := range tests {
				if test.Meets {
					anchor = max(anchor, test.Day)
				}
			}
			if d, _ := tr.Next(); d.Due > anchor.Add(every) {
				t.Fatalf("last %s, every %s: due %s", anchor, every, d.Due)
			}
			for _, o := range tr.Done {
				if base := max(c.Start, o.Last); o.Cause == "" && o.Due > base.Add(every) {
					t.Fatalf("%+v is later than %s + %s", o, base, every)
				}
			}
		})
	})
	t.Run("grace never hides overdue", func(t *testing.T) {
		rapid.Check(t, func(t *rapid.T) {
			s, p, c, tests := drawnDevice(t, OnceEachPeriod, false)
			grace, _ := p.grace()
			tr := never(s, c, tests)
			d, _ := tr.Next()
			if d.Cause != "" {
				grace = Interval{} // an occasion has none
			}
			on := c.Start + Day(rapid.IntRange(0, 900).Draw(t, "on"))
			if late := on > d.Due.Add(grace); late != (d.State(on) == Overdue) {
				t.Fatalf("due %s with %q, on %s: state %s", d.Due, p.Grace, on, d.State(on))
			}
			for _, o := range append(slices.Clone(tr.Done), tr.Waiting(on)...) {
				if got := o.Outcome(on); (o.Met == NoDay || o.Met > o.Due) && got == InTime {
					t.Fatalf("%+v counts as in time", o)
				}
			}
		})
	})
	t.Run("the order in which tests become known has no say, nor whether they come at once or one by one", func(t *testing.T) {
		rapid.Check(t, func(t *rapid.T) {
			s, _, c, tests := drawnDevice(t, rapid.SampledFrom([]string{NotToExceed, OnceEachPeriod}).Draw(t, "duty"), true)
			want := never(s, c, tests)
			rand.New(rand.NewSource(rapid.Int64().Draw(t, "shuffle"))).Shuffle(len(tests), func(i, j int) { tests[i], tests[j] = tests[j], tests[i] })
			if got := never(s, c, tests); !slices.Equal(got.Kept(), want.Kept()) {
				t.Fatalf("shuffled: got %v, want %v", got.Kept(), want.Kept())
			}
			var kept []Kept
			last, shut := NoDay, []Test(nil)
			SortTests(tests)
			for _, test := range tests {
				one := trace(s, c, last)
				for _, before := range shut {
					one.Take(before)
				}
				one.Take(test)
				kept = append(kept, one.Kept()...)
				if test.Meets {
					last, shut = max(last, test.Day), nil
				} else {
					shut = append(shut, test)
				}
			}
			if !slices.Equal(kept, want.Kept()) {
				t.Fatalf("one by one: got %v, want %v", kept, want.Kept())
			}
		})
	})
	t.Run("what a month came to stays, whatever is done later", func(t *testing.T) {
		rapid.Check(t, func(t *rapid.T) {
			s, _, c, tests := drawnDevice(t, rapid.SampledFrom([]string{NotToExceed, OnceEachPeriod}).Draw(t, "duty"), true)
			on := c.Start + Day(rapid.IntRange(0, 500).Draw(t, "on"))
			counted := func(tests []Test) (c2 Count) {
				early := c
				tr := never(s, early, tests)
				for _, o := range append(slices.Clone(tr.Done), tr.Waiting(on)...) {
					if o.Opens <= on && o.Counts() <= on && o.Outcome(on) != Open {
						c2.Add(o.Outcome(on), 1)
					}
				}
				return c2
			}
			then := counted(slices.DeleteFunc(slices.Clone(tests), func(t Test) bool { return t.Day > on }))
			now := counted(tests)
			then.Missed, then.NoAccess = then.Missed+then.NoAccess, 0
			now.Missed, now.NoAccess = now.Missed+now.NoAccess, 0
			if then != now {
				t.Fatalf("on %s: then %+v, now %+v", on, then, now)
			}
		})
	})
}

func TestState_CountsCivilDaysOfTheSite(t *testing.T) {
	// IANA tz database: daylight saving time began in America/Chicago on 2026-03-08 and in Pacific/Auckland ended on 2026-04-05.
	for _, c := range []struct{ zone, at, want string }{
		{"America/Chicago", "2026-03-09T04:59:00Z", "2026-03-08"},  // 23:59 CDT, a day of 23 hours
		{"America/Chicago", "2026-03-09T05:00:00Z", "2026-03-09"},  // 00:00 CDT
		{"America/Chicago", "2026-11-02T05:59:00Z", "2026-11-01"},  // 23:59 CST, a day of 25 hours
		{"Pacific/Auckland", "2026-04-05T11:59:00Z", "2026-04-05"}, // 23:59 NZST
		{"Pacific/Auckland", "2026-04-05T12:00:00Z", "2026-04-06"},
	} {
		zone, err := time.LoadLocation(c.zone)
		if err != nil {
			t.Fatal(err) // the zones come with the test, not with the machine
		}
		at, err := time.Parse(time.RFC3339, c.at)
		if err != nil {
			t.Fatal(err)
		}
		if got := DayOf(at.In(zone)).String(); got != c.want {
			t.Errorf("%s in %s: got %s, want %s", c.at, c.zone, got, c.want)
		}
	}
}
