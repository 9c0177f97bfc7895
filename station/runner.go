// Package station runs a plan on a unit at a nest: it drives the fixtures, has the
// captures evaluated and judged, keeps the record, and brings the bench to its safe state
// on every way out.
package station

import (
	"context"
	"errors"
	"fmt"
	"runtime/debug"
	"time"

	"lotgate/fixtures"
	"lotgate/fixtures/attach"
	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/station/measure"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// Saver keeps an attempt; it returns when the attempt is safe on disk.
type Saver interface {
	Save(ctx context.Context, a *record.Attempt) error
}

// Runner runs one plan at one nest.
type Runner struct {
	File    *attach.File
	Setup   attach.Setup
	Bench   fixtures.Bench
	Plan    *plan.Plan
	Limits  *limits.File
	Sources []record.SourceFile // snapshots of the files the attempts are run by
	Store   Saver
	Clock   Clock
	// Ask puts a plan's request to the operator and returns when it is done. Nil: the
	// operator is not asked.
	Ask func(ctx context.Context, text string) error
	// Tell is told each event as it happens; it must not block. Nil: nobody listens.
	Tell func(record.Event)
	// Captures is the folder that attempts' samples are kept in where the plan says so.
	Captures string

	floors map[string]floor // the station's own floor, by step
}

type floor struct {
	capture *measure.Capture
	taken   time.Time
}

// Unit says which unit is tested by whom.
type Unit struct {
	Lot, Serial, Operator string
}

// haltTime is how long the safe state is tried for.
const haltTime = 5 * time.Second

// retakes is how often an acquisition that came out void is taken again within an attempt.
const retakes = 1

// Run tests a unit, with the further attempts the plan allows, and gives all attempts in
// order. Each is saved before it is returned. The error is not nil where the station broke
// (a *fixtures.Fault, the store) or the context ended; the attempt that was under way is then saved as void.
func (r *Runner) Run(ctx context.Context, u Unit) ([]*record.Attempt, error) {
	var all []*record.Attempt
	voids, marginals := 0, 0
	for {
		a, runErr := r.attempt(ctx, u)
		if a.Verdict == limits.Marginal && marginals >= r.Plan.Retry.Marginal && r.Plan.Retry.Then != "marginal" {
			a.Reason = fmt.Sprintf("still marginal after %d attempts, which this plan counts as %s: %s", marginals+1, r.Plan.Retry.Then, a.Reason)
			a.Verdict = limits.Verdict(r.Plan.Retry.Then)
		}
		verdict := record.Event{Time: a.Ended, Kind: "verdict", Text: fmt.Sprintf("%s: %s", a.Verdict, a.Reason)}
		a.Events = append(a.Events, verdict)
		// What was measured is kept even if the caller has given up meanwhile.
		if err := r.Store.Save(context.WithoutCancel(ctx), a); err != nil {
			return all, errors.Join(runErr, fmt.Errorf("attempt on unit %s could not be kept, so its verdict does not count: %w", u.Serial, err))
		}
		if r.Tell != nil { // only now: nobody is told a verdict that is not safe on disk
			r.Tell(verdict)
		}
		all = append(all, a)
		if runErr != nil {
			return all, runErr
		}
		switch {
		case a.Verdict == limits.Void && voids < r.Plan.Retry.Void:
			voids++
		case a.Verdict == limits.Marginal && marginals < r.Plan.Retry.Marginal:
			marginals++
		default:
			return all, nil
		}
	}
}

// attempt runs the plan once. Whatever happens, the bench ends in its safe state and the
// attempt says what happened.
func (r *Runner) attempt(ctx context.Context, u Unit) (a *record.Attempt, err error) {
	a = r.begin(u)
	e := Evaluation{}
	var captures []*measure.Capture
	defer func() {
		if p := recover(); p != nil {
			err = fmt.Errorf("the program failed while testing unit %s: %v\n%s", u.Serial, p, debug.Stack())
		}
		halted := r.halt(ctx, a)
		e.conclude()
		a.Readings, a.Figures, a.Verdict, a.Reason = e.Readings, e.Figures, e.Verdict, e.Reason
		if err != nil {
			a.Verdict, a.Reason = limits.Void, "the test was not finished: "+firstLine(err)
			r.emit(a, "fault", "", a.Reason)
		}
		err = errors.Join(err, halted)
		if r.Plan.KeepCaptures && len(captures) > 0 {
			r.keep(a, captures)
		}
		a.Ended = r.Clock.Now().UTC()
	}()
	if err := r.overdue(a); err != nil {
		return a, err
	}
	captures, err = r.steps(ctx, a, &e)
	return a, err
}

const stoppedText = "it was stopped by the operator"

func firstLine(err error) string {
	var fault *fixtures.Fault
	switch {
	case errors.As(err, &fault):
		return fault.Error()
	case errors.Is(err, context.Canceled):
		return stoppedText
	case errors.Is(err, context.DeadlineExceeded):
		return "it took too long"
	}
	text := err.Error()
	for i, c := range text {
		if c == '\n' {
			return text[:i]
		}
	}
	return text
}

func (r *Runner) begin(u Unit) *record.Attempt {
	return &record.Attempt{ID: record.NewID(), Lot: u.Lot, Serial: u.Serial, Operator: u.Operator, Station: r.File.Station, Nest: r.File.Nest,
		Started: r.Clock.Now().UTC(), Plan: r.Plan.Name, PlanRevision: r.Plan.Revision, Limits: r.Limits.Name, LimitsRev: r.Limits.Revision,
		Files: r.Sources, Virtual: r.Setup.Virtual}
}

// overdue notes the state of all calibrations, and refuses to go on with one overdue
// unless the plan allows it.
func (r *Runner) overdue(a *record.Attempt) error {
	for _, c := range r.Setup.States {
		k := record.Calibration{What: c.What, Value: c.Value, Unit: c.Unit.Symbol, Uncertainty: 2 * c.Uncertainty.Standard(c.Value) * c.Value, Overdue: c.Overdue(r.Clock.Now())}
		if !c.Date.IsZero() {
			k.Date = c.Date.Format(time.DateOnly)
		}
		if !c.Due.IsZero() {
			k.Due = c.Due.Format(time.DateOnly)
		}
		a.Calibrations = append(a.Calibrations, k)
		if !k.Overdue {
			continue
		}
		if !r.Plan.AllowOverdue {
			return &fixtures.Fault{Where: "station " + r.File.Station, What: fmt.Sprintf("the calibration of %s was due on %s", c.What, k.Due), Action: "calibrate it, or write allow_overdue: yes in the plan"}
		}
		a.Warnings = append(a.Warnings, fmt.Sprintf("the calibration of %s was due on %s", c.What, k.Due))
	}
	return nil
}

// emit tells and records an event.
func (r *Runner) emit(a *record.Attempt, kind, step, text string) {
	e := record.Event{Time: r.Clock.Now().UTC(), Kind: kind, Step: step, Text: text}
	if kind != "progress" {
		a.Events = append(a.Events, e)
	}
	if r.Tell != nil {
		r.Tell(e)
	}
}

// halt brings the bench to its safe state, even if the caller has given up.
func (r *Runner) halt(ctx context.Context, a *record.Attempt) error {
	ctx, cancel := context.WithTimeout(context.WithoutCancel(ctx), haltTime)
	defer cancel()
	var all []error
	for _, h := range r.Bench.Halters {
		all = append(all, h.Halt(ctx))
	}
	if err := errors.Join(all...); err != nil {
		r.emit(a, "fault", "", "the safe state could not be confirmed: "+firstLine(err))
		return fmt.Errorf("the safe state could not be confirmed: switch the supply and the shaker off by hand: %w", err)
	}
	r.emit(a, "safe", "", "supply off, target still")
	return nil
}

// steps goes through the plan.
func (r *Runner) steps(ctx context.Context, a *record.Attempt, e *Evaluation) ([]*measure.Capture, error) {
	var captures []*measure.Capture
	supply := quantity.Voltage(0)
	for _, s := range r.Plan.Steps {
		if err := ctx.Err(); err != nil {
			return captures, err
		}
		switch {
		case s.Ask != "":
			r.emit(a, "step", "", s.Ask)
			if r.Ask != nil {
				if err := r.Ask(ctx, s.Ask); err != nil {
					return captures, err
				}
			}
		case s.Measure != nil:
			got, err := r.step(ctx, a, e, s, &supply)
			captures = append(captures, got...)
			if err != nil {
				return captures, err
			}
		default:
			if *s.Supply > 0 && supply == 0 {
				if err := r.freshFloors(ctx, a); err != nil {
					return captures, err
				}
			}
			r.emit(a, "step", "", fmt.Sprintf("supply %v", *s.Supply))
			if err := r.power(ctx, *s.Supply, s.Settle); err != nil {
				return captures, err
			}
			supply = *s.Supply
		}
	}
	return captures, nil
}
