package measure

import (
	"fmt"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/document"
)

// SupplyState is "off" or the supply's voltage.
type SupplyState struct {
	Given   bool
	Off     bool
	Voltage quantity.Voltage
}

// ReadNode reads "off" or "5 V".
func (s *SupplyState) ReadNode(r *document.Reader, n *yaml.Node) {
	s.Given = true
	if n.Value == "off" {
		s.Off = true
		return
	}
	v, err := quantity.ParseAs[quantity.Voltage](n.Value)
	if err != nil || v <= 0 {
		r.Fail(n, fmt.Sprintf("supply %q is not readable", n.Value), "write off, or a voltage, such as 5 V")
		return
	}
	s.Voltage = v
}

// Schema describes a supply state.
func (s SupplyState) Schema() map[string]any {
	return map[string]any{"type": "string", "description": "off, or a voltage", "examples": []string{"off", "5.00 V"}}
}

// WriteNode writes a supply state as ReadNode reads it.
func (s SupplyState) WriteNode() (*yaml.Node, error) {
	if s.Off {
		return document.Text("off"), nil
	}
	return document.NodeOf(s.Voltage)
}
