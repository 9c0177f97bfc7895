package station

import (
	"context"
	"time"
)

// Clock is time, so that tests and the virtual bench need not wait.
type Clock interface {
	Now() time.Time
	// Sleep waits for d or until the context ends, which it returns.
	Sleep(ctx context.Context, d time.Duration) error
}

// WallClock is the real time.
type WallClock struct{}

// Now is the present time.
func (WallClock) Now() time.Time { return time.Now() }

// Sleep waits.
func (WallClock) Sleep(ctx context.Context, d time.Duration) error {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
		return ctx.Err()
	case <-ctx.Done():
		return ctx.Err()
	}
}

// FastClock is the real time without waiting, for a bench that needs none.
type FastClock struct{ WallClock }

// Sleep returns at once.
func (FastClock) Sleep(ctx context.Context, _ time.Duration) error { return ctx.Err() }
