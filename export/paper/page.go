package paper

import (
	"fmt"
	"strings"

	"codeberg.org/go-pdf/fpdf"

	"tripwell/export"
	"tripwell/static"
	"tripwell/store"
)

// Size is the paper printed on, in mm.
type Size struct {
	Name string
	W, H float64
}

// sizes are US Letter and ISO 216 A4.
var sizes = []Size{{"letter", 215.9, 279.4}, {"a4", 210, 297}}

// SizeNames lists the sizes SizeNamed knows.
func SizeNames() []string { return []string{sizes[0].Name, sizes[1].Name} }

// SizeNamed finds a size by its name; "" is US Letter.
func SizeNamed(name string) (Size, error) {
	for _, s := range sizes {
		if s.Name == name || name == "" {
			return s, nil
		}
	}
	return Size{}, &store.Error{Code: "invalid", Field: "paper", Text: fmt.Sprintf("There is no paper %q. Choose one of: %s.", name, strings.Join(SizeNames(), ", "))}
}

// Margins of a page in mm; the left one leaves room for a punch.
const (
	left   = 16.0
	right  = 10.0
	top    = 11.0
	bottom = 11.0
)

// print is a document being printed from the top of its pages downwards.
type print struct {
	pdf   *fpdf.Fpdf
	pen   *export.Pen
	words *static.Words
	size  Size
	y     float64 // where the next thing begins
	foot  float64 // where the foot of the page begins
	pages int
	head  func() // draws the head of a page and moves y
}

func newPrint(size Size) (*print, error) {
	words, err := catalogue()
	if err != nil {
		return nil, err
	}
	pdf := export.NewPrint(size.W, size.H)
	return &print{pdf: pdf, pen: export.NewPen(pdf), words: words, size: size, foot: size.H - bottom - 4}, nil
}

func (p *print) room() float64 { return p.size.W - left - right }

func (p *print) turn() {
	p.pdf.AddPage()
	p.pdf.SetDrawColor(0, 0, 0)
	p.pdf.SetFillColor(0, 0, 0)
	p.pages++
	p.y = top
	p.head()
}

// need turns the page where less than h mm are left; it reports whether it did.
func (p *print) need(h float64) bool {
	if p.pages > 0 && p.y+h <= p.foot {
		return false
	}
	p.turn()
	return true
}

func (p *print) text(x, baseline, room float64, font string, points float64, text string) float64 {
	return p.pen.Write(x, baseline, room, font, points, text)
}

// rule draws a line across the page.
func (p *print) rule(y, thick float64) {
	p.pdf.SetLineWidth(thick)
	p.pdf.Line(left, y, p.size.W-right, y)
}

func (p *print) box(x, y, w, h, thick float64) {
	p.pdf.SetLineWidth(thick)
	p.pdf.Rect(x, y, w, h, "D")
}

// code draws the code of a text in a square; one too long for it is left out: it is printed beside it.
func (p *print) code(address string, x, y, box float64) {
	if address == "" {
		return
	}
	if path, _, err := export.CodePath(address, x, y, box, p.size.H); err == nil {
		p.pdf.RawWriteStr(string(path))
	}
}

// headBox is the side of the square that the code of a signed head is printed in, in mm.
const headBox = 42.0

// headCode draws a signed head, so that the paper is a witness: whoever keeps it can hold a later bundle against it. A head too long
// for a code stands in letters beside it.
func (p *print) headCode(head string, x, y float64) {
	if path, _, err := export.HeadPath(head, x, y, headBox, p.size.H); err == nil {
		p.pdf.RawWriteStr(string(path))
	}
}

// headLines writes a signed head as it is, in the left of the page.
func (p *print) headLines(head string, room float64) {
	for _, line := range strings.Split(strings.TrimSpace(head), "\n") {
		if line != "" {
			p.text(left, p.y+2.8, room, "monoB", 6.5, clean(line))
			p.y += 3.2
		}
	}
}

// demo marks the top right corner of a page and gives the width it takes.
func (p *print) demo(demo bool) float64 {
	if !demo {
		return 0
	}
	mark := p.words.Say("sheet.demo_mark")
	w := p.pen.Width("sansB", 10, mark) + 3
	p.box(p.size.W-right-w, top-1, w, 6, 0.4)
	p.text(p.size.W-right-w+1.5, top+3.4, w, "sansB", 10, mark)
	return w + 3
}

// feet numbers all pages once their count is known.
func (p *print) feet(line string) {
	for n := 1; n <= p.pages; n++ {
		p.pdf.SetPage(n)
		y := p.size.H - bottom
		p.pen.Forget()
		p.text(left, y, p.room()-30, "sans", 7, line)
		number := p.words.Say("paper.round.page", "page", n, "pages", p.pages)
		p.text(p.size.W-right-p.pen.Width("sans", 7, number), y, 30, "sans", 7, number)
	}
}
