package calibrate

import (
	"context"
	"math"
	"math/cmplx"
	"slices"

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

// ramp drives one tone up, step by step, until the largest excursion that the station file
// allows, the output's end, or the shaker's own harmonics are reached.
func (b *bench) ramp(ctx context.Context) error {
	b.s.tell("driving the shaker up at %v", b.t.Absolute)
	allowed := float64(b.s.Setup.Target.Largest)
	level, perLevel := rampStart, 0.0
	for {
		p := b.s.tone(1, float64(b.t.Absolute), level)
		h, err := b.harmonics(ctx, p, 1)
		if err != nil {
			return err
		}
		beta, seen := roughBeta(h)
		if seen {
			if perLevel == 0 {
				perLevel = beta / level
			}
			displacement := beta * b.lambda() / (4 * math.Pi)
			if b.own(h) > ownHarmonic {
				b.largest = b.beta * b.lambda() / (4 * math.Pi)
				break
			}
			b.level, b.beta = level, beta
			if displacement > 0.97*allowed || beta > largestBeta || level >= 0.9 {
				break
			}
			level = math.Min(math.Min(level*rampStep, 0.98*level*allowed/displacement), 0.9)
			if level <= b.level*1.01 {
				break
			}
			continue
		}
		if level >= 0.9 {
			break
		}
		level = math.Min(0.9, level*rampStep)
	}
	if b.beta < leastBeta {
		return wrong("let the shaker move further (target: {largest: …}), use a module of a higher carrier, or choose a frequency nearer the shaker's resonance with --at",
			"the plate moves by %v at most, a phase index β of %.2f: the harmonics of the IF are too faint to tell the displacement", quantity.Length(b.beta*b.lambda()/(4*math.Pi)), b.beta)
	}
	return nil
}

// harmonicsAt is the IF's first four harmonics, and the plate's own, at one drive.
type harmonicsAt struct {
	echo  [5]found // index: harmonic
	plate [5]found // displacement, up to the accelerometer's factor
}

// harmonics records IF and plate with one tone and fits both.
func (b *bench) harmonics(ctx context.Context, p play, repeats int) (harmonicsAt, error) {
	var out harmonicsAt
	inputs := []int{b.module.Channel}
	if b.t.By == "accelerometer" {
		inputs = append(inputs, b.plate.Channel)
	}
	f := p.hz(b.s.rate())[0]
	hz := []float64{f, 2 * f, 3 * f, 4 * f}
	for range repeats {
		rec, err := b.s.shaken(ctx, p, inputs, p.period)
		if err != nil {
			return out, err
		}
		for _, c := range inputs {
			fits, _, err := b.s.fit(rec.Samples[c], hz)
			if err != nil {
				return out, err
			}
			// Repeats follow each other by whole periods and the same lead, so that phases agree.
			to, plate := &out.echo, c != b.module.Channel
			if plate {
				to = &out.plate
			}
			for n, t := range fits {
				scale := complex(1/float64(repeats), 0)
				if plate {
					scale *= b.displacement(hz[n])
				} else {
					scale /= b.chain(hz[n])
				}
				to[n+1].a += t.a * scale
				to[n+1].sigma = math.Hypot(to[n+1].sigma, t.sigma*cmplx.Abs(scale)) // of a sum: over repeats
			}
		}
	}
	return out, nil
}

// chain is the gain between module and samples with its phase, as far as the high-pass tells it.
func (b *bench) chain(hz float64) complex128 {
	return withPhase(b.module.Response.At, b.module.Response.HighPass, hz)
}

// displacement turns the accelerometer's samples into displacement, up to a common factor.
func (b *bench) displacement(hz float64) complex128 {
	return -1 / (withPhase(b.plate.Own.At, b.plate.Own.HighPass, hz) * complex(square(2*math.Pi*hz), 0))
}

func withPhase(at func(quantity.Frequency) (quantity.Ratio, float64), corner quantity.Frequency, hz float64) complex128 {
	g, _ := at(quantity.Frequency(hz))
	return cmplx.Rect(float64(g), math.Atan(float64(corner)/hz))
}

// own is the largest of the plate's own harmonics over its fundamental.
func (b *bench) own(h harmonicsAt) float64 {
	if b.t.By != "accelerometer" || h.plate[1].a == 0 {
		return 0
	}
	worst := 0.0
	for _, n := range []int{2, 3} {
		if v := cmplx.Abs(h.plate[n].a); v > 6*h.plate[n].sigma {
			worst = math.Max(worst, v/cmplx.Abs(h.plate[1].a))
		}
	}
	return worst
}

// roughBeta tells the phase index from the third over the first harmonic, the module's response
// between them taken as even; seen is false where the third does not stand out.
func roughBeta(h harmonicsAt) (beta float64, seen bool) {
	if cmplx.Abs(h.echo[3].a) < 10*h.echo[3].sigma {
		return 0, false
	}
	return betaOf(1, cmplx.Abs(h.echo[3].a)/cmplx.Abs(h.echo[1].a)), true
}

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
	columns := make([][]float64, len(list))
	for i, e := range first {
		g := f.fall(e.position)
		sin, cos := math.Sincos(f.phi - 4*math.Pi*e.position/b.lambda())
		columns[i] = []float64{g * sin, g * cos, g * g * g * sin * sin * sin, 2 * g * g * sin * cos, 1}
	}
	var err error
	if f.first, f.firstU, err = alongFringe(list, columns, 1, f.axis); err != nil {
		return f, err
	}
	f.third, f.thirdU, err = alongFringe(list, columns, 3, f.axis)
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

// smallMotion is what module and input make of a small displacement at the harmonics of the
// absolute frequency.
type smallMotion struct {
	gain     [5]complex128
	relative [5]float64 // standard uncertainty
}

// smallBeta is the phase index of each small tone: small enough that the mixer is a straight
// line to one part in 10,000.
const smallBeta = 0.025

// products are the frequencies of the mixer's second-order products of some tones: fitted beside
// them, so that they do not pass for noise.
func products(tones []float64) []float64 {
	var out []float64
	for i, a := range tones {
		out = append(out, 2*a)
		for _, b := range tones[:i] {
			out = append(out, a-b, a+b)
		}
	}
	slices.Sort(out)
	return slices.CompactFunc(out, func(a, b float64) bool { return math.Abs(a-b) < 1e-6 })
}

// smallMotion measures it with four small tones beside the harmonics, on odd lines, so that
// products of even order fall between them, at two opposite places of the fringe.
func (b *bench) smallMotion(ctx context.Context, hz float64) (out smallMotion, err error) {
	if b.t.By != "accelerometer" {
		for n := 1; n <= 4; n++ {
			g := 1.0
			if b.t.By == "module" {
				r, _ := b.t.Response.At(quantity.Frequency(float64(n) * hz))
				g = float64(r)
			}
			out.gain[n] = complex(g, 0)
		}
		return out, nil
	}
	line := int(math.Round(hz * besselSeconds))
	lines := make([]int, 4)
	for n := range lines {
		lines[n] = (n+1)*line/2*2 + 1
	}
	unit := b.level * smallBeta / b.beta
	amplitude := []float64{unit, unit, 2.5 * unit, 4 * unit}
	p := newPlay(b.s.frames(besselSeconds), lines, amplitude, []float64{0, 2, 4, 1})
	p = p.scaled(math.Min(0.9, p.peak))
	tones := p.hz(b.s.rate())
	var ratio [4]complex128
	var square2 [4]float64
	count := float64(2 * b.s.repeats())
	for _, place := range []float64{b.opposite(), b.sine} {
		if err := b.s.Bench.Target.MoveTo(ctx, quantity.Length(place)); err != nil {
			return out, err
		}
		sign := complex(1, 0)
		if place != b.sine {
			sign = -1
		}
		for range b.s.repeats() {
			rec, err := b.s.shaken(ctx, p, []int{b.module.Channel, b.plate.Channel}, p.period)
			if err != nil {
				return out, err
			}
			echo, _, err := b.s.fit(rec.Samples[b.module.Channel], append(slices.Clone(tones), products(tones)...))
			if err != nil {
				return out, err
			}
			plate, _, err := b.s.fit(rec.Samples[b.plate.Channel], tones)
			if err != nil {
				return out, err
			}
			for n := range tones {
				x := plate[n].a * b.displacement(tones[n])
				ratio[n] += sign * echo[n].a / b.chain(tones[n]) / x / complex(count, 0)
				square2[n] += (square(echo[n].sigma/cmplx.Abs(echo[n].a)) + square(plate[n].sigma/cmplx.Abs(plate[n].a))) / square(count)
			}
		}
	}
	for n := range tones {
		out.gain[n+1], out.relative[n+1] = ratio[n], math.Sqrt(square2[n])
		if out.relative[n+1] > 0.05 {
			return out, wrong("raise the accelerometer's sensitivity or its input's level", "the accelerometer does not hear the small tones beside the harmonics of %v", quantity.Frequency(hz))
		}
	}
	return out, nil
}

// opposite is the place of the stage λ/4 before that with the large first harmonic: φ is turned by
// π, so that the difference of both holds nothing of what is picked up of the drive.
func (b *bench) opposite() float64 { return b.sine - b.lambda()/4 }
