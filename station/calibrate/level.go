package calibrate

import (
	"context"
	"math"
	"math/cmplx"

	"lotgate/fixtures"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
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
