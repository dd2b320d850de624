package paper

import (
	"fmt"
	"io"
	"strings"
)

// PrintNotices writes the sheets as PDF, in letters that are read from a door: whoever finds one knows no word of the trade.
func PrintNotices(w io.Writer, n Notices, size Size) error {
	p, err := newPrint(size)
	if err != nil {
		return err
	}
	for i := range n.Rooms {
		one := &n.Rooms[i]
		p.head = func() {
			room := p.room() - p.demo(n.Demo)
			p.text(left, p.y+8, room, "sansB", 24, p.words.Say(one.title()))
			p.text(left, p.y+17, room, "sansB", 15, one.Room)
			p.text(left, p.y+24, room, "sans", 12, n.Site.Name)
			p.y += 28
			p.rule(p.y, 0.6)
			p.y += 5
		}
		p.turn()
		p.notice(one)
	}
	p.feet(p.words.Say("paper.notice.foot", "code", n.Code, "site", n.Site.Code))
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("notices: %w", err)
	}
	return nil
}

// title is the key of what is read first from the door.
func (n *Notice) title() string {
	if len(n.Back) == 0 {
		return "paper.notice.title_failed"
	}
	return "paper.notice.title"
}

func (p *print) notice(one *Notice) {
	p.paragraph("sans", 13, p.words.Say("paper.notice.here", "day", one.On))
	p.noticeList("paper.notice.back", one.Back)
	if len(one.Failing) > 0 {
		p.noticeList("paper.notice.failed", one.Failing)
		p.paragraph("sansB", 12, p.words.Say("paper.notice.failed_do"))
	}
	if len(one.Back) > 0 {
		p.paragraph("sans", 13, p.words.Say("paper.notice.arrange"))
	}
	p.need(46)
	lines := []string{"call", "left_by"}
	if len(one.Back) > 0 {
		lines = []string{"call", "times", "left_by"}
	}
	for _, key := range lines {
		p.y += 14
		w := p.text(left, p.y, p.room(), "sansB", 12, p.words.Say("paper.notice."+key))
		p.pdf.SetLineWidth(0.3)
		p.pdf.Line(left+w+3, p.y+0.8, p.size.W-right, p.y+0.8)
	}
}

func (p *print) noticeList(key string, lines []NoticeLine) {
	if len(lines) == 0 {
		return
	}
	p.paragraph("sansB", 13, p.words.Say(key))
	for _, l := range lines {
		spot := l.Spot
		if spot == "" {
			spot = p.words.Say("kind." + l.Kind)
		}
		parts := []string{spot, p.words.Say("task." + l.Task)}
		if l.Reason != "" {
			parts = append(parts, p.words.Say("missing."+l.Reason))
		}
		p.need(8)
		p.text(left+1, p.y+4.5, 5, "sansB", 12, "–")
		for _, line := range p.pen.Lines("sans", 12, p.room()-7, strings.Join(parts, " · ")) {
			p.need(6)
			p.text(left+6, p.y+4.5, p.room()-6, "sans", 12, line)
			p.y += 6
		}
	}
	p.y += 4
}

// paragraph writes text over as many lines as it takes.
func (p *print) paragraph(font string, points float64, text string) {
	step := points * 0.5
	for _, line := range p.pen.Lines(font, points, p.room(), text) {
		p.need(step)
		p.text(left, p.y+step*0.75, p.room(), font, points, line)
		p.y += step
	}
	p.y += 3
}
