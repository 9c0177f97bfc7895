package signal

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Scattered is a value measured at a place, with its standard uncertainty.
type Scattered struct{ X, Y, Sigma float64 }

// Smooth is a smooth curve through scattered values: a sum of given columns with free
// coefficients and a Gaussian process for what they leave over (universal kriging; C.E.
// Rasmussen & C.K.I. Williams, Gaussian Processes for Machine Learning, 2006, section 2.7).
// Size and reach of the process are not known: the curve is the mean over a grid of both,
// each weighted by its restricted likelihood, and the scatter among them counts in its
// uncertainty, which it knows everywhere, between the points too.
type Smooth struct {
	members []*process
	weights []float64
	// Misfit is the mean square of the residuals of the columns alone, in their standard
	// uncertainties: about one where nothing is left over.
	Misfit float64
}

// process is the curve for one size and reach.
type process struct {
	points     []Scattered
	columns    func(x float64) []float64
	size       float64 // of what the columns leave over, in Y
	reach      float64 // its correlation length, in X
	covariance mat.Cholesky
	design     *mat.Dense // K⁻¹·H
	normal     mat.Cholesky
	beta       []float64
	rest       *mat.VecDense // K⁻¹·(y − H·β)
}

// ErrTooFewPoints says that a curve has fewer points than coefficients.
var ErrTooFewPoints = errors.New("too few points for a smooth curve")

// leastWeight is the weight, over that of the best, below which a member is left out.
const leastWeight = 1e-3

// FitSmooth fits a curve. Reaches of what the columns leave over are looked for from least to
// most, sizes from none to 100,000 times the points' own scatter.
func FitSmooth(points []Scattered, columns func(x float64) []float64, least, most float64) (*Smooth, error) {
	if len(points) == 0 || len(points) <= len(columns(points[0].X)) {
		return nil, ErrTooFewPoints
	}
	sigma := 0.0
	for _, p := range points {
		sigma += math.Log(p.Sigma) / float64(len(points))
	}
	sigma = math.Exp(sigma)
	out := &Smooth{}
	var all []*process
	var likelihood []float64
	best := math.Inf(-1)
	try := func(size, reach float64) error {
		q := &process{points: points, columns: columns, size: size, reach: reach}
		l, err := q.fit()
		if err != nil || math.IsInf(l, -1) {
			return err
		}
		if size == 0 {
			out.Misfit = q.misfit()
		}
		all, likelihood, best = append(all, q), append(likelihood, l), math.Max(best, l)
		return nil
	}
	if err := try(0, most); err != nil {
		return nil, err
	}
	for size := 0.3; size < 2e5; size *= 2 {
		for reach := least; reach <= most*1.001; reach *= 1.4 {
			if err := try(size*sigma, reach); err != nil {
				return nil, err
			}
		}
	}
	total := 0.0
	for i, q := range all {
		if w := math.Exp(likelihood[i] - best); w > leastWeight {
			out.members, out.weights = append(out.members, q), append(out.weights, w)
			total += w
		}
	}
	if len(out.members) == 0 {
		return nil, ErrTooFewPoints
	}
	for i := range out.weights {
		out.weights[i] /= total
	}
	return out, nil
}

// mean is the weighted mean over the members of what is asked of each, with the variance of a
// mixture.
func (s *Smooth) mean(of func(q *process) (y, variance float64)) (y, sigma float64) {
	second := 0.0
	for i, q := range s.members {
		v, variance := of(q)
		y += s.weights[i] * v
		second += s.weights[i] * (variance + v*v)
	}
	return y, math.Sqrt(math.Max(0, second-y*y))
}

// mostCondition is the worst condition of a matrix that is still solved.
const mostCondition = 1e14

func (s *process) kernel(a, b float64) float64 {
	d := (a - b) / s.reach
	return s.size * s.size * math.Exp(-d*d/2)
}

// fit solves for the coefficients and gives the logarithm of the restricted likelihood.
func (s *process) fit() (float64, error) {
	n, p := len(s.points), len(s.columns(s.points[0].X))
	k := mat.NewSymDense(n, nil)
	h, y := mat.NewDense(n, p, nil), mat.NewVecDense(n, nil)
	for i, a := range s.points {
		for j := i; j < n; j++ {
			k.SetSym(i, j, s.kernel(a.X, s.points[j].X))
		}
		k.SetSym(i, i, k.At(i, i)+a.Sigma*a.Sigma)
		h.SetRow(i, s.columns(a.X))
		y.SetVec(i, a.Y)
	}
	if !s.covariance.Factorize(k) || s.covariance.Cond() > mostCondition {
		return math.Inf(-1), nil // far too smooth for its size: not a candidate
	}
	s.design = mat.NewDense(n, p, nil)
	if err := s.covariance.SolveTo(s.design, h); err != nil {
		return 0, err
	}
	var normal mat.Dense
	normal.Mul(h.T(), s.design)
	sym := mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			sym.SetSym(i, j, (normal.At(i, j)+normal.At(j, i))/2)
		}
	}
	if !s.normal.Factorize(sym) || s.normal.Cond() > mostCondition {
		return math.Inf(-1), nil
	}
	var right, beta, left mat.VecDense
	right.MulVec(s.design.T(), y)
	if err := s.normal.SolveVecTo(&beta, &right); err != nil {
		return 0, err
	}
	s.beta = beta.RawVector().Data
	left.MulVec(h, &beta)
	left.SubVec(y, &left)
	s.rest = mat.NewVecDense(n, nil)
	if err := s.covariance.SolveVecTo(s.rest, &left); err != nil {
		return 0, err
	}
	return -0.5 * (s.covariance.LogDet() + s.normal.LogDet() + mat.Dot(&left, s.rest)), nil
}

// misfit is the mean square of what is left over, in standard uncertainties; without a
// process K is diagonal.
func (s *process) misfit() float64 {
	sum := 0.0
	for i, p := range s.points {
		r := s.rest.AtVec(i) * p.Sigma
		sum += r * r
	}
	return sum / float64(len(s.points)-len(s.beta))
}

// weights of the curve at a place: value = Σ w·y; and what the variance needs.
type place struct {
	h, k, solved, lever *mat.VecDense
	x                   float64
}

func (s *process) place(x float64) place {
	n, p := len(s.points), len(s.beta)
	q := place{x: x, h: mat.NewVecDense(p, s.columns(x)), k: mat.NewVecDense(n, nil), solved: mat.NewVecDense(n, nil), lever: mat.NewVecDense(p, nil)}
	for i, a := range s.points {
		q.k.SetVec(i, s.kernel(x, a.X))
	}
	_ = s.covariance.SolveVecTo(q.solved, q.k) // the matrix was factorised; its condition is that of the fit
	q.lever.MulVec(s.design.T(), q.k)
	q.lever.SubVec(q.h, q.lever)
	return q
}

// At is the curve at a place with its standard uncertainty.
func (s *Smooth) At(x float64) (y, sigma float64) {
	return s.mean(func(q *process) (float64, float64) {
		p := q.place(x)
		return q.value(p), q.cross(p, p)
	})
}

// Between is the curve at a place less that at another, with the standard uncertainty of the
// difference.
func (s *Smooth) Between(x, reference float64) (y, sigma float64) {
	return s.mean(func(q *process) (float64, float64) {
		a, b := q.place(x), q.place(reference)
		return q.value(a) - q.value(b), q.cross(a, a) + q.cross(b, b) - 2*q.cross(a, b)
	})
}

func (s *process) value(q place) float64 {
	v := mat.Dot(q.k, s.rest)
	for i, b := range s.beta {
		v += b * q.h.AtVec(i)
	}
	return v
}

// cross is the covariance of the curve at two places.
func (s *process) cross(a, b place) float64 {
	var solved mat.VecDense
	_ = s.normal.SolveVecTo(&solved, b.lever)
	return s.kernel(a.x, b.x) - mat.Dot(a.k, b.solved) + mat.Dot(a.lever, &solved)
}
