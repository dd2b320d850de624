package server

import (
	"unicode/utf8"

	"tripwell/forms"
	"tripwell/store"
)

// drawing is a circuit drawn as an electrician sketches it, from the panel down: the panel's box, the breaker, each device in
// order on the line, and what LOAD terminals feed on a line of its own. Everything is worked out here; the page only prints it.
type drawing struct {
	Width, Height int
	Aria          string
	Lines         []drawnLine
	Boxes         []drawnBox
	Dots          []drawnDot
	Texts         []drawnText
}

type drawnLine struct {
	X1, Y1, X2, Y2 int
	Load           bool // from LOAD terminals
}

type drawnBox struct {
	X, Y, W, H int
	Class      string // panel | protector | failed
}

type drawnDot struct {
	X, Y, R int
	Class   string // breaker | outlet
}

type drawnText struct {
	X, Y        int
	Text, Class string // name | under | critical | fail | terminal
	Anchor      string
	Href        string
}

// Sizes of a drawing, in its own units, which are about pixels.
const (
	drawnWidth = 480
	drawnRow   = 58
	drawnStep  = 40 // to the right, for each LOAD line
	drawnLeft  = 30
	drawnText0 = 54 // from a symbol to what is written beside it
)

// drawCircuit draws a circuit.
func (s *Server) drawCircuit(p *store.Protection, c store.Circuit) drawing {
	k := s.ink()
	d := &drawing{Width: drawnWidth, Aria: s.circuitAria(p, c)}
	breakers, runs := p.Runs(c.ID)
	d.Boxes = append(d.Boxes, drawnBox{2, 2, 150, 38, "panel"})
	d.text(77, 27, circuitName(c), "name", "middle", "")
	line := joined(s.breaker(c), s.conductor(c))
	y := 66
	d.Lines = append(d.Lines, drawnLine{X1: drawnLeft, Y1: 40, X2: drawnLeft, Y2: y})
	if len(breakers) == 0 {
		d.Dots = append(d.Dots, drawnDot{drawnLeft, y, 10, "breaker"})
		d.text(drawnLeft+drawnText0, y+5, joined(k.say("office.circuit.breaker"), line), "under", "start", "")
	}
	for i, id := range breakers {
		if one, ok := p.Device(id); ok {
			y += i * drawnRow
			d.protector(s, one, drawnLeft, y)
			if i == 0 {
				d.text(160, 27, line, "under", "start", "")
			}
		}
	}
	from := y + 10 // under the breaker's circle, or under the last box
	if len(breakers) > 0 {
		from = y + 16
	}
	d.runs(s, p, runs, drawnLeft, from, &y, false)
	d.Height = y + 40
	return *d
}

// runs draws devices one under the other on a line at x that begins at top.
func (d *drawing) runs(s *Server, p *store.Protection, runs []forms.Run, x, top int, y *int, load bool) {
	for _, run := range runs {
		one, ok := p.Device(run.ID)
		if !ok || one.Retired {
			continue
		}
		*y += drawnRow
		d.Lines = append(d.Lines, drawnLine{x, top, x, *y, load})
		top = *y
		if forms.Protects(one.Kind) {
			d.protector(s, one, x, *y)
		} else {
			d.Dots = append(d.Dots, drawnDot{x, *y, 9, "outlet"})
			d.device(s, one, x+drawnText0, *y)
		}
		if len(run.Load) == 0 {
			continue
		}
		// A line of its own from the LOAD terminals; the circuit goes on beside it.
		in := min(x+drawnStep, drawnWidth/2)
		d.Lines = append(d.Lines, drawnLine{x + 22, *y + 8, in, *y + 8, true}, drawnLine{in, *y + 8, in, *y + 20, true})
		d.runs(s, p, run.Load, in, *y+20, y, true)
	}
}

// protector draws a protecting device as a box with LINE above and LOAD below.
func (d *drawing) protector(s *Server, one store.OnMap, x, y int) {
	class := "protector"
	if one.Stands == forms.StandsFailed {
		class = "failed"
	}
	d.Boxes = append(d.Boxes, drawnBox{x - 22, y - 16, 44, 32, class})
	k := s.ink()
	d.text(x, y-3, k.say("office.circuit.line"), "terminal", "middle", "")
	d.text(x, y+12, k.say("office.circuit.load"), "terminal", "middle", "")
	d.device(s, one, x+drawnText0, y)
}

// device writes what stands beside a symbol: the spot, what it is, and in red what must not lose power or what is wrong.
func (d *drawing) device(s *Server, one store.OnMap, x, y int) {
	k := s.ink()
	room := (drawnWidth - x) / 8
	under := joined(k.named("kind", one.Kind), one.Place.Room)
	d.text(x, y-3, shortened(s.spot(one.DeviceRow), room), "name", "start", "/devices/"+one.ID)
	d.text(x, y+13, shortened(under, room+10), "under", "start", "")
	red := one.Place.CriticalLoad
	if word := s.standsBadly(one); word != "" {
		red = joined(word, red)
	}
	if red != "" {
		d.text(x, y+27, shortened(red, room+10), "critical", "start", "")
	}
}

func (d *drawing) text(x, y int, text, class, anchor, href string) {
	if text != "" {
		d.Texts = append(d.Texts, drawnText{x, y, text, class, anchor, href})
	}
}

// shortened cuts a text to a number of characters; the whole of it stands in the list beside the drawing.
func shortened(text string, n int) string {
	if utf8.RuneCountInString(text) <= n {
		return text
	}
	return string([]rune(text)[:max(1, n-1)]) + "…"
}

// standsBadly names what is wrong with a protector, "" where nothing is.
func (s *Server) standsBadly(d store.OnMap) string {
	if !forms.Protects(d.Kind) || d.Stands == forms.StandsWell || d.Stands == "" {
		return ""
	}
	return s.words.Say("office.protection.stands." + d.Stands)
}
