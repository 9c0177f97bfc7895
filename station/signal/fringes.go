package signal

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// Fringes is a sine over position fitted to amplitudes: y = g·V·sin(φ − κ·p).
type Fringes struct {
	Kappa Estimate // rad per metre, 4π/λ for an echo; scatter from the fit's own residuals
	P, Q  float64  // V·sin φ and V·cos φ, unit of y
	RMS   float64  // what is left, effective value, unit of y at a gain of one
}

// Amplitude is V.
func (f Fringes) Amplitude() float64 { return math.Hypot(f.P, f.Q) }

// fringeStep is the step of the search grid in κ times half the travel, rad: the sum of squares
// has one valley of about ±π around the truth and others beside it.
const fringeStep = 0.2

// FitFringes fits y[k] = gain[k]·(P·cos κp[k] − Q·sin κp[k]) by weighted least squares over position
// p (m), κ between low and high (rad/m). sigma is the noise of y, astray the standard deviation of
// each position (m). κ is looked for on a grid over all of low to high, so that no fringe
// is mistaken, and then refined by Gauss–Newton. The scatter is that of the residuals, with
// len(p) − 3 degrees of freedom. ok is false with fewer than five positions, and where the best κ
// lies at low or high.
func FitFringes(p, y, gain, sigma []float64, astray, low, high float64) (f Fringes, ok bool) {
	n := len(p)
	if n < 5 || !(low > 0) || !(high > low) {
		return f, false
	}
	half := 0.0
	for _, x := range p {
		half = math.Max(half, math.Abs(x-p[0]))
	}
	if half == 0 {
		return f, false
	}
	weight := make([]float64, n)
	for k := range weight {
		weight[k] = 1 / (gain[k] * gain[k])
	}
	steps := max(2, int(math.Ceil((high-low)*half/2/fringeStep)))
	best, at := math.Inf(1), -1
	for i := 0; i <= steps; i++ {
		kappa := low + (high-low)*float64(i)/float64(steps)
		if _, _, rest := fringesAt(p, y, gain, weight, kappa); rest < best {
			best, at = rest, i
		}
	}
	if at == 0 || at == steps {
		return f, false
	}
	kappa := low + (high-low)*float64(at)/float64(steps)
	var variance, rest float64
	for range 30 {
		f.P, f.Q, _ = fringesAt(p, y, gain, weight, kappa)
		for k := range weight {
			sin, cos := math.Sincos(kappa * p[k])
			slope := gain[k] * kappa * (f.P*sin + f.Q*cos)
			weight[k] = 1 / math.Max(sigma[k]*sigma[k]+slope*slope*astray*astray, 1e-300)
		}
		step, v, r, good := fringesStep(p, y, gain, weight, kappa)
		if !good {
			return f, false
		}
		variance, rest = v, r
		kappa += step
		if math.Abs(step) < 1e-12*kappa {
			break
		}
	}
	if kappa <= low || kappa >= high {
		return f, false
	}
	f.P, f.Q, rest = fringesAt(p, y, gain, weight, kappa)
	dof := float64(n - 3)
	f.Kappa = Estimate{Value: kappa, Sigma: math.Sqrt(variance * rest / dof), Dof: dof}
	sum := 0.0
	for k := range p {
		sin, cos := math.Sincos(kappa * p[k])
		sum += math.Pow(y[k]/gain[k]-f.P*cos+f.Q*sin, 2)
	}
	f.RMS = math.Sqrt(sum / dof)
	return f, true
}

// fringesAt solves for P and Q at one κ and gives the weighted sum of squares that is left.
func fringesAt(p, y, gain, weight []float64, kappa float64) (sine, cosine, rest float64) {
	var cc, cs, ss, yc, ys, yy float64
	for k := range p {
		sin, cos := math.Sincos(kappa * p[k])
		c, s, w := gain[k]*cos, -gain[k]*sin, weight[k]
		cc, cs, ss = cc+w*c*c, cs+w*c*s, ss+w*s*s
		yc, ys, yy = yc+w*y[k]*c, ys+w*y[k]*s, yy+w*y[k]*y[k]
	}
	det := cc*ss - cs*cs
	if det <= 1e-12*cc*ss {
		return 0, 0, math.Inf(1)
	}
	sine, cosine = (ss*yc-cs*ys)/det, (cc*ys-cs*yc)/det
	return sine, cosine, math.Max(0, yy-sine*yc-cosine*ys)
}

// fringesStep is one step of Gauss–Newton in (P, Q, κ): the change of κ, its variance for
// weights that are inverse variances, and the weighted sum of squares before the step.
func fringesStep(p, y, gain, weight []float64, kappa float64) (step, variance, rest float64, ok bool) {
	a, b, _ := fringesAt(p, y, gain, weight, kappa)
	normal, right := mat.NewSymDense(3, nil), mat.NewVecDense(3, nil)
	for k := range p {
		sin, cos := math.Sincos(kappa * p[k])
		row := [3]float64{gain[k] * cos, -gain[k] * sin, -gain[k] * p[k] * (a*sin + b*cos)}
		off := y[k] - gain[k]*(a*cos-b*sin)
		rest += weight[k] * off * off
		for i := range row {
			right.SetVec(i, right.AtVec(i)+weight[k]*row[i]*off)
			for j := i; j < 3; j++ {
				normal.SetSym(i, j, normal.At(i, j)+weight[k]*row[i]*row[j])
			}
		}
	}
	var solver mat.Cholesky
	if !solver.Factorize(normal) {
		return 0, 0, 0, false
	}
	var x mat.VecDense
	var inverse mat.SymDense
	if solver.SolveVecTo(&x, right) != nil || solver.InverseTo(&inverse) != nil {
		return 0, 0, 0, false
	}
	return x.AtVec(2), inverse.At(2, 2), rest, true
}
