package server

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/export"
)

// labelsPage offers sheets of labels, new tags, markings and the page that shows whether the printer is true.
type labelsPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Sheets         []field // of the register's labels
	Batch          []field // of new tags; empty for who may not draw them
	Markings       []field
	NoURL          string
}

func (s *Server) labelsShow(c echo.Context) error {
	sites, err := s.sitesOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	view := labelsPage{
		Frame: s.frame(c, k.say("paper.labels.title"), "downloads"), Heading: k.say("paper.labels.heading"), Under: k.say("paper.labels.under"),
		Crumbs: []link{{Href: "/downloads", Text: k.say("office.downloads.title")}},
	}
	if s.store.URL() == "" {
		view.NoURL = k.say("office.downloads.labels_no_url")
	} else {
		offered := []option{{Text: k.say("office.downloads.all_sites"), Chosen: true}}
		for _, site := range sites {
			offered = append(offered, option{Value: site.Code, Text: site.Name})
		}
		view.Sheets = append([]field{{Name: "site", Label: k.say("office.downloads.site"), Options: offered}}, k.paperFields("")...)
		view.Sheets = append(view.Sheets, k.lineField())
		if may(c, manager) {
			view.Batch = append([]field{{Name: "count", ID: "batch-count", Label: k.say("paper.labels.count"), Type: "number", Value: "30"}}, k.paperFields("batch-")...)
		}
	}
	var words []option
	for i, name := range export.MarkingNames() {
		words = append(words, option{Value: name, Text: k.say("paper.marking." + name), Chosen: i == 0})
	}
	view.Markings = append([]field{{Name: "marking", Label: k.say("paper.labels.marking"), Options: words}}, k.paperFields("marking-")...)
	return s.page(c, http.StatusOK, "labels.html", view)
}

// paperFields asks onto which paper labels go; id tells the forms of a page apart.
func (k ink) paperFields(id string) []field {
	var sheets []option
	for i, name := range export.SheetNames() {
		size, err := export.SheetNamed(name)
		if err != nil {
			continue
		}
		text := k.say("paper.labels.sheet_line", "name", name, "n", size.PerPage(), "w", export.MM(size.LabelW), "h", export.MM(size.LabelH))
		sheets = append(sheets, option{Value: name, Text: text, Chosen: i == 0})
	}
	return []field{
		{Name: "sheet", ID: id + "sheet", Label: k.say("paper.labels.sheet"), Options: sheets},
		{Name: "roll", ID: id + "roll", Label: k.say("paper.labels.roll"), Hint: k.say("paper.labels.roll_hint"), Type: "text"},
		{Name: "start", ID: id + "start", Label: k.say("office.downloads.start"), Hint: k.say("paper.labels.start_hint"), Type: "number", Value: "1"},
		{Name: "nudge", ID: id + "nudge", Label: k.say("paper.labels.nudge"), Hint: k.say("paper.labels.nudge_hint"), Type: "text"},
	}
}

// lineField asks what stands beside the tag.
func (k ink) lineField() field {
	chosen := map[string]bool{}
	for _, name := range export.DefaultLines() {
		chosen[name] = true
	}
	f := field{Name: "line", Label: k.say("paper.labels.lines"), Type: "checks"}
	for _, name := range export.LineNames() {
		f.Options = append(f.Options, option{Value: name, Text: k.say("paper.line." + name), Chosen: chosen[name]})
	}
	return f
}
