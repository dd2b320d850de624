package export

import (
	"strings"
	"time"

	"codeberg.org/go-pdf/fpdf"
)

// printMade is the date inside printed files. It is fixed, so that the same content makes the same bytes.
var printMade = time.Date(2000, 1, 1, 0, 0, 0, 0, time.UTC)

// NewPrint begins a PDF of pages of w by h mm with the fonts "sans" (plain and B) and "mono" (B), without margins of its
// own and with a fixed date inside.
func NewPrint(w, h float64) *fpdf.Fpdf {
	pdf := fpdf.NewCustom(&fpdf.InitType{UnitStr: "mm", Size: fpdf.SizeType{Wd: w, Ht: h}})
	pdf.SetCatalogSort(true)
	pdf.SetCreationDate(printMade)
	pdf.SetModificationDate(printMade)
	pdf.SetProducer("Tripwell", true)
	pdf.SetAutoPageBreak(false, 0)
	pdf.SetMargins(0, 0, 0)
	pdf.AddUTF8FontFromBytes("sans", "", sansFont)
	pdf.AddUTF8FontFromBytes("sans", "B", sansBoldFont)
	pdf.AddUTF8FontFromBytes("mono", "B", monoBoldFont)
	return pdf
}

// pen measures text as it will be printed.
type pen struct {
	pdf    *fpdf.Fpdf
	font   string
	points float64
}

func newPen(pdf *fpdf.Fpdf) *pen { return &pen{pdf: pdf} }

// take chooses a font: sans, sansB or monoB.
func (p *pen) take(font string, points float64) {
	if p.font == font && p.points == points {
		return
	}
	name, bold := strings.CutSuffix(font, "B")
	style := ""
	if bold {
		style = "B"
	}
	p.pdf.SetFont(name, style, points)
	p.font, p.points = font, points
}

// width is how wide a text is, in mm.
func (p *pen) width(font string, points float64, text string) float64 {
	p.take(font, points)
	return p.pdf.GetStringWidth(text)
}

// fit makes a text go into room mm: smaller first, down to least points, then with an ellipsis at the end.
func (p *pen) fit(font string, points, least, room float64, text string) (float64, string) {
	if text == "" || room <= 0 {
		return points, ""
	}
	w := p.width(font, points, text)
	if w <= room {
		return points, text
	}
	points = max(least, points*room/w)
	if w = p.width(font, points, text); w <= room+1e-6 {
		return points, text
	}
	runes := []rune(text)
	for keep := int(float64(len(runes)) * room / w); keep > 0; keep-- {
		if text = strings.TrimRight(string(runes[:keep]), " ") + "…"; p.width(font, points, text) <= room {
			return points, text
		}
	}
	return points, ""
}

// clipped shortens what a person typed to what fits into a sentence.
func clipped(s string) string {
	if runes := []rune(s); len(runes) > 60 {
		return string(runes[:60]) + "…"
	}
	return s
}
