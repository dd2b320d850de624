package export

import (
	"fmt"
	"io"

	"codeberg.org/go-pdf/fpdf"

	"tripwell/static"
	"tripwell/store"
)

// Label is one label: what is printed and the address its code opens.
type Label struct {
	Tag     string // K7QM2P3, printed as K7Q-M2P-3
	Address string // HTTPS://HOST/T/K7QM2P3: only letters of the code's compact alphabet; "" without a code
	Spot    string // "By the sink"
	Context string // "Ground floor · Kitchen"
	Circuit string // "LP-2 / 14"
	Kind    string // "GFCI receptacle"
	Site    string // name of the site
	Demo    bool
	Blank   bool     // not bound yet: lines to write on
	Marking []string // a marking instead of a tag, line by line
}

// line gives what stands beside the tag under a name.
func (l Label) line(name string) string {
	switch name {
	case LineSpot:
		return l.Spot
	case LineRoom:
		return l.Context
	case LineCircuit:
		return l.Circuit
	case LineKind:
		if l.Kind != l.Spot { // a portable item: the kind stands there already
			return l.Kind
		}
	case LineSite:
		return l.Site
	}
	return ""
}

// Labels writes a PDF of labels, beginning at the chosen label of the first page, so that a sheet of which some labels
// are used can go through the printer again.
func Labels(w io.Writer, how Printing, labels []Label) error {
	if err := how.Check(); err != nil {
		return err
	}
	if len(labels) == 0 {
		return &store.Error{Code: "not_found", Field: "site", Text: "There are no labels to print: no device here has a tag yet. Import the register again without --no-new-tags, or give each device a tag on its page."}
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return fmt.Errorf("labels: %w", err)
	}
	plan, err := planLabels(how.Sheet, labels[0].Address, how.Lines, words.Say("sheet.label_demo"))
	if err != nil {
		return err
	}
	p := newLabelPage(how.Sheet)
	stop := make(chan struct{})
	defer close(stop)
	at := 0
	for next := range encodeCodes(labels, func(i int) ([]byte, error) { return plan.code(&how, labels[i], i) }, stop) {
		code := <-next
		if code.err != nil {
			return code.err
		}
		page, x, y := how.position(at)
		p.turnTo(page)
		p.pdf.RawWriteStr(string(code.path))
		p.draw(plan.lay(labels[at], p.pen), x, y)
		at++
	}
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("labels: %w", err)
	}
	return nil
}

// code draws the code of a label where it lies on its page.
func (p *labelPlan) code(how *Printing, l Label, n int) ([]byte, error) {
	if l.Address == "" {
		return nil, nil
	}
	_, x, y := how.position(n)
	path, _, err := CodePath(l.Address, x+p.codeX, y+p.codeY, p.box+1e-6, how.Sheet.PageH)
	return path, err
}

type labelPage struct {
	pdf   *fpdf.Fpdf
	pen   *Pen
	pages int
}

func newLabelPage(size SheetSize) *labelPage {
	pdf := NewPrint(size.PageW, size.PageH)
	return &labelPage{pdf: pdf, pen: NewPen(pdf)}
}

// turnTo adds pages up to one, counted from 0.
func (p *labelPage) turnTo(page int) {
	for p.pages <= page {
		p.pdf.AddPage()
		p.pdf.SetFillColor(0, 0, 0)
		p.pdf.SetDrawColor(0, 0, 0)
		p.pages++
	}
}

// draw prints what is laid out, with its top left corner at x, y.
func (p *labelPage) draw(l layout, x, y float64) {
	for _, b := range l.boxes {
		p.pdf.SetLineWidth(b.line)
		if b.h == 0 {
			p.pdf.Line(x+b.x, y+b.y, x+b.x+b.w, y+b.y)
			continue
		}
		p.pdf.Rect(x+b.x, y+b.y, b.w, b.h, "D")
	}
	for _, t := range l.texts {
		p.pen.Take(t.font, t.points)
		p.pdf.Text(x+t.x, y+t.baseline, t.text)
	}
}
