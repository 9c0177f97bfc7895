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

// Gain finds a preamplifier's gain and its course over the band by comparing the same
// multitone at the same input once without and once with the preamplifier:
//
//	G(f) = k·(b(f)/a(f))·(d_a/d_b)
//
// a and b the fitted amplitudes without and with it, d the drive levels, whose ratio is
// exact arithmetic, k the ratio of the divider before it (1 by level difference). The
// input's full scale and response and the output's response cancel.
type Gain struct {
	Input     string         // role
	Method    string         // "divider" or "difference"
	Divider   quantity.Ratio // input over output of the divider
	DividerU  quantity.Ratio // its expanded relative uncertainty (k = 2)
	Reference quantity.Frequency
	Lowest    quantity.Frequency // default 0.8 Hz
}

// gainSeconds is the period of the multitone, s.
const gainSeconds = 10

// levelStepU is the relative standard uncertainty of a level step of an output of 24 bits
// (common practice: a delta-sigma converter is linear to 0.02 % over 60 dB).
const levelStepU = 2e-4

// betweenTones is the relative standard uncertainty that a smooth curve through tones a third of an
// octave apart leaves beside their noise, for a preamplifier whose gain steps by some percent
// (found on the virtual bench).
const betweenTones = 7e-7

// Run calibrates.
func (g Gain) Run(ctx context.Context, s *Session) (*calibration.File, error) {
	in, err := s.input(g.Input)
	if err != nil {
		return nil, err
	}
	if g.Reference == 0 {
		g.Reference = 80
	}
	if g.Lowest == 0 {
		g.Lowest = 0.8
	}
	if g.Method == "divider" && !(g.Divider >= 1) {
		return nil, wrong("give --divider, input over output, such as 201 for 10 kΩ and 50 Ω", "the divider's ratio of %v is not possible", g.Divider)
	}
	p := s.multitone(gainSeconds, float64(g.Lowest), highestHz, 37)
	if err := s.connect(ctx, fixtures.Wiring{What: fixtures.OutputToInput, Input: in.Channel},
		"Take the preamplifier out: wire output %d straight to input %d.", s.Setup.Target.Channel, in.Channel); err != nil {
		return nil, err
	}
	direct, err := s.levels(ctx, p, in.Channel)
	if err != nil {
		return nil, err
	}
	ratio, ratioU, what := 1.0, levelStepU, fixtures.OutputToPreamplifier
	text := "Put the preamplifier back before input %[2]d and wire output %[1]d straight to where the module's IF goes in."
	if g.Method == "divider" {
		ratio, ratioU, what = float64(g.Divider), float64(g.DividerU)/2, fixtures.OutputThroughDivider
		text = "Put the preamplifier back before input %[2]d and wire output %[1]d through the divider to where the module's IF goes in."
	}
	if err := s.connect(ctx, fixtures.Wiring{What: what, Input: in.Channel}, text, s.Setup.Target.Channel, in.Channel); err != nil {
		return nil, err
	}
	through, err := s.levels(ctx, p, in.Channel)
	if err != nil {
		return nil, err
	}
	f := &calibration.File{Calibration: calibration.Gain, Of: g.Input, Repeats: s.repeats(), Values: map[string]calibration.Value{}}
	reference := calibration.Of(g.Reference)
	f.Reference = &reference
	if g.Method == "divider" {
		f.Method = "the same multitone without the preamplifier, and with it behind a divider"
		f.Instruments = []calibration.Instrument{instrument("divider "+g.Divider.String()+" to 1", g.DividerU)}
	} else {
		f.Method = "the same multitone without the preamplifier, and with it at a lower level of the output"
		f.Instruments = []calibration.Instrument{instrument("level step of the sound output (common practice)", 2*levelStepU)}
	}
	scatter := calibration.Of(quantity.Ratio(math.Max(direct.scatter, through.scatter)))
	f.Scatter = &scatter
	return f, g.curve(f, direct, through, ratio, ratioU)
}

func (g Gain) curve(f *calibration.File, direct, through levels, ratio, ratioU float64) error {
	var points []signal.Scattered
	for i, hz := range direct.hz {
		a, b := direct.tones[i], through.tones[i]
		if a.value < 10*a.sigma || b.value < 10*b.sigma {
			continue
		}
		points = append(points, signal.Scattered{X: math.Log(hz), Y: math.Log(b.value / a.value * ratio * direct.drive / through.drive),
			Sigma: math.Sqrt(square(a.sigma/a.value) + square(b.sigma/b.value) + square(leastRelative))})
	}
	if len(points) < 8 {
		return wrong("check the cables, the divider and that the preamplifier has power", "only %d of %d tones are heard through the preamplifier", len(points), len(direct.hz))
	}
	smooth, err := signal.FitSmooth(points, func(float64) []float64 { return []float64{1} }, 0.5, 2.5)
	if err != nil {
		return err
	}
	at := math.Log(float64(g.Reference))
	y, u := smooth.At(at)
	gain := math.Exp(y)
	f.Values[calibration.GainValue] = calibration.Found(quantity.Ratio(gain), quantity.Ratio(gain*expanded(ratioU, u)))
	low, high := math.Exp(points[0].X), math.Exp(points[len(points)-1].X)
	f.Curve = drawn(low, high, quantity.One, func(x float64) (float64, float64) {
		y, u := smooth.Between(x, at)
		return y, math.Hypot(u, betweenTones)
	})
	if gain < 1.5 {
		f.Notes = append(f.Notes, "the gain is hardly above one: was the preamplifier in the path?")
	}
	return nil
}

func square(v float64) float64 { return v * v }

// multitone is tones on odd lines, even over the logarithm of frequency, clear of the mains.
func (s *Session) multitone(seconds, low, high float64, count int) play {
	lines := signal.OddLines(seconds, low, high, count, 2, float64(s.Setup.Mains), 3/seconds)
	even := make([]float64, len(lines))
	for i := range even {
		even[i] = 1
	}
	return newPlay(s.frames(seconds), lines, even, signal.SchroederPhases(lines, even))
}

// amplitude is a tone's with its standard uncertainty.
type amplitude struct{ value, sigma float64 }

// levels is a multitone as an input hears it.
type levels struct {
	drive   float64 // peak of the output, fraction of full scale
	hz      []float64
	tones   []amplitude
	scatter float64 // relative, of one repeat, the best tone's
}

// levels brings a multitone to half of an input's full scale and measures its tones.
func (s *Session) levels(ctx context.Context, p play, channel int) (levels, error) {
	out := levels{drive: 2e-5, hz: p.hz(s.rate())}
	for {
		q := p.scaled(out.drive)
		rec, err := s.record(ctx, &q, []int{channel}, s.frames(2), nil)
		if err != nil {
			return out, err
		}
		top := 0.0
		for _, v := range rec.Samples[channel] {
			top = math.Max(top, math.Abs(v))
		}
		if top > 0.25 || out.drive >= 0.9 {
			break
		}
		out.drive = math.Min(0.9, out.drive*math.Min(40, wanted/math.Max(top, 1e-6)))
	}
	q := p.scaled(out.drive)
	s.tell("recording %d tones, %d times %.0f s", len(p.lines), s.repeats(), float64(p.period)/s.rate())
	gathers := make([]gather, len(p.lines))
	for range s.repeats() {
		rec, err := s.record(ctx, &q, []int{channel}, p.period, nil)
		if err != nil {
			return out, err
		}
		fits, fit, err := s.fit(rec.Samples[channel], p.hz(s.rate()))
		if err != nil {
			return out, err
		}
		copy(out.hz, fit.FrequencyHz) // by the input's clock
		for i, t := range fits {
			gathers[i].add(cmplx.Abs(t.a), t.sigma)
		}
	}
	out.scatter = math.Inf(1)
	heard := false
	for i := range gathers {
		v, u, scatter := gathers[i].mean()
		if err := gathers[i].agree("a tone of "+quantity.Frequency(out.hz[i]).String(), 1e-3); err != nil && v > 100*u {
			return out, err
		}
		out.tones = append(out.tones, amplitude{v, u})
		out.scatter = math.Min(out.scatter, scatter)
		heard = heard || v > 10*u
	}
	if !heard {
		return out, wrong("check the cables and both channel numbers in the station file", "input %d hears nothing of output %d", channel, s.Setup.Target.Channel)
	}
	return out, nil
}
