package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
	"lotgate/station/signal"
)

// SupplyRejection measures how little of a change of the supply comes out at the IF, with the target still (dB).
//
// Methods:
//
//   - tone (default): the bench puts a sine of a known peak on the supply. The reading is 20·log10(A_supply/A_IF), A_IF
//     the peak of the tone at the module's output (least-squares sine fit; the frequency is looked for, since the
//     controller's clock is not the sound interface's);
//   - step: the supply is changed by a known amount while the IF is recorded. The reading is 20·log10(ΔV/peak), peak the
//     largest excursion of the IF from its value before. It is the rejection far above the IF's lower corner,
//     and contains how fast the supply changes: one that takes longer than a millisecond makes it look better than it is.
//
// What pushing makes of the echo of whatever stands in front of the module is part of it. A tone that
// does not stand out of the noise gives no number, but how much rejection there is at least.
type SupplyRejection struct {
	Method    string              `key:"method" among:"tone|step" doc:"tone (default) or step"`
	Frequency quantity.Frequency  `key:"frequency" range:">0" doc:"frequency of the sine; default 85 Hz, clear of the mains' harmonics"`
	Level     quantity.Voltage    `key:"level" range:">0" doc:"peak of the sine, or amount of the step; default 0.1 V and 0.25 V"`
	Acquire   quantity.Time       `key:"acquire" range:">0" doc:"how long to record; default 2 s"`
	Mains     quantity.Frequency  `key:"mains" range:">0" doc:"mains frequency; default 50 Hz"`
	LevelU    tolerance.Tolerance `key:"level_uncertainty" doc:"expanded uncertainty (k = 2) of level; default 2 % of the sine, 15 mV of the step, common practice"`
}

var _ = register(Kind{"supply_rejection", "how little of a change of the supply comes out at the IF", func() Measurement {
	return &SupplyRejection{Method: "tone", Frequency: 85, Acquire: 2, Mains: 50}
}})

// Readings offers the rejection itself.
func (m *SupplyRejection) Readings() []Offer { return []Offer{{"", quantity.DecibelUnit, false}} }

// level is the sine's peak or the step.
func (m *SupplyRejection) level() quantity.Voltage {
	switch {
	case m.Level > 0:
		return m.Level
	case m.Method == "step":
		return 0.25
	}
	return 0.1
}

// levelTolerance is how well the level is known.
func (m *SupplyRejection) levelTolerance() tolerance.Tolerance {
	switch {
	case m.LevelU != tolerance.Tolerance{}:
		return m.LevelU
	case m.Method == "step":
		return tolerance.Tolerance{Absolute: 15e-3, Unit: "V"} // two voltages of 10 mV each
	}
	return tolerance.Percent(0.02)
}

// Check refuses a tone on the mains, a record too short for it, and a level that harms.
func (m *SupplyRejection) Check(Module) error {
	if m.level() > 1 {
		return fmt.Errorf("a level of %v is not possible: write at most 1 V", m.level())
	}
	if m.Acquire < 0.2 || m.Acquire > 60 {
		return fmt.Errorf("acquire %v is not possible: write 0.2 s to 60 s", m.Acquire)
	}
	if m.Method == "step" {
		return nil
	}
	if float64(m.Frequency)*float64(m.Acquire) < 16 {
		return fmt.Errorf("acquire %v holds fewer than 16 periods of %v: record at least %v", m.Acquire, m.Frequency, quantity.Time(16/float64(m.Frequency)))
	}
	clear := 4 / float64(m.Acquire)
	if off := math.Abs(math.Remainder(float64(m.Frequency), float64(m.Mains))); off < clear && float64(m.Frequency) > float64(m.Mains)/2 {
		return fmt.Errorf("a frequency of %v lies too near a harmonic of the mains: keep it %v away", m.Frequency, quantity.Frequency(clear))
	}
	return nil
}

// Prepare records the IF with the sine on the supply, or while it is stepped.
func (m *SupplyRejection) Prepare(b Bench) (Schedule, error) {
	frames := int(math.Round(float64(m.Acquire) * float64(b.SampleRate)))
	a := Acquisition{What: "supply rejection", Roles: []string{IF}, Frames: frames, Settle: 1}
	if m.Method == "step" {
		step := m.level()
		a.Event = &SupplyEvent{At: frames / 2, By: step}
		return Schedule{Conditions: Conditions{Stepped: &step}, Acquisitions: []Acquisition{a}}, nil
	}
	if !b.Ripple {
		return Schedule{}, fmt.Errorf("this station cannot put a sine on the supply: name the device that does under use: {ripple: …} in the station file, or write method: step")
	}
	if top := 0.4 * float64(b.SampleRate); float64(m.Frequency) > top {
		return Schedule{}, fmt.Errorf("a frequency of %v is too near half the sample rate %v", m.Frequency, b.SampleRate)
	}
	a.Ripple = &RippleTone{m.Frequency, m.level()}
	return Schedule{Conditions: Conditions{Ripple: a.Ripple}, Acquisitions: []Acquisition{a}}, nil
}

// Evaluate relates what comes out to what was put on the supply.
func (m *SupplyRejection) Evaluate(c *Capture) (Result, error) {
	s, err := c.channel(0, IF)
	if err != nil {
		return Result{}, err
	}
	volts, err := c.volts(IF)
	if err != nil {
		return Result{}, err
	}
	if v := check(s, IF); v != nil {
		return voidAll(c.Step, m.Readings(), v), nil
	}
	switch {
	case c.Ripple != nil:
		return m.fromTone(c, s, volts)
	case c.Stepped != nil && *c.Stepped > 0:
		return m.fromStep(c, s, volts)
	}
	return Result{}, fmt.Errorf("step %s: what was done to the supply is not given: add ripple: {frequency: …, peak: …}, or stepped: …", c.Step)
}

// reading is the rejection at a frequency for a level and what came out, with the standard uncertainty of that.
func (m *SupplyRejection) reading(c *Capture, hz, level, out, sigma, dof float64, what string) Reading {
	r := Reading{Name: c.Step, Unit: quantity.DecibelUnit.Symbol}
	if out < 4*sigma {
		r.Missing = fmt.Sprintf("%s does not stand out of the noise at the IF: the rejection is at least %.0f dB", what, neperInDB*math.Log(level/(out+2*sigma)))
		return r
	}
	r.Value = neperInDB * math.Log(level/out)
	components := []Component{{"scatter of what comes out", neperInDB * sigma / out, dof}, {"level on the supply", neperInDB * m.levelTolerance().Standard(level), 0}}
	r.Budget = Combine(append(components, c.levelComponents(IF, neperInDB, hz)...)...)
	return r
}

func (m *SupplyRejection) fromTone(c *Capture, s Signal, volts float64) (Result, error) {
	hz := float64(c.Ripple.Frequency)
	d := signal.Decimate(s.Samples, s.Rate, math.Min(math.Max(2.5*hz, 250), 0.4*s.Rate))
	if hz > 0.45*d.Rate {
		return Result{}, fmt.Errorf("step %s: a sine at %v is beyond what a sample rate of %.0f Hz holds", c.Step, c.Ripple.Frequency, s.Rate)
	}
	seconds := float64(len(d.Samples)) / d.Rate
	var fixed []float64
	for h := 1.0; h*float64(m.Mains) < 0.42*d.Rate && h <= 5; h++ {
		if f := h * float64(m.Mains); math.Abs(f-hz) > 2/seconds {
			fixed = append(fixed, f)
		}
	}
	fit, err := signal.FitDriven(d.Samples, d.Rate, []float64{signal.StrongestNear(d.Samples, d.Rate, hz, 1/(seconds*hz))}, fixed)
	if err != nil {
		return Result{}, fmt.Errorf("step %s: %w: record at least %.2g s", c.Step, err, 16/hz)
	}
	spectrum := signal.Periodogram(fit.Residual, d.Rate)
	noise := signal.NoiseAround(spectrum, signal.QuietLines(spectrum, fit.FrequencyHz, 0), hz, 16)
	if v := steady(fit.Residual, d.Rate, 16/seconds, math.Min(4*hz, 0.4*d.Rate), seconds/8); v != nil {
		return voidAll(c.Step, m.Readings(), v), nil
	}
	gain, _ := c.gainAt(IF, fit.FrequencyHz[0])
	r := m.reading(c, hz, float64(c.Ripple.Peak), cmplx.Abs(fit.Amplitude[0])*volts/gain, math.Sqrt(noise.Value/seconds)*volts/gain, noise.Dof, "the sine on the supply")
	return Result{Readings: []Reading{r}}, nil
}

// stepShare is the part of the record at its start that is taken for the IF before the step.
const stepShare = 0.4

// fromStep looks for the largest excursion after the step, of the record smoothed by parabolas over five
// samples, whose value in the middle has 17/35 of the noise's power (A. Savitzky, M.J.E. Golay, Anal. Chem. 36
// (1964) 1627).
func (m *SupplyRejection) fromStep(c *Capture, s Signal, volts float64) (Result, error) {
	before := int(stepShare * float64(len(s.Samples)))
	if before < 50 {
		return Result{}, fmt.Errorf("step %s: the record holds %d samples: record at least 0.2 s", c.Step, len(s.Samples))
	}
	if v := steady(s.Samples[:before], s.Rate, 20, 0.4*s.Rate, float64(before)/s.Rate/8); v != nil {
		return voidAll(c.Step, m.Readings(), v), nil
	}
	rest := signal.Mean(s.Samples[:before])
	noise := rest.Sigma * math.Sqrt(float64(before)) // of one sample
	peak, at := 0.0, 0
	for k := before; k+2 < len(s.Samples); k++ {
		v, _ := localParabola(s.Samples[k-2 : k+3])
		if off := math.Abs(v - rest.Value); off > peak {
			peak, at = off, k
		}
	}
	if peak*volts > 0 && at >= len(s.Samples)-len(s.Samples)/10 {
		return voidAll(c.Step, m.Readings(), &Void{"disturbance", "the IF is still on its way at the end of the record: nothing came of the step", "check that the supply changes, then take it again"}), nil
	}
	r := m.reading(c, settleHz, float64(*c.Stepped), peak*volts, noise*volts, 0, "the step of the supply")
	r.Notes = append(r.Notes, "from a step: contains how fast the supply changes")
	return Result{Readings: []Reading{r}}, nil
}
