package server

import (
	"net/http"
	"net/url"
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// downloadsPage offers what may leave the house.
type downloadsPage struct {
	Frame
	Heading, Under, LabelsText string
	Labels                     bool // false where no label can be made
	Table                      []field
	Round                      []field // empty where there is no site
	Workbook                   []field
	Made                       []madeRow // files made for the reader
	Statement                  []field   // empty where there is no site
	Bundle                     []field   // empty for whoever sees a period only
}

func (s *Server) downloadsShow(c echo.Context) error {
	return s.downloadsPage(c, http.StatusOK, madeWorkbook, nil, Wrong{})
}

// downloadsPage shows the page, with what was typed in one of its forms and is wrong where it comes again.
func (s *Server) downloadsPage(c echo.Context, status int, form madeKind, typed url.Values, wrong Wrong) error {
	sites, err := s.sitesOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	offered := []option{{Text: k.say("office.downloads.all_sites"), Chosen: true}}
	for _, site := range sites {
		offered = append(offered, option{Value: site.Code, Text: site.Name})
	}
	view := downloadsPage{
		Frame: s.frame(c, k.say("office.downloads.title"), "downloads"), Heading: k.say("office.downloads.heading"), Under: k.say("office.downloads.under"),
		Workbook: periodFields(k, "workbook", offered), Bundle: periodFields(k, "bundle", offered), Made: s.madeRows(c),
		LabelsText: k.say("office.downloads.labels_no_url"),
	}
	again := map[madeKind][]field{madeWorkbook: view.Workbook, madeBundle: view.Bundle}[form]
	for i := range again {
		f := &again[i]
		f.Value, f.Options = typed.Get(f.Name), chosenOf(f.Options, typed.Get(f.Name))
		if f.Name == wrong.Field {
			f.Error = wrong.Text
		}
	}
	if s.store.URL() != "" {
		view.LabelsText, view.Labels = k.say("paper.labels.under"), true
	}
	view.Table = tableFields(k, offered)
	if len(sites) > 0 {
		view.Statement = append(periodFields(k, "statement", offered[1:]), field{Name: "paper", ID: "statement-paper", Label: k.say("paper.size.label"), Options: paperOptions(k)})
		view.Statement[1].Hint = k.say("paper.statement.from_hint")
	}
	if scope(c).Period != nil {
		view.Bundle = nil // a bundle is of whole logs
	}
	view.Round = s.roundFields(sites)
	return s.page(c, status, "downloads.html", view)
}

// chosenOf gives the options with another one chosen.
func chosenOf(options []option, value string) []option {
	out := slices.Clone(options)
	for i := range out {
		out[i].Chosen = out[i].Value == value
	}
	return out
}

// workbookTake sends what the downloads page offers, within the reader's own scope.
func (s *Server) workbookTake(c echo.Context) error {
	return s.sendWorkbook(c, scope(c), person(c).ID)
}

// roundFields ask for a round sheet: of which site, which test, and until when.
func (s *Server) roundFields(sites []store.Site) []field {
	if len(sites) == 0 {
		return nil
	}
	k := s.ink()
	var offered []option
	for _, site := range sites {
		offered = append(offered, option{Value: site.Code, Text: site.Name})
	}
	tasks := []option{{Text: k.say("paper.round.all_tasks"), Chosen: true}}
	for _, task := range forms.Tasks() {
		tasks = append(tasks, option{Value: task, Text: k.named("task", task)})
	}
	return []field{
		{Name: "site", ID: "round-site", Label: k.say("office.downloads.site"), Options: offered},
		{Name: "task", Label: k.say("paper.col.task"), Options: tasks},
		{Name: "until", Label: k.say("paper.round.until_label"), Hint: k.say("paper.round.until_hint"), Type: "date"},
		{Name: "paper", Label: k.say("paper.size.label"), Options: paperOptions(k)},
	}
}

// paperOptions are the sizes of paper.
func paperOptions(k ink) (papers []option) {
	for _, name := range paper.SizeNames() {
		papers = append(papers, option{Value: name, Text: k.say("paper.size." + name)})
	}
	return papers
}

// periodFields ask for a site and a period, within a form of its own.
func periodFields(k ink, form string, sites []option) []field {
	return []field{
		{Name: "site", ID: form + "-site", Label: k.say("office.downloads.site"), Options: sites},
		{Name: "from", ID: form + "-from", Label: k.say("office.downloads.from"), Hint: k.say("office.downloads.open_hint"), Type: "date"},
		{Name: "to", ID: form + "-to", Label: k.say("office.downloads.to"), Hint: k.say("office.downloads.open_hint"), Type: "date"},
	}
}

// tableFields ask for one sheet of the workbook.
func tableFields(k ink, sites []option) []field {
	var sheets []option
	for _, name := range export.TableNames() {
		sheets = append(sheets, option{Value: name, Text: k.say("sheet.name." + name)})
	}
	return append([]field{{Name: "sheet", ID: "table-sheet", Label: k.say("paper.table.sheet"), Options: sheets}}, periodFields(k, "table", sites)...)
}
