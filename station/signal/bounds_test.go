package signal

import (
	"encoding/json"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os"
	"testing"
)

// source checks that a reference file names where its values come from, and reads it.
func source(t *testing.T, name string, into any) {
	t.Helper()
	data, err := os.ReadFile("../../testdata/reference/signal/" + name)
	if err != nil {
		t.Fatal(err)
	}
	var s struct {
		Source string `json:"_source"`
	}
	if err := json.Unmarshal(data, &s); err != nil || s.Source == "" {
		t.Fatalf("%s names no source (%v)", name, err)
	}
	if into != nil {
		if err := json.Unmarshal(data, into); err != nil {
			t.Fatal(err)
		}
	}
}

// TestToneStandsAtTheBound: over 2,000 trials the variance of a fitted tone's amplitude is within
// 1.05 of the Cramér–Rao bound 2σ²/N (D.C. Rife & R.R. Boorstyn, IEEE Trans. IT-20 (1974) 591; S.M.
// Kay 1993, eq. 3.41), with frequency unknown within the clock's deviation, on a raw and on a decimated
// record.
func TestToneStandsAtTheBound(t *testing.T) {
	source(t, "sine_estimation.json", nil)
	for _, c := range []struct {
		name string
		rate float64
	}{{"at its own rate", 2000}, {"decimated from 48 kHz", 48000}} {
		t.Run(c.name, func(t *testing.T) {
			const trials, hz, amplitude = 2000, 40.3, 1.0
			r := rand.New(rand.NewPCG(11, uint64(c.rate)))
			n := int(c.rate)
			sigma := 0.5 * math.Sqrt(c.rate/2000) // the same density in both
			var sum, square float64
			x := make([]float64, n)
			for range trials {
				phase := 2 * math.Pi * r.Float64()
				for i := range x {
					x[i] = amplitude*math.Cos(2*math.Pi*hz*float64(i)/c.rate+phase) + sigma*r.NormFloat64()
				}
				d := Decimate(x, c.rate, 250)
				f, err := FitDriven(d.Samples, d.Rate, []float64{hz}, nil)
				if err != nil {
					t.Fatal(err)
				}
				a := cmplx.Abs(f.Amplitude[0])
				sum += a
				square += a * a
			}
			mean := sum / trials
			variance := (square/trials - mean*mean) * trials / (trials - 1)
			bound := 2 * sigma * sigma / float64(n)
			t.Logf("variance of the amplitude over the Cramér–Rao bound: %.3f (2,000 trials, scatter of this figure 0.032); bias %.4f u", variance/bound, (mean-amplitude)/math.Sqrt(bound))
			if variance/bound > 1.05 {
				t.Errorf("the variance is %.3f of the bound", variance/bound)
			}
			if math.Abs(mean-amplitude) > 0.1*math.Sqrt(bound) {
				t.Errorf("the amplitude is biased: %g", mean)
			}
		})
	}
}

// TestBandStandsAtTheBound: the relative variance of a noise band's power is within 1.15 of 1/(B·T)
// (J.S. Bendat & A.G. Piersol, Random Data, 4th ed. 2010, eq. 8.43: ε² = 1/(B·T); from memory).
func TestBandStandsAtTheBound(t *testing.T) {
	const trials, rate, seconds, low, high = 2000, 2000.0, 2.0, 50.0, 800.0
	r := rand.New(rand.NewPCG(12, 1))
	x := make([]float64, int(rate*seconds))
	var sum, square, stated float64
	for range trials {
		for i := range x {
			x[i] = r.NormFloat64()
		}
		e := BandPower(Periodogram(x, rate), low, high, nil)
		sum += e.Value
		square += e.Value * e.Value
		stated += e.Sigma * e.Sigma
	}
	mean := sum / trials
	variance := (square/trials - mean*mean) / (mean * mean)
	bound := 1 / ((high - low) * seconds)
	t.Logf("relative variance of the band's power over 1/(BT): %.3f; stated %.3f; mean over truth %.4f", variance/bound, stated/trials/(mean*mean)/bound, mean/((high-low)*2/rate))
	if variance/bound > 1.15 {
		t.Errorf("the variance is %.3f of 1/(BT)", variance/bound)
	}
	if s := stated / trials / (mean * mean) / variance; s < 0.9 || s > 1.1 {
		t.Errorf("the stated variance is %.3f of the true one", s)
	}
	if math.Abs(mean/((high-low)*2/rate)-1) > 0.003 {
		t.Errorf("the band's power is biased: %g", mean/((high-low)*2/rate))
	}
}

// TestToneAtEveryFractionOfALine: without noise a tone comes out exactly, wherever it lies.
func TestToneAtEveryFractionOfALine(t *testing.T) {
	const n = 1000
	x := make([]float64, n)
	for step := range 101 {
		w := 2 * math.Pi * (20 + float64(step)/100) / n
		for i := range x {
			x[i] = 0.3 + 1.7*math.Cos(w*(float64(i)-(n-1)/2.0)+0.4) + 0.2*math.Cos(3*w*(float64(i)-(n-1)/2.0)-1)
		}
		a, err := FitTones(x, []float64{w, 3 * w})
		if err != nil {
			t.Fatal(err)
		}
		if d := cmplx.Abs(a[0]-cmplx.Rect(1.7, 0.4)) + cmplx.Abs(a[1]-cmplx.Rect(0.2, -1)); d > 1e-11 {
			t.Errorf("at %.2f lines the fit is off by %.1e", 20+float64(step)/100, d)
		}
		Subtract(x, []float64{w, 3 * w}, a)
		removeMean(x)
		if rms := math.Sqrt(meanSquare(x)); rms > 1e-11 {
			t.Errorf("at %.2f lines %.1e is left", 20+float64(step)/100, rms)
		}
	}
	if _, err := FitTones(x, []float64{0.1, 0.1 + 1e-7}); err == nil {
		t.Error("two tones that cannot be told apart were fitted")
	}
}

func TestClockDeviationIsFound(t *testing.T) {
	const rate, n, clock = 4000.0, 16000, 80e-6
	r := rand.New(rand.NewPCG(13, 1))
	tones := []float64{10.25, 85.75, 341.25, 1001.75}
	x := make([]float64, n)
	for i := range x {
		for _, f := range tones {
			x[i] += math.Cos(2 * math.Pi * f * (1 + clock) * float64(i) / rate)
		}
		x[i] += 0.1 * r.NormFloat64()
	}
	f, err := FitDriven(x, rate, tones, []float64{50})
	if err != nil {
		t.Fatal(err)
	}
	if d := math.Abs(f.Clock - clock); d > 5*f.ClockSigma || f.ClockSigma > 1e-6 {
		t.Errorf("clock %.2e ± %.1e, truth %.2e", f.Clock, f.ClockSigma, clock)
	}
	for k := range tones {
		if d := math.Abs(cmplx.Abs(f.Amplitude[k]) - 1); d > 5*0.1*math.Sqrt(2.0/n) {
			t.Errorf("tone %g: amplitude off by %.1e", tones[k], d)
		}
	}
}

// TestDecimationKeepsTheBand: gain within 1e-5 in the band, what folds back at least 90 dB down.
func TestDecimationKeepsTheBand(t *testing.T) {
	const rate, n, pass = 48000.0, 48000, 1200.0
	tone := func(hz float64) Decimated {
		x := make([]float64, n)
		for i := range x {
			x[i] = math.Cos(2 * math.Pi * hz * float64(i) / rate)
		}
		return Decimate(x, rate, pass)
	}
	for _, hz := range []float64{1, 10, 100, 500, 1000, 1200} {
		d := tone(hz)
		a, err := FitTones(d.Samples, []float64{2 * math.Pi * hz / d.Rate})
		if err != nil {
			t.Fatal(err)
		}
		middle := d.Delay + float64(len(d.Samples)-1)/2/d.Rate
		if g := cmplx.Abs(a[0] - cmplx.Rect(1, 2*math.Pi*hz*middle)); g > 3e-5 {
			t.Errorf("%g Hz comes out off by %.1e", hz, g)
		}
	}
	d := tone(1)
	if d.Rate >= rate/8 {
		t.Fatalf("the rate is still %g Hz", d.Rate)
	}
	for _, k := range []float64{1, 2, 3, 5} {
		for _, off := range []float64{-1100, -300, 300, 1100} {
			if rest := tone(k*d.Rate + off); math.Sqrt(meanSquare(rest.Samples)) > math.Pow(10, -90.0/20) {
				t.Errorf("%g Hz folds back at %.1f dB", k*d.Rate+off, 20*math.Log10(math.Sqrt(meanSquare(rest.Samples))))
			}
		}
	}
}

// TestParseval: the power density of a record integrates to its mean square.
func TestParseval(t *testing.T) {
	r := rand.New(rand.NewPCG(14, 1))
	x := make([]float64, 3000)
	for i := range x {
		x[i] = r.NormFloat64()
	}
	s := Periodogram(x, 1000)
	total := 0.0
	for _, p := range s.Power {
		total += p * s.Step
	}
	w := Tukey(len(x), taperShare)
	removeMean(x)
	var want, weight float64
	for i := range x {
		want += x[i] * x[i] * w[i] * w[i]
		weight += w[i] * w[i]
	}
	if math.Abs(total/(want/weight)-1) > 1e-12 {
		t.Errorf("the spectrum holds %g, the record %g", total, want/weight)
	}
}

// pink makes noise of the power density white²·(1 + corner/f) with the wanted rate.
func pink(r *rand.Rand, n int, rate, white, corner float64) []float64 {
	// Sum of random tones on the lines of a record twice as long, so that it does not repeat.
	x := make([]float64, n)
	m := 2 * n
	re, im := make([]float64, m/2), make([]float64, m/2)
	for k := 1; k < m/2; k++ {
		s := white * math.Sqrt(1+corner/(float64(k)*rate/float64(m))) * math.Sqrt(rate/float64(m)/2) * math.Sqrt2
		re[k], im[k] = s*r.NormFloat64()/math.Sqrt2*math.Sqrt2, s*r.NormFloat64()
	}
	inverse(re, im, x)
	return x
}

func TestCornerAndDensityIntervalsHold(t *testing.T) {
	const trials, rate, white, corner = 300, 1024.0, 2.0, 60.0
	r := rand.New(rand.NewPCG(15, 1))
	held := map[string]int{}
	for range trials {
		s := Periodogram(pink(r, 8192, rate, white, corner), rate)
		c, ok := FitCorner(s, 10, 480, nil, nil)
		if !ok {
			t.Fatal("no corner was found")
		}
		if math.Abs(c.Corner.Value-corner) < 1.96*c.Corner.Sigma {
			held["corner"]++
		}
		for _, f := range []float64{20, 200} {
			e, ok := Density(s, f, nil)
			if !ok {
				t.Fatal("no density was found")
			}
			if math.Abs(e.Value-white*white*(1+corner/f)) < 1.96*e.Sigma {
				held["density"]++
			}
		}
	}
	t.Logf("intervals that held the truth: corner %d of %d, density %d of %d", held["corner"], trials, held["density"], 2*trials)
	if held["corner"] < 273 || held["density"] < 546 { // 91 %: below it by chance once in 1000
		t.Errorf("intervals hold too seldom: %v", held)
	}
	if _, ok := Density(Periodogram(make([]float64, 64), 64), 2, nil); ok {
		t.Error("a density was given for silence")
	}
}
