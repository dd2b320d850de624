package server

import (
	"strconv"

	"github.com/labstack/echo/v4"

	"tripwell/store"
	"tripwell/store/proof"
)

// headAnswer is a log's head with what shows that it goes on from the head a phone kept.
type headAnswer struct {
	Log   string       `json:"log"`
	Size  int64        `json:"size"`
	Root  string       `json:"root"`
	From  int64        `json:"from"`
	Proof []proof.Hash `json:"proof"` // RFC 6962 consistency proof; empty where from is 0, size or beyond it
	Own   *headOwn     `json:"own,omitempty"`
	Store string       `json:"store"`
	Epoch int          `json:"epoch"`
	Now   string       `json:"now"`
}

// headOwn shows that a record stands at its place: leaf data = stamp + 0x0A + the record's bytes.
type headOwn struct {
	Pos   int64        `json:"pos"`
	Stamp string       `json:"stamp"`
	Proof []proof.Hash `json:"proof"` // RFC 6962 audit path
}

// exchangeHead proves a log from the size a phone knew of it, and one place of it.
func (s *Server) exchangeHead(c echo.Context) error {
	from, err := placeParam(c, "from")
	if err != nil {
		return err
	}
	own, err := placeParam(c, "own")
	if err != nil {
		return err
	}
	answer := headAnswer{From: from, Proof: []proof.Hash{}, Store: s.store.ID(), Epoch: s.store.Epoch(), Now: s.now()}
	err = s.store.View(scope(c), func(v *store.View) error {
		p, err := v.LogProof(c.QueryParam("log"), from, own)
		if err != nil {
			return err
		}
		answer.Log, answer.Size, answer.Root = p.Log, p.Size, p.Root
		answer.Proof = append(answer.Proof, p.Proof...)
		if p.Own != nil {
			answer.Own = &headOwn{p.Own.Pos, p.Own.Stamp, append([]proof.Hash{}, p.Own.Proof...)}
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.sendJSON(c, 200, answer)
}

// placeParam reads a size or a place of a log, 0 where none is asked for.
func placeParam(c echo.Context, name string) (int64, error) {
	text := c.QueryParam(name)
	if text == "" {
		return 0, nil
	}
	n, err := strconv.ParseInt(text, 10, 64)
	if err != nil || n < 0 {
		return 0, refuse(codeInvalid, name, "A place in a log is a whole number from 1 on. Send it in digits.")
	}
	return n, nil
}

type headDoubted struct {
	Log  string `json:"log"`
	Size int64  `json:"size"`
	Root string `json:"root"`
}

type headTaken struct {
	Holds bool   `json:"holds"`
	Now   string `json:"now"`
}

// exchangeHeadTake takes the head a phone kept and does not find continued. The server looks for itself; what does not hold stands on
// the manager's page until somebody has looked into it.
func (s *Server) exchangeHeadTake(c echo.Context) error {
	var req headDoubted
	if err := decodeJSON(c, &req); err != nil {
		return err
	}
	who := c.Get(callerKey).(*caller)
	holds, err := s.store.TakeHead(c.Request().Context(), scope(c), store.HeadDoubt{Log: req.Log, Installation: who.installation, Size: req.Size, Root: req.Root, Person: person(c).ID})
	if err != nil {
		return err
	}
	return s.sendJSON(c, 200, headTaken{holds, s.now()})
}
