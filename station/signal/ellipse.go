package signal

import (
	"errors"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// Ellipse is x = X0 + g·A·cos t, y = Y0 + g·B·cos(t + Delta), g a gain of each point to the power
// of Exponent.
type Ellipse struct {
	X0, Y0 float64
	A, B   float64 // above zero
	Delta  float64 // rad, 0 to π: the sign is not told by the points alone
	T      []float64
	// Exponent is found near 1 where the gains go as was stated; 1 where none were given.
	Exponent float64
	// Sigma holds the standard uncertainties of X0, Y0, A, B and Delta for the noise stated.
	Sigma [5]float64
	// Ratio is χ² per degree of freedom, near 1 where points and noise are what was stated.
	Ratio, Dof float64
}

// ErrNoEllipse says that the points lie on no ellipse, or are too few.
var ErrNoEllipse = errors.New("the points lie on no ellipse")

// FitEllipse fits an ellipse to points with Gaussian noise of sigmaX and sigmaY.
//
// It starts from the direct least-squares fit of a conic that must be an ellipse (A. Fitzgibbon, M.
// Pilu, R.B. Fisher, IEEE Trans. PAMI 21 (1999) 476, in the stable form of R. Halíř and J. Flusser 1998),
// which is biased towards small ellipses, and goes on by Gauss–Newton in the five parameters
// and each point's place t on the ellipse, whose sum of squares weighs the noise of both
// coordinates: the maximum-likelihood fit. It needs six points or more (seven with gains), all the way
// round. The logarithm of the gains is known up to a common factor (Exponent), which is fitted too: a
// law of the distance need not be known well. gain may be nil for one everywhere. A bias of the order of σ²/A is left.
func FitEllipse(x, y, gain []float64, sigmaX, sigmaY float64) (Ellipse, error) {
	n := len(x)
	if n < 6 || n < 7 && gain != nil || len(y) != n || !(sigmaX > 0) || !(sigmaY > 0) {
		return Ellipse{}, ErrNoEllipse
	}
	free := gain != nil
	if gain == nil {
		gain = make([]float64, n)
		for k := range gain {
			gain[k] = 1
		}
	}
	e, ok := directEllipse(x, y, gain)
	e.Exponent = 1
	if !ok {
		return Ellipse{}, ErrNoEllipse
	}
	e.T = make([]float64, n)
	for k := range x {
		u, v := (x[k]-e.X0)/(gain[k]*e.A), (y[k]-e.Y0)/(gain[k]*e.B)
		e.T[k] = math.Atan2((u*math.Cos(e.Delta)-v)/math.Sin(e.Delta), u)
	}
	for range 50 {
		moved, err := e.improve(x, y, gain, free, sigmaX, sigmaY)
		if err != nil {
			return Ellipse{}, err
		}
		if moved < 1e-12 {
			return e.upright(), nil
		}
	}
	return Ellipse{}, ErrNoEllipse
}

// improve is one step of Gauss–Newton; moved is its size relative to the ellipse.
func (e *Ellipse) improve(x, y, gain []float64, free bool, sigmaX, sigmaY float64) (moved float64, err error) {
	n, shared := len(x), 5
	if free {
		shared = 6
	}
	rows, rest := mat.NewDense(2*n, shared+n, nil), mat.NewVecDense(2*n, nil)
	chi := 0.0
	for k := range x {
		g := math.Pow(gain[k], e.Exponent)
		sin, cos := math.Sincos(e.T[k])
		sinD, cosD := math.Sincos(e.T[k] + e.Delta)
		offX, offY := (x[k]-e.X0-g*e.A*cos)/sigmaX, (y[k]-e.Y0-g*e.B*cosD)/sigmaY
		chi += offX*offX + offY*offY
		rest.SetVec(2*k, offX)
		rest.SetVec(2*k+1, offY)
		rows.Set(2*k, 0, 1/sigmaX)
		rows.Set(2*k, 2, g*cos/sigmaX)
		rows.Set(2*k, shared+k, -g*e.A*sin/sigmaX)
		rows.Set(2*k+1, 1, 1/sigmaY)
		rows.Set(2*k+1, 3, g*cosD/sigmaY)
		if free {
			rows.Set(2*k, 5, g*math.Log(gain[k])*e.A*cos/sigmaX)
			rows.Set(2*k+1, 5, g*math.Log(gain[k])*e.B*cosD/sigmaY)
		}
		rows.Set(2*k+1, 4, -g*e.B*sinD/sigmaY)
		rows.Set(2*k+1, shared+k, -g*e.B*sinD/sigmaY)
	}
	// Columns of like size make the normal equations well conditioned.
	size := make([]float64, shared+n)
	for j := range size {
		size[j] = math.Max(mat.Norm(rows.ColView(j), 2), 1e-300)
		for i := range 2 * n {
			rows.Set(i, j, rows.At(i, j)/size[j])
		}
	}
	var normal mat.SymDense
	normal.SymOuterK(1, rows.T())
	var solver mat.Cholesky
	var inverse mat.SymDense
	if !solver.Factorize(&normal) || solver.Cond() > 1e12 || solver.InverseTo(&inverse) != nil {
		return 0, ErrNoEllipse
	}
	var right, step mat.VecDense
	right.MulVec(rows.T(), rest)
	if solver.SolveVecTo(&step, &right) != nil {
		return 0, ErrNoEllipse
	}
	at := func(j int) float64 { return step.AtVec(j) / size[j] }
	e.X0, e.Y0, e.A, e.B, e.Delta = e.X0+at(0), e.Y0+at(1), e.A+at(2), e.B+at(3), e.Delta+at(4)
	if free {
		e.Exponent += at(5)
	}
	for k := range e.T {
		e.T[k] += at(shared + k)
	}
	moved = math.Abs(at(0)/e.A) + math.Abs(at(1)/e.B) + math.Abs(at(2)/e.A) + math.Abs(at(3)/e.B) + math.Abs(at(4))
	if math.IsNaN(moved) || moved > 100 {
		return 0, ErrNoEllipse
	}
	for j := range e.Sigma {
		e.Sigma[j] = math.Sqrt(inverse.At(j, j)) / size[j]
	}
	e.Dof = float64(n - shared)
	e.Ratio = chi / e.Dof
	return moved, nil
}

// upright turns the signs so that A and B are above zero and Delta lies in 0 to π.
func (e Ellipse) upright() Ellipse {
	turn := func(by, mirror float64) {
		for k := range e.T {
			e.T[k] = mirror*e.T[k] + by
		}
	}
	if e.A < 0 {
		e.A, e.Delta = -e.A, e.Delta-math.Pi
		turn(math.Pi, 1)
	}
	if e.B < 0 {
		e.B, e.Delta = -e.B, e.Delta+math.Pi
	}
	if e.Delta = math.Remainder(e.Delta, 2*math.Pi); e.Delta < 0 {
		e.Delta = -e.Delta
		turn(0, -1)
	}
	return e
}

// directEllipse is the direct fit, in coordinates moved and scaled to the points.
func directEllipse(x, y, gain []float64) (e Ellipse, ok bool) {
	n := float64(len(x))
	var mx, my, sx, sy float64
	for k := range x {
		mx, my = mx+x[k]/gain[k]/n, my+y[k]/gain[k]/n
	}
	for k := range x {
		sx, sy = sx+math.Pow(x[k]/gain[k]-mx, 2)/n, sy+math.Pow(y[k]/gain[k]-my, 2)/n
	}
	sx, sy = math.Sqrt(sx), math.Sqrt(sy)
	if !(sx > 0) || !(sy > 0) {
		return e, false
	}
	quadratic, linear := mat.NewDense(len(x), 3, nil), mat.NewDense(len(x), 3, nil)
	for k := range x {
		u, v := (x[k]/gain[k]-mx)/sx, (y[k]/gain[k]-my)/sy
		quadratic.SetRow(k, []float64{u * u, u * v, v * v})
		linear.SetRow(k, []float64{u, v, 1})
	}
	var s1, s2, s3, t, m mat.Dense
	s1.Mul(quadratic.T(), quadratic)
	s2.Mul(quadratic.T(), linear)
	s3.Mul(linear.T(), linear)
	if t.Solve(&s3, s2.T()) != nil {
		return e, false
	}
	m.Mul(&s2, &t)
	m.Sub(&s1, &m)
	// The inverse of the constraint 4ac − b² = 1's matrix.
	constraint := mat.NewDense(3, 3, []float64{0, 0, 0.5, 0, -1, 0, 0.5, 0, 0})
	var reduced mat.Dense
	reduced.Mul(constraint, &m)
	var eigen mat.Eigen
	if !eigen.Factorize(&reduced, mat.EigenRight) {
		return e, false
	}
	var vectors mat.CDense
	eigen.VectorsTo(&vectors)
	for j, value := range eigen.Values(nil) {
		a, b, c := real(vectors.At(0, j)), real(vectors.At(1, j)), real(vectors.At(2, j))
		if math.Abs(imag(value)) > 1e-9*cmplx.Abs(value) || 4*a*c-b*b <= 0 {
			continue
		}
		var rest mat.VecDense
		rest.MulVec(&t, mat.NewVecDense(3, []float64{a, b, c}))
		d, f, g := -rest.AtVec(0), -rest.AtVec(1), -rest.AtVec(2)
		det := 4*a*c - b*b
		u0, v0 := (b*f-2*c*d)/det, (b*d-2*a*f)/det
		level := a*u0*u0 + b*u0*v0 + c*v0*v0 - g
		// Σ = M⁻¹ of (z−z0)ᵀ·M·(z−z0) = 1 has A², B² and A·B·cos δ.
		uu, vv, uv := 4*c/det*level, 4*a/det*level, -2*b/det*level
		if !(uu > 0) || !(vv > 0) {
			continue
		}
		e.X0, e.Y0, e.A, e.B = mx+sx*u0, my+sy*v0, sx*math.Sqrt(uu), sy*math.Sqrt(vv)
		e.Delta = math.Acos(math.Max(-1, math.Min(1, uv/math.Sqrt(uu*vv))))
		return e, math.Sin(e.Delta) > 1e-3
	}
	return e, false
}
