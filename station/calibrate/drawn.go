package calibrate

import (
	"math"

	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
)

// drawn lists a smooth curve (ln value and its standard uncertainty over ln Hz) as points so
// dense that straight lines between them, in the logarithms of both, stray by less than a
// sixth of the uncertainty.
func drawn(low, high float64, unit quantity.Unit, curve func(x float64) (y, u float64)) []calibration.Point {
	type point struct{ x, y, u float64 }
	at := func(x float64) point { y, u := curve(x); return point{x, y, u} }
	points := []point{at(math.Log(low))}
	var between func(a, b point, depth int)
	between = func(a, b point, depth int) {
		middle := at((a.x + b.x) / 2)
		if depth > 0 && math.Abs(middle.y-(a.y+b.y)/2) > middle.u/6 {
			between(a, middle, depth-1)
			between(middle, b, depth-1)
			return
		}
		points = append(points, b)
	}
	n := int(math.Ceil(3 * math.Log2(high/low)))
	for i := 1; i <= n; i++ {
		between(points[len(points)-1], at(math.Log(low)+math.Log(high/low)*float64(i)/float64(n)), 4)
	}
	var out []calibration.Point
	for _, p := range points {
		hz := math.Exp(p.x)
		size := math.Pow10(7 - int(math.Floor(math.Log10(hz))))
		out = append(out, calibration.Point{Frequency: quantity.Frequency(math.Round(hz*size) / size), Value: calibration.Amount{Value: math.Exp(p.y), Unit: unit}, Uncertainty: relative(expanded(p.u))})
	}
	return out
}
