package paper

import (
	"cmp"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"tripwell/export"
	"tripwell/forms"
)

// statementPrint prints a statement on two pages, never more and never fewer: what is long is cut with a line that says how much
// more there is and where.
type statementPrint struct {
	*print
	s *Statement
}

// PrintStatement writes a statement as PDF.
func PrintStatement(w io.Writer, s Statement, size Size) error {
	base, err := newPrint(size)
	if err != nil {
		return err
	}
	p := &statementPrint{base, &s}
	p.head = p.header
	p.turn()
	p.scope()
	p.proved()
	p.kept()
	p.months()
	p.made()
	p.turn()
	p.defects()
	p.gaps()
	p.instruments()
	p.proves()
	p.signatures()
	p.feet(p.words.Say("paper.statement.foot", "day", s.Ask.Now.UTC().Format("2006-01-02 15:04")))
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("statement: %w", err)
	}
	return nil
}

func (p *statementPrint) say(key string, pairs ...any) string {
	return p.words.Say("paper.statement."+key, pairs...)
}

func (p *statementPrint) header() {
	width := p.room() - p.demo(p.s.Ask.Demo)
	title := p.say("title")
	if p.pages > 1 {
		title = p.say("title_more")
	}
	p.text(left, p.y+4.5, width, "sansB", 15, title)
	p.text(left, p.y+10, width, "sans", 9, strings.Join(nonEmpty(clean(p.s.Ask.Organisation), clean(p.s.Site.Name)+" ("+p.s.Site.Code+")", clean(p.s.Site.Address)), " · "))
	p.y += 13
	p.rule(p.y-1, 0.4)
	p.y += 1
}

// title begins a part.
func (p *statementPrint) title(key string) {
	p.text(left, p.y+4.5, p.room(), "sansB", 10.5, p.say(key))
	p.y += 6
	p.rule(p.y, 0.2)
	p.y += 1
}

// lines writes a text over the width, at most so many lines.
func (p *statementPrint) lines(points, room float64, text string, most int) {
	for i, line := range p.pen.Lines("sans", points, room, text) {
		if i == most {
			return
		}
		p.text(left, p.y+0.38*points, room, "sans", points, line)
		p.y += 0.45 * points
	}
}

// fact writes a name and what it says.
func (p *statementPrint) fact(room float64, key, value string, most int) {
	p.text(left, p.y+3.4, 30, "sans", 8, p.say(key))
	for i, line := range p.pen.Lines("sans", 8.5, room-32, value) {
		if i == most {
			break
		}
		p.text(left+32, p.y+3.4, room-32, "sans", 8.5, line)
		p.y += 4
	}
	p.y += 0.3
}

func (p *statementPrint) scope() {
	s, room := p.s, p.room()-headBox-4
	top := p.y
	p.fact(room, "period", p.say("period_text", "from", s.From, "to", s.To), 1)
	p.fact(room, "as_of", s.Ask.Now.UTC().Format("2006-01-02 15:04:05")+" UTC", 1)
	kinds := []string{}
	for i, k := range s.Kinds {
		if i == 6 {
			kinds = append(kinds, p.say("kinds_more", "n", len(s.Kinds)-i))
			break
		}
		kinds = append(kinds, strconv.Itoa(k.N)+" "+p.words.Say("kind."+k.Kind))
	}
	p.fact(room, "devices", p.say("devices_text", "n", s.Devices, "retired", s.Retired)+" "+strings.Join(kinds, ", "), 4)
	p.fact(room, "records", p.say("records_text", "n", s.Log.Size, "root", s.Log.Root), 2)
	p.fact(room, "store", p.say("store_text", "store", s.Ask.Store, "epoch", s.Ask.Epoch, "judge", forms.JudgeVersion), 2)
	if s.Ask.Head != "" {
		p.headCode(s.Ask.Head, p.size.W-right-headBox, top)
	}
	p.y = max(p.y, top+headBox+1)
}

func (p *statementPrint) proved() {
	p.title("head")
	if p.s.Ask.Head == "" {
		p.lines(8.5, p.room(), p.say("no_head", "why", p.s.Ask.NoHead), 3)
		return
	}
	p.headLines(p.s.Ask.Head, p.room())
	p.lines(7.5, p.room(), p.say("head_text", "print", p.s.Ask.Print), 3)
	p.y += 1
}

// countWidth is the width of a column of figures, in mm.
const countWidth = 19.0

// countRow writes a name and what became of its dates.
func (p *statementPrint) countRow(font, name string, cells []string) {
	p.text(left, p.y+3.4, p.room()-float64(len(cells))*countWidth-2, font, 8, name)
	x := p.size.W - right - float64(len(cells))*countWidth
	for _, c := range cells {
		p.text(x+countWidth-1-min(countWidth-1, p.pen.Width(font, 8, c)), p.y+3.4, countWidth-1, font, 8, c)
		x += countWidth
	}
	p.y += 4.3
}

func (p *statementPrint) counts(c forms.Count) []string {
	done := c.InTime + c.Graced + c.Late + c.Missed + c.NoAccess
	share := "–"
	if done > 0 {
		share = strconv.FormatFloat(math.Floor(1000*float64(c.InTime+c.Graced)/float64(done))/10, 'f', 1, 64) + " %" // never 100 while one is missing
	}
	out := []string{}
	for _, n := range []int{done + c.Open, c.InTime, c.Graced, c.Late, c.Missed, c.NoAccess, c.Open} {
		out = append(out, strconv.Itoa(n))
	}
	return append(out, share)
}

func (p *statementPrint) countHeads() {
	var heads []string
	for _, key := range []string{"dates", "in_time", "graced", "late", "missed", "no_access", "open", "share"} {
		heads = append(heads, p.say("col."+key))
	}
	p.countRow("sans", "", heads)
	p.rule(p.y-0.4, 0.1)
}

func (p *statementPrint) kept() {
	p.title("kept")
	if len(p.s.Tasks) == 0 {
		p.lines(8.5, p.room(), p.say("kept_none"), 2)
		p.y += 1
		return
	}
	p.countHeads()
	var sum forms.Count
	for _, t := range p.s.Tasks {
		p.countRow("sans", p.words.Say("task."+t.Task), p.counts(t.Count))
		sum = added(sum, t.Count)
	}
	if len(p.s.Tasks) > 1 {
		p.countRow("sansB", p.say("all"), p.counts(sum))
	}
	p.lines(7.5, p.room(), p.say("kept_text"), 2)
	p.y += 1
}

func added(a, b forms.Count) forms.Count {
	return forms.Count{InTime: a.InTime + b.InTime, Graced: a.Graced + b.Graced, Late: a.Late + b.Late, Missed: a.Missed + b.Missed, NoAccess: a.NoAccess + b.NoAccess, Open: a.Open + b.Open}
}

// monthsMost is how many months have a row; of a longer period the years before are summed.
const monthsMost = 13

func (p *statementPrint) months() {
	if len(p.s.Tasks) == 0 {
		return
	}
	p.title("months")
	p.countHeads()
	list := p.s.Months
	if more := len(list) - monthsMost; more > 0 {
		var before forms.Count
		for _, m := range list[:more+1] {
			before = added(before, m.Count)
		}
		p.countRow("sans", p.say("months_before", "month", list[more+1].Month.Time().Format("2006-01")), p.counts(before))
		list = list[more+1:]
	}
	for _, m := range list {
		p.countRow("sans", m.Month.Time().Format("2006-01"), p.counts(m.Count))
	}
	p.y += 1
}

// made sums the tests up.
func (p *statementPrint) made() {
	p.title("made")
	s := p.s
	var parts []string
	for _, code := range []string{forms.Pass, forms.Watch, forms.ConditionalPass, forms.ConditionalFail, forms.Fail, forms.Incomplete, forms.NotTested, forms.NotJudged} {
		if n := s.Results[code]; n > 0 {
			parts = append(parts, cmp.Or(shapes[code], "○")+" "+p.words.Say("verdict."+code)+": "+strconv.Itoa(n))
		}
	}
	p.lines(8.5, p.room(), p.say("made_text", "n", s.Tests, "people", s.People)+" "+strings.Join(parts, " · "), 2)
	p.lines(8.5, p.room(), p.say("made_how", "late", s.Came, "corrected", s.Corrected, "withdrawn", s.Withdrawn, "imported", s.Imported), 2)
}

// defectRows and instrumentRows are how many of the worst stand on the second page.
const (
	defectRows     = 12
	instrumentRows = 6
)

func (p *statementPrint) defects() {
	p.title("defects")
	s := p.s
	if len(s.Defects) == 0 {
		p.lines(8.5, p.room(), p.say("defects_none"), 1)
		p.y += 2
		return
	}
	p.lines(8.5, p.room(), p.say("defects_text", "n", len(s.Defects), "devices", s.Sums.Devices, "in_use", s.Sums.InUse), 2)
	p.y += 0.5
	for i, d := range s.Defects {
		if i == defectRows {
			p.text(left, p.y+3.4, p.room(), "sans", 8, p.say("more", "n", len(s.Defects)-i, "sheet", p.words.Say("sheet.name.defects")))
			p.y += 4.4
			break
		}
		shape := map[string]string{"unsafe": "◆", "repair": "▲", "nuisance": "○"}[d.Severity]
		p.text(left, p.y+3.4, 26, "sansB", 8, strings.TrimSpace(shape+" "+p.words.Say("office.defect.severity."+d.Severity)))
		p.text(left+27, p.y+3.4, 20, "sans", 8, forms.DayOf(d.OpenedAt().In(s.Site.Location())).String())
		where := strings.Join(nonEmpty(clean(cmp.Or(d.Device.Place.Name, p.words.Say("kind."+cmp.Or(d.Device.Kind, "other")))), clean(d.Device.Place.Context()), export.TagText(d.Device.Tag)), ", ")
		p.text(left+48, p.y+3.4, 92, "sans", 8, where)
		p.text(left+141, p.y+3.4, p.room()-141, "sans", 8, p.words.Say("office.defect.state."+d.State))
		p.y += 4.4
	}
	p.y += 2
}

func (p *statementPrint) gaps() {
	p.title("gaps")
	if len(p.s.Gaps) == 0 {
		p.lines(8.5, p.room(), p.say("gaps_none"), 1)
		p.y += 2
		return
	}
	var parts []string
	for _, g := range p.s.Gaps {
		parts = append(parts, p.words.Say("office.protection.gap."+g.Why)+": "+strconv.Itoa(g.N))
	}
	p.lines(8.5, p.room(), strings.Join(parts, " · "), 4)
	p.y += 2
}

func (p *statementPrint) instruments() {
	p.title("instruments")
	if len(p.s.Instruments) == 0 {
		p.lines(8.5, p.room(), p.say("instruments_none"), 1)
		p.y += 2
		return
	}
	for i, u := range p.s.Instruments {
		if i == instrumentRows {
			p.text(left, p.y+3.4, p.room(), "sans", 8, p.say("more", "n", len(p.s.Instruments)-i, "sheet", p.words.Say("sheet.name.instruments")))
			p.y += 4.4
			break
		}
		p.text(left, p.y+3.4, 68, "sans", 8, clean(strings.TrimSpace(u.Name+" "+u.Serial)))
		p.text(left+70, p.y+3.4, 28, "sans", 8, p.say("instrument_tests", "n", u.Tests))
		certificate := p.say("certificate_none")
		if u.CalibrationDue != forms.NoDay {
			certificate = p.say("certificate_until", "day", u.CalibrationDue)
		}
		if u.Past > 0 {
			certificate += " " + p.say("certificate_past", "n", u.Past)
		}
		p.text(left+100, p.y+3.4, p.room()-100, "sans", 8, certificate)
		p.y += 4.4
	}
	p.y += 2
}

func (p *statementPrint) proves() {
	p.title("proves")
	p.lines(8, p.room(), p.say("proves_text"), 4)
	p.y += 0.8
	p.lines(8, p.room(), p.say("proves_not_text"), 5)
	p.y += 0.8
	p.lines(8, p.room(), p.say("check_text"), 3)
	p.y += 0.8
	p.lines(8, p.room(), p.words.Say("sheet.cover.caution_text"), 4)
	p.y += 2
}

// signatures stand at the foot of the second page.
func (p *statementPrint) signatures() {
	p.y = max(p.y, p.foot-38)
	half := (p.room() - 8) / 2
	for i, key := range []string{"signed_house", "signed_auditor"} {
		x := left + float64(i)*(half+8)
		p.text(x, p.y+4, half, "sansB", 8.5, p.say(key))
		for j, line := range []string{"name", "signature", "date"} {
			y := p.y + 14 + float64(j)*10
			p.pdf.SetLineWidth(0.2)
			p.pdf.Line(x+20, y, x+half, y)
			p.text(x, y-0.5, 19, "sans", 7.5, p.say("line_"+line))
		}
	}
}
