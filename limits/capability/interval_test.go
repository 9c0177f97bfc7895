package capability

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// TestNoncentralT: one-sided tolerance factors k = t/√n, where t is the 95 % point of non-central t with
// noncentrality z·√n (G.J. Lieberman, Industrial Quality Control 14 (1958), and D.B. Owen, SCR-607
// (1963); from memory).
func TestNoncentralT(t *testing.T) {
	for _, c := range []struct{ n, p, k float64 }{
		{10, 0.90, 2.355}, {10, 0.95, 2.911}, {10, 0.99, 3.981},
		{50, 0.90, 1.646}, {50, 0.95, 2.065}, {50, 0.99, 2.862},
	} {
		delta := distuv.UnitNormal.Quantile(c.p) * math.Sqrt(c.n)
		got := noncentrality(c.k*math.Sqrt(c.n), c.n-1, 0.95)
		// One in the last printed digit of k.
		near(t, "noncentrality", got, delta, 0.001*math.Sqrt(c.n))
	}
}

// TestNoncentralTAgainstSeries holds the integral against gonum's series where that is accurate.
func TestNoncentralTAgainstSeries(t *testing.T) {
	for _, dof := range []float64{1, 4, 29, 400} {
		for _, delta := range []float64{-6, 0, 3, 20, 35} {
			for _, k := range []float64{-2, 0, 2} {
				x := delta + k*math.Sqrt(1+delta*delta/(2*dof))
				want := distuv.NoncentralT{Nu: dof, Mu: delta}.CDF(x)
				near(t, "noncentral t", noncentralT(x, dof, delta), want, 1e-8)
			}
		}
	}
}

// TestGreatIndices: far from zero, the interval turns into that of a standard deviation alone.
func TestGreatIndices(t *testing.T) {
	low, high := OneSidedInterval(200, 100, 99, 0.95)
	wantLow, wantHigh := CpInterval(200, 99, 0.95)
	near(t, "low", low/wantLow, 1, 1e-4)
	near(t, "high", high/wantHigh, 1, 1e-4)
}

// TestCoverage holds the intervals to 95 % ± 1.5 % over simulated studies of 60 values.
func TestCoverage(t *testing.T) {
	const runs, n = 2000, 60
	random := rand.New(rand.NewPCG(4, 1990))
	for _, mean := range []float64{0, 1} {
		limits := Limits{Lower: ptr(-4), Upper: ptr(4), Target: ptr(0)}
		truth := map[string]float64{"Cp": 4.0 / 3, "Cpl": (mean + 4) / 3, "Cpu": (4 - mean) / 3, "Cpk": (4 - mean) / 3, "Cpm": 4 / 3.0 / math.Sqrt(1+mean*mean)}
		inside := map[string]int{}
		for range runs {
			r := Result{N: n, Level: 0.95, Limits: limits}
			x := make([]float64, n)
			for j := range x {
				x[j] = mean + random.NormFloat64()
			}
			r.Mean, r.Overall = stat.Mean(x, nil), overall(x, 0.95)
			cp, cpl, cpu, cpk := r.indices("C", r.Overall)
			for _, i := range []Index{cp, cpl, cpu, cpk, r.cpm()} {
				if i.Low <= truth[i.Name] && truth[i.Name] <= i.High {
					inside[i.Name]++
				}
			}
		}
		for name := range truth {
			share := float64(inside[name]) / runs
			t.Logf("mean %g: %s %.4f", mean, name, share)
			if math.Abs(share-0.95) > 0.015 {
				t.Errorf("mean %g: the interval of %s holds the truth in %.2f %%", mean, name, 100*share)
			}
		}
	}
}

// TestMovingRangeCoverage holds the effective degrees of freedom of the moving range to account.
func TestMovingRangeCoverage(t *testing.T) {
	const runs, n = 5000, 25
	random := rand.New(rand.NewPCG(5, 1990))
	inside := 0
	for range runs {
		x := make([]float64, n)
		for j := range x {
			x[j] = random.NormFloat64()
		}
		if s := within(Individuals(x), 0.95); s.Low <= 1 && 1 <= s.High {
			inside++
		}
	}
	if share := float64(inside) / runs; math.Abs(share-0.95) > 0.015 {
		t.Errorf("holds the truth in %.2f %%", 100*share)
	}
}
