package capability

import (
	"math"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

func ptr(v float64) *float64 { return &v }

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.6g, reference %.6g ± %g", what, got, want, tolerance)
	}
}

// normalScores are n values with just the mean and standard deviation given, as normal as can be.
func normalScores(n int, mean, sd float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = distuv.UnitNormal.Quantile((float64(i) + 0.625) / (float64(n) + 0.25))
	}
	m, s := stat.MeanStdDev(x, nil)
	for i := range x {
		x[i] = mean + sd*(x[i]-m)/s
	}
	return x
}

// TestHandbookExample: NIST/SEMATECH e-Handbook of Statistical Methods 6.1.6, USL 20, LSL 8, mean 16,
// s 2, and the target at the middle. Intervals for 50 values by that section's formulas, worked out
// independently (scipy).
func TestHandbookExample(t *testing.T) {
	r, err := Study([][]float64{normalScores(50, 16, 2)}, Limits{ptr(8), ptr(20), ptr(14)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		index Index
		want  float64
	}{{r.Cp, 1}, {r.Cpk, 0.6667}, {r.Cpu, 0.6667}, {r.Cpl, 1.3333}, {r.Cpm, 0.70711}, {r.Pp, 1}, {r.Ppk, 0.6667}} {
		near(t, c.index.Name, c.index.Value, c.want, 5e-5)
		if c.index.Missing != "" || c.index.Method == "" {
			t.Errorf("%s: %q by %q", c.index.Name, c.index.Missing, c.index.Method)
		}
	}
	near(t, "Cp low", r.Cp.Low, 0.8024823, 1e-6)
	near(t, "Cp high", r.Cp.High, 1.1971259, 1e-6)
	near(t, "Cpk low", r.Cpk.Low, 0.5055513, 1e-6)
	near(t, "Cpk high", r.Cpk.High, 0.8277820, 1e-6)
	// Φ(−2) + Φ(−4), printed tables of the normal distribution: 0.02275 + 0.00003.
	near(t, "outside", r.Outside.Total.Value, 0.02278, 5e-6)
	if o := r.Outside.Total; !(o.Low < o.Value && o.Value < o.High) {
		t.Errorf("outside %v", o)
	}
}

// TestTextbookInterval: D.C. Montgomery, Introduction to Statistical Quality Control, the example of a
// Cp interval: USL 62, LSL 38, n 20, s 1.75 gives 2.29, and from the rounded 2.29 an interval of 1.57 to
// 3.01 (from memory).
func TestTextbookInterval(t *testing.T) {
	r, err := Study([][]float64{normalScores(20, 50, 1.75)}, Limits{Lower: ptr(38), Upper: ptr(62)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "Cp", r.Cp.Value, 2.29, 0.005)
	low, high := CpInterval(2.29, 19, 0.95)
	near(t, "low", low, 1.57, 0.005)
	near(t, "high", high, 3.01, 0.005)
}

// TestWithinAndOverall: two subgroups apart from each other have a small spread within and a great one
// in all; worked by hand: pooled variance (2·1+2·1)/4, overall variance of 1,2,3,11,12,13.
func TestWithinAndOverall(t *testing.T) {
	r, err := Study([][]float64{{1, 2, 3}, {11, 12, 13}}, Limits{Lower: ptr(-5)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "within", r.Within.Sigma, 1, 1e-12)
	near(t, "dof", r.Within.Dof, 4, 0)
	near(t, "overall", r.Overall.Sigma, math.Sqrt(30.8), 1e-12)
	near(t, "Cpl", r.Cpl.Value, 4, 1e-12)
	near(t, "Cpk", r.Cpk.Value, 4, 1e-12)
	for _, i := range []Index{r.Cp, r.Cpu, r.Cpm, r.Pp} {
		if !strings.HasPrefix(i.Missing, "no "+i.Name+": ") {
			t.Errorf("%s with one limit: %q", i.Name, i.Missing)
		}
	}
	if r.Cpk.Method != "non-central t" || r.Cpk.Low != r.Cpl.Low {
		t.Errorf("one-sided Cpk by %q", r.Cpk.Method)
	}
}

// TestMovingRange: average moving range 1.8778, NIST/SEMATECH e-Handbook 6.3.2.2 (flow rates). It
// divides by 1.128.
func TestMovingRange(t *testing.T) {
	flow := []float64{49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1}
	r, err := Study(Individuals(flow), Limits{Upper: ptr(60)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "within", r.Within.Sigma, 1.8778/1.128, 1e-3)
	// Cryer & Ryan 1990: variance (0.826n − 1.082)/(n−1)² relative to σ² (from memory).
	near(t, "dof", r.Within.Dof, 81/(2*(8.26-1.082)), 0.01)
}

func TestRefuses(t *testing.T) {
	both := Limits{Lower: ptr(0), Upper: ptr(10)}
	for _, c := range []struct {
		values [][]float64
		limits Limits
		level  float64
		want   string
	}{
		{nil, both, 0.95, "capability needs at least 2 values and has 0"},
		{[][]float64{{1}}, both, 0.95, "capability needs at least 2 values and has 1"},
		{[][]float64{{3, 3}, {3}}, both, 0.95, "all 3 values are 3: without any spread there is no capability"},
		{[][]float64{{1, 2}, {3, math.NaN()}}, both, 0.95, "value 2 of subgroup 2 is NaN"},
		{[][]float64{{1, math.Inf(1)}}, both, 0.95, "value 2 of subgroup 1 is +Inf"},
		{[][]float64{{1, 2}, {}}, both, 0.95, "subgroup 2 of 2 is empty"},
		{[][]float64{{1, 2}}, Limits{}, 0.95, "needs a lower or an upper limit and has neither"},
		{[][]float64{{1, 2}}, Limits{Lower: ptr(2), Upper: ptr(1)}, 0.95, "lower limit 2 is not below the upper limit 1"},
		{[][]float64{{1, 2}}, Limits{Upper: ptr(1), Target: ptr(2)}, 0.95, "target 2 is outside the limits"},
		{[][]float64{{1, 2}}, Limits{Upper: ptr(math.NaN())}, 0.95, "upper limit is NaN"},
		{[][]float64{{1, 2}}, both, 95, "level of confidence is 95"},
	} {
		if _, err := Study(c.values, c.limits, c.level); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("want %q, got %v", c.want, err)
		}
	}
	r, err := Study([][]float64{{1, 1}, {2, 2}}, both, 0.95)
	if err != nil || !strings.Contains(r.Cpk.Missing, "too coarse") || r.Ppk.Missing != "" {
		t.Errorf("subgroups of equal values: %q, %q, %v", r.Cpk.Missing, r.Ppk.Missing, err)
	}
	if len(r.Notes) != 1 || !strings.Contains(r.Notes[0], "needs at least 8 values and has 4") {
		t.Errorf("notes %q", r.Notes)
	}
}

// TestFewAndFar: two values, values outside their limits, and values far inside all have finite numbers
// in order.
func TestFewAndFar(t *testing.T) {
	for _, values := range [][]float64{{1, 2}, {1, 2, 4}, {20, 21, 23, 22}, {4.999, 5, 5.001}, {-1e9, 1e9, 3}, {5e-9, 6e-9, 7e-9}} {
		for _, l := range []Limits{{Lower: ptr(0), Upper: ptr(10), Target: ptr(5)}, {Upper: ptr(10)}, {Lower: ptr(0)}} {
			for _, subgroups := range [][][]float64{{values}, Individuals(values)} {
				r, err := Study(subgroups, l, 0.95)
				if err != nil {
					t.Fatal(err)
				}
				for _, i := range []Index{r.Cp, r.Cpl, r.Cpu, r.Cpk, r.Pp, r.Ppl, r.Ppu, r.Ppk, r.Cpm} {
					if i.Missing == "" && !(i.Low <= i.Value && i.Value <= i.High && i.High-i.Low < math.Inf(1)) {
						t.Errorf("%v: %+v", values, i)
					}
				}
				for _, f := range []Fraction{r.Outside.Below, r.Outside.Above, r.Outside.Total, r.Outside.Observed} {
					if f.Missing == "" && !(0 <= f.Low && f.Low <= f.Value && f.Value <= f.High && f.High <= 1) {
						t.Errorf("%v: %+v", values, f)
					}
				}
			}
		}
	}
}
