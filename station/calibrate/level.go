package calibrate

import (
	"context"
	"math"
	"math/cmplx"

	"lotgate/fixtures"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// Level finds the volts peak at digital full scale of a sound input, its frequency response,
// its high-pass corner and its linearity.
//
// From a DC voltage V, chopped by the controller between V and ground: the Fourier series of
// the square wave has the peaks (2/π)·V/n at odd multiples n of the chopping frequency and none
// at even ones, so
//
//	full scale = (2/π)·V/(n·a_n·R(n·f))
//
// with a_n the fitted peak as a fraction of full scale and R the input's gain over that at the
// reference frequency. One capture gives R at all odd multiples; a low chopping frequency
// gives the high-pass: R(f) ∝ 1/√(1 + (fc/f)²) (first order), with what is left over smoothed.
//
// From an AC voltage: full scale = √2·V_rms/a at the tone's frequency, without a response.
type Level struct {
	Input     string           // role
	Method    string           // "dc" or "ac"
	Meter     quantity.Ratio   // expanded relative uncertainty (k = 2) of the voltmeter
	Volts     quantity.Voltage // about the voltage to set the DC source to; 0: 0.6 of the nominal full scale, or 0.5 V
	Reference quantity.Frequency
	Lowest    quantity.Frequency // of the chopper; default 1 Hz
}

// chops are the chopping frequencies: from the lowest, in steps that overlap, to the reference.
func (l Level) chops() []float64 {
	return []float64{float64(l.Lowest), 9 * float64(l.Lowest), 80, float64(l.Reference)}
}

// levelFloor is how far the lower of two levels is below the higher.
const levelFloor = 0.1

// Run calibrates.
func (l Level) Run(ctx context.Context, s *Session) (*calibration.File, error) {
	in, err := s.input(l.Input)
	if err != nil {
		return nil, err
	}
	if l.Reference == 0 {
		l.Reference = 400
	}
	if l.Lowest == 0 {
		l.Lowest = 1
	}
	f := &calibration.File{Calibration: calibration.Level, Of: l.Input, Repeats: s.repeats(), Values: map[string]calibration.Value{}}
	ref := calibration.Of(l.Reference)
	f.Reference = &ref
	if l.Method == "ac" {
		err = l.alternating(ctx, s, f, in.Channel, float64(in.Nominal))
	} else {
		err = l.chopped(ctx, s, f, in.Channel, float64(in.Nominal))
	}
	if err != nil {
		return nil, err
	}
	return f, nil
}

// harmonicsOf is how many odd multiples of a chopping frequency are used.
const harmonicsOf = 6

// highestHz is up to where an input's response is looked at.
const highestHz = 2200

func (l Level) chopped(ctx context.Context, s *Session, f *calibration.File, channel int, nominal float64) error {
	if s.Bench.Chopper == nil {
		return wrong("name one under use: {chopper: …} in the station file, or calibrate with --method ac", "no device chops")
	}
	volts := float64(l.Volts)
	if volts == 0 {
		// Once DC is blocked a slow square wave between 0 and V swings up to ±V.
		volts = 0.6 * nominal
	}
	if volts == 0 {
		volts = 0.5
	}
	full, err := l.atVoltage(ctx, s, channel, volts)
	if err != nil {
		return err
	}
	if err := plausible("the full scale of input "+l.Input, full.fullScale, nominal); err != nil {
		return err
	}
	low, err := l.atVoltage(ctx, s, channel, volts*levelFloor)
	if err != nil {
		return err
	}
	points, err := l.response(ctx, s, channel, volts)
	if err != nil {
		return err
	}
	meter := float64(l.Meter) / 2
	f.Method = "a direct voltage chopped by the controller, at two levels"
	f.Instruments = []calibration.Instrument{instrument("DC voltmeter", l.Meter)}
	f.Values[calibration.FullScale] = calibration.Found(quantity.Voltage(full.fullScale), quantity.Voltage(full.fullScale*expanded(meter, full.relative, full.duty)))
	scatter := calibration.Of(quantity.Ratio(full.scatter))
	f.Scatter = &scatter
	difference := low.fullScale/full.fullScale - 1
	// Both levels are read on the same meter; its error at one range over that at another is not
	// known and counted in full.
	f.Values[calibration.Linearity] = calibration.Found(quantity.Ratio(difference), quantity.Ratio(expanded(meter*math.Sqrt2, low.relative, full.relative)))
	if u := expanded(meter*math.Sqrt2, low.relative, full.relative); math.Abs(difference) > 1.5*u {
		return wrong("switch off automatic gain and enhancements of the input, check for overload, and start again",
			"the input is not linear: at a tenth of the level its full scale differs by %.2f %%, and %.2f %% are allowed for", 100*difference, 100*u)
	}
	return l.curve(f, points)
}

// atLevel is what one voltage gives at the reference frequency.
type atLevel struct {
	fullScale, relative, duty, scatter float64
}

// atVoltage has the source set and read, and finds full scale at the reference.
func (l Level) atVoltage(ctx context.Context, s *Session, channel int, volts float64) (atLevel, error) {
	err := s.connect(ctx, fixtures.Wiring{What: fixtures.ChoppedToInput, Input: channel, Volts: quantity.Voltage(volts)},
		"Wire a DC source of about %v through the controller's chopper to input %d, and a DC voltmeter across the source.", quantity.Voltage(volts), channel)
	if err != nil {
		return atLevel{}, err
	}
	read, err := s.Hands.Read(ctx, fixtures.DCVoltmeter, "DC voltage of the source")
	if err != nil {
		return atLevel{}, err
	}
	if read <= 0 {
		return atLevel{}, wrong("turn the meter's leads round, or check the source", "the voltmeter reads %v", quantity.Voltage(read))
	}
	s.tell("chopping at %v", l.Reference)
	t, err := s.choppedTones(ctx, channel, float64(l.Reference), 2)
	if err != nil {
		return atLevel{}, err
	}
	a, u, _ := t.odd[0].mean()
	even := t.second - 3*t.odd[0].sigma
	if a < 20*u {
		return atLevel{}, wrong("check the cable, the channel number and that the chopper runs", "input %d hears nothing of the chopped voltage", channel)
	}
	out := atLevel{fullScale: 2 / math.Pi * read / a, relative: u / a, scatter: t.scatter}
	// Duty d: a_1 = (2/π)·sin(πd), a_2 = (1/π)·sin(2πd): for d = ½ + ε the second harmonic tells ε
	// and the fundamental is 1 − (πε)²/2 of its value.
	epsilon := math.Max(0, even/a) // a_2/a_1 ≈ πε
	out.duty = epsilon * epsilon / 2
	if epsilon > 0.1 {
		return out, wrong("check that the chopper switches fully at 50 % duty", "the chopped voltage has a second harmonic of %.1f %% of its fundamental", 100*epsilon)
	}
	return out, nil
}

// squareTones are the first odd multiples of a chopped voltage, and the second, over repeats:
// peaks as fractions of full scale.
type squareTones struct {
	hz      []float64
	odd     []gather
	second  float64 // largest
	scatter float64 // relative, of one repeat's fundamental
}

// choppedTones records a chopped voltage repeatedly and reads its lines one by one. The noise of a
// line is what the repeats scatter by, all lines together: it is the same for all of them.
func (s *Session) choppedTones(ctx context.Context, channel int, chop, seconds float64) (out squareTones, err error) {
	if err := s.Bench.Chopper.Chop(ctx, quantity.Frequency(chop)); err != nil {
		return out, err
	}
	defer func() {
		if stop := s.Bench.Chopper.Chop(context.WithoutCancel(ctx), 0); err == nil {
			err = stop
		}
	}()
	for n := 1.0; n < 2*harmonicsOf && n*chop < 0.42*s.rate(); n += 2 {
		out.hz = append(out.hz, n)
	}
	out.odd = make([]gather, len(out.hz))
	first := 0.0
	for range s.repeats() {
		rec, err := s.record(ctx, nil, []int{channel}, s.frames(seconds), nil)
		if err != nil {
			return out, err
		}
		x := rec.Samples[channel]
		// The controller's clock is not the sound interface's.
		w := signal.RefineTone(x, 2*math.Pi*signal.StrongestNear(x, s.rate(), chop, 0.03)/s.rate())
		first += w * s.rate() / (2 * math.Pi) / float64(s.repeats())
		lines := []float64{2 * w}
		for _, n := range out.hz {
			lines = append(lines, n*w)
		}
		tones := signal.WindowedTones(x, lines)
		out.second = math.Max(out.second, cmplx.Abs(tones[0]))
		for i := range out.odd {
			out.odd[i].values = append(out.odd[i].values, cmplx.Abs(tones[i+1]))
		}
	}
	for i := range out.hz {
		out.hz[i] *= first
	}
	return out, pool(out.odd, &out.scatter)
}

// pool gives all lines the scatter that they show together, and refuses repeats whose strongest
// line differs by far more.
func pool(lines []gather, scatter *float64) error {
	square, dof := 0.0, 0.0
	for _, g := range lines {
		v, _, relative := g.mean()
		n := float64(len(g.values))
		square, dof = square+(n-1)*v*v*relative*relative, dof+n-1
	}
	sigma := math.Sqrt(square / dof)
	for i := range lines {
		lines[i].sigma = math.Max(sigma, 1e-9)
	}
	_, _, *scatter = lines[0].mean()
	return lines[0].agree("the chopped voltage", 1e-3)
}

// response collects ln(n·a_n) over frequency at all chopping frequencies.
func (l Level) response(ctx context.Context, s *Session, channel int, volts float64) ([]signal.Scattered, error) {
	err := s.connect(ctx, fixtures.Wiring{What: fixtures.ChoppedToInput, Input: channel, Volts: quantity.Voltage(volts)},
		"Set the source back to about %v; it need not be read again.", quantity.Voltage(volts))
	if err != nil {
		return nil, err
	}
	var out []signal.Scattered
	for _, chop := range l.chops() {
		seconds := math.Max(2, 24/chop)
		s.tell("chopping at %v for %.0f s", quantity.Frequency(chop), seconds*float64(s.repeats()))
		t, err := s.choppedTones(ctx, channel, chop, seconds)
		if err != nil {
			return nil, err
		}
		for i, hz := range t.hz {
			n := float64(2*i + 1)
			if v, u, _ := t.odd[i].mean(); hz <= highestHz && v > 10*u {
				out = append(out, signal.Scattered{X: math.Log(hz), Y: math.Log(n * v), Sigma: math.Hypot(u/v, leastRelative)})
			}
		}
	}
	return out, nil
}

// leastRelative is the relative standard uncertainty below which no amplitude is trusted.
const leastRelative = 1e-9

// curve fits the high-pass and what is left over, and fills the file's curve.
func (l Level) curve(f *calibration.File, points []signal.Scattered) error {
	corner := fitCorner(points)
	// Around the corner found: columns are the level and its derivative by ln fc.
	model := func(x float64) float64 { return -0.5 * math.Log1p(math.Exp(2*(corner-x))) }
	shifted := make([]signal.Scattered, len(points))
	for i, p := range points {
		shifted[i] = signal.Scattered{X: p.X, Y: p.Y - model(p.X), Sigma: p.Sigma}
	}
	smooth, err := signal.FitSmooth(shifted, func(x float64) []float64 {
		return []float64{1, -1 / (1 + math.Exp(2*(x-corner)))}
	}, 0.7, 3)
	if err != nil {
		return err
	}
	found := quantity.Frequency(math.Exp(corner))
	f.Values[calibration.HighPass] = calibration.Found(found, found*quantity.Frequency(expanded(cornerU(points, corner)*math.Sqrt(math.Max(1, smooth.Misfit)))))
	reference := math.Log(float64(l.Reference))
	// The curve holds what the high-pass, at the corner as it is written, leaves over.
	written := func(x float64) float64 { return -0.5 * math.Log1p(math.Exp(2*(math.Log(float64(found))-x))) }
	f.Curve = drawn(0.8*float64(l.Lowest), highestHz, quantity.One, func(x float64) (float64, float64) {
		y, u := smooth.Between(x, reference)
		return y + model(x) - model(reference) - written(x), u
	})
	if smooth.Misfit > 4 {
		f.Notes = append(f.Notes, "the input is no plain first-order high-pass: its response is smoothed through the points measured")
	}
	return nil
}

// fitCorner is ln fc of the least squares of level − ½·ln(1 + (fc/f)²), by search and Newton-like
// halving: the level is eliminated.
func fitCorner(points []signal.Scattered) float64 {
	cost := func(corner float64) float64 {
		var sw, sy, syy float64
		for _, p := range points {
			w := 1 / (p.Sigma * p.Sigma)
			y := p.Y + 0.5*math.Log1p(math.Exp(2*(corner-p.X)))
			sw, sy, syy = sw+w, sy+w*y, syy+w*y*y
		}
		return syy - sy*sy/sw
	}
	best, step := math.Log(0.01), 0.5
	for x := best; x < math.Log(200); x += step {
		if cost(x) < cost(best) {
			best = x
		}
	}
	for step > 1e-9 {
		step /= 2
		for _, x := range []float64{best - step, best + step} {
			if cost(x) < cost(best) {
				best = x
			}
		}
	}
	return best
}

// cornerU is the standard uncertainty of ln fc that the points' scatter leaves.
func cornerU(points []signal.Scattered, corner float64) float64 {
	var s0, s1, s2 float64
	for _, p := range points {
		w, g := 1/(p.Sigma*p.Sigma), -1/(1+math.Exp(2*(p.X-corner)))
		s0, s1, s2 = s0+w, s1+w*g, s2+w*g*g
	}
	return math.Sqrt(s0 / (s0*s2 - s1*s1))
}

// alternating finds full scale from an AC voltage.
func (l Level) alternating(ctx context.Context, s *Session, f *calibration.File, channel int, nominal float64) error {
	err := s.connect(ctx, fixtures.Wiring{What: fixtures.OutputToInput, Input: channel},
		"Wire output %d straight to input %d, and an AC voltmeter (true effective value) across it.", s.Setup.Target.Channel, channel)
	if err != nil {
		return err
	}
	const seconds = 2
	drive, err := s.findDrive(ctx, channel, seconds, float64(l.Reference))
	if err != nil {
		return err
	}
	levels := []float64{drive, drive * levelFloor}
	var scale [2]float64
	var u [2]float64
	for k, level := range levels {
		p := s.tone(seconds, float64(l.Reference), level)
		var amplitude, volts gather
		for range s.repeats() {
			read := 0.0
			rec, err := s.record(ctx, &p, []int{channel}, p.period, func(ctx context.Context) (err error) {
				read, err = s.Hands.Read(ctx, fixtures.ACVoltmeter, "AC voltage at the input")
				return err
			})
			if err != nil {
				return err
			}
			t, _, err := s.fit(rec.Samples[channel], p.hz(s.rate()))
			if err != nil {
				return err
			}
			amplitude.add(cmplx.Abs(t[0].a), t[0].sigma)
			volts.add(read, 0)
		}
		a, ua, scatter := amplitude.mean()
		v, uv, _ := volts.mean()
		if v <= 0 {
			return wrong("check the meter's leads", "the voltmeter reads %v", quantity.Voltage(v))
		}
		scale[k], u[k] = math.Sqrt2*v/a, math.Hypot(ua/a, uv/v)
		if k == 0 {
			if err := plausible("the full scale of input "+l.Input, scale[0], nominal); err != nil {
				return err
			}
			value := calibration.Of(quantity.Ratio(scatter))
			f.Scatter = &value
		}
	}
	meter := float64(l.Meter) / 2
	f.Method = "an alternating voltage read on a meter, at two levels"
	f.Instruments = []calibration.Instrument{instrument("AC voltmeter", l.Meter)}
	f.Values[calibration.FullScale] = calibration.Found(quantity.Voltage(scale[0]), quantity.Voltage(scale[0]*expanded(meter, u[0])))
	difference, allowed := scale[1]/scale[0]-1, expanded(meter*math.Sqrt2, u[0], u[1])
	f.Values[calibration.Linearity] = calibration.Found(quantity.Ratio(difference), quantity.Ratio(allowed))
	f.Notes = append(f.Notes, "the input's response over frequency was not measured: it is taken as even; --method dc measures it")
	if math.Abs(difference) > 1.5*allowed {
		return wrong("switch off automatic gain and enhancements of the input, check for overload, and start again",
			"the input is not linear: at a tenth of the level its full scale differs by %.2f %%, and %.2f %% are allowed for", 100*difference, 100*allowed)
	}
	return nil
}

// wanted is how high an input is driven, as a fraction of full scale.
const wanted = 0.5

// findDrive looks for the output level that brings an input to half of its full scale.
func (s *Session) findDrive(ctx context.Context, channel int, seconds, hz float64) (float64, error) {
	p := s.tone(seconds, hz, 0.01)
	for try := 0; ; try++ {
		rec, err := s.record(ctx, &p, []int{channel}, p.period, nil)
		if err != nil {
			return 0, err
		}
		t, _, err := s.fit(rec.Samples[channel], p.hz(s.rate()))
		if err != nil {
			return 0, err
		}
		a := cmplx.Abs(t[0].a)
		if a < 10*t[0].sigma {
			return 0, wrong("check the cable and both channel numbers in the station file", "input %d hears nothing of output %d", channel, s.Setup.Target.Channel)
		}
		drive := math.Min(0.9, p.level*wanted/a)
		if try >= 1 {
			return drive, nil
		}
		p.level = drive
	}
}
