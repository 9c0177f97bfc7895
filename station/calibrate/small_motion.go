package calibrate

import (
	"context"
	"math"
	"math/cmplx"
	"slices"

	"lotgate/limits/quantity"
)

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
