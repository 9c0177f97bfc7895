// Package calibrate takes a bench from a box of parts to traceable readings: guided
// calibrations, each of which wires the bench through a person's hands, plays and records,
// has instruments read, and ends in a calibration file or in an answer that says what is
// wrong. Nothing is written here: what was found is returned whole or not at all.
package calibrate

import (
	"context"
	"fmt"
	"math"

	"lotgate/fixtures"
	"lotgate/fixtures/attach"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
	"lotgate/station/signal"
)

// Session is one calibration on a bench.
type Session struct {
	Bench fixtures.Bench
	Hands fixtures.Hands
	Setup attach.Setup
	// Repeats is how often each acquisition is taken, so that a calibration knows its own
	// scatter; three at least.
	Repeats int
	// Wait lets time pass; Tell says what is being done; Progress the share of it. Tell and
	// Progress may be nil.
	Wait     func(ctx context.Context, t quantity.Time) error
	Tell     func(text string)
	Progress func(share float64)
	done     int
}

// Wrong is a calibration that cannot be used: something is connected, read or set otherwise
// than it must be. It says nothing about a unit.
type Wrong struct {
	What   string // "the reading is 1.414 times what is expected"
	Action string // "set the meter to read the effective value"
}

func (w *Wrong) Error() string { return w.What + ": " + w.Action }

// overloaded is an input driven to its ends: whoever chose the level may choose a lower one.
type overloaded struct{ error }

func (o *overloaded) Unwrap() error { return o.error }

func wrong(action, format string, args ...any) error {
	return &Wrong{fmt.Sprintf(format, args...), action}
}

func (s *Session) tell(format string, args ...any) {
	if s.Tell != nil {
		s.Tell(fmt.Sprintf(format, args...))
	}
}

func (s *Session) repeats() int { return max(3, s.Repeats) }

// rate is frames per second.
func (s *Session) rate() float64 { return float64(s.Setup.Rate) }

// frames is a length that holds a time and transforms fast: a multiple of 1000 at any usual
// rate.
func (s *Session) frames(seconds float64) int { return int(math.Round(seconds * s.rate())) }

// input is the set-up of a role.
func (s *Session) input(role string) (attach.InputSetup, error) {
	in, ok := s.Setup.Inputs[role]
	if !ok {
		return in, fmt.Errorf("the station file has no input %q: name one of those under inputs", role)
	}
	return in, nil
}

// play is a periodic signal on the shaker's output: tones on lines of the period.
type play struct {
	period    int
	lines     []int
	amplitude []float64
	phase     []float64 // of each cosine at the period's start
	wave      []float64 // one period
	peak      float64   // of the wave
	level     float64   // peak to play it at, fraction of full scale
}

func newPlay(period int, lines []int, amplitude, phase []float64) play {
	p := play{period: period, lines: lines, amplitude: amplitude, phase: phase, wave: signal.Multitone(lines, amplitude, phase, period), level: 1}
	for _, v := range p.wave {
		p.peak = math.Max(p.peak, math.Abs(v))
	}
	return p
}

// scaled is the same signal with its peak at a fraction of the output's full scale.
func (p play) scaled(peak float64) play { p.level = peak; return p }

// tone is one tone of a peak, on the line of the period nearest to a frequency.
func (s *Session) tone(seconds, hz, peak float64) play {
	period, line := s.frames(seconds), int(math.Round(hz*seconds))
	return newPlay(period, []int{line}, []float64{1}, []float64{0}).scaled(peak)
}

// hz lists the tones' frequencies at the output's clock.
func (p play) hz(rate float64) []float64 {
	out := make([]float64, len(p.lines))
	for i, l := range p.lines {
		out[i] = float64(l) * rate / float64(p.period)
	}
	return out
}

// drives lists each tone's peak as a fraction of the output's full scale.
func (p play) drives() []float64 {
	out := make([]float64, len(p.amplitude))
	for i, a := range p.amplitude {
		out[i] = a / p.peak * p.level
	}
	return out
}

func (p play) samples() []float32 {
	out := make([]float32, len(p.wave))
	for i, v := range p.wave {
		out[i] = float32(v / p.peak * p.level)
	}
	return out
}

// record plays (nil: silence) and records inputs for a number of frames.
func (s *Session) record(ctx context.Context, p *play, inputs []int, frames int, hold func(context.Context) error) (fixtures.SoundRecord, error) {
	job := fixtures.SoundJob{Inputs: inputs, Frames: frames, Lead: s.frames(0.5), Hold: hold}
	if p != nil {
		job.Play = map[int][]float32{s.Setup.Target.Channel: p.samples()}
	}
	rec, err := s.Bench.Sound.Acquire(ctx, job)
	if err != nil {
		return rec, err
	}
	s.done++
	if s.Progress != nil {
		s.Progress(1 - math.Exp(-float64(s.done)/12))
	}
	for _, c := range inputs {
		if h := signal.Look(rec.Samples[c], s.rate()); h.AtFullScale >= 2 {
			return rec, &overloaded{wrong("turn the input's level or what is connected down, switch off any automatic gain, and start again", "input %d is overloaded", c)}
		}
	}
	return rec, nil
}

// found is a tone's complex amplitude in fractions of full scale with the standard uncertainty
// of each of its parts.
type found struct {
	a     complex128
	sigma float64
}

// fit fits tones of known frequencies and gives each with its scatter from the noise around it;
// mains lines are fitted beside them. clock follows a common clock deviation.
func (s *Session) fit(x []float64, hz []float64) ([]found, signal.Fit, error) {
	rate := s.rate()
	line := rate / float64(len(x))
	var fixed []float64
	for h := 1.0; h <= 5; h++ {
		m := h * float64(s.Setup.Mains)
		clear := m < 0.46*rate
		for _, f := range hz {
			clear = clear && math.Abs(f-m) > 2.5*line
		}
		if clear {
			fixed = append(fixed, m)
		}
	}
	f, err := signal.FitDriven(x, rate, hz, fixed)
	if err != nil {
		return nil, f, err
	}
	residual := signal.Periodogram(f.Residual, rate)
	quiet := signal.QuietLines(residual, f.FrequencyHz, float64(s.Setup.Mains))
	seconds := float64(len(x)) / rate
	out := make([]found, len(hz))
	for i := range hz {
		noise := signal.NoiseAround(residual, quiet, f.FrequencyHz[i], 30)
		out[i] = found{f.Amplitude[i], math.Sqrt(noise.Value / seconds)}
	}
	return out, f, nil
}

// gather is the mean of repeated amplitudes with its standard uncertainty: the larger of what
// the noise says and what the repeats say, the latter only where it stands out.
type gather struct {
	values []float64
	sigma  float64 // of one repeat, after its noise
}

func (g *gather) add(v, sigma float64) {
	n := float64(len(g.values))
	g.values = append(g.values, v)
	g.sigma = math.Sqrt((n*g.sigma*g.sigma + sigma*sigma) / (n + 1))
}

// agree says where repeats differ by far more than their noise: something moved, or samples
// were lost. least is a relative difference that is let pass.
func (g *gather) agree(what string, least float64) error {
	v, _, scatter := g.mean()
	if math.Abs(v)*scatter > 8*g.sigma && scatter > least {
		return wrong("wait until all is warm and still, close other programs, and start again", "%s differs by %.2g %% from one repeat to the next", what, 100*scatter)
	}
	return nil
}

// mean gives the mean, its standard uncertainty, and the relative standard deviation of one
// repeat.
func (g *gather) mean() (v, sigma, scatter float64) {
	n := float64(len(g.values))
	for _, x := range g.values {
		v += x / n
	}
	square := 0.0
	for _, x := range g.values {
		square += (x - v) * (x - v)
	}
	deviation := math.Sqrt(square / math.Max(1, n-1))
	sigma = g.sigma
	// A sample deviation of three repeats exceeds twice the true one in two cases of a hundred.
	if deviation > 2*g.sigma {
		sigma = deviation
	}
	if v != 0 {
		scatter = deviation / math.Abs(v)
	}
	return v, sigma / math.Sqrt(n), scatter
}

// expanded is k = 2, as calibration files state it.
func expanded(components ...float64) float64 {
	sum := 0.0
	for _, u := range components {
		sum += u * u
	}
	return 2 * math.Sqrt(sum)
}

// relative is an expanded relative uncertainty as a curve's point carries it; above zero, for a
// file cannot state none (at the reference itself there is none).
func relative(u float64) tolerance.Tolerance { return tolerance.Percent(math.Max(u, 1e-9)) }

// begin brings the bench to its safe state before it is wired otherwise.
func (s *Session) halt(ctx context.Context) error {
	var first error
	for _, h := range s.Bench.Halters {
		if err := h.Halt(context.WithoutCancel(ctx)); err != nil && first == nil {
			first = err
		}
	}
	return first
}

// connect has the bench wired, in its safe state.
func (s *Session) connect(ctx context.Context, w fixtures.Wiring, format string, args ...any) error {
	if err := s.halt(ctx); err != nil {
		return err
	}
	return s.Hands.Connect(ctx, w, fmt.Sprintf(format, args...))
}

// voltmeter names a meter in a file.
func instrument(name string, u quantity.Ratio) calibration.Instrument {
	i := calibration.Instrument{Name: name}
	if u > 0 {
		i.Uncertainty = tolerance.Percent(float64(u))
	}
	return i
}
