package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// SupplyCurrent measures the module's supply current (A).
//
// The controller chops the shunt's sense voltage to ground at an audio frequency with
// 50 % duty, so that an AC-coupled input can read a DC current. The fundamental of a
// square wave between 0 and V has the peak (2/π)·V, hence
//
//	I = (π/2)·A1/(R·G) − I0
//
// with A1 the peak of the fundamental at the input (V; least-squares sine fit with
// free frequency and the harmonics fitted beside it, IEEE Std 1057), R the shunt (Ω)
// and G the gain of its amplifier, I0 the offset read with no load (A). The third harmonic must be A1/3 (Fourier series of
// the square wave): a difference of more than 5 % means that the input clips or the
// chopper is sick, and the reading is void.
type SupplyCurrent struct {
	Acquire quantity.Time `key:"acquire" range:">0" doc:"how long to record; default 0.5 s"`
	Using   string        `key:"using" among:"chopped|reported" doc:"chopped (default): the shunt through the sound input; reported: what the supply says itself"`
}

var _ = register(Kind{"supply_current", "supply current through the chopped shunt", func() Measurement {
	return &SupplyCurrent{Acquire: 0.5, Using: "chopped"}
}})

// thirdHarmonicTolerance is how far 3·A3/A1 may be from one.
const thirdHarmonicTolerance = 0.05

// reportedTolerance is the standard uncertainty taken for a supply's own reading where
// no calibration is given, relative (common practice: 0.5 % class).
const reportedTolerance = 0.005

// What the supply's own error makes of the current: the standard uncertainty of a trade supply's voltage,
// V, and the relative change of a module's current per volt, 1/V (common practice).
const (
	supplyVolts  = 0.005
	currentSlope = 0.06
)

// Readings offers the current itself.
func (m *SupplyCurrent) Readings() []Offer { return []Offer{{"", quantity.Ampere, false}} }

// Check refuses a record too short for the chopper's lines to be told apart.
func (m *SupplyCurrent) Check(Module) error {
	if m.Using == "chopped" && (m.Acquire < 0.05 || m.Acquire > 60) {
		return fmt.Errorf("acquire %v is not possible: write 0.05 s to 60 s", m.Acquire)
	}
	return nil
}

// Prepare records the sense input while the chopper runs.
func (m *SupplyCurrent) Prepare(b Bench) (Schedule, error) {
	if m.Using == "reported" {
		return Schedule{Reported: true}, nil
	}
	if b.Chop <= 0 {
		return Schedule{}, fmt.Errorf("this station has no chopped shunt: give the station file a shunt, or write using: reported")
	}
	frames := int(math.Round(float64(m.Acquire) * float64(b.SampleRate)))
	return Schedule{Acquisitions: []Acquisition{{What: "supply current", Roles: []string{Sense}, Frames: frames, Chop: true, Settle: 0.1}}}, nil
}

// Evaluate fits the chopped wave.
func (m *SupplyCurrent) Evaluate(c *Capture) (Result, error) {
	if c.Reported != nil {
		return m.evaluateReported(c), nil
	}
	f, void, err := fitChopped(c, 0)
	if err != nil {
		return Result{}, err
	}
	if void != nil {
		return voidAll(c.Step, m.Readings(), void), nil
	}
	value, scatter := c.current(f)
	components := append([]Component{{"scatter of the fitted fundamental", scatter, f.dof}},
		c.levelComponents(Sense, value, float64(c.Shunt.Chop))...)
	components = append(components, Component{"shunt and its amplifier (calibration)", value * c.Uncertainty["shunt"].Standard(float64(c.Shunt.Resistance)), 0})
	components = append(components, Component{"supply voltage (10 mV at 6 %/V, common practice)", value * supplyVolts * currentSlope, 0})
	if t, ok := c.Uncertainty["offset"]; ok {
		components = append(components, Component{"offset of the sense amplifier (calibration)", t.Absolute / 2, 0})
	}
	return Result{Readings: []Reading{{Name: c.Step, Unit: "A", Value: value, Budget: Combine(components...)}}}, nil
}

// current turns a chopped fundamental into the supply current and its scatter, A.
func (c *Capture) current(f chopFit) (value, scatter float64) {
	perVolt := math.Pi / 2 / (float64(c.Shunt.Resistance) * float64(c.Shunt.Gain))
	return perVolt*f.peak - float64(c.Shunt.Offset), perVolt * f.sigma
}

// chopFit is the fundamental of the chopped wave at the sense amplifier's output.
type chopFit struct {
	peak, sigma float64 // V
	dof         float64
}

// fitChopped fits the chopped wave of one recording and checks that it is a square wave.
func fitChopped(c *Capture, part int) (chopFit, *Void, error) {
	s, err := c.channel(part, Sense)
	if err != nil {
		return chopFit{}, nil, err
	}
	if c.Shunt == nil {
		return chopFit{}, nil, fmt.Errorf("step %s: the shunt is not given: add shunt: {resistance: …, gain: …, chop: …}", c.Step)
	}
	volts, err := c.volts(Sense)
	if err != nil {
		return chopFit{}, nil, err
	}
	if v := check(s, "sense"); v != nil {
		return chopFit{}, v, nil
	}
	chop := float64(c.Shunt.Chop)
	if 3.2*chop > s.Rate/2 {
		return chopFit{}, nil, fmt.Errorf("step %s: a chopping frequency of %v cannot be checked at a sample rate of %.0f Hz: lower it below a sixth of the rate", c.Step, c.Shunt.Chop, s.Rate)
	}
	d := signal.Decimate(s.Samples, s.Rate, math.Min(5.4*chop, 0.4*s.Rate))
	fundamental := signal.StrongestNear(d.Samples, d.Rate, chop, 0.03)
	var multiples []float64
	for k := 1.0; k*fundamental < 0.495*d.Rate && k <= 9; k++ {
		multiples = append(multiples, k*fundamental)
	}
	fit, err := signal.FitDriven(d.Samples, d.Rate, multiples, nil)
	if err != nil {
		return chopFit{}, nil, fmt.Errorf("step %s: %w: record at least %.2f s", c.Step, err, 10/chop)
	}
	gain1, _ := c.gainAt(Sense, fit.FrequencyHz[0])
	gain3, _ := c.gainAt(Sense, fit.FrequencyHz[2])
	a1, a3 := cmplx.Abs(fit.Amplitude[0])/gain1, cmplx.Abs(fit.Amplitude[2])/gain3
	spectrum := signal.Periodogram(fit.Residual, d.Rate)
	noise := signal.NoiseAround(spectrum, signal.QuietLines(spectrum, fit.FrequencyHz, 0), fit.FrequencyHz[0], 12)
	sigma := math.Sqrt(noise.Value*d.Rate/float64(len(d.Samples))) / gain1
	if v := chopperVoid(a1, a3, sigma, chop, fit.FrequencyHz[0]); v != nil {
		return chopFit{}, v, nil
	}
	if v := steady(fit.Residual, d.Rate, chop/4, math.Min(4.5*chop, 0.36*s.Rate), 24/chop); v != nil {
		return chopFit{}, v, nil
	}
	return chopFit{a1 * volts, sigma * volts, noise.Dof}, nil, nil
}

func (m *SupplyCurrent) evaluateReported(c *Capture) Result {
	value := float64(*c.Reported)
	relative := reportedTolerance
	if t, ok := c.Uncertainty["reported"]; ok {
		relative = t.Standard(value)
	}
	return Result{Readings: []Reading{{Name: c.Step, Unit: "A", Value: value,
		Budget: Combine(Component{"the supply's own meter (calibration)", math.Abs(value) * relative, 0}),
		Notes:  []string{"reported by the supply itself"}}}}
}

func chopperVoid(a1, a3, sigma, chop, foundHz float64) *Void {
	if a1 < 6*sigma || sigma == 0 && a1 == 0 {
		return &Void{"silent", fmt.Sprintf("no chopped signal at %.4g Hz on the sense input", chop), "check the sense cable, the chopper and that the supply is on"}
	}
	ratio := 3 * a3 / a1
	if math.Abs(ratio-1) > thirdHarmonicTolerance+9*sigma/a1 {
		return &Void{"chopper", fmt.Sprintf("the chopped signal is no square wave: its third harmonic is %.3f of the third it must be (found at %.5g Hz)", ratio, foundHz),
			"check that the sense input does not clip and that the chopper switches fully at 50 % duty"}
	}
	return nil
}
