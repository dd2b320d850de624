package export

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"tripwell/store"
)

// SheetSize is the geometry of a sheet of labels, all in millimetres. Pitch is from one label's edge to the next one's.
type SheetSize struct {
	Name           string
	PageW, PageH   float64
	LabelW, LabelH float64
	Left, Top      float64
	PitchX, PitchY float64
	Cols, Rows     int
}

// US Letter (8 1/2 x 11 in) and A4 (ISO 216), in mm.
const (
	letterW, letterH = 215.9, 279.4
	a4W, a4H         = 210.0, 297.0
)

// Letter3x10 is US Letter with 30 labels of 2 5/8 x 1 in: margins 3/16 and 1/2 in, pitch 2 3/4 x 1 in.
var Letter3x10 = SheetSize{"letter-3x10", letterW, letterH, 66.675, 25.4, 4.7625, 12.7, 69.85, 25.4, 3, 10}

// sheetSizes are the common sheets by their grid. Dimensions as the common label templates state them, seen
// second-hand; margins vary by a few tenths of a millimetre between templates, which Nudge is for.
var sheetSizes = []SheetSize{
	Letter3x10,
	// 10 labels of 4 x 2 in, pitch 4 3/16 x 2 in.
	{"letter-2x5", letterW, letterH, 101.6, 50.8, 4.13, 12.7, 106.36, 50.8, 2, 5},
	// 80 labels of 1 3/4 x 1/2 in, pitch 2 1/16 x 1/2 in.
	{"letter-4x20", letterW, letterH, 44.45, 12.7, 7.14, 12.7, 52.39, 12.7, 4, 20},
	// 24 labels edge to edge: 8 x 37 mm are 296 of the 297 mm of the page.
	{"a4-3x8", a4W, a4H, 70, 37, 0, 0.5, 70, 37, 3, 8},
	{"a4-3x7", a4W, a4H, 63.5, 38.1, 7.2, 15.15, 66.04, 38.1, 3, 7},
	{"a4-2x7", a4W, a4H, 99.1, 38.1, 4.7, 15.15, 101.6, 38.1, 2, 7},
	{"a4-5x13", a4W, a4H, 38.1, 21.2, 4.75, 10.7, 40.6, 21.2, 5, 13},
}

// SheetNames lists the sheets SheetNamed knows.
func SheetNames() []string {
	names := make([]string, len(sheetSizes))
	for i, s := range sheetSizes {
		names[i] = s.Name
	}
	return names
}

// SheetNamed finds a sheet by its name.
func SheetNamed(name string) (SheetSize, error) {
	for _, s := range sheetSizes {
		if s.Name == name {
			return s, nil
		}
	}
	return SheetSize{}, &store.Error{Code: "invalid", Field: "sheet",
		Text: fmt.Sprintf("There is no label sheet %q. Choose one of: %s.", name, strings.Join(SheetNames(), ", "))}
}

// Sizes a label printer takes, in mm.
const (
	rollLeast = 12.5
	rollMost  = 300
)

// Roll is a label of its own size, one on a page, as label printers take them: "50x25" is 50 mm wide and 25 mm high.
func Roll(size string) (SheetSize, error) {
	wide, high, both := strings.Cut(strings.ToLower(strings.TrimSpace(size)), "x")
	w, errW := strconv.ParseFloat(strings.TrimSpace(wide), 64)
	h, errH := strconv.ParseFloat(strings.TrimSpace(high), 64)
	if !both || errW != nil || errH != nil || !(w >= rollLeast && w <= rollMost && h >= rollLeast && h <= rollMost) {
		return SheetSize{}, &store.Error{Code: "invalid", Field: "roll",
			Text: fmt.Sprintf("A roll label is given as WIDTHxHEIGHT in millimetres, each from %v to %v, for example 50x25; %q is not.", rollLeast, rollMost, cut(size))}
	}
	return SheetSize{"roll-" + figureText(w) + "x" + figureText(h), w, h, w, h, 0, 0, w, h, 1, 1}, nil
}

// PerPage is how many labels a page holds.
func (s SheetSize) PerPage() int { return s.Cols * s.Rows }

// Position is the top left corner of the label with a number from 0 over all pages, and its page from 0. Labels fill
// rows from the left, then downwards.
func (s SheetSize) Position(n int) (page int, x, y float64) {
	page, n = n/s.PerPage(), n%s.PerPage()
	return page, s.Left + float64(n%s.Cols)*s.PitchX, s.Top + float64(n/s.Cols)*s.PitchY
}

// nudgeMost bounds a nudge, in mm: what is further off is the wrong sheet.
const nudgeMost = 10

// Printing says how labels go onto paper.
type Printing struct {
	Sheet          SheetSize
	Start          int      // label of the first page to begin with, from 1; 0 is 1
	NudgeX, NudgeY float64  // moves everything right and down, in mm, for a printer that feeds askew
	Lines          []string // what stands beside the tag, in this order; nil = DefaultLines
}

// What may stand beside the tag on a label.
const (
	LineSpot    = "spot"
	LineRoom    = "room"
	LineCircuit = "circuit"
	LineKind    = "kind"
	LineSite    = "site"
)

// LineNames lists what may stand beside the tag.
func LineNames() []string { return []string{LineSpot, LineRoom, LineCircuit, LineKind, LineSite} }

// DefaultLines is what stands beside the tag where nobody chose.
func DefaultLines() []string { return []string{LineSpot, LineRoom, LineCircuit} }

// Nudge reads "X,Y" in millimetres.
func Nudge(text string) (x, y float64, err error) {
	if strings.TrimSpace(text) == "" {
		return 0, 0, nil
	}
	across, down, both := strings.Cut(text, ",")
	x, errX := strconv.ParseFloat(strings.TrimSpace(across), 64)
	y, errY := strconv.ParseFloat(strings.TrimSpace(down), 64)
	if !both || errX != nil || errY != nil || !(math.Abs(x) <= nudgeMost && math.Abs(y) <= nudgeMost) {
		return 0, 0, &store.Error{Code: "invalid", Field: "nudge",
			Text: fmt.Sprintf("A nudge is given as X,Y in millimetres, to the right and down, each from -%d to %d, for example 0.5,-1; %q is not.", nudgeMost, nudgeMost, cut(text))}
	}
	return x, y, nil
}

// Check completes a printing and refuses what cannot be.
func (p *Printing) Check() error {
	if p.Start == 0 {
		p.Start = 1
	}
	if p.Start < 1 || p.Start > p.Sheet.PerPage() {
		return &store.Error{Code: "invalid", Field: "start", Text: fmt.Sprintf("The first label must be from 1 to %d on this sheet; %d is not.", p.Sheet.PerPage(), p.Start)}
	}
	if p.Lines == nil {
		p.Lines = DefaultLines()
	}
	known := map[string]bool{}
	for _, name := range LineNames() {
		known[name] = true
	}
	for _, name := range p.Lines {
		if !known[name] {
			return &store.Error{Code: "invalid", Field: "lines", Text: fmt.Sprintf("A label has no line %q. Choose from: %s.", cut(name), strings.Join(LineNames(), ", "))}
		}
	}
	return nil
}

// position is where a label lies on the page, moved by the nudge.
func (p *Printing) position(n int) (page int, x, y float64) {
	page, x, y = p.Sheet.Position(p.Start - 1 + n)
	return page, x + p.NudgeX, y + p.NudgeY
}

// MM writes a length in millimetres without a unit.
func MM(v float64) string { return figureText(math.Round(v*100) / 100) }
