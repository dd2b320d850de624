package export

import (
	"bytes"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"strings"

	"github.com/skip2/go-qrcode"

	"tripwell/store"
)

// A signed head is about 335 bytes: at level M a code of 73 modules a side, more than labels may have.

func headBitmap(head string) ([][]bool, error) {
	q, err := qrcode.New(strings.TrimSpace(head), qrcode.Medium)
	if err != nil {
		return nil, fmt.Errorf("code of a head: %w", err)
	}
	q.DisableBorder = true
	return q.Bitmap(), nil
}

// HeadPath draws a head as CodePath draws an address.
func HeadPath(head string, x, y, box, pageH float64) (path []byte, side float64, err error) {
	rows, err := headBitmap(head)
	if err != nil {
		return nil, 0, err
	}
	module, _, ok := codeSize(len(rows), box)
	if !ok {
		return nil, 0, &store.Error{Code: "invalid", Field: "head", Text: "The head makes a code too fine to print in this room."}
	}
	return runsPath(len(rows), module, x, y, pageH, func(draw func(col, row, length int)) {
		for y, row := range rows {
			for from := 0; from < len(row); from++ {
				length := 0
				for from+length < len(row) && row[from+length] {
					length++
				}
				if length > 0 {
					draw(from, y, length)
				}
				from += length
			}
		}
	})
}

// HeadPNG draws a head as a code with its quiet zone, each module so many dots wide.
func HeadPNG(head string, dots int) ([]byte, error) {
	rows, err := headBitmap(head)
	if err != nil {
		return nil, err
	}
	side := (len(rows) + 2*quietModules) * dots
	img := image.NewPaletted(image.Rect(0, 0, side, side), color.Palette{color.White, color.Black})
	for y, row := range rows {
		for x, dark := range row {
			if !dark {
				continue
			}
			for i := range dots {
				for j := range dots {
					img.SetColorIndex((x+quietModules)*dots+i, (y+quietModules)*dots+j, 1)
				}
			}
		}
	}
	var out bytes.Buffer
	if err := png.Encode(&out, img); err != nil {
		return nil, fmt.Errorf("code as a picture: %w", err)
	}
	return out.Bytes(), nil
}
