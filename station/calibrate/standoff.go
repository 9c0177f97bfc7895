package calibrate

import (
	"context"
	"fmt"
	"math"

	"lotgate/fixtures"
	"lotgate/fixtures/attach"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/station/measure"
)

// Standoff finds the distance from module to target at the stage's zero, and φ0 of the module
// that was used, by a scan: the first harmonic of a steady tone over the stage's place p is
//
//	A(p) = A0·(S/(S+p))²·sin(φ0 − 4πp/λ)
//
// the echo's voltage falling with the square of the distance. S, φ0, λ, A0, the IF's cube law and
// what it picks up of the drive come out by least squares; what the law leaves over is stated, and counted as scatter.
type Standoff struct {
	Carrier quantity.Frequency // nominal
	Tone    quantity.Frequency // default 40 Hz
	Drive   quantity.Ratio     // peak of the output, fraction of full scale; default 0.1
	Places  int                // default 31
	// Ruler is the distance as measured otherwise, if it was, with its expanded uncertainty: the
	// exponent of the law is then told too.
	Ruler, RulerU quantity.Length
}

// supplyPushing is the standard uncertainty of a module's carrier that its supply's own leaves, Hz:
// 3 MHz/V times 5 mV (common practice). φ0 turns by 4πS/c times it.
const supplyPushing = 15e3

// leastSine is the |sin φ0| below which a place is called a null.
const leastSine = 0.3

// Run calibrates.
func (d Standoff) Run(ctx context.Context, s *Session) (*calibration.File, error) {
	if d.Tone == 0 {
		d.Tone = 40
	}
	if d.Drive == 0 {
		d.Drive = 0.1
	}
	if d.Places == 0 {
		d.Places = 31
	}
	travel := float64(s.Setup.Target.Travel)
	lambda := measure.SpeedOfLight / float64(d.Carrier)
	if travel < lambda/4 {
		return nil, wrong("write target: {travel: …} in the station file, or measure the standoff with a ruler", "a travel of %v is less than a fringe: λ/2 is %v", quantity.Length(travel), quantity.Length(lambda/2))
	}
	if err := s.readyModule(ctx, fixtures.Wiring{What: fixtures.Production}, "Put a good module in the nest, wire all as for testing, and close the lid."); err != nil {
		return nil, err
	}
	positions := make([]float64, d.Places)
	for i := range positions {
		positions[i] = travel * (2*float64(i)/float64(d.Places-1) - 1)
	}
	s.tell("scanning %d places from %v to %v, there and back", d.Places, quantity.Length(-travel), quantity.Length(travel))
	list, err := s.scan(ctx, s.tone(1, float64(d.Tone), float64(d.Drive)), positions)
	if err != nil {
		return nil, err
	}
	if err := s.halt(ctx); err != nil {
		return nil, err
	}
	values := signed(list)
	if err := moving(list, values); err != nil {
		return nil, err
	}
	return d.file(list, values, lambda, s.Setup.Target)
}

// stageScale is the relative standard uncertainty of a length the stage moves, where the station
// file does not state it (common practice: a lead screw of trade quality).
const stageScale = 5e-4

func (d Standoff) file(list []echoAt, values []float64, lambda float64, target attach.TargetSetup) (*calibration.File, error) {
	expected, scale := float64(target.Standoff), stageScale
	if target.Stage != nil {
		scale = target.Stage.Standard(1)
	}
	if expected == 0 {
		expected = 0.22
	}
	fit, err := fitFringes(list, values, lambda, expected, []int{0, 1, 2, 3, 5, 6})
	if err != nil {
		return nil, err
	}
	f := &calibration.File{Calibration: calibration.Standoff, Repeats: 2, Method: "a scan of the stage with a module and a steady tone", Values: map[string]calibration.Value{}}
	f.Values[calibration.Distance] = calibration.Found(quantity.Length(fit.standoff), quantity.Length(expanded(fit.standoffU, scale*fit.standoff)))
	f.Values[calibration.Phase] = calibration.Found(quantity.Angle(fit.phase), quantity.Angle(expanded(fit.phaseU, 4*math.Pi*fit.standoff*supplyPushing/measure.SpeedOfLight)))
	f.Values[calibration.RangeLaw] = calibration.Found(quantity.Ratio(fit.residual), quantity.Ratio(math.Max(fit.residual, 1e-6)))
	f.Notes = append(f.Notes, fmt.Sprintf("the law of range and sine leaves %.2g %% of the largest echo over", 100*fit.residual))
	if off := fit.lambda/lambda - 1; math.Abs(off) > 3*fit.lambdaU/fit.lambda+2e-3 {
		f.Notes = append(f.Notes, fmt.Sprintf("the fringes are %.2f %% further apart than the nominal carrier gives: the module's carrier, or the stage's scale", 100*off))
	}
	if math.Abs(math.Sin(fit.phase)) < leastSine {
		f.Notes = append(f.Notes, fmt.Sprintf("at the stage's zero this module stands near a null (|sin φ0| = %.2f): use the method positions, or move the zero by λ/8 = %v", math.Abs(math.Sin(fit.phase)), quantity.Length(lambda/8)))
	}
	if d.Ruler > 0 {
		law, err := fitFringes(list, values, lambda, float64(d.Ruler), []int{0, 1, 2, 4, 5, 6})
		if err != nil {
			return nil, err
		}
		// n and S stand for each other: d ln n/d ln S is about one at small travel.
		f.Values[calibration.Exponent] = calibration.Found(quantity.Ratio(law.exponent), quantity.Ratio(math.Hypot(expanded(law.exponentU), law.exponent*float64(d.RulerU/d.Ruler))))
	}
	return f, nil
}
