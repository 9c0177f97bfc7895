package capability

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
)

const (
	panels     = 10    // pieces of an integral
	nodes      = 10    // points of the Gauss–Legendre rule in each
	reach      = 9     // beyond so many σ a normal distribution has less than 1e-18
	negligible = 1e-14 // probability left out at the ends of chi-square
	accuracy   = 1e-10 // of a noncentrality, in standard deviations
	maxSteps   = 200
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
// On the scale of normal quantiles that probability falls nearly along a straight line with δ, so
// that false position (the Illinois rule, M. Dowell & P. Jarratt, BIT 11 (1971) 168) needs few steps.
func noncentrality(t, dof, probability float64) float64 {
	target := distuv.UnitNormal.Quantile(probability)
	miss := func(delta float64) float64 {
		return distuv.UnitNormal.Quantile(noncentralT(t, dof, delta)) - target
	}
	spread := math.Sqrt(1 + t*t/(2*dof)) // of t (M. Abramowitz & I.A. Stegun, eq. 26.7.10)
	low := t - target*spread
	high, step := low, spread/10
	for miss(low) < 0 {
		low, step = low-step, 2*step
	}
	for miss(high) > 0 {
		high, step = high+step, 2*step
	}
	atLow, atHigh := miss(low), miss(high)
	for range maxSteps {
		if high-low <= accuracy*spread || atLow == atHigh || math.IsInf(atLow-atHigh, 0) {
			break
		}
		middle := (low*atHigh - high*atLow) / (atHigh - atLow)
		at := miss(middle)
		switch {
		case math.Abs(at) < accuracy:
			return middle
		case at > 0:
			low, atLow, atHigh = middle, at, atHigh/2
		default:
			high, atHigh, atLow = middle, at, atLow/2
		}
	}
	return (low + high) / 2
}
