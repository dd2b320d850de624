package server

import (
	"cmp"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// defectsShown is how many defects the page lists.
const defectsShown = 300

// defectsPage lists defects, what may still hurt somebody first.
type defectsPage struct {
	Frame
	Heading, Under            string
	Sites, States, Severities []option
	Rows                      []defectRow
	More, None                string
	Links                     []link
}

// defectRow is one defect of a list.
type defectRow struct {
	Verdict                     mark
	Href, Spot, Tag, Where      string
	What, State, Next, Age, Due string
	Late                        bool // past its day
	InUse                       bool
}

func (s *Server) defectsShow(c echo.Context) error {
	view := defectsPage{Frame: s.frame(c, s.words.Say("office.defect.title"), "defects")}
	ask := store.DefectAsk{Site: c.QueryParam("site"), State: c.QueryParam("state"), Severity: c.QueryParam("severity"), On: forms.DayOf(s.store.Now())}
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildDefects(v, ask, &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "defects.html", view)
}

func (s *Server) buildDefects(v *store.View, ask store.DefectAsk, view *defectsPage) error {
	k := s.ink()
	sites, err := v.Sites()
	if err != nil {
		return err
	}
	names := map[string]store.Site{}
	view.Sites = choices(ask.Site, "", k.say("office.dates.all_sites"))
	for _, site := range sites {
		names[site.ID] = site
		view.Sites = append(view.Sites, option{site.Code, site.Name, site.ID == ask.Site || strings.EqualFold(site.Code, ask.Site)})
	}
	view.States = s.defectStates(ask.State)
	view.Severities = choices(ask.Severity, "", k.say("office.defect.any_severity"))
	for _, severity := range forms.DefectSeverities() {
		view.Severities = append(view.Severities, option{severity, k.named("office.defect.severity", severity), severity == ask.Severity})
	}
	list, err := v.Defects(ask)
	if err != nil {
		return err
	}
	for i := range list[:min(len(list), defectsShown)] {
		row, err := s.defectRow(v, &list[i], names[list[i].Site])
		if err != nil {
			return err
		}
		view.Rows = append(view.Rows, row)
	}
	if len(list) > defectsShown {
		view.More = k.say("office.defect.more", "n", count(len(list)), "shown", count(defectsShown))
	}
	view.None = k.say("office.defect.none")
	query := ""
	if ask.Site != "" {
		query = "?site=" + url.QueryEscape(ask.Site)
	}
	view.Links = []link{{Href: "/defects/parts" + query, Text: k.say("office.defect.parts_link")}, {Href: "/defects/past" + query, Text: k.say("office.defect.past_link")}}
	view.Heading, view.Under, err = s.defectsHeading(v, ask, sites)
	return err
}

func (s *Server) defectStates(chosen string) []option {
	k := s.ink()
	pairs := []string{"", k.say("office.defect.not_closed"), store.DefectsInUse, k.say("office.defect.in_use")}
	for _, state := range forms.DefectStates() {
		pairs = append(pairs, state, k.named("office.defect.state", state))
	}
	return choices(chosen, append(pairs, store.DefectsAll, k.say("office.defect.all_states"))...)
}

// defectsHeading says the fact first, of the sites that are asked for: 4 failed: 1 still in use for 26 hours.
func (s *Server) defectsHeading(v *store.View, ask store.DefectAsk, sites []store.Site) (heading, under string, err error) {
	k := s.ink()
	sums := store.DefectSums{}
	for _, site := range sites {
		if ask.Site != "" && site.ID != ask.Site && !strings.EqualFold(site.Code, ask.Site) {
			continue
		}
		one, err := v.DefectSums(site.ID)
		if err != nil {
			return "", "", err
		}
		addSums(&sums, one)
	}
	if heading = s.failedSentence(sums); heading == "" {
		heading = k.say("office.defect.calm")
	}
	if sums.Nuisance > 0 {
		under = k.say("office.defect.nuisance_n", "n", sums.Nuisance)
	}
	return heading, under, nil
}

// addSums adds the counts of a further site; the oldest that is in use stands.
func addSums(to *store.DefectSums, one store.DefectSums) {
	to.Devices, to.Open, to.InUse, to.Nuisance = to.Devices+one.Devices, to.Open+one.Open, to.InUse+one.InUse, to.Nuisance+one.Nuisance
	if !one.Since.IsZero() && (to.Since.IsZero() || one.Since.Before(to.Since)) {
		to.Since, to.SinceID = one.Since, one.SinceID
	}
}

// failedSentence says what failed and how much of it is still in use, with hours; "" where nothing did.
func (s *Server) failedSentence(sums store.DefectSums) string {
	k := s.ink()
	age := s.age(s.store.Now().Sub(sums.Since))
	switch {
	case sums.Devices == 0:
		return ""
	case sums.InUse == 0:
		return k.say("office.defect.stand_safe", "n", sums.Devices)
	case sums.InUse == 1:
		return k.say("office.defect.stand_one", "n", sums.Devices, "age", age)
	}
	return k.say("office.defect.stand_many", "n", sums.Devices, "in_use", count(sums.InUse), "age", age)
}

// age writes how long something lasts: minutes up to an hour, hours up to three days, then days.
func (s *Server) age(d time.Duration) string {
	k := s.ink()
	text := k.say("office.every.min", "n", int(max(d, 0).Minutes()))
	switch {
	case d >= 72*time.Hour:
		text = k.say("office.every.d", "n", int(d.Hours()/24))
	case d >= time.Hour:
		text = k.say("office.every.h", "n", int(d.Hours()))
	}
	return strings.ReplaceAll(text, " ", "\u00a0")
}

func (s *Server) defectRow(v *store.View, d *store.Defect, site store.Site) (defectRow, error) {
	k, today := s.ink(), s.today(site)
	row := defectRow{
		Verdict: s.severityMark(d), Href: "/defects/" + d.ID, Spot: s.spot(d.Device), Tag: k.tag(d.Device.Tag), Where: joined(site.Name, d.Device.Place.Context()),
		State: s.defectState(d, today), InUse: d.InUse(), Due: k.day(d.Due), Late: d.Due != forms.NoDay && d.Due < today && d.Closed == nil,
	}
	row.Age = s.age(s.store.Now().Sub(d.OpenedAt()))
	if d.Closed != nil {
		row.Age = s.age(time.Duration(d.Closed.At-d.Opened) * time.Millisecond)
	}
	row.Next = s.defectNext(d)
	var err error
	row.What, err = s.defectWhat(v, d)
	return row, err
}

// severityMark is a defect's severity as it is shown: word, shape and colour together.
func (s *Server) severityMark(d *store.Defect) mark {
	shape := map[string]string{forms.SeverityUnsafe: "fail", forms.SeverityRepair: "watch", forms.Nuisance: "watch"}[d.Severity]
	if d.Closed != nil {
		shape = "pass"
		return mark{shape, s.ink().named("office.defect.state", d.State)}
	}
	return mark{cmp.Or(shape, "none"), s.ink().named("office.defect.severity", d.Severity)}
}

// causeName names what failed.
func (s *Server) causeName(d *store.Defect) string {
	k := s.ink()
	if task := forms.TaskOfCause(d.Cause); task != "" {
		return k.say("office.defect.cause_task", "task", lowerFirst(k.named("task", task)))
	}
	if key := "office.defect.cause." + d.Cause; k.words.Has(key) {
		return k.say(key)
	}
	if d.OwnName != "" {
		return d.OwnName
	}
	if _, known := forms.CodeOf(d.Cause); known {
		return k.reading(d.Cause)
	}
	return s.fieldName(d.Cause)
}

// defectWhat says what failed, with the reading and its limit where a test found it.
func (s *Server) defectWhat(v *store.View, d *store.Defect) (string, error) {
	if d.Text != "" {
		if d.Cause == forms.CauseByHand {
			return d.Text, nil
		}
		return s.causeName(d) + ": " + d.Text, nil
	}
	if d.LastFail == "" {
		return s.causeName(d) + ".", nil
	}
	e, err := v.Entry(d.LastFail)
	if err != nil {
		return "", err
	}
	return cmp.Or(s.failedBy(e, d.Cause), s.causeName(d)+"."), nil
}

// defectState says where a defect is.
func (s *Server) defectState(d *store.Defect, today forms.Day) string {
	k := s.ink()
	switch {
	case d.Closed != nil:
		return k.say("office.defect.closed_on", "day", k.near(d.Closed.Day, today))
	case d.With != "":
		return k.say("office.defect.replaced_waits", "day", k.near(d.Repaired.Day, today))
	case d.Repaired != nil:
		return k.say("office.defect.repaired_waits", "day", k.near(d.Repaired.Day, today))
	case d.InUse():
		return k.say("office.defect.still_in_use")
	case d.Safe != nil:
		return k.say("office.defect.safe_since", "day", k.near(d.Safe.Day, today), "how", d.Safe.Text)
	}
	return k.named("office.defect.state", d.State)
}

// defectNext says what else is to know before anybody acts.
func (s *Server) defectNext(d *store.Defect) string {
	k := s.ink()
	var said []string
	if d.Reopened != nil && d.Closed == nil {
		said = append(said, k.say("office.defect.was_reopened"))
	}
	if d.Asked != nil && d.Closed == nil {
		said = append(said, k.say("office.defect.close_waits"))
	}
	if d.Again != nil && d.Closed == nil {
		said = append(said, k.say("office.defect.passed_again"))
	}
	return strings.Join(said, " ")
}

// pastPage tells what defects came to, site by site.
type pastPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Sites          []pastRow
	Repeat         []repeatRow
}

type pastRow struct{ Href, Name, Open, Closed, Mean string }

type repeatRow struct{ Href, Spot, Tag, Where, Times, Last string }

func (s *Server) pastShow(c echo.Context) error {
	k := s.ink()
	view := pastPage{Frame: s.frame(c, k.say("office.defect.past_link"), "defects"), Crumbs: []link{{Href: "/defects", Text: k.say("office.defect.title")}}}
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildPast(v, c.QueryParam("site"), &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "defects_past.html", view)
}

// repeatsShown is how many places the page names.
const repeatsShown = 40

func (s *Server) buildPast(v *store.View, only string, view *pastPage) error {
	k := s.ink()
	sites, err := v.Sites()
	if err != nil {
		return err
	}
	closed, weighed := 0, time.Duration(0)
	type named struct {
		store.Repeat
		site store.Site
	}
	var repeats []named
	for _, site := range sites {
		if only != "" && site.ID != only && !strings.EqualFold(site.Code, only) {
			continue
		}
		past, err := v.DefectPast(site.ID, s.today(site))
		if err != nil {
			return err
		}
		sums, err := v.DefectSums(site.ID)
		if err != nil {
			return err
		}
		closed, weighed = closed+past.Closed, weighed+time.Duration(past.Closed)*past.MeanRepair
		row := pastRow{Href: "/defects?site=" + url.QueryEscape(site.Code), Name: site.Name, Open: count(sums.Open), Closed: count(past.Closed), Mean: dash}
		if past.Closed > 0 {
			row.Mean = s.age(past.MeanRepair)
		}
		view.Sites = append(view.Sites, row)
		for _, r := range past.Repeat {
			repeats = append(repeats, named{r, site})
		}
	}
	slices.SortStableFunc(repeats, func(a, b named) int { return cmp.Compare(b.Times, a.Times) })
	for _, r := range repeats[:min(len(repeats), repeatsShown)] {
		view.Repeat = append(view.Repeat, repeatRow{Href: "/devices/" + r.Device.ID, Spot: s.spot(r.Device), Tag: k.tag(r.Device.Tag), Where: joined(r.site.Name, r.Device.Place.Context()),
			Times: k.say("office.defect.times", "n", r.Times), Last: k.near(r.Last, s.today(r.site))})
	}
	view.Heading = k.say("office.defect.past_none")
	if closed > 0 {
		view.Heading = k.say("office.defect.past_heading", "n", closed, "mean", s.age(weighed/time.Duration(closed)))
	}
	view.Under = k.say("office.defect.past_under")
	return nil
}
