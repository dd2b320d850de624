package server

import (
	"errors"
	"io"

	"github.com/labstack/echo/v4"

	"tripwell/export/paper"
	"tripwell/store"
	"tripwell/store/proof"
)

// sendStatement sends the two pages that state what was tested at a site. Query: site (id or code), from and to (test days; open: the
// last twelve months), paper (letter or a4).
func (s *Server) sendStatement(c echo.Context, sc store.Scope, by string) error {
	asked, name, err := s.workbookAsk(c, sc)
	if err != nil {
		return err
	}
	size, err := paper.SizeNamed(c.QueryParam("paper"))
	if err != nil {
		return err
	}
	if asked.Site == "" {
		return refuse(codeInvalid, "site", "A statement is of one site. Choose it.")
	}
	ask := paper.StatementAsk{Site: asked.Site, From: asked.From, To: asked.To, Now: s.store.Now(), Organisation: asked.Organisation, Store: s.store.ID(), Epoch: s.store.Epoch(), Demo: s.store.Demo()}
	if ask.Head, ask.NoHead, ask.Print, err = s.headForPaper(); err != nil {
		return err
	}
	var statement paper.Statement
	err = s.store.View(sc, func(v *store.View) error {
		statement, err = paper.StatementOf(v, ask)
		return err
	})
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "statement", asked.Site, statement.From, statement.To); err != nil {
		return err
	}
	return s.download(c, pdfKind, "statement-"+name+"-"+statement.To.String()+".pdf", func(w io.Writer) error { return paper.PrintStatement(w, statement, size) })
}

// headForPaper signs a head for a printed page, so that the paper is a witness; why there is none where the store must not sign.
func (s *Server) headForPaper() (head, none, print string, err error) {
	head, err = s.store.SignedHead()
	var refused *store.Error
	if errors.As(err, &refused) {
		return "", refused.Text, "", nil
	}
	if err != nil {
		return "", "", "", err
	}
	key, err := s.store.HeadKey()
	return head, "", proof.Fingerprint(key), err
}

// statementTake and ownStatement are its two doors.
func (s *Server) statementTake(c echo.Context) error {
	return s.sendStatement(c, scope(c), person(c).ID)
}

func (s *Server) ownStatement(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendStatement(c, ownerScope, by)
}
