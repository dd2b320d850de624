package server

import (
	"net/http"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// roundsShown is how many rounds that are done with the list shows.
const roundsShown = 100

// roundRefresh is how often, in seconds, the page of a round that is being walked reads itself again.
const roundRefresh = 30

// roundsPage lists rounds: those that wait for somebody first.
type roundsPage struct {
	Frame
	Heading, Under string
	Groups         []roundGroup
	NewHref        string
	None           string
}

type roundGroup struct {
	Name string
	Rows []roundRow
}

// roundRow is a round in the list.
type roundRow struct {
	Href, Name, Site, Who, Said, Time string
	State                             mark
	Done, Of                          int
}

// roundPage is one round: how far it is, its list, what was said of it.
type roundPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	State          mark
	Done, Of       int
	Said           string
	Facts          []fact
	Actions        []link
	Conflicts      []conflictLine
	Attention      []roundPart // what needs somebody: to come back to, passed over, failed
	Groups         []stopGroup
	Closings       []string
	Accepted       string
	Note           string
	Accept         *formPage
	TellHead       string
	Tell           []string
	Live           string
}

// roundPart is a short list of stops with why they are listed.
type roundPart struct {
	Name string
	Rows []stopRow
}

// stopGroup is a room with its stops.
type stopGroup struct {
	Place string
	Rows  []stopRow
}

type stopRow struct {
	Href, Spot, Tag, Task, Where string
	State                        mark
	EntryHref, Said              string
}

func (s *Server) roundsShow(c echo.Context) error {
	k := s.ink()
	view := roundsPage{Frame: s.frame(c, k.say("office.round.title"), "rounds")}
	if view.Change {
		view.NewHref = "/rounds/new"
	}
	err := s.store.View(scope(c), func(v *store.View) error {
		rounds, err := v.Rounds("")
		if err != nil {
			return err
		}
		return s.buildRounds(v, rounds, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "rounds.html", view)
}

func (s *Server) buildRounds(v *store.View, rounds []store.Round, view *roundsPage) error {
	k := s.ink()
	groups := map[string]*roundGroup{}
	names := []string{store.RoundEnded, store.RoundWalking, store.RoundAccepted}
	for _, name := range names {
		groups[name] = &roundGroup{Name: k.say("office.round.group." + name)}
	}
	open, ended := 0, 0
	for _, r := range rounds {
		name := r.State
		switch r.State {
		case store.RoundMade, store.RoundWalking:
			open, name = open+1, store.RoundWalking
		case store.RoundEnded:
			ended++
		case store.RoundOff:
			name = store.RoundAccepted
		}
		g := groups[name]
		if len(g.Rows) >= roundsShown {
			continue
		}
		row, err := s.roundRow(v, r)
		if err != nil {
			return err
		}
		g.Rows = append(g.Rows, row)
	}
	for _, name := range names {
		if len(groups[name].Rows) > 0 {
			view.Groups = append(view.Groups, *groups[name])
		}
	}
	view.None = k.say("office.round.none")
	view.Heading = k.say("office.round.heading_calm")
	switch {
	case ended > 0:
		view.Heading = k.say("office.round.heading_ended", "n", ended)
	case open > 0:
		view.Heading = k.say("office.round.heading_open", "n", open)
	}
	if ended > 0 && open > 0 {
		view.Under = k.say("office.round.heading_open", "n", open)
	}
	return nil
}

// roundName is what a round is called: its tests and its day.
func (s *Server) roundName(r store.Round, today forms.Day) string {
	k := s.ink()
	if r.Walk() {
		return k.say("office.round.walk_name", "day", k.near(r.Day, today))
	}
	tasks := []string{}
	for _, task := range forms.Tasks() {
		if slices.ContainsFunc(r.Stops, func(stop store.RoundStop) bool { return stop.Task == task }) {
			tasks = append(tasks, k.named("task", task))
		}
	}
	for i := range tasks[min(1, len(tasks)):] {
		tasks[i+1] = lowerFirst(tasks[i+1])
	}
	name := strings.Join(tasks, ", ")
	if r.Day == forms.NoDay {
		return k.say("office.round.name_any", "tasks", name)
	}
	return k.say("office.round.name", "tasks", name, "day", k.near(r.Day, today))
}

// roundWho says to whom a round was given.
func (s *Server) roundWho(v *store.View, r store.Round) string {
	var names []string
	for _, p := range r.People {
		names = append(names, s.personName(v, p))
	}
	if r.Crew != "" {
		names = append(names, r.Crew)
	}
	if r.Walk() && len(r.Closings) > 0 {
		names = []string{s.personName(v, r.Closings[0].By)}
	}
	if len(names) == 0 {
		return s.words.Say("office.round.anybody")
	}
	return strings.Join(names, ", ")
}

var roundShapes = map[string]string{store.RoundMade: "none", store.RoundWalking: "none", store.RoundEnded: "watch", store.RoundAccepted: "pass", store.RoundOff: "none"}

// roundCounts says how many tests are in which state: 30 done, 2 to come back to.
func (k ink) roundCounts(counts map[string]int) string {
	var said []string
	for _, state := range []string{store.StopDone, store.StopLeft, store.StopBack, store.StopPassed} {
		if n := counts[state]; n > 0 || state == store.StopDone {
			said = append(said, k.say("office.round.count."+state, "n", n))
		}
	}
	return strings.Join(said, ", ")
}

func total(counts map[string]int) (n int) {
	for _, c := range counts {
		n += c
	}
	return n
}

func (s *Server) roundRow(v *store.View, r store.Round) (roundRow, error) {
	k := s.ink()
	site, err := v.Site(r.Site)
	if err != nil {
		return roundRow{}, err
	}
	return roundRow{Href: "/rounds/" + r.ID, Name: s.roundName(r, s.today(site)), Site: site.Name, Who: s.roundWho(v, r), Said: k.roundCounts(r.Counts), Time: k.minutes(r.Minutes),
		State: mark{roundShapes[r.State], k.say("office.round.state." + r.State)}, Done: r.Counts[store.StopDone], Of: total(r.Counts)}, nil
}

// minutes writes how long something is reckoned to take: 50 min, 1 h 20 min; "" for nothing.
func (k ink) minutes(n int) string {
	switch {
	case n <= 0:
		return ""
	case n < 60:
		return k.say("office.round.min", "n", n)
	}
	if n >= 120 {
		n = (n + 2) / 5 * 5
	}
	if n%60 == 0 {
		return k.say("office.round.hours", "h", n/60)
	}
	return k.say("office.round.hours_min", "h", n/60, "m", n%60)
}

func (s *Server) roundShow(c echo.Context) error {
	view := roundPage{Frame: s.frame(c, "", "rounds")}
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	return s.roundBack(c, f, &view)
}

// roundBack sends the page of a round: as new, or with what was wrong with its acceptance.
func (s *Server) roundBack(c echo.Context, f *typedForm, view *roundPage) error {
	err := s.store.View(scope(c), func(v *store.View) error {
		r, err := v.Round(c.Param("round"))
		if err != nil {
			return err
		}
		if err := s.buildRound(v, r, view); err != nil {
			return err
		}
		s.acceptForm(r, f, view)
		return nil
	})
	if err != nil {
		return err
	}
	status := http.StatusOK
	if !f.ok() {
		status = http.StatusUnprocessableEntity
	}
	return s.page(c, status, "round.html", view)
}

func (s *Server) buildRound(v *store.View, r store.Round, view *roundPage) error {
	k := s.ink()
	site, err := v.Site(r.Site)
	if err != nil {
		return err
	}
	today := s.today(site)
	view.Crumbs = []link{{Href: "/rounds", Text: k.say("office.round.title")}, {Href: siteHref(site), Text: site.Name}}
	view.Title = s.roundName(r, today)
	view.State = mark{roundShapes[r.State], k.say("office.round.state." + r.State)}
	view.Done, view.Of, view.Said = r.Counts[store.StopDone], total(r.Counts), k.roundCounts(r.Counts)
	view.Heading = k.say("office.round.fact", "site", site.Name, "done", count(view.Done), "of", count(view.Of))
	view.Under = joined(view.Title, s.roundWho(v, r))
	rows, err := s.stopRows(v, r, site, view)
	if err != nil {
		return err
	}
	view.attention(k, rows)
	s.roundFacts(v, r, site, view)
	for _, one := range r.Closings {
		view.Closings = append(view.Closings, s.closingLine(v, one, site))
	}
	if a := r.Accepted; a != nil {
		view.Accepted, view.Note = k.say("office.round.accepted_by", "name", s.personName(v, a.By), "time", k.at(a.At, site.Location())), a.Note
	}
	if r.State == store.RoundMade || r.State == store.RoundWalking {
		view.Live, view.Refresh = k.say("office.round.live", "time", s.store.Now().In(site.Location()).Format("15:04:05")), roundRefresh
	}
	s.roundActions(r, view)
	return nil
}

func (s *Server) roundActions(r store.Round, view *roundPage) {
	k := s.ink()
	if !r.Walk() && view.Role != "crew" {
		view.Actions = append(view.Actions, link{Href: "/round-sheet?round=" + r.ID, Text: k.say("office.round.sheet_pdf")}, link{Href: "/round-sheet?as=xlsx&round=" + r.ID, Text: k.say("office.round.sheet_xlsx")})
	}
	toTell := func(stop store.RoundStop) bool { return stop.State == store.StopBack || stop.Result == forms.Fail }
	if view.Role != "crew" && slices.ContainsFunc(r.Stops, toTell) {
		view.Actions = append(view.Actions, link{Href: "/notices?round=" + r.ID, Text: k.say("office.round.notices")})
	}
	if view.Change && !r.Walk() && r.State != store.RoundAccepted {
		view.Actions = append([]link{{Href: "/rounds/" + r.ID + "/edit", Text: k.say("office.round.edit")}}, view.Actions...)
	}
}

func (s *Server) roundFacts(v *store.View, r store.Round, site store.Site, view *roundPage) {
	k := s.ink()
	add := func(name, value string) {
		if value != "" {
			view.Facts = append(view.Facts, fact{Name: k.say("office.round.field." + name), Value: value})
		}
	}
	if !r.Walk() {
		add("made", k.say("office.round.made_by", "name", s.personName(v, r.By), "time", k.at(r.Made, site.Location())))
		add("code", r.Code)
	}
	if r.Day != forms.NoDay {
		add("day", joined(k.longDay(r.Day), r.Starts))
	}
	if r.Until != forms.NoDay {
		add("until", k.day(r.Until))
	}
	add("people", s.roundWho(v, r))
	add("minutes", k.minutes(r.Minutes))
	add("note", r.Note)
}

func (s *Server) closingLine(v *store.View, c store.RoundClosing, site store.Site) string {
	k := s.ink()
	line := k.say("office.round.closed_by", "name", s.personName(v, c.By), "time", k.at(c.At, site.Location()), "counts",
		k.roundCounts(map[string]int{store.StopDone: c.Done, store.StopLeft: c.Left, store.StopBack: c.Back, store.StopPassed: c.Skipped}))
	return line + " " + k.say("office.round.proved."+provedWord(c.ProvedFirst)+"_"+provedWord(c.ProvedLast))
}

func provedWord(p *store.RoundProof) string {
	switch {
	case p == nil:
		return "none"
	case p.Works:
		return "yes"
	}
	return "no"
}

// stopRows fills the list of a round, by room, and the places where somebody must be told first.
func (s *Server) stopRows(v *store.View, r store.Round, site store.Site, view *roundPage) ([]stopRow, error) {
	k, today := s.ink(), s.today(site)
	var rows []stopRow
	var tell telling
	for _, stop := range r.Stops {
		d, err := v.Device(stop.Device, today)
		if err != nil && !isRefusal(err) {
			return nil, err
		}
		row := stopRow{Task: k.named("task", stop.Task), Spot: k.say("office.round.unknown_device"), State: s.stopMark(stop)}
		if err == nil {
			row.Href, row.Spot, row.Tag, row.Where = "/devices/"+d.ID, s.spot(d.DeviceRow), k.tag(d.Tag), s.place(d.Place)
			tell.add(d.Place)
		}
		if stop.Entry != "" {
			row.EntryHref = "/entries/" + stop.Entry
			row.Said = joined(s.personName(v, stop.By), k.near(stop.Day, today))
			if stop.Paper {
				row.Said = joined(row.Said, k.say("office.round.on_paper"))
			}
		} else if stop.Reason != "" {
			row.Said = k.named("office.round.reason", stop.Reason)
		}
		rows = append(rows, row)
		if n := len(view.Groups); n == 0 || view.Groups[n-1].Place != row.Where {
			view.Groups = append(view.Groups, stopGroup{Place: row.Where})
		}
		g := &view.Groups[len(view.Groups)-1]
		g.Rows = append(g.Rows, row)
	}
	view.Tell = tell.lines(k)
	return rows, nil
}

// stopMark is the verdict of a stop that was done, else its state.
func (s *Server) stopMark(stop store.RoundStop) mark {
	k := s.ink()
	switch stop.State {
	case store.StopDone:
		return k.verdict(stop.Result)
	case store.StopBack:
		return mark{"watch", k.say("office.round.stop.back")}
	}
	if stop.Retired {
		return mark{"none", k.say("office.round.stop.retired")}
	}
	return mark{"none", k.say("office.round.stop." + stop.State)}
}

// attention puts what needs somebody first: the failed, those to come back to, those passed over.
func (p *roundPage) attention(k ink, rows []stopRow) {
	for _, part := range []struct {
		name string
		is   func(stopRow) bool
	}{
		{"failed", func(r stopRow) bool { return r.State.Shape == "fail" }},
		{"back", func(r stopRow) bool { return r.State.Word == k.say("office.round.stop.back") }},
		{"passed", func(r stopRow) bool { return r.State.Word == k.say("office.round.stop.passed") }},
	} {
		var list []stopRow
		for _, r := range rows {
			if part.is(r) {
				list = append(list, r)
			}
		}
		if len(list) > 0 {
			p.Attention = append(p.Attention, roundPart{k.say("office.round.part."+part.name, "n", len(list)), list})
		}
	}
}

// telling gathers whom to tell before TEST, and when it may be pressed, place by place.
type telling struct{ list []told }

type told struct {
	who, load, from, until string
	places                 []string
}

func (t *telling) add(p store.Place) {
	if p.WhomToTell == "" && p.CriticalLoad == "" && p.TestFrom == "" {
		return
	}
	one := told{who: p.WhomToTell, load: p.CriticalLoad, from: p.TestFrom, until: p.TestUntil}
	for i := range t.list {
		if o := &t.list[i]; o.who == one.who && o.load == one.load && o.from == one.from && o.until == one.until {
			if !slices.Contains(o.places, p.Name) {
				o.places = append(o.places, p.Name)
			}
			return
		}
	}
	one.places = []string{p.Name}
	t.list = append(t.list, one)
}

func (t *telling) lines(k ink) []string {
	var out []string
	for _, o := range t.list {
		var said []string
		if o.from != "" {
			said = append(said, k.say("office.round.window", "from", o.from, "until", o.until))
		}
		if o.who != "" {
			said = append(said, k.say("office.round.tell", "who", o.who))
		}
		if o.load != "" {
			said = append(said, k.say("office.round.load", "load", o.load))
		}
		out = append(out, strings.Join(o.places, "; ")+": "+strings.Join(said, " "))
	}
	return out
}
