package server

import (
	"cmp"
	"net/http"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// roundHours is how long a round may be where nobody says: a crew's day with the way there.
const roundHours = 6

// visitPage is a visit of a site on a day: what waits there, and the rounds that clear it.
type visitPage struct {
	Frame
	Crumbs                      []link
	Heading, Under              string
	Day, Until, Hours, DayError string
	Sites, Tasks, Buildings     []option
	Floors                      []option
	Ready                       bool // a site is chosen
	Facts                       []string
	Rounds                      []visitRound
	Defects                     []decision
	Left                        string // how many more defects there are
	Tell                        []string
	Action, Submit              string
	Hidden                      []hidden
	Fields                      []field
	None                        string
	Wrong                       []link
	Pace                        string
}

// visitRound is a round as it is offered.
type visitRound struct {
	Name, Under, Stops, Minutes, N string
	Make                           bool
	Who                            []option
	Groups                         []stopGroup
}

// visitAsk reads what a visit is asked for.
func (s *Server) visitAsk(c echo.Context, view *visitPage, site store.Site) store.VisitAsk {
	k := s.ink()
	today := s.today(site)
	ask := store.VisitAsk{Site: site.ID, Day: today, Until: forms.NoDay, Task: c.QueryParam("task"), Building: c.QueryParam("building"), Floor: c.QueryParam("floor")}
	if !slices.Contains(forms.Tasks(), ask.Task) {
		ask.Task = ""
	}
	for _, q := range []struct {
		name string
		day  *forms.Day
	}{{"day", &ask.Day}, {"until", &ask.Until}} {
		typed := strings.TrimSpace(c.QueryParam(q.name))
		if d, err := forms.ParseDay(typed); err == nil {
			*q.day = d
		} else if typed != "" {
			view.DayError = k.say("office.dates.bad_day")
		}
	}
	if ask.Until == forms.NoDay {
		ask.Until = monthEnd(ask.Day)
	}
	hours, err := strconv.ParseFloat(strings.Replace(c.QueryParam("hours"), ",", ".", 1), 64)
	if err != nil || hours < 0.25 || hours > 24 {
		hours = roundHours
	}
	ask.Most = 60 * hours
	view.Day, view.Until, view.Hours = ask.Day.String(), ask.Until.String(), strconv.FormatFloat(hours, 'f', -1, 64)
	return ask
}

func monthEnd(d forms.Day) forms.Day {
	y, m, _ := d.Time().Date()
	return forms.Date(y, m+1, 1) - 1
}

func (s *Server) roundNew(c echo.Context) error {
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	return s.visitBack(c, f)
}

// visitBack sends the page of a visit: as new, or with what was typed and what is wrong with it.
func (s *Server) visitBack(c echo.Context, f *typedForm) error {
	k := s.ink()
	view := visitPage{Frame: s.frame(c, k.say("office.visit.title"), "rounds"), Crumbs: []link{{Href: "/rounds", Text: k.say("office.round.title")}}}
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildVisit(c, v, f, &view) })
	if err != nil {
		return err
	}
	status := http.StatusOK
	if !f.ok() {
		status = http.StatusUnprocessableEntity
	}
	p := formPage{Groups: []fieldGroup{{Fields: view.Fields}}}
	f.fill(&p)
	view.Fields, view.Wrong = p.Groups[0].Fields, p.Wrong
	view.Hidden = append(view.Hidden, hidden{recordField, f.Get(recordField)})
	return s.page(c, status, "visit.html", view)
}

func (s *Server) buildVisit(c echo.Context, v *store.View, f *typedForm, view *visitPage) error {
	k := s.ink()
	sites, err := v.Sites()
	if err != nil {
		return err
	}
	chosen := store.Site{}
	view.Sites = choices("", "", k.say("office.visit.choose"))
	for _, site := range sites {
		is := len(sites) == 1 || c.QueryParam("site") == site.ID || strings.EqualFold(c.QueryParam("site"), site.Code)
		if is {
			chosen = site
		}
		view.Sites = append(view.Sites, option{site.ID, site.Name, is})
	}
	view.Heading, view.Under = k.say("office.visit.heading"), k.say("office.visit.lead")
	ask := s.visitAsk(c, view, chosen)
	view.Tasks = choices(ask.Task, "", k.say("office.dates.all_tests"))
	for _, task := range forms.Tasks() {
		view.Tasks = append(view.Tasks, option{task, k.named("task", task), task == ask.Task})
	}
	if chosen.ID == "" {
		return nil
	}
	visit, err := v.Visit(ask)
	if err != nil {
		return err
	}
	view.Ready = true
	view.Buildings = namesOf(ask.Building, k.say("office.visit.all_buildings"), visit.Buildings)
	view.Floors = namesOf(ask.Floor, k.say("office.visit.all_floors"), visit.Floors)
	return s.fillVisit(c, v, f, ask, visit, view)
}

func namesOf(chosen, all string, names []string) []option {
	out := choices(chosen, "", all)
	for _, name := range names {
		out = append(out, option{name, name, name == chosen})
	}
	return out
}

// fillVisit says what waits, then offers the rounds.
func (s *Server) fillVisit(c echo.Context, v *store.View, f *typedForm, ask store.VisitAsk, visit store.Visit, view *visitPage) error {
	k, today := s.ink(), s.today(visit.Site)
	view.Heading = k.say("office.visit.fact", "site", visit.Site.Name, "day", k.longDay(ask.Day), "tests", k.say("office.visit.tests", "n", len(visit.Stops)))
	view.Under = k.say("office.visit.under", "rounds", k.say("office.visit.rounds", "n", len(visit.Starts)), "hours", cmp.Or(k.minutes(int(visit.Minutes+0.5)), k.say("office.round.min", "n", 0)))
	say := func(key string, n int, more ...any) {
		if n > 0 {
			view.Facts = append(view.Facts, k.say("office.visit."+key, append([]any{"n", n}, more...)...))
		}
	}
	say("overdue", visit.Overdue)
	say("failed", len(visit.Defects))
	say("on_rounds", visit.OnRounds)
	for _, i := range visit.Expired {
		view.Facts = append(view.Facts, k.say("office.visit.expired", "name", joined(i.Name, i.Serial), "day", k.near(i.CalibrationDue, today)))
	}
	missing := 0
	for _, g := range visit.Gaps {
		missing += int(g.To-g.From) + 1
	}
	say("gaps", missing)
	for i := range visit.Defects[:min(len(visit.Defects), decideShown)] {
		one, err := s.decisionOf(v, &visit.Defects[i], visit.Site)
		if err != nil {
			return err
		}
		one.Where = s.place(visit.Defects[i].Device.Place)
		view.Defects = append(view.Defects, one)
	}
	if len(visit.Defects) > decideShown {
		view.Left = k.say("office.overview.more_failed", "n", count(len(visit.Defects)))
	}
	view.Pace = s.paceLine(visit.Pace)
	view.None = k.say("office.visit.nothing", "day", k.day(ask.Until))
	if len(visit.Stops) == 0 {
		return nil
	}
	var tell telling
	for i, start := range visit.Starts {
		end := len(visit.Stops)
		if i+1 < len(visit.Starts) {
			end = visit.Starts[i+1]
		}
		one := s.visitRound(visit.Stops[start:end], i, len(visit.Starts), today)
		one.Make = !f.Has("stops."+one.N) || f.Get("make."+one.N) == "yes"
		for _, stop := range visit.Stops[start:end] {
			tell.add(stop.Device.Place)
		}
		if view.Change {
			var err error
			if one.Who, err = s.walkers(visit.Site.ID); err != nil {
				return err
			}
			for j := range one.Who {
				one.Who[j].Chosen = one.Who[j].Value == f.Get("who."+one.N)
			}
		}
		view.Rounds = append(view.Rounds, one)
	}
	view.Tell = tell.lines(k)
	s.visitForm(c, f, ask, view)
	return nil
}

// paceLine says where the minutes come from.
func (s *Server) paceLine(pace map[string]store.Pace) string {
	k := s.ink()
	var said []string
	for _, task := range forms.Tasks() {
		p := pace[task]
		key := "office.visit.pace_own"
		if p.From == 0 {
			key = "office.visit.pace_default"
		}
		said = append(said, k.say(key, "task", lowerFirst(k.named("task", task)), "min", limitFigure(float64(int(p.Minutes*10+0.5))/10), "n", p.From))
	}
	return k.say("office.visit.pace", "list", strings.Join(said, "; "))
}

func (s *Server) visitRound(stops []store.VisitStop, n, of int, today forms.Day) visitRound {
	k := s.ink()
	minutes, ids := 0.0, make([]string, len(stops))
	one := visitRound{Name: k.say("office.visit.one"), N: strconv.Itoa(n)}
	if of > 1 {
		one.Name = k.say("office.visit.round_n", "i", n+1, "of", of)
	}
	for i, stop := range stops {
		minutes += stop.Minutes
		ids[i] = stop.Device.ID + "/" + stop.Task
		row := stopRow{Href: "/devices/" + stop.Device.ID, Spot: s.spot(stop.Device), Tag: k.tag(stop.Device.Tag), Where: s.place(stop.Device.Place), Task: k.named("task", stop.Task),
			State: mark{"none", k.named("state", stop.State)}, Said: k.near(stop.Due, today)}
		if stop.State == "overdue" {
			row.State.Shape = "watch"
		}
		for _, also := range stop.Also {
			row.Task = k.say("office.visit.also", "task", row.Task, "also", lowerFirst(k.named("task", also)))
		}
		if g := len(one.Groups); g == 0 || one.Groups[g-1].Place != row.Where {
			one.Groups = append(one.Groups, stopGroup{Place: row.Where})
		}
		g := &one.Groups[len(one.Groups)-1]
		g.Rows = append(g.Rows, row)
	}
	one.Stops, one.Minutes = strings.Join(ids, " "), strconv.Itoa(int(minutes+0.5))
	one.Under = joined(k.say("office.visit.tests", "n", len(stops)), k.say("office.visit.about", "time", k.minutes(int(minutes+0.5))))
	return one
}

// walkers are the people a round at a site may be given to.
func (s *Server) walkers(site string) ([]option, error) {
	people, err := s.store.People()
	if err != nil {
		return nil, err
	}
	out := choices("", "", s.words.Say("office.round.anybody"))
	for _, p := range people {
		if p.Active && p.Role != "auditor" && p.Scope().May(site) {
			out = append(out, option{Value: p.ID, Text: p.Name})
		}
	}
	return out, nil
}

// visitForm is what is asked of the rounds before they are made.
func (s *Server) visitForm(c echo.Context, f *typedForm, ask store.VisitAsk, view *visitPage) {
	k := s.ink()
	if !view.Change {
		return
	}
	view.Action, view.Submit = "/rounds?"+c.QueryParams().Encode(), k.say("office.visit.make", "n", len(view.Rounds))
	view.Hidden = []hidden{{"site", ask.Site}, {"day", ask.Day.String()}, {"until", ask.Until.String()}}
	view.Fields = s.carryFields(f)
}

// carryFields ask what a round carries beside its list.
func (s *Server) carryFields(f *typedForm) []field {
	k := s.ink()
	return slices.Concat([]field{
		{Name: "starts", Label: k.say("office.round.field.starts"), Type: "time", Hint: k.say("office.round.starts_hint")},
	}, s.outsideTick(f), []field{
		{Name: "crew", Label: k.say("office.round.field.crew"), Type: "text", Hint: k.say("office.round.crew_hint")},
		{Name: "note", Label: k.say("office.round.field.note"), Type: "text-area", Wide: true, Hint: k.say("office.round.note_hint")},
	})
}

// roundMost is how many tests one round may carry: its record must stay well under its limit.
const roundMost = 900

// roundCreate makes the rounds a visit offered, as they were shown: what became due or was done meanwhile changes nothing.
func (s *Server) roundCreate(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	base, site := f.id(recordField), f.Get("site")
	day, until, starts := f.date("day"), f.date("until"), f.clock("starts")
	crew, note := f.line("crew", 80), f.line("note", 500)
	var drafts []store.Draft
	err = s.store.View(scope(c), func(v *store.View) error {
		for n := 0; f.Has("stops." + strconv.Itoa(n)); n++ {
			number := strconv.Itoa(n)
			if f.Get("make."+number) != "yes" {
				continue
			}
			stops := strings.Fields(f.Get("stops." + number))
			if err := s.checkStops(v, site, stops); err != nil {
				return err
			}
			warning, err := s.outsideHours(v, site, starts, stops)
			if err != nil {
				return err
			}
			s.warnOfHours(f, warning)
			set := map[string]any{"stops": stops}
			for name, value := range map[string]string{"day": day.String(), "until": until.String(), "starts": starts, "crew": crew, "note": note} {
				if value != "" {
					set[name] = value
				}
			}
			if who := f.Get("who." + number); who != "" {
				set["people"] = []string{who}
			}
			if m, err := strconv.Atoi(f.Get("minutes." + number)); err == nil {
				set["minutes"] = m
			}
			id := record.NamedID(base, "round", number)
			drafts = append(drafts, store.Draft{ID: record.NamedID(base, "round.made", number), Kind: "round.made", Log: site, Subject: id, Body: map[string]any{"set": set}})
		}
		return nil
	})
	switch {
	case err != nil:
		return err
	case len(drafts) == 0:
		f.text = s.words.Say("office.visit.none_chosen")
	}
	if !f.ok() {
		return s.visitBack(c, f)
	}
	if err := s.append(c, drafts...); err != nil {
		return err
	}
	if len(drafts) == 1 {
		return toPage(c, "/rounds/"+drafts[0].Subject)
	}
	return toPage(c, "/rounds")
}

// checkStops holds the stops of a round to devices of the site.
func (s *Server) checkStops(v *store.View, site string, stops []string) error {
	if len(stops) == 0 || len(stops) > roundMost {
		return refuse(codeInvalid, "stops", s.words.Say("office.visit.too_many", "n", roundMost))
	}
	if _, err := v.Site(site); err != nil {
		return err
	}
	for _, stop := range stops {
		if !record.IsStop(stop) || !slices.Contains(forms.Tasks(), stop[37:]) {
			return refuse(codeInvalid, "stops", s.words.Say("office.form.broken"))
		}
		d, err := v.Device(stop[:36], forms.DayOf(s.store.Now()))
		if err != nil {
			return err
		}
		if d.Site != site {
			return refuse(codeInvalid, "stops", s.words.Say("office.form.broken"))
		}
	}
	return nil
}
