package measure

import (
	"fmt"
	"math"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
	"lotgate/station/signal"
)

// Startup measures how long a module needs after its supply comes on.
//
// IF and chopped shunt are recorded at once while the supply is switched on in the middle. The time zero is the
// onset of the current in the chopped channel, which runs on the same clock: how long the device takes to be told does
// not matter. Readings:
//
//   - .if (s): until the IF stays within ±band of its final value, at the module's output. The crossing is that of a
//     local parabola over ±10 ms (less soon after the onset), fitted by least squares. It holds for a plate that
//     stands where it stands: what the mixer makes of it is part of the step;
//   - .current (s): until the supply current stays within a share of its final value. Each period of the chopper gives
//     one value, the fundamental under a window of four periods; between two values a straight line is drawn.
//
// An AC-coupled input answers a step by an undershoot of its own. With its lower corner fc given (coupling) the
// record is set right: the blocked mean m obeys dm/dt = 2π·fc·(recorded value), and is added back. The
// uncertainty of that corner (coupling_uncertainty) is that of the correction.
//
// The onset is known to half a period of the chopper where it falls into the half that is connected to ground,
// to two samples else. A record that is too short to see both settle gives no number.
type Startup struct {
	Band      quantity.Voltage    `key:"band" range:">0" doc:"how near its final value the IF must stay, at the module's output; default 0.2 mV"`
	Share     quantity.Ratio      `key:"share" range:">0" doc:"how near its final value the current must stay, relative; default 2 %"`
	Acquire   quantity.Time       `key:"acquire" range:">0" doc:"how long to record after the supply comes on; default 2 s"`
	Rest      quantity.Time       `key:"rest" range:">=0" doc:"how long the module is left without supply before; default 1 s"`
	CouplingU tolerance.Tolerance `key:"coupling_uncertainty" doc:"expanded uncertainty (k = 2) of coupling; default 5 %"`
	Coupling  quantity.Frequency  `key:"coupling" range:">=0" doc:"lower corner of the IF's sound input, whose undershoot is taken out; default: the one calibrated, or none"`
}

var _ = register(Kind{"startup", "time from the supply's coming on until IF and current have settled", func() Measurement {
	return &Startup{Band: 0.2e-3, Share: 0.02, Acquire: 2, Rest: 1, CouplingU: tolerance.Percent(0.05)}
}})

const (
	// startupLead is what is recorded before the supply is told to come on, s.
	startupLead = 0.4
	// settledShare is the last part of the record, which must be settled for a number to be given.
	settledShare = 0.25
	// leastQuiet is how much of the band the last part may drift by.
	leastQuiet = 0.2
	// parabolaSeconds is how far to either side of the crossing the parabola goes, s.
	parabolaSeconds = 0.010
)

// Readings offers both times.
func (m *Startup) Readings() []Offer {
	return []Offer{{".if", quantity.Second, false}, {".current", quantity.Second, false}}
}

// Check refuses what cannot be recorded.
func (m *Startup) Check(Module) error {
	switch {
	case m.Acquire < 0.2 || m.Acquire > 60:
		return fmt.Errorf("acquire %v is not possible: write 0.2 s to 60 s", m.Acquire)
	case m.Share >= 0.5:
		return fmt.Errorf("a share of %s is not possible: write less than 50 %%", m.Share.Percent())
	case m.Coupling > 20:
		return fmt.Errorf("a coupling of %v is not possible: write the lower corner of the sound input, at most 20 Hz", m.Coupling)
	}
	return nil
}

// Prepare records with the module unpowered and switches the supply on in the middle.
func (m *Startup) Prepare(b Bench) (Schedule, error) {
	if b.Chop <= 0 {
		return Schedule{}, fmt.Errorf("this station has no chopped shunt, which startup sees the supply come on by: give the station file a shunt")
	}
	rate := float64(b.SampleRate)
	off := quantity.Voltage(0)
	return Schedule{Acquisitions: []Acquisition{{What: "start", Roles: []string{IF, Sense}, Frames: int(math.Round((startupLead + float64(m.Acquire)) * rate)), Chop: true,
		Settle: m.Rest, Supply: &off, Event: &SupplyEvent{At: int(startupLead * rate * 0.75)}}}}, nil
}

// Evaluate finds the onset and the two crossings.
func (m *Startup) Evaluate(c *Capture) (Result, error) {
	sense, err := c.channel(0, Sense)
	if err != nil {
		return Result{}, err
	}
	ifs, err := c.channel(0, IF)
	if err != nil {
		return Result{}, err
	}
	if c.Shunt == nil {
		return Result{}, fmt.Errorf("step %s: the shunt is not given: add shunt: {resistance: …, gain: …, chop: …}", c.Step)
	}
	volts, err := c.volts(IF)
	if err != nil {
		return Result{}, err
	}
	if len(ifs.Samples) != len(sense.Samples) {
		return Result{}, fmt.Errorf("step %s: the two channels differ in length", c.Step)
	}
	chop, void := followChopper(sense, float64(c.Shunt.Chop))
	if void != nil {
		return voidAll(c.Step, m.Readings(), void), nil
	}
	from := min(len(ifs.Samples)-1, int(math.Ceil(chop.onset*ifs.Rate)))
	for _, s := range []struct {
		name   string
		signal Signal
	}{{IF, Signal{ifs.Samples[from:], ifs.Rate}}, {Sense, Signal{sense.Samples[from:], sense.Rate}}} {
		if v := check(s.signal, s.name); v != nil {
			return voidAll(c.Step, m.Readings(), v), nil
		}
	}
	return Result{Readings: []Reading{m.ifSettles(c, ifs, chop, volts), m.currentSettles(c, chop)}}, nil
}

// corner is the lower corner of the IF's input, Hz, with its relative standard uncertainty: that of the
// plan, or the one calibrated; zero where neither is known.
func (m *Startup) corner(c *Capture) (hz, relative float64) {
	if m.Coupling > 0 {
		return float64(m.Coupling), m.CouplingU.Standard(float64(m.Coupling))
	}
	g := c.Response[IF]
	if g.HighPass == 0 {
		return 0, 0
	}
	_, u := g.At(g.HighPass)
	return float64(g.HighPass), u / 2
}

// restored is the IF at the module's output with the input's high-pass taken out, less its mean before
// the onset, and by how much it was changed.
func (m *Startup) restored(s Signal, before int, volts, corner float64) (x, added []float64) {
	mean := 0.0
	for _, v := range s.Samples[:before] {
		mean += v / float64(before)
	}
	x, added = make([]float64, len(s.Samples)), make([]float64, len(s.Samples))
	share := -math.Expm1(-2 * math.Pi * corner / s.Rate)
	blocked := 0.0
	for i, v := range s.Samples {
		v -= mean
		if i < before {
			v = 0 // nothing but noise, which the sum would keep
		}
		added[i] = blocked * volts
		x[i] = v*volts + added[i]
		blocked += share * v
	}
	return x, added
}

// ifSettles finds where the IF comes into its band for good.
func (m *Startup) ifSettles(c *Capture, s Signal, chop chopped, volts float64) Reading {
	r := Reading{Name: c.Step + ".if", Unit: "s"}
	before := max(1, int((chop.onset-chop.late)*s.Rate)-2)
	corner, cornerU := m.corner(c)
	x, added := m.restored(s, before, volts, corner)
	tail := len(x) - int(settledShare*float64(len(x)-before))
	final := 0.0
	for _, v := range x[tail:] {
		final += v / float64(len(x)-tail)
	}
	drift := signal.Drift(x[tail:])
	find := func(seconds float64) crossing {
		return lastCrossing(x, before, tail, max(3, int(seconds*s.Rate)), final, float64(m.Band))
	}
	wide := find(parabolaSeconds)
	switch {
	case wide.count < 5 || wide.noise > float64(m.Band)/4:
		r.Missing = fmt.Sprintf("the noise of %s does not let a band of ±%v be told: widen the band or record longer", quantity.PrintTo(wide.noise, wide.noise/5, quantity.Volt), m.Band)
		return r
	case wide.index >= float64(tail) || drift > float64(m.Band)*leastQuiet:
		r.Missing = fmt.Sprintf("the IF has not settled within the %.2g s recorded: record longer, or widen the band of ±%v", float64(len(x)-before)/s.Rate, m.Band)
		return r
	case wide.index < 0: // within half a parabola of the onset
		limit := parabolaSeconds
		r.Value, r.Budget = fromZero(limit, Component{"resolution", limit / 2, 0})
		r.Notes = append(r.Notes, "settled sooner than can be resolved: the interval reaches down to zero")
		return r
	}
	// The parabola is narrow against the time since the onset; half as narrow tells whether it fits.
	narrow := math.Min(parabolaSeconds, math.Max(0.001, (wide.index/s.Rate-chop.onset)/8))
	found, half := find(narrow), find(narrow/2)
	if found.index < 0 {
		found = wide
	}
	shape := math.Abs(found.index-half.index) / s.Rate
	if half.index < 0 {
		shape = narrow
	}
	slope := math.Max(found.slope*s.Rate, 1e-12)
	shape = math.Max(0, shape-half.noise/slope) // what the noise explains
	r.Value = found.index/s.Rate - chop.onset
	r.Budget = Combine(Component{"noise at the crossing", found.noise / slope, found.count - 1}, Component{"onset of the current (half a period of the chopper)", chop.sigma, 0},
		Component{"shape of the curve at the crossing", shape, 0},
		Component{"final value", math.Hypot(found.noise/math.Sqrt(found.count), drift) / slope, found.count - 1},
		Component{"high-pass of the input", math.Abs(added[int(found.index)]) * cornerU / slope, 0},
		Component{"level (calibration)", m.levelShare(c) * float64(m.Band) / slope, 0})
	if corner == 0 {
		r.Notes = append(r.Notes, "the input's own high-pass is not taken out: calibrate the input's level, or give its corner as coupling")
	}
	return r
}

// settleHz stands for the frequencies of a settling IF where the gain over frequency is asked for.
const settleHz = 100

// levelShare is the relative standard uncertainty of a voltage at the IF.
func (m *Startup) levelShare(c *Capture) float64 {
	square := 0.0
	for _, x := range c.levelComponents(IF, 1, settleHz) {
		square += x.U * x.U
	}
	return math.Sqrt(square)
}

// currentSettles finds where the current comes into its share for good.
func (m *Startup) currentSettles(c *Capture, chop chopped) Reading {
	r := Reading{Name: c.Step + ".current", Unit: "s"}
	n := len(chop.value)
	tail := n - int(settledShare*float64(n))
	if n-tail < 10 {
		r.Missing = "the record holds too few periods of the chopper after the supply came on: record longer"
		return r
	}
	e := signal.Mean(chop.value[tail:])
	drift := signal.Drift(chop.value[tail:]) / e.Value
	off := func(k int) float64 { return math.Abs(chop.value[k]-e.Value)/e.Value - float64(m.Share) }
	last := -1
	for k := n - 1; k >= 0; k-- {
		if off(k) > 0 {
			last = k
			break
		}
	}
	switch {
	case last >= tail || drift > float64(m.Share)*leastQuiet:
		r.Missing = fmt.Sprintf("the current has not settled to %s within the %.2g s recorded: record longer", m.Share.Percent(), chop.second[n-1]-chop.onset)
		return r
	case last < 0:
		limit := math.Max(chop.second[0]-chop.onset, chop.period)
		r.Value, r.Budget = fromZero(limit, Component{"resolution", limit / 2, 0})
		r.Notes = append(r.Notes, "settled sooner than can be resolved: the interval reaches down to zero")
		return r
	}
	a, b := off(last), off(last+1)
	r.Value = chop.second[last] + (chop.second[last+1]-chop.second[last])*a/(a-b) - chop.onset
	slope := (a - b) / (chop.second[last+1] - chop.second[last])
	// The window's effective width, √(1/12 − 1/2π²) of its length, delays a decay by w²/2τ: taken off,
	// and known to half of it where the decay is no plain exponential.
	width := window * chop.period * math.Sqrt(1.0/12-1/(2*math.Pi*math.Pi))
	smoothing := width * width * slope / (2 * float64(m.Share))
	r.Value -= smoothing
	spread := e.Sigma * math.Sqrt(float64(n-tail)) / e.Value
	r.Budget = Combine(Component{"onset of the current (half a period of the chopper)", chop.sigma, 0},
		Component{"noise at the crossing", spread / slope, e.Dof},
		Component{"smoothing by the window of four periods", smoothing / 2, 0}, Component{"final value", math.Hypot(e.Sigma/e.Value, drift) / slope, e.Dof})
	return r
}
