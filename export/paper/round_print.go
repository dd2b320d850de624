package paper

import (
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"tripwell/static"

	"tripwell/export"
	"tripwell/forms"
)

// Measures of a round sheet, in mm.
const (
	codeBox    = 17.0 // side of a row's code with its quiet zone
	rowLeft    = left + codeBox + 2
	itemHeight = 6.6
	figureBox  = 15.0
	tickBox    = 3.0
	fewAnswers = 5 // more answers than these are written as a number of the legend
)

// roundPrint prints a round.
type roundPrint struct {
	*print
	round  *Round
	legend []Column // columns whose answers are written as numbers
	strip  []string // the legend's lines at the foot of every page
}

// Print writes a round sheet as PDF: in walking order, what is asked of each device with empty boxes, its code, and lines
// for date, crew and instrument on every page.
func Print(w io.Writer, r Round, size Size) error {
	base, err := newPrint(size)
	if err != nil {
		return err
	}
	p := &roundPrint{print: base, round: &r}
	p.head = p.header
	if err := p.makeLegend(); err != nil {
		return err
	}
	room := ""
	for i := range r.Stops {
		s := &r.Stops[i]
		rows := p.flow(s)
		height := max(codeBox+4, 9.5+float64(len(rows))*itemHeight) + 1
		here := s.Device.Place.Context()
		if here == "" && s.Device.Place.ID == "" {
			here = p.words.Say("paper.round.no_place")
		}
		band := 0.0
		if here != room || i == 0 {
			band = 7
		}
		turned := p.need(height + band)
		switch {
		case here != room || i == 0:
			p.band(here)
		case turned && here != "":
			p.band(p.words.Say("paper.round.continued", "room", here))
		}
		room = here
		p.stop(s, rows, height)
	}
	p.feet(p.words.Say("paper.round.legend_back"))
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("round sheet: %w", err)
	}
	return nil
}

// makeLegend finds the answers that are written as numbers and keeps room for them at the foot of every page.
func (p *roundPrint) makeLegend() error {
	met := map[string]bool{}
	quick := ""
	bound := false
	for _, s := range p.round.Stops {
		for _, c := range s.Columns {
			bound = bound || c.Reading != "" && len(c.Options) == 0
			if c.Quick != nil && s.Form.Quick != nil {
				quick = p.words.Say("paper.round.legend_quick", "name", c.Header, "text", p.words.Say(s.Form.Quick.Text))
			}
			if len(c.answers) > fewAnswers && !met[c.Header] {
				met[c.Header] = true
				p.legend = append(p.legend, c)
			}
		}
	}
	tail, err := Tail()
	if err != nil {
		return err
	}
	p.legend = append(p.legend, tail[slices.IndexFunc(tail, func(c Column) bool { return c.About == AboutNotTested })])
	add := func(text string) {
		if text != "" {
			p.strip = append(p.strip, p.pen.Lines("sans", 6.5, p.room(), text)...)
		}
	}
	add(quick)
	for _, c := range p.legend {
		var parts []string
		for i, a := range c.answers {
			parts = append(parts, strconv.Itoa(i+1)+" "+a)
		}
		add(c.Header + ": " + strings.Join(parts, " · "))
	}
	if bound {
		add(p.words.Say("paper.round.legend_bound"))
	}
	p.foot -= 3*float64(len(p.strip)) + 2
	return nil
}

// header draws what stands on every page: site, round, and the lines to fill in; on the first page also the cautions.
func (p *roundPrint) header() {
	r := p.round
	room := p.room() - p.demo(r.Demo)
	p.text(left, p.y+4, room, "sansB", 14, r.Site.Name)
	p.text(left, p.y+9, room, "sans", 9, p.words.Say("paper.round.title")+" · "+r.title(p.words)+" · "+p.words.Say("paper.round.stops", "n", len(r.Stops))+
		" · "+r.Site.Code+" · "+p.words.Say("paper.round.made", "day", r.On)+r.coded(p.words))
	p.y += 12
	third := p.room() / 3
	for i, key := range []string{"date", "crew", "instrument", "serial", "calibrated"} {
		x, y := left+float64(i%3)*third, p.y+float64(i/3)*8+5.5
		label := p.words.Say("paper.round." + key)
		w := p.text(x, y, third, "sans", 8, label)
		p.pdf.SetLineWidth(0.2)
		p.pdf.Line(x+w+1.5, y+0.6, x+third-4, y+0.6)
	}
	x, y := left+2*third, p.y+13.5
	p.text(x, y-2.9, third, "sans", 7, p.words.Say("paper.round.proved"))
	for _, key := range []string{"at_start", "at_end"} {
		p.box(x, y-2.2, tickBox, tickBox, 0.2)
		x += tickBox + 1 + p.text(x+tickBox+1, y+0.4, third/2, "sans", 7, p.words.Say("paper.round."+key)) + 5
	}
	p.y += 17
	if p.pages == 1 {
		p.cautions()
	}
	p.rule(p.y, 0.4)
	p.drawStrip()
	p.y += 1.5
}

// roundCodeBox is how large the code is printed that opens a round on a phone, in mm: a whole address needs small modules.
const roundCodeBox = 26

// cautions prints, once, what the forms say before their steps.
func (p *roundPrint) cautions() {
	var keys []string
	for _, s := range p.round.Stops {
		for _, step := range s.Form.Steps {
			for _, key := range step.Cautions {
				if !slices.Contains(keys, key) {
					keys = append(keys, key)
				}
			}
		}
	}
	keys = append(keys, "not_lockout", "licensed")
	top, room := p.y, p.room()
	if p.round.Address != "" {
		room -= roundCodeBox + 3
		p.code(p.round.Address, p.size.W-right-roundCodeBox, top, roundCodeBox)
		p.text(p.size.W-right-roundCodeBox, top+roundCodeBox+2.6, roundCodeBox, "sans", 6.5, p.words.Say("paper.round.scan"))
	}
	p.text(left, p.y+2.6, room, "sansB", 8, p.words.Say("paper.round.before"))
	p.y += 4
	for _, key := range keys {
		for i, line := range p.pen.Lines("sans", 7.5, room-4, p.words.Say("caution."+key)) {
			if i == 0 {
				p.text(left, p.y+2.8, 4, "sansB", 7.5, "–")
			}
			p.text(left+3, p.y+2.8, room-3, "sans", 7.5, line)
			p.y += 3.4
		}
	}
	if p.round.Address != "" {
		p.y = max(p.y, top+roundCodeBox+3)
	}
	p.y += 2
}

// drawStrip prints the legend above the foot.
func (p *roundPrint) drawStrip() {
	y := p.foot + 2
	p.rule(y-1.5, 0.2)
	for _, line := range p.strip {
		y += 3
		p.text(left, y-0.8, p.room(), "sans", 6.5, line)
	}
}

// band names the room the next rows are in.
func (p *roundPrint) band(room string) {
	p.pdf.SetFillColor(225, 225, 225)
	p.pdf.Rect(left, p.y, p.room(), 5.6, "F")
	p.pdf.SetFillColor(0, 0, 0)
	p.text(left+1.5, p.y+4, p.room()-3, "sansB", 9, room)
	p.y += 7
}

// onPaper leaves out what need not be answered where one tick answers most devices: sixty of them must fit into a hand.
func (s *Stop) onPaper(c Column) bool {
	if s.Form.Quick == nil || c.Quick != nil {
		return true
	}
	for _, step := range s.Form.Steps {
		for _, ask := range step.Asks {
			if ask.Reading == c.Reading && ask.Required {
				return true
			}
		}
	}
	return false
}

// item is one question with its box or boxes.
type item struct {
	label   string
	answers []string // ticked; none = a box to write in
	wide    bool     // the quick answer, printed bold
	width   float64
}

// flow breaks the questions of a test into rows.
func (p *roundPrint) flow(s *Stop) (rows [][]item) {
	room, used := p.size.W-right-rowLeft, 0.0
	add := func(it item) {
		if len(rows) == 0 || used+it.width > room {
			rows, used = append(rows, nil), 0
		}
		rows[len(rows)-1] = append(rows[len(rows)-1], it)
		used += it.width
	}
	for _, c := range s.Columns {
		if s.onPaper(c) {
			add(p.item(c))
		}
	}
	for _, c := range []string{AboutNotTested, AboutNote} {
		it := item{label: p.words.Say("paper.col." + c)}
		it.width = p.pen.Width("sans", 7.5, it.label) + 1.5 + figureBox + 4
		if c == AboutNotTested {
			it.label = p.words.Say("paper.round.coded", "name", it.label)
			it.width = p.pen.Width("sans", 7.5, it.label) + 1.5 + figureBox/2 + 4
		}
		add(it)
	}
	// The note takes what is left of its row.
	last := rows[len(rows)-1]
	last[len(last)-1].width += room - used
	return rows
}

func (p *roundPrint) item(c Column) item {
	it := item{label: c.Header}
	switch {
	case c.Quick != nil:
		it.answers, it.wide = []string{""}, true
	case len(c.answers) > fewAnswers:
		it.label = p.words.Say("paper.round.coded", "name", c.Header)
	case len(c.answers) > 0:
		it.answers = c.answers
	}
	font := "sans"
	if it.wide {
		font = "sansB"
	}
	it.width = p.pen.Width(font, 7.5, it.label) + 1.5
	for _, a := range it.answers {
		it.width += tickBox + 1 + p.pen.Width("sans", 7.5, a) + 2
	}
	switch {
	case len(it.answers) > 0:
	case len(c.answers) > fewAnswers:
		it.width += figureBox / 2
	default:
		it.width += figureBox
	}
	it.width += 3
	return it
}

// stop prints one test.
func (p *roundPrint) stop(s *Stop, rows [][]item, height float64) {
	y := p.y
	p.code(s.Address, left-1, y, codeBox)
	if s.Address == "" {
		p.box(left, y+1, codeBox-2, codeBox-2, 0.1)
	}
	p.text(left, y+codeBox+2.2, codeBox, "monoB", 7.5, export.TagText(s.Device.Tag))
	x, room := rowLeft, p.size.W-right-rowLeft
	x += p.text(x, y+4, room*0.6, "sansB", 10, s.spot(p.words)) + 3
	var about []string
	for _, text := range []string{p.words.Say("kind." + s.Device.Kind), s.circuit(), p.dueText(s)} {
		if text != "" {
			about = append(about, text)
		}
	}
	if p.round.Task == "" {
		about = append([]string{p.words.Say("task." + s.Task)}, about...)
	}
	p.text(x, y+4, p.size.W-right-x, "sans", 8, strings.Join(about, " · "))
	p.text(rowLeft, y+7.4, room, "sansB", 7, strings.Join(s.beforeTest(p.words), " "))
	for i, row := range rows {
		p.items(row, rowLeft, y+8.4+float64(i)*itemHeight)
	}
	p.y += height
	p.rule(p.y-0.6, 0.1)
}

// beforeTest says when TEST may be pressed at a stop, whom to tell first, and what may lose power.
func (s *Stop) beforeTest(words *static.Words) (said []string) {
	p := s.Device.Place
	if p.TestFrom != "" {
		said = append(said, words.Say("office.round.window", "from", p.TestFrom, "until", p.TestUntil))
	}
	if p.WhomToTell != "" {
		said = append(said, words.Say("office.round.tell", "who", p.WhomToTell))
	}
	if p.CriticalLoad != "" {
		said = append(said, words.Say("office.round.load", "load", p.CriticalLoad))
	}
	return said
}

func (p *roundPrint) items(row []item, x, y float64) {
	for _, it := range row {
		at, end := x, x+it.width-3
		font := "sans"
		if it.wide {
			font = "sansB"
		}
		at += p.text(at, y+3.9, it.width, font, 7.5, it.label) + 1.5
		for _, a := range it.answers {
			p.box(at, y+1.4, tickBox, tickBox, 0.2)
			at += tickBox + 1
			at += p.text(at, y+3.9, it.width, "sans", 7.5, a) + 2
		}
		if len(it.answers) == 0 {
			p.box(at, y+0.4, end-at, itemHeight-1.4, 0.2)
		}
		x += it.width
	}
}

func (p *roundPrint) dueText(s *Stop) string {
	switch {
	case s.Due == forms.NoDay:
		return ""
	case s.Late:
		return p.words.Say("paper.round.overdue", "day", s.Due)
	}
	return p.words.Say("paper.round.due", "day", s.Due)
}

// coded names the round as it is asked for when its readings come back, "" where it was not made in the office.
func (r *Round) coded(words *static.Words) string {
	if r.Code == "" {
		return ""
	}
	return " · " + words.Say("paper.round.code", "code", r.Code)
}
