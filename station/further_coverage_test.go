package station_test

import (
	"context"
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
	"lotgate/station"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// furtherOne runs steps on the one unit of a bench of its own: modules and errors of calibration
// differ from seed to seed.
func furtherOne(t testing.TB, seed int, kind, steps string, change func(*virtual.Settings)) (*record.Attempt, *virtual.Bench) {
	t.Helper()
	s := virtual.Default()
	s.Seed, s.SampleRate = seed, 8000
	s.Faults, s.Outliers, s.Disturbances = virtual.Shares{}, 0, virtual.Probabilities{}
	if change != nil {
		change(&s)
	}
	bench, err := virtual.New(s)
	if err != nil {
		t.Fatal(err)
	}
	bench.Seat("lot", "unit")
	p, err := plan.Parse("plan.yaml", []byte("plan: further\nrevision: 1\nmodule: {kind: "+kind+", carrier: 10.525 GHz}\nlimits: none.yaml\nsteps:\n  - supply: 5 V\n"+steps))
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
	return kept.kept[0], bench
}

// covers measures virtual units, each on a bench with its own errors of calibration, and counts
// for each reading that truths knows how often value ± U holds the truth. The ordinary run
// takes a few units; LOTGATE_COVERAGE=200 takes so many. A reading fails the test where its
// count has a chance below 1 in 10 000 at a coverage of 95 %, either too few held (the
// interval is too short) or, from 200 units on, too many (it boasts of doubt).
func covers(t *testing.T, few int, kind, steps string, change func(*virtual.Settings), truths func(*virtual.Bench) map[string]float64) {
	t.Helper()
	units := few
	if v := os.Getenv("LOTGATE_COVERAGE"); v != "" {
		var err error
		if units, err = strconv.Atoi(v); err != nil {
			t.Fatal(err)
		}
	}
	var mu sync.Mutex
	atBound := map[string]bool{} // truth at the end of what is possible: an interval holds it more often
	all := map[string]*tally{}
	var group sync.WaitGroup
	seeds := make(chan int)
	for range 2 {
		group.Go(func() {
			for seed := range seeds {
				a, bench := furtherOne(t, seed, kind, steps, change)
				want := truths(bench)
				mu.Lock()
				for _, r := range a.Readings {
					truth, known := want[r.Name]
					if !known {
						continue
					}
					if r.Void != nil || r.Missing != "" {
						t.Errorf("seed %d: %s gave no number: %v %s", seed, r.Name, r.Void, r.Missing)
						continue
					}
					if all[r.Name] == nil {
						all[r.Name] = &tally{}
					}
					x := all[r.Name]
					atBound[r.Name] = truth == 0
					x.count++
					u := r.Budget.Expanded
					x.ratio += u
					x.bias += (r.Value - truth) / u
					if math.Abs(r.Value-truth) <= u {
						x.held++
					}
				}
				mu.Unlock()
			}
		})
	}
	for seed := 1; seed <= units; seed++ {
		seeds <- 2000 + seed
	}
	close(seeds)
	group.Wait()
	names := make([]string, 0, len(all))
	for n := range all {
		names = append(names, n)
	}
	sort.Strings(names)
	for _, n := range names {
		x := all[n]
		t.Logf("%-28s n %4d  held %5.1f %%  mean U %.3g  bias/U %+.2f", n, x.count, 100*float64(x.held)/float64(x.count), x.ratio/float64(x.count), x.bias/float64(x.count))
		b := distuv.Binomial{N: float64(x.count), P: 0.95}
		if b.CDF(float64(x.held)) < 1e-4 {
			t.Errorf("%s: the interval held the truth in %d of %d only", n, x.held, x.count)
		}
		if x.count >= 200 && !atBound[n] && 1-b.CDF(float64(x.held)-1) < 1e-4 {
			t.Errorf("%s: the interval held the truth in %d of %d: it is too long", n, x.held, x.count)
		}
	}
	if len(names) == 0 {
		t.Error("nothing was compared")
	}
}

// idealUnit is a runner of a plan without limits on a virtual bench without errors whose unit has a
// fault.
func idealUnit(t *testing.T, fault, planText string) (*station.Runner, *virtual.Bench, *memory) {
	t.Helper()
	s := virtual.Ideal()
	s.SampleRate = 8000
	s.Units = map[string]string{"unit": fault}
	bench, err := virtual.New(s)
	if err != nil {
		t.Fatal(err)
	}
	bench.Seat("lot", "unit")
	p, err := plan.Parse("plan.yaml", []byte(planText))
	if err != nil {
		t.Fatal(err)
	}
	f := &attach.File{Station: "test", Nest: "1"}
	kept := &memory{}
	return &station.Runner{File: f, Setup: setupOf(t, f, bench), Bench: bench.Fixtures(), Plan: p, Limits: &limits.File{Readings: map[string]limits.Limit{}},
		Store: kept, Clock: station.FastClock{}}, bench, kept
}
