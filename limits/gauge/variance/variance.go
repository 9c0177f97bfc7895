// Package variance gives confidence limits of sums, differences and ratios of mean squares,
// as variance components are made of them: the modified large-sample method.
//
// Each mean square S²q with nq degrees of freedom estimates θq, and nq·S²q/θq is taken as an
// independent chi-square variable. A combination is Σ cq·θq with coefficients of either sign.
//
// Sources: F.A. Graybill & C.-M. Wang, J. Am. Stat. Assoc. 75 (1980) 869 (sums);
// N. Ting, R.K. Burdick, F.A. Graybill, S. Jeyaratnam & T.-F.C. Lu, J. Stat. Comput. Simul. 35
// (1990) 135 (differences); R.K. Burdick, C.M. Borror & D.C. Montgomery, J. Qual. Technol. 35
// (2003) 342, and their "Design and Analysis of Gauge R&R Studies", SIAM 2005.
package variance

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// MeanSquare is a mean square with its degrees of freedom. Dof need not be whole; +Inf stands
// for a variance that is known.
type MeanSquare struct {
	Value float64 // in the square of the reading's unit, not negative
	Dof   float64 // above zero
}

// Set is some independent mean squares with all that confidence limits of their combinations need.
// Coefficients are given in the order of the mean squares.
type Set struct {
	squares []MeanSquare
	g, h    []float64   // Gq = 1 − nq/χ² at the upper tail, Hq = nq/χ² at the lower tail − 1
	f       [][]float64 // F at the upper tail with nq and nr degrees of freedom
	joint   [][]float64 // 1 − (nq+nt)/χ² at the upper tail with nq+nt degrees of freedom
}

// New prepares limits at a two-sided level such as 0.95.
func New(level float64, squares ...MeanSquare) (*Set, error) {
	if !(level > 0 && level < 1) {
		return nil, fmt.Errorf("the level of confidence is %g: give one between 0 and 1, such as 0.95", level)
	}
	for i, m := range squares {
		if !(m.Value >= 0) || math.IsInf(m.Value, 0) || !(m.Dof > 0) {
			return nil, fmt.Errorf("mean square %d is %g with %g degrees of freedom: neither may be negative or unknown, and the degrees of freedom must be above zero", i+1, m.Value, m.Dof)
		}
	}
	s := &Set{squares: squares}
	tail := (1 - level) / 2
	for _, m := range squares {
		s.g = append(s.g, 1-1/scaledChiSquare(m.Dof, 1-tail))
		s.h = append(s.h, 1/scaledChiSquare(m.Dof, tail)-1)
		var f, joint []float64
		for _, o := range squares {
			f = append(f, fQuantile(m.Dof, o.Dof, 1-tail))
			joint = append(joint, 1-1/scaledChiSquare(m.Dof+o.Dof, 1-tail))
		}
		s.f, s.joint = append(s.f, f), append(s.joint, joint)
	}
	return s, nil
}

// scaledChiSquare is a quantile of chi-square over its degrees of freedom.
func scaledChiSquare(dof, p float64) float64 {
	if math.IsInf(dof, 1) {
		return 1
	}
	return distuv.ChiSquared{K: dof}.Quantile(p) / dof
}

func fQuantile(upper, lower, p float64) float64 {
	switch {
	case math.IsInf(lower, 1):
		return scaledChiSquare(upper, p)
	case math.IsInf(upper, 1):
		return 1 / scaledChiSquare(lower, 1-p)
	}
	return distuv.F{D1: upper, D2: lower}.Quantile(p)
}

// Value is the combination's estimate; differences may be negative.
func (s *Set) Value(c []float64) float64 {
	sum := 0.0
	for i, m := range s.squares {
		sum += c[i] * m.Value
	}
	return sum
}

// Dof is the effective number of degrees of freedom of a combination (F.E. Satterthwaite,
// Biometrics Bull. 2 (1946) 110). It is +Inf for known variances only, and 0 where the estimate
// is not above zero, because then the approximation means nothing.
func (s *Set) Dof(c []float64) float64 {
	v := s.Value(c)
	if v <= 0 {
		return 0
	}
	sum := 0.0
	for i, m := range s.squares {
		sum += c[i] * c[i] * m.Value * m.Value / m.Dof
	}
	return v * v / sum
}

// Interval is the modified large-sample interval of a combination. Its ends may be negative where
// coefficients are; a variance component's interval is cut at zero by the caller. With one mean
// square it is the exact chi-square interval.
func (s *Set) Interval(c []float64) (low, high float64) {
	minus := make([]float64, len(c))
	for i := range c {
		minus[i] = -c[i]
	}
	return s.lower(c), -s.lower(minus)
}

// lower is the one-sided lower limit (Ting et al. 1990; Graybill & Wang 1980
// where no coefficient is negative).
func (s *Set) lower(c []float64) float64 {
	plus, minus := 0, 0
	for _, x := range c {
		if x > 0 {
			plus++
		} else if x < 0 {
			minus++
		}
	}
	v := 0.0
	for q, mq := range s.squares {
		a := c[q] * mq.Value
		switch {
		case c[q] > 0:
			v += s.g[q] * s.g[q] * a * a
		case c[q] < 0:
			v += s.h[q] * s.h[q] * a * a
		}
		if c[q] <= 0 || minus == 0 {
			continue
		}
		for r, mr := range s.squares {
			b := math.Abs(c[r] * mr.Value)
			switch {
			case c[r] < 0:
				v += s.cross(q, r) * a * b
			case c[r] > 0 && r > q:
				v += s.same(q, r) / float64(plus-1) * a * b
			}
		}
	}
	return s.Value(c) - math.Sqrt(math.Max(0, v))
}

// cross is Gqr of a positive and a negative term: it makes the limit exact where only these two
// are there and the difference is at the edge of zero.
func (s *Set) cross(q, r int) float64 {
	f, g, h := s.f[q][r], s.g[q], s.h[r]
	return ((f-1)*(f-1) - g*g*f*f - h*h) / f
}

// same is G*qt of two positive terms: it makes the limit exact where both estimate one variance.
func (s *Set) same(q, t int) float64 {
	nq, nt := s.squares[q].Dof, s.squares[t].Dof
	if math.IsInf(nq, 1) || math.IsInf(nt, 1) {
		return 0
	}
	n := nq + nt
	return s.joint[q][t]*s.joint[q][t]*n*n/(nq*nt) - s.g[q]*s.g[q]*nq/nt - s.g[t]*s.g[t]*nt/nq
}
