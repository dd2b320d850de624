package server

import (
	"net/http"
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// recallPage lists what an instrument found out of tolerance puts in doubt.
type recallPage struct {
	Frame
	Crumbs                 []link
	Heading, Under, Errors string
	Rows                   []recallRow
	More                   string
	Action, Record         string // of the form that asks for the tests again; "" = the reader may not
	Reaches                []option
}

type recallRow struct {
	Now, Then              mark
	Href, Day, Spot, Where string
	What, Share            string
	Again                  mark // the test made again since
	AgainHref              string
}

// recallShown is how many entries the page names; the form reaches all of them.
const recallShown = 500

// closeMargin is how near to its limit a true figure must lie to count as close: a tenth of the limit. Owner's choice, no source.
const closeMargin = 0.1

// How far a recall asks for tests again.
const (
	reachFail  = "fail"
	reachClose = "close"
	reachAll   = "all"
)

// reaches tells whether a row is asked for again; what was tested again since is not.
func reaches(reach string, r *store.RecallRow) bool {
	if r.Again.Entry != "" {
		return false
	}
	switch reach {
	case reachFail:
		return r.Code != "" && r.Margin < 0
	case reachClose:
		return r.Code != "" && r.Margin < closeMargin
	}
	return true
}

// recalled reads the instrument, the certificate that found it out, and the entries that puts in doubt.
func (s *Server) recalled(c echo.Context) (i store.Instrument, d store.Doubted, rows []store.RecallRow, err error) {
	if i, err = s.instrumentOf(c); err != nil {
		return i, d, nil, err
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		past, err := v.InstrumentPast(i.ID)
		if err != nil {
			return err
		}
		for _, one := range past.Doubted() {
			if one.Certificate.Record == c.Param("record") {
				d = one
				rows, err = v.Recall(c.Request().Context(), i.ID, d)
				return err
			}
		}
		return refuse(codeNotFound, "", s.words.Say("office.recall.unknown"))
	})
	return i, d, rows, err
}

func (s *Server) recallShow(c echo.Context) error {
	i, d, rows, err := s.recalled(c)
	if err != nil {
		return err
	}
	k := s.ink()
	view := recallPage{Frame: s.frame(c, k.say("office.recall.title"), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: "/instruments/" + i.ID + "/past", Text: i.Name}}, Errors: s.foundErrors(d.Certificate.Errors)}
	counts := map[string]int{}
	again, fails := 0, 0
	for n := range rows {
		r := &rows[n]
		if r.Again.Entry != "" {
			again++
		}
		if r.Code != "" && r.Margin < 0 {
			fails++
		}
		for _, reach := range []string{reachFail, reachClose, reachAll} {
			if reaches(reach, r) {
				counts[reach]++
			}
		}
		if n < recallShown {
			view.Rows = append(view.Rows, s.recallRow(r))
		}
	}
	view.Heading = k.say("office.recall.none", "name", i.Name)
	if len(rows) > 0 {
		view.Heading = k.say("office.recall.heading", "n", len(rows), "fail", count(fails))
	}
	view.Under = k.say("office.recall.under_first", "name", i.Name, "to", k.day(d.To))
	if d.From != forms.NoDay {
		view.Under = k.say("office.recall.under", "name", i.Name, "from", k.day(d.From), "to", k.day(d.To))
	}
	if again > 0 {
		view.Under += " " + k.say("office.recall.again_n", "n", again)
	}
	if len(rows) > recallShown {
		view.More = k.say("office.recall.more", "n", count(recallShown))
	}
	if view.Change && len(rows) > again {
		f, err := s.blankForm(nil)
		if err != nil {
			return err
		}
		view.Action, view.Record = c.Request().URL.Path, f.Get(recordField)
		for _, reach := range []string{reachFail, reachClose, reachAll} {
			view.Reaches = append(view.Reaches, option{reach, k.say("office.recall.reach."+reach, "n", counts[reach]), reach == reachClose})
		}
	}
	return s.page(c, http.StatusOK, "recall.html", view)
}

func (s *Server) recallRow(r *store.RecallRow) recallRow {
	k := s.ink()
	row := recallRow{Then: k.verdict(r.Result), Now: mark{"none", k.say("office.recall.not_concerned")}, Href: "/entries/" + r.Entry, Day: k.day(r.Day), Spot: s.spot(r.Device), Where: joined(r.Site.Name, r.Device.Place.Context())}
	if r.Again.Entry != "" {
		row.Again, row.AgainHref = k.verdict(r.Again.Result), "/entries/"+r.Again.Entry
		row.Again.Word = k.say("office.recall.again", "day", k.day(r.Again.Day), "result", lowerFirst(row.Again.Word))
	}
	if r.Device.Kind == "" {
		row.Spot = k.named("task", r.Task)
	}
	if r.Code == "" {
		return row
	}
	row.Now = k.verdict(r.Recall.Result)
	unit := unitOf(r.Code)
	row.What = k.say("office.recall.what", "name", k.reading(r.Code), "shown", k.amount(limitFigure(r.Shown), unit), "true", k.amount(limitFigure(r.True), unit), "limit", k.amount(limitFigure(r.Limit), unit))
	key := "office.recall.inside"
	share := r.Margin * 100
	if share < 0 {
		key, share = "office.recall.outside", -share
	}
	row.Share = k.say(key, "share", limitFigure(float64(int(share*10))/10))
	return row
}

// recallTake makes the tests due at once: one occasion in the log of every site concerned.
func (s *Server) recallTake(c echo.Context) error {
	i, d, rows, err := s.recalled(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	id := f.id(recordField)
	reach := f.choice("reach", reachFail, reachClose, reachAll)
	if !f.ok() {
		return refuse(codeInvalid, "reach", s.words.Say("office.form.choice"))
	}
	drafts := s.recallDrafts(rows, reach, id, i, d)
	if len(drafts) == 0 {
		return refuse(codeInvalid, "reach", s.words.Say("office.recall.nothing"))
	}
	if err := s.append(c, drafts...); err != nil {
		return err
	}
	return toPage(c, "/dates")
}

// devicesPerRecord keeps an occasion's list of devices within the bounds of a record.
const devicesPerRecord = 1000

func (s *Server) recallDrafts(rows []store.RecallRow, reach, id string, i store.Instrument, d store.Doubted) []store.Draft {
	k := s.ink()
	bySite := map[string][]string{}
	sites := map[string]store.Site{}
	for n := range rows {
		r := &rows[n]
		if !reaches(reach, r) || r.Device.Retired || r.Device.Kind == "" || slices.Contains(bySite[r.Site.ID], r.Device.ID) {
			continue
		}
		sites[r.Site.ID] = r.Site
		bySite[r.Site.ID] = append(bySite[r.Site.ID], r.Device.ID)
	}
	text := k.say("office.recall.text", "name", i.Name, "day", k.day(d.To), "number", d.Certificate.Number)
	var out []store.Draft
	for _, site := range sortedKeys(bySite) {
		for part := range slices.Chunk(bySite[site], devicesPerRecord) {
			own := record.NamedID("recall", id, site, part[0])
			out = append(out, store.Draft{ID: own, Kind: "occasion.noted", Log: site, Subject: own,
				Body: map[string]any{"cause": "instrument", "on": s.today(sites[site]).String(), "devices": part, "text": text}})
		}
	}
	return out
}
