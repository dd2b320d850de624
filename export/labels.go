package export

import (
	"fmt"
	"io"
	"strings"
	"time"
	"unicode/utf8"

	"codeberg.org/go-pdf/fpdf"

	"tripwell/static"
	"tripwell/store"
)

// Label is one label: what is printed and the address its code opens.
type Label struct {
	Tag     string // K7QM2P3, printed as K7Q-M2P-3
	Address string // HTTPS://HOST/T/K7QM2P3: only letters of the code's compact alphabet
	Spot    string // "By the sink"
	Context string // "Ground floor · Kitchen"
	Circuit string // "LP-2 / 14"
	Demo    bool
}

// labelInset keeps print away from the edge of a label, in mm: sheets feed a little askew.
const labelInset = 1.5

// labelMade is the date inside the file. It is fixed, so that the same labels make the same bytes.
var labelMade = time.Date(2000, 1, 1, 0, 0, 0, 0, time.UTC)

// Labels writes a PDF of labels, beginning at the label with number start (from 1) of the first page, so that a sheet
// of which some labels are used can go through the printer again.
func Labels(w io.Writer, size SheetSize, labels []Label, start int) error {
	if start < 1 || start > size.PerPage() {
		return &store.Error{Code: "invalid", Field: "start", Text: fmt.Sprintf("The first label must be from 1 to %d on this sheet; %d is not.", size.PerPage(), start)}
	}
	if len(labels) == 0 {
		return &store.Error{Code: "not_found", Field: "site", Text: "There are no labels to print: no device here has a tag yet. Give the devices tags first."}
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return fmt.Errorf("labels: %w", err)
	}
	p := newLabelPage(size, words.Say("sheet.label_demo"))
	place := func(i int) (x, y float64) {
		_, x, y = size.Position(start - 1 + i)
		return x + labelInset/2, y + labelInset/2
	}
	stop := make(chan struct{})
	defer close(stop)
	box, at := size.LabelH-labelInset, 0
	for next := range encodeCodes(labels, place, box, size.PageH, stop) {
		code := <-next
		if code.err != nil {
			return code.err
		}
		p.draw(labels[at], start-1+at, code, box)
		at++
	}
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("labels: %w", err)
	}
	return nil
}

type labelPage struct {
	pdf   *fpdf.Fpdf
	size  SheetSize
	pages int
	demo  string
}

func newLabelPage(size SheetSize, demo string) *labelPage {
	pdf := fpdf.NewCustom(&fpdf.InitType{UnitStr: "mm", Size: fpdf.SizeType{Wd: size.PageW, Ht: size.PageH}})
	pdf.SetCatalogSort(true)
	pdf.SetCreationDate(labelMade)
	pdf.SetModificationDate(labelMade)
	pdf.SetProducer("Tripwell", true)
	pdf.SetAutoPageBreak(false, 0)
	pdf.SetMargins(0, 0, 0)
	pdf.AddUTF8FontFromBytes("sans", "", sansFont)
	pdf.AddUTF8FontFromBytes("sans", "B", sansBoldFont)
	pdf.AddUTF8FontFromBytes("mono", "B", monoBoldFont)
	return &labelPage{pdf: pdf, size: size, demo: demo}
}

// draw puts one label on its page: the code at the left over the full height, words at the right.
func (p *labelPage) draw(l Label, n int, code drawnCode, box float64) {
	page, x, y := p.size.Position(n)
	for p.pages <= page {
		p.pdf.AddPage()
		p.pages++
	}
	p.pdf.SetFillColor(0, 0, 0)
	p.pdf.RawWriteStr(string(code.path))
	left := x + labelInset/2 + code.side
	room := x + p.size.LabelW - labelInset - left
	baseline := y + labelInset + 4.6
	tagRoom := room
	if l.Demo {
		tagRoom -= p.demoMark(x+p.size.LabelW-labelInset, baseline)
	}
	p.line(left, baseline, tagRoom, "mono", 13, 9, tagText(l.Tag))
	baseline += 1.1
	for _, line := range p.spotLines(l.Spot, room) {
		baseline += 3.5
		p.line(left, baseline, room, "sansB", 8, 6.5, line)
	}
	for _, line := range []string{l.Context, l.Circuit} {
		if line != "" {
			baseline += 3.4
			p.line(left, baseline, room, "sans", 7, 5.5, line)
		}
	}
}

// demoMark prints the mark at the right edge and gives the width it takes.
func (p *labelPage) demoMark(right, baseline float64) float64 {
	p.font("sansB", 7)
	w := p.pdf.GetStringWidth(p.demo)
	p.pdf.SetDrawColor(0, 0, 0)
	p.pdf.SetLineWidth(0.2)
	p.pdf.Rect(right-w-1.4, baseline-3, w+1.4, 3.8, "D")
	p.pdf.Text(right-w-0.7, baseline-0.2, p.demo)
	return w + 2.4
}

// spotLines breaks a spot that is too wide into two lines at a space.
func (p *labelPage) spotLines(spot string, room float64) []string {
	spot = printable(spot)
	p.font("sansB", 8)
	if spot == "" || p.pdf.GetStringWidth(spot) <= room {
		return nonEmpty(spot)
	}
	for i := len(spot) - 1; i > 0; i-- {
		if spot[i] == ' ' && p.pdf.GetStringWidth(spot[:i]) <= room {
			return nonEmpty(spot[:i], strings.TrimSpace(spot[i:]))
		}
	}
	return []string{spot}
}

func nonEmpty(lines ...string) (out []string) {
	for _, l := range lines {
		if l != "" {
			out = append(out, l)
		}
	}
	return out
}

func (p *labelPage) font(name string, points float64) {
	if name == "sans" {
		p.pdf.SetFont("sans", "", points)
		return
	}
	p.pdf.SetFont(strings.TrimSuffix(name, "B"), "B", points)
}

// line prints a line within room mm: smaller first, down to least points, then with an ellipsis at the end.
func (p *labelPage) line(x, baseline, room float64, font string, points, least float64, text string) {
	text = printable(text)
	if text == "" {
		return
	}
	p.font(font, points)
	if w := p.pdf.GetStringWidth(text); w > room {
		points = max(least, points*room/w)
		p.font(font, points)
	}
	for runes := []rune(text); p.pdf.GetStringWidth(text) > room && len(runes) > 0; {
		runes = runes[:len(runes)-1]
		text = strings.TrimRight(string(runes), " ") + "…"
	}
	p.pdf.Text(x, baseline, text)
}

// printable leaves what the label fonts can show on one line: no control characters, nothing beyond the basic plane.
func printable(s string) string {
	return strings.Join(strings.Fields(strings.Map(func(r rune) rune {
		switch {
		case r < 0x20 || r == 0x7F || r >= 0x80 && r < 0xA0:
			return ' '
		case r >= 0x200B && r <= 0x200F || r >= 0x202A && r <= 0x202E || r >= 0x2066 && r <= 0x2069 || r == 0xFEFF:
			return -1
		case r > 0xFFFF:
			return utf8.RuneError
		}
		return r
	}, strings.ToValidUTF8(s, string(utf8.RuneError)))), " ")
}
