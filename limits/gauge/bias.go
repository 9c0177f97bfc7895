package gauge

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// ReferenceUnit is a unit whose value is known better than the gauge measures it, and its readings.
type ReferenceUnit struct {
	Name        string
	Value       float64   // reference value
	Uncertainty float64   // standard uncertainty of it (k = 1), taken as known; 0 where it counts for nothing
	Readings    []float64 // at least 2, under repeatability conditions
}

// Test is Student's t test of "zero": the estimate over its standard uncertainty.
type Test struct {
	StandardUncertainty float64 `json:"standard_uncertainty"`
	// Dof are effective degrees of freedom (Welch–Satterthwaite, JCGM 100:2008, eq. G.2b); 0 stands for
	// infinitely many.
	Dof float64 `json:"dof"`
	T   float64 `json:"t"`
	P   float64 `json:"p"` // two-sided
}

// Bias is the mean of readings less the reference value.
type Bias struct {
	Name      string   `json:"name"`
	Reference float64  `json:"reference"`
	N         int      `json:"n"`
	Mean      float64  `json:"mean"`
	Sigma     float64  `json:"sigma"` // standard deviation of the readings
	Bias      Estimate `json:"bias"`
	Test      Test     `json:"test"`
}

// BiasOf tests the bias of one reference unit (AIAG, Measurement Systems Analysis, 4th ed. 2010, ch.
// III-B, independent sample method). The reference's uncertainty counts in:
// u² = s²/n + u²ref. Without it, this is the plain one-sample t test.
func BiasOf(u ReferenceUnit, level float64) (Bias, error) {
	if err := u.check(level); err != nil {
		return Bias{}, err
	}
	mean, s := stat.MeanStdDev(u.Readings, nil)
	n := float64(len(u.Readings))
	b := Bias{Name: u.Name, Reference: u.Value, N: len(u.Readings), Mean: mean, Sigma: s}
	if s == 0 && u.Uncertainty == 0 {
		return Bias{}, fmt.Errorf("reference unit %q: all %d readings are %g and the reference has no uncertainty, so that nothing can be tested; record more digits or give the reference's uncertainty", u.Name, b.N, mean)
	}
	b.Bias, b.Test = tested(mean-u.Value, s*s/n, n-1, u.Uncertainty*u.Uncertainty, level)
	return b, nil
}

// tested makes interval and t test of a value with a variance from readings, of so many degrees of freedom,
// and a known one.
func tested(value, variance, dof, known, level float64) (Estimate, Test) {
	u2 := variance + known
	t := Test{StandardUncertainty: math.Sqrt(u2), T: value / math.Sqrt(u2)}
	var k float64
	if effective := u2 * u2 / (variance * variance) * dof; effective < 1e6 {
		student := distuv.StudentsT{Sigma: 1, Nu: effective}
		t.Dof, t.P, k = effective, 2*student.CDF(-math.Abs(t.T)), student.Quantile(0.5+level/2)
	} else {
		t.P, k = 2*distuv.UnitNormal.CDF(-math.Abs(t.T)), distuv.UnitNormal.Quantile(0.5+level/2)
	}
	half := k * t.StandardUncertainty
	return Estimate{value, value - half, value + half}, t
}

func (u ReferenceUnit) check(level float64) error {
	if !(level > 0 && level < 1) {
		return fmt.Errorf("the level of confidence is %g: give one between 0 and 1, such as 0.95", level)
	}
	if math.IsNaN(u.Value) || math.IsInf(u.Value, 0) || !(u.Uncertainty >= 0) || math.IsInf(u.Uncertainty, 0) {
		return fmt.Errorf("reference unit %q: its value is %g with uncertainty %g; take both from its certificate", u.Name, u.Value, u.Uncertainty)
	}
	if len(u.Readings) < 2 {
		return fmt.Errorf("reference unit %q: bias needs at least 2 readings and has %d", u.Name, len(u.Readings))
	}
	for i, v := range u.Readings {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("reference unit %q: reading %d is %g; measure it again", u.Name, i+1, v)
		}
	}
	return nil
}
