package calibrate

import (
	"context"
	"errors"
	"fmt"
	"runtime/debug"

	"lotgate/fixtures"
	"lotgate/fixtures/calibration"
)

// Procedure is one guided calibration.
type Procedure interface {
	// Run wires, plays, records and reads, and gives what was found, not yet dated. A *Wrong says
	// what stands in the way.
	Run(ctx context.Context, s *Session) (*calibration.File, error)
}

// Every calibration there is.
var (
	_ Procedure = Level{}
	_ Procedure = Gain{}
	_ Procedure = Shunt{}
	_ Procedure = Target{}
	_ Procedure = Standoff{}
	_ Procedure = Loop{}
)

// Do runs a calibration and brings the bench to its safe state on every way out, its wiring back to
// that of production.
func (s *Session) Do(ctx context.Context, p Procedure) (f *calibration.File, err error) {
	defer func() {
		if r := recover(); r != nil {
			f, err = nil, fmt.Errorf("the program failed while calibrating: %v\n%s", r, debug.Stack())
		}
		if halted := s.halt(ctx); halted != nil {
			f, err = nil, errors.Join(err, fmt.Errorf("the safe state could not be confirmed: switch the supply and the shaker off by hand: %w", halted))
		}
	}()
	f, err = p.Run(ctx, s)
	if err != nil {
		return nil, err
	}
	if err := s.connect(ctx, fixtures.Wiring{What: fixtures.Production}, "Wire all as for testing again."); err != nil {
		return nil, err
	}
	return f, nil
}
