package calibrate

import (
	"fmt"
	"math"
	"testing"

	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
)

// highPassGain is a first-order high-pass: 1/√(1 + (fc/f)²) (common practice).
func highPassGain(hz, corner float64) float64 { return 1 / math.Sqrt(1+corner*corner/hz/hz) }

func TestLevelRecoversTheTruth(t *testing.T) {
	full := tally{name: "full scale (dc)", limit: "the voltmeter"}
	ac := tally{name: "full scale (ac)", limit: "the voltmeter"}
	corner := tally{name: "input's corner", limit: "noise under the lines"}
	at := map[float64]*tally{}
	for _, hz := range []float64{1, 2.5, 10, 100, 1500} {
		at[hz] = &tally{name: fmt.Sprintf("input's gain at %g Hz", hz), limit: "noise under the lines"}
	}
	for seed := range benches(t) {
		s, b := open(t, draw(seed))
		f, err := Level{Input: "if", Method: "dc", Meter: 0.001}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		truth := draw(seed)
		fc := float64(truth.Sound.Coupling)
		reference := highPassGain(400, fc)
		fullScale := float64(b.Actual().IFFullScale) / reference // volts outside, with the high-pass before
		v := f.Values[calibration.FullScale]
		full.add(fullScale, v, 0.001*v.Value.Value)
		cornerLimit, gainLimit := inputLimits(t, truth, []float64{1, 2.5, 10, 100, 1500})
		corner.add(fc, f.Values[calibration.HighPass], cornerLimit)
		curve := calibration.GainOf(f)
		for hz, c := range at {
			g, u := curve.At(quantity.Frequency(hz))
			c.add(highPassGain(hz, fc)/reference, calibration.Found(g, g*quantity.Ratio(u)), float64(g)*math.Hypot(gainLimit[hz], 2*leastRelative))
		}
		s, b = open(t, draw(seed))
		f, err = Level{Input: "sense", Method: "ac", Meter: 0.005}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		v = f.Values[calibration.FullScale]
		ac.add(float64(b.Actual().SenseFullScale)/highPassGain(400, fc), v, 0.005*v.Value.Value)
	}
	full.check(t)
	ac.check(t)
	corner.check(t)
	for _, hz := range []float64{1, 2.5, 10, 100, 1500} {
		at[hz].check(t)
	}
}
