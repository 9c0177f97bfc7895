package measure

import (
	"fmt"
	"math"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// Carrier measures the module's carrier frequency by moving the target over a known length: the
// stage is the ruler, the wavelength what it measures.
//
// With the shaker at a tone, the first harmonic at the stage's offset p is (see Sensitivity)
//
//	A(p) = 2·J1(β)·V0·(S/(S+p))²·sin(φ0 − 4π·p/λ)
//
// with the sign taken along the tone's phase. λ, φ0 and V0 come out by weighted least squares over all
// positions (signal.FitFringes): the phase is fitted, not counted, from a grid of starting values, so
// that no fringe is mistaken. Then
//
//	f0 = c/(n·λ)
//
// with n the refractive index of the room's air at radio frequencies (ITU-R P.453: N = (n−1)·10⁶ is some
// 315 at sea level). Readings: the step's own name (Hz); .wavelength (m, in air); .residual (what
// is left of the fit, relative to the largest amplitude: how well range law and sine hold).
//
// What it can tell: a wrong band or a module far off its frequency. A stage of 60 mm known to 0.05 % tells the
// carrier to about 5 parts in 10 000, one of 300 mm known to 0.05 mm to about 2 in 10 000. It is no
// substitute for a frequency counter: whether a carrier lies inside a band it may use is not shown by it,
// and it is no type approval.
type Carrier struct {
	Travel       quantity.Length    `key:"travel" range:">0" doc:"how far the stage goes either way; default all it has, at most half the standoff"`
	Positions    int                `key:"positions" range:">0" doc:"how many positions; default one every λ/12"`
	Tone         quantity.Frequency `key:"tone" range:">0" doc:"frequency of the target's motion; default 40 Hz"`
	Displacement quantity.Length    `key:"displacement" range:">0" doc:"peak displacement of the target; default 0.20 mm"`
	Acquire      quantity.Time      `key:"acquire" range:">0" doc:"how long to record at each position; default 0.5 s"`
	Mains        quantity.Frequency `key:"mains" range:">0" doc:"mains frequency, whose lines are fitted beside the tone; default 50 Hz"`
	Air          quantity.Ratio     `key:"air" range:">0" doc:"refractive index of the air; default 1.000315"`
}

var _ = register(Kind{"carrier", "carrier frequency, the stage being the ruler", func() Measurement {
	return &Carrier{Tone: 40, Displacement: 0.2e-3, Acquire: 0.5, Mains: 50, Air: UsualAir}
}})

const (
	// carrierSpan is how far from the nominal carrier a wavelength is looked for, relative.
	carrierSpan = 0.1
	// leastFringes is how many fringes (λ/2 each) the positions must span for a number.
	leastFringes = 1.0
	// positionsPerWavelength is how dense the positions are where the plan does not say.
	positionsPerWavelength = 12
	// stageTolerance is the standard uncertainty of the stage's scale where the station states
	// none under "stage", relative (0.2 % expanded; a plain leadscrew, common practice).
	stageTolerance = 0.001
	// airTolerance is the standard uncertainty of the air's refractive index: N of 315 varies
	// by some ±50 with weather (ITU-R P.453; common practice).
	airTolerance = 25e-6
	// jammedShare is the change of the amplitude, relative to its size, below which the stage
	// is said not to move; looseShare the residual above which it is said to move wrongly.
	jammedShare = 0.05
	looseShare  = 0.15
)

// Readings offers carrier, wavelength and residual.
func (m *Carrier) Readings() []Offer {
	return []Offer{{"", quantity.Hertz, false}, {".wavelength", quantity.Metre, false}, {".residual", quantity.One, false}}
}

func (m *Carrier) echo() *Sensitivity {
	return &Sensitivity{Method: "positions", Positions: 2, Tone: m.Tone, Displacement: m.Displacement, Acquire: m.Acquire, Mains: m.Mains}
}

// Check refuses too few positions, and what an echo cannot be measured with.
func (m *Carrier) Check(module Module) error {
	if m.Positions != 0 && (m.Positions < 8 || m.Positions > 500) {
		return fmt.Errorf("positions %d is not possible: write 8 to 500, or leave it out", m.Positions)
	}
	if m.Air < 1 || m.Air > 1.001 {
		return fmt.Errorf("air %v is no refractive index of air: write 1.0002 to 1.0005", m.Air)
	}
	return m.echo().Check(module)
}

// Prepare spreads the positions evenly over the travel, the nearest to the module first.
func (m *Carrier) Prepare(b Bench) (Schedule, error) {
	lambda := float64(b.Module.Wavelength())
	travel := math.Min(float64(b.Travel), float64(b.Standoff)/2)
	if m.Travel > 0 {
		if float64(m.Travel) > travel {
			return Schedule{}, fmt.Errorf("a travel of %v either way is more than the %v that stage and standoff allow", m.Travel, quantity.Length(travel))
		}
		travel = float64(m.Travel)
	}
	if 2*travel < leastFringes*lambda/2 {
		return Schedule{}, fmt.Errorf("a travel of ±%v is less than a fringe of λ/2 = %v: the carrier needs a stage that moves further", quantity.Length(travel), quantity.Length(lambda/2))
	}
	count := m.Positions
	if count == 0 {
		count = max(8, int(math.Ceil(2*travel/lambda*positionsPerWavelength))+1)
	}
	if apart := 2 * travel / float64(count-1); apart > lambda/6 {
		return Schedule{}, fmt.Errorf("%d positions over %v are %v apart, too far to follow the fringes: write at least %d", count, quantity.Length(2*travel), quantity.Length(apart), int(math.Ceil(12*travel/lambda))+1)
	}
	single, err := m.echo().at(b, make([]quantity.Length, 1))
	if err != nil {
		return Schedule{}, err
	}
	s := Schedule{Conditions: single.Conditions}
	s.Conditions.Parts = nil
	for k := range count {
		a := single.Acquisitions[0]
		a.Position = quantity.Length(travel * (2*float64(k)/float64(count-1) - 1))
		a.What = fmt.Sprintf("carrier, position %d of %d", k+1, count)
		s.Conditions.Parts = append(s.Conditions.Parts, Part{Position: a.Position})
		s.Acquisitions = append(s.Acquisitions, a)
	}
	return s, nil
}

// Evaluate fits each position's tone and then the fringes.
func (m *Carrier) Evaluate(c *Capture) (Result, error) {
	t := c.Target
	if t == nil || t.Tone <= 0 || t.Displacement <= 0 || t.Standoff <= 0 {
		return Result{}, fmt.Errorf("step %s: the target's motion is not given: add target: {tone: …, displacement: …, standoff: …}", c.Step)
	}
	var fits []toneFit
	for i, part := range c.Parts {
		if float64(t.Standoff+part.Position) <= 0 {
			return Result{}, fmt.Errorf("step %s: position %v lies behind the module at a standoff of %v", c.Step, part.Position, t.Standoff)
		}
		f, void, err := m.echo().fit(c, i, float64(part.Position), float64(t.Tone))
		if err != nil {
			return Result{}, err
		}
		if void != nil {
			return voidAll(c.Step, m.Readings(), void), nil
		}
		fits = append(fits, f)
	}
	if missing := m.tooLittle(c, fits); missing != "" {
		return m.missing(c, missing), nil
	}
	signed, aligned := alongOneAxis(fits)
	if !aligned {
		return voidAll(c.Step, m.Readings(), &Void{"clock", "the phase between drive and recording is not the same at all positions", "use one sound interface for both, then take it again"}), nil
	}
	return m.fringes(c, fits, signed), nil
}

func (m *Carrier) missing(c *Capture, why string) Result {
	var out Result
	for _, o := range m.Readings() {
		out.Readings = append(out.Readings, Reading{Name: c.Step + o.Suffix, Unit: o.Unit.Symbol, Missing: why})
	}
	return out
}

// tooLittle says why there can be no number, empty if there can.
func (m *Carrier) tooLittle(c *Capture, fits []toneFit) string {
	if len(fits) < 8 {
		return fmt.Sprintf("the carrier needs at least 8 positions and has %d", len(fits))
	}
	low, high, power, noise := math.Inf(1), math.Inf(-1), 0.0, 0.0
	for _, f := range fits {
		low, high = math.Min(low, f.position), math.Max(high, f.position)
		h := f.harmonics[0]
		power += real(h.a)*real(h.a) + imag(h.a)*imag(h.a)
		noise += 2 * h.sigma * h.sigma
	}
	if fringes := (high - low) * 2 / float64(wavelength(c.Carrier)); fringes < leastFringes {
		return fmt.Sprintf("the positions span %.2f fringes of λ/2, and at least %.0f is needed to tell the wavelength", fringes, leastFringes)
	}
	if power < 25*noise {
		return "the tone does not stand out of the noise: the module gives no echo, or the target does not move"
	}
	return ""
}

// fringes fits the sine over position and makes the readings.
func (m *Carrier) fringes(c *Capture, fits []toneFit, signed []float64) Result {
	standoff, nominal := float64(c.Target.Standoff), 4*math.Pi/float64(wavelength(c.Carrier))
	sigma, _ := c.position()
	p, noise := make([]float64, len(fits)), make([]float64, len(fits))
	square, mean := 0.0, 0.0
	for k, f := range fits {
		p[k], noise[k] = f.position, f.harmonics[0].sigma
		square += signed[k] * signed[k] / float64(len(fits))
		mean += signed[k] / float64(len(fits))
	}
	if math.Sqrt(math.Max(0, square-mean*mean)) < jammedShare*math.Sqrt(square) {
		return voidAll(c.Step, m.Readings(), &Void{"stage", fmt.Sprintf("the echo does not change while the stage should have moved %v", quantity.Length(p[len(p)-1]-p[0])),
			"free the stage, check its driver, then take it again"})
	}
	fit := func(standoff, exponent, low, high float64) (signal.Fringes, bool) {
		gain := make([]float64, len(p))
		for k := range p {
			gain[k] = math.Pow(standoff/(standoff+p[k]), exponent)
		}
		return signal.FitFringes(p, signed, gain, noise, sigma, nominal*low, nominal*high)
	}
	f, ok := fit(standoff, 2, 1-carrierSpan, 1+carrierSpan)
	relative := f.RMS / f.Amplitude()
	if !ok || relative > looseShare {
		if g, found := fit(standoff, 2, 0.4, 2.5); found && g.RMS < looseShare*g.Amplitude() {
			return m.missing(c, fmt.Sprintf("the fringes are those of a carrier near %v, more than %.0f %% from the nominal %v", quantity.Frequency(math.Round(SpeedOfLight*g.Kappa.Value/(4*math.Pi*1e7))*1e7), 100*carrierSpan, c.Carrier))
		}
		return voidAll(c.Step, m.Readings(), &Void{"stage", "the echo follows no sine over the stage's positions",
			"check that the stage moves freely over its whole travel and nothing else moves, then take it again"})
	}
	scatter := f.Kappa.Sigma / f.Kappa.Value
	stage, stageSource := stageTolerance, "scale of the stage (0.2 %, common practice)"
	if t, ok := c.Uncertainty["stage"]; ok {
		stage, stageSource = t.Standard(p[len(p)-1]-p[0]), "scale of the stage (calibration)"
	}
	off := func(standoff, exponent float64) float64 {
		g, ok := fit(standoff, exponent, 1-carrierSpan, 1+carrierSpan)
		if !ok {
			return 0
		}
		return math.Abs(g.Kappa.Value/f.Kappa.Value - 1)
	}
	common := []Component{{"scatter of the fit: noise, and where the stage stops", scatter, f.Kappa.Dof}, {stageSource, stage, 0}}
	if t, ok := c.Uncertainty["standoff"]; ok {
		common = append(common, Component{"standoff (calibration)", off(standoff*(1+t.Standard(standoff)), 2), 0})
	}
	common = append(common, Component{"range law over the travel (common practice)", off(standoff, 2*(1+rangeLawTolerance)), 0})
	scaled := func(value float64, components ...Component) Budget {
		out := append([]Component(nil), components...)
		for i := range out {
			out[i].U *= value
		}
		return Combine(out...)
	}
	hertz := SpeedOfLight * f.Kappa.Value / (4 * math.Pi * float64(m.Air))
	metres := 4 * math.Pi / f.Kappa.Value
	freedom := f.Kappa.Dof
	return Result{Readings: []Reading{
		{Name: c.Step, Unit: "Hz", Value: hertz, Budget: scaled(hertz, append(common, Component{"refractive index of the air (ITU-R P.453, common practice)", airTolerance, 0})...),
			Notes: []string{"told by the stage's travel: no substitute for a frequency counter, and no evidence that the carrier lies inside a band it may use"}},
		{Name: c.Step + ".wavelength", Unit: "m", Value: metres, Budget: scaled(metres, common...), Notes: []string{"in air"}},
		{Name: c.Step + ".residual", Unit: "1", Value: relative, Budget: Combine(Component{"scatter of an effective value", relative / math.Sqrt(2*freedom), freedom})},
	}}
}
