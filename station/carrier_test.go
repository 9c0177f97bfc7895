package station_test

import (
	"context"
	"math"
	"strings"
	"testing"

	"lotgate/fixtures"
	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
	"lotgate/station/plan"
)

// TestCarrierHoldsTheTruth: f0 from a stage with a scale error of its own that stops a little astray.
func TestCarrierHoldsTheTruth(t *testing.T) {
	covers(t, 8, "single IF", "  - {measure: carrier}\n", nil, func(b *virtual.Bench) map[string]float64 {
		f := float64(b.Truth().Carrier)
		return map[string]float64{"carrier": f, "carrier.wavelength": 299792458 / f / 1.000315}
	})
}

// jammed is a stage that moves only as far as something lets it.
type jammed struct {
	fixtures.Target
	from quantity.Length // it does not go beyond
}

func (j jammed) MoveTo(ctx context.Context, p quantity.Length) error {
	return j.Target.MoveTo(ctx, min(p, j.from))
}

// TestCarrierTellsWhatIsWrong: a stage that jams voids, a module without an echo has no number.
func TestCarrierTellsWhatIsWrong(t *testing.T) {
	for _, c := range []struct {
		name  string
		from  quantity.Length
		fault string
		void  string
		says  string
	}{
		{"jammed at once", -0.03, virtual.Good, "stage", "does not change"},
		{"jammed half way", 0, virtual.Good, "stage", "follows no sine"},
		{"dead", 1, virtual.DeadOscillator, "", "no echo"},
		{"good", 1, virtual.Good, "", ""},
	} {
		r, bench, _ := idealUnit(t, c.fault, "plan: p\nrevision: 1\nmodule: {kind: single IF, carrier: 10.525 GHz}\nlimits: l\nsteps:\n  - supply: 5 V\n  - {measure: carrier}\n")
		r.Bench.Target = jammed{bench.Fixtures().Target, c.from}
		attempts, err := r.Run(context.Background(), unit)
		if err != nil {
			t.Fatal(err)
		}
		x := attempts[0].Readings[0]
		switch {
		case c.void != "":
			if x.Void == nil || x.Void.Code != c.void || !strings.Contains(x.Void.Reason, c.says) {
				t.Errorf("%s: %s, %v", c.name, x.Quantity(), x.Void)
			}
		case c.says != "":
			if x.Void != nil || !strings.Contains(x.Missing, c.says) {
				t.Errorf("%s: %s, %v", c.name, x.Quantity(), x.Void)
			}
		case x.Void != nil || x.Missing != "" || math.Abs(x.Value-float64(bench.Truth().Carrier)) > x.Budget.Expanded:
			t.Errorf("%s: %s, truth %v, %v", c.name, x.Quantity(), bench.Truth().Carrier, x.Void)
		}
	}
}

// TestCarrierNeedsTravel: a plan whose stage does not move a fringe is refused before it runs.
func TestCarrierNeedsTravel(t *testing.T) {
	for step, want := range map[string]string{
		"{measure: carrier, travel: 3 mm}":    "less than a fringe",
		"{measure: carrier, travel: 50 mm}":   "more than the 30 mm",
		"{measure: carrier, positions: 9}":    "too far to follow the fringes: write at least 14",
		"{measure: carrier, travel: 14.5 mm}": "",
	} {
		r, _, _ := ideal(t, shortPlan, shortLimits)
		p, err := plan.Parse("p.yaml", []byte("plan: p\nrevision: 1\nmodule: {kind: single IF, carrier: 10.525 GHz}\nlimits: l\nsteps:\n  - supply: 5 V\n  - "+step+"\n"))
		if err != nil {
			t.Fatal(err)
		}
		r.Plan = p
		if _, err := r.Rehearse(); want == "" && err != nil || want != "" && (err == nil || !strings.Contains(err.Error(), want)) {
			t.Errorf("%s: %v", step, err)
		}
	}
}
