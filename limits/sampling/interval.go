// Package sampling is what can be concluded of a lot from counts of its units.
package sampling

import "gonum.org/v1/gonum/stat/distuv"

// ClopperPearson is the exact two-sided confidence interval of a share of which k of n
// units were counted, at a level such as 0.95 (C.J. Clopper & E.S. Pearson, Biometrika 26
// (1934) 404): quantiles of the beta distribution. For n = 0 nothing is known: 0 to 1.
func ClopperPearson(k, n int, level float64) (low, high float64) {
	tail := (1 - level) / 2
	low, high = 0, 1
	if k > 0 {
		low = distuv.Beta{Alpha: float64(k), Beta: float64(n - k + 1)}.Quantile(tail)
	}
	if k < n {
		high = distuv.Beta{Alpha: float64(k + 1), Beta: float64(n - k)}.Quantile(1 - tail)
	}
	return low, high
}
