package station_test

import (
	"math"
	"testing"

	"lotgate/fixtures/virtual"
)

// fundamental is the peak of the IF's tone at |sin φ0| = 1, V.
func fundamental(b *virtual.Bench, displacement float64) float64 {
	t, scale := b.Truth(), 1.0
	for i, p := range b.Actual().Displacement { // true over nominal displacement
		scale = float64(p.Value / b.Advertise().Displacement[i].Value)
		break
	}
	beta := 4 * math.Pi * displacement * scale * float64(t.Carrier) / 299792458
	return 2 * math.J1(beta) * float64(t.EchoAt(40))
}

// TestDistortionHoldsTheTruth: a law v + q·v² + r·v³ gives q·A/2 and r·A²/4 of a fundamental of the peak A.
func TestDistortionHoldsTheTruth(t *testing.T) {
	covers(t, 8, "single IF", "  - {measure: distortion}\n", func(s *virtual.Settings) {
		s.Population.Further.Cube.Median = 3000 // that it stands out of its uncertainty
	}, func(b *virtual.Bench) map[string]float64 {
		a := fundamental(b, 0.4e-3)
		return map[string]float64{"distortion.second": float64(b.Truth().Square) * a / 2, "distortion.third": b.Truth().Cube * a * a / 4}
	})
}

// TestNoDistortionIsFoundWhereThereIsNone: the phase modulation's own harmonics are some ten per cent of the
// fundamental, and nothing of them is taken for distortion.
func TestNoDistortionIsFoundWhereThereIsNone(t *testing.T) {
	covers(t, 8, "single IF", "  - {measure: distortion, displacement: 0.6 mm}\n", func(s *virtual.Settings) {
		s.Population.Further.Square.Median, s.Population.Further.Cube.Median = 0, 0
	}, func(b *virtual.Bench) map[string]float64 {
		return map[string]float64{"distortion.second": 0, "distortion.third": 0}
	})
}
