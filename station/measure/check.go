package measure

import (
	"fmt"
	"math"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// maxClock is the clock deviation between playing and recording that is still
// corrected; crystals differ by less than 0.02 % (common practice).
const maxClock = 5e-4

// check looks at a raw channel before anything is made of it: nil if it can be used.
func check(s Signal, name string) *Void {
	h := signal.Look(s.Samples, s.Rate)
	switch {
	case len(s.Samples) == 0:
		return &Void{"silent", fmt.Sprintf("the %s channel holds no samples", name), "check the recording device and record again"}
	case h.AtFullScale >= 2:
		return &Void{"overload", fmt.Sprintf("the %s input was overloaded: %d of %d samples at full scale", name, h.AtFullScale, len(s.Samples)),
			"lower the preamplifier's gain or the input's level, then take it again"}
	case h.StepRMS < 3e-8:
		return &Void{"silent", fmt.Sprintf("the %s channel is silent", name), "check cable, channel number and the input's switch"}
	case h.GapStart >= 0:
		return &Void{"dropout", fmt.Sprintf("samples were lost: the %s channel is silent for %.0f ms at %.2f s", name, h.GapSeconds*1e3, h.GapStart),
			"close other programs, lengthen the sound buffer, take it again"}
	}
	return nil
}

// steady looks for a piece of what is left after the fitted tones that stands out.
func steady(residual []float64, rate, lowHz, highHz, pieceSeconds float64) *Void {
	worst, ok := signal.FindUnsteady(signal.Segments(residual, rate, pieceSeconds), lowHz, highHz)
	if ok {
		return nil
	}
	return &Void{"disturbance", fmt.Sprintf("something else moved or samples were lost at about %.1f s: %.0f times the usual power between %.0f and %.0f Hz",
		worst.Seconds, worst.Ratio, worst.LowHz, worst.HighHz), "keep people and fans away from the module's view, then take it again"}
}

// sideLines is how far from a tone, in lines of the record, lost samples show.
const sideLines = 6

// unbroken looks whether a tone's phase stepped during the record (samples lost or
// inserted): its power then spreads to the lines beside it. noise is the power density
// around the tone, spread that of the spectrum.
func unbroken(residual signal.Spectrum, toneHz, noise float64) *Void {
	at := toneHz / residual.Step
	sum, n := 0.0, 0
	for k := int(at) - sideLines; k <= int(at)+1+sideLines; k++ {
		if k < 2 || k >= len(residual.Power) || math.Abs(float64(k)-at) < 0.75 {
			continue
		}
		sum += residual.Power[k]
		n++
	}
	if n == 0 || noise <= 0 || sum/float64(n) < 8*noise {
		return nil
	}
	return &Void{"dropout", fmt.Sprintf("the tone at %.5g Hz is not steady: samples were lost, or the target does not move evenly", toneHz),
		"check the sound buffer and that the shaker moves freely, then take it again"}
}

func clockVoid(clock float64) *Void {
	if math.Abs(clock) <= maxClock {
		return nil
	}
	return &Void{"clock", fmt.Sprintf("playing and recording run at clocks that differ by %.0f ppm", clock*1e6),
		"use one sound interface for both, at its own sample rate"}
}

func near(f float64, list []float64, distance float64) bool {
	for _, t := range list {
		if math.Abs(f-t) < distance {
			return true
		}
	}
	return false
}

// voidAll makes every reading of a step void for one reason.
func voidAll(step string, offers []Offer, v *Void) Result {
	var r Result
	for _, o := range offers {
		r.Readings = append(r.Readings, Reading{Name: step + o.Suffix, Unit: o.Unit.Symbol, Curve: o.Curve, Void: v})
	}
	return r
}

// channel gives a part's signal of a role.
func (c *Capture) channel(part int, role string) (Signal, error) {
	if part >= len(c.Signals) {
		return Signal{}, fmt.Errorf("step %s: recording %d is missing", c.Step, part+1)
	}
	s, ok := c.Signals[part][role]
	if !ok {
		return Signal{}, fmt.Errorf("step %s: no channel %q was recorded: name it under inputs", c.Step, role)
	}
	return s, nil
}

// volts is the factor from a fraction of full scale to volts at the module.
func (c *Capture) volts(role string) (float64, error) {
	fs, ok := c.FullScale[role]
	if !ok {
		return 0, fmt.Errorf("step %s: the full scale of input %q is not given: add full_scale: {%s: …}", c.Step, role, role)
	}
	gain := 1.0
	if g, ok := c.Gain[role]; ok {
		gain = float64(g)
	}
	return float64(fs) / gain, nil
}

// gainAt is the gain over frequency between module and samples, over what full scale and
// gain state, with its relative standard uncertainty.
func (c *Capture) gainAt(role string, hz float64) (gain, relative float64) {
	v, u := c.Response[role].At(quantity.Frequency(hz))
	return float64(v), u / 2
}

// levelComponents are the calibrations every voltage reading at a frequency carries, for a
// reading of this value.
func (c *Capture) levelComponents(role string, value, hz float64) []Component {
	value = math.Abs(value)
	var out []Component
	if t, ok := c.uncertainty("full_scale", role); ok || role != Sense {
		out = append(out, Component{"full scale of the " + role + " input (calibration)", value * t.Standard(float64(c.FullScale[role])), 0})
	}
	if t, ok := c.uncertainty("gain", role); ok {
		source := "gain between module and input (calibration)"
		if role == Quadrature {
			source = "gain between module and quadrature input (calibration)"
		}
		out = append(out, Component{source, value * t.Standard(float64(c.Gain[role])), 0})
	}
	if _, u := c.gainAt(role, hz); u > 0 {
		out = append(out, Component{"gain over frequency before the " + role + " input (calibration)", value * u, 0})
	}
	return out
}
