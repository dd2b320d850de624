package paper

import (
	"cmp"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// Sheet is what is filed of one device.
type Sheet struct {
	Device  store.Device
	Entries []Test // newest first
	More    int    // tests left out
	On      forms.Day
	Address string // of the label, "" where there is none
	Head    string // signed over all this and more, "" without one
	Demo    bool
}

// Test is one entry with the names of who made it.
type Test struct {
	store.Entry
	By, Instrument string
	Remarks        []string // corrections, withdrawal, origin, note
}

// sheetTests is the most tests a device sheet lists.
const sheetTests = 120

// SheetOf reads a device's sheet from a view.
func SheetOf(v *store.View, device string, now forms.Day, url string, demo bool) (Sheet, error) {
	words, err := catalogue()
	if err != nil {
		return Sheet{}, err
	}
	s := Sheet{On: now, Demo: demo}
	if s.Device, err = v.Device(device, now); err != nil {
		return s, err
	}
	if url != "" && s.Device.Tag != "" {
		s.Address = record.TagAddress(strings.ToUpper(url), s.Device.Tag)
	}
	entries, err := v.Entries(device)
	if err != nil {
		return s, err
	}
	slices.SortStableFunc(entries, func(a, b store.Entry) int { return cmp.Compare(b.Day, a.Day) })
	if s.More = len(entries) - sheetTests; s.More > 0 {
		entries = entries[:sheetTests]
	}
	instruments, err := v.Instruments()
	if err != nil {
		return s, err
	}
	name := func(id string) string {
		if name := v.PersonName(id); name != "" || !record.IsID(id) {
			return cmp.Or(name, id)
		}
		return words.Say("paper.device.former_member", "id", id[:8])
	}
	for _, e := range entries {
		t := Test{Entry: e, By: name(e.By)}
		if e.ReadBy != "" {
			t.By = name(e.ReadBy)
		}
		for _, i := range instruments {
			if i.ID == e.Body.Given.Instrument {
				t.Instrument = strings.TrimSpace(i.Name + " " + i.Serial)
			}
		}
		if c := e.Sealed; c != nil {
			t.Remarks = append(t.Remarks, words.Say("paper.device.sealed", "day", forms.DayOf(c.At), "by", name(c.By), "why", c.Reason))
		}
		for _, c := range e.Corrections {
			if c.Sealed != nil {
				continue
			}
			t.Remarks = append(t.Remarks, words.Say("paper.device.corrected", "day", forms.DayOf(c.At), "by", name(c.By), "why", c.Reason))
		}
		if c := e.Withdrawn; c != nil {
			t.Remarks = append(t.Remarks, words.Say("paper.device.withdrawn", "day", forms.DayOf(c.At), "by", name(c.By), "why", c.Reason))
		}
		if e.Imported {
			t.Remarks = append(t.Remarks, words.Say("paper.device.imported"))
		}
		if e.Note != "" {
			t.Remarks = append(t.Remarks, words.Say("paper.device.note", "text", e.Note))
		}
		s.Entries = append(s.Entries, t)
	}
	return s, nil
}

// devicePrint prints a device sheet.
type devicePrint struct {
	*print
	sheet *Sheet
}

// PrintSheet writes a device sheet as PDF: what the register says, its dates, every test with its readings, its code.
func PrintSheet(w io.Writer, s Sheet, size Size) error {
	base, err := newPrint(size)
	if err != nil {
		return err
	}
	p := &devicePrint{base, &s}
	p.head = p.header
	p.turn()
	p.facts()
	p.dates()
	p.history()
	p.earlier()
	p.witness()
	p.feet(p.words.Say("caution.licensed"))
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("device sheet: %w", err)
	}
	return nil
}

func (p *devicePrint) header() {
	d, first := &p.sheet.Device, p.pages == 1
	width := p.room() - p.demo(p.sheet.Demo)
	if first && p.sheet.Address != "" {
		const box = 34.0
		p.code(p.sheet.Address, p.size.W-right-box, top+5, box)
		width -= box
	}
	spot := cmp.Or(d.Place.Name, p.words.Say("kind."+d.Kind))
	p.text(left, p.y+4.5, width, "sansB", 15, spot)
	p.text(left, p.y+10, width, "sans", 9, strings.Join(nonEmpty(d.SiteName, d.SiteCode, d.Place.Context()), " · "))
	p.text(left, p.y+15, width, "monoB", 11, export.TagText(d.Tag))
	p.text(left+34, p.y+15, width-34, "sans", 9, strings.Join(nonEmpty(p.words.Say("paper.device.title"), p.words.Say("paper.device.made", "day", p.sheet.On)), " · "))
	p.y += 19
	if !first {
		p.rule(p.y-1, 0.3)
	}
}

func nonEmpty(texts ...string) []string {
	return slices.DeleteFunc(texts, func(s string) bool { return s == "" })
}

func (p *devicePrint) heading(key string) {
	p.need(16)
	p.text(left, p.y+4.5, p.room(), "sansB", 10, p.words.Say(key))
	p.y += 6
	p.rule(p.y, 0.3)
	p.y += 1.5
}

// facts prints the register in two columns, beside the code on the first page.
func (p *devicePrint) facts() {
	d := &p.sheet.Device
	var facts [][2]string
	add := func(name, value string) {
		if value != "" {
			facts = append(facts, [2]string{name, value})
		}
	}
	add(p.words.Say("paper.col.kind"), p.words.Say("kind."+d.Kind))
	add(p.words.Say("paper.col.circuit"), strings.Join(nonEmpty(d.Panel, d.Circuit), " / "))
	for _, field := range []string{"make", "model", "serial", "rating_a", "nominal_v", "rated_residual_ma", "delayed", "waveform", "equipment_ground", "faces", "installed", "where", "gauge", "length_m",
		"locking", "quiet_ground", "new_construction", "no_neutral", "supply_edition", "double_insulated", "earthing", "distribution", "special_location", "note"} {
		add(p.words.Say("office.device.field."+field), p.fact(field, d.Fields[field]))
	}
	add(p.words.Say("office.device.field.critical_load"), d.Place.CriticalLoad)
	add(p.words.Say("office.device.field.whom_to_tell"), d.Place.WhomToTell)
	if d.Retired {
		add(p.words.Say("sheet.retired"), strings.Join(nonEmpty(dayText(d.RetiredOn), d.Reason), ": "))
	}
	width := p.room()
	if p.sheet.Address != "" {
		width -= 36
	}
	half := width / 2
	for i, f := range facts {
		x := left + float64(i%2)*half
		p.text(x, p.y+3.5, 30, "sans", 7.5, f[0])
		p.text(x+31, p.y+3.5, half-33, "sansB", 8, f[1])
		if i%2 == 1 || i == len(facts)-1 {
			p.y += 4.8
		}
	}
	p.y = max(p.y, top+42) + 2
}

var factUnits = map[string]string{"rating_a": "A", "nominal_v": "V", "rated_residual_ma": "mA", "length_m": "m"}

func (p *devicePrint) fact(field string, value any) string {
	text := ""
	switch v := value.(type) {
	case nil:
		return ""
	case float64:
		text = strconv.FormatFloat(v, 'f', -1, 64)
	case bool:
		text = p.words.Say("option.no")
		if v {
			text = p.words.Say("option.yes")
		}
	default:
		text = fmt.Sprint(v)
		for _, key := range []string{"office.device.answer." + field + "." + text, "option." + field + "." + text} {
			if p.words.Has(key) {
				return p.words.Say(key)
			}
		}
	}
	if unit := factUnits[field]; unit != "" {
		text += " " + unit
	}
	return text
}

func dayText(d forms.Day) string {
	if d == forms.NoDay {
		return ""
	}
	return d.String()
}

func (p *devicePrint) dates() {
	if len(p.sheet.Device.Due) == 0 {
		return
	}
	p.heading("paper.device.dates")
	for _, d := range p.sheet.Device.Due {
		p.need(5)
		p.text(left, p.y+3.5, 40, "sansB", 8, p.words.Say("task."+d.Task))
		p.text(left+42, p.y+3.5, 30, "sans", 8, dayText(d.Due))
		p.text(left+68, p.y+3.5, 30, "sans", 8, p.words.Say("state."+d.State))
		plan := d.Plan
		if p.words.Has("plan." + plan) {
			plan = p.words.Say("plan." + plan)
		}
		p.text(left+96, p.y+3.5, p.room()-96, "sans", 8, plan)
		p.y += 4.8
	}
	p.y += 2
}

// shapes stand before a verdict's word, so that it reads in black and white: disc, triangle, diamond, ring.
var shapes = map[string]string{forms.Pass: "●", forms.ConditionalPass: "▲", forms.Watch: "▲", forms.ConditionalFail: "▲", forms.Fail: "◆"}

// readingName names a reading of a test as its form does.
func (p *devicePrint) readingName(t Test, code string) string {
	return cmp.Or(t.OwnNames[code], p.words.Say("reading."+code+".name"))
}

func (p *devicePrint) history() {
	p.heading("paper.device.history")
	if len(p.sheet.Entries) == 0 {
		p.text(left, p.y+3.5, p.room(), "sans", 8, p.words.Say("paper.device.none"))
		p.y += 6
		return
	}
	const atTask, atResult, atBy = 22.0, 52.0, 92.0
	for _, t := range p.sheet.Entries {
		var parts []string
		for _, code := range forms.Codes() {
			if r, ok := t.Body.Readings[code.Code]; ok {
				if text := export.ReadingText(p.words, code.Code, r); text != "" {
					parts = append(parts, p.readingName(t, code.Code)+": "+text)
				}
			}
		}
		for _, series := range t.Body.Series {
			for _, code := range forms.Codes() {
				if r, ok := series.Readings[code.Code]; ok {
					if text := export.ReadingText(p.words, code.Code, r); text != "" {
						parts = append(parts, p.words.Say("paper.at", "name", p.readingName(t, code.Code), "at", conditionText(p.words, series.At))+": "+text)
					}
				}
			}
		}
		lines := p.pen.Lines("sans", 7.5, p.room()-atTask, strings.Join(parts, "; "))
		for _, remark := range t.Remarks {
			lines = append(lines, p.pen.Lines("sans", 7.5, p.room()-atTask, remark)...)
		}
		p.need(5.5 + 3.4*float64(min(len(lines), 40)))
		p.text(left, p.y+3.6, atTask, "sansB", 8, t.Day.String())
		p.text(left+atTask, p.y+3.6, atResult-atTask-1, "sans", 8, p.words.Say("task."+t.Task))
		p.text(left+atResult, p.y+3.6, atBy-atResult-1, "sansB", 8, strings.TrimSpace(cmp.Or(shapes[t.Verdict.Result], "○")+" "+p.result(t)))
		p.text(left+atBy, p.y+3.6, p.room()-atBy, "sans", 8, strings.Join(nonEmpty(t.By, t.Instrument), ", "))
		p.y += 4.6
		for _, line := range lines {
			p.need(3.4)
			p.text(left+atTask, p.y+2.8, p.room()-atTask, "sans", 7.5, line)
			p.y += 3.4
		}
		p.y += 0.9
		p.rule(p.y, 0.1)
	}
	if p.sheet.More > 0 {
		p.need(5)
		p.text(left, p.y+3.6, p.room(), "sans", 8, p.words.Say("paper.device.more", "n", p.sheet.More))
		p.y += 5
	}
}

func (p *devicePrint) result(t Test) string {
	if key := "verdict." + t.Verdict.Result; p.words.Has(key) {
		return p.words.Say(key)
	}
	return t.Verdict.Result
}

func (p *devicePrint) earlier() {
	if len(p.sheet.Device.Earlier) == 0 {
		return
	}
	p.y += 2
	p.heading("paper.device.earlier")
	for _, d := range p.sheet.Device.Earlier {
		p.need(5)
		line := strings.Join(nonEmpty(p.words.Say("kind."+d.Kind), d.Make, d.Model, dayText(d.Installed)), " · ")
		p.text(left, p.y+3.5, p.room(), "sans", 8, line)
		p.y += 4.8
	}
}

// witness prints the signed head that the page's records stand under.
func (p *devicePrint) witness() {
	if p.sheet.Head == "" {
		return
	}
	p.need(headBox + 12)
	p.y += 2
	p.heading("paper.head.title")
	top, room := p.y, p.room()-headBox-4
	p.headCode(p.sheet.Head, p.size.W-right-headBox, top)
	for _, line := range p.pen.Lines("sans", 8, room, p.words.Say("paper.head.text")) {
		p.text(left, p.y+3.2, room, "sans", 8, line)
		p.y += 3.9
	}
	p.y += 1
	p.headLines(p.sheet.Head, room)
	p.y = max(p.y, top+headBox) + 1
}
