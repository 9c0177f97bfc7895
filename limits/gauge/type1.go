package gauge

import (
	"fmt"
	"math"

	"lotgate/limits/capability"
)

const (
	// Share is the part of the tolerance the gauge may take in a type-1 study (common practice).
	Share = 0.2
	// LeastForType1 is the number of readings a type-1 study should have (common practice).
	LeastForType1 = 25
)

// Type1 is the study of one reference unit measured many times over.
type Type1 struct {
	Bias  Bias             `json:"bias"`
	Cg    capability.Index `json:"cg"`
	Cgk   capability.Index `json:"cgk"`
	Notes []string         `json:"notes,omitempty"`
}

// Type1Of works out Cg = 0.2·T/(6s) and Cgk = (0.1·T − |bias|)/(3s) for a tolerance of width T (common
// practice; ISO 22514-7 has other coverage). They are Cp and Cpk of readings between limits of 0.1·T to
// either side of the reference, and their intervals are those: chi-square, and Bissell 1990 with the
// reference's uncertainty added to that of the mean.
func Type1Of(u ReferenceUnit, tolerance, level float64) (Type1, error) {
	if !(tolerance > 0) || math.IsInf(tolerance, 0) {
		return Type1{}, fmt.Errorf("reference unit %q: a type-1 study needs the width between the limits and has %g", u.Name, tolerance)
	}
	b, err := BiasOf(u, level)
	if err != nil {
		return Type1{}, err
	}
	if b.Sigma == 0 {
		return Type1{}, fmt.Errorf("reference unit %q: all %d readings are %g: the measurement is too coarse to show its own spread; record more digits", u.Name, b.N, b.Mean)
	}
	s := Type1{Bias: b, Cg: capability.Index{Name: "Cg", Method: "chi-square"}, Cgk: capability.Index{Name: "Cgk", Method: "Bissell 1990"}}
	n := float64(b.N)
	s.Cg.Value = Share * tolerance / (6 * b.Sigma)
	s.Cg.Low, s.Cg.High = capability.CpInterval(s.Cg.Value, n-1, level)
	s.Cgk.Value = (Share/2*tolerance - math.Abs(b.Bias.Value)) / (3 * b.Sigma)
	known := 1 / (1/n + square(u.Uncertainty/b.Sigma)) // readings that would know the bias as well
	s.Cgk.Low, s.Cgk.High = capability.BissellInterval(s.Cgk.Value, known, n-1, level)
	if b.N < LeastForType1 {
		s.Notes = append(s.Notes, fmt.Sprintf("a type-1 study should have %d readings or more and has %d: its intervals are wide", LeastForType1, b.N))
	}
	return s, nil
}
