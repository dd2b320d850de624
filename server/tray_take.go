package server

import (
	"context"
	"io"
	"net/http"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// trayFile is what a phone writes when somebody saves its tray to a file: the exact bytes of every record it still has.
type trayFile struct {
	Tripwell     string `json:"tripwell"` // "tray"
	V            int    `json:"v"`        // 1
	Installation string `json:"installation"`
	Person       string `json:"person"` // name of who held the phone
	Made         string `json:"made"`
	Records      []struct {
		Record exactText `json:"record"`
		State  string    `json:"state"`
	} `json:"records"`
}

// TrayReport is what became of the records of a tray's file.
type TrayReport struct {
	Records int             `json:"records"`
	Stored  int             `json:"stored"`
	Already int             `json:"already"`
	Refused []store.Receipt `json:"refused"` // with the sentence of each
	Person  string          `json:"person"`
	Made    string          `json:"made"`
}

var errNoTray = refuse(codeInvalid, "file", "This is no file of a phone's tray. On the phone, open what is kept there and choose to save it to a file.")

// takeTray takes a tray's file in, 500 records at a time: as if its phone had sent them, stamped with where they came through.
func (s *Server) takeTray(ctx context.Context, file io.Reader, via string) (TrayReport, error) {
	raw, err := io.ReadAll(file)
	if err != nil {
		return TrayReport{}, errNoTray
	}
	var tray trayFile
	if err := json.Unmarshal(raw, &tray, jsontext.AllowInvalidUTF8(true)); err != nil || tray.Tripwell != "tray" {
		return TrayReport{}, errNoTray
	}
	if tray.V != 1 {
		return TrayReport{}, refuse(codeInvalid, "file", "The file was written by a newer program. Take it in with that one.")
	}
	report := TrayReport{Records: len(tray.Records), Refused: []store.Receipt{}, Person: tray.Person, Made: tray.Made}
	for from := 0; from < len(tray.Records); from += pushRecords {
		batch := []store.Incoming{}
		for _, r := range tray.Records[from:min(from+pushRecords, len(tray.Records))] {
			batch = append(batch, store.Incoming{Record: r.Record})
		}
		receipts, err := s.store.Push(ctx, store.Sender{Rescue: true, Via: via}, batch)
		if err != nil {
			return report, err
		}
		for _, r := range receipts {
			switch r.State {
			case "stored":
				report.Stored++
			case "already":
				report.Already++
			default:
				report.Refused = append(report.Refused, r)
			}
		}
	}
	return report, nil
}

// ownImportTray takes a phone's tray in from the body.
func (s *Server) ownImportTray(c echo.Context) error {
	report, err := s.takeTray(c.Request().Context(), c.Request().Body, "rescue")
	if err != nil {
		return err
	}
	return s.sendJSON(c, http.StatusOK, report)
}

// trayPage is the office page that takes a phone's tray in.
type trayPage struct {
	Frame
	Report  *TrayReport
	Problem string
}

func (s *Server) trayAsk(c echo.Context) error {
	return s.page(c, http.StatusOK, "tray.html", trayPage{Frame: s.frame(c, s.words.Say("rescue.title"), "")})
}

// trayTake takes the chosen file in and says what became of its records. The same file twice adds nothing.
func (s *Server) trayTake(c echo.Context) error {
	page := trayPage{Frame: s.frame(c, s.words.Say("rescue.title"), "")}
	file, _, err := c.Request().FormFile("file")
	if err != nil {
		page.Problem = s.words.Say("rescue.no_file")
		return s.page(c, http.StatusBadRequest, "tray.html", page)
	}
	defer file.Close()
	report, err := s.takeTray(c.Request().Context(), file, "rescue "+person(c).ID)
	if err != nil {
		if !isRefusal(err) {
			return err
		}
		page.Problem = err.Error()
		return s.page(c, http.StatusBadRequest, "tray.html", page)
	}
	page.Report = &report
	return s.page(c, http.StatusOK, "tray.html", page)
}
