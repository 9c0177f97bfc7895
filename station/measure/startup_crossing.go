package measure

import (
	"math"
)

// crossing is where a curve comes into a band for good.
type crossing struct {
	index float64 // sample, with its fraction; −1 where the curve is in the band all along
	slope float64 // size per sample
	noise float64 // of the smoothed curve where nothing happens any more
	count float64 // of the values the noise was told by
}

// lastCrossing looks from the end for the last place at which the curve, smoothed by a parabola over
// half samples to either side, is further than band from its final value. From tail on it should be
// settled.
func lastCrossing(x []float64, before, tail, half int, final, band float64) crossing {
	c := crossing{index: -1}
	square := 0.0
	for k := tail + half; k+half < len(x); k += half {
		v, _ := localParabola(x[k-half : k+half+1])
		square += (v - final) * (v - final)
		c.count++
	}
	c.noise = math.Sqrt(square / math.Max(1, c.count-1))
	at := func(k int) float64 {
		v, _ := localParabola(x[k-half : k+half+1])
		return math.Abs(v-final) - band
	}
	for k := len(x) - half - 2; k >= before+half; k-- {
		if a := at(k); a > 0 {
			_, slope := localParabola(x[k-half : k+half+1])
			c.index, c.slope = float64(k)+a/(a-at(k+1)), math.Abs(slope)
			break
		}
	}
	return c
}

// localParabola fits a parabola to an odd number of samples and gives its value and slope (per sample) in the
// middle. (A. Savitzky, M.J.E. Golay, Anal. Chem. 36 (1964) 1627.)
func localParabola(x []float64) (value, slope float64) {
	half := len(x) / 2
	var s0, s2, s4, y0, y1, y2 float64
	for i, v := range x {
		t := float64(i - half)
		s0, s2, s4 = s0+1, s2+t*t, s4+t*t*t*t
		y0, y1, y2 = y0+v, y1+t*v, y2+t*t*v
	}
	return (s4*y0 - s2*y2) / (s0*s4 - s2*s2), y1 / s2
}
