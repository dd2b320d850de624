package server

import (
	"fmt"
	"math"
	"strings"

	"tripwell/forms"
)

// Size of a curve's drawing and where its axes stand, in its own units.
const (
	curveWidth, curveHeight = 360.0, 220.0
	curveLeft, curveRight   = 46.0, 350.0
	curveTop, curveBottom   = 12.0, 184.0
)

// curveDrawing is a limit that depends on another figure, on log axes, with an entry's point where there is one.
type curveDrawing struct {
	Aria, XName, YName string
	Path, Inside       string // the limit, and the area that is inside it
	XTicks, YTicks     []curveTick
	Point              *curvePoint
}

type curveTick struct{ At, Text string }

type curvePoint struct{ X, Y, Shape, Path string }

// curveAxes are what a drawing spans: figures of x and y, both above 0.
type curveAxes struct{ x0, x1, y0, y1 float64 }

func (a curveAxes) x(v float64) float64 { return logPlace(v, a.x0, a.x1, curveLeft, curveRight) }
func (a curveAxes) y(v float64) float64 { return logPlace(v, a.y0, a.y1, curveBottom, curveTop) }

func logPlace(v, from, to, at, end float64) float64 {
	share := math.Log(max(v, from)/from) / math.Log(to/from)
	return at + (end-at)*min(max(share, 0), 1)
}

// classACurve draws the longest trip time over the test current, UL 943 Class A.
func (k ink) classACurve(point *[2]float64, shape string) *curveDrawing {
	a := curveAxes{4, 400, 10, 10_000}
	if point != nil {
		a.y1 = math.Pow(10, math.Ceil(math.Log10(max(point[1], a.y1))))
	}
	d := &curveDrawing{XName: k.say("config.curve_x"), YName: k.say("config.curve_y"), Aria: k.say("config.curve_aria")}
	var path []string
	for i := range 41 {
		current := 6 * math.Pow(264.0/6, float64(i)/40)
		if i == 40 {
			current = 264
		}
		if ms, ok := forms.ClassATripMS(current); ok {
			path = append(path, figure(a.x(current))+" "+figure(a.y(ms)))
		}
	}
	d.Path = "M" + strings.Join(path, "L")
	d.Inside = fmt.Sprintf("%sL%s %sL%s %sZ", d.Path, figure(a.x(264)), figure(curveBottom), figure(a.x(6)), figure(curveBottom))
	d.axes(a, []float64{4, 6, 10, 20, 50, 100, 264})
	if point != nil {
		d.mark(a, *point, shape)
		d.Aria = k.say("config.curve_aria_point", "time", k.amount(number(point[1]), "ms"), "current", k.amount(number(point[0]), "mA"))
	}
	return d
}

// overRated draws the most a figure may be over the rated residual current: V over mA gives ohm.
func (k ink) overRated(volts float64) *curveDrawing {
	a := curveAxes{8, 700, volts * 1000 / 700, volts * 1000 / 8}
	a.y0, a.y1 = math.Pow(10, math.Floor(math.Log10(a.y0))), math.Pow(10, math.Ceil(math.Log10(a.y1)))
	from, to := a.x(10), a.x(500)
	d := &curveDrawing{XName: k.say("config.rated_x"), YName: k.say("config.rated_y"), Aria: k.say("config.rated_aria", "v", number(volts))}
	d.Path = fmt.Sprintf("M%s %sL%s %s", figure(from), figure(a.y(volts*100)), figure(to), figure(a.y(volts*2)))
	d.Inside = fmt.Sprintf("%sL%s %sL%s %sZ", d.Path, figure(to), figure(curveBottom), figure(from), figure(curveBottom))
	d.axes(a, []float64{10, 30, 100, 300, 500})
	return d
}

func (d *curveDrawing) axes(a curveAxes, xs []float64) {
	for _, x := range xs {
		d.XTicks = append(d.XTicks, curveTick{figure(a.x(x)), number(x)})
	}
	for y := a.y0; y <= a.y1*1.001; y *= 10 {
		d.YTicks = append(d.YTicks, curveTick{figure(a.y(y)), number(y)})
	}
}

// mark puts an entry's point: its shape as everywhere, so that colour is never alone.
func (d *curveDrawing) mark(a curveAxes, at [2]float64, shape string) {
	x, y := a.x(at[0]), a.y(at[1])
	p := &curvePoint{X: figure(x), Y: figure(y), Shape: shape}
	switch shape {
	case "fail":
		p.Path = fmt.Sprintf("M%s %sL%s %sL%s %sL%s %sZ", figure(x), figure(y-7), figure(x+7), figure(y), figure(x), figure(y+7), figure(x-7), figure(y))
	case "watch":
		p.Path = fmt.Sprintf("M%s %sL%s %sH%sZ", figure(x), figure(y-7), figure(x+7), figure(y+6), figure(x-7))
	}
	d.Point = p
}
