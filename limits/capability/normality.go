package capability

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

const (
	// LeastForNormality is the number of values from which the test of normality is made
	// (R.B. D'Agostino & M.A. Stephens, Goodness-of-Fit Techniques, Dekker 1986, sect. 4.8.5).
	LeastForNormality = 8
	// Significance is the level below which values are not taken as normal.
	Significance = 0.05
)

// Normality is the Anderson–Darling test with mean and standard deviation estimated from the values.
type Normality struct {
	A2       float64 `json:"a2"`       // A²
	Adjusted float64 `json:"adjusted"` // A*² = A²(1 + 0.75/n + 2.25/n²)
	P        float64 `json:"p"`        // probability of as much or more from a normal distribution
	// Missing is the sentence in place of the numbers where there are too few values.
	Missing string `json:"missing,omitempty"`
}

// Rejected says that the values are not normally distributed at 5 % significance.
func (n Normality) Rejected() bool { return n.Missing == "" && n.P < Significance }

// AndersonDarling tests values for normality (M.A. Stephens, J. Am. Stat. Assoc. 69 (1974) 730;
// D'Agostino & Stephens 1986, table 4.7 for A*² and table 4.9 for p). Values that are all equal
// must not be given; fewer than LeastForNormality give a sentence.
func AndersonDarling(values []float64) Normality {
	if len(values) < LeastForNormality {
		return Normality{Missing: fmt.Sprintf("the test of normality needs at least %d values and has %d: normality is taken for granted", LeastForNormality, len(values))}
	}
	x := slices.Sorted(slices.Values(values))
	mean, sd := stat.MeanStdDev(x, nil)
	count := len(x)
	n := float64(count)
	sum := 0.0
	for i := range x {
		low := (x[i] - mean) / sd
		high := (x[count-1-i] - mean) / sd
		sum += float64(2*i+1) * (logPhi(low) + logPhi(-high))
	}
	a2 := -n - sum/n
	adjusted := a2 * (1 + 0.75/n + 2.25/(n*n))
	return Normality{A2: a2, Adjusted: adjusted, P: adjustedP(adjusted)}
}

// logPhi is ln Φ(z), by the first terms of Mills' ratio where Φ is no longer a float64.
func logPhi(z float64) float64 {
	if z < -30 {
		return -z*z/2 - math.Log(-z*math.Sqrt(2*math.Pi)) + math.Log1p(-1/(z*z))
	}
	return math.Log(distuv.UnitNormal.CDF(z))
}

// adjustedP is p as a function of A*² (D'Agostino & Stephens 1986, table 4.9). Past 10 the fit
// would bend up again and p is below 1e-20 anyway.
func adjustedP(a float64) float64 {
	switch {
	case a >= 10:
		return 0
	case a >= 0.6:
		return math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	case a >= 0.34:
		return math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	case a >= 0.2:
		return 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	}
	return 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
}
