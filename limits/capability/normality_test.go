package capability

import (
	"math/rand/v2"
	"testing"
)

// TestAdjustedP: percentage points of A*² at 10, 5, 2.5 and 1 % (D'Agostino & Stephens 1986, table 4.7:
// 0.631, 0.752, 0.873, 1.035; from memory). The fit of table 4.9 agrees with that to 2 % of p.
func TestAdjustedP(t *testing.T) {
	for _, c := range []struct{ a, p float64 }{
		{0.631, 0.10}, {0.752, 0.05}, {0.873, 0.025}, {1.035, 0.01},
	} {
		near(t, "p", adjustedP(c.a), c.p, 0.02*c.p)
	}
	last := 1.0
	for a := 0.21; a < 12; a += 0.01 {
		if p := adjustedP(a); p > last+2e-3 || p < 0 {
			t.Errorf("p rises to %g at %g", p, a)
		} else {
			last = p
		}
	}
}

// TestLevelOfTest: normal samples of any size are refused at the level stated.
func TestLevelOfTest(t *testing.T) {
	random := rand.New(rand.NewPCG(1974, 730))
	for _, n := range []int{8, 20, 200} {
		const runs = 8000
		refused := 0
		for range runs {
			x := make([]float64, n)
			for i := range x {
				x[i] = 3 + 0.01*random.NormFloat64()
			}
			if AndersonDarling(x).Rejected() {
				refused++
			}
		}
		near(t, "share refused", float64(refused)/runs, 0.05, 0.0075)
	}
}

// TestChicks: weights of 20 chicks, the running example of D'Agostino & Stephens 1986, ch. 4:
// A² = 0.214 (data and value from memory).
func TestChicks(t *testing.T) {
	x := []float64{156, 162, 168, 182, 186, 190, 190, 196, 202, 210, 214, 220, 226, 230, 230, 236, 236, 242, 246, 270}
	near(t, "A²", AndersonDarling(x).A2, 0.214, 0.0005)
}

// TestFarTail: a value a hundred standard deviations out must not spoil the sum.
func TestFarTail(t *testing.T) {
	x := append(normalScores(20000, 0, 1e-6), 1)
	if test := AndersonDarling(x); !(test.A2 > 100) || test.P != 0 {
		t.Errorf("%+v", test)
	}
}
