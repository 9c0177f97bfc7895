package station_test

import (
	"context"
	"fmt"
	"math"
	"testing"

	"lotgate/limits/quantity"
	"lotgate/station/plan"
)

// TestEveryMethodAgreesWithTheTruth runs each method of sensitivity and response on one exact virtual
// bench: value ± 1.5 U holds the truth, points of a curve with few exceptions.
func TestEveryMethodAgreesWithTheTruth(t *testing.T) {
	for _, c := range []struct{ name, step string }{
		{"three positions", "{measure: sensitivity, method: positions, positions: 3, tone: 40 Hz, displacement: 0.20 mm, acquire: 1 s}"},
		{"harmonics", "{measure: sensitivity, method: harmonics, tone: 30 Hz, displacement: 1.2 mm, acquire: 1 s}"},
		{"single", "{measure: sensitivity, method: single, phase: %PHASE% rad, tone: 40 Hz, displacement: 0.20 mm, acquire: 1 s}"},
		{"stepped", "{measure: response, method: stepped, tones: 15, acquire: 1 s}"},
		{"sweep", "{measure: response, method: sweep, tones: 15, acquire: 12 s}"},
	} {
		t.Run(c.name, func(t *testing.T) {
			r, bench, _ := ideal(t, shortPlan, shortLimits)
			truth := bench.Truth()
			step := c.step
			if i := len("{measure: sensitivity, method: single, phase: "); c.name == "single" {
				step = step[:i] + fmt.Sprintf("%.6f", float64(truth.Phase)) + step[i+len("%PHASE%"):]
			}
			p, err := plan.Parse("p.yaml", []byte("plan: p\nrevision: 1\nmodule: {kind: single IF, carrier: 10.525 GHz}\nlimits: l\nsteps:\n  - supply: 5 V\n  - "+step+"\n"))
			if err != nil {
				t.Fatal(err)
			}
			r.Plan = p
			attempts, err := r.Run(context.Background(), unit)
			if err != nil {
				t.Fatal(err)
			}
			found := false
			for _, x := range attempts[0].Readings {
				switch x.Name {
				case "sensitivity.echo":
					found = true
					want := float64(truth.EchoAt(40))
					if x.Void != nil || math.Abs(x.Value-want) > 1.5*x.Budget.Expanded+0.002*want {
						t.Errorf("%s, truth %v (%v)", x.Quantity(), quantity.Voltage(want), x.Void)
					}
				case "response.curve":
					found = true
					if len(x.Points) < 12 {
						t.Fatalf("%d points: %s %v", len(x.Points), x.Missing, x.Void)
					}
					off, u := 0, 0.0
					for _, p := range x.Points {
						u = math.Max(u, p.Expanded)
						if math.Abs(p.Value-float64(truth.ResponseAt(quantity.Frequency(p.FrequencyHz), 80))) > 1.5*p.Expanded+0.02 {
							off++
							t.Logf("%g Hz: %.3f ± %.3f dB, truth %.3f", p.FrequencyHz, p.Value, p.Expanded, truth.ResponseAt(quantity.Frequency(p.FrequencyHz), 80))
						}
					}
					if off > 1 || u > 4 { // a sweep of one drive leaves little motion at the top of the band
						t.Errorf("%d of %d points are off, largest U %.2f dB", off, len(x.Points), u)
					}
				}
			}
			if !found {
				t.Errorf("nothing was read: %+v", attempts[0].Readings)
			}
		})
	}
}
