package station_test

import (
	"math"
	"strings"
	"testing"

	"lotgate/fixtures/virtual"
	"lotgate/station/plan"
)

func secondInput(s *virtual.Settings) { s.Sound.QuadratureInput = 3 }

// quadratureTruths are the ratios and offsets a station should find: what the frame gives is ε·V0·β at the IF.
func quadratureTruths(b *virtual.Bench) map[string]float64 {
	q := b.Truth().Quadrature
	scale := float64(b.Actual().Displacement[0].Value / b.Advertise().Displacement[0].Value)
	v := float64(b.Truth().EchoAt(40)) * 4 * math.Pi * 0.2e-3 * scale * float64(b.Truth().Carrier) / 299792458
	return map[string]float64{"quadrature.gain": float64(q.Gain), "quadrature.phase": float64(q.Phase), "quadrature.correlation": float64(q.Correlation),
		"quadrature.offset_i": float64(q.FrameI) * v, "quadrature.offset_q": float64(q.FrameQ) * v}
}

func TestQuadratureHoldsTheTruth(t *testing.T) {
	covers(t, 8, "two IF", "  - {measure: quadrature}\n", func(s *virtual.Settings) {
		secondInput(s)
		s.Population.Further.Frame.Median = 0.005 // that it stands out of its scatter
	}, quadratureTruths)
}

// TestQuadratureTellsWhichChannelLeads: with the second IF behind instead of before the first, and far from a quarter turn.
func TestQuadratureTellsWhichChannelLeads(t *testing.T) {
	covers(t, 6, "two IF", "  - {measure: quadrature, positions: 8}\n", func(s *virtual.Settings) {
		secondInput(s)
		s.Population.Further.Phase.Median, s.Population.Further.Frame.Median = -1.1, 0.005
	}, quadratureTruths)
}

// TestSecondChannelIsMeasuredAlone: echo, noise and response of the second output.
func TestSecondChannelIsMeasuredAlone(t *testing.T) {
	covers(t, 5, "two IF", `  - {measure: sensitivity, channel: quadrature, tone: 40 Hz, displacement: 0.20 mm}
  - {measure: noise_floor, channel: quadrature, acquire: 4 s}
  - {measure: response, channel: quadrature}
`, secondInput, func(b *virtual.Bench) map[string]float64 {
		v := b.Truth()
		return map[string]float64{"sensitivity.echo": float64(v.EchoAt(40)) * float64(v.Quadrature.Gain), "noise_floor.band": float64(v.NoiseBand(10, 1000))}
	})
}

// TestSecondChannelIsRefusedWhereThereIsNone says so before anything is switched on.
func TestSecondChannelIsRefusedWhereThereIsNone(t *testing.T) {
	head := "plan: p\nrevision: 1\nmodule: {kind: %, carrier: 10.525 GHz}\nlimits: l\nsteps:\n  - supply: 5 V\n  - "
	for _, step := range []string{"{measure: quadrature}", "{measure: noise_floor, channel: quadrature}"} {
		if _, err := plan.Parse("p.yaml", []byte(strings.Replace(head, "%", "single IF", 1)+step+"\n")); err == nil || !strings.Contains(err.Error(), "two IF") {
			t.Errorf("%s of a module with one output: %v", step, err)
		}
		p, err := plan.Parse("p.yaml", []byte(strings.Replace(head, "%", "two IF", 1)+step+"\n"))
		if err != nil {
			t.Fatal(err)
		}
		r, _, _ := ideal(t, shortPlan, shortLimits)
		r.Plan = p
		if _, err := r.Rehearse(); err == nil || !strings.Contains(err.Error(), `no input "quadrature"`) {
			t.Errorf("%s at a station with one IF input: %v", step, err)
		}
	}
}
