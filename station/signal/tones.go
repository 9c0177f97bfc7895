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
		return nil, ErrTonesTooClose
	}
	if err := solver.SolveVecTo(&cosines, rightEven); err != nil {
		return nil, ErrTonesTooClose
	}
	if ok := solver.Factorize(odd); !ok || solver.Cond() > 1e8 {
		return nil, ErrTonesTooClose
	}
	if err := solver.SolveVecTo(&sines, rightOdd); err != nil {
		return nil, ErrTonesTooClose
	}
	out := make([]complex128, k)
	for i := range out {
		out[i] = complex(cosines.AtVec(i), -sines.AtVec(i))
	}
	return out, nil
}

// dirichlet is Σ cos(w·(n−(N−1)/2)) over the record.
func dirichlet(w, n float64) float64 {
	s := math.Sin(w / 2)
	if math.Abs(s) < 1e-12 {
		return n
	}
	return math.Sin(n*w/2) / s
}

// correlate gives Σ x[n]·exp(−i·w·(n−(N−1)/2)) for each w.
func correlate(x, w []float64) []complex128 {
	out := make([]complex128, len(w))
	middle := float64(len(x)-1) / 2
	for i := range w {
		out[i] = dtft(x, w[i]) * cmplx.Exp(complex(0, w[i]*middle))
	}
	return out
}

// dtftBlock is how many samples share one exactly computed phase, so that rounding
// in the rotating phasor does not add up over long records.
const dtftBlock = 512

// dtft is the discrete-time Fourier transform at one angular frequency, by four
// interleaved phasors that each turn by 4w, so that the processor is not kept
// waiting by one chain of multiplications.
func dtft(x []float64, w float64) complex128 {
	stepIm, stepRe := math.Sincos(-4 * w)
	var sumRe, sumIm float64
	for start := 0; start < len(x); start += dtftBlock {
		end := min(start+dtftBlock, len(x))
		b := x[start:end]
		var pr, pi, ar, ai [4]float64
		for q := range 4 {
			pi[q], pr[q] = math.Sincos(-w * float64(start+q))
		}
		for len(b) >= 4 {
			ar[0] += b[0] * pr[0]
			ai[0] += b[0] * pi[0]
			ar[1] += b[1] * pr[1]
			ai[1] += b[1] * pi[1]
			ar[2] += b[2] * pr[2]
			ai[2] += b[2] * pi[2]
			ar[3] += b[3] * pr[3]
			ai[3] += b[3] * pi[3]
			pr[0], pi[0] = pr[0]*stepRe-pi[0]*stepIm, pr[0]*stepIm+pi[0]*stepRe
			pr[1], pi[1] = pr[1]*stepRe-pi[1]*stepIm, pr[1]*stepIm+pi[1]*stepRe
			pr[2], pi[2] = pr[2]*stepRe-pi[2]*stepIm, pr[2]*stepIm+pi[2]*stepRe
			pr[3], pi[3] = pr[3]*stepRe-pi[3]*stepIm, pr[3]*stepIm+pi[3]*stepRe
			b = b[4:]
		}
		for q, v := range b {
			ar[q] += v * pr[q]
			ai[q] += v * pi[q]
		}
		sumRe += ar[0] + ar[1] + ar[2] + ar[3]
		sumIm += ai[0] + ai[1] + ai[2] + ai[3]
	}
	return complex(sumRe, sumIm)
}

// Subtract removes fitted tones from x in place; amplitudes as FitTones gives them.
func Subtract(x []float64, w []float64, a []complex128) {
	middle := float64(len(x)-1) / 2
	for k := range w {
		if a[k] == 0 {
			continue
		}
		stepIm, stepRe := math.Sincos(w[k])
		for start := 0; start < len(x); start += dtftBlock {
			end := min(start+dtftBlock, len(x))
			p := a[k] * cmplx.Exp(complex(0, w[k]*(float64(start)-middle)))
			re, im := real(p), imag(p)
			for n := start; n < end; n++ {
				x[n] -= re
				re, im = re*stepRe-im*stepIm, re*stepIm+im*stepRe
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
	first, err := FitTones(x[:half], w)
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
	rest := append([]float64(nil), x[:half]...)
	Subtract(rest, w, first)
	removeMean(rest)
	variance := meanSquare(rest) // of the noise, per sample, white at worst
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
