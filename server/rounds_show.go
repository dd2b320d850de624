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
