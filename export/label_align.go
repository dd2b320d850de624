package export

import (
	"fmt"
	"io"

	"tripwell/static"
)

// Alignment writes one page for plain paper: the outline of every label where it will be printed, and a line of known
// length. Held against a sheet of labels it shows whether the printer scales or feeds askew, before labels are spent.
func Alignment(w io.Writer, how Printing) error {
	how.Start = 1
	if err := how.Check(); err != nil {
		return err
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return fmt.Errorf("alignment page: %w", err)
	}
	p := newLabelPage(how.Sheet)
	p.turnTo(0)
	s := how.Sheet
	for n := range s.PerPage() {
		_, x, y := how.position(n)
		var l layout
		l.boxes = append(l.boxes, placedBox{0, 0, s.LabelW, s.LabelH, 0.1})
		number := fmt.Sprint(n + 1)
		l.texts = append(l.texts, placedText{1, s.LabelH - 1, 6, "sans", number})
		// A cross in the middle of each label: what is off there is off everywhere.
		l.boxes = append(l.boxes, placedBox{s.LabelW/2 - 2, s.LabelH / 2, 4, 0, 0.1}, placedBox{s.LabelW / 2, s.LabelH/2 - 2, 0.001, 4, 0.1})
		p.draw(l, x, y)
	}
	_, x, y := how.position(0)
	for i, text := range []string{
		words.Say("paper.align.sheet", "sheet", s.Name, "w", figureText(s.PageW), "h", figureText(s.PageH)),
		words.Say("paper.align.hold"),
		words.Say("paper.align.nudge", "x", figureText(how.NudgeX), "y", figureText(how.NudgeY)),
	} {
		points, text := p.pen.Fit("sansB", 7, 3.5, s.LabelW-3, text)
		p.draw(layout{texts: []placedText{{1.5, 3 + 2.9*float64(i), points, "sansB", text}}}, x, y)
	}
	p.ruler(how, words)
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("alignment page: %w", err)
	}
	return nil
}

// ruler draws a line of a whole number of centimetres across the second label row, or the first where there is one.
func (p *labelPage) ruler(how Printing, words *static.Words) {
	s := how.Sheet
	cm := 10
	for float64(cm)*10 > s.PageW-2*s.Left-2 {
		cm--
	}
	n := 0
	if s.Rows > 1 {
		n = s.Cols
	}
	_, x, y := how.position(n)
	y += s.LabelH/2 + 3
	length := float64(cm) * 10
	l := layout{boxes: []placedBox{{1, 0, length, 0, 0.25}}}
	for i := 0; i <= cm; i++ {
		l.boxes = append(l.boxes, placedBox{1 + float64(i)*10, -1.2, 0.001, 2.4, 0.2})
	}
	text := words.Say("paper.align.ruler", "mm", cm*10)
	points, text := p.pen.Fit("sans", 6, 3.5, s.LabelW-4, text)
	l.texts = []placedText{{2.5, -1.6, points, "sans", text}}
	p.draw(l, x, y)
}
