package server

import (
	"net/http"

	"github.com/labstack/echo/v4"
)

// downloadsPage offers what may leave the house.
type downloadsPage struct {
	Frame
	Heading, Under, LabelsText string
	Labels                     bool // false where no label can be made
	Workbook                   []field
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
		view.LabelsText, view.Labels = k.say("paper.labels.under"), true
	}
	return s.page(c, http.StatusOK, "downloads.html", view)
}

// workbookTake sends what the downloads page offers, within the reader's own scope.
func (s *Server) workbookTake(c echo.Context) error {
	return s.sendWorkbook(c, scope(c), person(c).ID)
}
