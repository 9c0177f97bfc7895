package calibrate

import (
	"context"
	"math"
	"math/cmplx"
	"sort"

	"gonum.org/v1/gonum/dsp/fourier"

	"lotgate/fixtures"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// Loop looks at the way from output to input: latency, clock difference of output and input,
// crosstalk between inputs, the noise of each, and level steps that betray an automatic gain
// or an enhancement left on in the operating system.
//
// The latency is the slope of the phase over frequency of a single shot heard over played; the
// clock difference what the phase of a steady tone gains from the first half of a record to
// the second; both by least squares over many tones.
type Loop struct {
	Input string // role of the input that the output is wired to
}

const (
	loopHz      = 1000.0 // of the steady tone
	loopSeconds = 6.0
	stepSeconds = 1.5
	lowStep     = 0.02 // levels of the step test, of the drive that half fills the input
)

// Run calibrates.
func (l Loop) Run(ctx context.Context, s *Session) (*calibration.File, error) {
	in, err := s.input(l.Input)
	if err != nil {
		return nil, err
	}
	if err := s.connect(ctx, fixtures.Wiring{What: fixtures.OutputToInput, Input: in.Channel}, "Wire output %d straight to input %d and leave the other inputs as they are.", s.Setup.Target.Channel, in.Channel); err != nil {
		return nil, err
	}
	f := &calibration.File{Calibration: calibration.Loop, Of: l.Input, Repeats: s.repeats(), Method: "a cable from output to input", Values: map[string]calibration.Value{}}
	if err := l.noise(ctx, s, f, in.Channel, float64(in.FullScale)); err != nil {
		return nil, err
	}
	drive, err := s.findDrive(ctx, in.Channel, 2, loopHz)
	if err != nil {
		return nil, err
	}
	if err := l.steps(ctx, s, in.Channel, drive); err != nil {
		return nil, err
	}
	if err := l.steady(ctx, s, f, in.Channel, drive); err != nil {
		return nil, err
	}
	return f, l.latency(ctx, s, f, in.Channel, drive)
}

// noise is the input's own, with the output silent: density between 500 Hz and 2 kHz.
func (l Loop) noise(ctx context.Context, s *Session, f *calibration.File, channel int, full float64) error {
	if full <= 0 {
		f.Notes = append(f.Notes, "the input's noise was not stated in volts: its full scale is not calibrated yet")
		return nil
	}
	s.tell("listening to silence")
	rec, err := s.record(ctx, nil, []int{channel}, s.frames(4), nil)
	if err != nil {
		return err
	}
	p := signal.Periodogram(rec.Samples[channel], s.rate())
	e := signal.BandPower(p, 500, 2000, nil)
	density := math.Sqrt(e.Value/1500) * full
	f.Values[calibration.Noise] = calibration.Found(quantity.NoiseDensity(density), quantity.NoiseDensity(density*expanded(e.Sigma/(2*e.Value))))
	return nil
}

// steady measures the clock difference and the crosstalk with one tone.
func (l Loop) steady(ctx context.Context, s *Session, f *calibration.File, channel int, drive float64) error {
	channels := []int{channel}
	for _, other := range s.Setup.Inputs {
		if other.Channel != channel {
			channels = append(channels, other.Channel)
		}
	}
	sort.Ints(channels[1:])
	p := s.tone(loopSeconds, loopHz, drive)
	var clock, scatter float64
	talk := map[int]*gather{}
	weight := 0.0
	for range s.repeats() {
		rec, err := s.record(ctx, &p, channels, p.period, nil)
		if err != nil {
			return err
		}
		fits, fit, err := s.fit(rec.Samples[channel], p.hz(s.rate()))
		if err != nil {
			return err
		}
		step, sigma, err := clockOf(rec.Samples[channel], s.rate(), p.hz(s.rate())[0], fit)
		if err != nil {
			return err
		}
		w := 1 / (sigma * sigma)
		clock, weight = clock+w*step, weight+w
		heard := cmplx.Abs(fits[0].a)
		for _, c := range channels[1:] {
			others, _, err := s.fit(rec.Samples[c], fit.FrequencyHz[:1])
			if err != nil {
				return err
			}
			if talk[c] == nil {
				talk[c] = &gather{}
			}
			scale := s.scaleOf(c) / s.scaleOf(channel)
			talk[c].add(cmplx.Abs(others[0].a)/heard*scale, others[0].sigma/heard*scale)
		}
	}
	clock, scatter = clock/weight, 1/math.Sqrt(weight)
	f.Values[calibration.Clock] = calibration.Found(quantity.Ratio(clock), quantity.Ratio(expanded(scatter)))
	worst := 0.0
	for _, c := range channels[1:] {
		v, u, _ := talk[c].mean()
		if v < 3*u { // the size of noise: an upper bound instead
			v, u = 0, math.Hypot(v, u)
		}
		if v+u >= worst {
			worst = v + u
			f.Values[calibration.Crosstalk] = calibration.Found(quantity.Ratio(v), quantity.Ratio(expanded(u)))
		}
	}
	return nil
}

// scaleOf is an input's full scale where it is known, else one.
func (s *Session) scaleOf(channel int) float64 {
	for _, in := range s.Setup.Inputs {
		if in.Channel == channel && in.FullScale > 0 {
			return float64(in.FullScale)
		}
	}
	return 1
}

// clockOf is the relative deviation of a tone's clock from the record's, from the phase it gains
// between the halves of the record, whose fits are independent; sigma from the noise beside it.
func clockOf(x []float64, rate, hz float64, fit signal.Fit) (clock, sigma float64, err error) {
	half := len(x) / 2
	w := 2 * math.Pi * hz / rate * (1 + fit.Clock)
	a, err := signal.FitTones(x[:half], []float64{w})
	if err != nil {
		return 0, 0, err
	}
	b, err := signal.FitTones(x[half:2*half], []float64{w})
	if err != nil {
		return 0, 0, err
	}
	gained := cmplx.Phase(b[0] * cmplx.Conj(a[0]) * cmplx.Exp(complex(0, -w*float64(half))))
	spectrum := signal.Periodogram(fit.Residual, rate)
	noise := signal.NoiseAround(spectrum, signal.QuietLines(spectrum, fit.FrequencyHz, 0), hz, 40)
	perHalf := math.Sqrt(noise.Value/(float64(half)/rate)) / cmplx.Abs(a[0])
	turn := w * float64(half)
	return fit.Clock + gained/turn, perHalf * math.Sqrt2 / turn, nil
}

// steps plays a low, a high and again a low level in one go: an automatic gain shows as a level
// that drifts, or as a step other than played.
func (l Loop) steps(ctx context.Context, s *Session, channel int, drive float64) error {
	s.tell("looking for an automatic gain")
	n := s.frames(stepSeconds)
	shot := make([]float32, 3*n)
	for i := range shot {
		level := drive
		if i/n != 1 {
			level *= lowStep
		}
		shot[i] = float32(level * math.Sin(2*math.Pi*loopHz*float64(i)/s.rate()))
	}
	job := fixtures.SoundJob{Play: map[int][]float32{s.Setup.Target.Channel: shot}, Once: true, Inputs: []int{channel}, Frames: len(shot), Lead: s.frames(0.5)}
	rec, err := s.Bench.Sound.Acquire(ctx, job)
	if err != nil {
		return err
	}
	x, piece := rec.Samples[channel], s.frames(0.25)
	var amplitude []float64 // late first, early high, late high, late second low
	for _, start := range []float64{1.2, 1.75, 2.7, 4.2} {
		from := s.frames(start)
		a, err := signal.FitTones(x[from:from+piece], []float64{2 * math.Pi * loopHz / s.rate()})
		if err != nil {
			return err
		}
		amplitude = append(amplitude, cmplx.Abs(a[0]))
	}
	const action = "switch off automatic gain, noise suppression and every enhancement of the input in the operating system, and start again"
	if drift := amplitude[2]/amplitude[1] - 1; math.Abs(drift) > 0.005 {
		return wrong(action, "the level of a steady tone drifts by %.1f %% within a second: something levels the input", 100*drift)
	}
	if step := amplitude[2] / amplitude[0] * lowStep; math.Abs(step-1) > 0.02 {
		return wrong(action, "a level step of %.0f times is heard as one of %.1f times: something levels the input", 1/lowStep, step/lowStep)
	}
	if back := amplitude[3]/amplitude[0] - 1; math.Abs(back) > 0.02 {
		return wrong(action, "after a loud second the same low level is heard %.1f %% different: something levels the input", 100*back)
	}
	return nil
}

// latency plays a multitone once and takes the slope of heard over played.
func (l Loop) latency(ctx context.Context, s *Session, f *calibration.File, channel int, drive float64) error {
	s.tell("measuring the latency")
	// Two periods are played; the record's last period is in the steady state.
	const seconds = 1.0
	p := s.multitone(seconds, 200, 0.35*s.rate(), 31).scaled(math.Min(0.9, drive))
	one := p.samples()
	shot := append(append([]float32(nil), one...), one...)
	job := fixtures.SoundJob{Play: map[int][]float32{s.Setup.Target.Channel: shot}, Once: true, Inputs: []int{channel}, Frames: len(shot), Lead: s.frames(0.5)}
	var late gather
	for range s.repeats() {
		rec, err := s.Bench.Sound.Acquire(ctx, job)
		if err != nil {
			return err
		}
		coarse, err := s.coarse(shot, rec.Samples[channel])
		if err != nil {
			return err
		}
		if coarse > len(one)-s.frames(0.1) {
			return wrong("choose a shorter sound buffer (period in the station file)", "the sound comes back more than %.1f s late", seconds)
		}
		from := len(one)
		fits, _, err := s.fit(rec.Samples[channel][from:from+len(one)], p.hz(s.rate()))
		if err != nil {
			return err
		}
		delay, sigma := s.delay(p, fits, float64(coarse)/s.rate(), float64(from)/s.rate())
		// By the middle of the fitted record the output's clock has gained on the input's.
		clock := f.Values[calibration.Clock].Value.Value
		late.add(delay+clock*(float64(from)+float64(len(one)-1)/2)/s.rate(), sigma)
	}
	v, u, _ := late.mean()
	f.Values[calibration.Latency] = calibration.Found(quantity.Time(v), quantity.Time(expanded(u)))
	f.Notes = append(f.Notes, "within one opening of the sound interface; it may differ the next time it is opened")
	return nil
}

// coarse is the latency to the nearest frame, by correlation.
func (s *Session) coarse(played []float32, heard []float64) (int, error) {
	n := 2 * len(heard) // so that nothing comes round
	a, b := make([]float64, n), make([]float64, n)
	copy(b, heard)
	for i, v := range played {
		a[i] = float64(v)
	}
	fft := fourier.NewFFT(n)
	ca, cb := fft.Coefficients(nil, a), fft.Coefficients(nil, b)
	for k := range ca {
		cb[k] *= cmplx.Conj(ca[k])
	}
	r := fft.Sequence(nil, cb)
	best, square := 0, 0.0
	for i, v := range r {
		square += v * v
		if v > r[best] {
			best = i
		}
	}
	if r[best] < 6*math.Sqrt(square/float64(n)) {
		return 0, wrong("check the cable and both channel numbers in the station file", "the sound played is not heard")
	}
	return best, nil
}

// delay is the slope of the tones' phase, heard less played, over angular frequency: by least
// squares around the coarse value, beside the phase of the input's high-pass, which falls as
// 1/ω far above its corner. from is when, after recording began, the fitted record starts.
func (s *Session) delay(p play, fits []found, coarse, from float64) (delay, sigma float64) {
	reference, _ := signal.FitTones(toFloat(p.samples()), angular(p.hz(s.rate()), s.rate()))
	var aa, ab, bb, ay, by float64
	for i, hz := range p.hz(s.rate()) {
		w := 2 * math.Pi * hz
		// What was played, as if it came back after the coarse delay, at the record's middle.
		y := math.Remainder(cmplx.Phase(fits[i].a)-cmplx.Phase(reference[i])-w*(from-coarse), 2*math.Pi)
		weight := square(cmplx.Abs(fits[i].a) / fits[i].sigma)
		aa, ab, bb = aa+weight*w*w, ab+weight, bb+weight/(w*w)
		ay, by = ay+weight*w*y, by+weight*y/w
	}
	det := aa*bb - ab*ab
	return coarse - (bb*ay-ab*by)/det, math.Sqrt(bb / det)
}

func toFloat(x []float32) []float64 {
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = float64(v)
	}
	return out
}

func angular(hz []float64, rate float64) []float64 {
	out := make([]float64, len(hz))
	for i, f := range hz {
		out[i] = 2 * math.Pi * f / rate
	}
	return out
}
