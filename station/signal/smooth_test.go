package signal

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestSmoothKnowsItsUncertainty: over drawn curves, a straight line and a slow wave with noise, the
// interval of two standard uncertainties holds the truth at and between the points as often as a normal
// distribution says (95.4 %).
func TestSmoothKnowsItsUncertainty(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	inside, all := 0, 0
	for range 150 {
		a, b, phase, slow := r.NormFloat64(), r.NormFloat64(), 6*r.Float64(), 0.8+r.Float64()
		size := 0.05 * r.Float64()
		truth := func(x float64) float64 { return a + b*x + size*math.Sin(slow*x+phase) }
		var points []Scattered
		for i := range 30 {
			x := 0.25 * float64(i)
			u := 0.002 * (1 + r.Float64())
			points = append(points, Scattered{x, truth(x) + u*r.NormFloat64(), u})
		}
		s, err := FitSmooth(points, func(x float64) []float64 { return []float64{1, x} }, 0.5, 3)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range []float64{0, 1.1, 3.25, 5.6, 7.25} {
			y, u := s.At(x)
			all++
			if math.Abs(y-truth(x)) <= 2*u {
				inside++
			}
		}
	}
	// Points of one curve share their noise: five of them count as about two.
	share, slack := float64(inside)/float64(all), 4*math.Sqrt(0.046*0.954/(2*150))
	t.Logf("%.1f %% of %d inside two standard uncertainties", 100*share, all)
	if math.Abs(share-0.954) > slack {
		t.Errorf("%.1f %% inside two standard uncertainties", 100*share)
	}
}

func TestSmoothRefusesTooLittle(t *testing.T) {
	line := func(x float64) []float64 { return []float64{1, x} }
	if _, err := FitSmooth(nil, line, 0.5, 2); err != ErrTooFewPoints {
		t.Errorf("no points gave %v", err)
	}
	if _, err := FitSmooth([]Scattered{{0, 1, 0.1}, {1, 2, 0.1}}, line, 0.5, 2); err != ErrTooFewPoints {
		t.Errorf("two points for two coefficients gave %v", err)
	}
}
