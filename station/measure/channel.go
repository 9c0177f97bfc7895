package measure

import (
	"fmt"

	"lotgate/limits/quantity/tolerance"
)

// TwoIF is the kind of a module with a second IF output.
const TwoIF = "two IF"

// role is the channel that a parameter names.
func role(channel string) string {
	if channel == "" {
		return IF
	}
	return channel
}

func (m *NoiseFloor) role() string  { return role(m.Channel) }
func (m *Sensitivity) role() string { return role(m.Channel) }
func (m *Response) role() string    { return role(m.Channel) }

// checkChannel refuses the second output of a module that has one only.
func checkChannel(channel string, module Module) error {
	if channel == Quadrature && module.Kind != TwoIF {
		return fmt.Errorf("channel quadrature is not possible for a module of the kind %q: write module: {kind: %s, …}, or channel: if", module.Kind, TwoIF)
	}
	return nil
}

// uncertainty is that of a key for a role: under the key with the role's name behind it where
// several channels were recorded at once, else under the key itself.
func (c *Capture) uncertainty(key, role string) (tolerance.Tolerance, bool) {
	if t, ok := c.Uncertainty[key+"_"+role]; ok {
		return t, true
	}
	t, ok := c.Uncertainty[key]
	return t, ok
}
