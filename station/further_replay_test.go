package station_test

import (
	"context"
	"math"
	"testing"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/virtual"
	"lotgate/limits"
	"lotgate/station"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// TestFurtherMeasurementsReplay keeps the captures of all further measurements and evaluates them again: the
// capture folder holds all that the readings need.
func TestFurtherMeasurementsReplay(t *testing.T) {
	s := virtual.Ideal()
	s.SampleRate, s.Sound.QuadratureInput, s.Sound.Gain, s.Shunt.Gain = 8000, 3, 120, 8
	bench, err := virtual.New(s)
	if err != nil {
		t.Fatal(err)
	}
	bench.Seat("lot", "unit")
	p, err := plan.Parse("plan.yaml", []byte(`plan: further
revision: 1
module: {kind: two IF, carrier: 10.525 GHz}
limits: none.yaml
keep_captures: yes
steps:
  - supply: 5 V
  - {measure: pushing, listen: 2 s, floor_age: 0 s}
  - {measure: carrier, travel: 15 mm}
  - {measure: distortion, positions: 8}
  - {measure: quadrature, positions: 8, listen: 2 s}
  - {measure: startup, acquire: 1 s}
  - {measure: supply_rejection}
  - {measure: supply_rejection, id: supply_rejection_step, method: step}
  - {measure: noise_floor, channel: quadrature, acquire: 2 s}
`))
	if err != nil {
		t.Fatal(err)
	}
	f := &attach.File{Station: "test", Nest: "1"}
	none := &limits.File{Readings: map[string]limits.Limit{}}
	r := &station.Runner{File: f, Setup: setupOf(t, f, bench), Bench: bench.Fixtures(), Plan: p, Limits: none, Store: &memory{}, Clock: station.FastClock{}, Captures: t.TempDir()}
	attempts, err := r.Run(context.Background(), unit)
	if err != nil {
		t.Fatal(err)
	}
	a := attempts[0]
	if len(a.Warnings) > 0 || a.Captures == "" {
		t.Fatalf("the captures were not kept: %v", a.Warnings)
	}
	folder, err := record.ReadFolder(a.Captures)
	if err != nil {
		t.Fatal(err)
	}
	again, err := station.Evaluate(folder.Captures, none)
	if err != nil {
		t.Fatal(err)
	}
	if len(again.Readings) != len(a.Readings) || len(a.Readings) < 20 {
		t.Fatalf("%d readings live, %d from the captures", len(a.Readings), len(again.Readings))
	}
	for i, x := range a.Readings {
		y := again.Readings[i]
		if x.Void != nil {
			t.Errorf("%s is void: %v", x.Name, x.Void)
		}
		if x.Name != y.Name || x.Missing != y.Missing || math.Abs(x.Value-y.Value) > 1e-3*x.Budget.Expanded || math.Abs(x.Budget.Expanded-y.Budget.Expanded) > 1e-3*x.Budget.Expanded {
			t.Errorf("live %s %s %s, from the capture %s %s %s", x.Name, x.Quantity(), x.Missing, y.Name, y.Quantity(), y.Missing)
		}
	}
	if !bench.Quiet() {
		t.Error("the bench is not in its safe state")
	}
}
