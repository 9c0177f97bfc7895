package calibrate

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/fixtures"
	"lotgate/fixtures/attach"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/station/measure"
	"lotgate/station/signal"
)

// Target finds the displacement per volt of drive over the band.
//
// Its course over frequency comes from an accelerometer on the plate (acceleration a = ω²·X), from
// a reference module whose IF response is known, or from a vibrometer's table. Its size comes
// from a module at a low frequency, absolutely: see bessel. What was measured is drawn as a
// damped resonance and a smooth rest:
//
//	D(f) = D0/√((1 − u²)² + (u/Q)²), u = f/fr
type Target struct {
	// By is "accelerometer", "module" or "table".
	By string
	// Accelerometer is the input role it is wired to; Flatness the expanded uncertainty (k = 2) of
	// its sensitivity at one frequency over that a decade away.
	Accelerometer string
	Flatness      quantity.Ratio
	// Response is the reference module's IF gain over frequency with its uncertainty.
	Response curve.Gain
	// Table is the vibrometer's: only its course over frequency is used.
	Table   curve.Curve[quantity.DisplacementPerVolt]
	Carrier quantity.Frequency
	// CarrierU is the expanded relative uncertainty of the module's carrier; default 0.1 %.
	CarrierU quantity.Ratio
	Low      quantity.Frequency // of the band; default 1 Hz
	High     quantity.Frequency // default 1.2 kHz
	// Absolute is the frequency of the absolute calibration; default 20 Hz, off the mains with its
	// harmonics.
	Absolute quantity.Frequency
}

const (
	targetSeconds = 10.0 // period of the multitone
	besselSeconds = 4.0
)

func (t *Target) defaults() {
	if t.Low == 0 {
		t.Low = 1
	}
	if t.High == 0 {
		t.High = 1200
	}
	if t.Absolute == 0 {
		t.Absolute = 19
	}
	if t.CarrierU == 0 {
		t.CarrierU = 0.001
	}
}

// Run calibrates.
func (t Target) Run(ctx context.Context, s *Session) (*calibration.File, error) {
	t.defaults()
	in, err := s.input("if")
	if err != nil {
		return nil, err
	}
	b := bench{s: s, t: t, module: in}
	wiring, text := fixtures.Wiring{What: fixtures.Production}, "Put a good module in the nest, wire all as for testing, and close the lid."
	if t.By == "accelerometer" {
		if b.plate, err = s.input(t.Accelerometer); err != nil {
			return nil, err
		}
		if b.plate.Channel == in.Channel {
			return nil, wrong("name another input, such as --accelerometer sense", "the accelerometer and the module cannot share input %d", in.Channel)
		}
		wiring = fixtures.Wiring{What: fixtures.AccelerometerToInput, Input: b.plate.Channel}
		text = fmt.Sprintf("Fix the accelerometer to the middle of the plate, its axis along the motion, and wire it to input %d; put a good module in the nest and close the lid.", b.plate.Channel)
	}
	if err := s.readyModule(ctx, wiring, "%s", text); err != nil {
		return nil, err
	}
	if err := b.place(ctx); err != nil {
		return nil, err
	}
	if err := b.ramp(ctx); err != nil {
		return nil, err
	}
	absolute, err := b.bessel(ctx)
	if err != nil {
		return nil, err
	}
	course, err := b.course(ctx)
	if err != nil {
		return nil, err
	}
	if err := s.Bench.Target.MoveTo(ctx, 0); err != nil {
		return nil, err
	}
	if err := s.halt(ctx); err != nil {
		return nil, err
	}
	return t.file(&b, course, absolute)
}

// bench is a target being calibrated.
type bench struct {
	s      *Session
	t      Target
	module attach.InputSetup // the IF input
	plate  attach.InputSetup // the accelerometer's
	sine   float64           // place of the stage at which |sin φ0| is large
	// What the ramp found at the absolute frequency.
	level   float64 // largest usable peak of the output, fraction of full scale
	beta    float64 // phase index there, roughly
	largest float64 // m, where the shaker's harmonics began to show; 0: they did not
}

// place looks at two places of the stage λ/8 apart and keeps that with the larger first harmonic.
func (b *bench) place(ctx context.Context) error {
	if quarter := b.lambda() / 4; quarter > float64(b.s.Setup.Target.Travel) {
		return wrong("let the stage travel λ/4 either way at least", "the stage cannot move by λ/4 = %v", quantity.Length(quarter))
	}
	p := b.s.tone(1, float64(b.t.Absolute), 0.05)
	loudest := 0.0
	for _, at := range []float64{0, b.lambda() / 8} {
		if err := b.s.Bench.Target.MoveTo(ctx, quantity.Length(at)); err != nil {
			return err
		}
		rec, err := b.s.shaken(ctx, p, []int{b.module.Channel}, p.period)
		if err != nil {
			return err
		}
		fits, _, err := b.s.fit(rec.Samples[b.module.Channel], p.hz(b.s.rate()))
		if err != nil {
			return err
		}
		if a := cmplx.Abs(fits[0].a); a > loudest && a > 20*fits[0].sigma {
			loudest, b.sine = a, at
		}
	}
	if loudest == 0 {
		return wrong("check the shaker's amplifier and wires, that the plate faces the module, and that the module has power", "no echo of the moving target is heard: the target does not move")
	}
	return b.s.Bench.Target.MoveTo(ctx, quantity.Length(b.sine))
}

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
		rec, err := b.s.shaken(ctx, p, []int{channel}, p.period)
		if err != nil {
			return nil, err
		}
		fits, _, err := b.s.fit(rec.Samples[channel], hz)
		if err != nil {
			return nil, err
		}
		if b.t.By == "accelerometer" {
			if err := b.upright(p, fits); err != nil {
				return nil, err
			}
		}
		for i, f := range fits {
			scale := 1 / (drive[i] * b.gain(hz[i]))
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

// file draws the curve and fills the file.
func (t Target) file(b *bench, course []signal.Scattered, size absolute) (*calibration.File, error) {
	f := &calibration.File{Calibration: calibration.Target, Repeats: b.s.repeats(), Values: map[string]calibration.Value{}}
	what := map[string]string{"accelerometer": "an accelerometer on the plate", "module": "a reference module of known IF response", "table": "a vibrometer's table"}[t.By]
	f.Method = fmt.Sprintf("course over frequency by %s; size at %v by the ratios of the IF's harmonics", what, quantity.Frequency(size.hz))
	if t.By == "accelerometer" {
		f.Instruments = []calibration.Instrument{instrument("accelerometer (a decade apart)", t.Flatness)}
	}
	base := fitResonance(course)
	shifted := make([]signal.Scattered, len(course))
	for i, p := range course {
		shifted[i] = signal.Scattered{X: p.X, Y: p.Y - base.at(p.X), Sigma: math.Max(p.Sigma, 1e-5)}
	}
	smooth, err := signal.FitSmooth(shifted, base.columns, 0.35, 2)
	if err != nil {
		return nil, err
	}
	reference := math.Log(size.hz)
	f.Curve = drawn(float64(t.Low), float64(t.High), quantity.MetrePerVolt, func(x float64) (float64, float64) {
		y, u := smooth.Between(x, reference)
		return math.Log(size.perVolt) + y + base.at(x) - base.at(reference), math.Sqrt(u*u + square(b.together(math.Exp(x), size)) + square(size.noise) + square(size.carrier))
	})
	at := calibration.Of(quantity.Frequency(size.hz))
	f.Reference = &at
	f.Values[calibration.PerVolt] = calibration.Value{Value: calibration.Amount{Value: size.perVolt, Unit: quantity.MetrePerVolt}, Uncertainty: calibration.Amount{Value: size.perVolt * expanded(size.noise, size.carrier, size.shape), Unit: quantity.MetrePerVolt}}
	if b.largest > 0 {
		f.Values[calibration.Largest] = calibration.Found(quantity.Length(b.largest), quantity.Length(0.05*b.largest))
		f.Notes = append(f.Notes, fmt.Sprintf("beyond %s at %v the shaker's own harmonics exceed 1 %%", short(b.largest), quantity.Frequency(size.hz)))
	} else {
		f.Notes = append(f.Notes, fmt.Sprintf("up to %s no harmonics of the shaker show", short(b.beta*b.lambda()/(4*math.Pi))))
	}
	f.Values[calibration.PhaseIndex] = calibration.Found(quantity.Ratio(size.beta), quantity.Ratio(size.beta*expanded(size.noise, size.shape)))
	f.Notes = append(f.Notes, fmt.Sprintf("phase index β = %.3f at %v; of its relative uncertainty %.2g %% (k = 2) is noise", size.beta, quantity.Frequency(size.hz), 200*size.noise))
	return f, nil
}

// short prints a length with three digits.
func short(m float64) string { return quantity.PrintTo(m, m/50, quantity.Metre) }

// lambda is the wavelength in air of usual refractive index, as the carrier measurement takes it.
func (b *bench) lambda() float64 {
	return measure.SpeedOfLight / float64(b.t.Carrier) / measure.UsualAir
}
