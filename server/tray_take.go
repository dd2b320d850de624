package server

import (
	"context"
	"io"
	"net/http"
	"slices"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// trayFile is what a phone writes when somebody saves its tray to a file: the exact bytes of every record it still has, then its
// photos. The photos come last and are taken one at a time: hundreds of them are more than belongs in memory.
type trayFile struct {
	Tripwell     string // "tray"
	V            int    // 1
	Installation string
	Person       string // name of who held the phone
	Made         string
	Records      []trayRecord
}

type trayRecord struct {
	Record exactText `json:"record"`
	State  string    `json:"state"`
}

type trayPhoto struct {
	SHA256 string `json:"sha256"`
	Entry  string `json:"entry"`
	Base64 []byte `json:"base64"`
}

// TrayReport is what became of the records and photos of a tray's file.
type TrayReport struct {
	Records int             `json:"records"`
	Stored  int             `json:"stored"`
	Already int             `json:"already"`
	Refused []store.Receipt `json:"refused"` // with the sentence of each
	Photos  int             `json:"photos"`  // that are here now
	NoPhoto []PhotoLeft     `json:"no_photo"`
	Person  string          `json:"person"`
	Made    string          `json:"made"`
}

// PhotoLeft is a photo of a tray's file that was not taken.
type PhotoLeft struct {
	Name string `json:"name"`
	Text string `json:"text"`
}

var (
	errNoTray    = refuse(codeInvalid, "file", "This is no file of a phone's tray. On the phone, open what is kept there and choose to save it to a file.")
	errNewerTray = refuse(codeInvalid, "file", "The file was written by a newer program. Take it in with that one.")
)

// takeTray takes a tray's file in: as if its phone had sent it, stamped with where it came through. A file that breaks off among
// its photos has its records taken all the same.
func (s *Server) takeTray(ctx context.Context, file io.Reader, via string) (TrayReport, error) {
	dec := jsontext.NewDecoder(file, jsontext.AllowInvalidUTF8(true))
	if open, err := dec.ReadToken(); err != nil || open.Kind() != '{' {
		return TrayReport{}, errNoTray
	}
	var tray trayFile
	report, taken := TrayReport{Refused: []store.Receipt{}, NoPhoto: []PhotoLeft{}}, false
	records := func() (err error) {
		if !taken {
			taken = true
			err = s.takeTrayRecords(ctx, tray, via, &report)
		}
		return err
	}
	parts := map[string]any{"tripwell": &tray.Tripwell, "v": &tray.V, "installation": &tray.Installation, "person": &tray.Person, "made": &tray.Made, "records": &tray.Records}
	for dec.PeekKind() == '"' {
		name, err := dec.ReadToken()
		if err != nil {
			return TrayReport{}, errNoTray
		}
		if name.String() == "photos" {
			if err := records(); err != nil {
				return report, err
			}
			if err := s.takeTrayPhotos(dec, &report); err != nil {
				return report, err
			}
			continue
		}
		into, known := parts[name.String()]
		if !known {
			into = new(jsontext.Value)
		}
		if err := json.UnmarshalDecode(dec, into); err != nil {
			return TrayReport{}, errNoTray
		}
	}
	if end, err := dec.ReadToken(); err != nil || end.Kind() != '}' {
		return TrayReport{}, errNoTray
	}
	return report, records()
}

// takeTrayRecords pushes the records, 500 at a time.
func (s *Server) takeTrayRecords(ctx context.Context, tray trayFile, via string, report *TrayReport) error {
	if tray.Tripwell != "tray" {
		return errNoTray
	}
	if tray.V != 1 {
		return errNewerTray
	}
	report.Records, report.Person, report.Made = len(tray.Records), tray.Person, tray.Made
	for part := range slices.Chunk(tray.Records, pushRecords) {
		batch := make([]store.Incoming, len(part))
		for i, r := range part {
			batch[i].Record = r.Record
		}
		receipts, err := s.store.Push(ctx, store.Sender{Rescue: true, Via: via}, batch)
		if err != nil {
			return err
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
	return nil
}

// takeTrayPhotos keeps the photos that follow, each through the entry that names it.
func (s *Server) takeTrayPhotos(dec *jsontext.Decoder, report *TrayReport) error {
	if open, err := dec.ReadToken(); err != nil || open.Kind() != '[' {
		return errNoTray
	}
	for dec.PeekKind() == '{' {
		var p trayPhoto
		if err := json.UnmarshalDecode(dec, &p); err != nil {
			return errNoTray
		}
		switch err := s.store.KeepPhoto(ownerScope, p.Entry, p.SHA256, p.Base64); {
		case err == nil:
			report.Photos++
		case isRefusal(err):
			report.NoPhoto = append(report.NoPhoto, PhotoLeft{p.SHA256, err.Error()})
		default:
			return err
		}
	}
	if end, err := dec.ReadToken(); err != nil || end.Kind() != ']' {
		return errNoTray
	}
	return nil
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
