package calibrate

import (
	"context"
	"errors"
	"strings"
	"testing"

	"lotgate/fixtures"
	"lotgate/fixtures/virtual"
)

// TestWrongUseGetsAClearAnswer: each mistake ends in an error that names it, gives no file, and
// leaves the bench in its safe state.
func TestWrongUseGetsAClearAnswer(t *testing.T) {
	nominal := func(s *Session) {
		for role, in := range s.Setup.Inputs {
			in.Nominal = 1
			s.Setup.Inputs[role] = in
		}
	}
	calibrated := func(s *Session) {
		nominal(s)
		for role, in := range s.Setup.Inputs {
			in.FullScale = 1
			s.Setup.Inputs[role] = in
		}
	}
	shunt := Shunt{Load: 150, LoadU: 0.001, Meter: 0.001}
	target := Target{By: "accelerometer", Accelerometer: "sense", Flatness: 0.005, Carrier: 10.525e9}
	for _, c := range []struct {
		name    string
		mistake virtual.Mistake
		before  func(s *Session)
		do      Procedure
		want    string
	}{
		{"peak for effective value", virtual.ReadsPeak, nominal, Level{Input: "if", Method: "ac", Meter: 0.005}, "the meter seems to show the peak"},
		{"mean for effective value", virtual.ReadsAverage, nominal, Level{Input: "if", Method: "ac", Meter: 0.005}, "rectified mean"},
		{"AC range", virtual.WrongRange, nominal, Level{Input: "if", Method: "ac", Meter: 0.005}, "another range"},
		{"DC range", virtual.WrongRange, nominal, Level{Input: "if", Method: "dc", Meter: 0.001}, "another range"},
		{"swapped channel, dc", virtual.WrongInput, nominal, Level{Input: "if", Method: "dc", Meter: 0.001}, "hears nothing"},
		{"swapped channel, ac", virtual.WrongInput, nominal, Level{Input: "if", Method: "ac", Meter: 0.005}, "input"},
		{"no cable", virtual.CableOff, nominal, Gain{Input: "if", Method: "divider", Divider: 201, DividerU: 0.001}, "hears nothing"},
		{"automatic gain, level", virtual.AutomaticGain, nil, Level{Input: "if", Method: "ac", Meter: 0.005}, "automatic gain"},
		{"load read in the wrong range", virtual.WrongRange, calibrated, shunt, "another range"},
		{"shunt before level", "", nominal, shunt, "calibrate level --input sense first"},
		{"target still", virtual.TargetStuck, nil, target, "does not move"},
		{"stage jammed", virtual.StageJammed, nil, Standoff{Carrier: 10.525e9}, "jammed"},
		{"accelerometer reversed", virtual.UpsideDown, nil, target, "upside down"},
		{"accelerometer on the module's input", "", nil, Target{By: "accelerometer", Accelerometer: "if", Flatness: 0.005, Carrier: 10.525e9}, "cannot share input"},
		{"divider of nothing", "", nil, Gain{Input: "if", Method: "divider"}, "not possible"},
		{"unknown input", "", nil, Level{Input: "third"}, `no input "third"`},
	} {
		t.Run(c.name, func(t *testing.T) {
			settings := virtual.Default()
			settings.Disturbances, settings.Faults, settings.Outliers = virtual.Probabilities{}, virtual.Shares{}, 0
			settings.Sound.Coupling = 2.5
			s, b := open(t, settings)
			if c.before != nil {
				c.before(s)
			}
			if c.mistake != "" {
				b.Blunder(c.mistake)
			}
			f, err := s.Do(t.Context(), c.do)
			if err == nil || f != nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got %v, want it to say %q", err, c.want)
			}
			if !b.Quiet() {
				t.Error("the bench is not in its safe state")
			}
		})
	}
}

// TestNullIsSaid: a module that stands on a null at the stage's zero is calibrated all the same,
// and the file says where it stands.
func TestNullIsSaid(t *testing.T) {
	settings := draw(4)
	settings.Population.Phase = virtual.PhaseTrait{Median: 0.05, Spread: 0}
	s, _ := open(t, settings)
	f, err := s.Do(t.Context(), Standoff{Carrier: settings.Carrier})
	if err != nil {
		t.Fatal(err)
	}
	if text := strings.Join(f.Notes, "; "); !strings.Contains(text, "near a null") {
		t.Errorf("notes: %s", text)
	}
}

// leaving stops the calibration at a certain step, as Ctrl-C does.
type leaving struct {
	fixtures.Hands
	cancel context.CancelFunc
	after  int
}

func (l *leaving) Connect(ctx context.Context, w fixtures.Wiring, text string) error {
	if l.after--; l.after < 0 {
		l.cancel()
	}
	return l.Hands.Connect(ctx, w, text)
}

// TestInterruptedHalfWay: whenever it is stopped, no file comes of it and the bench is safe.
func TestInterruptedHalfWay(t *testing.T) {
	for after := range 3 {
		s, b := open(t, draw(1))
		ctx, cancel := context.WithCancel(t.Context())
		defer cancel()
		s.Hands = &leaving{s.Hands, cancel, after}
		f, err := s.Do(ctx, Level{Input: "if", Method: "dc", Meter: 0.001})
		if f != nil || !errors.Is(err, context.Canceled) {
			t.Errorf("stopped at wiring %d: file %v, error %v", after, f != nil, err)
		}
		if !b.Quiet() {
			t.Errorf("stopped at wiring %d: the bench is not in its safe state", after)
		}
	}
}

// TestPlausibleNamesTheMistake holds each known factor against its sentence.
func TestPlausibleNamesTheMistake(t *testing.T) {
	for _, c := range []struct {
		value float64
		want  string // "" where it is taken as it is
	}{
		{1, ""}, {1.05, ""}, {0.95, ""}, {1.41, "peak"}, {0.707, "1/√2"}, {0.9, "rectified mean"}, {10, "another range"}, {0.1, "another range"},
		{0.001, "millivolts"}, {1000, "millivolts"}, {2, "peak to peak"}, {0.5, "one side"}, {1.25, "1.25 times what is expected"},
	} {
		err := plausible("full scale", c.value, 1)
		if c.want == "" && err != nil || c.want != "" && (err == nil || !strings.Contains(err.Error(), c.want)) {
			t.Errorf("%g times what is expected gave %v", c.value, err)
		}
	}
	if err := plausible("full scale", 3, 0); err != nil {
		t.Errorf("where nothing is expected: %v", err)
	}
}
