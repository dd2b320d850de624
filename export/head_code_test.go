package export

import (
	"bytes"
	"image"
	_ "image/png"
	"strings"
	"testing"

	"github.com/makiuchi-d/gozxing"
	zxqr "github.com/makiuchi-d/gozxing/qrcode"
	"github.com/xuri/excelize/v2"
)

// A head as long as they are: it must be on the cover as a code that reads back as the same text.
const longHead = "tripwell/01900000-0000-7000-8000-00000000000b/01900000-0000-7000-8000-00000000000a/12\n2017\nq6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Q=\n2026-12-01T08:59:00.000Z\n\n" +
	"— tripwell/01900000-0000-7000-8000-00000000000b/01900000-0000-7000-8000-00000000000a q6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Qq6Q2ikyf3hDZ3MwZ0g4nFQ0qE3bJ0bV4o8cQ0mY2o1Qabcd=\n"

func TestCover_HeadIsACodeThatReadsBack(t *testing.T) {
	src := handSource(t, true)
	src.Head = longHead
	var out bytes.Buffer
	if err := Workbook(&out, src); err != nil {
		t.Fatal(err)
	}
	f, err := excelize.OpenReader(&out)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	cells, err := f.GetPictureCells("Cover")
	if err != nil || len(cells) != 1 {
		t.Fatalf("pictures on the cover: %v %v, want one", cells, err)
	}
	pictures, err := f.GetPictures("Cover", cells[0])
	if err != nil || len(pictures) != 1 {
		t.Fatalf("got %d pictures, %v", len(pictures), err)
	}
	img, _, err := image.Decode(bytes.NewReader(pictures[0].File))
	if err != nil {
		t.Fatal(err)
	}
	bmp, err := gozxing.NewBinaryBitmapFromImage(img)
	if err != nil {
		t.Fatal(err)
	}
	got, err := zxqr.NewQRCodeReader().Decode(bmp, nil)
	if err != nil || got.GetText() != strings.TrimSpace(longHead) {
		t.Errorf("the code says %v %v, want the head", got, err)
	}
}
