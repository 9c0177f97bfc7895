package station_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"sort"
	"strconv"
	"sync"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/virtual"
	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/station"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// memory keeps attempts in memory.
type memory struct{ kept []*record.Attempt }

func (m *memory) Save(_ context.Context, a *record.Attempt) error {
	m.kept = append(m.kept, a)
	a.Number = len(m.kept)
	return nil
}

const coveragePlan = `plan: coverage
revision: 1
module: {kind: single IF, carrier: 10.525 GHz}
limits: none.yaml
steps:
  - supply: 5 V
  - {measure: supply_current, acquire: 0.5 s}
  - {measure: noise_floor, acquire: 6 s, band: [10 Hz, 1 kHz], densities: [10 Hz, 100 Hz, 1 kHz], floor_age: 0 s}
  - {measure: sensitivity, tone: 40 Hz, displacement: 0.20 mm, acquire: 1 s}
  - {measure: response, band: [10 Hz, 1 kHz], tones: 31, reference: 80 Hz, acquire: 4 s}
`

// measureOne runs the coverage plan on the one unit of a bench of its own: modules and errors of
// calibration differ from seed to seed.
func measureOne(t testing.TB, seed int) (*record.Attempt, virtual.Truth) {
	t.Helper()
	s := virtual.Default()
	s.Seed, s.SampleRate = seed, 8000
	s.Faults, s.Outliers, s.Disturbances = virtual.Shares{}, 0, virtual.Probabilities{}
	bench, err := virtual.New(s)
	if err != nil {
		t.Fatal(err)
	}
	bench.Seat("lot", "unit")
	p, err := plan.Parse("plan.yaml", []byte(coveragePlan))
	if err != nil {
		t.Fatal(err)
	}
	f := &attach.File{Station: "test", Nest: "1"}
	kept := &memory{}
	r := &station.Runner{File: f, Setup: setupOf(t, f, bench), Bench: bench.Fixtures(), Plan: p, Limits: &limits.File{Readings: map[string]limits.Limit{}},
		Store: kept, Clock: station.FastClock{}}
	if _, err := r.Run(context.Background(), station.Unit{Lot: "lot", Serial: "unit", Operator: "test"}); err != nil {
		t.Fatal(err)
	}
	return kept.kept[0], bench.Truth()
}

// tally counts, for one reading, how often the interval held the truth.
type tally struct {
	held, count int
	ratio       float64 // sum of U relative to the value
	bias        float64 // sum of error over U
}

// TestIntervalsHoldTheTruth measures virtual units, each on a bench with its own errors of
// calibration, and counts how often value ± U holds the truth. The ordinary run takes a few
// units and asks that no reading be grossly wrong; LOTGATE_COVERAGE=500 asks for 95 ± 2 %.
func TestIntervalsHoldTheTruth(t *testing.T) {
	units := 24
	if v := os.Getenv("LOTGATE_COVERAGE"); v != "" {
		var err error
		if units, err = strconv.Atoi(v); err != nil {
			t.Fatal(err)
		}
	}
	var mu sync.Mutex
	all := map[string]*tally{}
	count := func(name string, value, u, truth float64) {
		mu.Lock()
		defer mu.Unlock()
		if all[name] == nil {
			all[name] = &tally{}
		}
		x := all[name]
		x.count++
		x.ratio += u / math.Abs(value)
		x.bias += (value - truth) / u
		if math.Abs(value-truth) <= u {
			x.held++
		}
	}
	var group sync.WaitGroup
	seeds := make(chan int)
	for range 2 {
		group.Go(func() {
			for seed := range seeds {
				a, truth := measureOne(t, seed)
				for _, r := range a.Readings {
					hold(r, truth, count)
				}
			}
		})
	}
	for seed := 1; seed <= units; seed++ {
		seeds <- 1000 + seed
	}
	close(seeds)
	group.Wait()
	report(t, all, units)
}

// hold compares one reading with the truth.
func hold(r record.Judged, truth virtual.Truth, count func(name string, value, u, truth float64)) {
	if r.Void != nil || r.Missing != "" {
		return
	}
	v, u := r.Value, r.Budget.Expanded
	switch r.Name {
	case "supply_current":
		count(r.Name, v, u, float64(truth.SupplyCurrent(5)))
	case "noise_floor.band":
		count(r.Name, v, u, float64(truth.NoiseBand(10, 1000)))
	case "noise_floor.density(10 Hz)", "noise_floor.density(100 Hz)", "noise_floor.density(1 kHz)":
		f, _ := quantity.ParseAs[quantity.Frequency](r.Name[len("noise_floor.density(") : len(r.Name)-1])
		count(r.Name, v, u, float64(truth.Density(f)))
	case "noise_floor.corner":
		count(r.Name, v, u, float64(truth.Corner))
	case "noise_floor.mains":
		power := 0.0
		for _, h := range truth.Mains {
			power += float64(h * h)
		}
		count(r.Name, v, u, math.Sqrt(power))
	case "sensitivity.echo":
		count(r.Name, v, u, float64(truth.EchoAt(40)))
	case "sensitivity.phase":
		// φ0 is known modulo π: the nearest of its images counts.
		d := math.Remainder(v-float64(truth.Phase), math.Pi)
		count(r.Name, v, u, v-d)
	case "response.upper_edge":
		count(r.Name, v, u, float64(truth.UpperEdge(80)))
	case "response.curve":
		for _, p := range r.Points {
			count(r.Name, p.Value+100, p.Expanded, 100+float64(truth.ResponseAt(quantity.Frequency(p.FrequencyHz), 80)))
		}
	case "response.flatness":
		low, high := math.Inf(1), math.Inf(-1)
		for f := 10.25; f <= 1001.25; f *= 1.01 {
			x := float64(truth.ResponseAt(quantity.Frequency(f), 80))
			low, high = math.Min(low, x), math.Max(high, x)
		}
		count(r.Name, v, u, high-low)
	}
}

func report(t *testing.T, all map[string]*tally, units int) {
	names := make([]string, 0, len(all))
	for n := range all {
		names = append(names, n)
	}
	sort.Strings(names)
	if len(names) < 11 {
		t.Errorf("only %d readings were compared: %v", len(names), names)
	}
	text := fmt.Sprintf("\n%-30s %7s %8s %10s %9s\n", "reading", "n", "held", "mean U", "bias/U")
	for _, n := range names {
		x := all[n]
		share := float64(x.held) / float64(x.count)
		text += fmt.Sprintf("%-30s %7d %6.1f %% %8.2f %% %9.2f\n", n, x.count, 100*share, 100*x.ratio/float64(x.count), x.bias/float64(x.count))
		if units >= 500 && (share < 0.93 || share > 0.97) {
			t.Errorf("%s: the interval held the truth in %.1f %%, not 95 ± 2 %%", n, 100*share)
		}
		// With few units only a gross fault can be told: a chance below 1 in 10 000.
		least := distuv.Binomial{N: float64(units), P: 0.95}
		k := 0
		for least.CDF(float64(k)) < 1e-4 {
			k++
		}
		if share < float64(k)/float64(units) {
			t.Errorf("%s: the interval held the truth in %d of %d only", n, x.held, x.count)
		}
	}
	t.Log(text)
}
