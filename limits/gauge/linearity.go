package gauge

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Coefficient of the line of bias against reference value.
type Coefficient struct {
	Estimate
	Test Test `json:"test"`
}

// Linearity is the straight line of bias against reference value.
type Linearity struct {
	Biases    []Bias      `json:"biases"`
	Slope     Coefficient `json:"slope"`     // bias per unit of the reference
	Intercept Coefficient `json:"intercept"` // bias at reference zero
	Residual  float64     `json:"residual"`  // standard deviation of the readings about the line
	RSquared  float64     `json:"r_squared"`
	// Percent linearity is 100·|slope|: how much of a change of the part is lost or added.
	Percent Estimate `json:"percent"`
	// LackOfFit is the p of the F test of the units' mean biases about the line against the repeats (reference
	// uncertainties left out); nil with two units.
	LackOfFit *float64 `json:"lack_of_fit,omitempty"`
	Notes     []string `json:"notes,omitempty"`

	fit line
}

// line keeps what a band needs.
type line struct {
	level, meanX, sxx, readings, residual float64
	intercept, slope                      float64
	units                                 []ReferenceUnit
}

// LinearityOf fits bias against reference value by least squares over all readings (AIAG, Measurement
// Systems Analysis, 4th ed. 2010, ch. III-B). The references' uncertainties, taken as independent, add
// to every variance what they contribute through the same weights; errors common to all
// references, such as one calibration of all, move the line as a whole and are not in the band.
func LinearityOf(units []ReferenceUnit, level float64) (Linearity, error) {
	var l Linearity
	f := line{level: level, units: units}
	meanY := 0.0
	for _, u := range units {
		b, err := BiasOf(u, level)
		if err != nil {
			return Linearity{}, err
		}
		l.Biases = append(l.Biases, b)
		m := float64(b.N)
		f.readings, f.meanX, meanY = f.readings+m, f.meanX+m*u.Value, meanY+m*b.Bias.Value
	}
	f.meanX, meanY = f.meanX/f.readings, meanY/f.readings
	sxy, syy, within := 0.0, 0.0, 0.0
	distinct := map[float64]bool{}
	for i, u := range units {
		distinct[u.Value] = true
		d, m := u.Value-f.meanX, float64(l.Biases[i].N)
		f.sxx += m * d * d
		sxy += m * d * l.Biases[i].Bias.Value
		for _, r := range u.Readings {
			syy += square(r - u.Value - meanY)
		}
		within += (m - 1) * square(l.Biases[i].Sigma)
	}
	if len(distinct) < 2 {
		return Linearity{}, fmt.Errorf("linearity needs reference units of at least 2 different values and has %d: spread them over the range measured", len(distinct))
	}
	f.slope = sxy / f.sxx
	f.intercept = meanY - f.slope*f.meanX
	residual := math.Max(0, syy-f.slope*sxy)
	f.residual = math.Sqrt(residual / (f.readings - 2))
	l.fit, l.Residual, l.RSquared = f, f.residual, 1-residual/syy
	l.Intercept.Estimate, l.Intercept.Test = f.at(0)
	l.Slope.Estimate, l.Slope.Test = f.slopeTest()
	l.Percent = absolute(l.Slope.Estimate, 100)
	l.lackOfFit(residual-within, within, float64(len(distinct))-2)
	return l, nil
}

// Band is the bias the line gives at a reference value, with the confidence interval of the line there.
func (l Linearity) Band(reference float64) Estimate {
	e, _ := l.fit.at(reference)
	return e
}

// Width is linearity in the reading's unit: |slope| over a process as wide as given (AIAG: six of
// its standard deviations).
func (l Linearity) Width(process float64) Estimate { return absolute(l.Slope.Estimate, process) }

func absolute(e Estimate, scale float64) Estimate {
	low, high := math.Abs(e.Low), math.Abs(e.High)
	if low > high {
		low, high = high, low
	}
	if e.Low <= 0 && e.High >= 0 {
		low = 0
	}
	return Estimate{scale * math.Abs(e.Value), scale * low, scale * high}
}

func (f line) at(x float64) (Estimate, Test) {
	known := 0.0
	for _, u := range f.units {
		weight := float64(len(u.Readings)) * (1/f.readings + (x-f.meanX)*(u.Value-f.meanX)/f.sxx)
		known += square(weight * u.Uncertainty)
	}
	own := square(f.residual) * (1/f.readings + square(x-f.meanX)/f.sxx)
	return tested(f.intercept+f.slope*x, own, f.readings-2, known, f.level)
}

func (f line) slopeTest() (Estimate, Test) {
	known := 0.0
	for _, u := range f.units {
		known += square(float64(len(u.Readings)) * (u.Value - f.meanX) / f.sxx * u.Uncertainty)
	}
	return tested(f.slope, square(f.residual)/f.sxx, f.readings-2, known, f.level)
}

const significance = 0.05

func (l *Linearity) lackOfFit(between, within, dof float64) {
	repeats := l.fit.readings - dof - 2
	if dof < 1 || within == 0 {
		return
	}
	p := distuv.F{D1: dof, D2: repeats}.Survival(math.Max(0, between) / dof / (within / repeats))
	l.LackOfFit = &p
	if p < significance {
		l.Notes = append(l.Notes, fmt.Sprintf("a straight line does not describe the bias (lack of fit, p = %.2g): look at each unit's own bias", p))
	}
}
