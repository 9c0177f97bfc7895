package calibrate

import (
	"errors"
	"math"
	"strings"
	"testing"

	"lotgate/fixtures/calibration"
	"lotgate/fixtures/virtual"
	"lotgate/station/measure"
)

func TestStandoffRecoversTheTruth(t *testing.T) {
	standoff := tally{name: "standoff", limit: "noise under the tone, stage"}
	phase := tally{name: "φ0", limit: standoff.limit}
	for seed := range benches(t) {
		settings := draw(seed)
		s, b := open(t, settings)
		f, err := Standoff{Carrier: settings.Carrier}.Run(t.Context(), s)
		if err != nil {
			t.Fatal(seed, err)
		}
		distance, angle := scanLimits(t, settings, b.Truth(), float64(b.Actual().Standoff))
		angle = math.Hypot(angle, 2*4*math.Pi*float64(b.Actual().Standoff)*supplyPushing/measure.SpeedOfLight)
		v := f.Values[calibration.Distance]
		standoff.add(float64(b.Actual().Standoff), v, math.Hypot(distance, float64(b.Advertise().StageUncertainty)*v.Value.Value))
		v = f.Values[calibration.Phase]
		// φ0 is told modulo π: the difference is folded.
		truth := v.Value.Value + math.Remainder(float64(b.Truth().Phase)-v.Value.Value, math.Pi)
		phase.add(truth, v, angle)
	}
	standoff.check(t)
	phase.check(t)
}

func TestStandoffRecognisesWhatIsWrong(t *testing.T) {
	for mistake, want := range map[virtual.Mistake]string{virtual.TargetStuck: "does not move", virtual.StageJammed: "jammed"} {
		s, b := open(t, draw(2))
		b.Blunder(mistake)
		_, err := Standoff{Carrier: 10.525e9}.Run(t.Context(), s)
		var w *Wrong
		if !errors.As(err, &w) || !strings.Contains(err.Error(), want) {
			t.Errorf("%s gave %v", mistake, err)
		}
	}
	s, _ := open(t, draw(2))
	s.Setup.Target.Travel = 0.002
	if _, err := (Standoff{Carrier: 10.525e9}).Run(t.Context(), s); err == nil || !strings.Contains(err.Error(), "less than a fringe") {
		t.Errorf("a short travel gave %v", err)
	}
}
