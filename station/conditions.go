package station

import (
	"slices"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/limits/quantity/tolerance"
	"lotgate/station/measure"
)

// calibrate writes the station's calibrations into a capture's conditions.
func (r *Runner) calibrate(c *measure.Capture, schedule measure.Schedule) {
	c.Inputs, c.FullScale = map[string]int{}, map[string]quantity.Voltage{}
	c.Gain, c.Uncertainty = map[string]quantity.Ratio{}, map[string]tolerance.Tolerance{}
	for _, q := range schedule.Acquisitions {
		for i, role := range q.Roles {
			in := r.Setup.Inputs[role]
			c.Inputs[role], c.FullScale[role] = in.Channel, in.FullScale
			own := ""
			if i > 0 { // the keys without a role are those of the first
				own = "_" + role
			}
			c.Uncertainty["full_scale"+own] = in.FullScaleU
			if len(in.Response.Points) > 0 {
				if c.Response == nil {
					c.Response = map[string]curve.Gain{}
				}
				c.Response[role] = in.Response
			}
			if role == measure.Sense {
				continue
			}
			c.Gain[role] = in.Gain
			if in.GainU != nil {
				c.Uncertainty["gain"+own] = *in.GainU
			}
		}
		if q.Chop && r.Setup.Shunt != nil {
			r.calibrateShunt(c)
		}
	}
	if c.Target != nil {
		r.calibrateTarget(c)
	}
}

func (r *Runner) calibrateShunt(c *measure.Capture) {
	sh := r.Setup.Shunt
	c.Shunt = &measure.Shunt{Resistance: sh.Resistance, Gain: sh.Gain, Chop: sh.Chop, Offset: sh.Offset}
	c.Uncertainty["shunt"] = sh.ResistanceU
	if sh.OffsetU > 0 {
		c.Uncertainty["offset"] = tolerance.Tolerance{Absolute: float64(sh.OffsetU), Unit: quantity.Ampere.Symbol}
	}
	if sh.ThroughInput {
		delete(c.Uncertainty, "full_scale") // what the shunt was read with reads the unit: it cancels
	}
}

func (r *Runner) calibrateTarget(c *measure.Capture) {
	t := r.Setup.Target
	c.Uncertainty["displacement"], c.Uncertainty["standoff"] = t.DisplacementU(c.Target.Tone), t.StandoffU
	for key, u := range map[string]*tolerance.Tolerance{"shape": t.Shape, "stage": t.Stage, "position": t.Stops} {
		if u != nil {
			c.Uncertainty[key] = *u
		}
	}
	own := func(tone *measure.Tone) {
		if _, u := t.Curve.At(tone.Frequency); u > 0 {
			relative := tolerance.Percent(u)
			tone.Uncertainty = &relative
		}
	}
	c.Tones = slices.Clone(c.Tones)
	for i := range c.Tones {
		own(&c.Tones[i])
	}
	c.Parts = slices.Clone(c.Parts)
	for i, p := range c.Parts {
		if p.Tone != nil {
			tone := *p.Tone
			own(&tone)
			c.Parts[i].Tone = &tone
		}
	}
}
