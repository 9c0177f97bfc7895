package gauge

import (
	"fmt"
	"math"

	"lotgate/limits/gauge/variance"
)

// Options of a study.
type Options struct {
	Level       float64 // of confidence; 0 stands for 0.95
	Tolerance   float64 // width between the limits, in the reading's unit; 0 where there is none
	Interaction InteractionRule
}

// StudySpread is the number of standard deviations a percentage of the tolerance covers (AIAG,
// Measurement Systems Analysis, 4th ed. 2010; up to the 3rd edition it was 5.15).
const StudySpread = 6

// Estimate is a value with its confidence interval.
type Estimate struct {
	Value float64 `json:"value"`
	Low   float64 `json:"low"`
	High  float64 `json:"high"`
}

// Component is one source of variation.
type Component struct {
	Sigma        Estimate `json:"sigma"`         // standard deviation, reading's unit
	PercentTotal Estimate `json:"percent_total"` // of the total standard deviation
	Contribution Estimate `json:"contribution"`  // percent of the total variance
	// PercentTolerance is StudySpread standard deviations in percent of the tolerance; nil without one.
	PercentTolerance *Estimate `json:"percent_tolerance,omitempty"`
	// Dof are effective degrees of freedom (Satterthwaite); 0 where the variance came out as zero.
	Dof float64 `json:"dof"`
	// Missing is the sentence in place of the numbers.
	Missing string `json:"missing,omitempty"`
}

// Study is the result of a crossed study. Intervals are modified large-sample ones (Burdick, Borror &
// Montgomery 2003); a variance that comes out negative is zero, and a note says so.
type Study struct {
	Method          string    `json:"method"`
	Parts           []string  `json:"parts"`
	Operators       []string  `json:"operators"`
	Trials          int       `json:"trials"`
	Level           float64   `json:"level"`
	Table           []Row     `json:"table,omitempty"`  // analysis of variance only
	Ranges          *Ranges   `json:"ranges,omitempty"` // average-and-range method only
	Repeatability   Component `json:"repeatability"`    // EV
	Reproducibility Component `json:"reproducibility"`  // AV: operators and their interaction with parts
	Operator        Component `json:"operator"`         // operators alone
	Interaction     Component `json:"interaction"`      // operators with parts
	RR              Component `json:"rr"`               // repeatability and reproducibility
	Part            Component `json:"part"`             // PV
	Total           Component `json:"total"`            // TV
	// DistinctCategories is 1.41·PV/RR; Categories is its whole part (AIAG wants 5 or more).
	DistinctCategories Estimate `json:"distinct_categories"`
	Categories         int      `json:"categories"`
	Notes              []string `json:"notes,omitempty"`
}

// categoryFactor is the 1.41 of the number of distinct categories (AIAG 2010).
const categoryFactor = 1.41

// term is a variance as a combination of the mean squares, with its estimate (not negative).
type term struct {
	c     []float64
	value float64
}

func (t term) plus(o term) term {
	c := make([]float64, len(t.c))
	for i := range c {
		c[i] = t.c[i] + o.c[i]
	}
	return term{c, t.value + o.value}
}

// model is what both methods hand over.
type model struct {
	set                                        *variance.Set
	repeatability, operator, interaction, part term // operator and interaction without c where not in the model
}

func (m model) term(c ...float64) term { return term{c, math.Max(0, m.set.Value(c))} }

func newStudy(method string, g *grid, o Options) (Study, error) {
	if o.Level == 0 {
		o.Level = 0.95
	}
	if !(o.Level > 0 && o.Level < 1) {
		return Study{}, fmt.Errorf("the level of confidence is %g: give one between 0 and 1, such as 0.95", o.Level)
	}
	if !(o.Tolerance >= 0) || math.IsInf(o.Tolerance, 0) {
		return Study{}, fmt.Errorf("the tolerance is %g: give the width between the limits, or 0 where there is none", o.Tolerance)
	}
	return Study{Method: method, Parts: g.parts, Operators: g.operators, Trials: len(g.trials), Level: o.Level}, nil
}

const oneOperator = "there is one operator only: reproducibility is not part of the result, and any difference between operators or nests is not seen"

// fill turns the model's variances into the study's figures.
func (s *Study) fill(m model, tolerance float64) error {
	rr := m.repeatability
	var reproducibility term
	if m.operator.c != nil {
		reproducibility = m.operator
		if m.interaction.c != nil {
			reproducibility = reproducibility.plus(m.interaction)
		}
		rr = rr.plus(reproducibility)
	}
	if rr.value == 0 {
		return fmt.Errorf("repeats and operators agree in every digit: the measurement is too coarse to show its own spread; record more digits")
	}
	total := rr.plus(m.part)
	component := func(t term) Component { return s.component(m.set, t, total, tolerance) }
	s.Repeatability, s.RR, s.Part, s.Total = component(m.repeatability), component(rr), component(m.part), component(total)
	if m.operator.c == nil {
		s.Reproducibility.Missing, s.Operator.Missing, s.Interaction.Missing = oneOperator, oneOperator, oneOperator
		s.Notes = append(s.Notes, oneOperator)
	} else {
		s.Reproducibility, s.Operator = component(reproducibility), component(m.operator)
		s.negative(m.set, m.operator, "operators")
		if m.interaction.c != nil {
			s.Interaction = component(m.interaction)
			s.negative(m.set, m.interaction, "the interaction")
		} else {
			s.Interaction.Missing = "the interaction of operators with parts is not in the model"
		}
	}
	s.negative(m.set, m.part, "parts")
	low, high := m.set.Ratio(m.part.c, rr.c)
	s.DistinctCategories = estimate(categoryFactor*math.Sqrt(m.part.value/rr.value), categoryFactor*math.Sqrt(low), categoryFactor*math.Sqrt(high))
	s.Categories = int(s.DistinctCategories.Value)
	return nil
}

func (s *Study) negative(set *variance.Set, t term, what string) {
	if set.Value(t.c) < 0 {
		s.Notes = append(s.Notes, "the variance of "+what+" came out below zero and was set to zero: it is hidden by the spread of the repeats")
	}
}

func (s *Study) component(set *variance.Set, t, total term, tolerance float64) Component {
	low, high := set.Interval(t.c)
	c := Component{Dof: set.Dof(t.c), Sigma: estimate(math.Sqrt(t.value), math.Sqrt(math.Max(0, low)), math.Sqrt(math.Max(0, high)))}
	share := t.value / total.value
	least, greatest := set.Ratio(t.c, total.c)
	greatest = math.Min(1, greatest)
	c.Contribution = estimate(100*share, 100*least, 100*greatest)
	c.PercentTotal = estimate(100*math.Sqrt(share), 100*math.Sqrt(least), 100*math.Sqrt(greatest))
	if tolerance > 0 {
		scale := 100 * StudySpread / tolerance
		p := estimate(scale*c.Sigma.Value, scale*c.Sigma.Low, scale*c.Sigma.High)
		c.PercentTolerance = &p
	}
	return c
}

// estimate widens an interval to its value: where another variance was set to zero, a sum of variances is a
// little more than its combination of mean squares.
func estimate(value, low, high float64) Estimate {
	return Estimate{Value: value, Low: math.Min(low, value), High: math.Max(high, value)}
}
