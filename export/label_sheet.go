package export

import (
	"fmt"
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

// Letter3x10 is US Letter with 30 labels of 2 5/8 x 1 in: margins 3/16 and 1/2 in, pitch 2 3/4 x 1 in. Dimensions as the
// common label templates state them, seen second-hand.
var Letter3x10 = SheetSize{
	Name: "letter-3x10", PageW: 215.9, PageH: 279.4, LabelW: 66.675, LabelH: 25.4,
	Left: 4.7625, Top: 12.7, PitchX: 69.85, PitchY: 25.4, Cols: 3, Rows: 10,
}

var sheetSizes = []SheetSize{Letter3x10}

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

// PerPage is how many labels a page holds.
func (s SheetSize) PerPage() int { return s.Cols * s.Rows }

// Position is the top left corner of the label with a number from 0 over all pages, and its page from 0. Labels fill
// rows from the left, then downwards.
func (s SheetSize) Position(n int) (page int, x, y float64) {
	page, n = n/s.PerPage(), n%s.PerPage()
	return page, s.Left + float64(n%s.Cols)*s.PitchX, s.Top + float64(n/s.Cols)*s.PitchY
}
