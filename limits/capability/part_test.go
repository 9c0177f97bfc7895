package capability

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// TestWithoutGauge: 5² − 3² = 4², by hand.
func TestWithoutGauge(t *testing.T) {
	r, err := Study([][]float64{normalScores(60, 0, 5)}, Limits{Lower: ptr(-24), Upper: ptr(24)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	p, err := r.WithoutGauge(GaugeSpread{Sigma: 3, Dof: 40})
	if err != nil || p.Missing != "" {
		t.Fatal(p.Missing, err)
	}
	near(t, "σ", p.Sigma.Sigma, 4, 1e-9)
	near(t, "share", p.GaugeShare, 0.36, 1e-9)
	near(t, "Pp", p.Pp.Value, 2, 1e-9)
	near(t, "Ppk", p.Ppk.Value, 2, 1e-9)
	// Satterthwaite: 16²/(25²/59 + 9²/40).
	near(t, "dof", p.Sigma.Dof, 256/(625.0/59+81.0/40), 1e-9)
	none, err := r.WithoutGauge(GaugeSpread{Sigma: 0})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "low with a perfect gauge", none.Pp.Low, r.Pp.Low, 1e-9)
	near(t, "high with a perfect gauge", none.Pp.High, r.Pp.High, 1e-9)
	near(t, "Ppk with a perfect gauge", none.Ppk.Low, r.Ppk.Low, 1e-9)
}

func TestWithoutGaugeSentences(t *testing.T) {
	r, err := Study([][]float64{normalScores(20, 0, 5)}, Limits{Upper: ptr(24)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	if p, err := r.WithoutGauge(GaugeSpread{Sigma: 5.1, Dof: 30}); err != nil || !strings.Contains(p.Missing, "not smaller than the observed") {
		t.Errorf("%+v, %v", p, err)
	}
	if p, err := r.WithoutGauge(GaugeSpread{Sigma: 4.8, Dof: 30}); err != nil || !strings.Contains(p.Ppk.Missing, "not proven to be greater") || p.Sigma.Low != 0 || !(p.Sigma.High > p.Sigma.Sigma) {
		t.Errorf("%+v, %v", p, err)
	}
	if _, err := r.WithoutGauge(GaugeSpread{Sigma: math.NaN()}); err == nil || !strings.Contains(err.Error(), "standard deviation is NaN") {
		t.Error(err)
	}
	odd, err := Study([][]float64{logNormal(100, 0, 1)}, Limits{Upper: ptr(24)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	if p, err := odd.WithoutGauge(GaugeSpread{Sigma: 0.1}); err != nil || !strings.Contains(p.Missing, "not normally distributed") {
		t.Errorf("%+v, %v", p, err)
	}
}

// TestPartCoverage: parts σ 2, gauge σ 1 known from 40 degrees of freedom, 80 parts.
func TestPartCoverage(t *testing.T) {
	const runs, n, gaugeDof = 4000, 80, 40
	random := rand.New(rand.NewPCG(40, 80))
	insidePp, insidePpk := 0, 0
	for range runs {
		x, g := make([]float64, n), make([]float64, gaugeDof+1)
		for i := range x {
			x[i] = math.Sqrt(5) * random.NormFloat64()
		}
		for i := range g {
			g[i] = random.NormFloat64()
		}
		r := Result{N: n, Level: 0.95, Limits: Limits{Lower: ptr(-9), Upper: ptr(7)}, Mean: stat.Mean(x, nil), Overall: overall(x, 0.95), Basis: "normal distribution"}
		p, err := r.WithoutGauge(GaugeSpread{Sigma: stat.StdDev(g, nil), Dof: gaugeDof})
		if err != nil {
			t.Fatal(err)
		}
		if p.Pp.Low <= 16.0/12 && 16.0/12 <= p.Pp.High {
			insidePp++
		}
		if p.Ppk.Low <= 7.0/6 && 7.0/6 <= p.Ppk.High {
			insidePpk++
		}
	}
	near(t, "coverage of Pp", float64(insidePp)/runs, 0.95, 0.015)
	near(t, "coverage of Ppk", float64(insidePpk)/runs, 0.95, 0.015)
}
