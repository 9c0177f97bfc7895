package measure

import (
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/limits/quantity/tolerance"
)

// Channel roles a capture may hold.
const (
	IF = "if" // the module's IF output, after the preamplifier
	// Quadrature is the second IF output of a module that has two, after its preamplifier.
	Quadrature = "quadrature"
	Sense      = "sense" // the chopped voltage of the current shunt
)

// Roles are all channel roles, in the order in which recordings keep them.
func Roles() []string { return []string{IF, Quadrature, Sense} }

// Conditions is all that a measurement needs to know of how its samples were
// taken; in a capture folder it makes each entry self-contained. The keys are those
// of capture.yaml. Every uncertainty is the expanded one at k = 2.
type Conditions struct {
	Step         string                         `key:"step" need:"yes" doc:"the step's name in the plan; readings are named after it"`
	Measure      string                         `key:"measure" need:"yes" doc:"the measurement"`
	Carrier      quantity.Frequency             `key:"carrier" range:">0" doc:"the module's carrier, where it differs from the folder's"`
	Inputs       map[string]int                 `key:"inputs" range:">0" doc:"which channel (from 1) is what"`
	FullScale    map[string]quantity.Voltage    `key:"full_scale" range:">0" doc:"volts peak at digital full scale, per input"`
	Gain         map[string]quantity.Ratio      `key:"gain" range:">0" doc:"voltage gain between module and input"`
	Response     map[string]curve.Gain          `key:"response" doc:"gain over frequency between module and samples, over what full_scale and gain state, per input; absent: even"`
	Uncertainty  map[string]tolerance.Tolerance `key:"uncertainty" doc:"expanded uncertainty (k = 2) of full_scale and gain (of further channels: full_scale_quadrature …), gain, shunt, displacement, standoff, phase, position (where the stage stops), stage (of a length it moves)"`
	Shunt        *Shunt                         `key:"shunt" doc:"the current shunt"`
	Supply       SupplyState                    `key:"supply" doc:"off, or the supply voltage"`
	StationFloor string                         `key:"station_floor" doc:"the step that holds the station's own floor"`
	Target       *Motion                        `key:"target" doc:"the target's true motion"`
	Tones        []Tone                         `key:"tones" doc:"the target's motion where it is more than one tone"`
	Sweep        *Sweep                         `key:"sweep" doc:"the target's motion where it is a sweep; tones then gives displacement against frequency"`
	Ripple       *RippleTone                    `key:"ripple" doc:"a sine on the supply"`
	Stepped      *quantity.Voltage              `key:"stepped" doc:"by how much the supply was changed while recording"`
	Reported     *quantity.Current              `key:"reported" doc:"current the supply reported itself"`
	File         string                         `key:"file" doc:"the WAV file, where there is one"`
	Parts        []Part                         `key:"parts" doc:"the WAV files, where there are several"`
}

// Shunt is the resistor the supply current flows through.
type Shunt struct {
	Resistance quantity.Resistance `key:"resistance" need:"yes" range:">0" doc:"the shunt's resistance"`
	Gain       quantity.Ratio      `key:"gain" need:"yes" range:">0" doc:"gain of the sense amplifier"`
	Chop       quantity.Frequency  `key:"chop" need:"yes" range:">0" doc:"chopping frequency"`
	Offset     quantity.Current    `key:"offset" doc:"current read with no load"`
}

// Motion is the target's motion: one tone, or a place only.
type Motion struct {
	Tone         quantity.Frequency `key:"tone" range:">0" doc:"frequency of the motion"`
	Displacement quantity.Length    `key:"displacement" range:">0" doc:"peak displacement"`
	Standoff     quantity.Length    `key:"standoff" range:">0" doc:"nominal distance from module to target"`
	Position     quantity.Length    `key:"position" doc:"offset from the standoff, positive away from the module"`
	Phase        *quantity.Angle    `key:"phase" doc:"φ0, for the method single"`
}

// RippleTone is a sine on the supply.
type RippleTone struct {
	Frequency quantity.Frequency `key:"frequency" need:"yes" range:">0" doc:"frequency"`
	Peak      quantity.Voltage   `key:"peak" need:"yes" range:">0" doc:"peak of the sine"`
}

// Tone is one tone of the target's motion.
type Tone struct {
	Frequency    quantity.Frequency   `key:"frequency" need:"yes" range:">0" doc:"frequency"`
	Displacement quantity.Length      `key:"displacement" need:"yes" range:">0" doc:"peak displacement"`
	Phase        quantity.Angle       `key:"phase" doc:"phase of the drive's cosine at the start of its period"`
	Uncertainty  *tolerance.Tolerance `key:"uncertainty" doc:"expanded uncertainty (k = 2) of this displacement relative to the others, where it has its own"`
}

// Sweep is a logarithmic sine sweep of the target's motion.
type Sweep struct {
	From     quantity.Frequency `key:"from" need:"yes" range:">0" doc:"first frequency"`
	To       quantity.Frequency `key:"to" need:"yes" range:">0" doc:"last frequency"`
	Duration quantity.Time      `key:"duration" need:"yes" range:">0" doc:"time from first to last frequency"`
	Lead     quantity.Time      `key:"lead" range:">=0" doc:"recorded time before the sweep starts, without the latency"`
}

// Part is one acquisition of a step.
type Part struct {
	File     string            `key:"file" need:"yes" doc:"the WAV file"`
	Position quantity.Length   `key:"position" doc:"offset from the standoff, positive away from the module"`
	Tone     *Tone             `key:"tone" doc:"the motion during this part, where each part has its own"`
	Supply   *quantity.Voltage `key:"supply" range:">=0" doc:"supply voltage during this part, where each part has its own"`
}

// Signal is one recorded channel: fractions of digital full scale.
type Signal struct {
	Samples []float64
	Rate    float64 // frames per second
}

// Capture is the samples recorded for one step, with what was done meanwhile and
// the parameters of the measurement that reads them.
type Capture struct {
	Conditions
	// Parameters is the measurement with its parameters.
	Parameters Measurement
	// Signals holds for each part (one where Parts is empty) the channels by role.
	Signals []map[string]Signal
	// Floor is the capture named by station_floor, nil where there is none.
	Floor *Capture
}
