package gauge

import (
	"math"
	"testing"
)

// TestRangeFactors: d2 and d3 of any table of control-chart constants (ASTM STP 15D); d2* and degrees of
// freedom of one range from Duncan, Quality Control and Industrial Statistics, table D3, as AIAG 2010
// appendix C gives them (from memory), good to one in the last digit printed.
func TestRangeFactors(t *testing.T) {
	for _, c := range []struct {
		n                 int
		d2, d3, star, dof float64
	}{
		{2, 1.128, 0.853, 1.41421, 1.0}, {3, 1.693, 0.888, 1.91155, 2.0}, {4, 2.059, 0.880, 2.23887, 2.9},
		{5, 2.326, 0.864, 2.48124, 3.8}, {10, 3.078, 0.797, 3.17905, 7.7}, {20, 3.735, 0.729, 3.80537, 13.4},
	} {
		d2, d3 := rangeMoments(c.n)
		near(t, "d2", d2, c.d2, 5.1e-4)
		near(t, "d3", d3, c.d3, 5.1e-4)
		near(t, "d2*", averageRangeFactor(d2, d3, 1), c.star, 1.1e-5)
		near(t, "dof", rangeDof(d2, d3, 1), c.dof, 0.051)
	}
}

// TestExactRanges: ranges of two and three have closed forms (Tippett 1925; H.A. David, Order Statistics):
// mean 2/√π and 3/√π, mean square 2 and 2 + 3√3/π.
func TestExactRanges(t *testing.T) {
	for n, want := range map[int][2]float64{2: {2 / math.Sqrt(math.Pi), 2}, 3: {3 / math.Sqrt(math.Pi), 2 + 3*math.Sqrt(3)/math.Pi}} {
		d2, d3 := rangeMoments(n)
		near(t, "d2", d2, want[0], 1e-11)
		near(t, "mean square", d2*d2+d3*d3, want[1], 1e-9)
	}
}
