package calibrate

import (
	"context"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
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
