package station_test

import (
	"math/rand/v2"
	"strings"
	"testing"

	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
)

// TestStartupHoldsTheTruth: a step through the IF's filters, the oscillator's later start, the current's decay.
func TestStartupHoldsTheTruth(t *testing.T) {
	covers(t, 16, "single IF", "  - {measure: startup, coupling: 0.2 Hz}\n", func(s *virtual.Settings) {
		s.Sound.Gain, s.Shunt.Gain = 120, 8 // that no unit reaches full scale
		// What the mixer makes of the plate where it stands is part of the step: it stands where the truth has it.
		s.Target.Repeatability, s.Calibration.Supply = 0, 0
		r := rand.New(rand.NewPCG(uint64(s.Seed), 51))
		s.Sound.Coupling = quantity.Frequency(0.2 * (1 + 0.025*r.NormFloat64())) // known to 5 % at k = 2
	}, func(b *virtual.Bench) map[string]float64 {
		v := b.Truth()
		return map[string]float64{"startup.if": float64(v.IFSettles(5, 0.2e-3, b.Actual().Standoff)), "startup.current": float64(v.CurrentSettles(0.02))}
	})
}

// TestStartupTooShortGivesNoNumber: a slow module in a short record.
func TestStartupTooShortGivesNoNumber(t *testing.T) {
	a, _ := furtherOne(t, 3, "single IF", "  - {measure: startup, acquire: 0.3 s}\n  - {measure: supply_current}\n", func(s *virtual.Settings) {
		s.Population.Further.Settle.Median, s.Population.HighPass.Median = 0.3, 0.4
	})
	for _, r := range a.Readings[:2] {
		if r.Void != nil || !strings.Contains(r.Missing, "record longer") {
			t.Errorf("%s: %s (%v)", r.Name, r.Quantity(), r.Void)
		}
	}
	// The step after it finds the supply on.
	if r := a.Readings[2]; r.Name != "supply_current" || r.Void != nil || r.Value < 0.02 {
		t.Errorf("after it: %s %s %v", r.Name, r.Quantity(), r.Void)
	}
}

// TestStartupOfNothingIsVoid: no current comes on where the sense amplifier is dead.
func TestStartupOfNothingIsVoid(t *testing.T) {
	a, _ := furtherOne(t, 3, "single IF", "  - {measure: startup}\n", func(s *virtual.Settings) { s.Population.Current.Median = 1e-12 })
	for _, r := range a.Readings {
		if r.Void == nil || r.Void.Code != "silent" {
			t.Errorf("%s: %s (%v)", r.Name, r.Quantity(), r.Void)
		}
	}
}
