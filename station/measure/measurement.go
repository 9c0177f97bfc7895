package measure

import (
	"fmt"
	"sort"

	"lotgate/limits/quantity"
)

// Measurement is one kind of measurement with the parameters a plan gives it. It is
// a pointer to a struct whose tagged fields (see package document) are those
// parameters.
type Measurement interface {
	// Check says what is impossible about the parameters for a module of this
	// carrier; nil if nothing is.
	Check(module Module) error
	// Prepare says what must be done to the bench and recorded meanwhile. The
	// capture that comes back has all conditions that the measurement itself
	// decides (target, tones, parts); the station adds its calibrations.
	Prepare(b Bench) (Schedule, error)
	// Evaluate works readings out of a capture. Readings that the capture cannot
	// give are void or missing, with their reason; an error means that the capture
	// is not complete or contradicts itself.
	Evaluate(c *Capture) (Result, error)
	// Readings lists the names' suffixes ("" for the step's own name) with units.
	Readings() []Offer
}

// Offer is a reading that a measurement can give.
type Offer struct {
	Suffix string // "", ".band", ".density(10 Hz)"
	Unit   quantity.Unit
	Curve  bool
}

// Module is what the plan says of the module's kind.
type Module struct {
	Kind    string             `key:"kind" need:"yes" among:"single IF|two IF" doc:"what comes out of it: single IF, or two IF for a module with a second channel a quarter of a wave behind"`
	Carrier quantity.Frequency `key:"carrier" need:"yes" range:">0" doc:"nominal carrier frequency"`
}

// Wavelength is λ = c/f0.
func (m Module) Wavelength() quantity.Length { return wavelength(m.Carrier) }

// SpeedOfLight in vacuum, m/s, exact (SI 2019).
const SpeedOfLight = 299792458.0

func wavelength(carrier quantity.Frequency) quantity.Length {
	return quantity.Length(SpeedOfLight / float64(carrier))
}

// Bench is what a measurement must know of a station to plan its acquisitions.
type Bench struct {
	Module     Module
	SampleRate quantity.Frequency
	Standoff   quantity.Length
	Chop       quantity.Frequency // 0 where there is no chopper
	Mains      quantity.Frequency // 50 or 60 Hz
	// PerVolt is the target's displacement per volt of drive at a frequency.
	PerVolt func(f quantity.Frequency) quantity.DisplacementPerVolt
	// Largest is the largest peak displacement the target may make.
	Largest quantity.Length
	// LargestDrive is the largest peak drive voltage of the output.
	LargestDrive quantity.Voltage
	// Travel is how far the stage can go either way from the nominal standoff.
	Travel quantity.Length
	// Ripple says that a sine can be put on the supply.
	Ripple bool
}

// Schedule is the acquisitions of one step and the conditions they make.
type Schedule struct {
	Conditions   Conditions
	Acquisitions []Acquisition // one for each part, in their order
	Reported     bool          // ask the supply for its current instead
	// FloorAge is set where the station's own floor (the first acquisition with the
	// module unpowered) is wanted: one that is no older than this may be used again.
	FloorAge *quantity.Time
}

// Acquisition is one recording: what is done and what is recorded.
type Acquisition struct {
	What     string          // for the operator: "noise floor", "position 2 of 3"
	Roles    []string        // channels recorded at once: IF, Quadrature, Sense
	Frames   int             // frames to record
	Position quantity.Length // target's place
	Tones    []Tone          // target's motion; nil: still
	Period   int             // frames after which Tones repeat
	Sweep    *Sweep
	Chop     bool          // chopper running
	Settle   quantity.Time // time between the motion's start and recording
	// Supply is the supply voltage during this acquisition, 0 V for off; nil: the step's.
	// The step's is set again after the last acquisition.
	Supply *quantity.Voltage
	// Event is something that happens while this acquisition is recorded.
	Event *SupplyEvent
	// Ripple is a sine on the supply during this acquisition.
	Ripple *RippleTone
}

// SupplyEvent is a change of the supply in the middle of a recording. It happens some time
// after At: how long the device takes to be told is not known.
type SupplyEvent struct {
	At      int               // frames recorded when the supply is told
	Voltage *quantity.Voltage // the new voltage; nil: the step's
	By      quantity.Voltage  // what is added to it
}

// Duration is how long the acquisition records and settles.
func (a Acquisition) Duration(rate quantity.Frequency) quantity.Time {
	return quantity.Time(float64(a.Frames)/float64(rate)) + a.Settle
}

// Kind describes a kind of measurement.
type Kind struct {
	Name    string
	Summary string // one sentence
	New     func() Measurement
}

var kinds = map[string]Kind{}

// register makes a kind known; each measurement's file calls it once.
func register(k Kind) bool {
	if _, twice := kinds[k.Name]; twice {
		panic("measure: " + k.Name + " is registered twice")
	}
	kinds[k.Name] = k
	return true
}

// Kinds lists all measurements by name.
func Kinds() []Kind {
	var out []Kind
	for _, k := range kinds {
		out = append(out, k)
	}
	sort.Slice(out, func(i, k int) bool { return out[i].Name < out[k].Name })
	return out
}

// New makes a measurement of the kind named, with its default parameters.
func New(kind string) (Measurement, error) {
	k, ok := kinds[kind]
	if !ok {
		names := ""
		for _, k := range Kinds() {
			names += " " + k.Name
		}
		return nil, fmt.Errorf("measurement %q is not known: one of%s", kind, names)
	}
	return k.New(), nil
}
