package measure

import (
	"fmt"
	"math"

	"lotgate/station/signal"
)

// correlation is that of the two noises.
func (m *QuadratureChannels) correlation(c *Capture) (Reading, *Void, error) {
	r := Reading{Name: c.Step + ".correlation", Unit: "1"}
	var x [2]Signal
	var rms [2]float64
	for n, role := range []string{IF, Quadrature} {
		s, err := c.channel(0, role)
		if err != nil {
			return r, nil, err
		}
		if v := check(s, role); v != nil {
			return r, v, nil
		}
		x[n] = s
	}
	if len(x[0].Samples) != len(x[1].Samples) {
		return r, nil, fmt.Errorf("step %s: the two channels differ in length", c.Step)
	}
	power := func(a, b float64) (signal.Estimate, *Void, error) {
		mixed := make([]float64, len(x[0].Samples))
		for i := range mixed {
			mixed[i] = a*x[0].Samples[i] + b*x[1].Samples[i]
		}
		part := &Capture{Conditions: c.Conditions, Signals: []map[string]Signal{{IF: {mixed, x[0].Rate}}}}
		n, void, err := m.noise().spectrum(part)
		if err != nil || void != nil {
			return signal.Estimate{}, void, err
		}
		return signal.BandPower(n.Spectrum, float64(m.Band[0]), float64(m.Band[1]), n.gaps), nil, nil
	}
	freedom := math.Inf(1)
	for n, unit := range [2][2]float64{{1, 0}, {0, 1}} {
		p, void, err := power(unit[0], unit[1])
		if err != nil || void != nil {
			return r, void, err
		}
		rms[n], freedom = math.Sqrt(p.Value), math.Min(freedom, p.Dof)
	}
	if !(rms[0] > 0 && rms[1] > 0) {
		return r, &Void{"silent", "a channel has no noise in the band", "check cable, channel number and the input's switch"}, nil
	}
	// Half of each, brought to the same size, so that no sum reaches full scale.
	a, b := 0.5*math.Min(1, rms[1]/rms[0]), 0.5*math.Min(1, rms[0]/rms[1])
	sum, void, err := power(a, b)
	if err != nil || void != nil {
		return r, void, err
	}
	difference, void, err := power(a, -b)
	if err != nil || void != nil {
		return r, void, err
	}
	rho := (sum.Value - difference.Value) / (sum.Value + difference.Value)
	k := CoverageFactor(0)
	z, sigma := math.Atanh(rho), 1/math.Sqrt(freedom-3)
	low, high := math.Tanh(z-k*sigma), math.Tanh(z+k*sigma)
	r.Value = (low + high) / 2
	r.Budget = Combine(Component{fmt.Sprintf("length of the record (%.0f independent samples; Fisher's z)", freedom), (high - low) / 2 / k, 0})
	return r, nil, nil
}
