package server

import (
	"net/http"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// defectPage is one defect with everything that happened to it.
type defectPage struct {
	Frame
	Crumbs              []link
	Heading, Tag, Under string
	Verdict             mark
	State, Next, Dark   string // Dark: what else is without power while it is made safe
	InUse               bool
	Facts               []fact
	Actions             []link
	Steps               []defectStepShown
}

// defectStepShown is one thing that happened to a defect.
type defectStepShown struct {
	When, Head, Text string
	Verdict          *mark // of a test
	Href             string
	Parts            string
	Photos           []photoShown
}

func (s *Server) defectShow(c echo.Context) error {
	view := defectPage{Frame: s.frame(c, s.words.Say("office.defect.title"), "defects")}
	err := s.store.View(scope(c), func(v *store.View) error {
		d, err := v.Defect(c.Param("defect"), forms.DayOf(s.store.Now()))
		if err != nil {
			return err
		}
		return s.buildDefect(v, d, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "defect.html", view)
}

func (s *Server) buildDefect(v *store.View, d store.Defect, view *defectPage) error {
	site, err := v.Site(d.Site)
	if err != nil {
		return err
	}
	k, today := s.ink(), s.today(site)
	what, err := s.defectWhat(v, &d)
	if err != nil {
		return err
	}
	view.Title, view.Heading = joined(s.causeName(&d), s.spot(d.Device)), what
	view.Crumbs = []link{{Href: "/defects", Text: k.say("office.defect.title")}, {Href: siteHref(site), Text: site.Name}, {Href: "/devices/" + d.Device.ID, Text: s.spot(d.Device)}}
	view.Tag, view.Under = k.tag(d.Device.Tag), joined(s.kindAndRating(d.Device), circuit(d.Device), d.Device.Place.Context())
	view.Verdict, view.State, view.Next, view.InUse = s.severityMark(&d), s.defectState(&d, today), s.defectNext(&d), d.InUse()
	if view.InUse {
		view.State = k.say("office.defect.in_use_for", "age", s.age(s.store.Now().Sub(d.OpenedAt())))
	}
	if view.Dark, err = s.darkMeanwhile(v, &d, site); err != nil {
		return err
	}
	view.Facts = s.defectFacts(v, &d, site)
	steps, err := v.DefectHistory(d)
	if err != nil {
		return err
	}
	for _, step := range steps {
		view.Steps = append(view.Steps, s.defectStep(v, step, site.Location()))
	}
	if view.Change {
		view.Actions = s.defectActions(&d)
	}
	return nil
}

func (s *Server) defectFacts(v *store.View, d *store.Defect, site store.Site) []fact {
	k := s.ink()
	out := []fact{{Name: k.say("office.defect.cause_name"), Value: s.causeName(d)}, {Name: k.say("office.defect.severity_name"), Value: k.named("office.defect.severity_long", d.Severity)}}
	add := func(key, value string) {
		if value != "" && value != dash {
			out = append(out, fact{Name: k.say("office.defect." + key), Value: value})
		}
	}
	add("opened", k.at(d.OpenedAt(), site.Location()))
	end, key := s.store.Now(), "age"
	if d.Closed != nil {
		end, key = time.UnixMilli(d.Closed.At), "took"
	}
	add(key, s.age(end.Sub(d.OpenedAt())))
	if d.Fails > 1 {
		add("fails", count(d.Fails))
	}
	if d.Safe != nil {
		add("made_safe", d.Safe.Text)
	}
	if d.Assigned != nil {
		add("assigned", s.whoOf(v, d.Assigned.Text))
	}
	add("due", k.day(d.Due))
	add("parts", strings.Join(d.Parts, ", "))
	if d.With != "" {
		out = append(out, fact{Name: k.say("office.defect.with"), Value: k.say("office.defect.with_link"), Href: "/devices/" + d.With})
	}
	if d.Closed != nil && d.How == forms.ClosedByTest {
		out = append(out, fact{Name: k.say("office.defect.closed_by"), Value: k.say("office.defect.closed_by_test", "day", k.day(d.Closed.Day)), Href: "/entries/" + d.Closed.Record})
	}
	return out
}

// whoOf names a person by id, or a crew as it was written.
func (s *Server) whoOf(v *store.View, who string) string { return s.personOr(v, who) }

func (s *Server) defectStep(v *store.View, step store.DefectStep, zone *time.Location) defectStepShown {
	k := s.ink()
	out := defectStepShown{When: k.at(step.At, zone), Text: step.Text, Href: "/records/" + step.Record, Parts: strings.Join(step.Parts, ", ")}
	if e := step.Entry; e != nil {
		verdict := k.verdict(e.Verdict.Result)
		out.Verdict, out.Href, out.Text = &verdict, "/entries/"+e.ID, s.whatFailed(*e)
		out.Head = k.say("office.defect.step_test", "task", k.named("task", e.Task), "by", s.testedBy(v, *e))
		out.Photos = s.photosShown(v, *e)
		return out
	}
	_, what, _ := strings.Cut(step.Kind, ".")
	out.Head = k.say("office.defect.step", "what", k.named("office.defect.did", what), "by", s.personName(v, step.By))
	if step.Sealed != nil {
		out.Text = s.sealedText(v, step.Sealed, zone)
	}
	if step.To != "" {
		out.Head = k.say("office.defect.step_to", "who", s.whoOf(v, step.To), "by", s.personName(v, step.By))
	}
	for i, name := range step.Photos {
		p := photoShown{Alt: k.say("office.defect.photo_of", "n", i+1)}
		if v.HasPhoto(name) {
			p.Href = "/records/" + step.Record + "/photos/" + name
		} else if text := v.PhotoRefusal(step.Record, name); text != "" {
			p.Refused = k.say("photo.refused_there", "text", text)
		}
		out.Photos = append(out.Photos, p)
	}
	return out
}

// defectActions are what a manager may do next, the most urgent first.
func (s *Server) defectActions(d *store.Defect) []link {
	k := s.ink()
	act := func(name string) link {
		return link{Href: "/defects/" + d.ID + "/" + name, Text: k.say("office.defect.act." + name)}
	}
	if d.Closed != nil {
		return []link{act("reopen"), act("note")}
	}
	var out []link
	if d.Safe == nil && d.With == "" {
		out = append(out, act("safe"))
	}
	if out = append(out, act("assign")); d.Repaired == nil {
		out = append(out, act("repaired"))
	}
	if out = append(out, act("note")); d.Asked == nil {
		out = append(out, act("close"))
	}
	if !d.Device.Retired {
		out = append(out, link{Href: "/devices/" + d.Device.ID + "/retire", Text: k.say("office.device.retire")})
	}
	out[0].Here = true
	return out
}

// partsPage is what to bring to the repairs that are open.
type partsPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Sites          []partsSite
}

type partsSite struct {
	Name string
	Rows []partRow
}

type partRow struct {
	Part, Count string
	For         []link
}

func (s *Server) partsShow(c echo.Context) error {
	k := s.ink()
	view := partsPage{Frame: s.frame(c, k.say("office.defect.parts_link"), "defects"), Crumbs: []link{{Href: "/defects", Text: k.say("office.defect.title")}}}
	err := s.store.View(scope(c), func(v *store.View) error { return s.buildParts(v, c.QueryParam("site"), &view) })
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "defects_parts.html", view)
}

func (s *Server) buildParts(v *store.View, site string, view *partsPage) error {
	k := s.ink()
	list, err := v.Defects(store.DefectAsk{Site: site, On: forms.DayOf(s.store.Now())})
	if err != nil {
		return err
	}
	needed, without := 0, 0
	at := map[string]map[string][]link{}
	for i := range list {
		d := &list[i]
		if d.State == forms.DefectRepaired {
			continue
		}
		if len(d.Parts) == 0 {
			without++
		}
		for _, part := range d.Parts {
			if at[d.Site] == nil {
				at[d.Site] = map[string][]link{}
			}
			at[d.Site][part] = append(at[d.Site][part], link{Href: "/defects/" + d.ID, Text: joined(s.spot(d.Device), d.Device.Place.Context(), circuit(d.Device))})
			needed++
		}
	}
	sites, err := v.Sites()
	if err != nil {
		return err
	}
	for _, one := range sites {
		if at[one.ID] == nil {
			continue
		}
		block := partsSite{Name: one.Name}
		for _, part := range sortedKeys(at[one.ID]) {
			block.Rows = append(block.Rows, partRow{Part: part, Count: count(len(at[one.ID][part])), For: at[one.ID][part]})
		}
		view.Sites = append(view.Sites, block)
	}
	view.Heading = k.say("office.defect.parts_none")
	if needed > 0 {
		view.Heading = k.say("office.defect.parts_heading", "n", needed)
	}
	if without > 0 {
		view.Under = k.say("office.defect.parts_without", "n", without)
	}
	return nil
}

// defectsOf lists a device's defects on its page: what is open, and the newest that are closed.
func (s *Server) defectsOf(v *store.View, d store.Device, site store.Site, view *devicePage) error {
	k, today := s.ink(), s.today(site)
	list, gone, err := v.DeviceDefects(d.ID, today)
	if err != nil {
		return err
	}
	for i := len(list) - 1; i >= 0; i-- {
		row, err := s.defectRow(v, &list[i], site)
		if err != nil {
			return err
		}
		if list[i].InUse() {
			row.State = k.say("office.defect.in_use_for", "age", row.Age)
		}
		view.Defects = append(view.Defects, row)
	}
	for _, step := range gone {
		_, what, _ := strings.Cut(step.Kind, ".")
		view.Gone = append(view.Gone, conflictLine{Href: "/records/" + step.Record, Text: k.say("office.defect.gone", "what", joined(k.named("office.defect.did", what), step.Text), "by", s.personName(v, step.By), "day", k.at(step.At, site.Location()))})
	}
	return nil
}
