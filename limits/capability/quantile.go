package capability

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// The quantiles that stand for x̄ ± 3s and x̄ (ISO 22514-2:2017, reference limits): of a normal
// distribution they are just that.
const (
	lowQuantile  = 0.00135
	highQuantile = 0.99865
)

// quantiles are the three reference quantiles and how far each may be off; exactly one source is set.
type quantiles struct {
	low, middle, high float64
	basis             string
	level             float64
	// From the values alone: order statistics that hold all three at once.
	values                      []float64
	lowEnds, middleEnds, hiEnds [2]float64
	// From a distribution fitted to them.
	transform PowerTransform
	mean, sd  float64 // of the transformed values
	n         int
}

// LeastForQuantiles is the number of values from which the 0.135 % and 99.865 % quantiles are taken from
// the values themselves: so many that the least value lies below the first with enough
// confidence, (1 − 0.00135)ⁿ ≤ (1 − level)/6, a sixth because three quantiles with two ends each share
// the risk (Bonferroni). At 95 % it is 3544.
func LeastForQuantiles(level float64) int {
	return int(math.Ceil(math.Log((1-level)/6) / math.Log1p(-lowQuantile)))
}

// quantilesOf takes the quantiles from many values, from a fitted distribution where values are
// fewer, or says why neither will do.
func quantilesOf(values []float64, level float64) (*quantiles, string) {
	q := &quantiles{level: level, n: len(values)}
	least := LeastForQuantiles(level)
	if len(values) >= least {
		q.values = slices.Sorted(slices.Values(values))
		q.basis = "quantiles of the values"
		q.low, q.lowEnds = orderStatistics(q.values, lowQuantile, (1-level)/3)
		q.middle, q.middleEnds = orderStatistics(q.values, 0.5, (1-level)/3)
		q.high, q.hiEnds = orderStatistics(q.values, highQuantile, (1-level)/3)
		if q.lowEnds[1] >= q.middleEnds[0] || q.middleEnds[1] >= q.hiEnds[0] {
			return nil, "the values are not normally distributed, and so coarse or so one-sided that their 0.135 %, 50 % and 99.865 % quantiles cannot be told apart"
		}
		return q, ""
	}
	t, y, why := fit(values)
	if why != "" {
		return nil, fmt.Sprintf("the values are not normally distributed, %s, and quantiles from the values themselves need %d of them where there are %d", why, least, len(values))
	}
	q.transform, q.basis = t, t.String()
	q.mean, q.sd = stat.MeanStdDev(y, nil)
	q.low, q.middle, q.high = q.fitted(q.mean, q.sd)
	if math.IsInf(q.high, 1) {
		return nil, fmt.Sprintf("the %v has no 99.865 %% quantile, and quantiles from the values themselves need %d of them where there are %d", t, least, len(values))
	}
	return q, ""
}

func (q *quantiles) fitted(mu, sigma float64) (low, middle, high float64) {
	return q.transform.Back(mu - 3*sigma), q.transform.Back(mu), q.transform.Back(mu + 3*sigma)
}

// orderStatistics is a quantile of sorted values and its distribution-free interval: the closest
// order statistics with at most alpha/2 outside each (H.A. David & H.N. Nagaraja, Order Statistics,
// Wiley 2003, sect. 7.1).
func orderStatistics(sorted []float64, p, alpha float64) (value float64, ends [2]float64) {
	n := len(sorted)
	below := distuv.Binomial{N: float64(n), P: p} // number of values below the quantile
	first := max(0, sort.Search(n, func(k int) bool { return below.CDF(float64(k)) > alpha/2 })-1)
	last := min(n-1, sort.Search(n, func(k int) bool { return below.CDF(float64(k)) >= 1-alpha/2 }))
	return stat.Quantile(p, stat.LinInterp, sorted, nil), [2]float64{sorted[first], sorted[last]}
}

// indices are those of ISO 22514-2: Pp = (U−L)/(Xhigh−Xlow), Ppl = (Xmid−L)/(Xmid−Xlow),
// Ppu = (U−Xmid)/(Xhigh−Xmid), Ppk the lesser of these.
func (q *quantiles) indices(l Limits) (both, lower, upper, least Index) {
	one := func(name, missing string, f func(low, middle, high float64) float64) Index {
		if missing != "" {
			return Index{Name: name, Missing: "no " + name + ": " + missing}
		}
		i := Index{Name: name, Value: f(q.low, q.middle, q.high)}
		if q.values != nil {
			i.Method = "order statistics, cautious"
			i.Low, i.High = q.corners(f)
		} else {
			i.Method = "generalised interval (Weerahandi 1993), λ taken as known"
			i.Low, i.High = pivotInterval(q.mean, q.sd, q.n, q.level, func(mu, sigma float64) float64 { return f(q.fitted(mu, sigma)) })
		}
		return i
	}
	noLower, noUpper, oneOpen := "", "", ""
	if l.Lower == nil {
		noLower, oneOpen = "there is no lower limit", "it needs limits on both sides"
	}
	if l.Upper == nil {
		noUpper, oneOpen = "there is no upper limit", "it needs limits on both sides"
	}
	ppl := func(low, middle, high float64) float64 { return (middle - *l.Lower) / (middle - low) }
	ppu := func(low, middle, high float64) float64 { return (*l.Upper - middle) / (high - middle) }
	lower, upper = one("Ppl", noLower, ppl), one("Ppu", noUpper, ppu)
	both = one("Pp", oneOpen, func(low, middle, high float64) float64 { return (*l.Upper - *l.Lower) / (high - low) })
	switch {
	case l.Lower == nil:
		least = upper
	case l.Upper == nil:
		least = lower
	default:
		least = one("Ppk", "", func(low, middle, high float64) float64 {
			return math.Min(ppl(low, middle, high), ppu(low, middle, high))
		})
		if q.values != nil { // one index rises with the median while the other falls: no corner is greatest
			least.High = math.Min(lower.High, upper.High)
		}
	}
	least.Name = "Ppk"
	return both, lower, upper, least
}

// corners are the extremes of an index while each quantile goes through its interval: Pp, Ppl and Ppu
// are monotone in each quantile, so they lie at corners.
func (q *quantiles) corners(f func(low, middle, high float64) float64) (least, greatest float64) {
	least, greatest = math.Inf(1), math.Inf(-1)
	for _, low := range q.lowEnds {
		for _, middle := range q.middleEnds {
			for _, high := range q.hiEnds {
				v := f(low, middle, high)
				least, greatest = math.Min(least, v), math.Max(greatest, v)
			}
		}
	}
	return least, greatest
}

// outside is the fraction expected outside by the fitted distribution. Quantiles of the values
// themselves expect just what was counted.
func (q *quantiles) outside(l Limits) Outside {
	var o Outside
	if q.values != nil {
		o.missing("no distribution was fitted: the counted fraction stands for the expected one")
		return o
	}
	below := func(mu, sigma float64) float64 {
		if l.Lower == nil || *l.Lower <= 0 {
			return 0
		}
		return distuv.UnitNormal.CDF((q.transform.Forward(*l.Lower) - mu) / sigma)
	}
	above := func(mu, sigma float64) float64 {
		switch {
		case l.Upper == nil:
			return 0
		case *l.Upper <= 0:
			return 1
		}
		return distuv.UnitNormal.CDF((mu - q.transform.Forward(*l.Upper)) / sigma)
	}
	one := func(f func(mu, sigma float64) float64) Fraction {
		fraction := Fraction{Value: f(q.mean, q.sd), Method: q.basis + ", generalised interval (Weerahandi 1993)"}
		fraction.Low, fraction.High = pivotInterval(q.mean, q.sd, q.n, q.level, f)
		return fraction
	}
	o.Below, o.Above = one(below), one(above)
	o.Total = one(func(mu, sigma float64) float64 { return below(mu, sigma) + above(mu, sigma) })
	if l.Lower == nil {
		o.Below = Fraction{Missing: "there is no lower limit"}
	}
	if l.Upper == nil {
		o.Above = Fraction{Missing: "there is no upper limit"}
	}
	return o
}
