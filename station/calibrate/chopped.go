package calibrate

import (
	"context"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// squareTones are the first odd multiples of a chopped voltage, and the second, over repeats:
// peaks as fractions of full scale.
type squareTones struct {
	hz      []float64
	odd     []gather
	second  float64 // largest
	scatter float64 // relative, of one repeat's fundamental
}

// choppedTones records a chopped voltage repeatedly and reads its lines one by one. The noise of a
// line is what the repeats scatter by, all lines together: it is the same for all of them.
func (s *Session) choppedTones(ctx context.Context, channel int, chop, seconds float64) (out squareTones, err error) {
	if err := s.Bench.Chopper.Chop(ctx, quantity.Frequency(chop)); err != nil {
		return out, err
	}
	defer func() {
		if stop := s.Bench.Chopper.Chop(context.WithoutCancel(ctx), 0); err == nil {
			err = stop
		}
	}()
	for n := 1.0; n < 2*harmonicsOf && n*chop < 0.42*s.rate(); n += 2 {
		out.hz = append(out.hz, n)
	}
	out.odd = make([]gather, len(out.hz))
	first := 0.0
	for range s.repeats() {
		rec, err := s.record(ctx, nil, []int{channel}, s.frames(seconds), nil)
		if err != nil {
			return out, err
		}
		x := rec.Samples[channel]
		// The controller's clock is not the sound interface's.
		w := signal.RefineTone(x, 2*math.Pi*signal.StrongestNear(x, s.rate(), chop, 0.03)/s.rate())
		first += w * s.rate() / (2 * math.Pi) / float64(s.repeats())
		lines := []float64{2 * w}
		for _, n := range out.hz {
			lines = append(lines, n*w)
		}
		tones := signal.WindowedTones(x, lines)
		out.second = math.Max(out.second, cmplx.Abs(tones[0]))
		for i := range out.odd {
			out.odd[i].values = append(out.odd[i].values, cmplx.Abs(tones[i+1]))
		}
	}
	for i := range out.hz {
		out.hz[i] *= first
	}
	return out, pool(out.odd, &out.scatter)
}

// pool gives all lines the scatter that they show together, and refuses repeats whose strongest
// line differs by far more.
func pool(lines []gather, scatter *float64) error {
	square, dof := 0.0, 0.0
	for _, g := range lines {
		v, _, relative := g.mean()
		n := float64(len(g.values))
		square, dof = square+(n-1)*v*v*relative*relative, dof+n-1
	}
	sigma := math.Sqrt(square / dof)
	for i := range lines {
		lines[i].sigma = math.Max(sigma, 1e-9)
	}
	_, _, *scatter = lines[0].mean()
	return lines[0].agree("the chopped voltage", 1e-3)
}
