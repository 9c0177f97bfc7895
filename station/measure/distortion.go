package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// Distortion measures the harmonics that the module's IF adds to those that the phase modulation has
// of itself: a target that moves by a sine gives a pure mixer harmonics too (see Sensitivity).
//
// Both are told apart by how they go with φ = φ0 − 4π·p/λ, over at least eight offsets p of the stage that
// cover λ/2. With A1 = 2·V0·J1(β)·sin φ the fundamental, θ its phase, g = (S/(S+p))² the range law and
// H_n the nth harmonic turned by e^{−inθ}:
//
//	H2 = c1·g·cos φ + c2·g·sin φ + c3·g²·sin² φ
//	H3 = d1·g·sin φ + d2·g·cos φ + d3·g³·sin³ φ + d4·g²·sin 2φ
//
// c1 and d1 are the phase modulation's 2·V0·J2(β) and 2·V0·J3(β); c2 and d2 come of the shaker's own
// second harmonic (a motion at 2ω with the index β2 gives V0·β2·sin φ) and of the echo's modulation by the
// distance; c3 and d3 are square and cube law of the IF: a law v + q·v² + r·v³ turns a tone of
// the peak A into harmonics q·A²/2 and r·A³/4; d4 is the square law's product of first and
// second harmonic. All coefficients are complex and come out by linear least squares; φ0 from the fundamental's
// own. Readings, ratios to the fundamental at |sin φ| = 1:
//
//	.second = |c3|/(2·V0·J1),  .third = |d3|/(2·V0·J1)
//
// for the displacement given: .second goes with it, .third with its square. What preamplifier and sound
// input distort is contained. Domain: β up to 0.6, beyond which harmonics of higher order mix in.
type Distortion struct {
	Tone         quantity.Frequency `key:"tone" range:">0" doc:"frequency of the target's motion; default 40 Hz"`
	Displacement quantity.Length    `key:"displacement" range:">0" doc:"peak displacement of the target; default 0.40 mm"`
	Positions    int                `key:"positions" range:">0" doc:"how many positions over λ/2, 8 or more; default 12"`
	Acquire      quantity.Time      `key:"acquire" range:">0" doc:"how long to record at each position; default 1 s"`
	Mains        quantity.Frequency `key:"mains" range:">0" doc:"mains frequency, whose lines are fitted beside the tone; default 50 Hz"`
}

var _ = register(Kind{"distortion", "harmonics of the IF beyond those of the phase modulation", func() Measurement {
	return &Distortion{Tone: 40, Displacement: 0.4e-3, Positions: 12, Acquire: 1, Mains: 50}
}})

// mostBeta is the largest phase index β at which the harmonics' laws above hold to a percent.
const mostBeta = 0.6

// Readings offers the two ratios.
func (m *Distortion) Readings() []Offer {
	return []Offer{{".second", quantity.One, false}, {".third", quantity.One, false}}
}

func (m *Distortion) echo() *Sensitivity {
	return &Sensitivity{Method: "positions", Positions: 2, Tone: m.Tone, Displacement: m.Displacement, Acquire: m.Acquire, Mains: m.Mains}
}

// Check refuses too few positions and too large a motion.
func (m *Distortion) Check(module Module) error {
	if m.Positions < 8 || m.Positions > 100 {
		return fmt.Errorf("positions %d is not possible: write 8 to 100", m.Positions)
	}
	if beta := phaseIndex(float64(m.Displacement), module.Carrier); beta > mostBeta {
		return fmt.Errorf("a displacement of %v makes the phase index β = %.2f, and distortion can be told up to %.1f: write %v or less", m.Displacement, beta, mostBeta,
			quantity.Length(mostBeta*float64(module.Wavelength())/(4*math.Pi)))
	}
	return m.echo().Check(module)
}

// aroundHalfWave is so many positions evenly over λ/2 around the standoff, where φ goes once round.
func aroundHalfWave(count int, lambda quantity.Length) []quantity.Length {
	out := make([]quantity.Length, count)
	for k := range out {
		out[k] = lambda / 2 * quantity.Length((float64(k)-float64(count-1)/2)/float64(count))
	}
	return out
}

// Prepare records the tone at each position.
func (m *Distortion) Prepare(b Bench) (Schedule, error) {
	if top := 3 * float64(m.Tone); top > 0.4*float64(b.SampleRate) {
		return Schedule{}, fmt.Errorf("the third harmonic of %v is too near half the sample rate %v: write a lower tone", m.Tone, b.SampleRate)
	}
	return m.echo().at(b, aroundHalfWave(m.Positions, b.Module.Wavelength()))
}

// Evaluate fits tone and harmonics at each position, and how they go with φ.
func (m *Distortion) Evaluate(c *Capture) (Result, error) {
	t := c.Target
	if t == nil || t.Tone <= 0 || t.Displacement <= 0 || t.Standoff <= 0 {
		return Result{}, fmt.Errorf("step %s: the target's motion is not given: add target: {tone: …, displacement: …, standoff: …}", c.Step)
	}
	var fits []toneFit
	power, noise := 0.0, 0.0
	for i, part := range c.Parts {
		f, void, err := m.echo().fit(c, i, float64(part.Position), float64(t.Tone))
		if err != nil {
			return Result{}, err
		}
		if void != nil {
			return voidAll(c.Step, m.Readings(), void), nil
		}
		if len(f.harmonics) < 3 {
			return Result{}, fmt.Errorf("step %s: the sample rate does not hold the third harmonic of %v", c.Step, t.Tone)
		}
		fits = append(fits, f)
		h := f.harmonics[0]
		power += math.Pow(cmplx.Abs(h.a), 2)
		noise += 2 * h.sigma * h.sigma
	}
	missing := ""
	switch {
	case len(fits) < 8:
		missing = fmt.Sprintf("distortion needs at least 8 positions and has %d", len(fits))
	case power < 100*noise:
		missing = "the tone does not stand out of the noise, so that its harmonics say nothing"
	}
	if missing != "" {
		var out Result
		for _, o := range m.Readings() {
			out.Readings = append(out.Readings, Reading{Name: c.Step + o.Suffix, Unit: o.Unit.Symbol, Missing: missing})
		}
		return out, nil
	}
	return m.laws(c, fits)
}

// laws fits the harmonics' laws, and once more with a ruler that is a little longer.
func (m *Distortion) laws(c *Capture, fits []toneFit) (Result, error) {
	turn, aligned := toneAxis(fits)
	if !aligned {
		return voidAll(c.Step, m.Readings(), &Void{"clock", "the phase between drive and recording is not the same at all positions", "use one sound interface for both, then take it again"}), nil
	}
	found, ok := fitLaws(c, fits, turn, 1)
	scale := c.rulerScale()
	other, alsoOK := fitLaws(c, fits, turn, 1+scale)
	if !ok || !alsoOK {
		return Result{}, fmt.Errorf("step %s: the positions do not tell the laws of the harmonics apart: spread them evenly over λ/2 = %v", c.Step, quantity.Length(wavelength(c.Carrier)/2))
	}
	second, third := found.reading(c.Step+".second", found.second, other.second), found.reading(c.Step+".third", found.third, other.third)
	second.Notes = append(second.Notes, fmt.Sprintf("the target's own second harmonic: %.2g %% of its motion", 100*cmplx.Abs(found.second.Coefficient[1])/found.fundamental))
	return Result{Readings: []Reading{second, third}}, nil
}

// rulerScale is the standard uncertainty, relative, of the stage's length in wavelengths: that of the
// stage, and that of a carrier that is not known better than by its kind.
func (c *Capture) rulerScale() float64 {
	stage := stageTolerance
	if t, ok := c.Uncertainty["stage"]; ok {
		stage = t.Standard(float64(wavelength(c.Carrier)))
	}
	return math.Hypot(stage, carrierTolerance)
}

// carrierTolerance is the standard uncertainty of a module's carrier where it was not
// measured, relative (3 MHz of 10.5 GHz, common practice).
const carrierTolerance = 3e-4

// UsualAir is the refractive index of air that wavelengths are worked out with.
const UsualAir = 1.000315

// harmonicLaws are the fitted laws of the harmonics.
type harmonicLaws struct {
	fundamental, sigma float64 // V at |sin φ| = 1
	second, third      signal.Linear
}

// fitLaws fits the laws with phases that are scale times what the positions make.
func fitLaws(c *Capture, fits []toneFit, turn complex128, scale float64) (h harmonicLaws, ok bool) {
	psi, gain := make([]float64, len(fits)), make([]float64, len(fits))
	var rows [][]float64
	harmonics := [3][]complex128{}
	for k, f := range fits {
		psi[k] = scale * 4 * math.Pi * f.position * UsualAir / float64(wavelength(c.Carrier))
		gain[k] = math.Pow(float64(c.Target.Standoff)/(float64(c.Target.Standoff)+f.position), 2)
		sin, cos := math.Sincos(psi[k])
		rows = append(rows, []float64{gain[k] * cos, -gain[k] * sin})
		for n := range harmonics {
			harmonics[n] = append(harmonics[n], f.harmonics[n].a*cmplx.Pow(turn, complex(float64(n+1), 0)))
		}
	}
	first, ok := signal.FitLinear(rows, harmonics[0])
	if !ok {
		return h, false
	}
	p, q := real(first.Coefficient[0]), real(first.Coefficient[1])
	h.fundamental, h.sigma = math.Hypot(p, q), first.Along(0, 1)
	phase := math.Atan2(p, q)
	var second, third [][]float64
	for k, g := range gain {
		sin, cos := math.Sincos(phase - psi[k])
		second = append(second, []float64{g * g * sin * sin, g * sin, g * cos})
		third = append(third, []float64{g * g * g * sin * sin * sin, g * sin, g * cos, 2 * g * g * sin * cos})
	}
	var ok2, ok3 bool
	h.second, ok2 = signal.FitLinear(second, harmonics[1])
	h.third, ok3 = signal.FitLinear(third, harmonics[2])
	return h, ok2 && ok3
}

// fromZero is the middle of the interval from zero to size + U, where U is the budget's, and the
// budget of half its length: what is said of a size that does not stand out of its uncertainty.
func fromZero(size float64, components ...Component) (value float64, b Budget) {
	b = Combine(components...)
	value = (size + b.Expanded) / 2
	if b.Expanded == 0 {
		return value, b
	}
	const rounding = 1 + 1e-12 // that zero itself lies inside
	for i := range components {
		components[i].U *= rounding * value / b.Expanded
	}
	return value, Combine(components...)
}

// toneAxis is the factor of size one that turns the common phase of all positions' tones to
// zero (or π), and whether they have one.
func toneAxis(fits []toneFit) (turn complex128, aligned bool) {
	var axis complex128
	for _, f := range fits {
		axis += f.harmonics[0].a * f.harmonics[0].a
	}
	_, aligned = alongOneAxis(fits)
	return cmplx.Exp(complex(0, -cmplx.Phase(axis)/2)), aligned
}

// reading is the size of a fit's first coefficient relative to the fundamental. What is at right angles
// to it lengthens it, on the average by σ²/2A, which is taken off. One that does not stand out of its
// uncertainty becomes the middle of an interval from zero to its upper bound. other is the fit with
// a ruler that is longer by its standard uncertainty.
func (h harmonicLaws) reading(name string, f, other signal.Linear) Reading {
	c := f.Coefficient[0]
	ruler := (other.Coefficient[0] - c) / complex(h.fundamental, 0)
	size, largest := cmplx.Abs(c)/h.fundamental, math.Hypot(f.Largest(0)/h.fundamental, cmplx.Abs(ruler))
	r := Reading{Name: name, Unit: quantity.One.Symbol, Notes: []string{fmt.Sprintf("at a fundamental of %s peak", quantity.PrintTo(h.fundamental, h.fundamental/500, quantity.Volt))}}
	const scatterSource, rulerSource = "scatter of the harmonics over the positions", "length of the stage's way in wavelengths"
	cancel := Component{"full scale, gain (cancel in the ratio)", 0, 0}
	if size < 3*largest || size == 0 {
		scatter, length := Component{scatterSource, f.Largest(0) / h.fundamental, f.Dof}, Component{rulerSource, cmplx.Abs(ruler), 0}
		r.Value, r.Budget = fromZero(size, scatter, length, cancel)
		r.Notes = append(r.Notes, "does not stand out of its uncertainty: the interval reaches down to zero")
		return r
	}
	sigma, across := f.Along(0, c)/h.fundamental, f.Along(0, c*1i)/h.fundamental
	r.Value = math.Sqrt(size*size - across*across)
	r.Budget = Combine(Component{scatterSource, sigma, f.Dof}, Component{rulerSource, math.Abs(real(ruler*cmplx.Conj(c))) / cmplx.Abs(c), 0},
		Component{"scatter of the fundamental", r.Value * h.sigma / h.fundamental, f.Dof},
		Component{"harmonics of higher order (common practice)", r.Value * 0.005, 0}, cancel)
	return r
}
