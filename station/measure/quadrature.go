package measure

import (
	"fmt"
	"math"
	"math/cmplx"
	"sort"

	"gonum.org/v1/gonum/stat/distuv"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// QuadratureChannels measures how a module's two IF outputs go together: I, and Q that should be as large and a quarter
// of a turn off, so that the direction of motion can be told.
//
// The target moves at a tone; at eight or more offsets p of the stage that cover λ/2 the two fundamentals,
// signs taken along the tone's phase, are
//
//	A_I = o_I + g·A·sin φ,  A_Q = o_Q + g·r·A·sin(φ + δ),  φ = φ0 − 4π·p/λ,  g = (S/(S+p))²
//
// (see Sensitivity): points on an ellipse, which is fitted (signal.FitEllipse) as P.L.M. Heydemann does for
// interferometers (Appl. Opt. 20 (1981) 3382). The place of each point on the ellipse is fitted too, and how the echo
// falls with the distance, so that it does not matter where the stage stops, nor how well standoff and range law
// are known. Readings:
//
//   - .gain: r;
//   - .phase: δ (rad), of Q against I for a target that comes nearer: near +π/2 where Q leads, near −π/2 where I does;
//   - .offset_i, .offset_q (V peak): what each channel picks up at the tone wherever the plate stands (size; the
//     phase between drive and recording is known up to a half turn only);
//   - .correlation: correlation coefficient ρ of the two noises in the band with the target still, from the powers of
//     sum and difference; its interval by R.A. Fisher's z = artanh ρ with the variance 1/(ν−3) (Metron 1 (1921) 3),
//     ν the number of independent samples in the band; the reading is the interval's middle. The
//     station's own noise is contained.
//
// Domain: modules of the kind two IF; |sin δ| above 0.2.
type QuadratureChannels struct {
	Tone         quantity.Frequency   `key:"tone" range:">0" doc:"frequency of the target's motion; default 40 Hz"`
	Displacement quantity.Length      `key:"displacement" range:">0" doc:"peak displacement of the target; default 0.20 mm"`
	Positions    int                  `key:"positions" range:">0" doc:"how many positions over λ/2, 8 or more; default 12"`
	Acquire      quantity.Time        `key:"acquire" range:">0" doc:"how long to record at each position; default 1 s"`
	Listen       quantity.Time        `key:"listen" range:">0" doc:"how long to record the noise; default 4 s"`
	Band         []quantity.Frequency `key:"band" range:">0" doc:"the noise's band; default 10 Hz to 1 kHz"`
	Mains        quantity.Frequency   `key:"mains" range:">0" doc:"mains frequency; default 50 Hz"`
}

var _ = register(Kind{"quadrature", "how the two IF outputs of a module go together", func() Measurement {
	return &QuadratureChannels{Tone: 40, Displacement: 0.2e-3, Positions: 12, Acquire: 1, Listen: 4, Band: []quantity.Frequency{10, 1000}, Mains: 50}
}})

// Readings offers gain, phase, offsets and correlation.
func (m *QuadratureChannels) Readings() []Offer {
	return []Offer{{".gain", quantity.One, false}, {".phase", quantity.RadianUnit, false}, {".offset_i", quantity.Volt, false},
		{".offset_q", quantity.Volt, false}, {".correlation", quantity.One, false}}
}

func (m *QuadratureChannels) echo(channel string) *Sensitivity {
	return &Sensitivity{Method: "positions", Positions: 2, Tone: m.Tone, Displacement: m.Displacement, Acquire: m.Acquire, Mains: m.Mains, Channel: channel}
}

func (m *QuadratureChannels) noise() *NoiseFloor {
	return &NoiseFloor{Acquire: m.Listen, Band: m.Band, Mains: m.Mains}
}

// Check refuses modules with one output, and too few positions.
func (m *QuadratureChannels) Check(module Module) error {
	if module.Kind != TwoIF {
		return fmt.Errorf("a module of the kind %q has one output: write module: {kind: %s, …}", module.Kind, TwoIF)
	}
	if m.Positions < 8 || m.Positions > 60 {
		return fmt.Errorf("positions %d is not possible: write 8 to 60", m.Positions)
	}
	if err := m.noise().Check(module); err != nil {
		return err
	}
	return m.echo(IF).Check(module)
}

// Prepare records both outputs, first with the target still and then at each position.
func (m *QuadratureChannels) Prepare(b Bench) (Schedule, error) {
	still, err := m.noise().Prepare(b)
	if err != nil {
		return Schedule{}, err
	}
	s, err := m.echo(IF).at(b, aroundHalfWave(m.Positions, b.Module.Wavelength()))
	if err != nil {
		return Schedule{}, err
	}
	s.Acquisitions = append(still.Acquisitions, s.Acquisitions...)
	s.Conditions.Parts = append([]Part{{}}, s.Conditions.Parts...)
	for i := range s.Acquisitions {
		s.Acquisitions[i].Roles = []string{IF, Quadrature}
	}
	return s, nil
}

// Evaluate works out the ellipse and the correlation.
func (m *QuadratureChannels) Evaluate(c *Capture) (Result, error) {
	t := c.Target
	if t == nil || t.Tone <= 0 || t.Displacement <= 0 || t.Standoff <= 0 {
		return Result{}, fmt.Errorf("step %s: the target's motion is not given: add target: {tone: …, displacement: …, standoff: …}", c.Step)
	}
	if len(c.Parts) < 8 {
		return Result{}, fmt.Errorf("step %s: quadrature needs a part with the target still and at least 7 positions, and has %d parts", c.Step, len(c.Parts))
	}
	var fits [2][]toneFit
	for n, channel := range []string{IF, Quadrature} {
		for i := 1; i < len(c.Parts); i++ {
			f, void, err := m.echo(channel).fit(c, i, float64(c.Parts[i].Position), float64(t.Tone))
			if err != nil {
				return Result{}, err
			}
			if void != nil {
				return voidAll(c.Step, m.Readings(), void), nil
			}
			fits[n] = append(fits[n], f)
		}
	}
	correlation, void, err := m.correlation(c)
	if err != nil {
		return Result{}, err
	}
	if void != nil {
		return voidAll(c.Step, m.Readings(), void), nil
	}
	ellipse, void := m.ellipse(c, fits)
	if void != nil {
		return voidAll(c.Step, m.Readings(), void), nil
	}
	return Result{Readings: append(ellipse, correlation)}, nil
}

// ellipse fits the points of both channels.
func (m *QuadratureChannels) ellipse(c *Capture, fits [2][]toneFit) ([]Reading, *Void) {
	offers := m.Readings()[:4]
	missing := func(why string) []Reading {
		var out []Reading
		for _, o := range offers {
			out = append(out, Reading{Name: c.Step + o.Suffix, Unit: o.Unit.Symbol, Missing: why})
		}
		return out
	}
	names := [2]string{"if", "quadrature"}
	var xy [2][]float64
	var sigma, dof [2]float64
	for n := range fits {
		power := 0.0
		for _, f := range fits[n] {
			h := f.harmonics[0]
			power += math.Pow(cmplx.Abs(h.a), 2) / float64(len(fits[n]))
			sigma[n] += h.sigma * h.sigma / float64(len(fits[n]))
			dof[n] += h.dof
		}
		sigma[n] = math.Sqrt(sigma[n])
		if power < 100*sigma[n]*sigma[n] {
			return missing(fmt.Sprintf("the tone does not stand out of the noise of the %s channel", names[n])), nil
		}
	}
	turnI, alignedI := toneAxis(fits[0])
	turnQ, alignedQ := toneAxis(fits[1])
	if real(turnQ*cmplx.Conj(turnI)) < 0 {
		turnQ = -turnQ // both channels' tones have the motion's phase, within what their filters differ by
	}
	if !alignedI || !alignedQ || real(turnQ*cmplx.Conj(turnI)) < math.Cos(0.5) {
		return nil, &Void{"clock", "the phase between drive and recording is not the same at all positions and in both channels", "use one sound interface for all, then take it again"}
	}
	var positions, gain []float64
	for k := range fits[0] {
		p := fits[0][k].position
		positions = append(positions, p)
		gain = append(gain, math.Pow(float64(c.Target.Standoff)/(float64(c.Target.Standoff)+p), 2))
		xy[0] = append(xy[0], real(fits[0][k].harmonics[0].a*turnI))
		xy[1] = append(xy[1], real(fits[1][k].harmonics[0].a*turnQ))
	}
	e, err := signal.FitEllipse(xy[0], xy[1], gain, sigma[0], sigma[1])
	if err != nil || math.Sin(e.Delta) < leastQuadrature {
		return missing("the two channels' tones make no ellipse: one of them follows the other, or the stage does not move"), nil
	}
	delta := e.Delta
	if goesRound(positions, e.T) > 0 {
		delta = -delta // φ falls where p rises
	}
	// The noise is known from the lines beside the tone. Where the points are off by more, which happens by
	// chance once in a hundred times, their own scatter counts.
	widen, freedom := 1.0, dof[0]+dof[1]
	if (distuv.ChiSquared{K: e.Dof}).CDF(e.Ratio*e.Dof) > 0.99 {
		widen, freedom = math.Sqrt(e.Ratio), e.Dof
	}
	ratio := e.B / e.A
	source := "scatter of the fitted ellipse"
	components := []Component{{source, ratio * widen * math.Hypot(e.Sigma[2]/e.A, e.Sigma[3]/e.B), freedom}}
	for _, role := range []string{IF, Quadrature} {
		components = append(components, c.levelComponents(role, ratio, float64(c.Target.Tone))...)
	}
	components = append(components, Component{"standoff, range law, displacement (fitted, or the same for both)", 0, 0})
	out := []Reading{{Name: c.Step + ".gain", Unit: "1", Value: ratio, Budget: Combine(components...)},
		{Name: c.Step + ".phase", Unit: "rad", Value: delta, Notes: []string{fmt.Sprintf("%.1f°: %s for a target that comes nearer", delta*180/math.Pi, leads(delta))},
			Budget: Combine(Component{source, widen * e.Sigma[4], freedom}, Component{"full scale, gain, displacement (no part in it)", 0, 0})}}
	for n, offset := range []float64{e.X0, e.Y0} {
		out = append(out, m.offset(c, offers[2+n].Suffix, []string{IF, Quadrature}[n], math.Abs(offset), widen*e.Sigma[n], freedom))
	}
	return out, nil
}

// leastQuadrature is the least |sin δ| at which the ellipse is wide enough to be fitted.
const leastQuadrature = 0.2

func leads(delta float64) string {
	if delta > 0 {
		return "Q leads"
	}
	return "I leads"
}

// goesRound is how often the places on the ellipse go round as the position rises, in turns.
func goesRound(positions, places []float64) float64 {
	order := make([]int, len(positions))
	for k := range order {
		order[k] = k
	}
	sort.Slice(order, func(i, k int) bool { return positions[order[i]] < positions[order[k]] })
	sum := 0.0
	for k := 1; k < len(order); k++ {
		sum += math.Remainder(places[order[k]]-places[order[k-1]], 2*math.Pi)
	}
	return sum / (2 * math.Pi)
}

// offset is the size of what a channel picks up.
func (m *QuadratureChannels) offset(c *Capture, suffix, role string, size, sigma, dof float64) Reading {
	r := Reading{Name: c.Step + suffix, Unit: "V", Value: size}
	scatter := Component{"scatter of the fitted ellipse", sigma, dof}
	if size < 3*sigma {
		r.Value, r.Budget = fromZero(size, scatter)
		r.Notes = append(r.Notes, "does not stand out of its scatter: the interval reaches down to zero")
		return r
	}
	r.Budget = Combine(append([]Component{scatter}, c.levelComponents(role, size, float64(c.Target.Tone))...)...)
	return r
}
