package calibrate

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"lotgate/station/measure"
)

// TestBesselRatiosAgainstTables: β comes back from tabulated Bessel functions (Abramowitz &
// Stegun, tables 9.1 and 9.2) at the table's own precision.
func TestBesselRatiosAgainstTables(t *testing.T) {
	for _, c := range []struct{ beta, j1, j3, j2, j4 float64 }{
		{1.0, 0.4400505857, 0.0195633540, 0.1149034849, 0.0024766390},
		{2.0, 0.5767248078, 0.1289432495, 0.3528340286, 0.0339957198},
		{3.0, 0.3390589585, 0.3090627223, 0.4860912606, 0.1320341839},
	} {
		if got := betaOf(1, c.j3/c.j1); math.Abs(got-c.beta) > 1e-8 {
			t.Errorf("J3/J1 of %g gives β = %.10f", c.beta, got)
		}
		if got := betaOf(2, c.j4/c.j2); math.Abs(got-c.beta) > 2e-8 {
			t.Errorf("J4/J2 of %g gives β = %.10f", c.beta, got)
		}
		// The slope against a difference of the solved ratio.
		const h = 1e-5
		rise := math.Log(math.Jn(3, c.beta*(1+h))/math.Jn(1, c.beta*(1+h))*math.Jn(1, c.beta*(1-h))/math.Jn(3, c.beta*(1-h))) / (2 * h)
		if got := slopeOf(1, c.beta); math.Abs(got/rise-1) > 1e-6 {
			t.Errorf("slope at %g: %g, by difference %g", c.beta, got, rise)
		}
	}
}

// TestDisplacementWhereHarmonicsMeet: where J1 = J3 the displacement of a target is the published
// fraction of the wavelength (ISO 16063-41, vibration at Bessel points).
func TestDisplacementWhereHarmonicsMeet(t *testing.T) {
	data, err := os.ReadFile("../../testdata/reference/signal/vibration_bessel_points.json")
	if err != nil {
		t.Fatal(err)
	}
	var g map[string]json.RawMessage
	if err := json.Unmarshal(data, &g); err != nil || g["_source"] == nil {
		t.Fatalf("no source: %v", err)
	}
	for name, carrier := range map[string]float64{"radar_10.525e9_Hz": 10.525e9, "radar_24.125e9_Hz": 24.125e9} {
		var points map[string]any
		if err := json.Unmarshal(g[name], &points); err != nil {
			t.Fatal(err)
		}
		want, err := strconv.ParseFloat(points["J1=J3_mm"].(string), 64)
		if err != nil {
			t.Fatal(err)
		}
		got := betaOf(1, 1) * measure.SpeedOfLight / carrier / (4 * math.Pi) * 1e3
		if math.Abs(got/want-1) > 2e-6 {
			t.Errorf("%s: J1 = J3 at %.6f mm, published %.6f mm", name, got, want)
		}
	}
}

// TestLinearBudgetAgainstMonteCarlo holds the linear budget of the Bessel method against the
// propagation of distributions (JCGM 101:2008, clauses 7 and 8): with harmonics of Gaussian
// scatter the standard deviation of β and the ends of its 95 % interval agree to the scatter of 200,000 trials.
func TestLinearBudgetAgainstMonteCarlo(t *testing.T) {
	const trials = 200000
	r := rand.New(rand.NewPCG(9, 1))
	for _, c := range []struct{ beta, third float64 }{{0.4, 0.01}, {0.55, 0.003}, {1.4, 0.02}} {
		h1, h3 := math.Jn(1, c.beta), math.Jn(3, c.beta)
		u1, u3 := 0.002*h1, c.third*h3
		linear := c.beta * math.Hypot(0.002, c.third) / slopeOf(1, c.beta)
		mean, square2, inside := 0.0, 0.0, 0
		for range trials {
			b := betaOf(1, (h3+u3*r.NormFloat64())/(h1+u1*r.NormFloat64()))
			mean += b / trials
			square2 += (b - c.beta) * (b - c.beta) / trials
			if math.Abs(b-c.beta) <= 1.96*linear {
				inside++
			}
		}
		if sd := math.Sqrt(square2 - (mean-c.beta)*(mean-c.beta)); math.Abs(sd/linear-1) > 0.01 {
			t.Errorf("β = %g: linear u = %.6f, Monte Carlo %.6f", c.beta, linear, sd)
		}
		if share := float64(inside) / trials; math.Abs(share-0.95) > 0.002 {
			t.Errorf("β = %g: %.2f %% of the trials lie within the linear interval", c.beta, 100*share)
		}
		if math.Abs(mean-c.beta) > 0.1*linear {
			t.Errorf("β = %g: bias %.3g, more than a tenth of u = %.3g", c.beta, mean-c.beta, linear)
		}
	}
}

// TestSquareWave: a DC voltage chopped at 50 % duty has the peaks (2/π)·V/n at odd multiples
// (Fourier series of the square wave, common practice): on a bench without errors full scale comes
// back to what the display's digits leave.
func TestSquareWave(t *testing.T) {
	settings := draw(3)
	settings.Calibration.Exact, settings.Shunt.Clock = true, 0
	s, b := open(t, settings)
	full, err := Level{Input: "if", Reference: 400}.atVoltage(t.Context(), s, 1, 0.6)
	if err != nil {
		t.Fatal(err)
	}
	want := float64(b.Actual().IFFullScale) / highPassGain(400, float64(settings.Sound.Coupling))
	if math.Abs(full.fullScale/want-1) > 1e-4 {
		t.Errorf("full scale %.6f V, want %.6f V", full.fullScale, want)
	}
	squares, err := s.choppedTones(t.Context(), 1, 400, 2)
	if err != nil {
		t.Fatal(err)
	}
	first, _, _ := squares.odd[0].mean()
	for i, o := range squares.odd {
		n := float64(2*i + 1)
		v, _, _ := o.mean()
		high := highPassGain(400*n, float64(settings.Sound.Coupling)) / highPassGain(400, float64(settings.Sound.Coupling))
		if ratio := n * v / first; math.Abs(ratio/high-1) > 1e-5 {
			t.Errorf("harmonic %g is %.6f of its share", n, ratio/high)
		}
	}
}
