// Package gauge tells how good a measurement is by measuring: repeatability and reproducibility from
// a crossed study (average-and-range method and analysis of variance), bias and linearity against
// reference units, the type-1 study of one reference unit, and the plan of a study. Every
// figure has its confidence interval.
//
// Operators may be any condition that is changed between series: people, or the nests of an
// automatic station. With one operator only, repeatability is all there is.
package gauge

import (
	"fmt"
	"math"
	"slices"
)

// Reading is one measured value of a crossed study.
type Reading struct {
	Part     string  `json:"part"`
	Operator string  `json:"operator"` // or nest
	Trial    int     `json:"trial"`
	Value    float64 `json:"value"`
}

// grid is a complete crossed study: value[part][operator][trial], in order of first appearance.
type grid struct {
	parts, operators []string
	trials           []int
	value            [][][]float64
}

type cell struct {
	part, operator string
	trial          int
}

func (c cell) String() string {
	return fmt.Sprintf("part %q, operator %q, trial %d", c.part, c.operator, c.trial)
}

// crossed orders readings into a grid and names what is wrong with them.
func crossed(readings []Reading) (*grid, error) {
	g := &grid{}
	found := map[cell]float64{}
	for _, r := range readings {
		c := cell{r.Part, r.Operator, r.Trial}
		if math.IsNaN(r.Value) || math.IsInf(r.Value, 0) {
			return nil, fmt.Errorf("%v: the value is %g; measure this cell again", c, r.Value)
		}
		if _, twice := found[c]; twice {
			return nil, fmt.Errorf("%v: there are two values; give each repeat a trial number of its own", c)
		}
		found[c] = r.Value
		g.parts, g.operators, g.trials = appendNew(g.parts, r.Part), appendNew(g.operators, r.Operator), appendNew(g.trials, r.Trial)
	}
	slices.Sort(g.trials)
	if len(g.parts) < 2 || len(g.trials) < 2 {
		return nil, fmt.Errorf("a gauge study needs at least 2 parts and 2 trials and has %d and %d", len(g.parts), len(g.trials))
	}
	var missing []cell
	first := readings[0].Value
	equal := true
	for _, p := range g.parts {
		var ofPart [][]float64
		for _, o := range g.operators {
			var ofOperator []float64
			for _, t := range g.trials {
				c := cell{p, o, t}
				v, ok := found[c]
				if !ok {
					missing = append(missing, c)
				}
				equal = equal && v == first
				ofOperator = append(ofOperator, v)
			}
			ofPart = append(ofPart, ofOperator)
		}
		g.value = append(g.value, ofPart)
	}
	switch {
	case len(missing) == 1:
		return nil, fmt.Errorf("%v: there is no value; measure this cell", missing[0])
	case len(missing) > 1:
		return nil, fmt.Errorf("%v: there is no value, nor in %d more of %d cells; measure them", missing[0], len(missing)-1, len(g.parts)*len(g.operators)*len(g.trials))
	case equal:
		return nil, fmt.Errorf("all %d values are %g: the measurement is too coarse to see either parts or its own spread", len(readings), first)
	}
	return g, nil
}

func appendNew[T comparable](list []T, x T) []T {
	if slices.Contains(list, x) {
		return list
	}
	return append(list, x)
}

// mean of the values that pass the filter (part, operator); −1 stands for all.
func (g *grid) mean(part, operator int) float64 {
	sum, n := 0.0, 0
	for i := range g.value {
		for j := range g.value[i] {
			if (part < 0 || part == i) && (operator < 0 || operator == j) {
				for _, v := range g.value[i][j] {
					sum, n = sum+v, n+1
				}
			}
		}
	}
	return sum / float64(n)
}

func (g *grid) size() (parts, operators, trials float64) {
	return float64(len(g.parts)), float64(len(g.operators)), float64(len(g.trials))
}
