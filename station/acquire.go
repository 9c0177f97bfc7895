package station

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"lotgate/fixtures"
	"lotgate/limits/quantity"
	"lotgate/station/measure"
	"lotgate/station/plan"
	"lotgate/station/record"
	"lotgate/station/signal"
)

// bench is what measurements must know of this station.
func (r *Runner) bench() measure.Bench {
	t := r.Setup.Target
	b := measure.Bench{Module: r.Plan.Module, SampleRate: r.Setup.Rate, Standoff: t.Standoff, Mains: r.Setup.Mains,
		PerVolt: t.PerVolt, Largest: t.Largest, LargestDrive: t.FullScale, Travel: t.Travel, Ripple: r.Bench.Ripple != nil}
	if r.Setup.Shunt != nil {
		b.Chop = r.Setup.Shunt.Chop
	}
	return b
}

// Rehearse checks that this station can do every step of its plan, and describes it.
func (r *Runner) Rehearse() (plan.Description, error) {
	b := r.bench()
	d, err := r.Plan.Describe(&b)
	if err != nil {
		return d, err
	}
	for _, s := range r.Plan.Steps {
		if s.Measure == nil {
			continue
		}
		schedule, err := s.Measure.Prepare(b)
		if err != nil {
			return d, err
		}
		for _, q := range schedule.Acquisitions {
			for _, role := range q.Roles {
				if _, ok := r.Setup.Inputs[role]; !ok {
					return d, fmt.Errorf("%s:%d: %s: this station has no input %q: add it under inputs in the station file", r.Plan.Path(), s.Line, s.ID, role)
				}
			}
		}
	}
	return d, nil
}

// power sets the supply, the lid being closed, and waits.
func (r *Runner) power(ctx context.Context, v quantity.Voltage, settle quantity.Time) error {
	if v == 0 {
		if err := r.Bench.Supply.Off(ctx); err != nil {
			return err
		}
		return r.wait(ctx, settle)
	}
	if err := r.lid(ctx, "before the supply is switched on"); err != nil {
		return err
	}
	if err := r.Bench.Supply.SetVoltage(ctx, v); err != nil {
		return err
	}
	return r.wait(ctx, settle)
}

func (r *Runner) wait(ctx context.Context, t quantity.Time) error {
	return r.Clock.Sleep(ctx, time.Duration(float64(t)*float64(time.Second)))
}

// lidWait is how long an open lid is waited for, lidPoll how often it is looked at.
const (
	lidWait = 60 * time.Second
	lidPoll = 200 * time.Millisecond
)

// lid waits for the lid to be closed, where the station honours it.
func (r *Runner) lid(ctx context.Context, when string) error {
	if !r.Setup.Lid || r.Bench.Interlock == nil {
		return nil
	}
	for waited := time.Duration(0); ; waited += lidPoll {
		closed, err := r.Bench.Interlock.LidClosed(ctx)
		if err != nil || closed {
			return err
		}
		if waited >= lidWait {
			return &fixtures.Fault{Where: "lid", What: "it is open " + when, Action: "close the lid and start again"}
		}
		if waited == 0 && r.Tell != nil {
			r.Tell(record.Event{Time: r.Clock.Now().UTC(), Kind: "step", Text: "close the lid"})
		}
		if err := r.Clock.Sleep(ctx, lidPoll); err != nil {
			return err
		}
	}
}

// step takes one measuring step: its acquisitions, again where they came out void, and its
// readings.
func (r *Runner) step(ctx context.Context, a *record.Attempt, e *Evaluation, s plan.Step, supply *quantity.Voltage) (got []*measure.Capture, err error) {
	at := *supply
	if s.Supply != nil && *s.Supply != at {
		if err := r.power(ctx, *s.Supply, s.Settle); err != nil {
			return nil, err
		}
		defer func() {
			if err == nil {
				err = r.power(ctx, *supply, s.Settle)
			}
		}()
		at = *s.Supply
	}
	schedule, err := s.Measure.Prepare(r.bench())
	if err != nil {
		return nil, fmt.Errorf("%s:%d: %s: %w", r.Plan.Path(), s.Line, s.ID, err)
	}
	if schedule.FloorAge != nil && !r.hasFloor(s, *schedule.FloorAge) {
		if err := r.floorWhilePowered(ctx, a, s, schedule, at); err != nil {
			return nil, err
		}
	}
	r.emit(a, "step", s.ID, "measuring "+s.ID)
	var c *measure.Capture
	var result measure.Result
	for try := 0; ; try++ {
		c, err = r.capture(ctx, a, s, schedule, at)
		var disturbed *fixtures.Disturbance
		switch {
		case errors.As(err, &disturbed):
			result = voidResult(s, &measure.Void{Code: "disturbance", Reason: disturbed.Error(), Action: "take it again"})
			c = nil
		case err != nil:
			return nil, err
		default:
			if result, err = s.Measure.Evaluate(c); err != nil {
				return nil, err
			}
		}
		v := firstVoid(result)
		if v == nil || try >= retakes {
			break
		}
		r.emit(a, "void", s.ID, "taken again: "+v.Reason)
	}
	if err := e.add(result, r.Limits); err != nil {
		return nil, err
	}
	for _, j := range e.Readings[len(e.Readings)-len(result.Readings):] {
		text := fmt.Sprintf("%s %s", j.Name, j.Quantity())
		if j.Void != nil {
			text = j.Name + " void: " + j.Void.Reason
		}
		r.emit(a, "reading", s.ID, text)
	}
	if c == nil {
		return nil, nil
	}
	if c.Floor != nil {
		got = append(got, c.Floor)
	}
	return append(got, c), nil
}

func voidResult(s plan.Step, v *measure.Void) measure.Result {
	var out measure.Result
	for _, o := range s.Measure.Readings() {
		out.Readings = append(out.Readings, measure.Reading{Name: s.ID + o.Suffix, Unit: o.Unit.Symbol, Curve: o.Curve, Void: v})
	}
	return out
}

func firstVoid(r measure.Result) *measure.Void {
	for _, x := range r.Readings {
		if x.Void != nil {
			return x.Void
		}
	}
	return nil
}

// capture takes all acquisitions of a schedule and gathers them with their conditions.
func (r *Runner) capture(ctx context.Context, a *record.Attempt, s plan.Step, schedule measure.Schedule, supply quantity.Voltage) (c *measure.Capture, err error) {
	c = &measure.Capture{Conditions: schedule.Conditions, Parameters: s.Measure}
	c.Step, c.Measure, c.Carrier = s.ID, s.Kind, r.Plan.Module.Carrier
	c.Supply = measure.SupplyState{Given: true, Off: supply == 0, Voltage: supply}
	r.calibrate(c, schedule)
	if f, ok := r.floors[s.ID]; ok && schedule.FloorAge != nil {
		c.Floor, c.StationFloor = f.capture, f.capture.Step
	}
	if schedule.Reported {
		return c, r.reported(ctx, c)
	}
	present := supply
	defer func() { // a recording that is to be taken again starts from the step's supply
		var fault *fixtures.Fault
		if present != supply && ctx.Err() == nil && !errors.As(err, &fault) {
			err = errors.Join(err, r.power(ctx, supply, s.Settle))
		}
	}()
	for i, q := range schedule.Acquisitions {
		if want := orElse(q.Supply, supply); want != present {
			present = want
			if err := r.power(ctx, want, s.Settle); err != nil {
				return nil, err
			}
		}
		if err := r.lid(ctx, "while measuring"); err != nil {
			return nil, err
		}
		done := func(share float64) {
			r.emit(a, "progress", s.ID, fmt.Sprintf("%s %.0f %%", q.What, 100*(float64(i)+share)/float64(len(schedule.Acquisitions))))
		}
		done(0)
		var event func(context.Context) error
		if q.Event != nil {
			present = orElse(q.Event.Voltage, supply) + q.Event.By
			event = func(ctx context.Context) error { return r.power(ctx, present, 0) }
		}
		signals, err := r.acquire(ctx, q, event, done)
		if err != nil {
			return nil, err
		}
		c.Signals = append(c.Signals, signals)
	}
	return c, nil
}

func orElse(v *quantity.Voltage, other quantity.Voltage) quantity.Voltage {
	if v != nil {
		return *v
	}
	return other
}

func (r *Runner) reported(ctx context.Context, c *measure.Capture) error {
	if r.Bench.Meter == nil {
		return &fixtures.Fault{Where: "supply", What: "it does not report its current", Action: "write using: chopped in the plan, or name a meter in the station file"}
	}
	v, err := r.Bench.Meter.Current(ctx)
	c.Reported = &v
	return err
}

// acquire brings the target into motion, records, and stills it again. event is what happens
// in the middle, nil for nothing.
func (r *Runner) acquire(ctx context.Context, q measure.Acquisition, event func(context.Context) error, progress func(float64)) (signals map[string]measure.Signal, err error) {
	job := fixtures.SoundJob{Frames: q.Frames, Lead: int(math.Ceil(float64(q.Settle) * float64(r.Setup.Rate))), Progress: progress}
	for _, role := range q.Roles {
		in, ok := r.Setup.Inputs[role]
		if !ok {
			return nil, &fixtures.Fault{Where: "station file", What: fmt.Sprintf("no input is named %q", role), Action: "add it under inputs"}
		}
		job.Inputs = append(job.Inputs, in.Channel)
	}
	if event != nil {
		job.At, job.Do = q.Event.At, event
	}
	moving := len(q.Tones) > 0 || q.Sweep != nil
	if r.Bench.Target != nil {
		if moving {
			if err := r.Bench.Target.MoveTo(ctx, q.Position); err != nil {
				return nil, err
			}
		}
		if err := r.Bench.Target.Shake(ctx, moving); err != nil {
			return nil, err
		}
		if moving {
			defer func() { err = errors.Join(err, r.still(ctx)) }()
		}
	}
	if q.Chop {
		if r.Bench.Chopper == nil {
			return nil, &fixtures.Fault{Where: "station file", What: "no device chops the sense voltage", Action: "name one under use: {chopper: …}"}
		}
		if err := r.Bench.Chopper.Chop(ctx, r.Setup.Shunt.Chop); err != nil {
			return nil, err
		}
		defer func() { err = errors.Join(err, r.Bench.Chopper.Chop(context.WithoutCancel(ctx), 0)) }()
	}
	if q.Ripple != nil {
		if r.Bench.Ripple == nil {
			return nil, &fixtures.Fault{Where: "station file", What: "no device puts a ripple on the supply", Action: "name one under use: {ripple: …}"}
		}
		defer func() {
			err = errors.Join(err, r.Bench.Ripple.Ripple(context.WithoutCancel(ctx), q.Ripple.Frequency, 0))
		}()
		if err := r.Bench.Ripple.Ripple(ctx, q.Ripple.Frequency, q.Ripple.Peak); err != nil {
			return nil, err
		}
	}
	if moving {
		job.Play = map[int][]float32{r.Setup.Target.Channel: r.drive(q)}
		job.Once = q.Sweep != nil
	}
	rec, err := r.Bench.Sound.Acquire(ctx, job)
	if err != nil {
		return nil, err
	}
	signals = map[string]measure.Signal{}
	for i, role := range q.Roles {
		samples := rec.Samples[job.Inputs[i]]
		if len(samples) != q.Frames {
			return nil, &fixtures.Disturbance{Where: "sound", What: fmt.Sprintf("%d frames were recorded instead of %d", len(samples), q.Frames)}
		}
		signals[role] = measure.Signal{Samples: samples, Rate: float64(r.Setup.Rate)}
	}
	return signals, nil
}

// still mutes the shaker and brings the stage back, even if the caller has given up.
func (r *Runner) still(ctx context.Context) error {
	ctx, cancel := context.WithTimeout(context.WithoutCancel(ctx), haltTime)
	defer cancel()
	return r.Bench.Target.Shake(ctx, false)
}

// drive is one period of the shaker's signal, in fractions of the output's full scale.
func (r *Runner) drive(q measure.Acquisition) []float32 {
	t := r.Setup.Target
	fraction := func(tone measure.Tone) float64 {
		return float64(tone.Displacement) / float64(t.PerVolt(tone.Frequency)) / float64(t.FullScale)
	}
	var x []float64
	if q.Sweep != nil {
		x = measure.SweepSamples(*q.Sweep, float64(r.Setup.Rate), q.Frames)
		for i := range x {
			x[i] *= fraction(q.Tones[0])
		}
	} else {
		lines := make([]int, len(q.Tones))
		amplitude, phase := make([]float64, len(q.Tones)), make([]float64, len(q.Tones))
		for i, tone := range q.Tones {
			lines[i] = int(math.Round(float64(tone.Frequency) * float64(q.Period) / float64(r.Setup.Rate)))
			amplitude[i], phase[i] = fraction(tone), float64(tone.Phase)
		}
		x = signal.Multitone(lines, amplitude, phase, q.Period)
	}
	out := make([]float32, len(x))
	for i, v := range x {
		out[i] = float32(v)
	}
	return out
}
