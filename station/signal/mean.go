package signal

import (
	"math"

	"gonum.org/v1/gonum/stat"
)

// Drift is how far the means of a record's two halves lie apart.
func Drift(x []float64) float64 {
	half := len(x) / 2
	return math.Abs(stat.Mean(x[half:], nil) - stat.Mean(x[:half], nil))
}

// Mean is the mean of independent values, its scatter their standard deviation over √n (GUM 4.2.3). It
// needs two values at least.
func Mean(x []float64) Estimate {
	mean, deviation := stat.MeanStdDev(x, nil)
	return Estimate{Value: mean, Sigma: stat.StdErr(deviation, float64(len(x))), Dof: float64(len(x) - 1)}
}
