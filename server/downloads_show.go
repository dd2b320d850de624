package server

import (
	"net/http"

	"github.com/labstack/echo/v4"
)

// downloadsPage offers what may leave the house.
type downloadsPage struct {
	Frame
	Heading, Under, LabelsText string
	Workbook, Labels           []field // Labels is empty where no label can be made
}

func (s *Server) downloadsShow(c echo.Context) error {
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
		Workbook: []field{
			{Name: "site", Label: k.say("office.downloads.site"), Options: offered},
			{Name: "from", Label: k.say("office.downloads.from"), Hint: k.say("office.downloads.open_hint"), Type: "date"},
			{Name: "to", Label: k.say("office.downloads.to"), Hint: k.say("office.downloads.open_hint"), Type: "date"},
		},
		LabelsText: k.say("office.downloads.labels_no_url"),
	}
	if s.store.URL() != "" {
		view.LabelsText = k.say("office.downloads.labels_text")
		view.Labels = []field{
			{ID: "label-site", Name: "site", Label: k.say("office.downloads.site"), Options: offered},
			{Name: "start", Label: k.say("office.downloads.start"), Hint: k.say("office.downloads.start_hint"), Type: "number", Value: "1"},
		}
	}
	return s.page(c, http.StatusOK, "downloads.html", view)
}

// workbookTake and labelsTake send what the downloads page offers, within the reader's own scope.
func (s *Server) workbookTake(c echo.Context) error {
	return s.sendWorkbook(c, scope(c), person(c).ID)
}

func (s *Server) labelsTake(c echo.Context) error {
	return s.sendLabels(c, scope(c), person(c).ID)
}
