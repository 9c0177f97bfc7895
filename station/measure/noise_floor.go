package measure

import (
	"fmt"
	"math"

	"lotgate/limits/quantity"
	"lotgate/station/signal"
)

// NoiseFloor measures the noise at the module's IF output with the target still.
//
//   - .band: V rms between the band's edges;
//   - .density(F): V/√Hz at each frequency asked for;
//   - .mains: V rms of the mains line and its harmonics in the band;
//   - .corner: Hz, from a fit of w²·(1 + fc/f) to the power density.
//
// All are referred to the module's output: samples × full scale / gain. The spectrum is
// the whole record's periodogram under a Tukey window (see signal.Periodogram): its band
// power has a relative variance of 1.06/(B·T), where the mean of overlapping Hann
// windows would cost more. Mains lines are taken out coherently, reported on their own,
// and the gap they leave is filled from its neighbours. The station's own floor, measured
// with the module unpowered, is subtracted in power.
//
// Welch's overlapping pieces (P.D. Welch 1967) serve to recognise a disturbed record: for
// Gaussian noise the ratio of the strongest piece to the median piece is known.
type NoiseFloor struct {
	Acquire   quantity.Time        `key:"acquire" range:">0" doc:"how long to record; default 6 s"`
	Band      []quantity.Frequency `key:"band" range:">0" doc:"the band's edges; default 10 Hz to 1 kHz"`
	Densities []quantity.Frequency `key:"densities" range:">0" doc:"frequencies at which the noise density is wanted"`
	Channel   string               `key:"channel" among:"if|quadrature" doc:"which output: if (default), or quadrature for a module of the kind two IF"`
	Mains     quantity.Frequency   `key:"mains" range:">0" doc:"mains frequency; default 50 Hz"`
	FloorAge  *quantity.Time       `key:"floor_age" range:">=0" doc:"how old the station's own floor, taken with the module unpowered, may be; default 1 h; 0 s takes it for every unit"`
}

var _ = register(Kind{"noise_floor", "noise at the IF output with the target still", func() Measurement {
	return &NoiseFloor{Acquire: 6, Band: []quantity.Frequency{10, 1000}, Mains: 50}
}})

// Readings offers band, mains, corner and each density.
func (m *NoiseFloor) Readings() []Offer {
	out := []Offer{{".band", quantity.Volt, false}}
	for _, f := range m.Densities {
		out = append(out, Offer{densitySuffix(f), quantity.VoltPerRootHz, false})
	}
	return append(out, Offer{".mains", quantity.Volt, false}, Offer{".corner", quantity.Hertz, false})
}

func densitySuffix(f quantity.Frequency) string { return ".density(" + f.String() + ")" }

// Check refuses an impossible band, and a record too short for its lower edge.
func (m *NoiseFloor) Check(module Module) error {
	if err := checkChannel(m.Channel, module); err != nil {
		return err
	}
	if err := checkBand(m.Band); err != nil {
		return err
	}
	if float64(m.Acquire)*float64(m.Band[0]) < 10 {
		return fmt.Errorf("acquire %v is too short for a band that starts at %v: record at least %v", m.Acquire, m.Band[0], quantity.Time(10/float64(m.Band[0])))
	}
	if m.Acquire > 600 {
		return fmt.Errorf("acquire %v is not possible: write 600 s or less", m.Acquire)
	}
	return nil
}

func checkBand(band []quantity.Frequency) error {
	if len(band) != 2 || band[0] >= band[1] {
		return fmt.Errorf("band %v is not possible: write [lower edge, upper edge], such as [10 Hz, 1 kHz]", band)
	}
	return nil
}

// Prepare records the IF with the target still, and asks for the station's floor.
func (m *NoiseFloor) Prepare(b Bench) (Schedule, error) {
	if top := m.Band[1]; float64(top) > 0.45*float64(b.SampleRate) {
		return Schedule{}, fmt.Errorf("the band's upper edge %v is too near half the sample rate %v", top, b.SampleRate)
	}
	age := quantity.Time(3600)
	if m.FloorAge != nil {
		age = *m.FloorAge
	}
	frames := int(math.Round(float64(m.Acquire) * float64(b.SampleRate)))
	return Schedule{FloorAge: &age, Acquisitions: []Acquisition{{What: "noise floor", Roles: []string{m.role()}, Frames: frames, Settle: 0.2}}}, nil
}

// noiseSpectrum is a capture's power density referred to the module's output, V²/Hz.
type noiseSpectrum struct {
	signal.Spectrum
	gaps  []signal.Gap
	mains float64 // power of the mains lines, V²
	// mainsSigma is its standard uncertainty, V²
	mainsSigma float64
}

// Evaluate works out all readings from the periodogram.
func (m *NoiseFloor) Evaluate(c *Capture) (Result, error) {
	n, void, err := m.spectrum(c)
	if err != nil {
		return Result{}, err
	}
	if void != nil {
		return voidAll(c.Step, m.Readings(), void), nil
	}
	var floor *noiseSpectrum
	if c.Floor != nil {
		floor, void, err = m.spectrum(c.Floor)
		if err != nil {
			return Result{}, err
		}
		if void != nil && void.Code != "silent" {
			v := *void
			v.Reason = "the station's own floor: " + v.Reason
			return voidAll(c.Step, m.Readings(), &v), nil
		}
	}
	r := Result{Readings: []Reading{m.band(c, n, floor)}}
	for _, f := range m.Densities {
		r.Readings = append(r.Readings, m.density(c, n, floor, f))
	}
	r.Readings = append(r.Readings, m.mainsReading(c, n), m.corner(c, n, floor))
	r.Figures = []Figure{m.figure(c, n)}
	return r, nil
}

// spectrum checks a capture and makes its power density.
func (m *NoiseFloor) spectrum(c *Capture) (*noiseSpectrum, *Void, error) {
	s, err := c.channel(0, m.role())
	if err != nil {
		return nil, nil, err
	}
	scale, err := c.volts(m.role())
	if err != nil {
		return nil, nil, err
	}
	if err := m.Check(Module{Kind: TwoIF}); err != nil {
		return nil, nil, fmt.Errorf("step %s: %w", c.Step, err)
	}
	low, high := float64(m.Band[0]), float64(m.Band[1])
	if high > 0.49*s.Rate {
		return nil, nil, fmt.Errorf("step %s: the band's upper edge %v is beyond what a sample rate of %.0f Hz holds", c.Step, m.Band[1], s.Rate)
	}
	if seconds := float64(len(s.Samples)) / s.Rate; seconds*low < 10 {
		return nil, nil, fmt.Errorf("step %s: a record of %.3g s is too short for a band that starts at %v: record at least %v", c.Step, seconds, m.Band[0], quantity.Time(10/low))
	}
	if v := check(s, m.role()); v != nil {
		return nil, v, nil
	}
	top := 1.2 * high
	for _, f := range m.Densities {
		top = math.Max(top, 1.03*math.Sqrt2*float64(f)) // a density looks half an octave up
	}
	d := signal.Decimate(s.Samples, s.Rate, math.Min(top, 0.45*s.Rate))
	if v := steady(d.Samples, d.Rate, low, high, 5/low); v != nil {
		return nil, v, nil
	}
	n := m.withoutMains(d.Samples, d.Rate, low, high, func(hz float64) float64 {
		gain, _ := c.gainAt(m.role(), hz)
		return scale / gain
	})
	return n, nil, nil
}

// mainsHalfWidth is how far from a mains line its power is looked for, Hz: the grid's
// frequency stays within 0.2 Hz in normal operation (common practice), its tenth
// harmonic within 2 Hz.
func mainsHalfWidth(harmonic float64) float64 { return 0.8 + 0.2*harmonic }

// withoutMains makes the periodogram with the mains lines taken out coherently, so that
// their leakage under the window does not pass for noise. volts is the factor from samples to
// the module's output at a frequency.
func (m *NoiseFloor) withoutMains(x []float64, rate, low, high float64, volts func(hz float64) float64) *noiseSpectrum {
	raw := signal.Periodogram(x, rate)
	n := &noiseSpectrum{}
	mains := float64(m.Mains)
	var found []float64
	quiet := signal.QuietLines(raw, nil, mains)
	for h := 1.0; h*mains <= math.Min(1.2*high, 0.48*rate); h++ {
		hz := h * mains
		width := mainsHalfWidth(h)
		n.gaps = append(n.gaps, signal.Gap{LowHz: hz - width, HighHz: hz + width})
		level := signal.NoiseAround(raw, quiet, hz, 24)
		peak, at := 0.0, 0
		for k := raw.Line(hz - width); k <= raw.Line(hz+width) && k < len(raw.Power); k++ {
			if raw.Power[k] > peak {
				peak, at = raw.Power[k], k
			}
		}
		if peak > 25*level.Value {
			found = append(found, float64(at)*raw.Step)
		}
		if hz < low || hz > high {
			continue
		}
		inside := signal.BandPower(raw, hz-width, hz+width, nil)
		square := math.Pow(volts(hz), 2)
		excess := inside.Value - level.Value*2*width
		n.mains += excess * square
		background := level.Value * level.Value * raw.Step * 2 * width * raw.Spread
		cross := 4 * math.Max(excess, 0) * level.Value / raw.Seconds / 2
		fill := 2 * width * level.Sigma
		n.mainsSigma += (background + cross + fill*fill) * square * square
	}
	n.mainsSigma = math.Sqrt(n.mainsSigma)
	n.Spectrum = raw
	if len(found) > 0 {
		clean := append([]float64(nil), x...)
		for _, hz := range found {
			takeOut(clean, rate, hz)
		}
		n.Spectrum = signal.Periodogram(clean, rate)
	}
	for k := 1; k < len(n.Power); k++ {
		v := volts(float64(k) * n.Step)
		n.Power[k] *= v * v
	}
	n.Power[0] = 0 // the record's mean, which nothing is made of
	return n
}

// takeOut removes one tone near a frequency (within a line) from x in place.
func takeOut(x []float64, rate, hz float64) {
	fine := signal.StrongestNear(x, rate, hz, rate/float64(len(x))/hz)
	for step := rate / float64(len(x)) / 8; step > rate/float64(len(x))/100; step /= 2 {
		toRadians := 2 * math.Pi / rate
		beside := signal.Strengths(x, []float64{(fine - step) * toRadians, fine * toRadians, (fine + step) * toRadians})
		switch {
		case beside[0] > beside[1] && beside[0] >= beside[2]:
			fine -= step
		case beside[2] > beside[1]:
			fine += step
		}
	}
	w := []float64{2 * math.Pi * fine / rate}
	if a, err := signal.FitTones(x, w); err == nil {
		signal.Subtract(x, w, a)
	}
}

// root turns a power around a frequency with its uncertainty into an amplitude reading,
// station floor subtracted.
func (m *NoiseFloor) root(c *Capture, name, unit string, hz float64, total, floor signal.Estimate, hasFloor bool) Reading {
	r := Reading{Name: c.Step + name, Unit: unit}
	net := total.Value
	if hasFloor {
		net -= floor.Value
	} else {
		r.Notes = append(r.Notes, "the station's own floor was not measured and is included")
	}
	sigma := math.Hypot(total.Sigma, floor.Sigma)
	if net <= 2*sigma {
		r.Missing = fmt.Sprintf("not above the station's own floor of %s", quantity.PrintTo(math.Sqrt(math.Max(floor.Value, 0)), math.Sqrt(math.Max(floor.Value, 0))/20, unitOf(unit)))
		return r
	}
	r.Value = math.Sqrt(net)
	if hasFloor && floor.Value > total.Value/2 {
		r.Notes = append(r.Notes, fmt.Sprintf("the station's own floor is %.0f %% of the total power", 100*floor.Value/total.Value))
	}
	components := []Component{{"scatter of the noise itself (record length)", total.Sigma / (2 * r.Value), total.Dof}}
	if hasFloor {
		components = append(components, Component{"scatter of the station's floor", floor.Sigma / (2 * r.Value), floor.Dof})
	}
	r.Budget = Combine(append(components, c.levelComponents(m.role(), r.Value, hz)...)...)
	return r
}

func unitOf(symbol string) quantity.Unit {
	u, _ := quantity.UnitBySymbol(symbol)
	return u
}

func (m *NoiseFloor) band(c *Capture, n, floor *noiseSpectrum) Reading {
	low, high := float64(m.Band[0]), float64(m.Band[1])
	var f signal.Estimate
	if floor != nil {
		f = signal.BandPower(floor.Spectrum, low, high, floor.gaps)
	}
	return m.root(c, ".band", "V", math.Sqrt(low*high), signal.BandPower(n.Spectrum, low, high, n.gaps), f, floor != nil)
}

func (m *NoiseFloor) density(c *Capture, n, floor *noiseSpectrum, at quantity.Frequency) Reading {
	total, ok := signal.Density(n.Spectrum, float64(at), n.gaps)
	var f signal.Estimate
	if ok && floor != nil {
		f, ok = signal.Density(floor.Spectrum, float64(at), floor.gaps)
	}
	if !ok {
		return Reading{Name: c.Step + densitySuffix(at), Unit: "V/√Hz",
			Missing: fmt.Sprintf("the record of %.3g s has fewer than %d spectral lines around %v: record longer", n.Seconds, signal.MinLines, at)}
	}
	return m.root(c, densitySuffix(at), "V/√Hz", float64(at), total, f, floor != nil)
}

// mainsReading is the hum. The interval of its power (m ± k·u) is turned into one of its
// effective value, whose middle is the reading: where the lines do not stand out of the noise,
// the interval reaches down to zero and says up to how much there may be.
func (m *NoiseFloor) mainsReading(c *Capture, n *noiseSpectrum) Reading {
	r := Reading{Name: c.Step + ".mains", Unit: "V"}
	k := CoverageFactor(0)
	high := math.Sqrt(math.Max(n.mains+k*n.mainsSigma, 0.1*n.mainsSigma))
	low := math.Sqrt(math.Max(n.mains-k*n.mainsSigma, 0))
	r.Value = (low + high) / 2
	r.Budget = Combine(append([]Component{{"noise under the mains lines", (high - low) / 2 / k, 0}}, c.levelComponents(m.role(), r.Value, float64(m.Mains))...)...)
	if n.mains < 2*n.mainsSigma {
		r.Notes = append(r.Notes, "the mains lines do not stand out of the noise")
	}
	return r
}

func (m *NoiseFloor) corner(c *Capture, n, floor *noiseSpectrum) Reading {
	r := Reading{Name: c.Step + ".corner", Unit: "Hz"}
	low, high := float64(m.Band[0]), float64(m.Band[1])
	var under func(hz float64) float64
	if floor != nil {
		if f, ok := signal.FitCorner(floor.Spectrum, low, high, floor.gaps, nil); ok {
			under = func(hz float64) float64 { return f.White.Value * (1 + f.Corner.Value/hz) }
		}
	}
	fit, ok := signal.FitCorner(n.Spectrum, low, high, n.gaps, under)
	if !ok || fit.Corner.Value < 2*fit.Corner.Sigma {
		r.Missing = "no rise of the noise towards low frequencies can be told from white noise"
		return r
	}
	r.Value = fit.Corner.Value
	r.Budget = Combine(Component{"scatter of the noise itself (record length)", fit.Corner.Sigma, 0})
	return r
}

// figurePoints is about how many points a drawn spectrum has.
const figurePoints = 240

// figure thins the spectrum to steps that are even in log frequency.
func (m *NoiseFloor) figure(c *Capture, n *noiseSpectrum) Figure {
	f := Figure{Name: c.Step + ".spectrum", Title: "IF noise at the module's output", XUnit: "Hz", YUnit: "V/√Hz"}
	low, high := float64(m.Band[0])/2, math.Min(1.2*float64(m.Band[1]), float64(len(n.Power)-1)*n.Step)
	ratio := math.Pow(high/low, 1.0/figurePoints)
	k := max(1, n.Line(low))
	for edge := low * ratio; edge <= high*1.0001; edge *= ratio {
		sum, count, first := 0.0, 0, k
		for ; k < len(n.Power) && float64(k)*n.Step <= edge; k++ {
			sum += n.Power[k]
			count++
		}
		if count > 0 {
			f.Series = append(f.Series, [2]float64{(float64(first) + float64(count-1)/2) * n.Step, math.Sqrt(sum / float64(count))})
		}
	}
	return f
}
