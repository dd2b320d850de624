package export

import (
	"fmt"
	"math"
	"runtime"
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
	dots := math.Floor(box / float64(modules+2*quietModules) / dotMM)
	module = dots * dotMM
	return module, module * float64(modules+2*quietModules), dots >= moduleDotsMin
}

// CodeBitmap encodes an address: rows of modules, true is dark, without the quiet zone of 4 modules that must surround it.
func CodeBitmap(address string) ([][]bool, error) {
	q, err := qrcode.New(address, qrcode.Medium)
	if err != nil {
		return nil, &store.Error{Code: "invalid", Field: "url", Text: fmt.Sprintf("The address %s is too long for a code. Start the server with a shorter --url.", cut(address))}
	}
	q.DisableBorder = true
	return q.Bitmap(), nil
}

// codePath draws the code of an address as one PDF path: a rectangle for each run of dark modules of a row, filled
// together so that no hairline shows between rows. (x, y) is the top left corner of the quiet zone on a page of height
// pageH, box the side it must fit in, all in mm.
func codePath(address string, x, y, box, pageH float64) ([]byte, float64, error) {
	rows, err := CodeBitmap(address)
	if err != nil {
		return nil, 0, err
	}
	module, side, ok := codeSize(len(rows), box)
	if !ok {
		return nil, 0, &store.Error{Code: "invalid", Field: "url", Text: fmt.Sprintf("The address %s makes a code too fine to print on this label. Start the server with a shorter --url.", address)}
	}
	// One transformation lays a grid of modules on the page, its origin at the symbol's top left corner and y downwards,
	// so that every rectangle is four small whole numbers.
	inset := module * quietModules
	path := append(make([]byte, 0, 4096), "q "...)
	for _, v := range []float64{module, 0, 0, -module, x + inset, pageH - y - inset} {
		path = strconv.AppendFloat(path, math.Round(v*mmPoint*10000)/10000, 'f', -1, 64)
		path = append(path, ' ')
	}
	path = append(path, "cm\n"...)
	for r, row := range rows {
		for c := 0; c < len(row); c++ {
			if !row[c] {
				continue
			}
			from := c
			for c < len(row) && row[c] {
				c++
			}
			path = appendRect(path, from, r, c-from, 1)
		}
	}
	return append(path, "f Q"...), side, nil
}

// appendRect appends one rectangle in the units of the grid.
func appendRect(path []byte, sides ...int) []byte {
	for _, v := range sides {
		path = strconv.AppendInt(path, int64(v), 10)
		path = append(path, ' ')
	}
	return append(path, "re\n"...)
}

// drawnCode is a code ready to be placed, or why there is none.
type drawnCode struct {
	path []byte
	side float64
	err  error
}

// encodeCodes encodes all codes on all processors and gives them in the order of the labels; only a window of codes
// stands in memory. stop must be closed when the reader leaves early or is done.
func encodeCodes(labels []Label, place func(i int) (x, y float64), box, pageH float64, stop <-chan struct{}) <-chan chan drawnCode {
	workers := runtime.GOMAXPROCS(0)
	order := make(chan chan drawnCode, 32*workers)
	jobs := make(chan func(), workers)
	for range workers {
		go func() {
			for job := range jobs {
				job()
			}
		}()
	}
	go func() {
		defer close(jobs)
		defer close(order)
		for i, l := range labels {
			done := make(chan drawnCode, 1)
			select {
			case order <- done:
			case <-stop:
				return
			}
			x, y := place(i)
			select {
			case jobs <- func() {
				path, side, err := codePath(l.Address, x, y, box, pageH)
				done <- drawnCode{path, side, err}
			}:
			case <-stop:
				return
			}
		}
	}()
	return order
}
