package calibrate

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"lotgate/fixtures/calibration"
	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/limits/quantity/tolerance"
)

// shakerAt is a damped oscillator's displacement per volt: D0/√((1 − u²)² + (u/Q)²).
func shakerAt(hz, perVolt float64, t virtual.TargetSettings) float64 {
	u := hz / float64(t.Resonance)
	return perVolt / math.Hypot(1-u*u, u/float64(t.Quality))
}

// targetSession is a session whose inputs are calibrated without error.
func targetSession(t testing.TB, settings virtual.Settings) (*Session, *virtual.Bench) {
	s, b := open(t, settings)
	for role, in := range s.Setup.Inputs {
		in.Own.HighPass = settings.Sound.Coupling
		in.Own.Points = flatCurve()
		in.Response = in.Own
		if role == "if" {
			in.Response.Points = preamplifierCurve(settings)
		}
		s.Setup.Inputs[role] = in
	}
	return s, b
}

// thirdHarmonicLimit is twice the relative standard deviation of β that the module's noise under
// the third harmonic of 19 Hz alone leaves over twelve records of four seconds, spread over a
// fringe: J3/J1 is in proportion to β² (Abramowitz & Stegun 9.1.7), so half of it counts. That four
// columns are fitted where one is wanted (sin φ beside sin³ φ) makes the variance 10 times as large:
// the mean squares of sin φ and sin³ φ are 1/2 and 5/16, of their product 3/8, so that
// 1/(1/2 − (3/8)²/(5/16)) = 20 takes the place of 2.
func thirdHarmonicLimit(m virtual.Truth, beta float64) float64 {
	third := 2 * float64(m.EchoAt(57)) * math.Jn(3, beta)
	return 2 * float64(m.Density(57)) / math.Sqrt(48) * math.Sqrt(20) / third / 2
}

func TestTargetRecoversTheTruth(t *testing.T) {
	list := []float64{1, 5, 19, 70, 200, 1000}
	at := map[float64]*tally{}
	for _, hz := range list {
		at[hz] = &tally{name: fmt.Sprintf("target at %g Hz", hz), limit: "noise of the third harmonic, accelerometer"}
	}
	for seed := range benches(t) {
		settings := draw(seed)
		s, b := targetSession(t, settings)
		flat := settings.Workshop.Flatness
		f, err := Target{By: "accelerometer", Accelerometer: "sense", Flatness: flat, Carrier: settings.Carrier, CarrierU: 4e-4}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		displacement := calibration.CurveOf[quantity.DisplacementPerVolt](f)
		perVolt := float64(settings.Target.PerVolt) / float64(b.Advertise().Displacement[0].Value) * float64(b.Actual().Displacement[0].Value)
		for hz, c := range at {
			d, u := displacement.At(quantity.Frequency(hz))
			truth := shakerAt(hz, perVolt, settings.Target)
			// The limit: the noise under the faintest harmonic, and what the accelerometer is good for.
			accelerometer := math.Hypot(float64(flat)*math.Sqrt(math.Abs(math.Log10(hz/19))), 0.5*float64(flat)*math.Sqrt(math.Log10(3)))
			accelerometer = math.Hypot(accelerometer, 4e-4) // and the carrier's spread
			limit := math.Hypot(accelerometer, thirdHarmonicLimit(b.Truth(), f.Values[calibration.PhaseIndex].Value.Value))
			c.add(truth, calibration.Found(d, d*quantity.DisplacementPerVolt(u)), limit*truth)
		}
	}
	for _, hz := range list {
		at[hz].check(t)
	}
}

// TestTargetByModuleAndTable: the two other ways to the course over frequency agree with the truth
// within their uncertainty, too.
func TestTargetByModuleAndTable(t *testing.T) {
	for seed := range 3 {
		settings := draw(seed)
		_, b := targetSession(t, settings)
		perVolt := float64(settings.Target.PerVolt) / float64(b.Advertise().Displacement[0].Value) * float64(b.Actual().Displacement[0].Value)
		module := Target{By: "module", Carrier: settings.Carrier, CarrierU: 4e-4}
		table := Target{By: "table", Carrier: settings.Carrier, CarrierU: 4e-4}
		u := tolerance.Percent(0.003)
		for hz := 0.8; hz < 1500; hz *= 1.12 {
			f := quantity.Frequency(hz)
			gain := quantity.Ratio(math.Pow(10, float64(b.Truth().ResponseAt(f, 80))/20))
			module.Response.Points = append(module.Response.Points, curve.Point[quantity.Ratio]{Frequency: f, Value: gain, Uncertainty: &u})
			// A table in another unit's size: only its course is used.
			table.Table = append(table.Table, curve.Point[quantity.DisplacementPerVolt]{Frequency: f, Value: quantity.DisplacementPerVolt(3 * shakerAt(hz, perVolt, settings.Target)), Uncertainty: &u})
		}
		for _, p := range []Target{module, table} {
			s, _ := targetSession(t, settings)
			f, err := s.Do(t.Context(), p)
			if err != nil {
				t.Fatal(seed, err)
			}
			found := calibration.CurveOf[quantity.DisplacementPerVolt](f)
			for _, hz := range []float64{2, 10, 19, 60, 150, 500} {
				d, u := found.At(quantity.Frequency(hz))
				if truth := shakerAt(hz, perVolt, settings.Target); math.Abs(float64(d)/truth-1) > 1.5*u {
					t.Errorf("seed %d, by %s, %g Hz: %.4g m/V ± %.2g %%, truth %.4g", seed, p.By, hz, d, 100*u, truth)
				}
			}
		}
	}
}

func TestTargetRecognisesWhatIsWrong(t *testing.T) {
	for mistake, want := range map[virtual.Mistake]string{virtual.TargetStuck: "does not move", virtual.UpsideDown: "upside down"} {
		settings := draw(5)
		s, b := targetSession(t, settings)
		b.Blunder(mistake)
		_, err := Target{By: "accelerometer", Accelerometer: "sense", Flatness: 0.005, Carrier: settings.Carrier}.Run(t.Context(), s)
		var w *Wrong
		if !errors.As(err, &w) || !strings.Contains(err.Error(), want) {
			t.Errorf("%s gave %v", mistake, err)
		}
	}
}
