// Package capability tells how well a stable process keeps inside its limits: Cp, Cpk and their
// relatives with confidence intervals, the fraction expected outside, the same by quantiles where
// values are not normal, and the same of the parts alone where the gauge's own spread is known.
//
// Cp, Cpl, Cpu and Cpk rest on the spread within subgroups, Pp, Ppl, Ppu and Ppk on that of all
// values; sources stand with each function. Indices say something of the future only where a
// control chart shows the process to be stable.
package capability

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat"
)

// Limits are the specification limits and the target, in the reading's unit; nil where there is none.
type Limits struct {
	Lower  *float64 `json:"lower,omitempty"`
	Upper  *float64 `json:"upper,omitempty"`
	Target *float64 `json:"target,omitempty"`
}

// Index is a capability index with its confidence interval.
type Index struct {
	Name   string  `json:"name"`
	Value  float64 `json:"value"`
	Low    float64 `json:"low"`
	High   float64 `json:"high"`
	Method string  `json:"method"` // of the interval
	// Missing is the sentence in place of the numbers.
	Missing string `json:"missing,omitempty"`
}

// Result is a capability study.
type Result struct {
	N         int       `json:"n"`
	Subgroups int       `json:"subgroups"`
	Level     float64   `json:"level"` // of all intervals
	Limits    Limits    `json:"limits"`
	Mean      float64   `json:"mean"`
	Within    Spread    `json:"within"`
	Overall   Spread    `json:"overall"`
	Normality Normality `json:"normality"`
	Cp        Index     `json:"cp"`
	Cpl       Index     `json:"cpl"`
	Cpu       Index     `json:"cpu"`
	Cpk       Index     `json:"cpk"`
	Pp        Index     `json:"pp"`
	Ppl       Index     `json:"ppl"`
	Ppu       Index     `json:"ppu"`
	Ppk       Index     `json:"ppk"`
	Cpm       Index     `json:"cpm"`
	Outside   Outside   `json:"outside"`
	// Basis says what the numbers of Pp, Ppk and the fraction outside rest on.
	Basis string   `json:"basis"`
	Notes []string `json:"notes,omitempty"`
}

// Individuals makes subgroups of one out of values in the order they were made.
func Individuals(values []float64) [][]float64 {
	subgroups := make([][]float64, len(values))
	for i := range values {
		subgroups[i] = values[i : i+1]
	}
	return subgroups
}

// Study works out the capability of values in rational subgroups, each in the order made, at a
// confidence level such as 0.95. At least one limit must be given.
func Study(subgroups [][]float64, limits Limits, level float64) (Result, error) {
	if err := limits.check(); err != nil {
		return Result{}, err
	}
	if !(level > 0 && level < 1) {
		return Result{}, fmt.Errorf("the level of confidence is %g: give one between 0 and 1, such as 0.95", level)
	}
	values, err := flatten(subgroups)
	if err != nil {
		return Result{}, err
	}
	r := Result{N: len(values), Subgroups: len(subgroups), Level: level, Limits: limits, Mean: stat.Mean(values, nil),
		Within: within(subgroups, level), Overall: overall(values, level), Normality: AndersonDarling(values)}
	if r.Normality.Missing != "" {
		r.note(r.Normality.Missing)
	}
	if r.Normality.Rejected() {
		r.notNormal(values)
	} else {
		r.normal()
	}
	r.Outside.count(values, limits, level)
	return r, nil
}

func (r *Result) note(sentence string) { r.Notes = append(r.Notes, sentence) }

func (l Limits) check() error {
	for i, v := range []*float64{l.Lower, l.Upper, l.Target} {
		if v != nil && (math.IsNaN(*v) || math.IsInf(*v, 0)) {
			name := []string{"lower limit", "upper limit", "target"}[i]
			return fmt.Errorf("the %s is %g: give a number or leave it out", name, *v)
		}
	}
	switch {
	case l.Lower == nil && l.Upper == nil:
		return fmt.Errorf("capability needs a lower or an upper limit and has neither")
	case l.Lower != nil && l.Upper != nil && *l.Lower >= *l.Upper:
		return fmt.Errorf("the lower limit %g is not below the upper limit %g: exchange or correct them", *l.Lower, *l.Upper)
	case l.Target != nil && (l.Lower != nil && *l.Target < *l.Lower || l.Upper != nil && *l.Target > *l.Upper):
		return fmt.Errorf("the target %g is outside the limits: correct one of them", *l.Target)
	}
	return nil
}

// normal fills in everything for normally distributed values.
func (r *Result) normal() {
	r.Basis = "normal distribution"
	r.Cp, r.Cpl, r.Cpu, r.Cpk = r.indices("C", r.Within)
	r.Pp, r.Ppl, r.Ppu, r.Ppk = r.indices("P", r.Overall)
	r.Cpm = r.cpm()
	r.Outside = normalOutside(r)
}

// notNormal fills in what can be said of values that are not normal.
func (r *Result) notNormal(values []float64) {
	p := fmt.Sprintf("p = %.3f", r.Normality.P)
	if r.Normality.P < 0.001 {
		p = "p < 0.001"
	}
	because := fmt.Sprintf("the values are not normally distributed (A*² = %.2f, %s)", r.Normality.Adjusted, p)
	r.note(because + ": look first at a control chart, because a process that is not stable looks so too")
	needsNormal := because + ", on which it rests"
	for name, index := range map[string]*Index{"Cp": &r.Cp, "Cpl": &r.Cpl, "Cpu": &r.Cpu, "Cpk": &r.Cpk, "Cpm": &r.Cpm} {
		*index = Index{Name: name, Missing: "no " + name + ": " + needsNormal}
	}
	q, why := quantilesOf(values, r.Level)
	if why != "" {
		r.Basis = "none"
		for name, index := range map[string]*Index{"Pp": &r.Pp, "Ppl": &r.Ppl, "Ppu": &r.Ppu, "Ppk": &r.Ppk} {
			*index = Index{Name: name, Missing: "no " + name + ": " + why}
		}
		r.Outside.missing("no expected fraction outside: " + why)
		return
	}
	r.Basis = q.basis
	r.Pp, r.Ppl, r.Ppu, r.Ppk = q.indices(r.Limits)
	r.Outside = q.outside(r.Limits)
}
