package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// Response measures the module's IF response against frequency.
//
// Readings: .curve (dB relative to the reference tone), .flatness (dB, largest less
// smallest value of the smoothed curve between the band's edges), .lower_edge and
// .upper_edge (Hz, −3 dB relative to the reference).
//
// Each tone's amplitude H_i at the IF is divided by 2·J1(β_i)·Π_{j≠i} J0(β_j), β = 4πX/λ:
// for a target moving at several tones at once the line at tone i is 2·V0·|sin φ0|·J1(β_i)·Π
// J0(β_j) (product of the Jacobi–Anger series), so that neither the shaker's fall-off nor the
// phase modulation's curvature is taken for the module's.
//
// Methods: multitone (default; all tones at once, on odd lines of the record, so that
// the mixer's even-order products fall between them: Pintelon & Schoukens 2012, ch. 5);
// stepped (a tone at a time); sweep (logarithmic).
type Response struct {
	Method    string               `key:"method" among:"multitone|stepped|sweep" doc:"multitone (default), stepped or sweep"`
	Band      []quantity.Frequency `key:"band" range:">0" doc:"the band's edges; default 10 Hz to 1 kHz"`
	Tones     int                  `key:"tones" range:">0" doc:"how many tones; default 31"`
	Reference quantity.Frequency   `key:"reference" range:">0" doc:"frequency of 0 dB: the nearest tone is taken; default 80 Hz"`
	Channel   string               `key:"channel" among:"if|quadrature" doc:"which output: if (default), or quadrature for a module of the kind two IF"`
	Acquire   quantity.Time        `key:"acquire" range:">0" doc:"length of the record (stepped: at each tone); default 4 s"`
	Mains     quantity.Frequency   `key:"mains" range:">0" doc:"mains frequency, which the tones keep clear of; default 50 Hz"`
	Largest   quantity.Length      `key:"displacement" range:">0" doc:"peak displacement of the whole motion; default 0.1 mm, less where the target cannot"`
}

var _ = register(Kind{"response", "IF response against frequency", func() Measurement {
	return &Response{Method: "multitone", Band: []quantity.Frequency{10, 1000}, Tones: 31, Reference: 80, Acquire: 4, Mains: 50, Largest: 1e-4}
}})

// Readings offers the curve and what is read off it.
func (m *Response) Readings() []Offer {
	return []Offer{{".curve", quantity.DecibelUnit, true}, {".flatness", quantity.DecibelUnit, false},
		{".lower_edge", quantity.Hertz, false}, {".upper_edge", quantity.Hertz, false}}
}

// Check refuses parameters that cannot work.
func (m *Response) Check(module Module) error {
	if err := checkChannel(m.Channel, module); err != nil {
		return err
	}
	if err := checkBand(m.Band); err != nil {
		return err
	}
	switch {
	case m.Tones < 5 || m.Tones > 200:
		return fmt.Errorf("tones %d is not possible: write 5 to 200", m.Tones)
	case m.Reference < m.Band[0] || m.Reference > m.Band[1]:
		return fmt.Errorf("reference %v lies outside the band %v to %v", m.Reference, m.Band[0], m.Band[1])
	case m.Acquire > 600:
		return fmt.Errorf("acquire %v is not possible: write 600 s or less", m.Acquire)
	case float64(m.Acquire)*float64(m.Band[0]) < 20 && m.Method != "stepped":
		return fmt.Errorf("acquire %v is too short for a band that starts at %v: record at least %v", m.Acquire, m.Band[0], quantity.Time(20/float64(m.Band[0])))
	case float64(m.Acquire)*float64(m.Band[0]) < 8:
		return fmt.Errorf("acquire %v is too short for a band that starts at %v: record at least %v", m.Acquire, m.Band[0], quantity.Time(8/float64(m.Band[0])))
	}
	return nil
}

// toneClear is how far a tone keeps from the mains and its harmonics, Hz.
const toneClear = 1.2

// toneApart is how many lines of the record lie between two tones at least.
const toneApart = 6

// Prepare shapes the motion. Displacements follow the square root of the target's own
// displacement per volt: halfway between the same displacement at all tones (which a
// shaker's fall-off forbids) and the same drive (which leaves little at high tones).
func (m *Response) Prepare(b Bench) (Schedule, error) {
	rate := float64(b.SampleRate)
	if float64(m.Band[1]) > 0.42*rate {
		return Schedule{}, fmt.Errorf("the band's upper edge %v is too near half the sample rate %v", m.Band[1], b.SampleRate)
	}
	frames := int(math.Round(float64(m.Acquire) * rate))
	seconds := float64(frames) / rate
	lines := signal.OddLines(seconds, float64(m.Band[0]), float64(m.Band[1]), m.Tones, toneApart, float64(m.Mains), toneClear)
	shape := make([]float64, len(lines))
	for i, line := range lines {
		shape[i] = math.Sqrt(float64(b.PerVolt(quantity.Frequency(float64(line) / seconds))))
	}
	phases := signal.SchroederPhases(lines, shape)
	scale := m.scale(b, lines, shape, phases, frames)
	tones := make([]Tone, len(lines))
	for i, line := range lines {
		tones[i] = Tone{Frequency: quantity.Frequency(float64(line) / seconds), Displacement: quantity.Length(shape[i] * scale), Phase: quantity.Angle(phases[i])}
	}
	c := Conditions{Target: &Motion{Standoff: b.Standoff}, Tones: tones}
	switch m.Method {
	case "stepped":
		return m.steppedSchedule(c, b, tones, frames), nil
	case "sweep":
		return m.sweepSchedule(c, b, tones, frames)
	}
	return Schedule{Conditions: c, Acquisitions: []Acquisition{{What: "response", Roles: []string{m.role()}, Frames: frames, Period: frames, Tones: tones, Settle: 0.5}}}, nil
}

// scale finds the factor to displacements that keeps the peak excursion and the
// peak drive within what target and output can, and the phase modulation small.
func (m *Response) scale(b Bench, lines []int, shape, phases []float64, frames int) float64 {
	// One period at a rate that holds the highest tone tenfold is enough for its peak.
	period := min(frames, 10*lines[len(lines)-1])
	peak := func(a []float64) float64 {
		top := 0.0
		for _, v := range signal.Multitone(lines, a, phases, period) {
			top = math.Max(top, math.Abs(v))
		}
		return top
	}
	drive := make([]float64, len(lines))
	square := 0.0
	for i, line := range lines {
		drive[i] = shape[i] / float64(b.PerVolt(quantity.Frequency(float64(line)*float64(b.SampleRate)/float64(frames))))
		square += shape[i] * shape[i]
	}
	const largestPhase = 0.5 // rad, effective value of the whole phase modulation
	scale := math.Min(float64(m.Largest), float64(b.Largest)) / peak(shape)
	scale = math.Min(scale, 0.9*float64(b.LargestDrive)/peak(drive))
	return math.Min(scale, largestPhase*float64(b.Module.Wavelength())/(4*math.Pi)/math.Sqrt(square/2))
}

func (m *Response) steppedSchedule(c Conditions, b Bench, tones []Tone, frames int) Schedule {
	var s Schedule
	for i := range tones {
		t := tones[i]
		// Alone, a tone may be larger: half the whole motion's peak, as far as the drive goes.
		x := math.Min(float64(m.Largest)/2, float64(b.Largest))
		x = math.Min(x, 0.9*float64(b.LargestDrive)*float64(b.PerVolt(t.Frequency)))
		t.Displacement, t.Phase = quantity.Length(x), 0
		tones[i] = t
		s.Acquisitions = append(s.Acquisitions, Acquisition{What: fmt.Sprintf("response, tone %d of %d", i+1, len(tones)), Roles: []string{m.role()},
			Frames: frames, Period: frames, Tones: []Tone{t}, Settle: 0.3})
		c.Parts = append(c.Parts, Part{Tone: &t})
	}
	c.Tones = nil
	s.Conditions = c
	return s
}

// toneLevel is one tone's share of the echo: amplitude over what the motion makes of V0·|sin φ0|.
type toneLevel struct {
	hz        float64
	level     float64 // V
	sigma     float64 // V
	dof       float64
	amplitude float64 // V at the module, before the division
	noise     float64 // V, standard uncertainty of amplitude
	shape     float64 // relative standard uncertainty that calibrations leave to it against other tones
}

// shape is the relative standard uncertainty of a tone against others: of its displacement, and
// of the gain over frequency.
func (c *Capture) shape(t Tone, gain float64) float64 {
	own := 0.0
	switch all, ok := c.Uncertainty["shape"]; {
	case t.Uncertainty != nil:
		own = t.Uncertainty.Standard(float64(t.Displacement))
	case ok:
		own = all.Standard(1)
	}
	return math.Hypot(own, gain)
}

// Evaluate fits all tones and relates them to the reference.
func (m *Response) Evaluate(c *Capture) (Result, error) {
	var levels []toneLevel
	var void *Void
	var err error
	switch {
	case c.Sweep != nil:
		levels, void, err = m.fromSweep(c)
	case len(c.Parts) > 0:
		levels, void, err = m.fromSteps(c)
	default:
		levels, void, err = m.fromMultitone(c, 0, c.Tones)
	}
	if err != nil {
		return Result{}, err
	}
	if void != nil {
		return voidAll(c.Step, m.Readings(), void), nil
	}
	return m.curve(c, levels), nil
}

func (m *Response) fromSteps(c *Capture) ([]toneLevel, *Void, error) {
	var out []toneLevel
	for i, p := range c.Parts {
		if p.Tone == nil {
			return nil, nil, fmt.Errorf("step %s: part %d has no tone: add tone: {frequency: …, displacement: …}", c.Step, i+1)
		}
		levels, void, err := m.fromMultitone(c, i, []Tone{*p.Tone})
		if err != nil || void != nil {
			return nil, void, err
		}
		out = append(out, levels...)
	}
	return out, nil, nil
}

// fromMultitone fits the tones of one record at once.
func (m *Response) fromMultitone(c *Capture, part int, tones []Tone) ([]toneLevel, *Void, error) {
	s, err := c.channel(part, m.role())
	if err != nil {
		return nil, nil, err
	}
	volts, err := c.volts(m.role())
	if err != nil {
		return nil, nil, err
	}
	if len(tones) == 0 {
		return nil, nil, fmt.Errorf("step %s: the target's tones are not given: add tones: [{frequency: …, displacement: …}, …]", c.Step)
	}
	top := 0.0
	var driven []float64
	for i, t := range tones {
		if i > 0 && t.Frequency <= tones[i-1].Frequency {
			return nil, nil, fmt.Errorf("step %s: the tones do not rise at %v: list them from low to high, each once", c.Step, t.Frequency)
		}
		driven = append(driven, float64(t.Frequency))
		top = math.Max(top, float64(t.Frequency))
	}
	if top > 0.49*s.Rate {
		return nil, nil, fmt.Errorf("step %s: a tone of %v is beyond what a sample rate of %.0f Hz holds", c.Step, quantity.Frequency(top), s.Rate)
	}
	if v := check(s, m.role()); v != nil {
		return nil, v, nil
	}
	d := signal.Decimate(s.Samples, s.Rate, math.Min(1.12*top, 0.45*s.Rate))
	line := d.Rate / float64(len(d.Samples))
	var fixed []float64
	for h := 1.0; h <= 10 && h*float64(m.Mains) < 0.42*d.Rate; h++ {
		if hz := h * float64(m.Mains); !near(hz, driven, 2.5*line) {
			fixed = append(fixed, hz)
		}
	}
	fit, err := signal.FitDriven(d.Samples, d.Rate, driven, fixed)
	if err != nil {
		return nil, nil, fmt.Errorf("step %s: %w: record at least two periods of the tones' spacing", c.Step, err)
	}
	if v := clockVoid(fit.Clock); v != nil {
		return nil, v, nil
	}
	seconds := float64(len(d.Samples)) / d.Rate
	low := math.Max(driven[0], 16/seconds)
	if v := steady(fit.Residual, d.Rate, low, math.Min(1.1*top, 0.45*d.Rate), math.Min(seconds/8, 5/low)); v != nil {
		return nil, v, nil
	}
	spectrum := signal.Periodogram(fit.Residual, d.Rate)
	quiet := signal.QuietLines(spectrum, fit.FrequencyHz, 0)
	pi0 := 1.0
	for _, t := range tones {
		pi0 *= math.J0(phaseIndex(float64(t.Displacement), c.Carrier))
	}
	out := make([]toneLevel, len(tones))
	for i, t := range tones {
		beta := phaseIndex(float64(t.Displacement), c.Carrier)
		noise := signal.NoiseAround(spectrum, quiet, driven[i], 14)
		if v := unbroken(spectrum, fit.FrequencyHz[i], noise.Value*6); len(tones) == 1 && v != nil {
			return nil, v, nil
		}
		made := 2 * math.J1(beta) * pi0 / math.J0(beta)
		gain, gainU := c.gainAt(m.role(), driven[i])
		a := cmplx.Abs(fit.Amplitude[i]) * volts / gain
		sigma := math.Sqrt(noise.Value/seconds) * volts / gain
		out[i] = toneLevel{driven[i], a / made, sigma / made, noise.Dof, a, sigma, c.shape(t, gainU)}
	}
	return out, nil, nil
}

// leastSNR is the amplitude, in standard uncertainties, below which a tone says nothing.
const leastSNR = 4.0

// neperInDB is 20/ln 10: a relative deviation times this is a level difference in dB.
const neperInDB = 20 / math.Ln10

// curve relates the tones to the reference and reads the rest off the curve.
//
// The reference is the level of the smoothed curve at the reference tone (a local
// parabola through the tones around it), not that one tone's own level: the noise of a
// single tone would shift all points together.
func (m *Response) curve(c *Capture, levels []toneLevel) Result {
	ref := 0
	for i, l := range levels {
		if math.Abs(math.Log(l.hz/float64(m.Reference))) < math.Abs(math.Log(levels[ref].hz/float64(m.Reference))) {
			ref = i
		}
	}
	r := Reading{Name: c.Step + ".curve", Unit: "dB", Curve: true}
	if levels[ref].amplitude < leastSNR*levels[ref].noise {
		missing := fmt.Sprintf("the reference tone at %.5g Hz does not stand out of the noise: no echo to relate the response to", levels[ref].hz)
		out := Result{}
		for _, o := range m.Readings() {
			out.Readings = append(out.Readings, Reading{Name: c.Step + o.Suffix, Unit: o.Unit.Symbol, Curve: o.Curve, Missing: missing})
		}
		return out
	}
	var points []curvePoint
	for _, l := range levels {
		if l.amplitude < leastSNR*l.noise {
			r.Notes = append(r.Notes, fmt.Sprintf("the tone at %.5g Hz does not stand out of the noise and is left out", l.hz))
			continue
		}
		points = append(points, curvePoint{hz: l.hz, db: neperInDB * math.Log(l.level),
			own: neperInDB * math.Hypot(l.sigma/l.level, l.shape), dof: l.dof})
	}
	reference := smoothAt(points, math.Log(levels[ref].hz), smoothPoints)
	for i := range points {
		points[i].db -= reference.db
	}
	var largest Budget
	for i, p := range points {
		others := 0.0
		for k, w := range reference.weight {
			if k != i {
				others += w * w * points[k].own * points[k].own
			}
		}
		b := Combine(Component{"scatter of the tone (noise on the lines around it)", math.Abs(1-reference.weight[i]) * p.own, p.dof},
			Component{"scatter of the reference level", math.Sqrt(others), p.dof * smoothPoints / 2})
		if b.Expanded >= largest.Expanded {
			largest = b
		}
		r.Points = append(r.Points, Point{p.hz, p.db, b.Expanded})
	}
	r.Budget = largest
	r.Notes = append(r.Notes, fmt.Sprintf("relative to the smoothed level at %.5g Hz; the budget shown is that of the least certain point", levels[ref].hz))
	out := Result{Readings: append([]Reading{r}, m.features(c, points, reference.weight, levels[ref].hz)...)}
	f := Figure{Name: c.Step + ".curve", Title: "IF response", XUnit: "Hz", YUnit: "dB"}
	for _, p := range points {
		f.Series = append(f.Series, [2]float64{p.hz, p.db})
	}
	out.Figures = []Figure{f}
	return out
}
