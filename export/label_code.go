package export

import (
	"fmt"
	"math"
	"math/bits"
	"strconv"

	"github.com/skip2/go-qrcode"

	"tripwell/store"
)

// Quiet is the clear border of a code in modules (ISO/IEC 18004: at least 4 on each side).
const quietModules = 4

// dotMM is one dot of a 300 dpi printer. A module is a whole number of dots, so that all modules print alike; at least
// 4 dots each (0.34 mm), as the code's inventors advise.
const (
	dotMM         = 25.4 / 300
	moduleDotsMin = 4
)

// mmPoint turns millimetres into PDF points.
const mmPoint = 72 / 25.4

// codeSize is the module's side and the whole side with its quiet zone, in mm, for a symbol that must fit in a box.
func codeSize(modules int, box float64) (module, side float64, ok bool) {
	dots := math.Floor(box/float64(modules+2*quietModules)/dotMM + 1e-9)
	module = dots * dotMM
	return module, module * float64(modules+2*quietModules), dots >= moduleDotsMin
}

// CodeBitmap encodes an address: rows of modules, true is dark, without the quiet zone of 4 modules that must surround it.
func CodeBitmap(address string) ([][]bool, error) {
	s, err := encode(address, qrcode.Medium)
	if err != nil {
		return nil, err
	}
	rows := make([][]bool, len(s))
	for y := range rows {
		rows[y] = make([]bool, len(s))
	}
	s.runs(func(col, row, length int) {
		for x := range length {
			rows[row][col+x] = true
		}
	})
	return rows, nil
}

// codeIn gives the symbol of an address and its module's side for a box, in mm. Where level M is too fine for the box,
// level L is tried: a coarser code reads better than one with more redundancy that the printer smears.
func codeIn(address string, box float64) (s symbol, module float64, err error) {
	for _, level := range []qrcode.RecoveryLevel{qrcode.Medium, qrcode.Low} {
		if s, err = encode(address, level); err != nil {
			return nil, 0, err
		}
		if module, _, ok := codeSize(len(s), box); ok {
			return s, module, nil
		}
	}
	return nil, 0, &store.Error{Code: "invalid", Field: "url", Text: fmt.Sprintf("The address %s makes a code too fine to print on this label. Start the server with a shorter --url, or take larger labels.", cut(address))}
}

// CodePath draws the code of an address as one PDF path: a rectangle for each run of dark modules of a row, filled
// together so that no hairline shows between rows. (x, y) is the top left corner of the quiet zone on a page of height
// pageH, box the side it must fit in, all in mm. side is what it takes of the box, quiet zone included.
func CodePath(address string, x, y, box, pageH float64) (path []byte, side float64, err error) {
	s, module, err := codeIn(address, box)
	if err != nil {
		return nil, 0, err
	}
	return runsPath(len(s), module, x, y, pageH, s.runs)
}

// runsPath draws runs of dark modules of a symbol of so many modules a side as one path.
func runsPath(modules int, module, x, y, pageH float64, runs func(draw func(col, row, length int))) (path []byte, side float64, err error) {
	// One transformation lays a grid of modules on the page, its origin at the symbol's top left corner and y downwards,
	// so that every rectangle is four small whole numbers.
	inset := module * quietModules
	path = append(make([]byte, 0, 4096), "q "...)
	for _, v := range []float64{module, 0, 0, -module, x + inset, pageH - y - inset} {
		path = strconv.AppendFloat(path, math.Round(v*mmPoint*10000)/10000, 'f', -1, 64)
		path = append(path, ' ')
	}
	path = append(path, "cm\n"...)
	runs(func(col, row, length int) {
		for _, v := range [4]int{col, row, length, 1} {
			path = append(strconv.AppendInt(path, int64(v), 10), ' ')
		}
		path = append(path, "re\n"...)
	})
	return append(path, "f Q"...), module * float64(modules+2*quietModules), nil
}

// runs gives every run of dark modules of a row.
func (s symbol) runs(draw func(col, row, length int)) {
	for y, row := range s {
		for col := 0; row>>col != 0; {
			col += bits.TrailingZeros64(row >> col)
			length := bits.TrailingZeros64(^(row >> col))
			draw(col, y, length)
			col += length
		}
	}
}
