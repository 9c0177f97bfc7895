package gauge

import (
	"math"
	"slices"

	"lotgate/limits/gauge/variance"
)

// Ranges are the intermediate figures of the average-and-range method.
type Ranges struct {
	Average         float64 `json:"average"`           // R̄, average range of the repeats
	OperatorRange   float64 `json:"operator_range"`    // X̄diff, greatest less least operator mean
	PartRange       float64 `json:"part_range"`        // Rp, greatest less least part mean
	K1              float64 `json:"k1"`                // repeatability = R̄·K1
	K2              float64 `json:"k2"`                // operators = √((X̄diff·K2)² − EV²/(p·r)); 0 with one operator
	K3              float64 `json:"k3"`                // parts = Rp·K3
	UpperRangeLimit float64 `json:"upper_range_limit"` // D4·R̄: a greater range is a slip of the measurement
}

// manyRanges is the number of ranges above which d2 stands for d2* in K1 (AIAG 2010, appendix C).
const manyRanges = 15

// AverageAndRange is the average-and-range method of a crossed study (AIAG, Measurement Systems
// Analysis, 4th ed. 2010, ch. III-B). It has no interaction: where there is one, use ANOVA. Each squared
// range estimate is taken as a mean square with the degrees of freedom of its range (Patnaik 1950), which
// makes its intervals approximate.
func AverageAndRange(readings []Reading, o Options) (Study, error) {
	g, err := crossed(readings)
	if err != nil {
		return Study{}, err
	}
	s, err := newStudy("average and range", g, o)
	if err != nil {
		return Study{}, err
	}
	p, operators, r := g.size()
	ranges := &Ranges{Average: g.averageRange(), PartRange: g.rangeOfMeans(len(g.parts), func(i int) float64 { return g.mean(i, -1) })}
	s.Ranges = ranges

	d2, d3 := rangeMoments(len(g.trials))
	m := p * operators
	divisor := d2
	if m <= manyRanges {
		divisor = averageRangeFactor(d2, d3, m)
	}
	ranges.K1 = 1 / divisor
	ranges.UpperRangeLimit = ranges.Average * (1 + 3*d3/d2)
	repeats := variance.MeanSquare{Value: square(ranges.Average * ranges.K1), Dof: rangeDof(d2, d3, m)}

	d2, d3 = rangeMoments(len(g.parts))
	ranges.K3 = 1 / averageRangeFactor(d2, d3, 1)
	parts := variance.MeanSquare{Value: square(ranges.PartRange * ranges.K3), Dof: rangeDof(d2, d3, 1)}

	var mod model
	if len(g.operators) == 1 {
		if mod.set, err = variance.New(s.Level, parts, repeats); err != nil {
			return Study{}, err
		}
		mod.repeatability, mod.part = mod.term(0, 1), mod.term(1, 0)
		return s, s.fill(mod, o.Tolerance)
	}
	d2, d3 = rangeMoments(len(g.operators))
	ranges.K2 = 1 / averageRangeFactor(d2, d3, 1)
	ranges.OperatorRange = g.rangeOfMeans(len(g.operators), func(j int) float64 { return g.mean(-1, j) })
	between := variance.MeanSquare{Value: square(ranges.OperatorRange * ranges.K2), Dof: rangeDof(d2, d3, 1)}
	if mod.set, err = variance.New(s.Level, parts, between, repeats); err != nil {
		return Study{}, err
	}
	mod.repeatability, mod.operator, mod.part = mod.term(0, 0, 1), mod.term(0, 1, -1/(p*r)), mod.term(1, 0, 0)
	return s, s.fill(mod, o.Tolerance)
}

func square(x float64) float64 { return x * x }

func (g *grid) averageRange() float64 {
	sum := 0.0
	for _, ofPart := range g.value {
		for _, trials := range ofPart {
			sum += slices.Max(trials) - slices.Min(trials)
		}
	}
	p, o, _ := g.size()
	return sum / (p * o)
}

func (g *grid) rangeOfMeans(n int, mean func(int) float64) float64 {
	least, greatest := math.Inf(1), math.Inf(-1)
	for i := range n {
		least, greatest = math.Min(least, mean(i)), math.Max(greatest, mean(i))
	}
	return greatest - least
}
