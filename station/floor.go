package station

import (
	"context"
	"time"

	"lotgate/limits/quantity"
	"lotgate/station/measure"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// floorSuffix names the capture of the station's own floor after the step it serves.
const floorSuffix = "_station_floor"

// hasFloor tells whether a floor no older than age is at hand for a step.
func (r *Runner) hasFloor(s plan.Step, age quantity.Time) bool {
	f, ok := r.floors[s.ID]
	return ok && age > 0 && r.Clock.Now().Sub(f.taken) <= time.Duration(float64(age)*float64(time.Second))
}

// freshFloors takes all floors that are too old, before the module is powered.
func (r *Runner) freshFloors(ctx context.Context, a *record.Attempt) error {
	for _, s := range r.Plan.Steps {
		if s.Measure == nil {
			continue
		}
		schedule, err := s.Measure.Prepare(r.bench())
		if err != nil || schedule.FloorAge == nil || r.hasFloor(s, *schedule.FloorAge) {
			continue // what cannot be prepared says so when its turn comes
		}
		if err := r.takeFloor(ctx, a, s, schedule); err != nil {
			return err
		}
	}
	return nil
}

// floorWhilePowered switches the module off for the floor and on again.
func (r *Runner) floorWhilePowered(ctx context.Context, a *record.Attempt, s plan.Step, schedule measure.Schedule, supply quantity.Voltage) error {
	const off = 0.3
	if f, ok := r.floors[s.ID]; ok && f.taken.After(a.Started) {
		return nil // taken before this attempt's supply came on
	}
	if err := r.power(ctx, 0, off); err != nil {
		return err
	}
	if err := r.takeFloor(ctx, a, s, schedule); err != nil {
		return err
	}
	return r.power(ctx, supply, 1)
}

// takeFloor records the station's own floor for a step. A floor that comes out void is
// taken again once; the measurement says what it thinks of it.
func (r *Runner) takeFloor(ctx context.Context, a *record.Attempt, s plan.Step, schedule measure.Schedule) error {
	r.emit(a, "step", s.ID, "the station's own floor, module unpowered")
	if err := r.lid(ctx, "while measuring"); err != nil {
		return err
	}
	only := schedule
	only.Acquisitions = append([]measure.Acquisition(nil), schedule.Acquisitions[:1]...)
	only.Acquisitions[0].Supply = nil // off
	only.Conditions.Parts = nil
	delete(r.floors, s.ID)
	var c *measure.Capture
	good := false
	for try := 0; try <= retakes && !good; try++ {
		var err error
		if c, err = r.capture(ctx, a, s, only, 0); err != nil {
			return err
		}
		c.Step += floorSuffix
		result, err := s.Measure.Evaluate(c)
		if err != nil {
			return err
		}
		good = firstVoid(result) == nil
	}
	if r.floors == nil {
		r.floors = map[string]floor{}
	}
	f := floor{capture: c}
	if good { // one that is void serves this unit, whose readings say so, and no other
		f.taken = r.Clock.Now()
	}
	r.floors[s.ID] = f
	return nil
}

// keep writes the attempt's captures; where that fails the attempt says so and counts all
// the same.
func (r *Runner) keep(a *record.Attempt, captures []*measure.Capture) {
	f := record.Folder{Version: record.FolderVersion, Lot: a.Lot, Serial: a.Serial, Station: a.Station, Plan: a.Plan, Attempt: a.ID,
		Started: a.Started.Format(time.RFC3339), SampleRate: r.Setup.Rate, Carrier: r.Plan.Module.Carrier, Captures: captures}
	dir, err := record.WriteFolder(r.Captures, &f)
	if err != nil {
		a.Warnings = append(a.Warnings, "the captures could not be kept: "+err.Error())
		return
	}
	a.Captures = dir
}
