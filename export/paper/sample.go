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
)

// Sample is what an auditor goes to see: devices of the register to find on the floor, and rooms of the floor to count against
// the register.
type Sample struct {
	Ask   SampleAsk
	Sites []store.Site
	On    forms.Day
	Demo  bool

	Lot, Bad int // devices in the register; how many of them are the share that must not be missed
	Devices  []SampleDevice
	RoomLot  int
	RoomBad  int
	Rooms    []SampleRoom
}

// SampleAsk says how a sample is drawn: see forms.DrawSample.
type SampleAsk struct {
	Site       string // id or code; "" = every site of the scope
	Head       string // text of the signed head
	Word       string // the auditor's
	Confidence float64
	Share      float64 // of bad ones that must not be missed
}

// SampleDevice is a device that was drawn.
type SampleDevice struct {
	Site   store.Site
	Device store.DeviceRow
	Last   string    // verdict of its newest test, "" without one
	Day    forms.Day // of that test
}

// SampleRoom is a room that was drawn, and what the register says is in it.
type SampleRoom struct {
	Site    store.Site
	Place   store.Place // building, floor and room
	Devices int
}

// Check refuses an ask from which nothing can be drawn.
func (a SampleAsk) Check() error {
	switch {
	case strings.TrimSpace(a.Word) == "":
		return &store.Error{Code: "invalid", Field: "word", Text: "A sample is drawn with a word that the auditor chooses after she holds the head. Give any word."}
	case !(a.Confidence >= 0.5 && a.Confidence < 1):
		return &store.Error{Code: "invalid", Field: "confidence", Text: "The confidence is a share from 0.5 to below 1, such as 0.95."}
	case !(a.Share > 0 && a.Share < 1):
		return &store.Error{Code: "invalid", Field: "share", Text: "The share that must not be missed lies between 0 and 1, such as 0.05."}
	case strings.TrimSpace(a.Head) == "":
		return &store.Error{Code: "invalid", Field: "head", Text: "There is no signed head to draw from yet. Take a bundle or a workbook first: that signs one."}
	}
	return nil
}

// SampleOf draws a sample from what a view holds. Devices out of service are not drawn.
func SampleOf(v *store.View, on forms.Day, ask SampleAsk, demo bool) (Sample, error) {
	s := Sample{Ask: ask, On: on, Demo: demo}
	if err := ask.Check(); err != nil {
		return s, err
	}
	var err error
	if ask.Site == "" {
		s.Sites, err = v.Sites()
	} else {
		var one store.Site
		one, err = v.Site(ask.Site)
		s.Sites = []store.Site{one}
	}
	if err != nil {
		return s, err
	}
	devices, rooms := map[string]SampleDevice{}, map[string]*SampleRoom{}
	var deviceIDs, roomIDs []string
	for _, site := range s.Sites {
		for d, err := range v.Devices(site.ID) {
			if err != nil {
				return s, err
			}
			if d.Retired {
				continue
			}
			one := SampleDevice{Site: site, Device: d, Day: forms.NoDay}
			for _, task := range forms.Tasks() { // of two tests of one day the failed one
				last, ok := d.Last[task]
				if ok && (one.Day == forms.NoDay || last.Day > one.Day || last.Day == one.Day && last.Result == forms.Fail) {
					one.Day, one.Last = last.Day, last.Result
				}
			}
			devices[d.ID] = one
			deviceIDs = append(deviceIDs, d.ID)
			if d.Place.Room == "" && d.Place.Floor == "" && d.Place.Building == "" {
				continue // a portable item, or a place nobody could be sent to
			}
			key := strings.Join([]string{site.ID, d.Place.Building, d.Place.Floor, d.Place.Room}, "\x1f")
			if rooms[key] == nil {
				place := d.Place
				place.Name = ""
				rooms[key] = &SampleRoom{Site: site, Place: place}
				roomIDs = append(roomIDs, key)
			}
			rooms[key].Devices++
		}
	}
	s.Lot, s.Bad = len(deviceIDs), forms.SampleBad(len(deviceIDs), ask.Share)
	s.RoomLot, s.RoomBad = len(roomIDs), forms.SampleBad(len(roomIDs), ask.Share)
	drawn := func(ids []string, bad int) map[string]bool {
		in := map[string]bool{}
		for _, id := range forms.DrawSample(ask.Head, ask.Word, ids, forms.SampleSize(len(ids), bad, ask.Confidence)) {
			in[id] = true
		}
		return in
	}
	chosen := drawn(deviceIDs, s.Bad)
	for _, id := range deviceIDs { // in walking order
		if chosen[id] {
			s.Devices = append(s.Devices, devices[id])
		}
	}
	chosen = drawn(roomIDs, s.RoomBad)
	for _, id := range roomIDs {
		if chosen[id] {
			s.Rooms = append(s.Rooms, *rooms[id])
		}
	}
	return s, nil
}

// samplePrint prints a sample.
type samplePrint struct {
	*print
	sample *Sample
	band   string
}

// PrintSample writes a sample as PDF: how it was drawn, then the devices to find and the rooms to count, in walking order, with
// empty columns for what is seen.
func PrintSample(w io.Writer, s Sample, size Size) error {
	base, err := newPrint(size)
	if err != nil {
		return err
	}
	p := &samplePrint{print: base, sample: &s}
	p.head = p.header
	p.turn()
	p.drawnFrom()
	p.list("paper.sample.devices", p.words.Say("paper.sample.devices_text", "n", len(s.Devices), "lot", s.Lot), []string{"there", "label", "works", "remark"}, len(s.Devices), p.device)
	p.band = ""
	p.list("paper.sample.rooms", p.words.Say("paper.sample.rooms_text", "n", len(s.Rooms), "lot", s.RoomLot), []string{"counted", "missing", "remark"}, len(s.Rooms), p.roomRow)
	p.feet(p.words.Say("caution.licensed"))
	if err := p.pdf.Output(w); err != nil {
		return fmt.Errorf("sample: %w", err)
	}
	return nil
}

func (p *samplePrint) header() {
	width := p.room() - p.demo(p.sample.Demo)
	p.text(left, p.y+4.5, width, "sansB", 15, p.words.Say("paper.sample.title"))
	p.text(left, p.y+9.5, width, "sans", 8.5, strings.Join(nonEmpty(p.siteNames(), p.words.Say("paper.device.made", "day", p.sample.On), p.words.Say("paper.sample.word", "word", clean(p.sample.Ask.Word))), " · "))
	p.y += 13
	p.rule(p.y-1, 0.3)
}

func (p *samplePrint) siteNames() string {
	var names []string
	for _, s := range p.sample.Sites {
		names = append(names, cmp.Or(s.Name, s.Code))
	}
	if len(names) > 3 {
		return p.words.Say("sheet.cover.scope_some", "n", len(names))
	}
	return strings.Join(names, ", ")
}

// drawnFrom says how the sample came about, so that anybody can draw it again.
func (p *samplePrint) drawnFrom() {
	s := p.sample
	lines := []string{
		p.words.Say("paper.sample.size", "n", len(s.Devices), "lot", s.Lot, "bad", s.Bad, "confidence", percent(s.Ask.Confidence), "share", percent(s.Ask.Share)),
		p.words.Say("paper.sample.how"),
	}
	room, top := p.room()-headBox-4, p.y
	p.headCode(s.Ask.Head, p.size.W-right-headBox, top)
	for _, line := range lines {
		for _, part := range p.pen.Lines("sans", 8.5, room, line) {
			p.text(left, p.y+3.5, room, "sans", 8.5, part)
			p.y += 4.2
		}
	}
	p.y += 1
	p.headLines(s.Ask.Head, room)
	p.y = max(p.y, top+headBox) + 3
}

func percent(share float64) string { return strconv.FormatFloat(share*100, 'g', 4, 64) }

// sampleColumn is the width of an empty column in mm; the last one takes twice as much.
const sampleColumn = 19.0

// list prints rows under a heading, with empty boxes.
func (p *samplePrint) list(title, text string, columns []string, n int, row func(i int, width float64) float64) {
	if n == 0 {
		return
	}
	p.need(30)
	p.text(left, p.y+4.5, p.room(), "sansB", 11, p.words.Say(title))
	p.text(left, p.y+9, p.room(), "sans", 8, text)
	p.y += 11
	boxes := float64(len(columns)+1) * sampleColumn
	heads := func() {
		x := p.size.W - right - boxes
		for _, c := range columns {
			p.text(x, p.y+3, sampleColumn, "sans", 7, p.words.Say("paper.sample.col."+c))
			x += sampleColumn
		}
		p.y += 4.5
		p.rule(p.y, 0.3)
	}
	heads()
	for i := range n {
		if p.need(14) {
			heads()
			p.band = ""
		}
		h := row(i, p.room()-boxes-2)
		x := p.size.W - right - boxes
		for j := range columns {
			w := sampleColumn
			if j == len(columns)-1 {
				w *= 2
			}
			p.box(x, p.y+0.8, w-1, h-1.6, 0.2)
			x += w
		}
		p.y += h
	}
	p.y += 5
}

// room prints the name of a room above its devices.
func (p *samplePrint) bandOf(site store.Site, place store.Place) {
	name := strings.Join(nonEmpty(site.Code, place.Context()), " · ")
	if name == p.band {
		return
	}
	p.band = name
	p.text(left, p.y+4.2, p.room(), "sansB", 8, clean(name))
	p.y += 5
}

func (p *samplePrint) device(i int, width float64) float64 {
	d := p.sample.Devices[i]
	p.bandOf(d.Site, d.Device.Place)
	p.text(left, p.y+3.6, width, "sans", 8.5, clean(cmp.Or(d.Device.Place.Name, d.Device.Make, p.words.Say("kind."+d.Device.Kind))))
	last := p.words.Say("paper.sample.never")
	if d.Day != forms.NoDay {
		last = p.words.Say("paper.sample.last", "result", p.words.Say("verdict."+d.Last), "day", d.Day)
	}
	p.text(left, p.y+7.2, width, "sans", 7, strings.Join(nonEmpty(p.words.Say("kind."+d.Device.Kind), last), " · "))
	tag := export.TagText(d.Device.Tag)
	p.text(left+width-p.pen.Width("monoB", 8.5, tag), p.y+3.6, width, "monoB", 8.5, tag)
	return 9
}

func (p *samplePrint) roomRow(i int, width float64) float64 {
	r := p.sample.Rooms[i]
	p.text(left, p.y+3.6, width, "sans", 8.5, clean(strings.Join(slices.Compact(nonEmpty(r.Site.Code, r.Place.Context())), " · ")))
	p.text(left, p.y+7.2, width, "sans", 7, p.words.Say("paper.sample.in_register", "n", r.Devices))
	return 9
}
