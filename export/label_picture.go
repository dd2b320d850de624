package export

import (
	"bytes"
	"fmt"
	"html"
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"io"
	"math"
	"strconv"

	"golang.org/x/image/font"
	"golang.org/x/image/font/opentype"
	"golang.org/x/image/math/fixed"

	"tripwell/static"
)

// drawnLabel is one label laid out for a picture.
type drawnLabel struct {
	layout
	plan   labelPlan
	symbol symbol
	module float64 // mm
}

func drawLabel(how Printing, l Label) (*drawnLabel, error) {
	if err := how.Check(); err != nil {
		return nil, err
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return nil, fmt.Errorf("label: %w", err)
	}
	plan, err := planLabels(how.Sheet, l.Address, how.Lines, words.Say("sheet.label_demo"))
	if err != nil {
		return nil, err
	}
	d := &drawnLabel{plan: plan}
	if l.Address != "" {
		if d.symbol, d.module, err = codeIn(l.Address, plan.box+1e-6); err != nil {
			return nil, err
		}
	}
	d.layout = plan.lay(l, NewPen(NewPrint(how.Sheet.PageW, how.Sheet.PageH)))
	return d, nil
}

// LabelSVG writes one label as a picture in lines, in millimetres, at the size of a label of the sheet.
func LabelSVG(w io.Writer, how Printing, l Label) error {
	d, err := drawLabel(how, l)
	if err != nil {
		return err
	}
	var b bytes.Buffer
	width, height := svgMM(d.plan.w), svgMM(d.plan.h)
	fmt.Fprintf(&b, `<svg xmlns="http://www.w3.org/2000/svg" width="%smm" height="%smm" viewBox="0 0 %s %s">`, width, height, width, height)
	b.WriteString("\n<rect width=\"100%\" height=\"100%\" fill=\"#fff\"/>\n")
	if d.symbol != nil {
		inset := d.module * quietModules
		fmt.Fprintf(&b, `<path shape-rendering="crispEdges" transform="translate(%s %s) scale(%s)" d="`, svgMM(d.plan.codeX+inset), svgMM(d.plan.codeY+inset), svgMM(d.module))
		d.symbol.runs(func(col, row, length int) { fmt.Fprintf(&b, "M%d %dh%dv1h-%dz", col, row, length, length) })
		b.WriteString("\"/>\n")
	}
	for _, box := range d.boxes {
		if box.h == 0 { // a rectangle without height is not drawn
			box.y, box.h = box.y-box.line/2, box.line
			fmt.Fprintf(&b, "<rect x=\"%s\" y=\"%s\" width=\"%s\" height=\"%s\"/>\n", svgMM(box.x), svgMM(box.y), svgMM(box.w), svgMM(box.h))
			continue
		}
		fmt.Fprintf(&b, "<rect x=\"%s\" y=\"%s\" width=\"%s\" height=\"%s\" fill=\"none\" stroke=\"#000\" stroke-width=\"%s\"/>\n",
			svgMM(box.x), svgMM(box.y), svgMM(box.w), svgMM(box.h), svgMM(box.line))
	}
	pen := NewPen(NewPrint(10, 10))
	for _, t := range d.texts {
		family, weight := "DejaVu Sans, sans-serif", "normal"
		switch t.font {
		case "sansB":
			weight = "bold"
		case "monoB":
			family, weight = "DejaVu Sans Mono, monospace", "bold"
		}
		// The length is stated because the reader may have another font.
		fmt.Fprintf(&b, "<text x=\"%s\" y=\"%s\" font-family=\"%s\" font-weight=\"%s\" font-size=\"%s\" textLength=\"%s\" lengthAdjust=\"spacingAndGlyphs\">%s</text>\n",
			svgMM(t.x), svgMM(t.baseline), family, weight, svgMM(t.points/mmPoint), svgMM(pen.Width(t.font, t.points, t.text)), html.EscapeString(t.text))
	}
	b.WriteString("</svg>\n")
	_, err = w.Write(b.Bytes())
	return err
}

func svgMM(v float64) string { return strconv.FormatFloat(math.Round(v*1000)/1000, 'f', -1, 64) }

// pictureDPI makes a module a whole number of dots (see dotMM), twice as fine as a label printer.
const pictureDPI = 600

// LabelPNG writes one label as a picture in dots at 600 dpi, at the size of a label of the sheet.
func LabelPNG(w io.Writer, how Printing, l Label) error {
	d, err := drawLabel(how, l)
	if err != nil {
		return err
	}
	dot := func(mm float64) int { return int(math.Round(mm / 25.4 * pictureDPI)) }
	img := image.NewGray(image.Rect(0, 0, dot(d.plan.w), dot(d.plan.h)))
	draw.Draw(img, img.Bounds(), image.White, image.Point{}, draw.Src)
	fill := func(x, y, w, h int) {
		draw.Draw(img, image.Rect(x, y, x+w, y+h), image.Black, image.Point{}, draw.Src)
	}
	if d.symbol != nil {
		m := dot(d.module)
		x, y := dot(d.plan.codeX)+quietModules*m, dot(d.plan.codeY)+quietModules*m
		d.symbol.runs(func(col, row, length int) { fill(x+col*m, y+row*m, length*m, m) })
	}
	for _, b := range d.boxes {
		line := max(1, dot(b.line))
		x, y, w, h := dot(b.x), dot(b.y), dot(b.w), dot(b.h)
		fill(x, y, w, line)
		if h > 0 {
			fill(x, y+h, w+line, line)
			fill(x, y, line, h)
			fill(x+w, y, line, h)
		}
	}
	for _, t := range d.texts {
		if err := drawText(img, t, dot(t.x), dot(t.baseline)); err != nil {
			return fmt.Errorf("label: %w", err)
		}
	}
	enc := png.Encoder{CompressionLevel: png.BestCompression}
	return enc.Encode(w, img)
}

func drawText(img draw.Image, t placedText, x, y int) error {
	raw := map[string][]byte{"sans": sansFont, "sansB": sansBoldFont, "monoB": monoBoldFont}[t.font]
	parsed, err := opentype.Parse(raw)
	if err != nil {
		return err
	}
	face, err := opentype.NewFace(parsed, &opentype.FaceOptions{Size: t.points, DPI: pictureDPI, Hinting: font.HintingNone})
	if err != nil {
		return err
	}
	pen := font.Drawer{Dst: img, Src: image.NewUniform(color.Black), Face: face, Dot: fixed.P(x, y)}
	pen.DrawString(t.text)
	return face.Close()
}
