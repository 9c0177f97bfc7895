package capability

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat"
)

// PowerTransform makes positive values normal: y = ((x/g)^λ − 1)/λ, or ln(x/g) for λ = 0
// (G.E.P. Box & D.R. Cox, J. R. Stat. Soc. B 26 (1964) 211). The scale g, the geometric mean of the
// values, changes nothing but keeps the powers near one.
type PowerTransform struct {
	Lambda float64 `json:"lambda"`
	Scale  float64 `json:"scale"` // in the reading's unit
}

// Forward transforms a positive value.
func (t PowerTransform) Forward(x float64) float64 {
	if t.Lambda == 0 {
		return math.Log(x / t.Scale)
	}
	return (math.Pow(x/t.Scale, t.Lambda) - 1) / t.Lambda
}

// Back is the inverse. What lies past the end of the transform's range is 0 for positive λ
// and +Inf for negative λ.
func (t PowerTransform) Back(y float64) float64 {
	if t.Lambda == 0 {
		return t.Scale * math.Exp(y)
	}
	base := 1 + t.Lambda*y
	if base <= 0 {
		if t.Lambda > 0 {
			return 0
		}
		return math.Inf(1)
	}
	return t.Scale * math.Pow(base, 1/t.Lambda)
}

func (t PowerTransform) String() string {
	if t.Lambda == 0 {
		return "log-normal distribution"
	}
	return fmt.Sprintf("Box–Cox transform with λ = %.2f", t.Lambda)
}

// fit finds a transform after which the test of normality no longer objects: the logarithm if it
// does, else the λ of greatest likelihood between −2 and 2 (in steps of 0.01). The sentence
// says why there is none.
func fit(values []float64) (t PowerTransform, transformed []float64, why string) {
	logs := 0.0
	for _, v := range values {
		if v <= 0 {
			return t, nil, "no log-normal or Box–Cox distribution can be fitted, because not all values are above zero"
		}
		logs += math.Log(v)
	}
	n := float64(len(values))
	t.Scale = math.Exp(logs / n)
	if y := t.all(values); !AndersonDarling(y).Rejected() {
		return t, y, ""
	}
	best, likelihood := 0.0, math.Inf(-1)
	for step := -200; step <= 200; step++ {
		t.Lambda = float64(step) / 100
		// With the geometric mean as scale, the Jacobian's part of the likelihood is zero.
		if l := -n / 2 * math.Log(stat.Variance(t.all(values), nil)); l > likelihood {
			best, likelihood = t.Lambda, l
		}
	}
	t.Lambda = best
	y := t.all(values)
	if test := AndersonDarling(y); test.Rejected() {
		return t, nil, fmt.Sprintf("neither a log-normal distribution nor a Box–Cox transform (best λ = %.2f) makes them normal (A*² = %.2f after it)", t.Lambda, test.Adjusted)
	}
	return t, y, ""
}

func (t PowerTransform) all(values []float64) []float64 {
	y := make([]float64, len(values))
	for i, v := range values {
		y[i] = t.Forward(v)
	}
	return y
}
