package server

import (
	"slices"
	"strconv"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// protocol is the number of the exchange as it is spoken here. A phone that says another one is told so and keeps what
// it has; old numbers stay understood for ever once a release has shipped them.
const protocol = 1

const (
	pushRecords = 500
	pullRecords = 500
	askIDs      = 1000
)

// logRow is one log a phone may pull. Code and Name are empty for org.
type logRow struct {
	Log  string `json:"log"`
	Code string `json:"code,omitempty"`
	Name string `json:"name,omitempty"`
	Size int64  `json:"size"`
	Root string `json:"root,omitempty"` // base64; with Size the log's head
}

type logsAnswer struct {
	Logs  []logRow `json:"logs"`
	Store string   `json:"store"`
	Epoch int      `json:"epoch"`
	Now   string   `json:"now"` // the server's clock at answering, to measure the phone's offset against
	// Sealed are records of these logs whose bytes were dropped: a phone that still holds them drops them too.
	Sealed []string `json:"sealed,omitempty"`
}

// now writes the server's clock as the exchange sends it.
func (s *Server) now() string { return s.store.Now().UTC().Format("2006-01-02T15:04:05.000Z07:00") }

// logs lists org and the sites of a scope. The office log never leaves for a phone.
func (s *Server) logs(sc store.Scope) ([]logRow, error) {
	rows := []logRow{}
	err := s.store.View(sc, func(v *store.View) error {
		heads, err := v.Logs()
		if err != nil {
			return err
		}
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		of := map[string]store.LogHead{}
		for _, h := range heads {
			of[h.Log] = h
		}
		rows = append(rows, logRow{Log: "org", Size: of["org"].Size, Root: of["org"].Root})
		for _, site := range sites {
			rows = append(rows, logRow{Log: site.ID, Code: site.Code, Name: site.Name, Size: of[site.ID].Size, Root: of[site.ID].Root})
		}
		return nil
	})
	return rows, err
}

func (s *Server) exchangeLogs(c echo.Context) error {
	rows, err := s.logs(scope(c))
	if err != nil {
		return err
	}
	answer := logsAnswer{Logs: rows, Store: s.store.ID(), Epoch: s.store.Epoch(), Now: s.now()}
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		answer.Sealed, err = v.SealedIDs()
		return err
	})
	if err != nil {
		return err
	}
	return s.sendJSON(c, 200, answer)
}

// pullAnswer is a page of a log with the server's clock.
type pullAnswer struct {
	store.Pulled
	Now string `json:"now"`
}

func (s *Server) exchangePull(c echo.Context) error {
	log := c.QueryParam("log")
	if log == "" {
		return refuse(codeInvalid, "log", "No log is named. Ask for one of those GET /exchange/logs lists.")
	}
	limit, err := countParam(c, "limit", pullRecords)
	if err != nil {
		return err
	}
	pulled, err := s.store.Pull(scope(c), log, c.QueryParam("after"), min(limit, pullRecords))
	if err != nil {
		return err
	}
	if pulled.Records == nil {
		pulled.Records = []store.PulledRecord{}
	}
	return s.sendLongJSON(c, 200, pullAnswer{Pulled: pulled, Now: s.now()})
}

type askRequest struct {
	IDs []string `json:"ids"`
}

type receiptsAnswer struct {
	Receipts []store.Receipt `json:"receipts"`
	Now      string          `json:"now"`
}

// exchangeAsk tells what became of records without their bytes; ids nobody sent here are left out.
func (s *Server) exchangeAsk(c echo.Context) error {
	var req askRequest
	if err := decodeJSON(c, &req); err != nil {
		return err
	}
	if len(req.IDs) == 0 || len(req.IDs) > askIDs {
		return refuse(codeInvalid, "ids", "Ask for 1 to "+strconv.Itoa(askIDs)+" ids at once.")
	}
	receipts, err := s.store.Ask(scope(c), req.IDs)
	if err != nil {
		return err
	}
	if receipts == nil {
		receipts = []store.Receipt{}
	}
	return s.sendJSON(c, 200, receiptsAnswer{Receipts: receipts, Now: s.now()})
}

// exchangeSnapshot is what a phone takes along of one site, as of the site's present day.
func (s *Server) exchangeSnapshot(c echo.Context) error {
	log := c.QueryParam("log")
	var snap store.Snapshot
	err := s.store.View(scope(c), func(v *store.View) error {
		site, err := v.Site(log)
		if err != nil {
			return err
		}
		snap, err = v.Snapshot(site.ID, forms.DayOf(s.store.Now().In(site.Location())))
		return err
	})
	if err != nil {
		return err
	}
	return s.sendLongJSON(c, 200, snap)
}

type personRow struct {
	ID   string `json:"id"`
	Name string `json:"name"`
	Role string `json:"role"`
}

type peopleAnswer struct {
	People []personRow `json:"people"`
}

// exchangePeople gives the names a phone may show: of everybody who shares a site with its holder.
func (s *Server) exchangePeople(c echo.Context) error {
	people, err := s.store.People()
	if err != nil {
		return err
	}
	rows := []personRow{}
	sc := scope(c)
	for _, p := range people {
		if sc.All || p.All || p.ID == sc.Person || slices.ContainsFunc(p.Sites, sc.May) {
			rows = append(rows, personRow{ID: p.ID, Name: p.Name, Role: p.Role})
		}
	}
	return s.sendJSON(c, 200, peopleAnswer{People: rows})
}

type enrolRequest struct {
	Installation string `json:"installation"`
}

type enrolAnswer struct {
	Token  string    `json:"token"`
	Person personRow `json:"person"`
	logsAnswer
}

// exchangeEnrol gives the installation in a signed-in browser its bearer token. Enrolling again replaces the token.
func (s *Server) exchangeEnrol(c echo.Context) error {
	var req enrolRequest
	if err := decodeJSON(c, &req); err != nil {
		return err
	}
	return s.enrolled(c, req.Installation)
}

// exchangeRenew gives a phone that was copied or restored a new id beside the one it had: what it still has to send
// under the old id goes with the old token. Phones the store has not seen twice keep the id they have.
func (s *Server) exchangeRenew(c echo.Context) error {
	var req enrolRequest
	if err := decodeJSON(c, &req); err != nil {
		return err
	}
	copied, err := s.store.WasCopied(c.Get(callerKey).(*caller).installation)
	if err != nil {
		return err
	}
	if !copied {
		return refuse(codeConflict, "installation", "This phone is known once only and keeps its id.")
	}
	return s.enrolled(c, req.Installation)
}

func (s *Server) enrolled(c echo.Context, installation string) error {
	p := person(c)
	token, err := s.store.Enrol(c.Request().Context(), p.ID, installation)
	if err != nil {
		return err
	}
	rows, err := s.logs(p.Scope())
	if err != nil {
		return err
	}
	return s.sendJSON(c, 200, enrolAnswer{Token: token, Person: personRow{p.ID, p.Name, p.Role},
		logsAnswer: logsAnswer{Logs: rows, Store: s.store.ID(), Epoch: s.store.Epoch(), Now: s.now()}})
}

// instant reads an optional RFC 3339 time.
func instant(field, text string) (time.Time, error) {
	if text == "" {
		return time.Time{}, nil
	}
	t, err := time.Parse(time.RFC3339Nano, text)
	if err != nil {
		return t, refuse(codeInvalid, field, "This is no time with an offset, like 2026-12-01T07:52:00.000Z. Send it that way.")
	}
	return t, nil
}
