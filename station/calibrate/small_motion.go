package calibrate

import (
	"context"
	"math"
	"math/cmplx"
	"slices"

	"lotgate/fixtures"
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
	if b.t.By == "module" { // its response is known
		for n := 1; n <= 4; n++ {
			g, u := b.t.Response.At(quantity.Frequency(float64(n) * hz))
			out.gain[n], out.relative[n] = complex(float64(g), 0), u/2
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
			inputs := []int{b.module.Channel}
			if b.t.By == "accelerometer" {
				inputs = append(inputs, b.plate.Channel)
			}
			rec, err := b.s.shaken(ctx, p, inputs, p.period)
			if err != nil {
				return out, err
			}
			echo, _, err := b.s.fit(rec.Samples[b.module.Channel], append(slices.Clone(tones), products(tones)...))
			if err != nil {
				return out, err
			}
			x, relative, err := b.plateAt(rec, p, tones)
			if err != nil {
				return out, err
			}
			for n := range tones {
				ratio[n] += sign * echo[n].a / b.chain(tones[n]) / x[n] / complex(count, 0)
				square2[n] += (square(echo[n].sigma/cmplx.Abs(echo[n].a)) + square(relative[n])) / square(count)
			}
		}
	}
	for n := range tones {
		out.gain[n+1], out.relative[n+1] = ratio[n], math.Sqrt(square2[n])
		if out.relative[n+1] > 0.05 {
			return out, wrong("raise the accelerometer's sensitivity or its input's level, or use a module with a stronger echo", "the small tones beside the harmonics of %v are hardly heard", quantity.Frequency(hz))
		}
	}
	return out, nil
}

// plateAt is the plate's displacement at each tone, up to a common factor, with the relative standard
// uncertainty of its noise: by the accelerometer, or by the drive and the table.
func (b *bench) plateAt(rec fixtures.SoundRecord, p play, tones []float64) (x []complex128, relative []float64, err error) {
	x, relative = make([]complex128, len(tones)), make([]float64, len(tones))
	if b.t.By == "table" {
		for n, drive := range p.drives() {
			d, _ := b.t.Table.At(quantity.Frequency(tones[n]))
			x[n] = cmplx.Rect(drive*float64(d), p.phase[n])
		}
		return x, relative, nil
	}
	plate, _, err := b.s.fit(rec.Samples[b.plate.Channel], tones)
	if err != nil {
		return nil, nil, err
	}
	for n := range tones {
		x[n], relative[n] = plate[n].a*b.displacement(tones[n]), plate[n].sigma/cmplx.Abs(plate[n].a)
	}
	return x, relative, nil
}

// opposite is the place of the stage λ/4 before that with the large first harmonic: φ is turned by
// π, so that the difference of both holds nothing of what is picked up of the drive.
func (b *bench) opposite() float64 { return b.sine - b.lambda()/4 }
