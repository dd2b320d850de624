package export

import (
	"bytes"
	"errors"
	"fmt"
	"image"
	_ "image/png"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/makiuchi-d/gozxing"
	zxqr "github.com/makiuchi-d/gozxing/qrcode"
	"github.com/skip2/go-qrcode"

	"tripwell/store"
)

// crockford is the alphabet of tags.
const crockford = "0123456789ABCDEFGHJKMNPQRSTVWXYZ"

func someLabels(n int) []Label {
	labels := make([]Label, n)
	for i := range labels {
		tag := []byte("K7QM2P3")
		for j, v := 0, i; j < 4; j, v = j+1, v/len(crockford) {
			tag[j] = crockford[v%len(crockford)]
		}
		labels[i] = Label{
			Tag: string(tag), Address: "HTTPS://DEMO.TRIPWELL.EXAMPLE/T/" + string(tag), Demo: i%2 == 0,
			Spot: fmt.Sprintf("By the sink %d", i), Context: "Kitchen · Ground floor", Circuit: "LP-2 / 14",
		}
	}
	return labels
}

func TestLabelSheet_LetterGeometry(t *testing.T) {
	// 30 labels of 2 5/8 x 1 in on US Letter; margins 3/16 and 1/2 in; pitch 2 3/4 and 1 in: consensus of common label
	// templates, seen second-hand.
	s := Letter3x10
	const inch = 25.4
	for _, c := range []struct {
		what      string
		got, want float64
	}{
		{"label width", s.LabelW, 2.625 * inch}, {"label height", s.LabelH, inch}, {"left margin", s.Left, 3.0 / 16 * inch},
		{"top margin", s.Top, inch / 2}, {"pitch across", s.PitchX, 2.75 * inch}, {"pitch down", s.PitchY, inch},
	} {
		if math.Abs(c.got-c.want) > 0.01 {
			t.Errorf("%s: got %.4f mm, want %.4f", c.what, c.got, c.want)
		}
	}
	if right := s.Left + 2*s.PitchX + s.LabelW; math.Abs(right-(s.PageW-s.Left)) > 0.01 {
		t.Errorf("last column ends %.3f mm from the left, the right margin begins at %.3f", right, s.PageW-s.Left)
	}
	if page, x, y := s.Position(30); page != 1 || x != s.Left || y != s.Top {
		t.Errorf("label 30: got page %d at %.2f, %.2f; want the first place of page 1", page, x, y)
	}
}

func TestLabels_CodeHasItsQuietZone(t *testing.T) {
	for _, modules := range []int{21, 25, 29, 33, 37} {
		module, side, ok := codeSize(modules, Letter3x10.LabelH-labelInset)
		// ISO/IEC 18004: a clear border of at least 4 modules; 300 dpi printers need 4 dots, 0.33 mm, a module.
		if !ok || side < module*float64(modules+8)-1e-9 || side > Letter3x10.LabelH-labelInset || module < 0.33 {
			t.Errorf("%d modules: module %.3f mm, side %.2f mm, ok %v", modules, module, side, ok)
		}
	}
}

func TestLabels_SameLabelsSameBytes(t *testing.T) {
	var first, second bytes.Buffer
	for _, w := range []io.Writer{&first, &second} {
		if err := Labels(w, Printing{Sheet: Letter3x10, Start: 7}, someLabels(64)); err != nil {
			t.Fatal(err)
		}
	}
	if !bytes.Equal(first.Bytes(), second.Bytes()) {
		t.Error("two files of the same labels differ")
	}
}

func TestLabels_Refusals(t *testing.T) {
	long := someLabels(1)
	long[0].Address = "HTTPS://" + strings.Repeat("LONG.", 200) + "EXAMPLE/T/K7QM2P3"
	tooLong := someLabels(1)
	tooLong[0].Address = strings.Repeat("X", 5000)
	for name, run := range map[string]func() error{
		"start before first": func() error { return Labels(io.Discard, Printing{Sheet: Letter3x10, Start: -1}, someLabels(1)) },
		"start beyond sheet": func() error { return Labels(io.Discard, Printing{Sheet: Letter3x10, Start: 31}, someLabels(1)) },
		"no labels":          func() error { return Labels(io.Discard, Printing{Sheet: Letter3x10, Start: 1}, nil) },
		"fine code":          func() error { return Labels(io.Discard, Printing{Sheet: Letter3x10, Start: 1}, long) },
		"no code at all":     func() error { return Labels(io.Discard, Printing{Sheet: Letter3x10, Start: 1}, tooLong) },
		"no host":            func() error { _, err := labelHost(""); return err },
		"plain http":         func() error { _, err := labelHost("http://plain.example"); return err },
		"path":               func() error { _, err := labelHost("https://a.example/b"); return err },
		"unknown sheet":      func() error { _, err := SheetNamed("letter-9x9"); return err },
		"roll in words":      func() error { _, err := Roll("wide"); return err },
		"roll of nothing":    func() error { _, err := Roll("0x25"); return err },
		"roll not a number":  func() error { _, err := Roll("NaNx25"); return err },
		"nudge in one":       func() error { _, _, err := Nudge("1"); return err },
		"nudge too far":      func() error { _, _, err := Nudge("11,0"); return err },
		"unknown line": func() error {
			return Labels(io.Discard, Printing{Sheet: Letter3x10, Lines: []string{"price"}}, someLabels(1))
		},
		"unknown marking":   func() error { _, err := MarkingLabels("exit", 1); return err },
		"no marking at all": func() error { _, err := MarkingLabels("both", 0); return err },
	} {
		var refused *store.Error
		if err := run(); !errors.As(err, &refused) || refused.Text == "" || refused.Field == "" {
			t.Errorf("%s: got %v, want a refusal with a sentence and a field", name, err)
		}
	}
	if host, err := labelHost("https://demo.tripwell.example/"); err != nil || host != "DEMO.TRIPWELL.EXAMPLE" {
		t.Errorf("got host %q, %v", host, err)
	}
}

func TestLabels_HostileWords(t *testing.T) {
	labels := someLabels(3)
	labels[0].Spot, labels[0].Context = "\x00\x1b[31mred\r\n\ttab", "😀 emoji \u202Eevil"
	labels[1].Spot, labels[1].Context = strings.Repeat("字", 100), "שלום עולם"
	labels[2].Spot, labels[2].Circuit = string([]byte{0xff, 0xfe, 'a'}), strings.Repeat("9", 4000)
	if err := Labels(io.Discard, Printing{Sheet: Letter3x10, Start: 30}, labels); err != nil {
		t.Fatal(err)
	}
}

// renderPages draws a PDF with poppler, grey.
func renderPages(t *testing.T, pdf []byte, dpi int) []image.Image {
	t.Helper()
	tool, err := exec.LookPath("pdftoppm")
	if err != nil {
		if os.Getenv("CI") == "true" {
			t.Fatal("pdftoppm (poppler-utils) is missing")
		}
		t.Skip("pdftoppm (poppler-utils) is missing")
	}
	dir := t.TempDir()
	file := filepath.Join(dir, "labels.pdf")
	if err := os.WriteFile(file, pdf, 0o600); err != nil {
		t.Fatal(err)
	}
	if out, err := exec.Command(tool, "-r", fmt.Sprint(dpi), "-png", "-gray", file, filepath.Join(dir, "page")).CombinedOutput(); err != nil {
		t.Fatalf("pdftoppm: %v\n%s", err, out)
	}
	names, _ := filepath.Glob(filepath.Join(dir, "page-*.png"))
	var pages []image.Image
	for _, name := range names {
		f, err := os.Open(name)
		if err != nil {
			t.Fatal(err)
		}
		img, _, err := image.Decode(f)
		f.Close()
		if err != nil {
			t.Fatal(err)
		}
		pages = append(pages, img)
	}
	return pages
}

func dots(mm float64, dpi int) int { return int(math.Round(mm / 25.4 * float64(dpi))) }

func dark(img image.Image, x, y int) bool {
	r, _, _, seen := img.At(x, y).RGBA()
	return r < 0x8000 && seen > 0 // beyond the page there is no ink
}

// decodeAt reads the code in a square of a page. A reader sees many frames of a label; here it gets a few cuts and both of
// its ways to tell dark from light.
func decodeAt(t *testing.T, img image.Image, dpi int, x, y, side float64) (text string) {
	t.Helper()
	hints := map[gozxing.DecodeHintType]any{gozxing.DecodeHintType_TRY_HARDER: true}
	for more := range 3 {
		crop := img.(interface {
			SubImage(image.Rectangle) image.Image
		}).SubImage(image.Rect(dots(x, dpi)-more, dots(y, dpi)-more, dots(x+side, dpi)+more, dots(y+side, dpi)+more))
		source := gozxing.NewLuminanceSourceFromImage(crop)
		for _, binarizer := range []gozxing.Binarizer{gozxing.NewHybridBinarizer(source), gozxing.NewGlobalHistgramBinarizer(source)} {
			bmp, err := gozxing.NewBinaryBitmap(binarizer)
			if err != nil {
				t.Fatal(err)
			}
			res, err := zxqr.NewQRCodeReader().Decode(bmp, hints)
			if err == nil {
				return res.GetText()
			}
			text = err.Error()
		}
	}
	return text
}

func inkIn(img image.Image, dpi int, x, y, w, h float64) (n int) {
	for py := dots(y, dpi); py < dots(y+h, dpi); py++ {
		for px := dots(x, dpi); px < dots(x+w, dpi); px++ {
			if dark(img, px, py) {
				n++
			}
		}
	}
	return n
}

// inkBeyond counts dark dots in the outer half millimetre of a label.
func inkBeyond(img image.Image, dpi int, x, y float64, s SheetSize) int {
	const edge = 0.5
	return inkIn(img, dpi, x, y, s.LabelW, s.LabelH) - inkIn(img, dpi, x+edge, y+edge, s.LabelW-2*edge, s.LabelH-2*edge)
}

// firstInk is the top left corner of what is dark in a square, in mm of the page.
func firstInk(img image.Image, dpi int, x, y, side float64) (left, top float64) {
	minX, minY := math.MaxInt, math.MaxInt
	for py := dots(y, dpi); py < dots(y+side, dpi); py++ {
		for px := dots(x, dpi); px < dots(x+side*0.8, dpi); px++ {
			if dark(img, px, py) {
				minX, minY = min(minX, px), min(minY, py)
			}
		}
	}
	return float64(minX) * 25.4 / float64(dpi), float64(minY) * 25.4 / float64(dpi)
}

// BenchmarkLabels: 10,000 labels. The floor is encoding the same texts with go-qrcode on one goroutine, nothing drawn. Nothing
// is in the cache when it begins, and 10,000 do not fit.
func BenchmarkLabels(b *testing.B) {
	labels := someLabels(10_000)
	for b.Loop() {
		floor := timed(func() {
			for _, l := range labels {
				q, err := qrcode.New(l.Address, qrcode.Medium)
				if err != nil {
					b.Fatal(err)
				}
				q.DisableBorder = true
				q.Bitmap()
			}
		})
		clear(symbols.of)
		peak := watchHeap()
		ours := timed(func() {
			if err := Labels(io.Discard, Printing{Sheet: Letter3x10}, labels); err != nil {
				b.Fatal(err)
			}
		})
		b.ReportMetric(peak(), "peak-MB")
		b.ReportMetric(ours.Seconds()/floor.Seconds(), "x-floor")
	}
}
