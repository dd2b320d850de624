package export

import (
	"bytes"
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
	// Cutting a font down to what is used writes into its bytes (of glyphs beyond the metrics): each print gets its own.
	pdf.AddUTF8FontFromBytes("sans", "", bytes.Clone(sansFont))
	pdf.AddUTF8FontFromBytes("sans", "B", bytes.Clone(sansBoldFont))
	pdf.AddUTF8FontFromBytes("mono", "B", bytes.Clone(monoBoldFont))
	return pdf
}

// Pen measures and writes text with the fonts of NewPrint: sans, sansB and monoB.
type Pen struct {
	pdf    *fpdf.Fpdf
	font   string
	points float64
}

// NewPen gives the pen of a print.
func NewPen(pdf *fpdf.Fpdf) *Pen { return &Pen{pdf: pdf} }

// Take chooses a font: sans, sansB or monoB.
func (p *Pen) Take(font string, points float64) {
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

// Width is how wide a text is, in mm.
func (p *Pen) Width(font string, points float64, text string) float64 {
	p.Take(font, points)
	return p.pdf.GetStringWidth(text)
}

// Fit makes a text go into room mm: smaller first, down to least points, then with an ellipsis at the end.
func (p *Pen) Fit(font string, points, least, room float64, text string) (float64, string) {
	if text == "" || room <= 0 {
		return points, ""
	}
	w := p.Width(font, points, text)
	if w <= room {
		return points, text
	}
	points = max(least, points*room/w)
	if w = p.Width(font, points, text); w <= room+1e-6 {
		return points, text
	}
	runes := []rune(text)
	for keep := int(float64(len(runes)) * room / w); keep > 0; keep-- {
		if text = strings.TrimRight(string(runes[:keep]), " ") + "…"; p.Width(font, points, text) <= room {
			return points, text
		}
	}
	return points, ""
}

// Write writes a text with its baseline at y; what is wider than room mm is made to fit. It gives the width written.
func (p *Pen) Write(x, y, room float64, font string, points float64, text string) float64 {
	points, text = p.Fit(font, points, 0.75*points, room, Printable(text))
	if text == "" {
		return 0
	}
	p.Take(font, points)
	p.pdf.Text(x, y, text)
	return p.pdf.GetStringWidth(text)
}

// Lines breaks a text at its spaces into lines of at most room mm.
func (p *Pen) Lines(font string, points, room float64, text string) (lines []string) {
	line := ""
	for _, word := range strings.Fields(Printable(text)) {
		longer := strings.TrimSpace(line + " " + word)
		if line != "" && p.Width(font, points, longer) > room {
			lines, longer = append(lines, line), word
		}
		line = longer
	}
	if line != "" {
		lines = append(lines, line)
	}
	return lines
}

// Forget makes the pen choose its font again, as after a turn to another page.
func (p *Pen) Forget() { p.font = "" }
