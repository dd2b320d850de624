package server

import (
	"errors"
	"io"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// samplePage draws a fair sample from the register as it stands, with the newest signed head.
type samplePage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Fields         []field
	Wrong          []link
	Drawn          bool
	Size, How      string
	Head           string
	Print          link
	Devices        []sampleRow
	DevicesText    string
	Rooms          []sampleRow
	RoomsText      string
	Result         string
	Action         string // makes a round of it; "" where the reader makes none
	Hidden         []hidden
	ResultFields   []field
	Asked          []hidden
}

type sampleRow struct{ Href, Spot, Tag, Where, Said string }

const (
	sampleConfidence = "95"
	sampleShare      = "5"
)

// sampleAsk reads what a sample is drawn with. The head is the newest that was signed: whoever holds it drew nothing yet.
func (s *Server) sampleAsk(c echo.Context, v *store.View) (ask paper.SampleAsk, err error) {
	ask.Site, ask.Word = c.QueryParam("site"), strings.TrimSpace(c.QueryParam("word"))
	share := func(name, byDefault string) float64 {
		typed := strings.TrimSpace(c.QueryParam(name))
		if typed == "" {
			typed = byDefault
		}
		n, err := forms.ParseFigure(typed, false)
		if err != nil || n.Bound != "" {
			return -1
		}
		return n.Value / 100
	}
	ask.Confidence, ask.Share = share("confidence", sampleConfidence), share("share", sampleShare)
	heads, err := v.KeptHeads()
	if len(heads) > 0 {
		ask.Head = heads[len(heads)-1].Note
	}
	return ask, err
}

func (s *Server) sampleShow(c echo.Context) error {
	k := s.ink()
	view := samplePage{Frame: s.frame(c, k.say("office.sample.title"), "downloads"), Crumbs: []link{{Href: "/downloads", Text: k.say("office.downloads.title")}},
		Heading: k.say("office.sample.heading"), Under: k.say("office.sample.under")}
	status := http.StatusOK
	err := s.store.View(scope(c), func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		s.sampleFields(c, sites, &view)
		if !c.QueryParams().Has("word") {
			return nil
		}
		ask, err := s.sampleAsk(c, v)
		if err != nil {
			return err
		}
		sample, err := paper.SampleOf(v, s.todayOf(sites), ask, s.store.Demo())
		var refused *store.Error
		if errors.As(err, &refused) && refused.Code == "invalid" {
			status = http.StatusUnprocessableEntity
			view.refuse(refused)
			return nil
		}
		if err != nil {
			return err
		}
		return s.fillSample(c, sample, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, status, "sample.html", view)
}

// todayOf is today at the only site, else today in UTC.
func (s *Server) todayOf(sites []store.Site) forms.Day {
	if len(sites) == 1 {
		return s.today(sites[0])
	}
	return forms.DayOf(s.store.Now().UTC())
}

func (p *samplePage) refuse(err *store.Error) {
	p.Wrong = []link{{Text: err.Text, Href: "#f-" + err.Field}}
	for i := range p.Fields {
		if p.Fields[i].Name == err.Field {
			p.Fields[i].Error = err.Text
		}
	}
}

func (s *Server) sampleFields(c echo.Context, sites []store.Site, view *samplePage) {
	k := s.ink()
	offered := []option{{Text: k.say("office.downloads.all_sites"), Chosen: c.QueryParam("site") == ""}}
	for _, site := range sites {
		offered = append(offered, option{site.Code, site.Name, c.QueryParam("site") == site.Code || c.QueryParam("site") == site.ID})
	}
	typed := func(name, byDefault string) string {
		if v := c.QueryParam(name); v != "" {
			return v
		}
		return byDefault
	}
	view.Fields = []field{
		{Name: "word", Label: k.say("office.sample.word"), Hint: k.say("office.sample.word_hint"), Type: "text", Value: c.QueryParam("word"), Required: true},
		{Name: "site", Label: k.say("office.downloads.site"), Options: offered},
		{Name: "confidence", Label: k.say("office.sample.confidence"), Type: "number", Unit: "%", Value: typed("confidence", sampleConfidence)},
		{Name: "share", Label: k.say("office.sample.share"), Type: "number", Unit: "%", Value: typed("share", sampleShare)},
	}
}

// fillSample shows what was drawn, and what it says once somebody has been there.
func (s *Server) fillSample(c echo.Context, sample paper.Sample, view *samplePage) error {
	k, ask := s.ink(), sample.Ask
	view.Drawn, view.Head = true, strings.TrimSpace(ask.Head)
	view.Heading = k.say("office.sample.fact", "n", len(sample.Devices), "lot", sample.Lot, "rooms", len(sample.Rooms))
	view.Size = k.say("paper.sample.size", "n", len(sample.Devices), "lot", sample.Lot, "bad", sample.Bad, "confidence", limitFigure(ask.Confidence*100), "share", limitFigure(ask.Share*100))
	view.How = k.say("paper.sample.how")
	view.DevicesText = k.say("paper.sample.devices_text", "n", len(sample.Devices), "lot", sample.Lot)
	view.RoomsText = k.say("paper.sample.rooms_text", "n", len(sample.Rooms), "lot", sample.RoomLot)
	query := url.Values{}
	for _, name := range []string{"word", "site", "confidence", "share"} {
		query.Set(name, c.QueryParam(name))
		view.Asked = append(view.Asked, hidden{name, c.QueryParam(name)})
	}
	view.Print = link{Href: "/sample.pdf?" + query.Encode(), Text: k.say("office.sample.print")}
	var stops []string
	for _, d := range sample.Devices {
		row := sampleRow{Href: "/devices/" + d.Device.ID, Spot: s.spot(d.Device), Tag: k.tag(d.Device.Tag), Where: joined(d.Site.Code, s.place(d.Device.Place)), Said: k.say("paper.sample.never")}
		if d.Day != forms.NoDay {
			row.Said = k.say("paper.sample.last", "result", k.named("verdict", d.Last), "day", k.day(d.Day))
		}
		view.Devices = append(view.Devices, row)
		stops = append(stops, d.Device.ID+"/"+sampleTask(d.Device))
	}
	for _, r := range sample.Rooms {
		view.Rooms = append(view.Rooms, sampleRow{Where: joined(r.Site.Code, s.place(r.Place)), Said: k.say("paper.sample.in_register", "n", r.Devices)})
	}
	view.ResultFields = []field{{Name: "found", Label: k.say("office.sample.found"), Type: "number", Value: c.QueryParam("found")}}
	s.sampleResult(c, sample, view)
	if view.Change && len(sample.Sites) == 1 && len(stops) > 0 && len(stops) <= roundMost {
		f, err := s.blankForm(nil)
		if err != nil {
			return err
		}
		day := s.today(sample.Sites[0])
		view.Action = "/rounds"
		view.Hidden = []hidden{{recordField, f.Get(recordField)}, {"site", sample.Sites[0].ID}, {"day", day.String()}, {"until", (day + 30).String()}, {"make.0", "yes"},
			{"stops.0", strings.Join(stops, " ")}, {"note", k.say("office.sample.round_note", "word", ask.Word)}}
	}
	return nil
}

// sampleTask is the test a sample round asks of a device: the button where it has one, else the instrument.
func sampleTask(d store.DeviceRow) string {
	if forms.HasTask(d.Kind, "button") {
		return "button"
	}
	return "instrument"
}

// sampleResult says what so many wrong ones mean for all.
func (s *Server) sampleResult(c echo.Context, sample paper.Sample, view *samplePage) {
	k, n := s.ink(), len(sample.Devices)
	typed := strings.TrimSpace(c.QueryParam("found"))
	if typed == "" {
		return
	}
	wrong, err := strconv.Atoi(typed)
	if err != nil || wrong < 0 || wrong > n {
		view.ResultFields[0].Error = k.say("office.sample.found_wrong", "n", n)
		return
	}
	least, most := forms.LotBounds(sample.Lot, wrong, n, sample.Ask.Confidence)
	low, high := forms.ShareBounds(wrong, n, sample.Ask.Confidence)
	view.Result = k.say("office.sample.result", "wrong", wrong, "n", n, "lot", sample.Lot, "least", least, "most", most, "confidence", limitFigure(sample.Ask.Confidence*100),
		"low", strconv.FormatFloat(low*100, 'f', 1, 64), "high", strconv.FormatFloat(high*100, 'f', 1, 64))
}

// sampleTake sends the sheet to print.
func (s *Server) sampleTake(c echo.Context) error {
	size, err := paper.SizeNamed(c.QueryParam("paper"))
	if err != nil {
		return err
	}
	var sample paper.Sample
	err = s.store.View(scope(c), func(v *store.View) error {
		ask, err := s.sampleAsk(c, v)
		if err != nil {
			return err
		}
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		sample, err = paper.SampleOf(v, s.todayOf(sites), ask, s.store.Demo())
		return err
	})
	if err != nil {
		return err
	}
	site := ""
	if len(sample.Sites) == 1 {
		site = sample.Sites[0].ID
	}
	if err := s.exportTaken(c.Request().Context(), person(c).ID, "sample", site, forms.NoDay, forms.NoDay); err != nil {
		return err
	}
	return s.download(c, pdfKind, "sample-"+sample.On.String()+".pdf", func(w io.Writer) error { return paper.PrintSample(w, sample, size) })
}
