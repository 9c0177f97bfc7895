package gauge

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
)

const (
	rangeReach = 9  // standard deviations to either side; beyond lies less than 1e-18
	rangeNodes = 80 // of the Gauss–Legendre rule in each direction
)

// rangeMoments are d2 and d3, mean and standard deviation of the range of n values of a standard normal
// distribution (L.H.C. Tippett, Biometrika 17 (1925) 364):
// d2 = ∫ 1 − Φⁿ − (1−Φ)ⁿ, and the mean square 2∫∫ over x < y of
// 1 − Φ(y)ⁿ − (1−Φ(x))ⁿ + (Φ(y) − Φ(x))ⁿ.
func rangeMoments(n int) (d2, d3 float64) {
	power := func(x float64) float64 { return math.Pow(x, float64(n)) }
	phi := distuv.UnitNormal.CDF
	d2 = quad.Fixed(func(x float64) float64 { return 1 - power(phi(x)) - power(phi(-x)) }, -rangeReach, rangeReach, rangeNodes, quad.Legendre{}, 0)
	square := 2 * quad.Fixed(func(x float64) float64 {
		below, above := phi(x), phi(-x)
		return quad.Fixed(func(y float64) float64 {
			p := phi(y)
			return 1 - power(p) - power(above) + power(p-below)
		}, x, rangeReach, rangeNodes, quad.Legendre{}, 0)
	}, -rangeReach, rangeReach, rangeNodes, quad.Legendre{}, 0)
	return d2, math.Sqrt(square - d2*d2)
}

// averageRangeFactor is d2* = √(d2² + d3²/m): the mean of m ranges of n values over it, squared, has σ² as
// its mean (P.B. Patnaik, Biometrika 37 (1950) 78; A.J. Duncan, Quality Control and Industrial
// Statistics, table D3).
func averageRangeFactor(d2, d3, m float64) float64 { return math.Sqrt(d2*d2 + d3*d3/m) }

// rangeDof are the degrees of freedom ν of the chi distribution that is as wide, relative to its mean, as
// the mean of m ranges (Patnaik 1950): ν/E²(χν) = 1 + d3²/(m·d2²).
func rangeDof(d2, d3, m float64) float64 {
	want := math.Log1p(d3 * d3 / (m * d2 * d2))
	excess := func(dof float64) float64 {
		top, _ := math.Lgamma((dof + 1) / 2)
		bottom, _ := math.Lgamma(dof / 2)
		return math.Log(dof/2) - 2*(top-bottom)
	}
	low, high := 1e-3, 1e7
	for high/low > 1+1e-10 {
		if middle := math.Sqrt(low * high); excess(middle) > want {
			low = middle
		} else {
			high = middle
		}
	}
	return low
}
