package calibrate

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"lotgate/station/signal"
)

// resonance is ln D = ln D0 − ½·ln((1 − u²)² + (u/Q)²), u = f/fr: a damped oscillator driven by a
// force in proportion to the drive.
type resonance struct{ level, lnHz, lnQ float64 }

func (r resonance) at(x float64) float64 {
	u2, q2 := math.Exp(2*(x-r.lnHz)), math.Exp(2*r.lnQ)
	return r.level - 0.5*math.Log(square(1-u2)+u2/q2)
}

// columns are the derivatives by level, lnHz and lnQ.
func (r resonance) columns(x float64) []float64 {
	u2, q2 := math.Exp(2*(x-r.lnHz)), math.Exp(2*r.lnQ)
	n := square(1-u2) + u2/q2
	return []float64{1, (-2*(1-u2)*u2 + u2/q2) / n, u2 / q2 / n}
}

// fitResonance fits by Gauss–Newton from the best of a grid.
func fitResonance(points []signal.Scattered) resonance {
	cost := func(r resonance) float64 {
		sum := 0.0
		for _, p := range points {
			sum += square((p.Y - r.at(p.X)) / math.Max(p.Sigma, 1e-3))
		}
		return sum
	}
	level := func(r resonance) resonance {
		var sw, sy float64
		r.level = 0
		for _, p := range points {
			w := 1 / square(math.Max(p.Sigma, 1e-3))
			sw, sy = sw+w, sy+w*(p.Y-r.at(p.X))
		}
		r.level = sy / sw
		return r
	}
	best := level(resonance{0, math.Log(50), 0})
	for hz := 10.0; hz < 500; hz *= 1.15 {
		for _, q := range []float64{0.4, 0.7, 1, 1.5, 3, 6} {
			if r := level(resonance{0, math.Log(hz), math.Log(q)}); cost(r) < cost(best) {
				best = r
			}
		}
	}
	for range 40 {
		normal, right := mat.NewSymDense(3, nil), mat.NewVecDense(3, nil)
		for _, p := range points {
			w := 1 / square(math.Max(p.Sigma, 1e-3))
			g := best.columns(p.X)
			for a := range 3 {
				right.SetVec(a, right.AtVec(a)+w*g[a]*(p.Y-best.at(p.X)))
				for c := a; c < 3; c++ {
					normal.SetSym(a, c, normal.At(a, c)+w*g[a]*g[c])
				}
			}
		}
		var solver mat.Cholesky
		var step mat.VecDense
		if !solver.Factorize(normal) || solver.SolveVecTo(&step, right) != nil {
			break
		}
		improved := false
		for scale := 1.0; scale > 1e-3; scale /= 2 {
			next := resonance{best.level + scale*step.AtVec(0), best.lnHz + scale*step.AtVec(1), best.lnQ + scale*step.AtVec(2)}
			if cost(next) < cost(best)*(1-1e-12) {
				best, improved = next, true
				break
			}
		}
		if !improved {
			break
		}
	}
	return best
}
