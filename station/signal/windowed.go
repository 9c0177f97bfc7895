package signal

import (
	"math"
	"math/cmplx"
)

// WindowedTones gives the complex amplitude (peak, phase at the middle of the record) of a tone at
// each angular frequency (radians per sample), each by itself, under a cos⁴ window. Lines 48
// periods of the record away are suppressed by 160 dB, so that a wave of many lines can be read
// line by line. The noise of an amplitude is √1.94 times that of a least-squares fit (equivalent
// noise bandwidth of the window: F.J. Harris, Proc. IEEE 66 (1978) 51, table 1).
func WindowedTones(x, w []float64) []complex128 {
	n := float64(len(x))
	tapered := make([]float64, len(x))
	sum := 0.0
	for i, v := range x {
		c := math.Cos(math.Pi * ((float64(i)+0.5)/n - 0.5))
		c *= c
		c *= c
		sum += c
		tapered[i] = v * c
	}
	out := correlate(tapered, w)
	for i := range out {
		out[i] *= complex(2/sum, 0)
	}
	return out
}

// RefineTone follows a tone whose angular frequency is known to a fraction of a line of the
// record: from the phase it gains between the record's halves, under windows.
func RefineTone(x []float64, w float64) float64 {
	half := len(x) / 2
	for range 3 {
		at := []float64{w}
		a, b := WindowedTones(x[:half], at)[0], WindowedTones(x[half:2*half], at)[0]
		w += cmplx.Phase(b*cmplx.Conj(a)*cmplx.Exp(complex(0, -w*float64(half)))) / float64(half)
	}
	return w
}
