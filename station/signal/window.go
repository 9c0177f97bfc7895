package signal

import "math"

// Hann is the raised-cosine window w[j] = ½ − ½·cos(2πj/n), j = 0…n−1 (DFT-even).
// Noise bandwidth 1.5 lines, highest side lobe −31.5 dB (F.J. Harris, Proc. IEEE 66
// (1978) 51, table 1).
func Hann(n int) []float64 {
	w := make([]float64, n)
	for j := range w {
		w[j] = 0.5 - 0.5*math.Cos(2*math.Pi*float64(j)/float64(n))
	}
	return w
}

// Tukey is one in the middle, with half a cosine at either end; share (0…1) of its
// length is tapered (F.J. Harris, Proc. IEEE 66 (1978) 51, eq. 38).
func Tukey(n int, share float64) []float64 {
	w := make([]float64, n)
	taper := share * float64(n) / 2
	for j := range w {
		edge := math.Min(float64(j)+0.5, float64(n)-float64(j)-0.5)
		w[j] = 1
		if edge < taper {
			w[j] = 0.5 - 0.5*math.Cos(math.Pi*edge/taper)
		}
	}
	return w
}

// NoiseBandwidth is the equivalent noise bandwidth of a window in lines:
// n·Σw²/(Σw)².
func NoiseBandwidth(w []float64) float64 {
	var sum, square float64
	for _, v := range w {
		sum += v
		square += v * v
	}
	return float64(len(w)) * square / (sum * sum)
}
