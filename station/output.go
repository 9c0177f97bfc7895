package station

import (
	"lotgate/limits"
	"lotgate/station/measure"
	"lotgate/station/record"
)

// UnitOutput is a unit's result as commands print it with --json: SI base units, one object
// on a line.
type UnitOutput struct {
	Lot      string          `json:"lot"`
	Serial   string          `json:"serial"`
	Attempt  string          `json:"attempt,omitempty"`
	Number   int             `json:"number,omitempty"`
	Verdict  limits.Verdict  `json:"verdict"`
	Reason   string          `json:"reason"`
	Folder   string          `json:"folder,omitempty"`
	Readings []ReadingOutput `json:"readings"`
}

// ReadingOutput is one reading of it.
type ReadingOutput struct {
	Name     string         `json:"name"`
	Unit     string         `json:"unit"`
	Value    *float64       `json:"value,omitempty"`
	Expanded *float64       `json:"expanded_uncertainty,omitempty"`
	Coverage float64        `json:"coverage,omitempty"`
	Lower    *float64       `json:"lower,omitempty"`
	Upper    *float64       `json:"upper,omitempty"`
	Points   []PointOutput  `json:"points,omitempty"`
	Verdict  limits.Verdict `json:"verdict,omitempty"`
	Reason   string         `json:"reason,omitempty"`
	Missing  string         `json:"missing,omitempty"`
	Notes    []string       `json:"notes,omitempty"`
}

// PointOutput is one point of a curve.
type PointOutput struct {
	FrequencyHz float64        `json:"frequency_hz"`
	Value       float64        `json:"value"`
	Expanded    float64        `json:"expanded_uncertainty"`
	Lower       *float64       `json:"lower,omitempty"`
	Upper       *float64       `json:"upper,omitempty"`
	Verdict     limits.Verdict `json:"verdict,omitempty"`
}

// Output puts judged readings into the form of --json.
func Output(readings []record.Judged) []ReadingOutput {
	out := make([]ReadingOutput, 0, len(readings))
	for _, r := range readings {
		o := ReadingOutput{Name: r.Name, Unit: r.Unit, Lower: r.Lower, Upper: r.Upper, Verdict: r.Verdict, Reason: r.Reason, Missing: r.Missing, Notes: r.Notes}
		switch {
		case r.Void != nil:
			o.Verdict = limits.Void
			o.Reason = r.Void.Error()
		case r.Missing != "":
		case r.Curve:
			o.Coverage = measure.Coverage
			for _, p := range r.Points {
				o.Points = append(o.Points, PointOutput(p))
			}
		default:
			value, expanded := r.Value, r.Budget.Expanded
			o.Value, o.Expanded, o.Coverage = &value, &expanded, measure.Coverage
		}
		out = append(out, o)
	}
	return out
}
