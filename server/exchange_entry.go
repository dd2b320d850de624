package server

import (
	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// entryAnswer is an entry for the phone that corrects it: the exact records, as a phone keeps its own.
type entryAnswer struct {
	Record string `json:"record"`
	Newer  string `json:"newer,omitempty"` // the correction in force
	By     string `json:"by"`
	Now    string `json:"now"`
}

// exchangeEntry gives an entry to a phone that did not make it, so that its tester can correct it from there.
func (s *Server) exchangeEntry(c echo.Context) error {
	answer := entryAnswer{Now: s.now()}
	err := s.store.View(scope(c), func(v *store.View) error {
		e, err := v.Entry(c.QueryParam("id"))
		if err != nil {
			return err
		}
		if e.Sealed != nil || e.Imported {
			return refuse(codeConflict, "id", "This entry cannot be corrected on a phone. A manager can do it in the office.")
		}
		answer.By = e.By
		raw, _, err := v.Record(e.ID)
		if err != nil {
			return err
		}
		answer.Record = string(raw)
		for _, k := range e.Corrections {
			if !k.InForce || k.Withdraw {
				continue
			}
			if raw, _, err = v.Record(k.Record); err != nil {
				return err
			}
			answer.Newer = string(raw)
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.sendJSON(c, 200, answer)
}
