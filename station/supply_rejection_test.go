package station_test

import (
	"strings"
	"testing"

	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
	"lotgate/station/plan"
)

func TestSupplyRejectionHoldsTheTruth(t *testing.T) {
	covers(t, 16, "single IF", "  - {measure: supply_rejection}\n", nil, func(b *virtual.Bench) map[string]float64 {
		return map[string]float64{"supply_rejection": float64(b.Truth().SupplyRejection(85, b.Actual().Standoff))}
	})
}

// TestSupplyRejectionByAStep: the peak of a step through high-pass and low-pass.
func TestSupplyRejectionByAStep(t *testing.T) {
	covers(t, 16, "single IF", "  - {measure: supply_rejection, method: step}\n", nil, func(b *virtual.Bench) map[string]float64 {
		return map[string]float64{"supply_rejection": float64(b.Truth().StepRejection(5, 0.25, b.Actual().Standoff))}
	})
}

// TestSupplyRejectionThatCannotBeSeen says how much there is at least, and gives no number.
func TestSupplyRejectionThatCannotBeSeen(t *testing.T) {
	for _, method := range []string{"tone", "step"} {
		a, _ := furtherOne(t, 4, "single IF", "  - {measure: supply_rejection, method: "+method+"}\n", func(s *virtual.Settings) {
			s.Population.Further.SupplyGain.Median, s.Population.Echo.Median = 0, 1e-9
		})
		if r := a.Readings[0]; r.Void != nil || !strings.Contains(r.Missing, "at least") {
			t.Errorf("%s: %s (%v)", method, r.Quantity(), r.Void)
		}
	}
}

// TestSupplyRejectionNeedsARipple is refused before anything is switched on; a step needs none.
func TestSupplyRejectionNeedsARipple(t *testing.T) {
	for step, want := range map[string]string{"{measure: supply_rejection}": "or write method: step", "{measure: supply_rejection, method: step}": ""} {
		r, _, _ := ideal(t, shortPlan, shortLimits)
		p, err := plan.Parse("p.yaml", []byte("plan: p\nrevision: 1\nmodule: {kind: single IF, carrier: 10.525 GHz}\nlimits: l\nsteps:\n  - supply: 5 V\n  - "+step+"\n"))
		if err != nil {
			t.Fatal(err)
		}
		r.Plan = p
		if _, err := r.Rehearse(); err != nil {
			t.Errorf("%s with a ripple: %v", step, err)
		}
		r.Bench.Ripple = nil
		if _, err := r.Rehearse(); want == "" && err != nil || want != "" && (err == nil || !strings.Contains(err.Error(), want)) {
			t.Errorf("%s without a ripple: %v", step, err)
		}
	}
}

// TestSupplyIsTheStepsAfterAStep: what was changed while recording is changed back.
func TestSupplyIsTheStepsAfterAStep(t *testing.T) {
	a, b := furtherOne(t, 6, "single IF", "  - {measure: supply_rejection, method: step, level: 0.5 V}\n  - {measure: supply_current}\n", nil)
	r := a.Readings[1]
	want := b.Truth().SupplyCurrent(5)
	if d := quantity.Current(r.Value) - want; d > want/100 || d < -want/100 { // 0.5 V would change it by 3 %
		t.Errorf("the current after it is %s, truth %v", r.Quantity(), want)
	}
}
