package server

import (
	"fmt"
	"math"
	"strings"

	"tripwell/forms"
)

// scaleWidth is the width of a scale's drawing in its own units.
const scaleWidth = 360.0

// scaleSpan says how a reading's scale runs.
type scaleSpan struct {
	log      bool
	from, to float64
}

// scaleDrawing is one reading on its scale, with places already computed (0 to 360 across).
type scaleDrawing struct {
	Aria    string
	BandX   string
	BandW   string // "" draws no band
	Limits  []string
	Ticks   []scaleTick
	Before  string // last year's mark; "" none
	Mark    string
	Pointer string // path of today's mark
	Open    bool   // a bound: the mark is an arrow that points on
	Shape   string
}

type scaleTick struct{ X, Anchor, Text string }

// place gives where a value lies across the drawing, kept inside it.
func (s scaleSpan) place(v float64) float64 {
	if s.log {
		v = max(v, s.from)
		return clamp(scaleWidth * math.Log(v/s.from) / math.Log(s.to/s.from))
	}
	return clamp(scaleWidth * (v - s.from) / (s.to - s.from))
}

func clamp(x float64) float64 { return min(max(x, 0), scaleWidth) }

// spanOf chooses the form's scale that holds the limit; where it names none, or the value lies far outside all of them on
// an even scale, a scale is made for the two.
func spanOf(spans []scaleSpan, value float64, limit *forms.Bounds) scaleSpan {
	for _, s := range spans {
		holds := func(v *float64) bool { return v == nil || *v >= s.from && *v <= s.to }
		if s.to > s.from && (!s.log || s.from > 0) && holds(limit.Min) && holds(limit.Max) && (s.log || value <= s.to && value >= s.from) {
			return s
		}
	}
	return spanFor(value, limit)
}

// spanFor is the scale of a reading whose form names none: round numbers with room on both sides of limit and value.
func spanFor(value float64, limit *forms.Bounds) scaleSpan {
	top := value
	if limit.Max != nil {
		top = max(top, *limit.Max)
	}
	if limit.Min != nil {
		top = max(top, *limit.Min)
	}
	if top <= 0 {
		return scaleSpan{from: 0, to: 1}
	}
	return scaleSpan{from: 0, to: roundUp(top * 1.3)}
}

// roundUp gives the next of 1, 2, 4, 5, 8 or 10 times a power of ten.
func roundUp(v float64) float64 {
	p := math.Pow(10, math.Floor(math.Log10(v)))
	for _, m := range []float64{1, 2, 4, 5, 8, 10} {
		if v <= m*p*(1+1e-9) {
			return m * p
		}
	}
	return 10 * p
}

func (s scaleSpan) ticks() []float64 {
	if s.log {
		var out []float64
		for t := math.Pow(10, math.Ceil(math.Log10(s.from)-1e-9)); t <= s.to*(1+1e-9); t *= 10 {
			out = append(out, t)
		}
		return out
	}
	step := (s.to - s.from) / 4
	return []float64{s.from, s.from + step, s.from + 2*step, s.from + 3*step, s.to}
}

// scale draws a measured value against a limit; nil where there is nothing to draw. before is an earlier value, or nil.
func (k ink) scale(code string, r forms.Reading, f forms.Finding, spans []scaleSpan, before *float64) *scaleDrawing {
	if f.Limit == nil || f.Limit.Min == nil && f.Limit.Max == nil {
		return nil
	}
	value, open := 0.0, 0
	switch v := r.Value.(type) {
	case float64:
		value = v
	default:
		switch {
		case r.Above != nil:
			value, open = *r.Above, 1
		case r.Below != nil:
			value, open = *r.Below, -1
		default:
			return nil
		}
	}
	s := spanOf(spans, value, f.Limit)
	d := s.drawing(f.Limit)
	d.Open, d.Shape = open != 0, shapeOf(f.Verdict)
	at := s.place(value)
	d.Mark = figure(at)
	switch open {
	case 0:
		d.Pointer = fmt.Sprintf("M%s 12L%s 3H%sZ", d.Mark, figure(at-7), figure(at+7))
	case 1:
		d.Pointer = fmt.Sprintf("M%s 22L%s 14V30Z", figure(min(at+12, scaleWidth)), figure(min(at, scaleWidth-12)))
	default:
		d.Pointer = fmt.Sprintf("M%s 22L%s 14V30Z", figure(max(at-12, 0)), figure(max(at, 12)))
	}
	if before != nil {
		d.Before = figure(s.place(*before))
	}
	unit := unitOf(code)
	d.Aria = k.say("office.entry.scale_aria", "value", k.value(code, r), "from", number(s.from), "to", k.amount(number(s.to), unit), "limit", k.limit(code, f.Limit, f.Level))
	return d
}

// limitScale draws a limit without any value; nil where it has no figure.
func (k ink) limitScale(code string, b *forms.Bounds, spans []scaleSpan) *scaleDrawing {
	if b.Min == nil && b.Max == nil {
		return nil
	}
	value := 0.0
	if b.Max != nil {
		value = *b.Max
	} else {
		value = *b.Min
	}
	s := spanOf(spans, value, b)
	d := s.drawing(b)
	unit := unitOf(code)
	if code == "" {
		unit = "%"
	}
	d.Aria = k.say("config.scale_aria", "from", number(s.from), "to", k.amount(number(s.to), unit), "limit", k.limit(code, b, ""))
	return d
}

// drawing draws the axis, the limits and the band between them.
func (s scaleSpan) drawing(b *forms.Bounds) *scaleDrawing {
	d := &scaleDrawing{}
	low, high := 0.0, scaleWidth
	if b.Min != nil {
		low = s.place(*b.Min)
		d.Limits = append(d.Limits, figure(low))
	}
	if b.Max != nil {
		high = s.place(*b.Max)
		d.Limits = append(d.Limits, figure(high))
	}
	if high > low {
		d.BandX, d.BandW = figure(low), figure(high-low)
	}
	ticks := s.ticks()
	for i, t := range ticks {
		anchor := "middle"
		switch i {
		case 0:
			anchor = "start"
		case len(ticks) - 1:
			anchor = "end"
		}
		if x := s.place(t); x > 0 && anchor == "start" {
			anchor = "middle"
		}
		d.Ticks = append(d.Ticks, scaleTick{figure(s.place(t)), anchor, number(t)})
	}
	return d
}

// figure writes a place in a drawing.
func figure(v float64) string {
	return strings.TrimSuffix(strings.TrimRight(fmt.Sprintf("%.2f", v), "0"), ".")
}
