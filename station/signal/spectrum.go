package signal

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/dsp/fourier"
)

// Spectrum is a one-sided power density on equally spaced lines.
type Spectrum struct {
	Power   []float64 // per Hz, in the square of the samples' unit; line k at k·Step
	Step    float64   // Hz between lines
	Seconds float64   // length of the record
	// Spread is the variance of a sum of lines over that of independent lines of the
	// same power (each exponentially distributed): what the taper costs, 1 or more.
	Spread float64
}

// Line is the index of the line nearest to a frequency.
func (s Spectrum) Line(hz float64) int { return int(math.Round(hz / s.Step)) }

// taperShare is the share of the record that the cosine tapers take, both together.
const taperShare = 0.1

// Periodogram is the power density of a whole record under a window with cosine
// tapers at its ends (Tukey, 10 %), the mean taken out. It keeps all that the record
// knows: a band's power has a variance of 1.06/(B·T), against 1/(B·T) at the bound and
// 1.9/(B·T) under a Hann window of the same length. The record is cut to a length
// that transforms fast (at most three percent off the end), or one percent of zeros is put
// behind it.
func Periodogram(x []float64, rate float64) Spectrum {
	n := quickLength(len(x))
	used := min(n, len(x))
	w := Tukey(used, taperShare)
	mean := 0.0
	for _, v := range x[:used] {
		mean += v
	}
	mean /= float64(used)
	var square, fourth float64
	buffer := make([]float64, n)
	for i := range used {
		buffer[i] = (x[i] - mean) * w[i]
		q := w[i] * w[i]
		square += q
		fourth += q * q
	}
	power := powerLines(buffer)
	scale := 2 / (rate * square)
	for k := range power {
		power[k] *= scale
	}
	power[0] /= 2
	if n%2 == 0 {
		power[len(power)-1] /= 2
	}
	return Spectrum{Power: power, Step: rate / float64(n), Seconds: float64(used) / rate, Spread: fourth * float64(n) / (square * square)}
}

// Segments gives the power of a record in overlapping pieces: Welch's method (P.D.
// Welch, IEEE Trans. AU-15 (1967) 70) before the mean is taken, Hann window, 50 %
// overlap, so that a piece that is unlike the others can be seen. The result holds
// one power density per piece. A piece's length is the power of two nearest to that asked for.
func Segments(x []float64, rate, seconds float64) []Spectrum {
	n := 1 << max(0, int(math.Round(math.Log2(seconds*rate))))
	if n < 8 || n > len(x) {
		return nil
	}
	w := Hann(n)
	square := 0.0
	for _, v := range w {
		square += v * v
	}
	var out []Spectrum
	buffer := make([]float64, n)
	for start := 0; start+n <= len(x); start += n / 2 {
		for i := range buffer {
			buffer[i] = x[start+i] * w[i]
		}
		power := powerLines(buffer)
		for k := range power {
			power[k] *= 2 / (rate * square)
		}
		out = append(out, Spectrum{Power: power, Step: rate / float64(n), Seconds: float64(n) / rate, Spread: 35.0 / 18})
	}
	return out
}

// Welch is the mean of Segments.
func Welch(x []float64, rate, seconds float64) Spectrum {
	pieces := Segments(x, rate, seconds)
	if len(pieces) == 0 {
		return Spectrum{}
	}
	out := pieces[0]
	for _, p := range pieces[1:] {
		for k, v := range p.Power {
			out.Power[k] += v
		}
	}
	for k := range out.Power {
		out.Power[k] /= float64(len(pieces))
	}
	return out
}

// transforms keeps the tables of Fourier transforms by length; making one costs more
// than using it. Each is used by one caller at a time.
var transforms sync.Map // int → *sync.Pool of *fourier.FFT

func powerLines(x []float64) []float64 {
	n := len(x)
	entry, ok := transforms.Load(n)
	if !ok {
		entry, _ = transforms.LoadOrStore(n, &sync.Pool{New: func() any { return fourier.NewFFT(n) }})
	}
	pool := entry.(*sync.Pool)
	fft := pool.Get().(*fourier.FFT)
	defer pool.Put(fft)
	c := fft.Coefficients(nil, x)
	out := make([]float64, len(c))
	for k, v := range c {
		out[k] = real(v)*real(v) + imag(v)*imag(v)
	}
	return out
}

// quickLength is a length near n, from 3 % below to 1 % above, that transforms fast: its prime
// factors are 2, 3 and 5, and the sum of their costs (in steps of a butterfly, measured) is
// least. For short n, or where there is none, it is the largest such length up to n.
func quickLength(n int) int {
	best, cheapest, largest := 0, math.Inf(1), 1
	for a, costA := 1, 0.0; a <= 2*n; a, costA = 2*a, costA+1 {
		for b, costB := a, costA; b <= 2*n; b, costB = 3*b, costB+3 {
			for c, cost := b, costB; c <= 2*n; c, cost = 5*c, cost+4 {
				if c <= n {
					largest = max(largest, c)
				}
				if float64(c) < 0.97*float64(n) || float64(c) > 1.01*float64(n) {
					continue
				}
				if total := cost * float64(c); total < cheapest {
					best, cheapest = c, total
				}
			}
		}
	}
	if best == 0 {
		return largest
	}
	return best
}
