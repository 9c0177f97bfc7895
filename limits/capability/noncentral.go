package capability

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
)

const (
	panels        = 20    // pieces of an integral
	nodes         = 20    // points of the Gauss–Legendre rule in each
	reach         = 9     // beyond so many σ a normal distribution has less than 1e-18
	negligible    = 1e-14 // probability left out at the ends of chi-square
	bisectionEnds = 200   // halvings, more than a float64 has digits
)

// noncentralT is the probability that a non-central t variable with so many degrees of freedom and
// noncentrality is at most t: the mean of Φ(t·w − δ) over w = χ/√ν. It is integrated here
// because gonum's series gives way to an approximation of two digits above δ ≈ 38, where 100 values
// of Cpk 1.3 already are.
func noncentralT(t, dof, delta float64) float64 {
	if t < 0 {
		return 1 - noncentralT(-t, dof, -delta)
	}
	square := distuv.ChiSquared{K: dof}
	low := math.Sqrt(square.Quantile(negligible) / dof)
	high := math.Sqrt(square.Quantile(1-negligible) / dof)
	sure := 0.0 // where Φ is 1
	if t > 0 {
		low = math.Max(low, (delta-reach)/t)
		if top := (delta + reach) / t; top < high {
			sure = square.Survival(math.Max(top, 0) * math.Max(top, 0) * dof)
			high = top
		}
	}
	if low >= high {
		return sure
	}
	density := func(w float64) float64 {
		return distuv.UnitNormal.CDF(t*w-delta) * square.Prob(w*w*dof) * 2 * w * dof
	}
	sum, step := sure, (high-low)/panels
	for i := range panels {
		from := low + float64(i)*step
		sum += quad.Fixed(density, from, from+step, nodes, quad.Legendre{}, 0)
	}
	return math.Min(1, sum)
}

// noncentrality is the δ at which an observed t has the given probability of not being exceeded.
func noncentrality(t, dof, probability float64) float64 {
	width := 10 * (1 + math.Abs(t)/math.Sqrt(2*dof)) // the probability falls as δ grows
	low, high := t-width, t+width
	for noncentralT(t, dof, low) < probability {
		low -= width
	}
	for noncentralT(t, dof, high) > probability {
		high += width
	}
	for i := 0; i < bisectionEnds && high-low > 1e-12*math.Max(1, math.Abs(low)); i++ {
		middle := (low + high) / 2
		if noncentralT(t, dof, middle) > probability {
			low = middle
		} else {
			high = middle
		}
	}
	return (low + high) / 2
}
