// Package curve is a quantity over frequency, given by points with their uncertainty.
package curve

import (
	"math"
	"sort"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
)

// Point is a value at a frequency.
type Point[T ~float64] struct {
	Frequency   quantity.Frequency   `key:"frequency" need:"yes" range:">0" doc:"frequency"`
	Value       T                    `key:"value" need:"yes" range:">0" doc:"value there"`
	Uncertainty *tolerance.Tolerance `key:"uncertainty" doc:"expanded uncertainty (k = 2), where each point has its own"`
}

// Curve is points of rising frequency.
type Curve[T ~float64] []Point[T]

// At is the curve at a frequency: straight between the points in the logarithms of frequency
// and value, level outside. relative is the expanded uncertainty (k = 2) over the value, on
// a straight line between the points'; zero where they have none.
func (c Curve[T]) At(f quantity.Frequency) (value T, relative float64) {
	k := sort.Search(len(c), func(i int) bool { return c[i].Frequency >= f })
	switch k {
	case 0:
		return c[0].Value, c[0].relative()
	case len(c):
		return c[len(c)-1].Value, c[len(c)-1].relative()
	}
	a, b := c[k-1], c[k]
	share := math.Log(float64(f/a.Frequency)) / math.Log(float64(b.Frequency/a.Frequency))
	return a.Value * T(math.Pow(float64(b.Value/a.Value), share)), a.relative() + share*(b.relative()-a.relative())
}

func (p Point[T]) relative() float64 {
	if p.Uncertainty == nil {
		return 0
	}
	return 2 * p.Uncertainty.Standard(float64(p.Value))
}

// Falls gives the first frequency at which the points do not rise; ok is false where all do.
func (c Curve[T]) Falls() (f quantity.Frequency, ok bool) {
	for i := 1; i < len(c); i++ {
		if c[i].Frequency <= c[i-1].Frequency {
			return c[i].Frequency, true
		}
	}
	return 0, false
}

// Gain is a gain over frequency over that at a reference: a first-order high-pass, where there is
// one, times the points. The points' uncertainties are those of the whole.
type Gain struct {
	HighPass quantity.Frequency    `key:"high_pass" range:">0" doc:"corner of a first-order high-pass that the points do not hold"`
	Points   Curve[quantity.Ratio] `key:"points" need:"yes" doc:"the rest of the gain over frequency"`
}

// At is the gain at a frequency, with its relative expanded uncertainty (k = 2); one, exactly,
// where there are no points. A first-order high-pass has the gain 1/√(1 + (fc/f)²).
func (g Gain) At(f quantity.Frequency) (value quantity.Ratio, relative float64) {
	if len(g.Points) == 0 {
		return 1, 0
	}
	value, relative = g.Points.At(f)
	return value / quantity.Ratio(math.Hypot(1, float64(g.HighPass/f))), relative
}

// Times is the product of two gains, of which at most one has a high-pass, at the points of
// both. The uncertainties are taken as independent.
func (g Gain) Times(h Gain) Gain {
	switch {
	case len(g.Points) == 0:
		return h
	case len(h.Points) == 0:
		return g
	}
	var at []float64
	for _, p := range g.Points {
		at = append(at, float64(p.Frequency))
	}
	for _, p := range h.Points {
		at = append(at, float64(p.Frequency))
	}
	sort.Float64s(at)
	out := Gain{HighPass: max(g.HighPass, h.HighPass)}
	for i, hz := range at {
		if i > 0 && hz <= at[i-1]*(1+1e-9) {
			continue
		}
		f := quantity.Frequency(hz)
		vg, ug := g.Points.At(f)
		vh, uh := h.Points.At(f)
		t := tolerance.Percent(math.Hypot(ug, uh))
		out.Points = append(out.Points, Point[quantity.Ratio]{Frequency: f, Value: vg * vh, Uncertainty: &t})
	}
	return out
}
