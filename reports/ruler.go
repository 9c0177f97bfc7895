package reports

import (
	"math"

	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// Ruler is a reading between its limits, all numbers in one unit.
type Ruler struct {
	Lower, Upper, Nominal *float64 // nil where open
	Value                 float64  // drawn only where Known
	U                     float64  // expanded uncertainty, 0 or more
	Known                 bool     // there is a value
	Simple                bool     // judged without the uncertainty: no guard bands
}

// rulerMargin is the part of the width beyond a limit.
const rulerMargin = 0.16

// place gives where a number lies on a ruler w wide, from its left end. With both
// limits they stand a margin from the ends. With one, it stands a margin from its end
// and the open side reaches to zero, or as far as the value and its uncertainty need
// with a quarter more. ok is false where there is no scale: no limit, or numbers that
// are not finite.
func (r Ruler) place(w float64) (at func(float64) float64, ok bool) {
	m := rulerMargin * w
	switch {
	case r.Lower != nil && r.Upper != nil:
		lower, span := *r.Lower, *r.Upper-*r.Lower
		return func(v float64) float64 { return m + (v-lower)/span*(w-2*m) }, span > 0 && !math.IsInf(span, 0)
	case r.Upper != nil:
		limit, reach := *r.Upper, r.reach(*r.Upper, *r.Upper-r.Value)
		return func(v float64) float64 { return w - m - (limit-v)/reach*(w-m) }, reach > 0 && !math.IsInf(reach, 0)
	case r.Lower != nil:
		limit, reach := *r.Lower, r.reach(*r.Lower, r.Value-*r.Lower)
		return func(v float64) float64 { return m + (v-limit)/reach*(w-m) }, reach > 0 && !math.IsInf(reach, 0)
	}
	return nil, false
}

// reach is how far the open side of a ruler goes from its only limit.
func (r Ruler) reach(limit, inside float64) float64 {
	reach := math.Abs(limit)
	if r.Known {
		reach = math.Max(reach, 1.25*inside+math.Max(0, r.U))
	}
	if reach == 0 {
		reach = 1
	}
	return reach
}

// drawRuler draws a ruler into a box. Without limits nothing is drawn.
func drawRuler(s ink.Surface, r Ruler, box ink.Box) {
	at, ok := r.place(box.W)
	if !ok {
		return
	}
	x := func(v float64) float64 { return box.X + math.Min(math.Max(at(v), 0), box.W) }
	mid, half := box.Y+box.H/2, box.H*0.28
	left, right := box.X, box.Right()
	if r.Lower != nil {
		left = x(*r.Lower)
	}
	if r.Upper != nil {
		right = x(*r.Upper)
	}
	s.Fill(ink.Rectangle(ink.Box{X: left, Y: mid - half, W: right - left, H: 2 * half}), chart.Ink.Over(0.1))
	if guard := r.U; r.Known && !r.Simple && guard > 0 && !math.IsInf(guard, 0) {
		var bands [][2]float64
		for _, limit := range []*float64{r.Lower, r.Upper} {
			if limit != nil {
				bands = append(bands, [2]float64{x(*limit - guard), x(*limit + guard)})
			}
		}
		if len(bands) == 2 && bands[1][0] <= bands[0][1] { // they meet: one band
			bands = [][2]float64{{bands[0][0], bands[1][1]}}
		}
		for _, b := range bands {
			hatch(s, ink.Box{X: b[0], Y: mid - half, W: b[1] - b[0], H: 2 * half})
		}
	}
	s.Stroke(ink.Segment(box.X, mid, box.Right(), mid), ink.Pen{Width: 0.5, Color: chart.Grey})
	for _, limit := range []*float64{r.Lower, r.Upper} {
		if limit != nil {
			s.Stroke(ink.Segment(x(*limit), box.Y, x(*limit), box.Bottom()), ink.Pen{Width: 1.1, Color: chart.Ink})
		}
	}
	if r.Nominal != nil && at(*r.Nominal) >= 0 && at(*r.Nominal) <= box.W {
		s.Stroke(ink.Segment(x(*r.Nominal), mid+half, x(*r.Nominal), box.Bottom()), ink.Pen{Width: 0.8, Color: chart.Grey})
	}
	if r.Known && !math.IsNaN(r.Value) {
		drawValue(s, r, box, at, x)
	}
}

// drawValue draws the tick with its bar, or an arrow at the end it lies beyond.
func drawValue(s ink.Surface, r Ruler, box ink.Box, at, x func(float64) float64) {
	mid, thick := box.Y+box.H/2, box.H*0.24
	if a, b := x(r.Value-r.U), x(r.Value+r.U); r.U > 0 && b > a {
		s.Fill(ink.Rectangle(ink.Box{X: a, Y: mid - thick/2, W: b - a, H: thick}), chart.Accent.Over(0.5))
	}
	p := at(r.Value)
	if p >= 0 && p <= box.W {
		s.Stroke(ink.Segment(box.X+p, box.Y+box.H*0.08, box.X+p, box.Bottom()-box.H*0.08), ink.Pen{Width: 1.6, Color: chart.Accent})
		return
	}
	tip, back := box.X, box.X+box.H*0.45
	if p > box.W {
		tip, back = box.Right(), box.Right()-box.H*0.45
	}
	var arrow ink.Path
	arrow.MoveTo(tip, mid)
	arrow.LineTo(back, mid-box.H*0.34)
	arrow.LineTo(back, mid+box.H*0.34)
	arrow.Close()
	s.Fill(arrow, chart.Accent)
}

// hatch fills a box with strokes that rise to the right, cut exactly at its edges.
func hatch(s ink.Surface, box ink.Box) {
	const step = 2.0
	var p ink.Path
	for start := math.Ceil((box.X-box.H)/step) * step; start < box.Right(); start += step {
		from, to := math.Max(start, box.X), math.Min(start+box.H, box.Right())
		if to-from > 1e-6 {
			p.MoveTo(from, box.Bottom()-(from-start))
			p.LineTo(to, box.Bottom()-(to-start))
		}
	}
	s.Stroke(p, ink.Pen{Width: 0.45, Color: chart.Grey})
}

// RulerSVG is a ruler for a page, sizes in points; title says the reading in words.
func RulerSVG(r Ruler, width, height float64, title string) string {
	v := ink.NewSVG(width, height, title)
	drawRuler(v, r, ink.Box{W: width, H: height})
	return v.String()
}
