// Package tolerance is an expanded uncertainty as calibration certificates and the
// program's files state it.
package tolerance

import (
	"fmt"
	"strconv"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/document"
)

// Tolerance is an expanded uncertainty (k = 2) as files give it: relative ("0.4 %")
// or in the quantity's own unit ("0.5 mm").
type Tolerance struct {
	Relative float64 // fraction of the value; 0 where absolute
	Absolute float64 // in the SI unit of Unit; 0 where relative
	Unit     string  // unit of Absolute
}

// Standard is the standard uncertainty relative to a value (k = 2 taken out).
func (t Tolerance) Standard(value float64) float64 {
	if t.Absolute != 0 && value != 0 {
		return t.Absolute / 2 / value
	}
	return t.Relative / 2
}

// Percent makes a relative tolerance out of a fraction.
func Percent(fraction float64) Tolerance { return Tolerance{Relative: fraction} }

func (t Tolerance) String() string {
	if u, ok := quantity.UnitBySymbol(t.Unit); ok && t.Absolute != 0 {
		return quantity.Print(t.Absolute, u)
	}
	return quantity.Ratio(t.Relative).Percent()
}

var toleranceUnits = []quantity.Unit{quantity.Volt, quantity.Ampere, quantity.Hertz, quantity.Metre, quantity.Ohm, quantity.RadianUnit, quantity.MetrePerVolt}

// ReadNode reads "0.4 %" or "0.5 mm".
func (t *Tolerance) ReadNode(r *document.Reader, n *yaml.Node) {
	if v, err := quantity.Parse(n.Value, quantity.One); err == nil && n.Kind == yaml.ScalarNode {
		t.Relative = v
	} else {
		for _, u := range toleranceUnits {
			if v, err := quantity.Parse(n.Value, u); err == nil {
				t.Absolute, t.Unit = v, u.Symbol
			}
		}
	}
	if t.Relative <= 0 && t.Absolute <= 0 {
		r.Fail(n, fmt.Sprintf("uncertainty %q is not readable", n.Value), "write the expanded uncertainty (k = 2), such as 0.4 % or 0.5 mm")
	}
}

// Schema describes a tolerance.
func (t Tolerance) Schema() map[string]any {
	return map[string]any{"type": "string", "description": "expanded uncertainty (k = 2), relative or in the quantity's unit", "examples": []string{"0.4 %", "0.5 mm"}}
}

// WriteNode writes a tolerance as ReadNode reads it.
func (t Tolerance) WriteNode() (*yaml.Node, error) {
	if u, ok := quantity.UnitBySymbol(t.Unit); ok && t.Absolute != 0 {
		return document.Text(quantity.PrintExact(t.Absolute, u)), nil
	}
	return document.Text(strconv.FormatFloat(t.Relative*100, 'g', -1, 64) + " %"), nil
}
