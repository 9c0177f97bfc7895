package station_test

import (
	"context"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lotgate/fixtures"
	"lotgate/fixtures/attach"
	"lotgate/fixtures/virtual"
	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/station"
	"lotgate/station/plan"
	"lotgate/station/record"
	"lotgate/station/starter"
)

const shortPlan = `plan: short
revision: 1
module: {kind: single IF, carrier: 10.525 GHz}
limits: none.yaml
retry: {void: 1, marginal: 1, then: fail}
steps:
  - supply: 5 V
  - {measure: supply_current, acquire: 0.5 s}
  - {measure: sensitivity, tone: 40 Hz, displacement: 0.20 mm, acquire: 1 s}
`

const shortLimits = `limits: short
revision: 1
readings:
  supply_current: {lower: 22 mA, upper: 40 mA}
  sensitivity.echo: {lower: 2 mV, upper: 9 mV}
`

// ideal is a runner on a virtual bench without errors or faults, with its bench and store.
func ideal(t *testing.T, planText, limitsText string) (*station.Runner, *virtual.Bench, *memory) {
	t.Helper()
	s := virtual.Ideal()
	s.SampleRate = 8000
	bench, err := virtual.New(s)
	if err != nil {
		t.Fatal(err)
	}
	bench.Seat("lot", "unit")
	p, err := plan.Parse("plan.yaml", []byte(planText))
	if err != nil {
		t.Fatal(err)
	}
	l, err := limits.Read("limits.yaml", []byte(limitsText), p.UnitOf)
	if err != nil {
		t.Fatal(err)
	}
	kept := &memory{}
	f := &attach.File{Station: "test", Nest: "1"}
	return &station.Runner{File: f, Setup: setupOf(t, f, bench), Bench: bench.Fixtures(), Plan: p, Limits: l, Store: kept, Clock: station.FastClock{}}, bench, kept
}

var unit = station.Unit{Lot: "lot", Serial: "unit", Operator: "test"}

func TestGoodUnitPassesAndBenchIsSafe(t *testing.T) {
	r, bench, kept := ideal(t, shortPlan, shortLimits)
	attempts, err := r.Run(context.Background(), unit)
	if err != nil || len(attempts) != 1 || attempts[0].Verdict != limits.Pass {
		t.Fatalf("%d attempts, %v: %+v", len(attempts), err, attempts)
	}
	if !bench.Quiet() {
		t.Error("the bench is not in its safe state")
	}
	if len(kept.kept) != 1 {
		t.Errorf("%d attempts are kept", len(kept.kept))
	}
	if n := len(attempts[0].Calibrations); n < 5 {
		t.Errorf("only %d calibrations are recorded", n)
	}
}

// soundThat replaces what Acquire does.
type soundThat struct {
	fixtures.Sound
	does func(ctx context.Context, job fixtures.SoundJob) (fixtures.SoundRecord, error)
}

func (s soundThat) Acquire(ctx context.Context, job fixtures.SoundJob) (fixtures.SoundRecord, error) {
	return s.does(ctx, job)
}

// TestEveryWayOutIsSafe breaks a test in every way and looks that the bench is quiet, the attempt
// kept as void, and the reason said.
func TestEveryWayOutIsSafe(t *testing.T) {
	for _, c := range []struct {
		name     string
		does     func(cancel context.CancelFunc) (fixtures.SoundRecord, error)
		reason   string
		attempts int
		isFault  bool
	}{
		{"panic", func(context.CancelFunc) (fixtures.SoundRecord, error) { panic("broken index") }, "broken index", 1, false},
		{"fault", func(context.CancelFunc) (fixtures.SoundRecord, error) {
			return fixtures.SoundRecord{}, &fixtures.Fault{Where: "sound", What: "the device has stopped", Action: "plug it in"}
		}, "the device has stopped", 1, true},
		{"cancelled", func(cancel context.CancelFunc) (fixtures.SoundRecord, error) {
			cancel()
			return fixtures.SoundRecord{}, context.Canceled
		}, "stopped by the operator", 1, false},
		{"disturbed again and again", func(context.CancelFunc) (fixtures.SoundRecord, error) {
			return fixtures.SoundRecord{}, &fixtures.Disturbance{Where: "sound", What: "samples were lost"}
		}, "samples were lost", 2, false},
	} {
		t.Run(c.name, func(t *testing.T) {
			r, bench, kept := ideal(t, shortPlan, shortLimits)
			ctx, cancel := context.WithCancel(context.Background())
			defer cancel()
			r.Bench.Sound = soundThat{r.Bench.Sound, func(context.Context, fixtures.SoundJob) (fixtures.SoundRecord, error) { return c.does(cancel) }}
			attempts, err := r.Run(ctx, unit)
			if len(attempts) != c.attempts {
				t.Fatalf("%d attempts instead of %d", len(attempts), c.attempts)
			}
			for _, a := range attempts {
				if a.Verdict != limits.Void || !strings.Contains(a.Reason, c.reason) {
					t.Errorf("%s: %q does not say %q", a.Verdict, a.Reason, c.reason)
				}
			}
			var fault *fixtures.Fault
			if errors.As(err, &fault) != c.isFault {
				t.Errorf("error %v", err)
			}
			if !bench.Quiet() {
				t.Error("the bench is not in its safe state")
			}
			if len(kept.kept) != c.attempts {
				t.Errorf("%d attempts are kept", len(kept.kept))
			}
		})
	}
}

func TestDisturbedAcquisitionIsTakenAgain(t *testing.T) {
	r, bench, _ := ideal(t, shortPlan, shortLimits)
	bench.Disturb(virtual.Dropout)
	attempts, err := r.Run(context.Background(), unit)
	if err != nil || len(attempts) != 1 || attempts[0].Verdict != limits.Pass {
		t.Fatalf("%d attempts, %v: %s", len(attempts), err, attempts[len(attempts)-1].Reason)
	}
	again := 0
	for _, e := range attempts[0].Events {
		if e.Kind == "void" {
			again++
		}
	}
	if again != 1 {
		t.Errorf("%d acquisitions were taken again instead of 1", again)
	}
}

func TestMarginalUnitIsTriedAgainAndThenCounts(t *testing.T) {
	r, bench, _ := ideal(t, shortPlan, shortLimits)
	truth := bench.Truth()
	at := float64(truth.EchoAt(40))
	l := r.Limits.Readings["sensitivity.echo"]
	l.Lower = &at
	r.Limits.Readings["sensitivity.echo"] = l
	attempts, err := r.Run(context.Background(), unit)
	if err != nil || len(attempts) != 2 {
		t.Fatalf("%d attempts, %v", len(attempts), err)
	}
	if attempts[0].Verdict != limits.Marginal || attempts[1].Verdict != limits.Fail {
		t.Errorf("verdicts %s, %s", attempts[0].Verdict, attempts[1].Verdict)
	}
}

// stepClock does not wait but lets time pass.
type stepClock struct{ now time.Time }

func (c *stepClock) Now() time.Time { return c.now }
func (c *stepClock) Sleep(ctx context.Context, d time.Duration) error {
	c.now = c.now.Add(d)
	return ctx.Err()
}

func TestOpenLidIsNeverPowered(t *testing.T) {
	r, bench, _ := ideal(t, shortPlan, shortLimits)
	r.Clock = &stepClock{time.Unix(1e9, 0)}
	bench.SetLid(false)
	attempts, err := r.Run(context.Background(), unit)
	var fault *fixtures.Fault
	if !errors.As(err, &fault) || attempts[0].Verdict != limits.Void || !strings.Contains(attempts[0].Reason, "lid") {
		t.Errorf("%v: %s", err, attempts[0].Reason)
	}
	if !bench.Quiet() {
		t.Error("the bench is not in its safe state")
	}
}

func TestOverdueCalibrationStopsProduction(t *testing.T) {
	r, _, _ := ideal(t, shortPlan, shortLimits)
	day := func(s string) time.Time { d, _ := time.Parse(time.DateOnly, s); return d }
	r.Setup.States = []attach.CalibrationState{{What: "full scale of input if", Value: 1, Unit: quantity.Volt, Due: day("2026-01-31")}}
	for _, c := range []struct {
		today   string
		allowed bool
		verdict limits.Verdict
		warns   bool
	}{
		{"2026-01-31", false, limits.Pass, false},
		{"2026-02-02", false, limits.Void, false},
		{"2026-02-02", true, limits.Pass, true},
	} {
		r.Clock = &stepClock{day(c.today).Add(12 * time.Hour)}
		r.Plan.AllowOverdue = c.allowed
		attempts, _ := r.Run(context.Background(), unit)
		a := attempts[0]
		if a.Verdict != c.verdict || (len(a.Warnings) > 0) != c.warns {
			t.Errorf("%s, allowed %v: %s %q, warnings %v", c.today, c.allowed, a.Verdict, a.Reason, a.Warnings)
		}
	}
}

// TestKeptCapturesReplayAlike runs the starter plan, keeps the captures, replays them, and holds
// the two results against each other.
func TestKeptCapturesReplayAlike(t *testing.T) {
	dir := t.TempDir()
	if _, err := starter.Write(dir, nil); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "plan.yaml")
	if err := os.WriteFile(path, append(starter.Content("plan.yaml"), "keep_captures: yes\n"...), 0o644); err != nil {
		t.Fatal(err)
	}
	p, err := plan.Read(path)
	if err != nil {
		t.Fatal(err)
	}
	l, data, err := p.ReadLimits()
	if err != nil {
		t.Fatal(err)
	}
	f, err := attach.Read(filepath.Join(dir, "station-virtual.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	attached, err := f.Open(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	defer attached.Close()
	store, err := record.Open(context.Background(), f.StorePath())
	if err != nil {
		t.Fatal(err)
	}
	defer store.Close()
	r := station.NewRunner(f, attached, p, l, data, store, station.FastClock{})
	attached.Virtual.Seat("lot", "a/b")
	attempts, err := r.Run(context.Background(), station.Unit{Lot: "lot", Serial: "a/b", Operator: "test"})
	if err != nil {
		t.Fatal(err)
	}
	last := attempts[len(attempts)-1]
	if last.Captures == "" || len(last.Warnings) > 0 {
		t.Fatalf("the captures were not kept: %v", last.Warnings)
	}
	if filepath.Dir(last.Captures) != filepath.Clean(r.Captures) {
		t.Errorf("a serial number with a slash left the folder: %s", last.Captures)
	}
	again := evaluateFolder(t, last.Captures, l)
	if again.Verdict != last.Verdict || len(again.Readings) != len(last.Readings) {
		t.Fatalf("replay gives %s with %d readings, the test gave %s with %d", again.Verdict, len(again.Readings), last.Verdict, len(last.Readings))
	}
	for i, x := range again.Readings {
		y := last.Readings[i]
		// Conditions go through decimal text, which may move the last bit.
		same := func(a, b float64) bool { return math.Abs(a-b) <= 1e-12*math.Abs(b) }
		if x.Name != y.Name || !same(x.Value, y.Value) || !same(x.Budget.Expanded, y.Budget.Expanded) || x.Verdict != y.Verdict {
			t.Errorf("%s: replay gives %g ± %g %s, the test gave %g ± %g %s", x.Name, x.Value, x.Budget.Expanded, x.Verdict, y.Value, y.Budget.Expanded, y.Verdict)
		}
	}
	// The certificate's code is the same when it is worked out from the store.
	code := record.Fingerprint(last)
	found := ""
	if err := store.Attempts(context.Background(), record.Filter{ID: last.ID}, func(a *record.Attempt) bool { found = record.Fingerprint(a); return true }); err != nil {
		t.Fatal(err)
	}
	if found != code {
		t.Errorf("code %s, from the store %s", code, found)
	}
}

func setupOf(t testing.TB, f *attach.File, bench *virtual.Bench) attach.Setup {
	t.Helper()
	s, err := f.Setup(bench)
	if err != nil {
		t.Fatal(err)
	}
	return s
}
