package calibrate

import (
	"context"
	"math"

	"lotgate/fixtures"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// harmonicsOf is how many odd multiples of a chopping frequency are used.
const harmonicsOf = 6

// highestHz is up to where an input's response is looked at.
const highestHz = 2200

// response collects ln(n·a_n) over frequency at all chopping frequencies.
func (l Level) response(ctx context.Context, s *Session, channel int, volts float64) ([]signal.Scattered, error) {
	err := s.connect(ctx, fixtures.Wiring{What: fixtures.ChoppedToInput, Input: channel, Volts: quantity.Voltage(volts)},
		"Set the source back to about %v; it need not be read again.", quantity.Voltage(volts))
	if err != nil {
		return nil, err
	}
	var out []signal.Scattered
	for _, chop := range l.chops() {
		seconds := math.Max(2, 24/chop)
		s.tell("chopping at %v for %.0f s", quantity.Frequency(chop), seconds*float64(s.repeats()))
		t, err := s.choppedTones(ctx, channel, chop, seconds)
		if err != nil {
			return nil, err
		}
		for i, hz := range t.hz {
			n := float64(2*i + 1)
			if v, u, _ := t.odd[i].mean(); hz <= highestHz && v > 10*u {
				out = append(out, signal.Scattered{X: math.Log(hz), Y: math.Log(n * v), Sigma: math.Hypot(u/v, leastRelative)})
			}
		}
	}
	return out, nil
}

// leastRelative is the relative standard uncertainty below which no amplitude is trusted.
const leastRelative = 1e-9

// curve fits the high-pass and what is left over, and fills the file's curve.
func (l Level) curve(f *calibration.File, points []signal.Scattered) error {
	corner := fitCorner(points)
	// Around the corner found: columns are the level and its derivative by ln fc.
	model := func(x float64) float64 { return -0.5 * math.Log1p(math.Exp(2*(corner-x))) }
	shifted := make([]signal.Scattered, len(points))
	for i, p := range points {
		shifted[i] = signal.Scattered{X: p.X, Y: p.Y - model(p.X), Sigma: p.Sigma}
	}
	smooth, err := signal.FitSmooth(shifted, func(x float64) []float64 {
		return []float64{1, -1 / (1 + math.Exp(2*(x-corner)))}
	}, 0.7, 3)
	if err != nil {
		return err
	}
	found := quantity.Frequency(math.Exp(corner))
	f.Values[calibration.HighPass] = calibration.Found(found, found*quantity.Frequency(expanded(cornerU(points, corner)*math.Sqrt(math.Max(1, smooth.Misfit)))))
	reference := math.Log(float64(l.Reference))
	// The curve holds what the high-pass, at the corner as it is written, leaves over.
	written := func(x float64) float64 { return -0.5 * math.Log1p(math.Exp(2*(math.Log(float64(found))-x))) }
	f.Curve = drawn(0.8*float64(l.Lowest), highestHz, quantity.One, func(x float64) (float64, float64) {
		y, u := smooth.Between(x, reference)
		return y + model(x) - model(reference) - written(x), u
	})
	if smooth.Misfit > 4 {
		f.Notes = append(f.Notes, "the input is no plain first-order high-pass: its response is smoothed through the points measured")
	}
	return nil
}

// fitCorner is ln fc of the least squares of level − ½·ln(1 + (fc/f)²), by search and Newton-like
// halving: the level is eliminated.
func fitCorner(points []signal.Scattered) float64 {
	cost := func(corner float64) float64 {
		var sw, sy, syy float64
		for _, p := range points {
			w := 1 / (p.Sigma * p.Sigma)
			y := p.Y + 0.5*math.Log1p(math.Exp(2*(corner-p.X)))
			sw, sy, syy = sw+w, sy+w*y, syy+w*y*y
		}
		return syy - sy*sy/sw
	}
	best, step := math.Log(0.01), 0.5
	for x := best; x < math.Log(200); x += step {
		if cost(x) < cost(best) {
			best = x
		}
	}
	for step > 1e-9 {
		step /= 2
		for _, x := range []float64{best - step, best + step} {
			if cost(x) < cost(best) {
				best = x
			}
		}
	}
	return best
}

// cornerU is the standard uncertainty of ln fc that the points' scatter leaves.
func cornerU(points []signal.Scattered, corner float64) float64 {
	var s0, s1, s2 float64
	for _, p := range points {
		w, g := 1/(p.Sigma*p.Sigma), -1/(1+math.Exp(2*(p.X-corner)))
		s0, s1, s2 = s0+w, s1+w*g, s2+w*g*g
	}
	return math.Sqrt(s0 / (s0*s2 - s1*s1))
}
