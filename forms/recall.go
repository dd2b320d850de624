package forms

import (
	"cmp"
	"math"
	"slices"
)

// FoundError is by how much an instrument was found to read too high (above 0) or too low: it showed
// true · (1 + Percent/100) + Plus, in the reading's own unit.
type FoundError struct {
	Percent float64 `json:"percent,omitzero"`
	Plus    float64 `json:"plus,omitzero"`
}

// True gives what a figure the instrument showed really was.
func (f FoundError) True(shown float64) float64 {
	return round9((shown - f.Plus) / (1 + f.Percent/100))
}

// Recall is what an entry comes to once the error of its instrument is taken off.
type Recall struct {
	Result string // of the entry with the true figures
	Code   string // the reading that lies closest to its limit, or furthest beyond it; "" where none is concerned
	Shown  float64
	True   float64
	Limit  float64
	Margin float64 // how far inside the limit the true figure lies, as a share of the limit; below 0 = outside
}

// Recalled judges an entry again with the true figures of a faulty instrument. Of an entry that has none of the readings
// whose error was found Code is empty.
func Recalled(form *Form, set *LimitSet, e Entry, found map[string]FoundError) (Recall, error) {
	correct := func(readings map[string]Reading) map[string]Reading {
		out := make(map[string]Reading, len(readings))
		for code, r := range readings {
			f, known := found[code]
			if known {
				r = f.trueReading(r)
			}
			out[code] = r
		}
		return out
	}
	concerned := false
	for code := range found {
		if r, ok := e.Readings[code]; ok {
			concerned = concerned || r.Given()
		}
		for _, s := range e.Series {
			_, ok := s.Readings[code]
			concerned = concerned || ok
		}
	}
	if !concerned {
		return Recall{}, nil
	}
	really := e
	really.Readings = correct(e.Readings)
	really.Series = make([]SeriesReading, len(e.Series))
	for i, s := range e.Series {
		really.Series[i] = SeriesReading{At: s.At, Readings: correct(s.Readings)}
	}
	v, err := Judge(form, set, really)
	if err != nil {
		return Recall{}, err
	}
	out := Recall{Result: v.Result, Margin: math.Inf(1)}
	for _, f := range v.Findings {
		_, own := found[f.Reading]
		_, current := found["test_current_ma"]
		if f.Level != Must || f.Limit == nil || !own && !(current && f.Reading == "trip_time_ms") {
			continue // the limit of a trip time moves with the test current
		}
		value, ok := findingFigure(&f, &really)
		if !ok {
			continue
		}
		for _, b := range []struct {
			limit *float64
			sign  float64
		}{{f.Limit.Max, 1}, {f.Limit.Min, -1}} {
			if b.limit == nil || *b.limit == 0 {
				continue
			}
			margin := b.sign * (*b.limit - value) / math.Abs(*b.limit)
			if margin < out.Margin {
				out.Code, out.True, out.Limit, out.Margin = f.Reading, value, *b.limit, margin
				out.Shown = found[f.Reading].shown(value)
			}
		}
	}
	if out.Code == "" {
		out.Margin = 0
	}
	return out, nil
}

// shown is what the instrument showed for a true figure.
func (f FoundError) shown(value float64) float64 { return round9(value*(1+f.Percent/100) + f.Plus) }

// trueReading takes the error off a measured value or a bound. What was typed, in whatever unit, is no longer what is judged.
func (f FoundError) trueReading(r Reading) Reading {
	out := Reading{NoTrip: r.NoTrip, Missing: r.Missing, Value: r.Value}
	if v, ok := r.Float(); ok {
		out.Value = f.True(v)
	}
	for to, from := range map[**float64]*float64{&out.Above: r.Above, &out.Below: r.Below} {
		if from != nil {
			v := f.True(*from)
			*to = &v
		}
	}
	return out
}

// findingFigure is the measured value a finding is about.
func findingFigure(f *Finding, e *Entry) (float64, bool) {
	if len(f.At) == 0 {
		return e.Readings[f.Reading].Float()
	}
	for _, s := range e.Series {
		if len(s.At) == len(f.At) && sameAt(s.At, f.At) {
			if r, ok := s.Readings[f.Reading]; ok {
				return r.Float()
			}
		}
	}
	return 0, false
}

func sameAt(a, b map[string]any) bool {
	for code, v := range a {
		if b[code] != v {
			return false
		}
	}
	return true
}

// RankRecalls orders by what is most in doubt: furthest beyond its limit first, what is not concerned last.
func RankRecalls[T any](list []T, of func(T) Recall) {
	slices.SortStableFunc(list, func(a, b T) int {
		x, y := of(a), of(b)
		if (x.Code == "") != (y.Code == "") {
			if x.Code == "" {
				return 1
			}
			return -1
		}
		return cmp.Compare(x.Margin, y.Margin)
	})
}
