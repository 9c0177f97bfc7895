package main

import (
	"context"
	"errors"

	"lotgate/fixtures/attach"
	"lotgate/limits"
	"lotgate/station"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// bench is an opened station with plan, limits and store.
type bench struct {
	file     *attach.File
	attached *attach.Attached
	limits   *limits.File
	store    *record.Store
	runner   *station.Runner
}

// openBench reads all files, opens all devices, and checks that the bench can do the plan.
func openBench(ctx context.Context, stationPath, planPath string) (b *bench, err error) {
	f, err := attach.Read(stationPath)
	if err != nil {
		return nil, err
	}
	p, err := plan.Read(planPath)
	if err != nil {
		return nil, err
	}
	l, data, err := p.ReadLimits()
	if err != nil {
		return nil, err
	}
	b = &bench{file: f, limits: l}
	defer func() {
		if err != nil {
			err = errors.Join(err, b.close())
		}
	}()
	if b.attached, err = f.Open(ctx); err != nil {
		return b, err
	}
	if b.store, err = record.Open(ctx, f.StorePath()); err != nil {
		return b, err
	}
	var clock station.Clock = station.WallClock{}
	if b.attached.Virtual != nil {
		clock = station.FastClock{}
	}
	b.runner = station.NewRunner(f, b.attached, p, l, data, b.store, clock)
	_, err = b.runner.Rehearse()
	return b, err
}

// seat puts a unit into the virtual bench's nest; on real hardware the operator does it.
func (b *bench) seat(lot, serial string) {
	if b.attached.Virtual != nil {
		b.attached.Virtual.Seat(lot, serial)
	}
}

func (b *bench) close() error {
	var all []error
	if b.store != nil {
		all = append(all, b.store.Close())
	}
	if b.attached != nil {
		all = append(all, b.attached.Close())
	}
	return errors.Join(all...)
}
