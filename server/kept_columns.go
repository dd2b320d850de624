package server

import (
	"encoding/json"
	"fmt"

	"github.com/labstack/echo/v4"

	"tripwell/export/register"
	"tripwell/export/results"
	"tripwell/forms"
	"tripwell/store"
)

// What columns are kept of.
const (
	ofRegister = "register"
	ofResults  = "results"
)

// columnsKept is what somebody said of the columns of a file, kept under a name.
type columnsKept struct{ Name, Under string }

// keptList is shown where a file is chosen; Action deletes one of it.
type keptList struct {
	Action string
	Rows   []columnsKept
}

// keptColumns lists what is kept of files of one kind, of those that fit where fits is given.
func (s *Server) keptColumns(of string, fits func(store.KeptColumns) bool) (rows []columnsKept, err error) {
	list, err := s.store.KeptColumns(of)
	if err != nil {
		return nil, err
	}
	k := s.ink()
	for _, kept := range list {
		if fits != nil && !fits(kept) {
			continue
		}
		by := k.say("intake.kept_owner")
		if p, err := s.store.Person(kept.By); err == nil {
			by = p.Name
		}
		rows = append(rows, columnsKept{kept.Name, k.say("intake.kept_by", "day", k.day(forms.DayOf(kept.At)), "by", by)})
	}
	return rows, nil
}

// keepAs asks for the name to keep a file's columns under.
func (s *Server) keepAs(u upload) field {
	return field{Name: "keep_as", Type: "text", Label: s.words.Say("intake.keep_as"), Hint: s.words.Say("intake.keep_as_hint"), Value: u.keptAs}
}

// columnsNamed gives what is kept under a name.
func (s *Server) columnsNamed(of, name string) (kept store.KeptColumns, err error) {
	list, err := s.store.KeptColumns(of)
	for _, one := range list {
		if one.Name == name {
			return one, nil
		}
	}
	if err == nil {
		err = refuse(codeNotFound, "", s.words.Say("intake.kept_gone"))
	}
	return kept, err
}

// keepColumns keeps how a file was read under a name, and says what to tell the person.
func (s *Server) keepColumns(c echo.Context, of, name string, shapes []string, said any) (note string, err error) {
	raw, err := json.Marshal(said)
	if err != nil {
		return "", fmt.Errorf("keep columns: %w", err)
	}
	if len(shapes) == 0 {
		return s.words.Say("intake.keep_none"), nil
	}
	err = s.store.KeepColumns(c.Request().Context(), store.KeptColumns{Of: of, Name: name, Shapes: shapes, Said: raw, By: person(c).ID})
	if w, fault := wrongOf(err); err != nil && !fault {
		return w.Text, nil
	}
	return s.words.Say("intake.kept_now", "name", name), err
}

// importColumnsDrop and resultsColumnsDrop delete what is kept under a name.
func (s *Server) importColumnsDrop(c echo.Context) error {
	return s.columnsDrop(c, ofRegister, "/import")
}

func (s *Server) resultsColumnsDrop(c echo.Context) error {
	return s.columnsDrop(c, ofResults, "/results")
}

func (s *Server) columnsDrop(c echo.Context, of, page string) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	if err := s.store.DropColumns(c.Request().Context(), of, f.Get("name")); err != nil {
		return err
	}
	return toPage(c, page)
}

// registerUse reads an upload's columns as they are kept under a name, and says so.
func (s *Server) registerUse(u *upload, name string) error {
	kept, err := s.columnsNamed(ofRegister, name)
	if err != nil {
		return err
	}
	if u.mapping, err = register.ParseMapping(kept.Said); err == nil {
		u.note, u.keptAs = s.words.Say("intake.kept_used", "name", name), name
	}
	return err
}

// resultsUse does the same for tests made elsewhere; what else was said of the file stays.
func (s *Server) resultsUse(u *upload, name string) error {
	kept, err := s.columnsNamed(ofResults, name)
	if err != nil {
		return err
	}
	ask, err := results.ParseAsk(kept.Said)
	if err == nil {
		u.ask.Columns, u.ask.Dates = ask.Columns, ask.Dates
		u.note, u.keptAs = s.words.Say("intake.kept_used", "name", name), name
	}
	return err
}
