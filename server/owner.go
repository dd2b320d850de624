package server

import (
	"bufio"
	"context"
	"encoding/json"
	"io"
	"net/http"
	"strconv"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// ownerRoutes is everything the owner's face answers, for the commands.
func ownerRoutes() []route {
	return []route{
		{get, "/own/info", owner, (*Server).ownInfo, 0},
		{get, "/own/due", owner, (*Server).ownDue, 0},
		{get, "/own/workbook", owner, (*Server).ownWorkbook, 0},
		{get, "/own/bundle", owner, (*Server).ownBundle, 0},
		{get, "/own/labels", owner, (*Server).ownLabels, 0},
		{post, "/own/labels/batch", owner, (*Server).ownLabelsBatch, 0},
		{get, "/own/label", owner, (*Server).ownLabel, 0},
		{get, "/own/table", owner, (*Server).ownTable, 0},
		{get, "/own/round-sheet", owner, (*Server).ownRound, 0},
		{get, "/own/statement", owner, (*Server).ownStatement, 0},
		{get, "/own/device-sheet", owner, (*Server).ownSheet, 0},
		{post, "/own/import/register", owner, (*Server).ownImportRegister, importLimit},
		{post, "/own/import/tray", owner, (*Server).ownImportTray, trayLimit},
		{post, "/own/backup", owner, (*Server).ownBackup, 0},
		{get, "/own/backup", owner, (*Server).ownBackupTake, 0},
		{post, "/own/backup/kept", owner, (*Server).ownBackupKept, 0},
		{get, "/own/photos", owner, (*Server).ownPhotos, 0},
		{get, "/own/photos/:photo", owner, (*Server).ownPhoto, 0},
		{get, "/own/rules/:rules", owner, (*Server).ownRules, 0},
		{post, "/own/rules/:rules", owner, (*Server).ownRulesImport, rulesLimit},
		{post, "/own/import/readings", owner, (*Server).ownImportReadings, importLimit},
		{get, "/own/seal", owner, (*Server).ownSealing, 0},
		{post, "/own/seal", owner, (*Server).ownSeal, 0},
		{get, "/own/check", owner, (*Server).ownCheck, 0},
		{post, "/own/rebuild", owner, (*Server).ownRebuild, 0},
	}
}

// ownerScope sees everything.
var ownerScope = store.Scope{Role: "owner", All: true}

// Info says what store answers.
type Info struct {
	Store string    `json:"store"`
	Epoch int       `json:"epoch"`
	Demo  bool      `json:"demo"`
	URL   string    `json:"url"` // label address; "" = labels cannot be made yet
	Now   time.Time `json:"now"`
}

func (s *Server) ownInfo(c echo.Context) error {
	return s.sendJSON(c, http.StatusOK, Info{Store: s.store.ID(), Epoch: s.store.Epoch(), Demo: s.store.Demo(), URL: s.store.URL(), Now: s.store.Now()})
}

// DueLine is one line of GET /own/due and of the command that prints it.
type DueLine struct {
	Device string     `json:"device"` // id
	Tag    string     `json:"tag"`
	Site   string     `json:"site"` // code
	Place  string     `json:"place"`
	Task   string     `json:"task"`
	Due    forms.Day  `json:"due"`
	State  string     `json:"state"`
	Last   *forms.Day `json:"last"` // null: never
}

// ownDue sends what is due, one JSON object a line, site by site and by date within each. Query: on (day, else each
// site's own today), site (id or code, else all), until (day: upcoming dates up to it as well).
func (s *Server) ownDue(c echo.Context) error {
	on, err := dayParam(c, "on")
	if err != nil {
		return err
	}
	until, err := dayParam(c, "until")
	if err != nil {
		return err
	}
	return s.lines(c, func(send func(any) error) error {
		return s.store.View(ownerScope, func(v *store.View) error {
			sites, err := sitesAsked(v, c.QueryParam("site"))
			if err != nil {
				return err
			}
			for _, site := range sites {
				if err := dueOfSite(v, site, s.dayThere(site, on), until, send); err != nil {
					return err
				}
			}
			return nil
		})
	})
}

func dueOfSite(v *store.View, site store.Site, on, until forms.Day, send func(any) error) error {
	for row, err := range v.Due(store.DueAsk{On: on, Until: until, Site: site.ID}) {
		if err != nil {
			return err
		}
		if until == forms.NoDay && row.State == "upcoming" {
			continue
		}
		line := DueLine{Device: row.Device.ID, Tag: row.Device.Tag, Site: site.Code, Place: placeText(row.Device.Place), Task: row.Task, Due: row.Due.Due, State: row.State}
		if row.Due.Last != forms.NoDay {
			line.Last = &row.Due.Last
		}
		if err := send(line); err != nil {
			return err
		}
	}
	return nil
}

// placeText is a place in one line: where it is, then the spot.
func placeText(p store.Place) string {
	if where := p.Context(); where != "" && p.Name != "" {
		return where + " · " + p.Name
	} else if where != "" {
		return where
	}
	return p.Name
}

// sitesAsked gives the one site named by id or code, or all.
func sitesAsked(v *store.View, idOrCode string) ([]store.Site, error) {
	if idOrCode == "" {
		return v.Sites()
	}
	site, err := v.Site(idOrCode)
	return []store.Site{site}, err
}

// dayThere is the day asked for, or the present day at the site.
func (s *Server) dayThere(site store.Site, asked forms.Day) forms.Day {
	if asked != forms.NoDay {
		return asked
	}
	return forms.DayOf(s.store.Now().In(site.Location()))
}

func dayParam(c echo.Context, name string) (forms.Day, error) {
	return dayTyped(name, c.QueryParam(name))
}

func dayTyped(name, text string) (forms.Day, error) {
	if text == "" {
		return forms.NoDay, nil
	}
	d, err := forms.ParseDay(text)
	if err != nil {
		return forms.NoDay, refuse(codeInvalid, name, err.Error()+".")
	}
	return d, nil
}

// countParam reads a whole number from 1; absent is what it stands for without one.
func countParam(c echo.Context, name string, absent int) (int, error) {
	text := c.QueryParam(name)
	if text == "" {
		return absent, nil
	}
	n, err := strconv.Atoi(text)
	if err != nil || n < 1 {
		return 0, refuse(codeInvalid, name, "This is no whole number from 1. Write it in digits.")
	}
	return n, nil
}

// ownWorkbook streams the workbook. Query: site (id or code), from and to (test days), by (person).
func (s *Server) ownWorkbook(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendWorkbook(c, ownerScope, by)
}

// ownBy is in whose name a command acts: the person asked for with by (id or name), else the first manager of all sites.
func (s *Server) ownBy(c echo.Context) (string, error) {
	people, err := s.store.People()
	if err != nil {
		return "", err
	}
	if by := c.QueryParam("by"); by != "" {
		return personCalled(people, by)
	}
	for _, p := range people {
		if p.Active && p.All && p.Role == "manager" {
			return p.ID, nil
		}
	}
	return "", refuse(codeConflict, "by", "There is no manager of all sites yet. Start the server and open the first manager's sign-in link, or name a person with --by.")
}

// personCalled finds one person by id or by name.
func personCalled(people []store.Person, by string) (string, error) {
	var found []string
	for _, p := range people {
		if p.ID == by {
			return p.ID, nil
		}
		if strings.EqualFold(p.Name, by) {
			found = append(found, p.ID)
		}
	}
	switch len(found) {
	case 1:
		return found[0], nil
	case 0:
		return "", refuse(codeNotFound, "by", "There is no such person here. Give a name as the list of people shows it.")
	}
	return "", refuse(codeInvalid, "by", "Several people have this name. Give the id of one of them: "+strings.Join(found, ", ")+".")
}

func (s *Server) ownCheck(c echo.Context) error {
	return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
		return s.store.Check(ctx, progress)
	})
}

// ownRebuild computes the read models anew. Beside a server it is refused: pages would be read half old, half new.
func (s *Server) ownRebuild(c echo.Context) error {
	if !s.alone {
		return refuse(codeConflict, "", "The server is running on this folder. Stop it, run rebuild, then start it again.")
	}
	return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
		if err := s.store.Rebuild(ctx, progress); err != nil {
			return nil, err
		}
		hash, err := s.store.ViewHash()
		return Rebuilt{ViewHash: hash}, err
	})
}

// Rebuilt is the report of POST /own/rebuild.
type Rebuilt struct {
	ViewHash string `json:"view_hash"` // over every read model as rebuilt
}

// lines sends JSON lines as they come. The first error before any line is answered as an error; a later one breaks the
// connection.
func (s *Server) lines(c echo.Context, produce func(send func(any) error) error) error {
	return s.stream(c, "application/x-ndjson", func(w io.Writer) error {
		buffered := bufio.NewWriterSize(w, 32<<10)
		enc := json.NewEncoder(buffered)
		enc.SetEscapeHTML(false)
		if err := produce(enc.Encode); err != nil {
			return err
		}
		return buffered.Flush()
	})
}

// workLine is a line of an answer that takes long: {"progress":{…}} now and then, {"report":…} or {"error":{…}} last.
type workLine struct {
	Progress *progressLine `json:"progress,omitempty"`
	Report   any           `json:"report,omitempty"`
	Error    *Wrong        `json:"error,omitempty"`
}

type progressLine struct {
	Done  int64 `json:"done"`
	Total int64 `json:"total"`
}

const progressEvery = 200 * time.Millisecond

// work runs something long for as long as its caller listens, and tells how far it is.
func (s *Server) work(c echo.Context, do func(ctx context.Context, progress func(done, total int64)) (any, error)) error {
	res := c.Response()
	res.Header().Set("Content-Type", "application/x-ndjson")
	enc := json.NewEncoder(res)
	enc.SetEscapeHTML(false)
	var told time.Time
	report, err := do(c.Request().Context(), func(done, total int64) {
		if time.Since(told) < progressEvery {
			return
		}
		told = time.Now()
		if enc.Encode(workLine{Progress: &progressLine{done, total}}) == nil {
			res.Flush()
		}
	})
	if err != nil {
		if !res.Committed {
			return err
		}
		w := s.told(c, err)
		return enc.Encode(workLine{Error: &w})
	}
	return enc.Encode(workLine{Report: report})
}
