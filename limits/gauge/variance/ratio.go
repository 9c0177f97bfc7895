package variance

import "math"

// steps of halving: enough for every digit of a float64.
const steps = 100

// Ratio is the confidence interval of a ratio of two combinations, a over b, both variances or
// sums of variances: all ratios θ for which the modified large-sample interval of a − θ·b holds
// zero (R.K. Burdick & F.A. Graybill, "Confidence Intervals on Variance Components", Dekker
// 1992, after Ting et al. 1990). The lower end is cut at zero. The upper end is +Inf
// where b itself cannot be told from zero.
func (s *Set) Ratio(a, b []float64) (low, high float64) {
	minus := func(theta float64) []float64 {
		c := make([]float64, len(a))
		for i := range c {
			c[i] = a[i] - theta*b[i]
		}
		return c
	}
	lowEnd := func(theta float64) float64 { l, _ := s.Interval(minus(theta)); return l }
	highEnd := func(theta float64) float64 { _, h := s.Interval(minus(theta)); return h }
	return lastPositive(lowEnd), lastPositive(highEnd)
}

// lastPositive is the θ ≥ 0 at which a function that falls with θ passes through zero: 0 if it
// begins there, +Inf if it never does.
func lastPositive(f func(float64) float64) float64 {
	if f(0) <= 0 {
		return 0
	}
	high := 1.0
	for f(high) > 0 {
		if high *= 4; high > 1e30 {
			return math.Inf(1)
		}
	}
	low := 0.0
	for i := 0; i < steps; i++ {
		middle := (low + high) / 2
		if f(middle) > 0 {
			low = middle
		} else {
			high = middle
		}
	}
	return low
}
