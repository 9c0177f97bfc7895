package signal

import (
	"math"
	"math/rand/v2"
	"testing"
)

// heydemann is a quadrature detector's pair of signals for a phase: u1 + p and (u2·cos α − u1·sin α)/r + q
// with u1 = R·cos φ, u2 = R·sin φ (P.L.M. Heydemann, Appl. Opt. 20 (1981) 3382, eq. 2; from memory).
func heydemann(phase, radius, p, q, alpha, r float64) (x, y float64) {
	u1, u2 := radius*math.Cos(phase), radius*math.Sin(phase)
	return u1 + p, (u2*math.Cos(alpha)-u1*math.Sin(alpha))/r + q
}

// TestEllipseGivesHeydemannsErrors: offsets p and q, gain ratio r and quadrature error α of his model come back: A
// = R, B = R/r, and u2·cos α − u1·sin α = R·sin(φ − α) = R·cos(φ − α − π/2), so that |δ| = π/2 + α. His
// conic A·x² + B·y² + C·x·y + D·x + E·y = 1 with A = (R²cos²α − p² − r²q² − 2rpq·sin α)⁻¹, B = A·r²,
// C = 2A·r·sin α, D = −2A·(p + rq·sin α), E = −2A·r·(rq + p·sin α) (his eq. 4 to 8; from memory) holds
// for the fitted ellipse.
func TestEllipseGivesHeydemannsErrors(t *testing.T) {
	rnd := rand.New(rand.NewPCG(41, 1))
	for range 300 {
		radius, p, q := 1+rnd.Float64(), 0.4*rnd.Float64()-0.2, 0.4*rnd.Float64()-0.2
		alpha, r := 0.8*rnd.Float64()-0.4, 0.6+0.8*rnd.Float64()
		var x, y []float64
		for k := range 10 {
			a, b := heydemann(2*math.Pi*float64(k)/10+0.3*rnd.Float64(), radius, p, q, alpha, r)
			x, y = append(x, a), append(y, b)
		}
		e, err := FitEllipse(x, y, nil, 1e-3, 1e-3)
		if err != nil {
			t.Fatal(err)
		}
		for name, v := range map[string][2]float64{"p": {e.X0, p}, "q": {e.Y0, q}, "R": {e.A, radius}, "R/r": {e.B, radius / r}, "π/2 + α": {e.Delta, math.Pi/2 + alpha}} {
			if math.Abs(v[0]-v[1]) > 1e-9 {
				t.Errorf("%s: %.12g, want %.12g", name, v[0], v[1])
			}
		}
		sin := -math.Cos(e.Delta) // of α
		fp, fq, fr := e.X0, e.Y0, e.A/e.B
		ca := 1 / (e.A*e.A*(1-sin*sin) - fp*fp - fr*fr*fq*fq - 2*fr*fp*fq*sin)
		for k := range x {
			conic := ca*x[k]*x[k] + ca*fr*fr*y[k]*y[k] + 2*ca*fr*sin*x[k]*y[k] - 2*ca*(fp+fr*fq*sin)*x[k] - 2*ca*fr*(fr*fq+fp*sin)*y[k]
			if math.Abs(conic-1) > 1e-6 {
				t.Errorf("point %d: Heydemann's conic gives %.9f, want 1", k, conic)
			}
		}
	}
}

// TestEllipseIsUnbiasedAndKnowsItsScatter fits noisy points whose noise differs between the coordinates and whose
// gain differs between the points: the mean error is within its own scatter and the bias of the second
// order in the noise, σ²/A, that every such fit has (the circle's curvature), and the scatter
// found is the one stated.
func TestEllipseIsUnbiasedAndKnowsItsScatter(t *testing.T) {
	rnd := rand.New(rand.NewPCG(42, 1))
	const runs, n = 1500, 12
	want := [5]float64{0.03, -0.05, 1, 0.8, 1.7}
	const sigmaX, sigmaY = 0.01, 0.02
	var sum, square, stated [5]float64
	ratio := 0.0
	for range runs {
		var x, y, g []float64
		start := 2 * math.Pi * rnd.Float64()
		for k := range n {
			phase := start + 2*math.Pi*float64(k)/n
			g = append(g, 1-0.03*(float64(k)-n/2)/n)
			x = append(x, want[0]+g[k]*want[2]*math.Cos(phase)+sigmaX*rnd.NormFloat64())
			y = append(y, want[1]+g[k]*want[3]*math.Cos(phase+want[4])+sigmaY*rnd.NormFloat64())
		}
		e, err := FitEllipse(x, y, g, sigmaX, sigmaY)
		if err != nil {
			t.Fatal(err)
		}
		for j, v := range []float64{e.X0, e.Y0, e.A, e.B, e.Delta} {
			sum[j] += v - want[j]
			square[j] += (v - want[j]) * (v - want[j])
			stated[j] += e.Sigma[j] * e.Sigma[j]
		}
		ratio += e.Ratio / runs
	}
	for j := range want {
		scatter := math.Sqrt(square[j] / runs)
		if math.Abs(sum[j]/runs) > 4*scatter/math.Sqrt(runs)+1.5*sigmaY*sigmaY {
			t.Errorf("parameter %d: mean error %.3g of a scatter of %.3g", j, sum[j]/runs, scatter)
		}
		if s := math.Sqrt(stated[j]/runs) / scatter; math.Abs(s-1) > 0.06 {
			t.Errorf("parameter %d: scatter stated is %.3f of that found", j, s)
		}
	}
	if math.Abs(ratio-1) > 0.05 {
		t.Errorf("χ² per degree of freedom is %.3f", ratio)
	}
}

func TestNoEllipse(t *testing.T) {
	line := []float64{0, 1, 2, 3, 4, 5, 6, 7}
	same := make([]float64, 8)
	for name, xy := range map[string][2][]float64{"a line": {line, line}, "one point": {same, same}, "five points": {line[:5], []float64{0, 1, 0, -1, 0}}} {
		if e, err := FitEllipse(xy[0], xy[1], nil, 0.1, 0.1); err == nil {
			t.Errorf("%s is an ellipse: %+v", name, e)
		}
	}
}
