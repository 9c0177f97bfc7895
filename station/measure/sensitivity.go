package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// Sensitivity measures how strong an echo the module makes of a target that moves by a
// known displacement at one tone.
//
// The mixer gives v(t) = V0·cos(φ0 − (4π/λ)·x(t)). With x(t) = X·cos(ωt) the IF holds
// the harmonics (Jacobi–Anger, Abramowitz & Stegun 9.1.44–45)
//
//	H1 = 2·V0·J1(β)·|sin φ0|,  H2 = 2·V0·J2(β)·|cos φ0|,  H3 = 2·V0·J3(β)·|sin φ0| …
//
// with β = 4πX/λ. Readings: .echo (V peak at the module's output), the V0 that this
// target at the nominal standoff gives at this tone; .phase (φ0, rad).
//
// Methods:
//   - positions: two or three standoffs λ/8 apart turn φ0 by π/2 each; each
//     position's amplitude is corrected for range (echo voltage falls with the square of the
//     distance), and V0·sin φ0, V0·cos φ0 come out by least squares. For two positions this is
//     V0 = √(Ha² + Hb²)/(2·J1). Three symmetric positions cancel the first-order error of
//     the range law.
//   - harmonics: one position, β ≥ 0.5: V0 = √((H1/2J1)² + (H2/2J2)²). Where H3
//     or H4 stand out, β follows from J1/J3 and J2/J4 (.displacement, m), the way ISO
//     16063-11 and -41 use an interferometer.
//   - single: one position at a φ0 set before; void where |sin φ0| < 0.5.
type Sensitivity struct {
	Method       string             `key:"method" among:"positions|harmonics|single" doc:"positions (default), harmonics or single"`
	Tone         quantity.Frequency `key:"tone" range:">0" doc:"frequency of the target's motion"`
	Displacement quantity.Length    `key:"displacement" range:">0" doc:"peak displacement of the target"`
	Positions    int                `key:"positions" range:">0" doc:"2 (default) or 3 standoffs λ/8 apart"`
	Channel      string             `key:"channel" among:"if|quadrature" doc:"which output: if (default), or quadrature for a module of the kind two IF"`
	Phase        *quantity.Angle    `key:"phase" doc:"φ0, for the method single"`
	Acquire      quantity.Time      `key:"acquire" range:">0" doc:"how long to record at each position; default 1 s"`
	Mains        quantity.Frequency `key:"mains" range:">0" doc:"mains frequency, whose lines are fitted beside the tone; default 50 Hz"`
}

var _ = register(Kind{"sensitivity", "echo of a target of known motion", func() Measurement {
	return &Sensitivity{Method: "positions", Positions: 2, Acquire: 1, Mains: 50}
}})

// LeastSine is the least |sin φ0| that the method single accepts.
const LeastSine = 0.5

// LeastBeta is the least phase index β for the method harmonics.
const LeastBeta = 0.5

// rangeLawTolerance is the standard uncertainty of the range correction, relative to the
// correction itself: the plate is no point, so the law of the square holds near the
// module to some percent only (common practice).
const rangeLawTolerance = 0.03

// Readings offers echo and phase, and with harmonics the displacement.
func (m *Sensitivity) Readings() []Offer {
	out := []Offer{{".echo", quantity.Volt, false}, {".phase", quantity.RadianUnit, false}}
	if m.Method == "harmonics" {
		out = append(out, Offer{".displacement", quantity.Metre, false})
	}
	return out
}

// Check refuses parameters that the method cannot work with.
func (m *Sensitivity) Check(module Module) error {
	if err := checkChannel(m.Channel, module); err != nil {
		return err
	}
	if m.Tone <= 0 || m.Displacement <= 0 {
		return fmt.Errorf("sensitivity needs the target's tone and displacement: add tone: 40 Hz and displacement: 0.20 mm")
	}
	beta := phaseIndex(float64(m.Displacement), module.Carrier)
	switch {
	case m.Method == "positions" && m.Positions != 2 && m.Positions != 3:
		return fmt.Errorf("positions %d is not possible: write 2 or 3", m.Positions)
	case beta > 1.8:
		return fmt.Errorf("a displacement of %v makes the phase index β = %.2f, beyond the first maximum of J1: write %v or less", m.Displacement, beta, quantity.Length(1.8*float64(module.Wavelength())/(4*math.Pi)))
	case m.Method == "harmonics" && beta < LeastBeta:
		return fmt.Errorf("the method harmonics needs a phase index β of %.1f or more and has %.3f: write a displacement of at least %v, or method: positions", LeastBeta, beta, quantity.Length(LeastBeta*float64(module.Wavelength())/(4*math.Pi)))
	case m.Method == "single" && m.Phase == nil:
		return fmt.Errorf("the method single needs φ0: add phase: … rad")
	case float64(m.Tone)*float64(m.Acquire) < 8:
		return fmt.Errorf("acquire %v holds fewer than 8 periods of %v: record at least %v", m.Acquire, m.Tone, quantity.Time(8/float64(m.Tone)))
	}
	return nil
}

func phaseIndex(displacement float64, carrier quantity.Frequency) float64 {
	return 4 * math.Pi * displacement / float64(wavelength(carrier))
}

// Prepare moves the stage through the positions and the shaker at the tone, rounded to a
// line of the record.
func (m *Sensitivity) Prepare(b Bench) (Schedule, error) {
	positions := []quantity.Length{0}
	eighth := b.Module.Wavelength() / 8
	if m.Method == "positions" {
		positions = []quantity.Length{0, eighth}
		if m.Positions == 3 {
			positions = []quantity.Length{-eighth, 0, eighth}
		}
	}
	return m.at(b, positions)
}

// at prepares the tone at some positions.
func (m *Sensitivity) at(b Bench, positions []quantity.Length) (Schedule, error) {
	if m.Displacement > b.Largest {
		return Schedule{}, fmt.Errorf("a displacement of %v is more than the %v this target may make", m.Displacement, b.Largest)
	}
	frames := int(math.Round(float64(m.Acquire) * float64(b.SampleRate)))
	line := math.Max(1, math.Round(float64(m.Tone)*float64(frames)/float64(b.SampleRate)))
	tone := Tone{Frequency: quantity.Frequency(line * float64(b.SampleRate) / float64(frames)), Displacement: m.Displacement}
	if drive := float64(m.Displacement) / float64(b.PerVolt(tone.Frequency)); drive > float64(b.LargestDrive) {
		return Schedule{}, fmt.Errorf("%v at %v needs a drive of %v, more than the output's %v: write a smaller displacement or a tone nearer the shaker's resonance", m.Displacement, tone.Frequency, quantity.Voltage(drive), b.LargestDrive)
	}
	s := Schedule{Conditions: Conditions{Target: &Motion{Tone: tone.Frequency, Displacement: m.Displacement, Standoff: b.Standoff, Phase: m.Phase}}}
	for i, p := range positions {
		if math.Abs(float64(p)) > float64(b.Travel) {
			return Schedule{}, fmt.Errorf("a position of %v is beyond the stage's travel of %v: use method: harmonics or single", p, b.Travel)
		}
		s.Conditions.Parts = append(s.Conditions.Parts, Part{Position: p})
		s.Acquisitions = append(s.Acquisitions, Acquisition{What: fmt.Sprintf("echo, position %d of %d", i+1, len(positions)), Roles: []string{m.role()},
			Frames: frames, Period: frames, Position: p, Tones: []Tone{tone}, Settle: 0.3})
	}
	return s, nil
}

// harmonic is one fitted harmonic at one position, in volts at the module's output.
type harmonic struct {
	a     complex128
	sigma float64 // standard uncertainty of each of its two parts
	dof   float64
}

// toneFit is one position's record, fitted.
type toneFit struct {
	position  float64 // m
	harmonics []harmonic
}

// Evaluate fits each position's record and combines them.
func (m *Sensitivity) Evaluate(c *Capture) (Result, error) {
	t := c.Target
	if t == nil || t.Tone <= 0 || t.Displacement <= 0 {
		return Result{}, fmt.Errorf("step %s: the target's motion is not given: add target: {tone: …, displacement: …, standoff: …}", c.Step)
	}
	positions := []float64{float64(t.Position)}
	if len(c.Parts) > 0 {
		positions = nil
		for _, p := range c.Parts {
			positions = append(positions, float64(p.Position))
		}
	}
	method := m.Method
	if method == "positions" && len(positions) < 2 {
		return Result{}, fmt.Errorf("step %s: the method positions needs two or three parts and has %d", c.Step, len(positions))
	}
	if method == "positions" && t.Standoff <= 0 {
		return Result{}, fmt.Errorf("step %s: the standoff is not given: add it under target", c.Step)
	}
	var fits []toneFit
	for i, p := range positions {
		f, void, err := m.fit(c, i, p, float64(t.Tone))
		if err != nil {
			return Result{}, err
		}
		if void != nil {
			return voidAll(c.Step, m.Readings(), void), nil
		}
		fits = append(fits, f)
	}
	switch method {
	case "harmonics":
		return m.fromHarmonics(c, fits[0])
	case "single":
		return m.fromSingle(c, fits[0])
	}
	return m.fromPositions(c, fits)
}

// fit fits the tone and its harmonics, and the mains beside them, at one position.
func (m *Sensitivity) fit(c *Capture, part int, position, tone float64) (toneFit, *Void, error) {
	s, err := c.channel(part, m.role())
	if err != nil {
		return toneFit{}, nil, err
	}
	volts, err := c.volts(m.role())
	if err != nil {
		return toneFit{}, nil, err
	}
	if v := check(s, m.role()); v != nil {
		return toneFit{}, v, nil
	}
	d := signal.Decimate(s.Samples, s.Rate, math.Min(math.Max(8*tone, 250), 0.4*s.Rate))
	top := 0.42 * d.Rate
	var driven, fixed []float64
	for k := 1.0; k <= 5 && k*tone < top; k++ {
		driven = append(driven, k*tone)
	}
	line := d.Rate / float64(len(d.Samples))
	for h := 1.0; h <= 5 && h*float64(m.Mains) < top; h++ {
		if hz := h * float64(m.Mains); !near(hz, driven, 2*line) {
			fixed = append(fixed, hz)
		}
	}
	fit, err := signal.FitDriven(d.Samples, d.Rate, driven, fixed)
	if err != nil {
		return toneFit{}, nil, fmt.Errorf("step %s: %w: record at least %.2g s", c.Step, err, 8/tone)
	}
	if v := clockVoid(fit.Clock); v != nil {
		return toneFit{}, v, nil
	}
	spectrum := signal.Periodogram(fit.Residual, d.Rate)
	seconds := float64(len(d.Samples)) / d.Rate
	quiet := signal.QuietLines(spectrum, fit.FrequencyHz, 0)
	out := toneFit{position: position}
	for k := range driven {
		noise := signal.NoiseAround(spectrum, quiet, fit.FrequencyHz[k], 16)
		if k == 0 {
			// A phase that steps spreads the tone to the lines beside it: they are held against
			// the noise further off.
			off := signal.NoiseAround(spectrum, quiet, 1.6*fit.FrequencyHz[0], 16)
			if v := unbroken(spectrum, fit.FrequencyHz[0], math.Min(noise.Value, off.Value)); v != nil {
				return toneFit{}, v, nil
			}
		}
		gain, _ := c.gainAt(m.role(), fit.FrequencyHz[k])
		scale := volts / gain
		out.harmonics = append(out.harmonics, harmonic{fit.Amplitude[k] * complex(scale, 0), math.Sqrt(noise.Value/seconds) * scale, noise.Dof})
	}
	if v := steady(fit.Residual, d.Rate, 2*8/seconds, math.Min(16*tone, 0.4*d.Rate), seconds/8); v != nil {
		return toneFit{}, v, nil
	}
	return out, nil, nil
}

// calibrations are the components that every method's echo carries, for a dependence
// dlnV/dlnX of the echo on the displacement.
func (m *Sensitivity) calibrations(c *Capture, echo, onDisplacement float64) []Component {
	out := c.levelComponents(m.role(), echo, float64(c.Target.Tone))
	if t, ok := c.Uncertainty["displacement"]; ok {
		out = append(out, Component{"displacement of the target (calibration)", math.Abs(echo * onDisplacement * t.Standard(float64(c.Target.Displacement))), 0})
	}
	return out
}

// slopeOfJ is dln J_n(β)/dln β = n − β·J_{n+1}(β)/J_n(β) (Abramowitz & Stegun 9.1.27).
func slopeOfJ(n int, beta float64) float64 {
	return float64(n) - beta*math.Jn(n+1, beta)/math.Jn(n, beta)
}

// fromPositions solves H_k·r_k/(2J1) = P·cos ψ_k − Q·sin ψ_k, with P = V0·sin φ0,
// Q = V0·cos φ0, ψ_k = 4π·x_k/λ and r_k = ((S+x_k)/S)² the range correction.
func (m *Sensitivity) fromPositions(c *Capture, fits []toneFit) (Result, error) {
	lambda, standoff := float64(wavelength(c.Carrier)), float64(c.Target.Standoff)
	beta := phaseIndex(float64(c.Target.Displacement), c.Carrier)
	j1 := math.J1(beta)
	signed, aligned := alongOneAxis(fits)
	type row struct{ cos, sin, value, sigma, dof, position float64 }
	rows, psis := make([]row, len(fits)), make([]float64, len(fits))
	var cc, cs, ss float64
	for k, f := range fits {
		if standoff+f.position <= 0 {
			return Result{}, fmt.Errorf("step %s: position %v lies behind the module at a standoff of %v", c.Step, quantity.Length(f.position), c.Target.Standoff)
		}
		psi := 4 * math.Pi * f.position / lambda
		psis[k] = psi
		r := math.Pow((standoff+f.position)/standoff, 2)
		h := f.harmonics[0]
		rows[k] = row{math.Cos(psi), -math.Sin(psi), signed[k] * r / (2 * j1), h.sigma * r / (2 * j1), h.dof, f.position}
		cc += rows[k].cos * rows[k].cos
		cs += rows[k].cos * rows[k].sin
		ss += rows[k].sin * rows[k].sin
	}
	det := cc*ss - cs*cs
	if det < 0.2 {
		return Result{}, fmt.Errorf("step %s: the positions do not turn φ0 far enough: place them λ/8 = %v apart", c.Step, quantity.Length(lambda/8))
	}
	if !aligned && math.Abs(cs) > 0.05*math.Min(cc, ss) {
		return Result{}, fmt.Errorf("step %s: the positions are not λ/8 = %v apart, and the phase between drive and recording is not the same in all parts, so that they cannot be combined", c.Step, quantity.Length(lambda/8))
	}
	var p, q, up, uq, dof float64
	weightP, weightQ := make([]float64, len(rows)), make([]float64, len(rows))
	for k, r := range rows {
		weightP[k], weightQ[k] = (ss*r.cos-cs*r.sin)/det, (cc*r.sin-cs*r.cos)/det
		p += weightP[k] * r.value
		q += weightQ[k] * r.value
		up += math.Pow(weightP[k]*r.sigma, 2)
		uq += math.Pow(weightQ[k]*r.sigma, 2)
		dof += r.dof
	}
	// The expectation of P² + Q² holds the noise's own power: taken off.
	power := p*p + q*q
	net := math.Max(power-up-uq, 0)
	echo := math.Sqrt(net)
	scatter := math.Sqrt((up + uq) / 2)
	if power > 0 {
		scatter = math.Sqrt((p*p*up + q*q*uq) / power)
	}
	name := math.Sqrt(power)
	var onStandoff, onLaw float64
	for k, r := range rows {
		if name == 0 {
			break
		}
		share := (p*weightP[k] + q*weightQ[k]) * r.value / name
		onStandoff += share * -2 * r.position / (standoff + r.position)
		onLaw += share * 2 * math.Log((standoff+r.position)/standoff)
	}
	components := []Component{{"scatter of the fitted tones", scatter, dof}}
	components = append(components, m.calibrations(c, echo, slopeOfJ(1, beta))...)
	components = append(components, Component{"range law between the positions (common practice)", math.Abs(onLaw) * rangeLawTolerance, 0})
	if t, ok := c.Uncertainty["standoff"]; ok {
		components = append(components, Component{"standoff (calibration)", math.Abs(onStandoff) * t.Standard(standoff), 0})
	}
	sigma, source := c.position()
	along, across := astray(p, q, psis, weightP, weightQ, sigma, lambda)
	const pickUpSource = "pick-up at the tone (0.1 %, common practice)"
	pickAlong, pickAcross := pickedUp(p, q, weightP, weightQ)
	components = append(components, Component{source, along, 0}, Component{pickUpSource, pickAlong * pickUpTolerance * name, 0})
	e := Reading{Name: c.Step + ".echo", Unit: "V", Value: echo, Budget: Combine(components...)}
	if power < 9*(up+uq) {
		e.Notes = append(e.Notes, "the tone does not stand out of the noise")
	}
	stops, picked := Component{source, 0, 0}, Component{pickUpSource, pickAcross * pickUpTolerance, 0}
	if power > 0 {
		stops.U = across / math.Sqrt(power)
	}
	return Result{Readings: []Reading{e, m.phase(c, p, q, up, uq, dof, aligned, power, stops, picked)}}, nil
}

func (m *Sensitivity) phase(c *Capture, p, q, up, uq, dof float64, aligned bool, power float64, further ...Component) Reading {
	r := Reading{Name: c.Step + ".phase", Unit: "rad"}
	if power < 9*(up+uq) {
		r.Missing = "the tone does not stand out of the noise, so that φ0 is not known"
		return r
	}
	r.Value = math.Atan2(p, q)
	if aligned {
		r.Value = math.Mod(r.Value+2*math.Pi, math.Pi)
		r.Notes = append(r.Notes, "modulo π")
	} else {
		r.Value = math.Atan2(math.Abs(p), math.Abs(q))
		r.Notes = append(r.Notes, "folded into 0…π/2: the phase between drive and recording is not known")
	}
	sigma := math.Sqrt(q*q*up+p*p*uq) / power
	r.Budget = Combine(append([]Component{{"scatter of the fitted tones", sigma, dof}}, further...)...)
	return r
}

// alongOneAxis turns the positions' amplitudes into signed numbers along the common
// phase axis of the tone. Where the phase between drive and recording was not the same in all
// parts (aligned is false) the magnitudes are given.
func alongOneAxis(fits []toneFit) (signed []float64, aligned bool) {
	var axis complex128
	for _, f := range fits {
		axis += f.harmonics[0].a * f.harmonics[0].a // squares agree for opposite signs
	}
	direction := cmplx.Exp(complex(0, -cmplx.Phase(axis)/2))
	aligned = true
	for _, f := range fits {
		h := f.harmonics[0]
		turned := h.a * direction
		signed = append(signed, real(turned))
		if math.Abs(imag(turned)) > 5*h.sigma+0.02*cmplx.Abs(h.a) {
			aligned = false
		}
	}
	if !aligned {
		for k, f := range fits {
			signed[k] = cmplx.Abs(f.harmonics[0].a)
		}
	}
	return signed, aligned
}

// fromSingle is V0 = H1/(2·J1·|sin φ0|) at a φ0 that is given.
func (m *Sensitivity) fromSingle(c *Capture, f toneFit) (Result, error) {
	phase := m.Phase
	if c.Target.Phase != nil {
		phase = c.Target.Phase
	}
	if phase == nil {
		return Result{}, fmt.Errorf("step %s: the method single needs φ0: add phase under target", c.Step)
	}
	sine := math.Abs(math.Sin(float64(*phase)))
	if sine < LeastSine {
		return voidAll(c.Step, m.Readings(), &Void{"null", fmt.Sprintf("the target stands near a null of this module: |sin φ0| is %.2f and must be %.1f or more", sine, LeastSine),
			"move the target by λ/16, or use the method positions"}), nil
	}
	beta := phaseIndex(float64(c.Target.Displacement), c.Carrier)
	h := f.harmonics[0]
	factor := 1 / (2 * math.J1(beta) * sine)
	echo := math.Sqrt(math.Max(math.Pow(cmplx.Abs(h.a), 2)-h.sigma*h.sigma, 0)) * factor
	components := append([]Component{{"scatter of the fitted tone", h.sigma * factor, h.dof}}, m.calibrations(c, echo, slopeOfJ(1, beta))...)
	r := Reading{Name: c.Step + ".phase", Unit: "rad", Value: float64(*phase), Notes: []string{"as set before"}}
	if t, ok := c.Uncertainty["phase"]; ok {
		u := t.Standard(float64(*phase)) * float64(*phase)
		components = append(components, Component{"φ0 (set before)", echo * math.Abs(math.Cos(float64(*phase))) / sine * u, 0})
		r.Budget = Combine(Component{"φ0 (set before)", math.Abs(u), 0})
	} else {
		r.Notes = append(r.Notes, "without an uncertainty")
	}
	return Result{Readings: []Reading{{Name: c.Step + ".echo", Unit: "V", Value: echo, Budget: Combine(components...)}, r}}, nil
}
