package calibrate

import (
	"errors"
	"math"
	"strings"
	"testing"

	"lotgate/fixtures/calibration"
	"lotgate/fixtures/virtual"
)

func TestLoopRecoversTheTruth(t *testing.T) {
	latency := tally{name: "latency", limit: "noise under the tones"}
	clock := tally{name: "clock difference", limit: "noise beside the tone"}
	talk := tally{name: "crosstalk", limit: "noise of the other input"}
	noise := tally{name: "input noise", limit: "1/√(B·T)"}
	for seed := range benches(t) {
		settings := draw(seed)
		s, b := open(t, settings)
		for role, in := range s.Setup.Inputs {
			in.FullScale = b.Actual().IFFullScale
			if role == "sense" {
				in.FullScale = b.Actual().SenseFullScale
			}
			s.Setup.Inputs[role] = in
		}
		f, err := Loop{Input: "if"}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		density := float64(settings.Sound.Noise) // V/√Hz at the input
		tone := 0.5 * float64(b.Actual().IFFullScale)
		v := f.Values[calibration.Latency]
		latency.add(float64(settings.Sound.Latency), v, latencyLimit(t, settings, s.multitone(1, 200, 0.35*s.rate(), 31), s.rate(), float64(b.Actual().IFFullScale)))
		v = f.Values[calibration.Clock]
		// Rife & Boorstyn 1974: the variance of a tone's frequency is at least 24·σ²/(a²·T³) with σ² the
		// power density over two (rad²/s²); two halves' phases cost a third more.
		T := loopSeconds
		bound := math.Sqrt(12*density*density/(tone*tone*T*T*T)/3) / (2 * math.Pi * loopHz)
		clock.add(float64(settings.Sound.Clock), v, 2*bound)
		v = f.Values[calibration.Crosstalk]
		talk.add(float64(settings.Sound.Crosstalk), v, 2*density/math.Sqrt(3*T)/tone)
		v = f.Values[calibration.Noise]
		noise.add(density, v, density/math.Sqrt(1500*4))
	}
	for _, c := range []*tally{&latency, &clock, &talk, &noise} {
		c.check(t)
	}
}

func TestLoopRecognisesAutomaticGain(t *testing.T) {
	s, b := open(t, draw(1))
	b.Blunder(virtual.AutomaticGain)
	_, err := Loop{Input: "if"}.Run(t.Context(), s)
	var w *Wrong
	if !errors.As(err, &w) || !strings.Contains(err.Error(), "automatic gain") {
		t.Errorf("an automatic gain gave %v", err)
	}
}
