package signal

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"
)

// TestFourParameterSineFit: amplitude, phase, offset and an unknown frequency come back as IEEE Std
// 1057 defines the four-parameter fit (clause on sine-wave fitting; from memory): exactly without noise, with
// a frequency whose scatter is near the bound of Rife & Boorstyn 1974, σ_ω² ≥ 24·s²/(A²·N³), with noise.
func TestFourParameterSineFit(t *testing.T) {
	const rate, n, amplitude, phase, offset = 8000.0, 8000, 0.7, 0.4, 0.1
	for _, off := range []float64{0, 2e-5, -1e-4, 1e-3} {
		hz := 123.4 * (1 + off)
		x := make([]float64, n)
		for i := range x {
			x[i] = offset + amplitude*math.Cos(2*math.Pi*hz*(float64(i)-(n-1)/2.0)/rate+phase)
		}
		f, err := FitDriven(x, rate, []float64{123.4}, nil)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(f.FrequencyHz[0]/hz-1) > 1e-9 || cmplx.Abs(f.Amplitude[0]-cmplx.Rect(amplitude, phase)) > 1e-8 {
			t.Errorf("off by %g: %.9f Hz, want %.9f; amplitude %v", off, f.FrequencyHz[0], hz, f.Amplitude[0])
		}
	}
	r := rand.New(rand.NewPCG(7, 7))
	const trials, s = 400, 0.02
	square := 0.0
	for range trials {
		x := make([]float64, n)
		for i := range x {
			x[i] = amplitude*math.Cos(2*math.Pi*123.5*float64(i)/rate) + s*r.NormFloat64()
		}
		w := RefineTone(x, 2*math.Pi*123.4999/rate)
		square += math.Pow(w-2*math.Pi*123.5/rate, 2) / trials
	}
	bound := 24 * s * s / (amplitude * amplitude * math.Pow(n, 3))
	// Two windowed halves know less of the frequency than the whole record: about 2.6 times the bound.
	if ratio := square / bound; ratio < 0.8 || ratio > 4 {
		t.Errorf("variance of the frequency is %.2f of its bound", ratio)
	} else {
		t.Logf("variance of the frequency is %.2f of its bound", ratio)
	}
}

// TestWindowedTonesReadASquareWave: every line of a square wave of any period by itself, to two parts in
// ten million (Fourier series: (4/π)/n at odd n for ±1).
func TestWindowedTonesReadASquareWave(t *testing.T) {
	const n = 24000
	w := 2 * math.Pi * 24.37 / n
	x := make([]float64, n)
	for k := 1.0; k*w < math.Pi; k += 2 {
		for i := range x {
			x[i] += 4 / math.Pi / k * math.Sin(k*w*float64(i)+0.3*k)
		}
	}
	lines := []float64{w, 2 * w, 3 * w, 11 * w, 31 * w}
	for i, a := range WindowedTones(x, lines) {
		want := 4 / math.Pi / math.Round(lines[i]/w)
		if i == 1 {
			want = 0
		}
		if math.Abs(cmplx.Abs(a)-want) > 2e-7 {
			t.Errorf("line %d: %.9f, want %.9f", i, cmplx.Abs(a), want)
		}
	}
	if got := RefineTone(x, w*1.0004); math.Abs(got/w-1) > 1e-8 {
		t.Errorf("period off by %g after refinement", got/w-1)
	}
}
