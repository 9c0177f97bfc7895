package calibrate

import (
	"context"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/calibration"
	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/limits/quantity/tolerance"
)

// benches is how many seeded benches each calibration is tried on: LOTGATE_COVERAGE, or few.
func benches(t testing.TB) int {
	if n, err := strconv.Atoi(os.Getenv("LOTGATE_COVERAGE")); err == nil && n > 0 {
		return n
	}
	if testing.Short() {
		return 2
	}
	return 8
}

// draw makes a bench whose parameters the program is not told.
func draw(seed int) virtual.Settings {
	r := rand.New(rand.NewPCG(uint64(seed), 77))
	s := virtual.Default()
	s.Seed = seed
	s.Disturbances = virtual.Probabilities{}
	s.Faults, s.Outliers = virtual.Shares{}, 0
	between := func(a, b float64) float64 { return a + (b-a)*r.Float64() }
	s.Sound.IFFullScale, s.Sound.SenseFullScale = quantity.Voltage(between(0.8, 1.3)), quantity.Voltage(between(0.8, 1.3))
	s.Sound.Gain = quantity.Ratio(between(150, 260))
	s.Sound.Coupling = quantity.Frequency(between(0.8, 3))
	s.Sound.Uneven = []virtual.Shelf{{Frequency: quantity.Frequency(between(60, 200)), Change: quantity.Ratio(between(-0.05, 0.05))},
		{Frequency: quantity.Frequency(between(4, 20)), Change: quantity.Ratio(between(-0.03, 0.03))}}
	s.Sound.Latency = quantity.Time(between(0.004, 0.06))
	s.Sound.Clock = quantity.Ratio(between(-60e-6, 60e-6))
	s.Sound.Crosstalk = quantity.Ratio(math.Pow(10, between(-5, -3)))
	s.Shunt.Resistance, s.Shunt.Offset = quantity.Resistance(between(1.9, 2.1)), quantity.Voltage(between(-4e-3, 4e-3))
	s.Shunt.Clock = quantity.Ratio(between(-200e-6, 200e-6))
	s.Target.PerVolt = quantity.DisplacementPerVolt(between(0.35e-3, 0.7e-3))
	s.Target.Resonance, s.Target.Quality = quantity.Frequency(between(45, 90)), quantity.Ratio(between(0.6, 1.6))
	s.Target.Standoff = quantity.Length(between(0.19, 0.25))
	s.Target.Excursion = quantity.Length(between(1.1e-3, 1.7e-3))
	s.Population.Phase.Median = quantity.Angle(between(0, math.Pi))
	return s
}

// open makes a bench with an empty set-up, and a session on it.
func open(t testing.TB, settings virtual.Settings) (*Session, *virtual.Bench) {
	t.Helper()
	b, err := virtual.New(settings)
	if err != nil {
		t.Fatal(err)
	}
	b.Seat("R-1", "reference")
	a := b.Advertise()
	s := &Session{Bench: b.Fixtures(), Hands: b.Hands(), Repeats: 3, Wait: func(ctx context.Context, _ quantity.Time) error { return ctx.Err() }}
	s.Setup = attach.Setup{Rate: a.SampleRate, Mains: a.Mains, Virtual: true, Inputs: map[string]attach.InputSetup{
		"if":    {Channel: a.IFInput, Gain: 1},
		"sense": {Channel: a.SenseInput, Gain: 1},
	}}
	s.Setup.Shunt = &attach.ShuntSetup{Gain: a.SenseGain, Chop: a.Chop}
	stage := tolerance.Percent(float64(a.StageUncertainty))
	s.Setup.Target = attach.TargetSetup{Channel: a.ShakerOutput, FullScale: a.OutputFullScale, Standoff: a.Standoff, Largest: a.Excursion, Travel: a.Travel, Stage: &stage}
	return s, b
}

// tally counts how often truth lies within U.
type tally struct {
	name        string
	inside, all int
	ratio       float64 // mean of U over the limit named
	limit       string
}

func (c *tally) add(truth float64, v calibration.Value, limit float64) {
	c.all++
	if math.Abs(v.Value.Value-truth) <= v.Uncertainty.Value {
		c.inside++
	}
	c.ratio += v.Uncertainty.Value / limit
}

// check holds the share inside against 95 ± 2 % where there are benches enough, and against what
// chance allows else, and the width against twice the limit.
func (c *tally) check(t *testing.T) {
	t.Helper()
	share, ratio := float64(c.inside)/float64(c.all), c.ratio/float64(c.all)
	t.Logf("%-28s inside U %5.1f %% of %d   U over its limit %.2f (%s)", c.name, 100*share, c.all, ratio, c.limit)
	low, high := 0.93, 0.97
	if c.all < 400 {
		// Four standard deviations of a share of so many.
		slack := 4 * math.Sqrt(0.95*0.05/float64(c.all))
		low, high = 0.95-slack, 1
	}
	if share < low-1e-9 || share > high+1e-9 {
		t.Errorf("%s: %.1f %% inside U", c.name, 100*share)
	}
	if ratio > 2 {
		t.Errorf("%s: U is %.2f times its limit", c.name, ratio)
	}
}

// flatCurve is an input without a response of its own but its high-pass.
func flatCurve() curve.Curve[quantity.Ratio] {
	return curve.Curve[quantity.Ratio]{{Frequency: 0.5, Value: 1}, {Frequency: 3000, Value: 1}}
}

// preamplifierCurve is the drawn preamplifier's true gain over that at 80 Hz.
func preamplifierCurve(s virtual.Settings) curve.Curve[quantity.Ratio] {
	var out curve.Curve[quantity.Ratio]
	for hz := 0.5; hz < 3000; hz *= 1.03 {
		out = append(out, curve.Point[quantity.Ratio]{Frequency: quantity.Frequency(hz), Value: quantity.Ratio(preamplifierGain(hz, s.Sound.Uneven) / preamplifierGain(80, s.Sound.Uneven))})
	}
	return out
}
