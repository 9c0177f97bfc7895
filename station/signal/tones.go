package signal

import (
	"errors"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// ErrTonesTooClose says that the record is too short to tell two of the tones apart.
var ErrTonesTooClose = errors.New("the record is too short to tell the tones apart")

// FitTones fits x[n] = c + Σ_k Re(a_k·exp(i·w_k·(n−(N−1)/2))) by least squares for
// known angular frequencies w_k (radians per sample, distinct, within 0…π) and gives
// the complex amplitudes a_k, peak, with their phase at the middle of the record.
//
// Time counted from the middle makes the cosines and sines orthogonal, so that the
// normal equations are two real ones whose elements are Dirichlet kernels in closed
// form. For white noise this is the maximum-likelihood estimate and its variance is
// the Cramér–Rao bound (Rife & Boorstyn, IEEE Trans. IT-20 (1974) 591).
func FitTones(x []float64, w []float64) ([]complex128, error) {
	a, _, err := fitTones(x, w)
	return a, err
}

// fitTones also gives the sum of squares that the fit explains.
func fitTones(x []float64, w []float64) (a []complex128, explained float64, err error) {
	k := len(w)
	n := float64(len(x))
	sums := correlate(x, w)
	total := 0.0
	for _, v := range x {
		total += v
	}
	even := mat.NewSymDense(k+1, nil)
	odd := mat.NewSymDense(k, nil)
	rightEven := mat.NewVecDense(k+1, nil)
	rightOdd := mat.NewVecDense(k, nil)
	for i := range w {
		for j := i; j < k; j++ {
			minus, plus := dirichlet(w[i]-w[j], n), dirichlet(w[i]+w[j], n)
			even.SetSym(i, j, 0.5*(minus+plus))
			odd.SetSym(i, j, 0.5*(minus-plus))
		}
		even.SetSym(i, k, dirichlet(w[i], n))
		rightEven.SetVec(i, real(sums[i]))
		rightOdd.SetVec(i, -imag(sums[i]))
	}
	even.SetSym(k, k, n)
	rightEven.SetVec(k, total)
	var solver mat.Cholesky
	var cosines, sines mat.VecDense
	if ok := solver.Factorize(even); !ok || solver.Cond() > 1e8 {
		return nil, 0, ErrTonesTooClose
	}
	if err := solver.SolveVecTo(&cosines, rightEven); err != nil {
		return nil, 0, ErrTonesTooClose
	}
	if ok := solver.Factorize(odd); !ok || solver.Cond() > 1e8 {
		return nil, 0, ErrTonesTooClose
	}
	if err := solver.SolveVecTo(&sines, rightOdd); err != nil {
		return nil, 0, ErrTonesTooClose
	}
	out := make([]complex128, k)
	for i := range out {
		out[i] = complex(cosines.AtVec(i), -sines.AtVec(i))
	}
	explained = mat.Dot(&cosines, rightEven) + mat.Dot(&sines, rightOdd)
	return out, explained, nil
}

// dirichlet is Σ cos(w·(n−(N−1)/2)) over the record.
func dirichlet(w, n float64) float64 {
	s := math.Sin(w / 2)
	if math.Abs(s) < 1e-12 {
		return n
	}
	return math.Sin(n*w/2) / s
}

// correlate gives Σ x[n]·exp(−i·w·(n−(N−1)/2)) for each w. The record is folded about its
// middle first: sums of mirrored samples meet the cosines, differences the sines.
func correlate(x, w []float64) []complex128 {
	half := (len(x) + 1) / 2
	folded := make([]float64, 2*half)
	sum, difference := folded[:half], folded[half:]
	start := 0.5 // of the first pair from the middle, in samples
	if len(x)%2 == 1 {
		start = 0
		sum[0] = x[half-1]
		for k := 1; k < half; k++ {
			sum[k], difference[k] = x[half-1+k]+x[half-1-k], x[half-1+k]-x[half-1-k]
		}
	} else {
		for k := range half {
			sum[k], difference[k] = x[half+k]+x[half-1-k], x[half+k]-x[half-1-k]
		}
	}
	out := make([]complex128, len(w))
	for i := range w {
		c, s := project(sum, difference, w[i], start)
		out[i] = complex(c, -s)
	}
	return out
}

// Strengths gives the amplitude each angular frequency (radians per sample) would have if it
// were the only tone: |Σ x[n]·exp(−iwn)|·2/N. It is for finding a tone, not for measuring it.
func Strengths(x, w []float64) []float64 {
	out := make([]float64, len(w))
	for i, c := range correlate(x, w) {
		out[i] = 2 * cmplx.Abs(c) / float64(len(x))
	}
	return out
}

// chebyshevBlock is how many samples share exactly computed starting values, so that rounding
// in the recurrences does not add up over long records.
const chebyshevBlock = 512

// project gives Σ a[k]·cos(w·(k+start)) and Σ b[k]·sin(w·(k+start)). Cosines and sines follow
// from y[n] = 2·cos(2w)·y[n−2] − y[n−4], two interleaved chains each, so that the processor
// is not kept waiting by one.
func project(a, b []float64, w, start float64) (cosines, sines float64) {
	t := 2 * math.Cos(2*w)
	for from := 0; from < len(a); from += chebyshevBlock {
		to := min(from+chebyshevBlock, len(a))
		p, q := a[from:to], b[from:to:to]
		at := w * (float64(from) + start)
		s0, c0 := math.Sincos(at)
		s1, c1 := math.Sincos(at + w)
		s2, c2 := math.Sincos(at - 2*w)
		s3, c3 := math.Sincos(at - w)
		var x0, x1, y0, y1 float64
		for len(p) >= 2 && len(q) >= 2 {
			x0 += p[0] * c0
			y0 += q[0] * s0
			x1 += p[1] * c1
			y1 += q[1] * s1
			c0, c2 = t*c0-c2, c0
			s0, s2 = t*s0-s2, s0
			c1, c3 = t*c1-c3, c1
			s1, s3 = t*s1-s3, s1
			p, q = p[2:], q[2:]
		}
		if len(p) > 0 {
			x0 += p[0] * c0
			y0 += q[0] * s0
		}
		cosines += x0 + x1
		sines += y0 + y1
	}
	return cosines, sines
}

// Subtract removes fitted tones from x in place; amplitudes as FitTones gives them.
func Subtract(x []float64, w []float64, a []complex128) {
	middle := float64(len(x)-1) / 2
	for k := range w {
		if a[k] == 0 {
			continue
		}
		// Re(a·exp(iwn)) obeys y[n] = 2·cos(w)·y[n−1] − y[n−2]; four chains of every fourth
		// sample keep the processor busy, and each block starts exactly.
		c := 2 * math.Cos(4*w[k])
		size, phase := cmplx.Abs(a[k]), cmplx.Phase(a[k])
		at := func(n int) float64 { return size * math.Cos(w[k]*(float64(n)-middle)+phase) }
		for start := 0; start < len(x); start += chebyshevBlock {
			b := x[start:min(start+chebyshevBlock, len(x))]
			p0, p1, p2, p3 := at(start-4), at(start-3), at(start-2), at(start-1)
			y0, y1, y2, y3 := at(start), at(start+1), at(start+2), at(start+3)
			for len(b) >= 4 {
				b[0] -= y0
				b[1] -= y1
				b[2] -= y2
				b[3] -= y3
				y0, p0 = c*y0-p0, y0
				y1, p1 = c*y1-p1, y1
				y2, p2 = c*y2-p2, y2
				y3, p3 = c*y3-p3, y3
				b = b[4:]
			}
			for i, y := range []float64{y0, y1, y2} {
				if i < len(b) {
					b[i] -= y
				}
			}
		}
	}
}

// Fit is a set of tones fitted to a record.
type Fit struct {
	FrequencyHz []float64    // as fitted, on the record's own clock
	Amplitude   []complex128 // peak; phase at the middle of the record
	// Clock is the relative deviation of the tones' clock from the record's: the
	// fitted frequencies are (1+Clock) times those asked for.
	Clock      float64
	ClockSigma float64 // its standard uncertainty
	Residual   []float64
	Rate       float64
}

// MaxClock is the largest relative clock deviation that FitDriven follows.
const MaxClock = 2e-3

// FitDriven fits tones whose frequencies have known ratios and share one unknown
// clock deviation, beside tones of fixed frequency (the mains) that do not share it.
// The deviation is found from the phase each tone gains from the first half of the
// record to the second, and is used only where it stands out of its own scatter.
func FitDriven(x []float64, rate float64, drivenHz, fixedHz []float64) (Fit, error) {
	f := Fit{Rate: rate}
	clock, sigma := 0.0, 0.0
	for range 3 {
		step, s, err := clockStep(x, rate, drivenHz, fixedHz, clock)
		if err != nil {
			break // halves too short to tell the tones apart: keep the nominal frequencies
		}
		sigma = s
		if math.Abs(step) < 4*s || math.Abs(clock+step) > MaxClock {
			break
		}
		clock += step
		if math.Abs(step) < 1e-9 {
			break
		}
	}
	f.Clock, f.ClockSigma = clock, sigma
	w := angular(rate, clock, drivenHz, fixedHz)
	a, err := FitTones(x, w)
	if err != nil {
		return f, err
	}
	f.Amplitude = a
	f.FrequencyHz = make([]float64, len(w))
	for i := range w {
		f.FrequencyHz[i] = w[i] * rate / (2 * math.Pi)
	}
	f.Residual = append([]float64(nil), x...)
	Subtract(f.Residual, w, a)
	removeMean(f.Residual)
	return f, nil
}

func angular(rate, clock float64, drivenHz, fixedHz []float64) []float64 {
	w := make([]float64, 0, len(drivenHz)+len(fixedHz))
	for _, hz := range drivenHz {
		w = append(w, 2*math.Pi*hz*(1+clock)/rate)
	}
	for _, hz := range fixedHz {
		w = append(w, 2*math.Pi*hz/rate)
	}
	return w
}

// clockStep estimates what is left of the clock deviation, with its scatter.
func clockStep(x []float64, rate float64, drivenHz, fixedHz []float64, clock float64) (step, sigma float64, err error) {
	half := len(x) / 2
	w := angular(rate, clock, drivenHz, fixedHz)
	first, explained, err := fitTones(x[:half], w)
	if err != nil {
		return 0, 0, err
	}
	second, err := FitTones(x[half:2*half], w)
	if err != nil {
		return 0, 0, err
	}
	var top, weight, count float64
	gained := make([]float64, len(drivenHz))
	for k := range drivenHz {
		turn := cmplx.Exp(complex(0, -w[k]*float64(half)))
		gained[k] = cmplx.Phase(second[k] * cmplx.Conj(first[k]) * turn)
		p := cmplx.Abs(first[k]) * cmplx.Abs(second[k])
		top += p * w[k] * gained[k]
		weight += p * w[k] * w[k]
		count++
	}
	if weight == 0 {
		return 0, math.Inf(1), nil
	}
	step = top / weight / float64(half)
	// The scatter comes from the record itself: what the halves leave unexplained.
	variance := math.Max(0, meanSquare(x[:half])-explained/float64(half)) // of the noise, per sample, white at worst
	sigma = math.Sqrt(2*variance*2/float64(half)/weight) / float64(half)
	return step, sigma, nil
}

func removeMean(x []float64) {
	m := 0.0
	for _, v := range x {
		m += v
	}
	m /= float64(len(x))
	for i := range x {
		x[i] -= m
	}
}

func meanSquare(x []float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v * v
	}
	return s / float64(len(x))
}
