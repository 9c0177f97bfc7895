package calibrate

import (
	"context"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"

	"lotgate/limits/quantity"
)

// absolute is the displacement per volt at one frequency.
type absolute struct {
	hz      float64
	perVolt float64 // m/V, peak over peak
	noise   float64 // relative standard uncertainty that the noise leaves
	carrier float64 // and the carrier
	shape   float64 // and the course over frequency, between the harmonics
	beta    float64
}

const (
	rampStart   = 0.02
	rampStep    = 1.35
	ownHarmonic = 0.01 // share at which the shaker's own harmonics are said to show
	leastBeta   = 0.25
	largestBeta = 1.7
)

// betaOf solves J_{m+2}(β)/J_m(β) = ratio for 0 < β < 3.8, where the ratio rises steadily
// (Abramowitz & Stegun 9.1.10, 9.1.27; the first zero of J1 is 3.83).
func betaOf(m int, ratio float64) float64 {
	low, high := 0.0, 3.8
	for range 60 {
		middle := (low + high) / 2
		if math.Jn(m+2, middle) < ratio*math.Jn(m, middle) {
			low = middle
		} else {
			high = middle
		}
	}
	return (low + high) / 2
}

// slopeOf is d ln(J_{m+2}/J_m)/d ln β at β (Abramowitz & Stegun 9.1.27).
func slopeOf(m int, beta float64) float64 {
	log := func(n int) float64 { return float64(n) - beta*math.Jn(n+1, beta)/math.Jn(n, beta) }
	return log(m+2) - log(m)
}

// besselPlaces is at how many places of the stage, over λ/2, the harmonics are compared.
const besselPlaces = 12

// bessel finds the displacement absolutely at a low frequency, the way ISO 16063-11 and -41 use
// an interferometer: with x(t) = X·cos ωt the IF holds the harmonics 2·V0·J_n(β)·|sin φ0| (odd)
// and |cos φ0| (even), so that
//
//	J3(β)/J1(β) = (H3/C3)/(H1/C1)
//
// with C_n what module and input make of a small motion at the n-th harmonic: measured with
// small tones beside them against the accelerometer, or known of the reference module. β gives
// X = β·λ/4π.
//
// The stage goes through places over λ/2, so that every φ0 is covered, and so that what is no phase
// modulation is told from it by how it goes with φ = φ0 − 4πp/λ: the third harmonic is
// g·sin φ (phase modulation) + g·cos φ (the shaker's second harmonic) + g³·sin³ φ (cube law of the
// IF) + g²·sin 2φ (its square law) + a constant (picked up of the drive), g the range law; the
// first likewise. The plate's own
// third harmonic, as the accelerometer sees it, is taken off.
func (b *bench) bessel(ctx context.Context) (absolute, error) {
	out := absolute{}
	p := b.s.tone(besselSeconds, float64(b.t.Absolute), b.level)
	out.hz = p.hz(b.s.rate())[0]
	small, err := b.smallMotion(ctx, out.hz)
	if err != nil {
		return out, err
	}
	b.s.tell("comparing harmonics at %v, %.0f s at each of %d places", quantity.Frequency(out.hz), besselSeconds, besselPlaces)
	var list []harmonicsAt
	var first []echoAt
	for k := range besselPlaces {
		at := b.lambda() / 2 * (float64(k)/besselPlaces - 0.5)
		if err := b.s.Bench.Target.MoveTo(ctx, quantity.Length(at)); err != nil {
			return out, err
		}
		h, err := b.harmonics(ctx, p, 1)
		if err != nil {
			return out, err
		}
		list, first = append(list, h), append(first, echoAt{at, h.echo[1]})
	}
	if err := b.s.Bench.Target.MoveTo(ctx, quantity.Length(b.sine)); err != nil {
		return out, err
	}
	f, err := b.overFringe(list, first)
	if err != nil {
		return out, err
	}
	// Small motion was measured at two places; their share of the fringe is taken out.
	at := func(p float64) float64 { return f.fall(p) * math.Sin(f.phi-4*math.Pi*p/b.lambda()) }
	place := complex((at(b.sine)-at(b.opposite()))/2, 0)
	third := f.third / (small.gain[3] / place)
	if list[0].plate[1].a != 0 {
		var own complex128
		for _, h := range list {
			own += h.plate[3].a / complex(float64(len(list)), 0)
		}
		third -= own * cmplx.Exp(complex(0, -3*f.axis)) * complex(math.J0(b.beta), 0)
	}
	ratio := cmplx.Abs(third) / cmplx.Abs(f.first/(small.gain[1]/place))
	if f.thirdU > 0.05*cmplx.Abs(f.third) {
		return out, wrong("let the shaker move further, or use a module with a stronger echo", "the third harmonic of the IF does not stand out enough to tell the displacement")
	}
	out.beta = betaOf(1, ratio)
	slope := slopeOf(1, out.beta)
	out.noise = math.Sqrt(square(f.thirdU/cmplx.Abs(f.third))+square(f.firstU/cmplx.Abs(f.first))+square(small.relative[3])+square(small.relative[1])) / slope
	out.shape, out.carrier = b.shapeU(3*out.hz, out.hz)/slope, float64(b.t.CarrierU)/2
	volts := b.level * float64(b.s.Setup.Target.FullScale)
	out.perVolt = out.beta * b.lambda() / (4 * math.Pi) / volts
	return out, nil
}

// overFringe is how first and third harmonic go over a fringe.
type overFringe struct {
	standoff       float64
	phi, axis      float64 // φ0 of the stage's zero; phase of the first harmonic
	first, third   complex128
	firstU, thirdU float64 // standard uncertainty of each of their parts
}

// fall is the range law, (S/(S+p))².
func (f overFringe) fall(p float64) float64 { return square(f.standoff / (f.standoff + p)) }

func (b *bench) overFringe(list []harmonicsAt, first []echoAt) (overFringe, error) {
	f := overFringe{standoff: float64(b.s.Setup.Target.Standoff)}
	if f.standoff == 0 {
		return f, wrong("run lotgate calibrate standoff first", "the standoff is not known, and with it how the echo falls with the distance")
	}
	values := signed(first)
	q := []float64{0, 0, math.Log(b.lambda()), f.standoff, 2, 0, 0, 1}
	linear(first, values, q)
	f.phi = math.Atan2(q[0], q[1])
	var axis complex128
	for i, e := range first {
		axis += e.a * complex(values[i], 0)
	}
	f.axis = cmplx.Phase(axis)
	// A cube law makes of the first and the second harmonic, which goes as cos φ, more than sin³ φ: of
	// (A·cos ωt + B·cos 2ωt)³ the third harmonic is A³/4 + 3AB²/4, the first 3A³/4 + 3AB²/2.
	second := square(math.Jn(2, b.beta) / math.J1(b.beta))
	columns := func(cross float64) [][]float64 {
		out := make([][]float64, len(first))
		for i, e := range first {
			g := f.fall(e.position)
			sin, cos := math.Sincos(f.phi - 4*math.Pi*e.position/b.lambda())
			out[i] = []float64{g * sin, g * cos, g * g * g * sin * (sin*sin + cross*second*cos*cos), 2 * g * g * sin * cos, 1}
		}
		return out
	}
	var err error
	if f.first, f.firstU, err = alongFringe(list, columns(2), 1, f.axis); err != nil {
		return f, err
	}
	f.third, f.thirdU, err = alongFringe(list, columns(3), 3, f.axis)
	return f, err
}

// alongFringe fits a harmonic, turned by its own multiple of the axis, by columns over the places,
// and gives the first coefficient with its standard uncertainty.
func alongFringe(list []harmonicsAt, columns [][]float64, n int, axis float64) (complex128, float64, error) {
	m := len(columns[0])
	normal, re, im := mat.NewSymDense(m, nil), mat.NewVecDense(m, nil), mat.NewVecDense(m, nil)
	sigma := 0.0
	for i, h := range list {
		y := h.echo[n].a * cmplx.Exp(complex(0, -float64(n)*axis))
		sigma += square(h.echo[n].sigma) / float64(len(list))
		for a := range m {
			re.SetVec(a, re.AtVec(a)+columns[i][a]*real(y))
			im.SetVec(a, im.AtVec(a)+columns[i][a]*imag(y))
			for c := a; c < m; c++ {
				normal.SetSym(a, c, normal.At(a, c)+columns[i][a]*columns[i][c])
			}
		}
	}
	var inverse mat.Dense
	if err := inverse.Inverse(normal); err != nil {
		return 0, 0, wrong("let the stage travel λ/4 either way", "the places of the stage do not cover a fringe")
	}
	var x, y mat.VecDense
	x.MulVec(&inverse, re)
	y.MulVec(&inverse, im)
	return complex(x.AtVec(0), y.AtVec(0)), math.Sqrt(sigma * inverse.At(0, 0)), nil
}
