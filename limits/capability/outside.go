package capability

import (
	"gonum.org/v1/gonum/stat/distuv"

	"lotgate/limits/sampling"
)

// Fraction is a share of units, 0 to 1, with its confidence interval.
type Fraction struct {
	Value   float64 `json:"value"`
	Low     float64 `json:"low"`
	High    float64 `json:"high"`
	Method  string  `json:"method"`
	Missing string  `json:"missing,omitempty"` // sentence in place of the numbers
}

// Outside is the share of units outside the limits: expected ones from the distribution and
// those counted, which need no distribution.
type Outside struct {
	Below    Fraction `json:"below"`    // the lower limit, expected
	Above    Fraction `json:"above"`    // the upper limit, expected
	Total    Fraction `json:"total"`    // expected
	Observed Fraction `json:"observed"` // counted; Clopper–Pearson interval
}

func (o *Outside) missing(why string) {
	for _, f := range []*Fraction{&o.Below, &o.Above, &o.Total} {
		*f = Fraction{Missing: why}
	}
}

func (o *Outside) count(values []float64, l Limits, level float64) {
	k := 0
	for _, v := range values {
		if l.Lower != nil && v < *l.Lower || l.Upper != nil && v > *l.Upper {
			k++
		}
	}
	o.Observed = Fraction{Value: float64(k) / float64(len(values)), Method: "Clopper–Pearson"}
	o.Observed.Low, o.Observed.High = sampling.ClopperPearson(k, len(values), level)
}

// normalOutside is Φ(−3·Ppl) below and Φ(−3·Ppu) above, with the exact intervals of those indices; the
// total of both sides has the generalised interval of pivotInterval.
func normalOutside(r *Result) Outside {
	var o Outside
	tail := func(i Index, side string) Fraction {
		if i.Missing != "" {
			return Fraction{Missing: "there is no " + side + " limit"}
		}
		phi := func(index float64) float64 { return distuv.UnitNormal.CDF(-3 * index) }
		return Fraction{Value: phi(i.Value), Low: phi(i.High), High: phi(i.Low), Method: "normal distribution, non-central t"}
	}
	o.Below, o.Above = tail(r.Ppl, "lower"), tail(r.Ppu, "upper")
	switch {
	case o.Below.Missing != "":
		o.Total = o.Above
	case o.Above.Missing != "":
		o.Total = o.Below
	default:
		f := func(mu, sigma float64) float64 {
			return distuv.UnitNormal.CDF((*r.Limits.Lower-mu)/sigma) + distuv.UnitNormal.CDF((mu-*r.Limits.Upper)/sigma)
		}
		o.Total = Fraction{Value: o.Below.Value + o.Above.Value, Method: "normal distribution, generalised interval (Weerahandi 1993)"}
		o.Total.Low, o.Total.High = pivotInterval(r.Mean, r.Overall.Sigma, r.N, r.Level, f)
	}
	return o
}
