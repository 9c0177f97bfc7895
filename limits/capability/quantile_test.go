package capability

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// TestLeastForQuantiles: 0.99865ⁿ must come down to 0.05/6 (logarithms by hand: 4.7875/0.00135091).
func TestLeastForQuantiles(t *testing.T) {
	if n := LeastForQuantiles(0.95); n != 3544 {
		t.Errorf("%d", n)
	}
}

// TestTransformBack: what is transformed comes back.
func TestTransformBack(t *testing.T) {
	for _, lambda := range []float64{-2, -0.5, 0, 0.33, 1, 2} {
		tr := PowerTransform{Lambda: lambda, Scale: 3}
		for _, x := range []float64{0.5, 3, 7} {
			near(t, tr.String(), tr.Back(tr.Forward(x)), x, 1e-12)
		}
	}
}

// TestFindsPower: values whose square root is normal have λ near ½, and log-normal values need no search.
func TestFindsPower(t *testing.T) {
	root := normalScores(400, 5, 1.2)
	squares, exponentials := make([]float64, len(root)), make([]float64, len(root))
	for i, x := range root {
		squares[i], exponentials[i] = x*x, math.Exp(x/5)
	}
	tr, y, why := fit(squares)
	if why != "" {
		t.Fatal(why)
	}
	near(t, "λ", tr.Lambda, 0.5, 0.05)
	if AndersonDarling(y).Rejected() {
		t.Error("still not normal")
	}
	if tr, _, why := fit(exponentials); why != "" || tr.Lambda != 0 || tr.String() != "log-normal distribution" {
		t.Errorf("%v %s", tr, why)
	}
}

// logNormal are values with just the mean and spread of logarithms given.
func logNormal(n int, mu, sigma float64) []float64 {
	x := normalScores(n, mu, sigma)
	for i := range x {
		x[i] = math.Exp(x[i])
	}
	return x
}

// TestLogNormal: quantiles e^(μ±3σ) by the definition of the distribution, indices by ISO 22514-2.
func TestLogNormal(t *testing.T) {
	r, err := Study([][]float64{logNormal(200, 0, 0.5)}, Limits{Lower: ptr(0.1), Upper: ptr(6), Target: ptr(1)}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	if r.Basis != "log-normal distribution" || !r.Normality.Rejected() {
		t.Fatalf("basis %q, A*² %g", r.Basis, r.Normality.Adjusted)
	}
	low, high := math.Exp(-1.5), math.Exp(1.5)
	near(t, "Pp", r.Pp.Value, 5.9/(high-low), 1e-9)
	near(t, "Ppu", r.Ppu.Value, 5/(high-1), 1e-9)
	near(t, "Ppl", r.Ppl.Value, 0.9/(1-low), 1e-9)
	near(t, "Ppk", r.Ppk.Value, 0.9/(1-low), 1e-9)
	near(t, "above", r.Outside.Above.Value, distuv.UnitNormal.Survival(math.Log(6)/0.5), 1e-12)
	for _, i := range []Index{r.Cp, r.Cpk, r.Cpm} {
		if !strings.Contains(i.Missing, "the values are not normally distributed (A*² = ") {
			t.Errorf("%s: %q", i.Name, i.Missing)
		}
	}
	for _, i := range []Index{r.Pp, r.Ppk, r.Ppl, r.Ppu} {
		if !(i.Low < i.Value && i.Value < i.High) {
			t.Errorf("%s %g not inside %g to %g", i.Name, i.Value, i.Low, i.High)
		}
	}
}

// TestFittedCoverage holds the intervals of a fitted log-normal distribution and of the fraction outside
// two limits to 95 % ± 1.5 %.
func TestFittedCoverage(t *testing.T) {
	const runs, n = 800, 100
	random := rand.New(rand.NewPCG(1993, 8))
	limits := Limits{Lower: ptr(0.1), Upper: ptr(6)}
	truth := map[string]float64{"Ppk": math.Min(5/(math.Exp(1.5)-1), 0.9/(1-math.Exp(-1.5))), "Pp": 5.9 / (math.Exp(1.5) - math.Exp(-1.5)),
		"total": distuv.UnitNormal.Survival(math.Log(6)/0.5) + distuv.UnitNormal.CDF(math.Log(0.1)/0.5)}
	inside := map[string]int{}
	for range runs {
		y := make([]float64, n)
		for i := range y {
			y[i] = 0.5 * random.NormFloat64()
		}
		q := &quantiles{level: 0.95, n: n, transform: PowerTransform{Scale: 1}}
		q.mean, q.sd = stat.MeanStdDev(y, nil)
		q.low, q.middle, q.high = q.fitted(q.mean, q.sd)
		pp, _, _, ppk := q.indices(limits)
		total := q.outside(limits).Total
		for name, ends := range map[string][2]float64{"Pp": {pp.Low, pp.High}, "Ppk": {ppk.Low, ppk.High}, "total": {total.Low, total.High}} {
			if ends[0] <= truth[name] && truth[name] <= ends[1] {
				inside[name]++
			}
		}
	}
	for name := range truth {
		share := float64(inside[name]) / runs
		t.Logf("%s %.4f", name, share)
		if math.Abs(share-0.95) > 0.015 {
			t.Errorf("the interval of %s holds the truth in %.1f %%", name, 100*share)
		}
	}
}

// TestManyValues: from 3544 values on the quantiles are the values' own, and the true indices of an
// exponential distribution (quantiles −ln(1−p)) lie inside the cautious intervals at least as often
// as stated.
func TestManyValues(t *testing.T) {
	random := rand.New(rand.NewPCG(22514, 2))
	exponential := func(n int) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = random.ExpFloat64() - 1 // negative ones: no Box–Cox
		}
		return x
	}
	limits := Limits{Lower: ptr(-1.5), Upper: ptr(8)}
	quantile := func(p float64) float64 { return -math.Log1p(-p) - 1 }
	want := (8 - quantile(0.5)) / (quantile(0.99865) - quantile(0.5))
	const runs = 200
	inside := 0
	for range runs {
		r, err := Study([][]float64{exponential(4000)}, limits, 0.95)
		if err != nil || r.Basis != "quantiles of the values" {
			t.Fatal(r.Basis, err)
		}
		if r.Ppu.Low <= want && want <= r.Ppu.High {
			inside++
		}
		if r.Ppk.Low > r.Ppk.Value || r.Ppk.Value > r.Ppk.High {
			t.Errorf("Ppk %+v", r.Ppk)
		}
	}
	if inside < runs*95/100 {
		t.Errorf("only %d of %d hold the truth", inside, runs)
	}
	r, err := Study([][]float64{exponential(3543)}, limits, 0.95)
	if err != nil || r.Basis != "none" || !strings.Contains(r.Ppk.Missing, "need 3544 of them where there are 3543") || !strings.Contains(r.Ppk.Missing, "not all values are above zero") {
		t.Errorf("%q, %q, %v", r.Basis, r.Ppk.Missing, err)
	}
	if o := r.Outside; o.Total.Missing == "" || o.Observed.Missing != "" || !(o.Observed.High > o.Observed.Value) {
		t.Errorf("outside %+v", o)
	}
}

// TestNoFit: two heaps fit nothing.
func TestNoFit(t *testing.T) {
	x := append(normalScores(50, 10, 0.1), normalScores(50, 20, 0.1)...)
	r, err := Study([][]float64{x}, Limits{Upper: ptr(30)}, 0.95)
	if err != nil || !strings.Contains(r.Ppk.Missing, "neither a log-normal distribution nor a Box–Cox transform (best λ = ") {
		t.Errorf("%q, %v", r.Ppk.Missing, err)
	}
}

// TestCoarseValues: many values of two kinds have no three quantiles.
func TestCoarseValues(t *testing.T) {
	x := make([]float64, 4000)
	for i := range x {
		x[i] = float64(i % 2)
	}
	r, err := Study([][]float64{x}, Limits{Upper: ptr(3)}, 0.95)
	if err != nil || !strings.Contains(r.Ppk.Missing, "cannot be told apart") {
		t.Errorf("%q, %v", r.Ppk.Missing, err)
	}
}
