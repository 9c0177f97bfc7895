package calibrate

import (
	"context"
	"errors"
	"math"
	"math/cmplx"

	"lotgate/fixtures/attach"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/station/measure"
	"lotgate/station/signal"
)

// course measures the displacement over the drive at many frequencies at once, up to a common
// factor.
func (b *bench) course(ctx context.Context) ([]signal.Scattered, error) {
	if b.t.By == "table" {
		return b.fromTable(), nil
	}
	p := b.s.multitone(targetSeconds, float64(b.t.Low), float64(b.t.High), 33)
	rough, err := b.relative(ctx, p, nil, 1)
	if err != nil {
		return nil, err
	}
	b.overAbsolute(rough)
	// The second time each tone is driven as its displacement deserves: more where it is small.
	amplitude := make([]float64, len(p.lines))
	for i := range amplitude {
		amplitude[i] = math.Min(30, math.Exp(-0.5*(rough[i].Y-rough[0].Y)))
		if hz := math.Exp(rough[i].X); hz < 10 && b.t.By == "accelerometer" {
			amplitude[i] *= math.Pow(10/hz, 1.5) // ω² makes the lowest tones faint
		}
	}
	shaped := newPlay(p.period, p.lines, amplitude, signal.SchroederPhases(p.lines, amplitude))
	return b.relative(ctx, shaped, rough, b.s.repeats())
}

// overAbsolute relates a course to its value at the tone nearest to the absolute frequency.
func (b *bench) overAbsolute(course []signal.Scattered) {
	x := math.Log(float64(b.t.Absolute))
	nearest := course[0]
	for _, p := range course {
		if math.Abs(p.X-x) < math.Abs(nearest.X-x) {
			nearest = p
		}
	}
	for i := range course {
		course[i].Y -= nearest.Y
	}
}

// relative plays a multitone as strongly as excursion, output and input allow. rough is the
// course as far as it is known, ln displacement over drive, up to a factor that is one at the
// absolute frequency; nil where it is not known.
func (b *bench) relative(ctx context.Context, p play, rough []signal.Scattered, repeats int) ([]signal.Scattered, error) {
	channel, what := b.plate.Channel, "accelerometer"
	if b.t.By == "module" {
		channel, what = b.module.Channel, "module"
	}
	level, err := b.tolerable(ctx, p, rough, channel)
	if err != nil {
		return nil, err
	}
	p = p.scaled(level)
	b.s.tell("shaking %d tones at once, %d times %.0f s", len(p.lines), repeats, float64(p.period)/b.s.rate())
	drive := p.drives()
	hz := p.hz(b.s.rate())
	gathers := make([]gather, len(hz))
	for range repeats {
		fits, found, err := b.motion(ctx, p, channel)
		if err != nil {
			return nil, err
		}
		copy(hz, found) // by the input's clock
		for i, f := range fits {
			scale := 1 / (drive[i] * b.gain(hz[i]) * b.bent(drive[i], rough, i))
			gathers[i].add(cmplx.Abs(f.a)*scale, f.sigma*scale)
		}
	}
	var out []signal.Scattered
	for i := range hz {
		v, u, _ := gathers[i].mean()
		if repeats > 1 && v < 8*u {
			continue
		}
		if err := gathers[i].agree("the motion at "+quantity.Frequency(hz[i]).String(), 5e-3); err != nil {
			return nil, err
		}
		out = append(out, signal.Scattered{X: math.Log(hz[i]), Y: math.Log(v), Sigma: u / v})
	}
	if len(out) < 8 {
		return nil, wrong("check its cable and fixing, and that the shaker moves", "only %d of %d tones are heard by the %s", len(out), len(hz), what)
	}
	return out, nil
}

// motion records a multitone once and fits its tones: on the accelerometer; or on the module at two
// opposite places of the fringe, of which the difference holds nothing of what it picks up of the
// drive.
func (b *bench) motion(ctx context.Context, p play, channel int) ([]found, []float64, error) {
	at := func() ([]found, []float64, error) {
		rec, err := b.s.shaken(ctx, p, []int{channel}, p.period)
		if err != nil {
			return nil, nil, err
		}
		fits, fit, err := b.s.fit(rec.Samples[channel], p.hz(b.s.rate()))
		return fits, fit.FrequencyHz[:len(fits)], err
	}
	if b.t.By == "accelerometer" {
		fits, hz, err := at()
		if err == nil {
			err = b.upright(p, fits)
		}
		return fits, hz, err
	}
	if err := b.s.Bench.Target.MoveTo(ctx, quantity.Length(b.opposite())); err != nil {
		return nil, nil, err
	}
	other, _, err := at()
	if err != nil {
		return nil, nil, err
	}
	if err := b.s.Bench.Target.MoveTo(ctx, quantity.Length(b.sine)); err != nil {
		return nil, nil, err
	}
	fits, hz, err := at()
	for i := range other {
		fits[i].a = (fits[i].a - other[i].a) / 2
		fits[i].sigma /= math.Sqrt2
	}
	return fits, hz, err
}

// bent is by how much the mixer makes a tone of a multitone smaller than a straight line would,
// up to what all tones share: 2·J1(β)/(β·J0(β)), with β in proportion to the drive as the ramp found
// it. An accelerometer is straight.
func (b *bench) bent(drive float64, rough []signal.Scattered, i int) float64 {
	if b.t.By != "module" || rough == nil {
		return 1
	}
	beta := b.beta * drive / b.level * math.Exp(rough[i].Y)
	return 2 * math.J1(beta) / (beta * math.J0(beta))
}

// gain is what stands between displacement and samples at a frequency, up to a common factor.
func (b *bench) gain(hz float64) float64 {
	if b.t.By == "module" {
		chain, _ := b.module.Response.At(quantity.Frequency(hz))
		module, _ := b.t.Response.At(quantity.Frequency(hz))
		return float64(chain * module)
	}
	own, _ := b.plate.Own.At(quantity.Frequency(hz))
	return float64(own) * square(2*math.Pi*hz)
}

// shapeU is the relative standard uncertainty of the course at one frequency over another,
// besides the noise.
func (b *bench) shapeU(hz, over float64) float64 { return b.t.shapeU(b.module, b.plate, hz, over) }

func (t Target) shapeU(module, plate attach.InputSetup, hz, over float64) float64 {
	at := func(g curve.Gain) float64 {
		_, a := g.At(quantity.Frequency(hz))
		_, b := g.At(quantity.Frequency(over))
		return math.Hypot(a, b) / 2
	}
	switch t.By {
	case "module":
		return math.Hypot(at(module.Response), at(t.Response))
	case "table":
		_, a := t.Table.At(quantity.Frequency(hz))
		_, b := t.Table.At(quantity.Frequency(over))
		if hz == over {
			return 0
		}
		return math.Hypot(a, b) / 2
	}
	return math.Hypot(decades(float64(t.Flatness)/2, hz, over), at(plate.Own))
}

// together is the relative standard uncertainty that the course over frequency leaves at a
// frequency: its own against the absolute one, and what it did to that one, which shares its
// errors. An accelerometer's error that rises from f to 3f makes β too large by half of it and
// all displacements above by the whole once more; below f the two are independent at best.
func (b *bench) together(hz float64, size absolute) float64 {
	own := b.shapeU(hz, size.hz)
	if b.t.By != "accelerometer" || hz < size.hz {
		return math.Hypot(own, size.shape)
	}
	// A walk's differences over two stretches correlate by the stretch they share.
	const pair = 0.4771 // decades between a harmonic and the third of it
	d := math.Log10(hz / size.hz)
	r := 0.0
	if d > 0 {
		r = math.Min(d, pair) / math.Sqrt(d*pair)
	}
	return measure.CombineCorrelated([][]float64{{0, r}}, measure.Component{U: own}, measure.Component{U: size.shape}).Combined
}

// decades is what a walk of so much a decade leaves between two frequencies: the root of the
// distance.
func decades(each, hz, over float64) float64 {
	return each * math.Sqrt(math.Abs(math.Log10(hz/over)))
}

func (b *bench) fromTable() []signal.Scattered {
	var out []signal.Scattered
	for _, p := range b.t.Table {
		u := 1e-4
		if p.Uncertainty != nil {
			u = p.Uncertainty.Standard(float64(p.Value))
		}
		out = append(out, signal.Scattered{X: math.Log(float64(p.Frequency)), Y: math.Log(float64(p.Value)), Sigma: u})
	}
	return out
}

// roughShare is the share of the largest drive at the absolute frequency that a multitone may
// have while nothing is known of the resonance.
const roughShare = 0.15

// tolerable is the level at which a multitone stays within four fifths of the largest excursion, the
// output, and half of the input's full scale.
func (b *bench) tolerable(ctx context.Context, p play, rough []signal.Scattered, channel int) (float64, error) {
	level := roughShare * b.level
	if rough != nil {
		motion := make([]float64, len(p.lines))
		for i := range motion {
			motion[i] = p.amplitude[i] / p.peak * math.Exp(rough[i].Y)
		}
		peak := 0.0
		for _, v := range signal.Multitone(p.lines, motion, p.phase, p.period) {
			peak = math.Max(peak, math.Abs(v))
		}
		level = math.Min(0.9, 0.8*b.level/peak)
	}
	for try := 0; ; try++ {
		q := p.scaled(level)
		rec, err := b.s.shaken(ctx, q, []int{channel}, p.period)
		var over *overloaded
		if errors.As(err, &over) && try < 6 {
			level *= 0.3
			continue
		}
		if err != nil {
			return 0, err
		}
		top := 0.0
		for _, v := range rec.Samples[channel] {
			top = math.Max(top, math.Abs(v))
		}
		if top < 0.6 || try > 3 {
			return level, nil
		}
		level *= wanted / top
	}
}

// upright looks at the accelerometer's sign: at low frequencies the plate follows the drive, so
// that the acceleration is against it once the delay between playing and recording is taken
// out. Of all delays up to a second that is looked for at which the tones agree best.
func (b *bench) upright(p play, fits []found) error {
	var w []float64
	var turned []complex128
	for i, hz := range p.hz(b.s.rate()) {
		if hz < 3 || hz > 30 || cmplx.Abs(fits[i].a) < 8*fits[i].sigma {
			continue
		}
		omega := 2 * math.Pi * hz
		half := float64(p.period-1) / 2 / b.s.rate()
		lead := 0.0
		if corner := float64(b.plate.Own.HighPass); corner > 0 {
			lead = math.Atan(corner / hz)
		}
		w = append(w, omega)
		turned = append(turned, cmplx.Rect(1, cmplx.Phase(fits[i].a)-omega*half-p.phase[i]-lead))
	}
	if len(w) < 4 {
		return nil // too faint to tell
	}
	sum := func(delay float64) complex128 {
		var s complex128
		for i := range w {
			s += turned[i] * cmplx.Exp(complex(0, w[i]*delay))
		}
		return s
	}
	best := 0.0
	// The lead-in played before recording adds to the delay with the other sign.
	for delay := -2.0; delay < 1; delay += 5e-4 {
		if cmplx.Abs(sum(delay)) > cmplx.Abs(sum(best)) {
			best = delay
		}
	}
	if real(sum(best)) > 0.5*float64(len(w)) {
		return wrong("turn the accelerometer round, or swap the shaker's two wires, and start again", "the plate seems to accelerate with the drive instead of against it: the accelerometer is upside down")
	}
	return nil
}
