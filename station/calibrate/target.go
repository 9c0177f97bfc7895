package calibrate

import (
	"context"
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
