package signal

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// Linear is complex amplitudes fitted as a sum of real functions with complex coefficients.
type Linear struct {
	Coefficient []complex128
	Dof         float64

	// What the residuals scatter by: variance of the real parts, covariance, variance of the
	// imaginary parts. They need not be alike: a position that is off moves all along one line.
	re, both, im float64
	inverse      []float64 // diagonal of (RᵀR)⁻¹
}

// Along is the standard uncertainty of a coefficient in a direction of the complex plane (of
// any size but zero), from the fit's own residuals.
func (f Linear) Along(j int, direction complex128) float64 {
	e := direction / complex(cmplx.Abs(direction), 0)
	x, y := real(e), imag(e)
	return math.Sqrt(math.Max(0, (f.re*x*x+2*f.both*x*y+f.im*y*y)*f.inverse[j]))
}

// Largest is a coefficient's standard uncertainty in the direction in which it is largest.
func (f Linear) Largest(j int) float64 {
	return math.Sqrt(((f.re+f.im)/2 + math.Hypot((f.re-f.im)/2, f.both)) * f.inverse[j])
}

// FitLinear fits y[k] = Σ_j coefficient[j]·rows[k][j] by least squares (QR). The scatter is that of
// the residuals, with len(y) − columns degrees of freedom in each direction. ok is false where the rows do not tell the columns apart or leave no freedom.
func FitLinear(rows [][]float64, y []complex128) (f Linear, ok bool) {
	n := len(rows)
	if n == 0 || len(y) != n || n <= len(rows[0]) {
		return f, false
	}
	m := len(rows[0])
	a, right := mat.NewDense(n, m, nil), mat.NewDense(n, 2, nil)
	for k, row := range rows {
		a.SetRow(k, row)
		right.SetRow(k, []float64{real(y[k]), imag(y[k])})
	}
	var qr mat.QR
	qr.Factorize(a)
	if qr.Cond() > 1e6 {
		return f, false
	}
	var x mat.Dense
	if qr.SolveTo(&x, false, right) != nil {
		return f, false
	}
	var rest mat.Dense
	rest.Mul(a, &x)
	rest.Sub(right, &rest)
	f.Dof = float64(n - m)
	var covariance mat.SymDense
	covariance.SymOuterK(1/f.Dof, rest.T())
	f.re, f.both, f.im = covariance.At(0, 0), covariance.At(0, 1), covariance.At(1, 1)
	var normal mat.SymDense
	normal.SymOuterK(1, a.T())
	var solver mat.Cholesky
	var inverse mat.SymDense
	if !solver.Factorize(&normal) || solver.InverseTo(&inverse) != nil {
		return f, false
	}
	for j := range m {
		f.Coefficient = append(f.Coefficient, complex(x.At(j, 0), x.At(j, 1)))
		f.inverse = append(f.inverse, inverse.At(j, j))
	}
	return f, true
}
