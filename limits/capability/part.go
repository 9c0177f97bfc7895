package capability

import (
	"fmt"
	"math"

	"lotgate/limits/gauge/variance"
)

// GaugeSpread is the gauge's own standard deviation (R&R) with its degrees of freedom; 0 stands for
// infinitely many.
type GaugeSpread struct {
	Sigma float64 `json:"sigma"` // in the reading's unit
	Dof   float64 `json:"dof"`
}

// PartOnly is the capability of the parts with the gauge's spread taken out.
type PartOnly struct {
	Sigma      Spread  `json:"sigma"`
	GaugeShare float64 `json:"gauge_share"` // of the observed variance, 0 to 1
	Pp         Index   `json:"pp"`
	Ppk        Index   `json:"ppk"`
	// Missing is the sentence in place of all numbers.
	Missing string `json:"missing,omitempty"`
}

// WithoutGauge takes the gauge's variance out of the observed one: σ²part = σ²obs − σ²gauge, all
// values, normal distribution. The interval of σpart is the modified large-sample one of a difference
// (Ting et al. 1990), that of Pp follows from it, and that of Ppk is Bissell's with the degrees of
// freedom of the difference (Satterthwaite 1946) and the mean's variance as observed:
// Ppk ± z·√(σ²obs/(9n·σ²part) + Ppk²/(2ν)).
func (r Result) WithoutGauge(gauge GaugeSpread) (PartOnly, error) {
	if !(gauge.Sigma >= 0) || math.IsInf(gauge.Sigma, 0) || !(gauge.Dof >= 0) {
		return PartOnly{}, fmt.Errorf("the gauge's standard deviation is %g with %g degrees of freedom: neither may be negative or unknown", gauge.Sigma, gauge.Dof)
	}
	if r.Basis != "normal distribution" {
		return PartOnly{Missing: "the gauge's spread is not taken out: the values are not normally distributed"}, nil
	}
	dof := gauge.Dof
	if dof == 0 {
		dof = math.Inf(1)
	}
	observed := variance.MeanSquare{Value: r.Overall.Sigma * r.Overall.Sigma, Dof: r.Overall.Dof}
	own := variance.MeanSquare{Value: gauge.Sigma * gauge.Sigma, Dof: dof}
	p := PartOnly{GaugeShare: own.Value / observed.Value}
	if own.Value >= observed.Value {
		p.Missing = fmt.Sprintf("the gauge's own standard deviation %.4g is not smaller than the observed %.4g: nothing can be said of the parts' spread, except that this gauge does not see it", gauge.Sigma, r.Overall.Sigma)
		return p, nil
	}
	set, err := variance.New(r.Level, observed, own)
	if err != nil {
		return PartOnly{}, err
	}
	difference := []float64{1, -1}
	low, high := set.Interval(difference)
	p.Sigma = Spread{Sigma: math.Sqrt(set.Value(difference)), Low: math.Sqrt(math.Max(0, low)), High: math.Sqrt(high), Dof: set.Dof(difference), Method: "observed variance less the gauge's"}
	if low <= 0 {
		why := fmt.Sprintf("the observed spread is not proven to be greater than the gauge's own (%.4g of %.4g): measure more parts or study the gauge longer", gauge.Sigma, r.Overall.Sigma)
		p.Pp, p.Ppk = Index{Name: "Pp", Missing: why}, Index{Name: "Ppk", Missing: why}
		return p, nil
	}
	p.Pp, p.Ppk = r.partIndices(p.Sigma)
	return p, nil
}

func (r Result) partIndices(s Spread) (pp, ppk Index) {
	pp, ppk = Index{Name: "Pp", Method: "modified large sample"}, Index{Name: "Ppk", Method: "Bissell 1990, Satterthwaite"}
	room := math.Inf(1)
	if r.Limits.Lower != nil {
		room = r.Mean - *r.Limits.Lower
	}
	if r.Limits.Upper != nil {
		room = math.Min(room, *r.Limits.Upper-r.Mean)
	}
	ppk.Value = room / (3 * s.Sigma)
	known := float64(r.N) * s.Sigma * s.Sigma / (r.Overall.Sigma * r.Overall.Sigma)
	ppk.Low, ppk.High = BissellInterval(ppk.Value, known, s.Dof, r.Level)
	if r.Limits.Lower == nil || r.Limits.Upper == nil {
		pp = Index{Name: "Pp", Missing: "no Pp: it needs limits on both sides"}
		return pp, ppk
	}
	width := *r.Limits.Upper - *r.Limits.Lower
	pp.Value, pp.Low, pp.High = width/(6*s.Sigma), width/(6*s.High), width/(6*s.Low)
	return pp, ppk
}
