package station_test

import (
	"math"
	"testing"

	"lotgate/fixtures/virtual"
)

// TestPushingHoldsTheTruth: the quantities are linear in the supply, so that the quotient relative to
// the mean is slope/(1 + slope·(middle − 5 V)).
func TestPushingHoldsTheTruth(t *testing.T) {
	covers(t, 12, "single IF", "  - {measure: pushing, floor_age: 0 s}\n", nil, func(b *virtual.Bench) map[string]float64 {
		p := b.Truth().Pushing
		return map[string]float64{"pushing.echo": float64(p.Echo), "pushing.current": float64(p.Current), "pushing.noise": float64(p.Noise)}
	})
}

// TestPushingTellsADeadOscillator: where there is no echo there is no number, but current and noise have one.
func TestPushingTellsADeadOscillator(t *testing.T) {
	a, _ := furtherOne(t, 5, "single IF", "  - {measure: pushing, listen: 3 s}\n", func(s *virtual.Settings) { s.Units = map[string]string{"unit": virtual.DeadOscillator} })
	found := 0
	for _, r := range a.Readings {
		switch r.Name {
		case "pushing.echo":
			found++
			if r.Missing == "" || r.Void != nil {
				t.Errorf("a dead oscillator's echo changes by %s (%v)", r.Quantity(), r.Void)
			}
		case "pushing.current":
			found++
			if r.Missing != "" || r.Void != nil || math.Abs(r.Value) > 0.2 {
				t.Errorf("its current: %s (%v)", r.Quantity(), r.Void)
			}
		}
	}
	if found != 2 {
		t.Errorf("%d readings: %+v", found, a.Readings)
	}
}
