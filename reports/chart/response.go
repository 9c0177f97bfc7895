package chart

import (
	"fmt"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/ink"
)

// ResponsePoint is one tone of a response with what its mask allows.
type ResponsePoint struct {
	Frequency    quantity.Frequency
	Level        quantity.Decibel  // relative to the reference
	U            quantity.Decibel  // expanded, at 95 %
	Lower, Upper *quantity.Decibel // nil where the mask does not bound
	Verdict      limits.Verdict
}

// Curve is what a response shows.
type Curve struct {
	Points    []ResponsePoint    // rising in frequency
	Mask      *limits.Mask       // corners of the mask; nil: the points' own bounds are joined
	Reference quantity.Frequency // where the level is 0 dB; zero where not said
}

// Response is the chart of a response: level in dB against logarithmic frequency, with
// each point's uncertainty as a bar and what the mask forbids shaded. It gives an error
// where no point can be drawn.
func Response(c Curve) (*Chart, error) {
	xs, ys := newSpan(), newSpan()
	var points []ResponsePoint
	for _, p := range c.Points {
		if usable(float64(p.Frequency)) && finite(float64(p.Level)) {
			points = append(points, p)
			xs.include(float64(p.Frequency))
			u := math.Max(0, float64(p.U))
			if !finite(u) {
				u = 0
			}
			ys.include(float64(p.Level) - u)
			ys.include(float64(p.Level) + u)
		}
	}
	if len(points) == 0 {
		return nil, fmt.Errorf("response: none of %d points has a frequency above zero and a level: give one or more", len(c.Points))
	}
	lower, upper := bounds(c)
	for _, side := range [][]limits.MaskPoint{lower, upper} {
		for _, q := range side {
			xs.include(q.FrequencyHz)
			ys.include(q.DB)
		}
	}
	p := newPlot()
	p.X.Min, p.X.Max = xs.low, xs.high
	if p.X.Max < 2*p.X.Min {
		p.X.Min, p.X.Max = p.X.Min/2, p.X.Max*2
	}
	pad := math.Max(0.5, 0.08*(ys.high-ys.low))
	p.Y.Min, p.Y.Max = ys.low-pad, ys.high+pad
	p.X.Scale = plot.LogScale{}
	p.X.Tick.Marker = decades{hertz}
	p.Y.Tick.Marker = even{}
	p.Add(forbidden(lower, true), forbidden(upper, false), grid(p), maskLine(lower), maskLine(upper), curve(points))
	title := "IF response in dB"
	if c.Reference > 0 {
		title += fmt.Sprintf(", 0 dB at %v", c.Reference)
	}
	return &Chart{Title: title, plot: p, key: responseKey(points, len(lower)+len(upper) > 0)}, nil
}

// bounds are the corners of both sides of the mask.
func bounds(c Curve) (lower, upper []limits.MaskPoint) {
	if c.Mask != nil {
		return c.Mask.Lower, c.Mask.Upper
	}
	for _, p := range c.Points {
		if !usable(float64(p.Frequency)) {
			continue
		}
		if p.Lower != nil {
			lower = append(lower, limits.MaskPoint{FrequencyHz: float64(p.Frequency), DB: float64(*p.Lower)})
		}
		if p.Upper != nil {
			upper = append(upper, limits.MaskPoint{FrequencyHz: float64(p.Frequency), DB: float64(*p.Upper)})
		}
	}
	return lower, upper
}

// forbidden shades what lies beyond one side of the mask.
func forbidden(side []limits.MaskPoint, below bool) drawing {
	return func(f frame) {
		if len(side) < 2 {
			return
		}
		edge := f.top()
		if below {
			edge = f.bottom()
		}
		outline := []vg.Point{point(f.x(side[0].FrequencyHz), edge)}
		for _, q := range side {
			outline = append(outline, point(f.x(q.FrequencyHz), f.y(q.DB)))
		}
		f.fill(append(outline, point(f.x(side[len(side)-1].FrequencyHz), edge)), Shade)
	}
}

func maskLine(side []limits.MaskPoint) drawing {
	return func(f frame) {
		var line []vg.Point
		for _, q := range side {
			line = append(line, point(f.x(q.FrequencyHz), f.y(q.DB)))
		}
		if len(line) > 1 {
			f.stroke(line, 1, Ink)
		}
	}
}

func curve(points []ResponsePoint) drawing {
	return func(f frame) {
		line := make([]vg.Point, len(points))
		for i, p := range points {
			line[i] = point(f.x(float64(p.Frequency)), f.y(float64(p.Level)))
		}
		if len(line) > 1 {
			f.stroke(line, 0.6, Accent)
		}
		for _, p := range points {
			if p.U > 0 && finite(float64(p.U)) {
				f.bar(float64(p.Frequency), float64(p.Level-p.U), float64(p.Level+p.U), pointColor(p.Verdict))
			}
		}
		for _, p := range points {
			f.sign(float64(p.Frequency), float64(p.Level), p.Verdict)
		}
	}
}

func responseKey(points []ResponsePoint, masked bool) []keyEntry {
	var verdicts []limits.Verdict
	for _, p := range points {
		verdicts = append(verdicts, p.Verdict)
	}
	key := verdictKey(verdicts)
	if masked {
		key = append(key, keyEntry{func(s ink.Surface, x, y float64) {
			s.Fill(ink.Rectangle(ink.Box{X: x - 5, Y: y - 3, W: 9, H: 6}), Shade)
			s.Stroke(ink.Segment(x-5, y-3, x+4, y-3), ink.Pen{Width: 1, Color: Ink})
		}, "mask"})
	}
	return key
}
