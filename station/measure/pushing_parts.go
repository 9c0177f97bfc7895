package measure

import (
	"math"

	"lotgate/station/signal"
)

// relative is a positive quantity at one voltage with its relative scatter.
type relative struct {
	value, sigma, dof float64
}

// part makes a capture of some recordings of one at one voltage.
func (m *Pushing) part(c *Capture, high bool, what ...int) *Capture {
	out := &Capture{Conditions: c.Conditions, Floor: c.Floor}
	out.Parts = nil
	for _, w := range what {
		for i, o := range pushOrder {
			if o.what == w && o.high == high {
				out.Signals = append(out.Signals, c.Signals[i])
				out.Parts = append(out.Parts, c.Parts[i])
			}
		}
	}
	return out
}

func (m *Pushing) echoAt(c *Capture, high bool) (relative, string, *Void, error) {
	part := m.part(c, high, pushEcho, pushFurther)
	r, err := m.echo().Evaluate(part)
	if err != nil {
		return relative{}, "", nil, err
	}
	e := r.Readings[0]
	if e.Void != nil {
		return relative{}, "", e.Void, nil
	}
	scatter := e.Budget.Components[0] // all others are the same at both voltages
	if e.Value < 6*scatter.U {
		return relative{}, "the echo does not stand out of the noise", nil, nil
	}
	return relative{e.Value, scatter.U / e.Value, scatter.Dof}, "", nil, nil
}

func (m *Pushing) currentAt(c *Capture, high bool) (relative, string, *Void, error) {
	f, void, err := fitChopped(m.part(c, high, pushCurrent), 0)
	if err != nil || void != nil {
		return relative{}, "", void, err
	}
	value, scatter := c.current(f)
	return relative{value, scatter / value, f.dof}, "", nil, nil
}

func (m *Pushing) noiseAt(c *Capture, high bool) (relative, string, *Void, error) {
	n, void, err := m.noise().spectrum(m.part(c, high, pushNoise))
	if err != nil || void != nil {
		return relative{}, "", void, err
	}
	low, top := float64(m.Band[0]), float64(m.Band[1])
	power := signal.BandPower(n.Spectrum, low, top, n.gaps)
	var floor signal.Estimate
	if c.Floor != nil {
		f, void, err := m.noise().spectrum(c.Floor)
		if err != nil || void != nil && void.Code != "silent" {
			return relative{}, "", void, err
		}
		if void == nil {
			floor = signal.BandPower(f.Spectrum, low, top, f.gaps)
		}
	}
	net, sigma := power.Value-floor.Value, math.Hypot(power.Sigma, floor.Sigma)
	if net < 6*sigma {
		return relative{}, "the noise does not stand out of the station's own floor", nil, nil
	}
	return relative{math.Sqrt(net), sigma / net / 2, power.Dof}, "", nil, nil
}
