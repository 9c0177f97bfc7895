package calibrate

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"

	"lotgate/fixtures"
	"lotgate/limits/quantity"
)

// moduleSupply is the supply that a module used for calibrating is run at.
const moduleSupply quantity.Voltage = 5

// readyModule has a module seated and powered.
func (s *Session) readyModule(ctx context.Context, w fixtures.Wiring, format string, args ...any) error {
	if err := s.connect(ctx, w, format, args...); err != nil {
		return err
	}
	if err := s.Bench.Supply.SetVoltage(ctx, moduleSupply); err != nil {
		return err
	}
	return s.Wait(ctx, 1.5)
}

// shaken plays on the shaker with its amplifier connected and records.
func (s *Session) shaken(ctx context.Context, p play, inputs []int, frames int) (rec fixtures.SoundRecord, err error) {
	if err := s.Bench.Target.Shake(ctx, true); err != nil {
		return rec, err
	}
	rec, err = s.record(ctx, &p, inputs, frames, nil)
	if stop := s.Bench.Target.Shake(context.WithoutCancel(ctx), false); err == nil {
		err = stop
	}
	return rec, err
}

// echoAt is the complex amplitude of the first harmonic at a place of the stage.
type echoAt struct {
	position float64 // m
	found
}

// scan moves the target through positions, there and back, with a steady tone at each.
func (s *Session) scan(ctx context.Context, p play, positions []float64) ([]echoAt, error) {
	in, err := s.input("if")
	if err != nil {
		return nil, err
	}
	var out []echoAt
	for pass := range 2 {
		for i := range positions {
			at := positions[i]
			if pass == 1 {
				at = positions[len(positions)-1-i]
			}
			if err := s.Bench.Target.MoveTo(ctx, quantity.Length(at)); err != nil {
				return nil, err
			}
			rec, err := s.shaken(ctx, p, []int{in.Channel}, p.period)
			if err != nil {
				return nil, err
			}
			fits, _, err := s.fit(rec.Samples[in.Channel], p.hz(s.rate()))
			if err != nil {
				return nil, err
			}
			out = append(out, echoAt{at, fits[0]})
		}
	}
	return out, s.Bench.Target.MoveTo(ctx, 0)
}

// signed turns complex amplitudes that share a phase axis into signed numbers.
func signed(list []echoAt) []float64 {
	var axis complex128
	for _, e := range list {
		axis += e.a * e.a
	}
	turn := cmplx.Exp(complex(0, -cmplx.Phase(axis)/2))
	out := make([]float64, len(list))
	for i, e := range list {
		out[i] = real(e.a * turn)
	}
	return out
}

// moving looks whether the target moves at all, and whether the stage moves it.
func moving(list []echoAt, values []float64) error {
	strongest, least, most, sigma := 0.0, math.Inf(1), math.Inf(-1), 0.0
	for i, e := range list {
		strongest = math.Max(strongest, math.Abs(values[i])/e.sigma)
		least, most, sigma = math.Min(least, values[i]), math.Max(most, values[i]), math.Max(sigma, e.sigma)
	}
	if strongest < 20 {
		return wrong("check the shaker's amplifier and wires, that the plate faces the module, and that the module has power", "no echo of the moving target is heard at any place of the stage: the target does not move")
	}
	if most-least < 0.2*math.Max(math.Abs(most), math.Abs(least)) {
		return wrong("free the stage, check its drive, and start again", "the echo is the same at every place of the stage (%.3g to %.3g of full scale): the stage is jammed", least, most)
	}
	return nil
}

// fringes is the fit of A·((S/(S+p))^n)·sin(φ0 − 4πp/λ) to signed echoes.
type fringes struct {
	standoff, lambda, phase    float64
	standoffU, lambdaU, phaseU float64 // standard
	residual                   float64 // rms of the residuals over the largest echo
	exponent, exponentU        float64 // where the standoff was given
	parameters                 []float64
	misfit                     float64 // mean square of the residuals, in their uncertainties
}

// model gives the echo at a place for (P, Q, lnλ, S, n, r, o, Y): y·(1 + r·(y/Y)²) + o·Y with
// y = (S/(S+p))^n·(P·cos ψ − Q·sin ψ), ψ = 4πp/λ, r the IF's cube law at an echo of Y, and o what
// the IF picks up of the drive, wherever the target stands.
func model(q []float64, p float64) float64 {
	y := straightEcho(q, p)
	return y*(1+q[5]*square(y/q[7])) + q[6]*q[7]
}

func straightEcho(q []float64, p float64) float64 {
	sin, cos := math.Sincos(4 * math.Pi * p / math.Exp(q[2]))
	return math.Pow(q[3]/(q[3]+p), q[4]) * (q[0]*cos - q[1]*sin)
}

// fitFringes fits the law, first by the echoes' own noise, then again with what they are beyond it,
// taken for the stage's stopping a little off: an error of position counts by the slope there.
// free are the parameters of model that are adjusted.
func fitFringes(list []echoAt, values []float64, lambda, standoff float64, free []int) (fringes, error) {
	out, err := fitOnce(list, values, lambda, standoff, free)
	if err != nil {
		return out, err
	}
	for range 3 {
		astray := stopping(list, values, out.parameters, float64(len(values)-len(free)))
		weighted := make([]echoAt, len(list))
		for i, e := range list {
			weighted[i] = e
			weighted[i].sigma = math.Hypot(e.sigma, astray*slopeAt(out.parameters, e.position))
		}
		if out, err = fitOnce(weighted, values, out.lambda, out.standoff, free); err != nil {
			return out, err
		}
	}
	return out, nil
}

// slopeAt is the echo's change with the place, per metre.
func slopeAt(q []float64, p float64) float64 {
	const h = 1e-7
	return (model(q, p+h) - model(q, p-h)) / (2 * h)
}

// stopping is the standard deviation of the stage's places, m, that makes the residuals as large as
// they are; zero where the noise explains them.
func stopping(list []echoAt, values []float64, q []float64, dof float64) float64 {
	excess := func(astray float64) float64 {
		sum := 0.0
		for i, e := range list {
			sum += square(values[i]-model(q, e.position)) / (e.sigma*e.sigma + square(astray*slopeAt(q, e.position)))
		}
		return sum - dof
	}
	low, high := 0.0, 1e-3
	if excess(low) <= 0 {
		return 0
	}
	for range 60 {
		if middle := (low + high) / 2; excess(middle) > 0 {
			low = middle
		} else {
			high = middle
		}
	}
	return high
}

// fitOnce fits by Gauss–Newton from the best of a grid of wavelengths and standoffs.
func fitOnce(list []echoAt, values []float64, lambda, standoff float64, free []int) (fringes, error) {
	best, cost := []float64(nil), math.Inf(1)
	for _, dl := range []float64{-0.02, -0.01, -0.005, 0, 0.005, 0.01, 0.02} {
		for _, ds := range []float64{0.7, 0.85, 1, 1.2, 1.5} {
			q := []float64{0, 0, math.Log(lambda * (1 + dl)), standoff * ds, 2, 0, 0, largestOf(values)}
			linear(list, values, q)
			if c := costOf(list, values, q); c < cost {
				best, cost = q, c
			}
		}
	}
	if len(values) <= len(free) {
		return fringes{}, fmt.Errorf("%d places tell %d unknowns not apart: take more", len(values), len(free))
	}
	q := best
	var covariance mat.Dense
	for range 60 {
		normal, right := mat.NewSymDense(len(free), nil), mat.NewVecDense(len(free), nil)
		for i, e := range list {
			w := 1 / (e.sigma * e.sigma)
			g := gradient(q, e.position, free)
			r := values[i] - model(q, e.position)
			for a := range free {
				right.SetVec(a, right.AtVec(a)+w*g[a]*r)
				for b := a; b < len(free); b++ {
					normal.SetSym(a, b, normal.At(a, b)+w*g[a]*g[b])
				}
			}
		}
		if err := covariance.Inverse(normal); err != nil {
			return fringes{}, fmt.Errorf("the scan tells wavelength and standoff not apart: let the stage go further")
		}
		var step mat.VecDense
		step.MulVec(&covariance, right)
		next := append([]float64(nil), q...)
		scale := 1.0
		for ; scale > 1e-4; scale /= 2 {
			for a, k := range free {
				next[k] = q[k] + scale*step.AtVec(a)
			}
			if next[3] > 0.02 && costOf(list, values, next) <= cost*(1+1e-12) {
				break
			}
		}
		improved := cost - costOf(list, values, next)
		q, cost = next, costOf(list, values, next)
		if improved < 1e-9*cost {
			break
		}
	}
	return result(list, values, q, free, &covariance, cost), nil
}

func result(list []echoAt, values []float64, q []float64, free []int, covariance *mat.Dense, cost float64) fringes {
	out := fringes{standoff: q[3], lambda: math.Exp(q[2]), exponent: q[4], parameters: q}
	out.misfit = cost / float64(len(values)-len(free))
	grow := math.Sqrt(math.Max(1, out.misfit)) // what the law leaves over counts as scatter
	at := map[int]int{}
	for i, k := range free {
		at[k] = i
	}
	of := func(k int) float64 {
		i, ok := at[k]
		if !ok {
			return 0
		}
		return grow * math.Sqrt(covariance.At(i, i))
	}
	out.standoffU, out.lambdaU, out.exponentU = of(3), of(2)*out.lambda, of(4)
	out.phase = math.Mod(math.Atan2(q[0], q[1])+2*math.Pi, math.Pi)
	size := q[0]*q[0] + q[1]*q[1]
	p, pp, qq := covariance.At(0, 1), covariance.At(0, 0), covariance.At(1, 1)
	out.phaseU = grow * math.Sqrt(q[1]*q[1]*pp+q[0]*q[0]*qq-2*q[0]*q[1]*p) / size
	largest, sum := 0.0, 0.0
	for i, e := range list {
		largest = math.Max(largest, math.Abs(values[i]))
		sum += square(values[i] - model(q, e.position))
	}
	out.residual = math.Sqrt(sum/float64(len(values))) / largest
	return out
}

func largestOf(values []float64) float64 {
	top := 0.0
	for _, v := range values {
		top = math.Max(top, math.Abs(v))
	}
	return top
}

// linear solves for P and Q, the rest being given.
func linear(list []echoAt, values []float64, q []float64) {
	var cc, cs, ss, cy, sy float64
	for i, e := range list {
		w := 1 / (e.sigma * e.sigma)
		c := model([]float64{1, 0, q[2], q[3], q[4], 0, 0, 1}, e.position)
		s := model([]float64{0, 1, q[2], q[3], q[4], 0, 0, 1}, e.position)
		cc, cs, ss, cy, sy = cc+w*c*c, cs+w*c*s, ss+w*s*s, cy+w*c*values[i], sy+w*s*values[i]
	}
	det := cc*ss - cs*cs
	q[0], q[1] = (ss*cy-cs*sy)/det, (cc*sy-cs*cy)/det
}

func costOf(list []echoAt, values []float64, q []float64) float64 {
	sum := 0.0
	for i, e := range list {
		sum += square((values[i] - model(q, e.position)) / e.sigma)
	}
	return sum
}

// gradient is the derivative of model by the free parameters.
func gradient(q []float64, p float64, free []int) []float64 {
	psi := 4 * math.Pi * p / math.Exp(q[2])
	sin, cos := math.Sincos(psi)
	fall := math.Pow(q[3]/(q[3]+p), q[4])
	wave := q[0]*cos - q[1]*sin
	all := []float64{fall * cos, -fall * sin, fall * psi * (q[0]*sin + q[1]*cos), fall * wave * q[4] * p / (q[3] * (q[3] + p)), fall * wave * math.Log(q[3]/(q[3]+p))}
	y := fall * wave
	for i := range all {
		all[i] *= 1 + 3*q[5]*square(y/q[7])
	}
	all = append(all, y*square(y/q[7]), q[7])
	out := make([]float64, len(free))
	for i, k := range free {
		out[i] = all[k]
	}
	return out
}
