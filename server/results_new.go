package server

import (
	"bytes"
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/export/intake"
	"tripwell/export/results"
)

// resultsPage asks for a file of tests made elsewhere.
type resultsPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Wrong         string
	What          field
	Kept          keptList
}

func (s *Server) resultsNew(c echo.Context) error {
	return s.resultsAsk(c, http.StatusOK, "", "")
}

func (s *Server) resultsAsk(c echo.Context, status int, what, wrong string) error {
	k := s.ink()
	kept, err := s.keptColumns(ofResults, nil)
	if err != nil {
		return err
	}
	return s.page(c, status, "results.html", resultsPage{
		Kept:  keptList{"/results/columns", kept},
		Frame: s.frame(c, k.say("results.heading"), "sites"), Crumbs: []link{{Href: "/sites", Text: k.say("office.nav.sites")}}, Heading: k.say("results.heading"), Lead: k.say("results.lead"), Wrong: wrong,
		What: field{Name: "what", Label: k.say("results.what"), Hint: k.say("results.what_hint"), Options: choices(what, "readings", k.say("results.what_readings"), "past", k.say("results.what_past"))},
	})
}

// resultsTake keeps the file a manager chose, and goes on to its preview. A file that cannot be one is told at once.
func (s *Server) resultsTake(c echo.Context) error {
	u, err := uploadOf(c)
	if err == nil {
		u.ask, err = results.ParseAsk(u.kept)
	}
	if err == nil {
		u.person, u.ask.Past, u.ask.DryRun = person(c).ID, u.said == "past", false
		if _, err = s.resultsOf(c, &u, true); err == nil {
			return toPage(c, "/results/"+s.results.put(u, s.store.Now()))
		}
	}
	w, fault := wrongOf(err)
	if fault {
		return err
	}
	return s.resultsAsk(c, http.StatusUnprocessableEntity, u.said, w.Text)
}

// resultsOf takes an upload apart and, unless dry, in. One at a time: see importArea.
func (s *Server) resultsOf(c echo.Context, u *upload, dry bool) (results.Report, error) {
	ctx := c.Request().Context()
	done, err := s.results.take(ctx)
	if err != nil {
		return results.Report{}, err
	}
	defer done()
	book, err := results.Open(u.name, bytes.NewReader(u.raw), intake.Caps{Bytes: uploadBytes, Unpacked: 64 << 20, Cells: 1_000_000})
	if err != nil {
		return results.Report{}, err
	}
	u.shapes = book.Shapes()
	ask := u.ask
	ask.DryRun = dry
	return results.Import(ctx, s.store, u.person, book, ask, nil)
}

// resultsFor reads the upload an address names.
func (s *Server) resultsFor(c echo.Context) (upload, error) {
	return s.results.get(c.Param("upload"), person(c).ID, s.store.Now())
}
