package signal

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestFringesStandAtTheBound: for a real sine of amplitude A over N even steps d in white noise σ,
// var(κ) = 24·σ²/(A²·d²·N·(N²−1)) (Rife & Boorstyn, IEEE Trans. IT-20 (1974) 591, eq. 17 with
// unknown phase and amplitude; the complex tone's 6 becomes 24 for a real one, half the power of σ² on each
// side; formula from memory). And the interval stated holds the truth.
func TestFringesStandAtTheBound(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 7))
	const n, step, sigma, truth = 61, 0.1, 0.01, 4.41
	square, stated, runs := 0.0, 0.0, 3000
	for range runs {
		p, y, gain, noise := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
		phase := 2 * math.Pi * r.Float64()
		for k := range p {
			p[k], gain[k], noise[k] = step*float64(k-n/2), 1, sigma
			y[k] = math.Sin(phase-truth*p[k]) + sigma*r.NormFloat64()
		}
		f, ok := FitFringes(p, y, gain, noise, 0, 0.9*4.4, 1.1*4.4)
		if !ok {
			t.Fatal("no fit")
		}
		square += math.Pow(f.Kappa.Value-truth, 2)
		stated += f.Kappa.Sigma * f.Kappa.Sigma
	}
	bound := 24 * sigma * sigma / (step * step * n * (n*n - 1))
	for name, got := range map[string]float64{"variance": square / float64(runs), "variance stated": stated / float64(runs)} {
		if ratio := got / bound; math.Abs(ratio-1) > 0.12 { // 3000 runs: 2.6 % scatter; the bound is for many fringes
			t.Errorf("%s is %.3f times the bound", name, ratio)
		}
	}
}

// TestFringesAreNotMistaken starts ten per cent off: the neighbouring valleys must not be taken.
func TestFringesAreNotMistaken(t *testing.T) {
	r := rand.New(rand.NewPCG(32, 7))
	for range 200 {
		const n = 60
		truth := 441 * (0.92 + 0.16*r.Float64())
		var p, y, gain, noise []float64
		phase := 2 * math.Pi * r.Float64()
		for k := range n {
			x := -0.15 + 0.3*float64(k)/(n-1)
			g := math.Pow(0.4/(0.4+x), 2)
			p, gain, noise = append(p, x), append(gain, g), append(noise, 1e-3)
			y = append(y, g*math.Sin(phase-truth*(x+2e-5*r.NormFloat64()))+1e-3*r.NormFloat64())
		}
		f, ok := FitFringes(p, y, gain, noise, 2e-5, 0.9*441, 1.1*441)
		if !ok || math.Abs(f.Kappa.Value-truth) > 6*f.Kappa.Sigma {
			t.Errorf("κ %.4f found as %.4f ± %.4f (%v)", truth, f.Kappa.Value, f.Kappa.Sigma, ok)
		}
	}
	if _, ok := FitFringes([]float64{0, 1, 2, 3}, make([]float64, 4), make([]float64, 4), make([]float64, 4), 0, 1, 2); ok {
		t.Error("four positions gave a fit")
	}
}
