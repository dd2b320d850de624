package server

import (
	"cmp"
	"context"
	"errors"
	"io"
	"net/http"
	"net/url"
	"reflect"
	"strconv"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/export/bundle"
	"tripwell/forms"
	"tripwell/store"
)

// makingPage says how far a workbook or a bundle is; without JavaScript it looks again by itself.
type makingPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Done, Total   int // of a bar; Total 0 = none
	What          []string
	Again         []link // the page itself, while the file is being made
	File          []link // the file, once it is there
	Stop          button // ends it, or lets go of it
}

// button is a form of one button.
type button struct{ Action, Text string }

// makingSoon is how long a file may take to be there at once, and makingLook after how many seconds the page looks
// again.
const (
	makingSoon = 700 * time.Millisecond
	makingLook = 2
)

// workbookMake begins a workbook and goes on to the page that tells how far it is.
func (s *Server) workbookMake(c echo.Context) error {
	return s.makeFor(c, madeWorkbook, "workbook", ".xlsx", func(sc store.Scope, ask export.WorkbookAsk) maker {
		return func(_ context.Context, w io.Writer, progress func(done, total int) error) error {
			ask.Progress = progress
			return export.WorkbookOf(w, s.store, sc, ask)
		}
	})
}

// bundleMake begins a bundle and goes on to the page that tells how far it is.
func (s *Server) bundleMake(c echo.Context) error {
	return s.makeFor(c, madeBundle, "bundle", ".zip", func(sc store.Scope, ask export.WorkbookAsk) maker {
		return func(ctx context.Context, w io.Writer, progress func(done, total int) error) error {
			said := func(done, total int64) { _ = progress(int(done), int(total)) } // its context stops it
			return bundle.Write(ctx, w, s.store, sc, bundle.Ask{Site: ask.Site, From: ask.From, To: ask.To, Organisation: ask.Organisation, Progress: said})
		}
	})
}

// makeFor begins a file of what the downloads page asks for, within its reader's scope, once it is written down that it leaves.
func (s *Server) makeFor(c echo.Context, kind madeKind, what, ending string, of func(sc store.Scope, ask export.WorkbookAsk) maker) error {
	values, err := decodeForm(c)
	if err != nil {
		return err
	}
	sc, by := scope(c), person(c).ID
	if kind == madeBundle {
		if err := wholeLogs(sc); err != nil {
			return err
		}
	}
	ask, name, err := s.workbookAsked(sc, values.Get)
	if err != nil {
		return s.downloadsAgain(c, kind, values, err)
	}
	if err := s.exportTaken(c.Request().Context(), by, what, ask.Site, ask.From, ask.To); err != nil {
		return err
	}
	m := &making{kind: kind, person: by, file: "tripwell-" + name + ending, site: s.siteWords(values), from: ask.From, to: ask.To, scope: sc}
	s.makings.begin(m, of(sc, ask))
	return s.toMaking(c, m)
}

// siteWords is the site that was asked for, as its page says it.
func (s *Server) siteWords(values url.Values) string {
	return cmp.Or(values.Get("site"), s.words.Say("office.downloads.all_sites"))
}

// toMaking goes on to a making's page; what is soon there is there at once.
func (s *Server) toMaking(c echo.Context, m *making) error {
	select {
	case <-m.ended:
	case <-time.After(makingSoon):
	case <-c.Request().Context().Done():
	}
	return toPage(c, m.kind.path+m.id)
}

// downloadsAgain shows the downloads page with what was typed and what is wrong beside its field.
func (s *Server) downloadsAgain(c echo.Context, kind madeKind, values url.Values, err error) error {
	var refused *store.Error
	w, fault := wrongOf(err)
	if fault || errors.As(err, &refused) && refused.Code == codeNotFound {
		return err
	}
	return s.downloadsPage(c, http.StatusUnprocessableEntity, kind, values, w)
}

// makingFor finds the making an address names. Who lost a site since may not have what was read before.
func (s *Server) makingFor(c echo.Context) (*making, error) {
	m, err := s.makings.get(c.Param("making"), person(c).ID)
	if err == nil && !reflect.DeepEqual(m.scope, scope(c)) {
		return nil, errNoMaking
	}
	return m, err
}

func (s *Server) makingShow(c echo.Context) error {
	m, err := s.makingFor(c)
	if err != nil {
		return err
	}
	view, next := s.makingView(c, m), ""
	switch {
	case view.Again != nil:
		next = strconv.Itoa(makingLook) + "; url=" + view.Again[0].Href
	case view.File != nil && m.first():
		next = "1; url=" + view.File[0].Href
	}
	if next != "" {
		c.Response().Header().Set("Refresh", next)
	}
	return s.page(c, http.StatusOK, "making.html", view)
}

// first says whether the file was not offered by itself yet.
func (m *making) first() bool {
	m.mu.Lock()
	defer m.mu.Unlock()
	told := m.told
	m.told = true
	return !told
}

func (s *Server) makingView(c echo.Context, m *making) makingPage {
	k, at := s.ink(), m.kind.path+m.id
	say := func(key string, pairs ...any) string { return k.say(m.kind.words+key, pairs...) }
	view := makingPage{Frame: s.frame(c, say("title"), "downloads"), Crumbs: []link{{Href: "/downloads", Text: k.say("office.downloads.title")}}, What: []string{m.site}}
	if m.from != forms.NoDay || m.to != forms.NoDay {
		from, to := k.say("office.downloads.open_from"), k.say("office.downloads.open_to")
		if m.from != forms.NoDay {
			from = k.day(m.from)
		}
		if m.to != forms.NoDay {
			to = k.day(m.to)
		}
		view.What = append(view.What, k.say("office.downloads.making_period", "from", from, "to", to))
	}
	m.mu.Lock()
	defer m.mu.Unlock()
	view.Stop = button{at + "/stop", k.say("office.downloads.making_stop")}
	if m.out != nil || m.err != nil {
		view.Stop.Text = k.say("office.downloads.making_forget")
	}
	switch {
	case m.err != nil:
		view.Heading, view.Lead = say("failed"), s.told(c, m.err).Text
	case m.out != nil:
		view.Heading, view.File = say("ready"), []link{{Href: at + "/" + m.file, Text: say("go")}}
		view.Lead = say("ready_under", "done", count(m.done), "size", sizeText(m.size))
	default:
		view.Heading, view.Again = say("making"), []link{{Href: at, Text: k.say("office.downloads.making_again")}}
		view.Lead, view.Done, view.Total = say("making_under", "done", count(m.done), "total", count(m.total), "percent", count(min(99, 100*m.done/max(1, m.total)))), m.done, m.total
		if !m.begun {
			view.Lead = k.say("office.downloads.making_waits")
		}
	}
	return view
}

// sizeText says a number of bytes in decimal units, as file managers mostly do.
func sizeText(n int64) string {
	if n < 1_000_000 {
		return count(int(max(1, n/1000))) + " kB"
	}
	return strconv.FormatFloat(float64(n)/1e6, 'f', 1, 64) + " MB"
}

// makingStop ends a making, or lets go of its file.
func (s *Server) makingStop(c echo.Context) error {
	m, err := s.makingFor(c)
	if err != nil {
		return err
	}
	s.makings.forget(m)
	return toPage(c, "/downloads")
}

// madeRow is a file that is made or kept for the reader of the downloads page.
type madeRow struct {
	Link  link
	Under string
	Stop  button
}

// madeRows lists them.
func (s *Server) madeRows(c echo.Context) (rows []madeRow) {
	k := s.ink()
	for _, m := range s.makings.ofPerson(person(c).ID) {
		if !reflect.DeepEqual(m.scope, scope(c)) {
			continue
		}
		m.mu.Lock()
		row := madeRow{Link: link{Href: m.kind.path + m.id, Text: k.say(m.kind.words+"title") + ", " + m.site}, Stop: button{m.kind.path + m.id + "/stop", k.say("office.downloads.making_forget")}}
		switch {
		case m.err != nil:
			row.Under = k.say(m.kind.words + "failed")
		case m.out != nil:
			row.Under = k.say("office.downloads.made_until", "size", sizeText(m.size), "at", k.at(m.until, time.UTC))
		default:
			row.Under, row.Stop.Text = k.say(m.kind.words+"making"), k.say("office.downloads.making_stop")
		}
		m.mu.Unlock()
		rows = append(rows, row)
	}
	return rows
}

// makingTake sends the finished file.
func (s *Server) makingTake(c echo.Context) error {
	m, err := s.makingFor(c)
	if err != nil {
		return err
	}
	file, size, done, err := m.open()
	if err != nil {
		return err
	}
	defer done()
	c.Response().Header().Set("Content-Length", strconv.FormatInt(size, 10))
	return s.download(c, m.kind.mime, m.file, func(w io.Writer) error {
		_, err := io.Copy(w, file)
		return err
	})
}
