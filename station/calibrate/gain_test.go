package calibrate

import (
	"fmt"
	"math"
	"testing"

	"lotgate/fixtures/calibration"
	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
)

// preamplifierGain is a row of first-order shelves: √((1 + (g·u)²)/(1 + u²)) each, u = f/fs.
func preamplifierGain(hz float64, shelves []virtual.Shelf) float64 {
	g := 1.0
	for _, s := range shelves {
		u := hz / float64(s.Frequency)
		g *= math.Sqrt((1 + square(u*(1+float64(s.Change)))) / (1 + u*u))
	}
	return g
}

func TestGainRecoversTheTruth(t *testing.T) {
	divider := tally{name: "gain (divider)", limit: "the divider"}
	at := map[float64]*tally{}
	list := []float64{1, 5, 20, 300, 1000}
	for _, hz := range list {
		at[hz] = &tally{name: fmt.Sprintf("preamplifier at %g Hz", hz), limit: "noise under the tones"}
	}
	for seed := range benches(t) {
		settings := draw(seed)
		truth := func(b *virtual.Bench) float64 {
			return float64(b.Actual().Gain) * preamplifierGain(80, settings.Sound.Uneven)
		}
		s, b := open(t, settings)
		f, err := Gain{Input: "if", Method: "divider", Divider: settings.Workshop.Divider, DividerU: settings.Workshop.DividerU}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		v := f.Values[calibration.GainValue]
		divider.add(truth(b), v, 0.001*v.Value.Value)
		tones := s.multitone(gainSeconds, 0.8, highestHz, 37)
		for hz, c := range at {
			g, u := calibration.GainOf(f).At(quantity.Frequency(hz))
			c.add(preamplifierGain(hz, settings.Sound.Uneven)/preamplifierGain(80, settings.Sound.Uneven), calibration.Found(g, g*quantity.Ratio(u)), float64(g)*toneLimit(settings, tones, gainSeconds, float64(b.Actual().IFFullScale)))
		}
		if seed%4 == 0 {
			s, b = open(t, settings)
			f, err = Gain{Input: "if", Method: "difference"}.Run(t.Context(), s)
			if err != nil {
				t.Fatal(seed, err)
			}
			v = f.Values[calibration.GainValue]
			// The virtual output's level steps are exact, so that nothing else can stray.
			if math.Abs(v.Value.Value-truth(b)) > v.Uncertainty.Value {
				t.Errorf("seed %d: gain by level difference %v, truth %g", seed, v, truth(b))
			}
		}
	}
	divider.check(t)
	for _, hz := range list {
		at[hz].check(t)
	}
}

func TestShuntRecoversTheTruth(t *testing.T) {
	resistance := tally{name: "shunt", limit: "load resistor and voltmeter"}
	offset := tally{name: "offset with no load", limit: "noise at the chopping frequency, load and voltmeter"}
	for seed := range benches(t) {
		settings := draw(seed)
		s, b := open(t, settings)
		in := s.Setup.Inputs["sense"]
		in.FullScale, in.FullScaleU = b.Actual().SenseFullScale/quantity.Voltage(highPassGain(400, float64(settings.Sound.Coupling))), tolerance.Percent(0.001)
		s.Setup.Inputs["sense"] = in
		f, err := Shunt{Load: settings.Workshop.Load, LoadU: settings.Workshop.LoadU, Meter: settings.Workshop.DCMeter}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		a := b.Actual()
		v := f.Values[calibration.Resistance]
		resistance.add(float64(a.Shunt), v, math.Hypot(0.001, 0.001)*v.Value.Value)
		o := f.Values[calibration.Offset]
		noise := 2 * float64(settings.Sound.Noise) / math.Sqrt(3*2) * math.Pi / 2 / float64(a.Shunt) / float64(a.SenseGain)
		offset.add(float64(settings.Shunt.Offset)/float64(a.Shunt)/float64(a.SenseGain), o, math.Hypot(noise, math.Hypot(0.001, 0.001)*o.Value.Value))
	}
	resistance.check(t)
	offset.check(t)
}
