package gauge

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// linear is the linearity example of AIAG, Measurement Systems Analysis, 3rd and 4th ed., ch. III-B:
// five parts, twelve readings each (data and results from memory, printed alike in public copies).
func linear() []ReferenceUnit {
	return []ReferenceUnit{
		{"1", 2, 0, []float64{2.7, 2.5, 2.4, 2.5, 2.7, 2.3, 2.5, 2.5, 2.4, 2.4, 2.6, 2.4}},
		{"2", 4, 0, []float64{5.1, 3.9, 4.2, 5.0, 3.8, 3.9, 3.9, 3.9, 3.9, 4.0, 4.1, 3.8}},
		{"3", 6, 0, []float64{5.8, 5.7, 5.9, 5.9, 6.0, 6.1, 6.0, 6.1, 6.4, 6.3, 6.0, 6.1}},
		{"4", 8, 0, []float64{7.6, 7.7, 7.8, 7.7, 7.8, 7.8, 7.8, 7.7, 7.8, 7.5, 7.6, 7.7}},
		{"5", 10, 0, []float64{9.1, 9.3, 9.5, 9.3, 9.4, 9.5, 9.5, 9.5, 9.6, 9.2, 9.3, 9.4}},
	}
}

func TestLinearity(t *testing.T) {
	l, err := LinearityOf(linear(), 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "slope", l.Slope.Value, -0.13167, 5e-6)
	near(t, "intercept", l.Intercept.Value, 0.73667, 5e-6)
	near(t, "R²", l.RSquared, 0.7143, 5e-5)
	near(t, "s", l.Residual, 0.23954, 5e-6)
	near(t, "t of slope", l.Slope.Test.T, -12.043, 5e-4)
	near(t, "t of intercept", l.Intercept.Test.T, 10.158, 5e-4)
	near(t, "u of slope", l.Slope.Test.StandardUncertainty, 0.0109, 5e-5)
	near(t, "u of intercept", l.Intercept.Test.StandardUncertainty, 0.0725, 5e-5)
	near(t, "slope low", l.Slope.Low, -0.154, 5e-4)
	near(t, "slope high", l.Slope.High, -0.110, 5e-4)
	near(t, "intercept low", l.Intercept.Low, 0.591, 5e-4)
	near(t, "intercept high", l.Intercept.High, 0.882, 5e-4)
	near(t, "percent", l.Percent.Value, 13.17, 5e-3)
	near(t, "percent low", l.Percent.Low, 11.0, 0.05)
	near(t, "linearity", l.Width(6*2.756).Value, 2.177, 5e-4)
	for i, want := range []struct{ bias, t float64 }{{0.492, 13.73}, {0.125, 0.968}, {0.025, 0.442}, {-0.292, -10.14}, {-0.617, -14.56}} {
		b := l.Biases[i]
		near(t, "bias of "+b.Name, b.Bias.Value, want.bias, 5e-4)
		near(t, "t of "+b.Name, b.Test.T, want.t, 0.005)
	}
	near(t, "p of 2", l.Biases[1].Test.P, 0.354, 5e-4)
	near(t, "p of 3", l.Biases[2].Test.P, 0.667, 5e-4)
	at := l.Band(l.fit.meanX)
	// t with 58 degrees of freedom at 97.5 % is 2.0017 in printed tables.
	near(t, "half width at the middle", at.High-at.Value, 2.0017*0.23954/math.Sqrt(60), 1e-5)
}

// TestReferenceUncertainty: u² = s²/n + u²ref and Welch–Satterthwaite, by hand: s² of 1, 2, 3 is 1.
func TestReferenceUncertainty(t *testing.T) {
	b, err := BiasOf(ReferenceUnit{"r", 1.5, 0.4, []float64{1, 2, 3}}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	u2 := 1.0/3 + 0.16
	near(t, "u", b.Test.StandardUncertainty, math.Sqrt(u2), 1e-12)
	near(t, "dof", b.Test.Dof, u2*u2/(1.0/9/2), 1e-9)
	near(t, "t", b.Test.T, 0.5/math.Sqrt(u2), 1e-12)
	sure, err := BiasOf(ReferenceUnit{"r", 1.5, 0.4, []float64{2, 2, 2}}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "normal interval", sure.Bias.High, 0.5+1.959964*0.4, 1e-6)
	if sure.Test.Dof != 0 {
		t.Errorf("dof %g", sure.Test.Dof)
	}
	without, err := LinearityOf(linear(), 0.95)
	if err != nil {
		t.Fatal(err)
	}
	units := linear()
	for i := range units {
		units[i].Uncertainty = 0.1
	}
	with, err := LinearityOf(units, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	// Five equal groups: the slope's variance grows by u²/Σ(x−x̄)² = 0.01/40.
	near(t, "u of slope", square(with.Slope.Test.StandardUncertainty)-square(without.Slope.Test.StandardUncertainty), 0.01/40, 1e-12)
}

// TestBandCoverage: with reference uncertainties the band holds the true line in 95 % ± 1.5 %.
func TestBandCoverage(t *testing.T) {
	const runs = 4000
	random := rand.New(rand.NewPCG(95, 12))
	inside := 0
	for range runs {
		var units []ReferenceUnit
		for x := 1.0; x <= 6; x++ {
			u := ReferenceUnit{Value: x, Uncertainty: 0.1}
			truth := x + 0.1*random.NormFloat64()
			for range 5 {
				u.Readings = append(u.Readings, truth+0.2+0.05*x+0.2*random.NormFloat64())
			}
			units = append(units, u)
		}
		l, err := LinearityOf(units, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		if e := l.Band(5); e.Low <= 0.45 && 0.45 <= e.High {
			inside++
		}
	}
	share := float64(inside) / runs
	t.Logf("%.4f", share)
	near(t, "coverage", share, 0.95, 0.015)
}

func TestLackOfFit(t *testing.T) {
	units := []ReferenceUnit{{"a", 1, 0, []float64{1, 1.1, 0.9}}, {"b", 2, 0, []float64{3, 3.1, 2.9}}, {"c", 3, 0, []float64{3, 3.1, 2.9}}}
	l, err := LinearityOf(units, 0.95)
	if err != nil || l.LackOfFit == nil || *l.LackOfFit > 1e-4 || len(l.Notes) != 1 {
		t.Errorf("%+v, %v", l, err)
	}
	if l, err := LinearityOf(units[:2], 0.95); err != nil || l.LackOfFit != nil {
		t.Errorf("two units: %+v, %v", l, err)
	}
}

func TestReferenceRefuses(t *testing.T) {
	for want, u := range map[string]ReferenceUnit{
		"bias needs at least 2 readings and has 1":              {"r", 1, 0, []float64{1}},
		"reading 2 is NaN":                                      {"r", 1, 0, []float64{1, math.NaN()}},
		"its value is +Inf":                                     {"r", math.Inf(1), 0, []float64{1, 2}},
		"all 3 readings are 2 and the reference has no uncert":  {"r", 1, 0, []float64{2, 2, 2}},
		"its value is 1 with uncertainty -1; take both from it": {"r", 1, -1, []float64{2, 2, 2}},
	} {
		if _, err := BiasOf(u, 0.95); err == nil || !strings.Contains(err.Error(), `reference unit "r": `) || !strings.Contains(err.Error(), want) {
			t.Errorf("want %q, got %v", want, err)
		}
	}
	if _, err := BiasOf(ReferenceUnit{"r", 1, 0, []float64{1, 2}}, 95); err == nil || !strings.Contains(err.Error(), "level of confidence is 95") {
		t.Error(err)
	}
	same := []ReferenceUnit{{"a", 1, 0, []float64{1, 2}}, {"b", 1, 0, []float64{1, 2}}}
	for _, units := range [][]ReferenceUnit{nil, same} {
		if _, err := LinearityOf(units, 0.95); err == nil || !strings.Contains(err.Error(), "at least 2 different values and has") {
			t.Error(err)
		}
	}
}
