package measure

import (
	"fmt"
	"math"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
)

// Pushing measures how a module changes with its supply voltage, as relative change per volt
// (1/V):
//
//	p = 2·(y_high − y_low) / ((y_high + y_low)·(V_high − V_low))
//
// with y the quantity at each of two supply voltages: .echo (V0, from two positions λ/8 apart, since
// φ0 may turn with the carrier), .current (chopped shunt, see SupplyCurrent) and .noise (V rms in the
// band with the target still, see NoiseFloor). It is the symmetric difference quotient, relative to the
// mean of both: for a quantity that is linear in the supply its error is none.
//
// Full scale, gain, shunt, displacement and standoff are the same at both voltages and cancel in the
// ratio. What is left is the scatter of both measurements and how well the voltages are known
// (supply_uncertainty, of each voltage, taken as independent). The two recordings at a position are
// taken without moving the stage in between, so that where it stops cancels too.
//
// The law of propagation for the ratio q = y_high/y_low: u²(p) = (4q/((1+q)²·ΔV))²·(u_h² + u_l²) with u_h,
// u_l relative (JCGM 100:2008, 5.1.2).
type Pushing struct {
	Low          quantity.Voltage     `key:"low" range:">0" doc:"the lower supply voltage; default 4.75 V"`
	High         quantity.Voltage     `key:"high" range:">0" doc:"the higher supply voltage; default 5.25 V"`
	Tone         quantity.Frequency   `key:"tone" range:">0" doc:"frequency of the target's motion; default 40 Hz"`
	Displacement quantity.Length      `key:"displacement" range:">0" doc:"peak displacement of the target; default 0.20 mm"`
	Acquire      quantity.Time        `key:"acquire" range:">0" doc:"how long to record echo and current at each place and voltage; default 1 s"`
	Listen       quantity.Time        `key:"listen" range:">0" doc:"how long to record the noise at each voltage; default 6 s"`
	Band         []quantity.Frequency `key:"band" range:">0" doc:"the noise's band; default 10 Hz to 1 kHz"`
	Mains        quantity.Frequency   `key:"mains" range:">0" doc:"mains frequency; default 50 Hz"`
	SupplyU      tolerance.Tolerance  `key:"supply_uncertainty" doc:"expanded uncertainty (k = 2) of each supply voltage; default 10 mV, common practice"`
	FloorAge     *quantity.Time       `key:"floor_age" range:">=0" doc:"how old the station's own floor, taken with the module unpowered, may be; default 1 h; 0 s takes it for every unit"`
}

var _ = register(Kind{"pushing", "change of echo, current and noise with the supply voltage", func() Measurement {
	return &Pushing{Low: 4.75, High: 5.25, Tone: 40, Displacement: 0.2e-3, Acquire: 1, Listen: 6, Band: []quantity.Frequency{10, 1000}, Mains: 50,
		SupplyU: tolerance.Tolerance{Absolute: 10e-3, Unit: "V"}}
}})

// Readings offers the three relative changes.
func (m *Pushing) Readings() []Offer {
	return []Offer{{".echo", quantity.PerVoltUnit, false}, {".current", quantity.PerVoltUnit, false}, {".noise", quantity.PerVoltUnit, false}}
}

// carrierPushing is the standard uncertainty of the echo's change per volt that comes of the carrier's
// own: β = 4πX/λ follows the carrier, and a free-running oscillator is pushed by some megahertz per
// volt, here 0.05 % of the carrier per volt (common practice).
const carrierPushing = 5e-4

// leastSpan is the least difference of the two voltages, V: below it the quotient is mostly
// uncertainty of the voltages.
const leastSpan = 0.1

func (m *Pushing) echo() *Sensitivity {
	return &Sensitivity{Method: "positions", Tone: m.Tone, Displacement: m.Displacement, Positions: 2, Acquire: m.Acquire, Mains: m.Mains}
}

func (m *Pushing) noise() *NoiseFloor {
	return &NoiseFloor{Acquire: m.Listen, Band: m.Band, Mains: m.Mains, FloorAge: m.FloorAge}
}

// Check refuses what its parts refuse, and voltages that are not apart.
func (m *Pushing) Check(module Module) error {
	if m.High-m.Low < leastSpan {
		return fmt.Errorf("low %v and high %v are not apart: write high at least %v above low", m.Low, m.High, quantity.Voltage(leastSpan))
	}
	if m.Acquire < 0.05 || m.Acquire > 60 {
		return fmt.Errorf("acquire %v is not possible: write 0.05 s to 60 s", m.Acquire)
	}
	if err := m.noise().Check(module); err != nil {
		return err
	}
	return m.echo().Check(module)
}

// What each part of a capture holds, in this order.
const (
	pushNoise = iota
	pushCurrent
	pushEcho
	pushFurther // echo at the second position
	pushParts   = 2 * (pushFurther + 1)
)

// pushOrder is the order of recording: the supply is changed twice only, and never while
// the stage moves.
var pushOrder = [pushParts]struct {
	what int
	high bool
}{{pushNoise, false}, {pushCurrent, false}, {pushEcho, false}, {pushEcho, true}, {pushNoise, true}, {pushCurrent, true}, {pushFurther, true}, {pushFurther, false}}

// Prepare records noise, current and echo at both voltages.
func (m *Pushing) Prepare(b Bench) (Schedule, error) {
	if b.Chop <= 0 {
		return Schedule{}, fmt.Errorf("this station has no chopped shunt, which pushing reads the current through: give the station file a shunt")
	}
	noise, err := m.noise().Prepare(b)
	if err != nil {
		return Schedule{}, err
	}
	echo, err := m.echo().Prepare(b)
	if err != nil {
		return Schedule{}, err
	}
	s := Schedule{Conditions: echo.Conditions, FloorAge: noise.FloorAge}
	s.Conditions.Parts = nil
	current := Acquisition{What: "supply current", Frames: int(math.Round(float64(m.Acquire) * float64(b.SampleRate))), Chop: true, Settle: 0.1}
	forms := [...]Acquisition{noise.Acquisitions[0], current, echo.Acquisitions[0], echo.Acquisitions[1]}
	for _, o := range pushOrder {
		a, volts := forms[o.what], m.Low
		if o.high {
			volts = m.High
		}
		a.What, a.Roles, a.Supply = fmt.Sprintf("%s at %v", a.What, volts), []string{IF, Sense}, &volts
		s.Acquisitions = append(s.Acquisitions, a)
		s.Conditions.Parts = append(s.Conditions.Parts, Part{Position: a.Position, Supply: &volts})
	}
	return s, nil
}

// Evaluate works out each quantity at both voltages.
func (m *Pushing) Evaluate(c *Capture) (Result, error) {
	if c.Supply.Off { // the station's own floor: only whether it can be used is asked for
		_, void, err := m.noise().spectrum(c)
		if err != nil || void == nil || void.Code == "silent" {
			return Result{}, err
		}
		return voidAll(c.Step, m.Readings(), void), nil
	}
	if len(c.Parts) != pushParts || c.Target == nil {
		return Result{}, fmt.Errorf("step %s: pushing needs its target and %d parts, in the order in which it records, and has %d", c.Step, pushParts, len(c.Parts))
	}
	span, mean := 0.0, 0.0
	for i, o := range pushOrder {
		v := c.Parts[i].Supply
		if v == nil {
			return Result{}, fmt.Errorf("step %s: part %d has no supply: add supply: %v", c.Step, i+1, m.Low)
		}
		if o.high {
			span += float64(*v) / 4
		} else {
			span -= float64(*v) / 4
		}
		mean += float64(*v) / pushParts
	}
	if span < leastSpan {
		return Result{}, fmt.Errorf("step %s: the two supply voltages are %v apart: at least %v is needed", c.Step, quantity.Voltage(span), quantity.Voltage(leastSpan))
	}
	var out Result
	for _, q := range []struct {
		name string
		at   func(c *Capture, high bool) (relative, string, *Void, error)
	}{{".echo", m.echoAt}, {".current", m.currentAt}, {".noise", m.noiseAt}} {
		low, missing, void, err := q.at(c, false)
		if err != nil {
			return Result{}, err
		}
		high, alsoMissing, alsoVoid, err := q.at(c, true)
		if err != nil {
			return Result{}, err
		}
		if void == nil {
			void = alsoVoid
		}
		if void != nil {
			return voidAll(c.Step, m.Readings(), void), nil
		}
		if missing == "" {
			missing = alsoMissing
		}
		var further []Component
		if q.name == ".echo" {
			slope := slopeOfJ(1, phaseIndex(float64(c.Target.Displacement), c.Carrier))
			further = []Component{{"carrier pushing, which changes β (0.05 %/V, common practice)", carrierPushing * slope, 0}}
		}
		out.Readings = append(out.Readings, m.quotient(c.Step+q.name, low, high, missing, span, mean, further...))
	}
	return out, nil
}

// quotient is the relative change per volt with its budget.
func (m *Pushing) quotient(name string, low, high relative, missing string, span, mean float64, further ...Component) Reading {
	r := Reading{Name: name, Unit: quantity.PerVoltUnit.Symbol, Missing: missing}
	if missing != "" {
		return r
	}
	sum := high.value + low.value
	r.Value = 2 * (high.value - low.value) / (sum * span)
	sensitivity := 4 * high.value * low.value / (sum * sum * span)
	volts := math.Sqrt2 * m.SupplyU.Standard(mean) * mean // of the difference
	r.Budget = Combine(append([]Component{{"scatter at the lower voltage", sensitivity * low.sigma, low.dof},
		{"scatter at the higher voltage", sensitivity * high.sigma, high.dof},
		{"supply voltages (supply_uncertainty)", math.Abs(r.Value) * volts / span, 0},
		{"full scale, gain, shunt, displacement, standoff (cancel in the ratio)", 0, 0}}, further...)...)
	return r
}
