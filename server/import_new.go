package server

import (
	"bytes"
	"errors"
	"io"
	"net/http"
	"path/filepath"

	"github.com/labstack/echo/v4"

	"tripwell/export/intake"
	"tripwell/export/register"
	"tripwell/store"
)

// importPage asks for a file.
type importPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Wrong         string
	Columns       []link // what a register may hold
	Kept          keptList
}

func (s *Server) importNew(c echo.Context) error {
	return s.importAsk(c, http.StatusOK, "")
}

func (s *Server) importAsk(c echo.Context, status int, wrong string) error {
	k := s.ink()
	p := importPage{Frame: s.frame(c, k.say("intake.title"), "sites"), Crumbs: []link{{Href: "/sites", Text: k.say("office.nav.sites")}}, Heading: k.say("intake.heading"), Lead: k.say("intake.lead"), Wrong: wrong}
	for _, name := range register.ColumnNames() {
		p.Columns = append(p.Columns, link{Text: k.say("intake.column." + name)})
	}
	kept, err := s.keptColumns(ofRegister, nil)
	if err != nil {
		return err
	}
	p.Kept = keptList{"/import/columns", kept}
	return s.page(c, status, "import.html", p)
}

// importTake keeps the file a manager chose, and goes on to its preview. A file that cannot be one is told at once.
func (s *Server) importTake(c echo.Context) error {
	u, err := uploadOf(c)
	if err == nil {
		u.mapping, err = register.ParseMapping(u.kept)
	}
	if err == nil {
		u.person = person(c).ID
		if err = s.looksRight(c, &u); err == nil {
			return toPage(c, "/import/"+s.imports.put(u, s.store.Now()))
		}
	}
	w, fault := wrongOf(err)
	if fault {
		return err
	}
	return s.importAsk(c, http.StatusUnprocessableEntity, w.Text)
}

// looksRight opens the file once, so that one that is no sheet is refused before anything is asked about it.
func (s *Server) looksRight(c echo.Context, u *upload) error {
	p, err := s.prepared(c, *u)
	if err == nil {
		u.shapes = p.Shapes
	}
	return err
}

// uploadOf reads the file, and the columns kept from an earlier one, out of a multipart form without temporary files.
func uploadOf(c echo.Context) (u upload, err error) {
	parts, err := c.Request().MultipartReader()
	if err != nil {
		return u, refuse(codeInvalid, "file", "No file came along. Choose a CSV or XLSX file and send it again.")
	}
	for {
		part, err := parts.NextPart()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return u, formError(err)
		}
		raw, err := io.ReadAll(io.LimitReader(part, uploadBytes+1))
		switch {
		case err != nil:
			return u, formError(err)
		case len(raw) > uploadBytes:
			return u, refuse(codeTooLarge, "file", "The file is larger than 10 MiB. Import it in parts, one site a file, or use the command tripwell import.")
		}
		switch part.FormName() {
		case "file":
			u.name, u.raw = shortName(part.FileName()), raw
		case "map":
			u.kept = raw
		case "what":
			u.said = string(raw)
		}
	}
	if len(u.raw) == 0 {
		return u, refuse(codeInvalid, "file", "No file came along, or it is empty. Choose a CSV or XLSX file and send it again.")
	}
	return u, nil
}

// shortName is a file's name without the folders some browsers send.
func shortName(s string) string {
	r := []rune(filepath.Base(filepath.ToSlash(s)))
	if len(r) > 80 {
		r = append(r[:80], '…')
	}
	return string(r)
}

// prepared takes an upload apart and compares it with the register. One at a time: see importArea.
func (s *Server) prepared(c echo.Context, u upload) (*register.Prepared, error) {
	done, err := s.imports.take(c.Request().Context())
	if err != nil {
		return nil, err
	}
	defer done()
	return register.Prepare(s.store, u.name, bytes.NewReader(u.raw), register.Options{By: person(c).ID, Mapping: u.mapping, NewTags: u.newTags, Caps: intake.Caps{Bytes: uploadBytes, Unpacked: 64 << 20, Cells: 1_000_000}})
}

// uploadFor reads the upload an address names.
func (s *Server) uploadFor(c echo.Context) (upload, error) {
	return s.imports.get(c.Param("upload"), person(c).ID, s.store.Now())
}

// importDo imports what the preview showed. What the store refuses is told on the preview; whole rows are in or not.
func (s *Server) importDo(c echo.Context, u upload) error {
	p, err := s.prepared(c, u)
	if err != nil {
		return err
	}
	rejects := p.Rejects()
	report, err := p.Append(c.Request().Context(), s.store, nil)
	var refused *store.Error
	if errors.As(err, &refused) {
		u.note = s.words.Say("intake.stopped", "why", refused.Text)
		s.imports.change(u)
		return toPage(c, "/import/"+u.id)
	}
	if err != nil {
		return err
	}
	u.done, u.rejects, u.note = &report, rejects, ""
	s.imports.change(u)
	return toPage(c, "/import/"+u.id)
}
