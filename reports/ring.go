package reports

import (
	"math"

	"lotgate/limits"
	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// ringColor is the verdict's colour (Okabe and Ito, 2008).
func ringColor(v limits.Verdict) ink.Color {
	switch v {
	case limits.Pass:
		return chart.Pass
	case limits.Marginal:
		return chart.Marginal
	case limits.Fail:
		return chart.Fail
	case limits.Void:
		return chart.Void
	}
	return chart.Rule
}

// ringWeight is the ring's stroke as a fraction of its outer diameter.
const ringWeight = 0.13

// drawRing draws a verdict's ring with its outer edge touching a square box: pass
// closed; marginal its left half, the other half a hairline; fail closed with a bar
// from lower left to upper right; void in twelve dashes. No verdict is a hairline.
func drawRing(s ink.Surface, v limits.Verdict, box ink.Box) {
	size := min(box.W, box.H)
	x, y := box.X+box.W/2, box.Y+box.H/2
	pen := ink.Pen{Width: size * ringWeight, Color: ringColor(v)}
	r := (size - pen.Width) / 2
	thin := pen
	thin.Width = pen.Width / 4
	switch v {
	case limits.Pass:
		s.Stroke(ink.Circle(x, y, r), pen)
	case limits.Marginal:
		s.Stroke(ink.Arc(x, y, r, -math.Pi/2, math.Pi/2), thin)
		s.Stroke(ink.Arc(x, y, r, math.Pi/2, 3*math.Pi/2), pen)
	case limits.Fail:
		s.Stroke(ink.Circle(x, y, r), pen)
		d := r * math.Sqrt2 / 2
		s.Stroke(ink.Segment(x-d, y+d, x+d, y-d), pen)
	case limits.Void:
		const dashes = 12
		for i := range dashes {
			from := 2 * math.Pi * (float64(i) - 0.3) / dashes
			s.Stroke(ink.Arc(x, y, r, from, from+2*math.Pi*0.6/dashes), pen)
		}
	default:
		s.Stroke(ink.Circle(x, y, r), thin)
	}
}

// RingSVG is a verdict's ring for a page, size points wide and high.
func RingSVG(v limits.Verdict, size float64) string {
	svg := ink.NewSVG(size, size, word(v))
	drawRing(svg, v, ink.Box{W: size, H: size})
	return svg.String()
}
