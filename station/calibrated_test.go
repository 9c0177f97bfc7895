package station_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/virtual"
	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/station"
	"lotgate/station/calibrate"
	"lotgate/station/measure"
	"lotgate/station/plan"
	"lotgate/station/record"
	"lotgate/station/starter"
)

// widePlan reads down to 1 Hz.
const widePlan = `plan: down to 1 Hz
revision: 1
module: {kind: single IF, carrier: 10.525 GHz}
limits: none.yaml
retry: {void: 0, marginal: 0, then: marginal}
steps:
  - supply: 5 V
    settle: 1 s
  - measure: supply_current
  - measure: noise_floor
    acquire: 30 s
    band: [1 Hz, 1 kHz]
    densities: [1 Hz, 10 Hz, 100 Hz, 1 kHz]
  - measure: sensitivity
    tone: 40 Hz
    displacement: 0.2 mm
    acquire: 2 s
  - measure: response
    band: [1 Hz, 1 kHz]
    tones: 31
    reference: 80 Hz
    acquire: 20 s
`

// fromScratch calibrates a bench that nothing is known of, writes the files as the command
// does, and opens its station file.
func fromScratch(t testing.TB, seed int) (*attach.File, *attach.Attached) {
	t.Helper()
	r := rand.New(rand.NewPCG(uint64(seed), 5))
	between := func(a, b float64) float64 { return a + (b-a)*r.Float64() }
	text := strings.Replace(string(starter.Content("station-new.yaml")), "seed: 11", fmt.Sprintf("seed: %d\n  outliers: 0\n  faults: {dead_oscillator: 0, deaf: 0, noisy: 0, hum: 0, wrong_current: 0, narrow_response: 0}\n  disturbances: {walk_by: 0, dropout: 0}", seed+11), 1)
	text = strings.Replace(text, "change: 4 %", fmt.Sprintf("change: %.2f %%", between(-5, 5)), 1)
	text = strings.Replace(text, "quality: 1.1", fmt.Sprintf("quality: %.2f", between(0.7, 1.6)), 1)
	path := filepath.Join(t.TempDir(), "station.yaml")
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	f, err := attach.Read(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.MkdirAll(f.CalibrationFolder(), 0o755); err != nil {
		t.Fatal(err)
	}
	w := f.Virtual.Workshop
	for i, p := range []calibrate.Procedure{
		calibrate.Level{Input: "if", Method: "dc", Meter: w.DCMeter},
		calibrate.Level{Input: "sense", Method: "dc", Meter: w.DCMeter},
		calibrate.Gain{Input: "if", Method: "divider", Divider: w.Divider, DividerU: w.DividerU},
		calibrate.Shunt{Load: w.Load, LoadU: w.LoadU, Meter: w.DCMeter},
		calibrate.Standoff{Carrier: f.Virtual.Carrier},
		calibrate.Target{By: "accelerometer", Accelerometer: "sense", Flatness: w.Flatness, Carrier: f.Virtual.Carrier, CarrierU: 4e-4},
	} {
		a, err := f.OpenToCalibrate(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		a.Virtual.Seat("calibration", "reference")
		s := &calibrate.Session{Bench: a.Bench, Setup: a.Setup, Hands: a.Virtual.Hands(), Wait: func(ctx context.Context, _ quantity.Time) error { return ctx.Err() }}
		found, err := s.Do(t.Context(), p)
		if err != nil {
			t.Fatalf("calibration %d: %v", i, err)
		}
		found.Stamp(time.Date(2026, 11, 1, 8, i, 0, 0, time.UTC), 12)
		data, err := found.Bytes()
		if err != nil {
			t.Fatal(err)
		}
		if _, err := record.WriteNew(filepath.Join(f.CalibrationFolder(), found.FileName()), data); err != nil {
			t.Fatal(err)
		}
	}
	a, err := f.Open(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	return f, a
}

// TestModuleAfterCalibrationFromScratch: a module's readings agree with its truth after every
// value of the bench was found by calibration, down to 1 Hz.
func TestModuleAfterCalibrationFromScratch(t *testing.T) {
	runs := 3
	if n, err := strconv.Atoi(os.Getenv("LOTGATE_COVERAGE")); err == nil {
		runs = n
	}
	if testing.Short() {
		runs = 1
	}
	counts := map[string]*[2]int{}
	tell := func(name string, value, truth, expanded float64) {
		if counts[name] == nil {
			counts[name] = &[2]int{}
		}
		counts[name][1]++
		if math.Abs(value-truth) <= expanded {
			counts[name][0]++
		}
		if math.Abs(value-truth) > 2*expanded {
			t.Errorf("%s: %g, truth %g, U %g", name, value, truth, expanded)
		}
	}
	for seed := range runs {
		f, a := fromScratch(t, seed)
		p, err := plan.Parse("plan.yaml", []byte(widePlan))
		if err != nil {
			t.Fatal(err)
		}
		r := &station.Runner{File: f, Setup: a.Setup, Bench: a.Bench, Plan: p, Limits: &limits.File{Readings: map[string]limits.Limit{}}, Store: discard{}, Clock: station.FastClock{}}
		serial := fmt.Sprintf("U%d", seed)
		a.Virtual.Seat("L", serial)
		truth := a.Virtual.Truth()
		attempts, err := r.Run(t.Context(), station.Unit{Lot: "L", Serial: serial, Operator: "test"})
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range attempts[0].Readings {
			holdUnit(t, x, truth, tell)
		}
	}
	for name, c := range counts {
		share := float64(c[0]) / float64(c[1])
		t.Logf("%-28s inside U %5.1f %% of %d", name, 100*share, c[1])
		// Chance allows three standard deviations of a share of so many; a few tell nothing.
		if slack := 0.02 + 3*math.Sqrt(0.95*0.05/float64(c[1])); c[1] >= 20 && share < 0.95-slack {
			t.Errorf("%s: only %.1f %% inside U", name, 100*share)
		}
	}
}

type discard struct{}

func (discard) Save(context.Context, *record.Attempt) error { return nil }

// holdUnit holds a reading against the unit's truth.
func holdUnit(t *testing.T, x record.Judged, truth virtual.Truth, tell func(name string, value, truth, expanded float64)) {
	t.Helper()
	if x.Void != nil {
		t.Errorf("%s is void: %s", x.Name, x.Void.Reason)
		return
	}
	if x.Missing != "" {
		return
	}
	switch x.Name {
	case "supply_current":
		tell(x.Name, x.Value, float64(truth.SupplyCurrent(5)), x.Budget.Expanded)
	case "noise_floor.band":
		tell(x.Name, x.Value, float64(truth.NoiseBand(1, 1000)), x.Budget.Expanded)
	case "noise_floor.corner":
		tell(x.Name, x.Value, float64(truth.Corner), x.Budget.Expanded)
	case "sensitivity.echo":
		tell(x.Name, x.Value, float64(truth.EchoAt(40)), x.Budget.Expanded)
	case "response.lower_edge":
		tell(x.Name, x.Value, float64(truth.LowerEdge(80)), x.Budget.Expanded)
	case "response.upper_edge":
		tell(x.Name, x.Value, float64(truth.UpperEdge(80)), x.Budget.Expanded)
	case "response.curve":
		reference := nearest(x.Reading, 80)
		for _, p := range x.Points {
			tell(x.Name, p.Value, float64(truth.ResponseAt(quantity.Frequency(p.FrequencyHz), quantity.Frequency(reference))), p.Expanded)
		}
	default:
		if inner, ok := strings.CutPrefix(x.Name, "noise_floor.density("); ok {
			hz, err := quantity.ParseAs[quantity.Frequency](strings.TrimSuffix(inner, ")"))
			if err != nil {
				t.Fatal(err)
			}
			tell(x.Name, x.Value, float64(truth.Density(hz)), x.Budget.Expanded)
		}
	}
}

func nearest(r measure.Reading, hz float64) float64 {
	best := math.Inf(1)
	for _, p := range r.Points {
		if math.Abs(math.Log(p.FrequencyHz/hz)) < math.Abs(math.Log(best/hz)) {
			best = p.FrequencyHz
		}
	}
	return best
}
