package calibrate

import (
	"context"
	"math"

	"lotgate/fixtures"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
)

// Shunt finds the current shunt with its amplifier from a known load resistor in the module's
// place: I = V/R_load, and the chopped sense voltage (π/2)·A1 = I·(R·G) + V0 at two or more
// supply voltages. The straight line gives R·G and the offset V0; a run with no load gives
// the offset's size once more, of which the line tells the sign.
//
// The sense input's full scale cancels between this calibration and the measurement, as long as
// both use the same; so does its response at the chopping frequency.
type Shunt struct {
	Load   quantity.Resistance
	LoadU  quantity.Ratio // expanded relative uncertainty (k = 2)
	Meter  quantity.Ratio // of the DC voltmeter, likewise
	Supply []quantity.Voltage
}

// Run calibrates.
func (h Shunt) Run(ctx context.Context, s *Session) (*calibration.File, error) {
	in, err := s.input("sense")
	if err != nil {
		return nil, err
	}
	if s.Setup.Shunt == nil || s.Bench.Chopper == nil {
		return nil, wrong("write shunt: and use: {chopper: …} in the station file", "this station has no chopped shunt")
	}
	if in.FullScale <= 0 {
		return nil, wrong("run lotgate calibrate level --input sense first", "the full scale of the sense input is not known")
	}
	if !(h.Load > 0) {
		return nil, wrong("give --load, such as 150 Ω", "the load's resistance of %v is not possible", h.Load)
	}
	if len(h.Supply) == 0 {
		h.Supply = []quantity.Voltage{5, 2.5, 0.5} // the lowest tells the offset's sign
	}
	if len(h.Supply) < 2 {
		return nil, wrong("give two supply voltages or more", "one supply voltage tells resistance and offset not apart")
	}
	if err := s.connect(ctx, fixtures.Wiring{What: fixtures.NestEmpty}, "Take the module out of the nest, put nothing in, and close the lid."); err != nil {
		return nil, err
	}
	empty, err := h.sense(ctx, s, in.Channel, h.Supply[0])
	if err != nil {
		return nil, err
	}
	if err := s.connect(ctx, fixtures.Wiring{What: fixtures.LoadInNest}, "Put the load resistor of %v in the module's place, a DC voltmeter across it, and close the lid.", h.Load); err != nil {
		return nil, err
	}
	full := float64(in.FullScale)
	gain, _ := in.Response.At(s.Setup.Shunt.Chop)
	toVolts := math.Pi / 2 * full / float64(gain)
	var line straight
	scatter := 0.0
	for _, v := range h.Supply {
		a, err := h.sense(ctx, s, in.Channel, v)
		if err != nil {
			return nil, err
		}
		read, err := s.Hands.Read(ctx, fixtures.DCVoltmeter, "voltage across the load resistor")
		if err != nil {
			return nil, err
		}
		if err := plausible("the voltage across the load", read, float64(v)); err != nil {
			return nil, err
		}
		if a.value < 20*a.sigma {
			return nil, wrong("check the load, the sense cable and the chopper", "the sense input hears no current through the load at %v", v)
		}
		line.add(read/float64(h.Load), a.value*toVolts, math.Hypot(a.sigma, displayShare*a.value)*toVolts)
		scatter = math.Max(scatter, a.scatter)
	}
	if err := s.halt(ctx); err != nil {
		return nil, err
	}
	return h.file(s, line, empty, toVolts, scatter)
}

// sensed is the chopped fundamental as a fraction of full scale.
type sensed struct{ value, sigma, scatter float64 }

// sense switches the supply on and measures the chopped fundamental.
func (h Shunt) sense(ctx context.Context, s *Session, channel int, v quantity.Voltage) (out sensed, err error) {
	if err := s.Bench.Supply.SetVoltage(ctx, v); err != nil {
		return out, err
	}
	if err := s.Wait(ctx, 1); err != nil {
		return out, err
	}
	s.tell("supply %v", v)
	t, err := s.choppedTones(ctx, channel, float64(s.Setup.Shunt.Chop), 2)
	if err != nil {
		return out, err
	}
	out.value, out.sigma, _ = t.odd[0].mean()
	out.scatter = t.scatter
	return out, nil
}

// straight is a line through points by weighted least squares.
type straight struct{ s, sx, sy, sxx, sxy float64 }

func (l *straight) add(x, y, sigma float64) {
	w := 1 / (sigma * sigma)
	l.s, l.sx, l.sy, l.sxx, l.sxy = l.s+w, l.sx+w*x, l.sy+w*y, l.sxx+w*x*x, l.sxy+w*x*y
}

// solve gives slope and intercept with their standard uncertainties.
func (l *straight) solve() (slope, slopeU, intercept, interceptU float64) {
	det := l.s*l.sxx - l.sx*l.sx
	return (l.s*l.sxy - l.sx*l.sy) / det, math.Sqrt(l.s / det), (l.sxx*l.sy - l.sx*l.sxy) / det, math.Sqrt(l.sxx / det)
}

// displayShare is the relative standard uncertainty that a display of 4½ digits and the meter's
// unlinearity leave between readings of one range (common practice).
const displayShare = 1.5e-4

func (h Shunt) file(s *Session, line straight, empty sensed, toVolts, scatter float64) (*calibration.File, error) {
	_, _, intercept, interceptU := line.solve()
	offset := math.Copysign(empty.value*toVolts, intercept)
	offsetU := empty.sigma * toVolts
	if math.Abs(intercept) < 2*interceptU && math.Abs(offset) > 3*offsetU && math.Abs(offset) < interceptU {
		// The line cannot tell the sign: zero, give or take the size found.
		offset, offsetU = 0, math.Hypot(empty.value*toVolts, offsetU)
	}
	if empty.value < 3*empty.sigma {
		offset, offsetU = 0, math.Hypot(empty.value*toVolts, offsetU)
	}
	if math.Abs(intercept-offset) > 4*math.Hypot(interceptU, offsetU) {
		return nil, wrong("let the load cool between steps, read the meter at the load itself, and start again",
			"current and sense voltage do not lie on one line: it passes zero at %v, and with no load %v are read", quantity.Voltage(intercept), quantity.Voltage(offset))
	}
	// The offset is known better from the empty nest: the slope follows from it and the centre.
	centreI, centreV := line.sx/line.s, line.sy/line.s
	slope := (centreV - offset) / centreI
	slopeU := math.Hypot(1/math.Sqrt(line.s), offsetU) / centreI / slope
	gain := float64(s.Setup.Shunt.Gain)
	f := &calibration.File{Calibration: calibration.Shunt, Repeats: s.repeats(), Values: map[string]calibration.Value{},
		Method:      "a load resistor in the module's place at several supply voltages, and none",
		Instruments: []calibration.Instrument{instrument("load resistor "+h.Load.String(), h.LoadU), instrument("DC voltmeter", h.Meter)}}
	relative := expanded(slopeU, float64(h.LoadU)/2, float64(h.Meter)/2)
	f.Values[calibration.Resistance] = calibration.Found(quantity.Resistance(slope/gain), quantity.Resistance(slope/gain*relative))
	f.Values[calibration.Offset] = calibration.Found(quantity.Current(offset/slope), quantity.Current(math.Hypot(expanded(offsetU), offset*relative)/slope))
	value := calibration.Of(quantity.Ratio(scatter))
	f.Scatter = &value
	f.Notes = append(f.Notes, "found through the sense input as it was calibrated then: its full scale cancels; after another level calibration of that input it counts once more")
	for _, c := range s.Setup.Files {
		if c.Calibration == calibration.Level && c.Of == "sense" {
			f.Uses = append(f.Uses, c.FileName())
		}
	}
	if err := plausible("the shunt", slope/gain, float64(s.Setup.Shunt.Resistance)); err != nil {
		return nil, err
	}
	return f, nil
}
