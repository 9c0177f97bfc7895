package capability

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Spread is a standard deviation with its confidence interval.
type Spread struct {
	Sigma  float64 `json:"sigma"` // in the reading's unit
	Low    float64 `json:"low"`
	High   float64 `json:"high"`
	Dof    float64 `json:"dof"`    // degrees of freedom, effective ones where estimated from ranges
	Method string  `json:"method"` // how it was estimated
	// Missing is the sentence in place of the numbers.
	Missing string `json:"missing,omitempty"`
}

func spread(sigma, dof, level float64, method string) Spread {
	square := distuv.ChiSquared{K: dof}
	tail := (1 - level) / 2
	return Spread{Sigma: sigma, Dof: dof, Method: method,
		Low: sigma * math.Sqrt(dof/square.Quantile(1-tail)), High: sigma * math.Sqrt(dof/square.Quantile(tail))}
}

// overall is the standard deviation of all values, n − 1 degrees of freedom.
func overall(values []float64, level float64) Spread {
	return spread(stat.StdDev(values, nil), float64(len(values)-1), level, "standard deviation of all values")
}

// within is the spread inside subgroups: pooled where any subgroup has two values or more, by
// average moving range where all are single values.
func within(subgroups [][]float64, level float64) Spread {
	sum, dof := 0.0, 0.0
	for _, g := range subgroups {
		if len(g) > 1 {
			sum += stat.Variance(g, nil) * float64(len(g)-1)
			dof += float64(len(g) - 1)
		}
	}
	if dof == 0 {
		return movingRange(subgroups, level)
	}
	if sum == 0 {
		return Spread{Missing: "the values of each subgroup are all equal: the measurement is too coarse to show the spread within subgroups"}
	}
	return spread(math.Sqrt(sum/dof), dof, level, "pooled standard deviation of the subgroups")
}

// movingRange is the average moving range of two over d2 = 2/√π (individual values in the order
// they were made). Its variance relative to σ² is (0.8264n − 1.0820)/(n−1)²: variance 2 − 4/π of a
// range and covariance of two that share a value, (4/π)(√3/2 + π/12 − 1), over d2². The effective
// degrees of freedom are those of a standard deviation as uncertain, 1/(2·variance). Compare
// J.D. Cryer & T.P. Ryan, J. Qual. Technol. 22 (1990) 187.
func movingRange(singles [][]float64, level float64) Spread {
	n := float64(len(singles))
	sum := 0.0
	for i := 1; i < len(singles); i++ {
		sum += math.Abs(singles[i][0] - singles[i-1][0])
	}
	d2 := 2 / math.Sqrt(math.Pi)
	own := 2 - 4/math.Pi
	shared := 4 / math.Pi * (math.Sqrt(3)/2 + math.Pi/12 - 1)
	variance := ((n-1)*own + 2*(n-2)*shared) / ((n - 1) * (n - 1)) / (d2 * d2)
	return spread(sum/(n-1)/d2, 1/(2*variance), level, "average moving range of two over 1.128")
}

// flatten checks the values and puts them into one list.
func flatten(subgroups [][]float64) ([]float64, error) {
	var all []float64
	for i, g := range subgroups {
		if len(g) == 0 {
			return nil, fmt.Errorf("subgroup %d of %d is empty: leave it out", i+1, len(subgroups))
		}
		for j, v := range g {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, fmt.Errorf("value %d of subgroup %d is %g: leave out what has no number", j+1, i+1, v)
			}
		}
		all = append(all, g...)
	}
	if len(all) < 2 {
		return nil, fmt.Errorf("capability needs at least 2 values and has %d", len(all))
	}
	if allEqual(all) {
		return nil, fmt.Errorf("all %d values are %g: without any spread there is no capability; look whether the measurement is fine enough to see it", len(all), all[0])
	}
	return all, nil
}

func allEqual(values []float64) bool {
	for _, v := range values {
		if v != values[0] {
			return false
		}
	}
	return true
}
