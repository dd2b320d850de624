package export

import (
	"math"
	"strings"
	"unicode/utf8"
)

// labelInset keeps print away from the edge of a label, in mm: sheets feed a little askew.
const labelInset = 1.5

// tagRoomLeast is what the tag takes at 9 points, in mm: nine characters of 0.602 em.
const tagRoomLeast = 17.5

// words and lines of a label, in mm from its top left corner.
type (
	placedText struct {
		x, baseline, points float64
		font, text          string
	}
	placedBox struct{ x, y, w, h, line float64 } // h 0 is a line across
)

// layout is what one label shows beside its code.
type layout struct {
	texts []placedText
	boxes []placedBox
}

// labelPlan is how labels of one size are filled: mm from the label's top left corner. It depends on the size and on how
// many modules the codes have, which all labels of a store share.
type labelPlan struct {
	w, h              float64
	codeX, codeY, box float64 // the code with its quiet zone fills the box; 0 without a code
	textX, textW      float64
	scale             float64 // of the print, 1 for a label of 1 in
	top               float64 // where the words begin
	centred           bool    // words stand in the middle under the code
	lines             []string
	demo              string
}

// planLabels decides how labels are filled. The code takes the full height and the words stand beside it; where that leaves the
// tag no room the code becomes smaller, and on a narrow label the words stand below.
func planLabels(size SheetSize, address string, lines []string, demo string) (labelPlan, error) {
	p := labelPlan{w: size.LabelW, h: size.LabelH, lines: lines, demo: demo, scale: min(1.6, max(0.7, size.LabelH/25.4))}
	if address == "" {
		p.textX, p.textW, p.top = labelInset, p.w-2*labelInset, labelInset
		return p, nil
	}
	// The quiet zone is blank and serves as the margin where a low label has no other.
	box := min(p.w, p.h) - labelInset
	s, module, err := codeIn(address, box)
	if err != nil {
		if s, module, err = codeIn(address, min(p.w, p.h)); err != nil {
			return p, err
		}
	}
	wide := float64(len(s) + 2*quietModules)
	dots, least := math.Round(module/dotMM), float64(moduleDotsMin)
	side := func() float64 { return dots * dotMM * wide }
	for dots > least && p.w-1.5*labelInset-side() < tagRoomLeast {
		dots--
	}
	p.centred = p.w-1.5*labelInset-side() < tagRoomLeast && p.h-least*dotMM*wide >= 4
	if p.centred {
		for dots = math.Floor((p.w-0.2)/wide/dotMM + 1e-9); dots > least && p.h-side() < 8; {
			dots--
		}
	}
	p.box = side()
	p.codeX, p.codeY = min(labelInset/2, (p.w-p.box)/2), (p.h-p.box)/2
	p.textX, p.top = p.codeX+p.box, min(labelInset, 0.06*p.h)
	p.textW = p.w - labelInset - p.textX
	if p.centred {
		p.codeX, p.codeY, p.scale = (p.w-p.box)/2, 0.2, 0.7
		p.textX, p.textW, p.top = labelInset/2, p.w-labelInset, p.codeY+p.box-0.7
	}
	return p, nil
}

// lay fills one label.
func (p *labelPlan) lay(l Label, pen *Pen) layout {
	var out layout
	if len(l.Marking) > 0 {
		p.layMarking(&out, l.Marking, pen)
		return out
	}
	k := p.scale
	baseline, room := p.top+4.6*k, p.textW
	bottom := p.h - 0.7
	if l.Demo {
		// The tag is never cut for the mark: where both do not fit, the mark goes to the foot.
		if wide := pen.Width("sansB", 7*k, p.demo) + 2.4; room-wide >= tagRoomLeast {
			p.layDemo(&out, baseline, pen)
			room -= wide
		} else {
			p.layDemo(&out, p.h-1-0.8*k, pen)
			bottom -= 4.2 * k
		}
	}
	p.line(&out, pen, baseline, room, "monoB", 13*k, 6, TagText(l.Tag))
	baseline += 1.1 * k
	for _, name := range p.lines {
		font, points, step := "sans", 7*k, 3.4*k
		texts := []string{l.line(name)}
		if name == LineSpot {
			font, points, step = "sansB", 8*k, 3.5*k
			texts = p.broken(pen, font, points, texts[0])
		}
		for _, text := range texts {
			if text = Printable(text); text != "" && baseline+step <= bottom {
				baseline += step
				p.line(&out, pen, baseline, p.textW, font, points, 0.78*points, text)
			}
		}
	}
	if l.Blank {
		for rule := p.top + 4.6*k + 6; rule <= p.h-labelInset; rule += 6 {
			out.boxes = append(out.boxes, placedBox{p.textX, rule, p.textW, 0, 0.15})
		}
	}
	return out
}

// line adds a line within room mm: smaller first, down to least points, then with an ellipsis at the end.
func (p *labelPlan) line(out *layout, pen *Pen, baseline, room float64, font string, points, least float64, text string) {
	points, text = pen.Fit(font, points, least, room, Printable(text))
	if text == "" {
		return
	}
	x := p.textX
	if p.centred {
		x += (room - pen.Width(font, points, text)) / 2
	}
	out.texts = append(out.texts, placedText{x, baseline, points, font, text})
}

// layDemo puts the mark at the right edge.
func (p *labelPlan) layDemo(out *layout, baseline float64, pen *Pen) {
	points := 7 * p.scale
	w := pen.Width("sansB", points, p.demo)
	right := p.textX + p.textW
	out.boxes = append(out.boxes, placedBox{right - w - 1.4, baseline - 3*p.scale, w + 1.4, 3.8 * p.scale, 0.2})
	out.texts = append(out.texts, placedText{right - w - 0.7, baseline - 0.2, points, "sansB", p.demo})
}

// layMarking prints a marking over the whole label, as large as it goes, in a frame.
func (p *labelPlan) layMarking(out *layout, marking []string, pen *Pen) {
	const frame = 1.2
	out.boxes = append(out.boxes, placedBox{frame, frame, p.w - 2*frame, p.h - 2*frame, 0.5})
	roomW, roomH := p.w-2*frame-3, p.h-2*frame-2
	points := roomH / float64(len(marking)) / 1.25 * mmPoint
	for _, text := range marking {
		if w := pen.Width("sansB", 10, text); w > 0 {
			points = min(points, 10*roomW/w)
		}
	}
	step := points / mmPoint * 1.25
	baseline := p.h/2 - step*float64(len(marking))/2 + step*0.79
	for _, text := range marking {
		out.texts = append(out.texts, placedText{(p.w - pen.Width("sansB", points, text)) / 2, baseline, points, "sansB", text})
		baseline += step
	}
}

// broken breaks a text that is too wide into two lines at a space.
func (p *labelPlan) broken(pen *Pen, font string, points float64, text string) []string {
	text = Printable(text)
	if text == "" || pen.Width(font, points, text) <= p.textW {
		return []string{text}
	}
	for i := len(text) - 1; i > 0; i-- {
		if text[i] == ' ' && pen.Width(font, points, text[:i]) <= p.textW {
			return []string{text[:i], strings.TrimSpace(text[i:])}
		}
	}
	return []string{text}
}

// Printable leaves what the label fonts can show on one line: no control characters, nothing beyond the basic plane.
func Printable(s string) string {
	return strings.Join(strings.Fields(strings.Map(func(r rune) rune {
		switch {
		case r < 0x20 || r == 0x7F || r >= 0x80 && r < 0xA0:
			return ' '
		case r >= 0x200B && r <= 0x200F || r >= 0x202A && r <= 0x202E || r >= 0x2066 && r <= 0x2069 || r == 0xFEFF:
			return -1
		case r > 0xFFFF:
			return utf8.RuneError
		}
		return r
	}, strings.ToValidUTF8(s, string(utf8.RuneError)))), " ")
}
