// Package measure turns captures into readings, each with its uncertainty budget.
//
// A measurement is one file: its parameters as the plan gives them, what must be
// done to the bench and recorded meanwhile, how readings come out of the captures,
// and its documentation. It does no input or output.
package measure

import "lotgate/limits/quantity"

// Reading is one number with its unit and its uncertainty, worked out of captures.
type Reading struct {
	// Name is the step's id with the suffix of the reading: "noise_floor.band".
	Name string `json:"name"`
	// Unit is the SI symbol without prefix: "A", "V", "V/√Hz", "dB", "Hz", "rad".
	Unit string `json:"unit"`
	// Value is in Unit. It means nothing where Missing is set or Points are given.
	Value float64 `json:"value"`
	// Budget is how uncertain Value is, and why.
	Budget Budget `json:"budget"`
	// Curve says that the reading is a curve: its Points are the numbers, Value is none.
	Curve  bool    `json:"curve,omitempty"`
	Points []Point `json:"points,omitempty"`
	// Missing is the sentence that stands in place of a number where too little is
	// known to give one.
	Missing string `json:"missing,omitempty"`
	// Void is set where the capture could not be used; Missing is then empty.
	Void *Void `json:"void,omitempty"`
	// Notes are sentences a reader of the number must know.
	Notes []string `json:"notes,omitempty"`
}

// Point is one point of a curve.
type Point struct {
	FrequencyHz float64 `json:"frequency_hz"`
	Value       float64 `json:"value"`                // in the reading's unit
	Expanded    float64 `json:"expanded_uncertainty"` // at 95 %
}

// Void says why a capture could not be used, and what to do about it. It says
// nothing about the unit.
type Void struct {
	Code   string `json:"code"`   // stable: "overload", "dropout", "disturbance", "silent", "chopper", "clock"
	Reason string `json:"reason"` // "the IF input was overloaded: 214 of 8000 samples at full scale"
	Action string `json:"action"` // "lower the preamplifier's gain or raise the input's range"
}

func (v *Void) Error() string { return v.Reason + ": " + v.Action }

// Figure is a curve kept for certificates and pages, not judged.
type Figure struct {
	Name   string       `json:"name"`  // "noise_floor.spectrum"
	Title  string       `json:"title"` // "IF noise, referred to the module's output"
	XUnit  string       `json:"x_unit"`
	YUnit  string       `json:"y_unit"`
	Series [][2]float64 `json:"series"` // x, y in SI units
}

// Result is all that came out of one capture.
type Result struct {
	Readings []Reading `json:"readings"`
	Figures  []Figure  `json:"figures,omitempty"`
}

// Quantity prints the reading's value with its uncertainty.
func (r Reading) Quantity() string {
	u, ok := quantity.UnitBySymbol(r.Unit)
	if !ok {
		u = quantity.One
	}
	if r.Missing != "" {
		return r.Missing
	}
	return quantity.PrintWith(r.Value, r.Budget.Expanded, u)
}
