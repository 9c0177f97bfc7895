package measure

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/tolerance"
)

const (
	rate    = 8000.0
	carrier = 10.525e9
	lambda  = SpeedOfLight / carrier
)

// ifSignal is the mixer's formula, sampled: V0·cos(φ0 − 4π(x+p)/λ) less its mean, through a gain of
// 200, with noise of a density at the module's output.
func ifSignal(seconds, v0, phase, position float64, x func(t float64) float64, density float64, r *rand.Rand) Signal {
	out := make([]float64, int(seconds*rate))
	mean := 0.0
	for i := range out {
		out[i] = 200 * v0 * math.Cos(phase-4*math.Pi/lambda*(x(float64(i)/rate)+position))
		mean += out[i]
	}
	mean /= float64(len(out))
	for i := range out {
		out[i] += -mean + 200*density*math.Sqrt(rate/2)*r.NormFloat64()
	}
	return Signal{out, rate}
}

func conditions(step, kind string) Conditions {
	return Conditions{Step: step, Measure: kind, Carrier: carrier, Inputs: map[string]int{"if": 1}, FullScale: map[string]quantity.Voltage{"if": 1},
		Gain: map[string]quantity.Ratio{"if": 200}, Uncertainty: map[string]tolerance.Tolerance{"full_scale": tolerance.Percent(0.004)}}
}

func find(t *testing.T, r Result, name string) Reading {
	t.Helper()
	for _, x := range r.Readings {
		if x.Name == name {
			return x
		}
	}
	t.Fatalf("no reading %s in %+v", name, r)
	return Reading{}
}

// TestSensitivityMethods recovers V0 from the mixer's formula by every method, at phases all
// round the circle, nulls among them.
func TestSensitivityMethods(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 1))
	const v0, density = 4e-3, 60e-9
	tone := func(x float64) func(float64) float64 {
		return func(t float64) float64 { return x * math.Cos(2*math.Pi*40*t+0.7) }
	}
	for k := range 16 {
		phase := 2 * math.Pi * float64(k) / 16
		for _, m := range []struct {
			name         string
			method       string
			displacement float64
			positions    []float64
		}{
			{"two positions", "positions", 0.2e-3, []float64{0, lambda / 8}},
			{"three positions", "positions", 0.2e-3, []float64{-lambda / 8, 0, lambda / 8}},
			{"harmonics", "harmonics", 2e-3, []float64{0}},
			{"single", "single", 0.2e-3, []float64{0}},
		} {
			c := &Capture{Conditions: conditions("s", "sensitivity")}
			angle := quantity.Angle(phase)
			c.Target = &Motion{Tone: 40, Displacement: quantity.Length(m.displacement), Standoff: 0.22, Phase: &angle}
			for _, p := range m.positions {
				fall := math.Pow(0.22/(0.22+p), 2)
				c.Signals = append(c.Signals, map[string]Signal{"if": ifSignal(1, v0*fall, phase, p, tone(m.displacement), density, r)})
				c.Parts = append(c.Parts, Part{Position: quantity.Length(p)})
			}
			parameters, _ := New("sensitivity")
			s := parameters.(*Sensitivity)
			s.Method = m.method
			result, err := s.Evaluate(c)
			if err != nil {
				t.Fatalf("%s at φ0 = %.2f: %v", m.name, phase, err)
			}
			echo := find(t, result, "s.echo")
			if m.method == "single" && math.Abs(math.Sin(phase)) < LeastSine {
				if echo.Void == nil || echo.Void.Code != "null" {
					t.Errorf("single at φ0 = %.2f near a null gave %+v", phase, echo)
				}
				continue
			}
			if echo.Void != nil || math.Abs(echo.Value-v0) > 1.5*echo.Budget.Expanded {
				t.Errorf("%s at φ0 = %.2f: %s, truth 4 mV (%v)", m.name, phase, echo.Quantity(), echo.Void)
			}
			if u := echo.Budget.Expanded / v0; u > 0.02 {
				t.Errorf("%s at φ0 = %.2f: U is %.1f %%", m.name, phase, 100*u)
			}
			if m.method == "harmonics" {
				d := find(t, result, "s.displacement")
				if d.Missing == "" && math.Abs(d.Value-2e-3) > 2*d.Budget.Expanded {
					t.Errorf("harmonics at φ0 = %.2f: displacement %s, truth 2 mm", phase, d.Quantity())
				}
			}
		}
	}
}

// TestSquareWaveGivesTheCurrent: a square wave between 0 and I·R·G has the fundamental (2/π)·I·R·G
// and a third harmonic of a third of it (Fourier series), whatever the controller's clock.
func TestSquareWaveGivesTheCurrent(t *testing.T) {
	r := rand.New(rand.NewPCG(22, 1))
	chopped := func(hz, third float64) *Capture {
		x := make([]float64, 4000)
		for i := range x {
			for k := 1.0; k*hz < 0.46*rate; k += 2 {
				a := 2 / (math.Pi * k) * 0.031 * 2 * 10
				if k == 3 {
					a *= third
				}
				x[i] += a * math.Sin(2*math.Pi*k*hz*float64(i)/rate)
			}
			x[i] += 1e-5 * r.NormFloat64()
		}
		c := &Capture{Conditions: Conditions{Step: "i", FullScale: map[string]quantity.Voltage{"sense": 1}, Inputs: map[string]int{"sense": 1},
			Shunt: &Shunt{Resistance: 2, Gain: 10, Chop: 400}}, Signals: []map[string]Signal{{"sense": {x, rate}}}}
		return c
	}
	m, _ := New("supply_current")
	for _, hz := range []float64{400, 400.014, 396, 403.3} {
		result, err := m.Evaluate(chopped(hz, 1))
		if err != nil {
			t.Fatal(err)
		}
		i := find(t, result, "i")
		if i.Void != nil || math.Abs(i.Value/0.031-1) > 2e-4 {
			t.Errorf("chopped at %g Hz: %v, %v", hz, i.Value, i.Void)
		}
	}
	for _, third := range []float64{0.2, 0.9, 1.1} {
		result, err := m.Evaluate(chopped(400, third))
		if err != nil {
			t.Fatal(err)
		}
		if i := find(t, result, "i"); i.Void == nil || i.Void.Code != "chopper" {
			t.Errorf("a third harmonic of %g times its size gave %+v", third, i)
		}
	}
}

// TestResponseMethods measures a flat module by multitone and by single tones: 0 dB everywhere.
func TestResponseMethods(t *testing.T) {
	r := rand.New(rand.NewPCG(23, 1))
	parameters, _ := New("response")
	m := parameters.(*Response)
	bench := Bench{Module: Module{Carrier: carrier}, SampleRate: rate, Standoff: 0.22, Largest: 1e-3, LargestDrive: 4, Travel: 0.03,
		PerVolt: func(f quantity.Frequency) quantity.DisplacementPerVolt {
			return quantity.DisplacementPerVolt(0.5e-3 / math.Max(1, float64(f*f)/65/65))
		}}
	for _, method := range []string{"multitone", "stepped"} {
		m.Method, m.Acquire = method, 4
		if method == "stepped" {
			m.Tones, m.Acquire = 9, 1
		}
		schedule, err := m.Prepare(bench)
		if err != nil {
			t.Fatal(err)
		}
		c := &Capture{Conditions: schedule.Conditions}
		base := conditions("r", "response")
		c.Step, c.Carrier, c.FullScale, c.Gain, c.Inputs = base.Step, base.Carrier, base.FullScale, base.Gain, base.Inputs
		for _, a := range schedule.Acquisitions {
			x := func(t float64) float64 {
				s := 0.0
				for _, tone := range a.Tones {
					s += float64(tone.Displacement) * math.Cos(2*math.Pi*float64(tone.Frequency)*t+float64(tone.Phase))
				}
				return s
			}
			c.Signals = append(c.Signals, map[string]Signal{"if": ifSignal(float64(a.Frames)/rate, 4e-3, 1.2, 0, x, 20e-9, r)})
		}
		result, err := m.Evaluate(c)
		if err != nil {
			t.Fatal(err)
		}
		curve := find(t, result, "r.curve")
		if len(curve.Points) < m.Tones-1 {
			t.Fatalf("%s: only %d points", method, len(curve.Points))
		}
		outside := 0
		for _, p := range curve.Points {
			if math.Abs(p.Value) > p.Expanded+0.005 {
				outside++
			}
		}
		if outside > len(curve.Points)/6 {
			t.Errorf("%s: %d of %d points are off: %v", method, outside, len(curve.Points), curve.Points)
		}
		if e := find(t, result, "r.upper_edge"); !strings.Contains(e.Missing, "above the band") {
			t.Errorf("%s: a flat module has an upper edge: %+v", method, e)
		}
	}
}

// TestBadCapturesAreVoid damages a good record in each way that is looked for.
func TestBadCapturesAreVoid(t *testing.T) {
	r := rand.New(rand.NewPCG(24, 1))
	tone := func(t float64) float64 { return 0.2e-3 * math.Cos(2*math.Pi*40*t) }
	for _, c := range []struct {
		code   string
		damage func(x []float64) []float64
	}{
		{"overload", func(x []float64) []float64 {
			for i := range x {
				x[i] = math.Max(-1, math.Min(1, 50*x[i]))
			}
			return x
		}},
		{"silent", func(x []float64) []float64 { return make([]float64, len(x)) }},
		{"dropout", func(x []float64) []float64 { // samples lost: the tone's phase steps
			copy(x[3000:], x[3060:])
			return x
		}},
		{"dropout", func(x []float64) []float64 { // a gap of silence
			for i := 5000; i < 5200; i++ {
				x[i] = 0
			}
			return x
		}},
		{"disturbance", func(x []float64) []float64 {
			for i := range x {
				d := (float64(i)/rate - 0.5) / 0.08
				x[i] += 0.02 * math.Exp(-d*d/2) * math.Cos(2*math.Pi*130*float64(i)/rate)
			}
			return x
		}},
		{"clock", func(x []float64) []float64 {
			y := make([]float64, len(x))
			for i := range y { // played 0.1 % too fast
				at := math.Min(float64(i)*1.001, float64(len(x)-2))
				k := int(at)
				y[i] = x[k] + (at-float64(k))*(x[k+1]-x[k])
			}
			return y
		}},
	} {
		cap := &Capture{Conditions: conditions("s", "sensitivity")}
		cap.Target = &Motion{Tone: 40, Displacement: 0.2e-3, Standoff: 0.22}
		for _, p := range []float64{0, lambda / 8} {
			s := ifSignal(1, 4e-3, 0.8, p, tone, 60e-9, r)
			cap.Signals = append(cap.Signals, map[string]Signal{"if": s})
			cap.Parts = append(cap.Parts, Part{Position: quantity.Length(p)})
		}
		s := cap.Signals[1]["if"]
		s.Samples = c.damage(s.Samples)
		cap.Signals[1]["if"] = s
		m, _ := New("sensitivity")
		result, err := m.Evaluate(cap)
		if err != nil {
			t.Fatal(err)
		}
		echo := find(t, result, "s.echo")
		if echo.Void == nil || echo.Void.Code != c.code || echo.Void.Action == "" {
			t.Errorf("%s: %+v, %v", c.code, echo.Void, echo.Quantity())
		}
	}
}

func TestCheckRefuses(t *testing.T) {
	module := Module{Kind: "single IF", Carrier: carrier}
	for _, c := range []struct {
		kind string
		set  func(m Measurement)
		want string
	}{
		{"supply_current", func(m Measurement) { m.(*SupplyCurrent).Acquire = 0.01 }, "write 0.05 s to 60 s"},
		{"noise_floor", func(m Measurement) { m.(*NoiseFloor).Band = []quantity.Frequency{1000, 10} }, "write [lower edge, upper edge]"},
		{"noise_floor", func(m Measurement) { m.(*NoiseFloor).Acquire = 0.5 }, "record at least 1 s"},
		{"sensitivity", func(m Measurement) {}, "add tone: 40 Hz and displacement: 0.20 mm"},
		{"sensitivity", func(m Measurement) { s := m.(*Sensitivity); s.Tone, s.Displacement = 40, 0.02 }, "beyond the first maximum of J1"},
		{"sensitivity", func(m Measurement) { s := m.(*Sensitivity); s.Tone, s.Displacement, s.Method = 40, 2e-4, "harmonics" }, "write a displacement of at least 1.133"},
		{"sensitivity", func(m Measurement) { s := m.(*Sensitivity); s.Tone, s.Displacement, s.Positions = 40, 2e-4, 5 }, "write 2 or 3"},
		{"pushing", func(m Measurement) { m.(*Pushing).High = 4.8 }, "write high at least 100 mV above low"},
		{"pushing", func(m Measurement) { m.(*Pushing).Listen = 0.5 }, "record at least 1 s"},
		{"carrier", func(m Measurement) { m.(*Carrier).Positions = 4 }, "write 8 to 500"},
		{"carrier", func(m Measurement) { m.(*Carrier).Air = 1.33 }, "write 1.0002 to 1.0005"},
		{"distortion", func(m Measurement) { m.(*Distortion).Positions = 7 }, "write 8 to 100"},
		{"distortion", func(m Measurement) { m.(*Distortion).Displacement = 2e-3 }, "can be told up to 0.6"},
		{"quadrature", func(m Measurement) {}, "write module: {kind: two IF, …}"},
		{"sensitivity", func(m Measurement) { s := m.(*Sensitivity); s.Tone, s.Displacement, s.Channel = 40, 2e-4, Quadrature }, "or channel: if"},
		{"startup", func(m Measurement) { m.(*Startup).Acquire = 0.1 }, "write 0.2 s to 60 s"},
		{"startup", func(m Measurement) { m.(*Startup).Share = 0.6 }, "write less than 50 %"},
		{"startup", func(m Measurement) { m.(*Startup).Coupling = 30 }, "at most 20 Hz"},
		{"supply_rejection", func(m Measurement) { m.(*SupplyRejection).Frequency = 100 }, "too near a harmonic of the mains"},
		{"supply_rejection", func(m Measurement) { m.(*SupplyRejection).Level = 2 }, "at most 1 V"},
		{"supply_rejection", func(m Measurement) { m.(*SupplyRejection).Frequency = 5 }, "fewer than 16 periods"},
		{"response", func(m Measurement) { m.(*Response).Tones = 2 }, "write 5 to 200"},
		{"response", func(m Measurement) { m.(*Response).Reference = 5 }, "lies outside the band"},
		{"response", func(m Measurement) { m.(*Response).Acquire = 0.5 }, "record at least 2 s"},
	} {
		m, err := New(c.kind)
		if err != nil {
			t.Fatal(err)
		}
		c.set(m)
		if err := m.Check(module); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v does not say %q", c.kind, err, c.want)
		}
	}
	if _, err := New("magic"); err == nil || !strings.Contains(err.Error(), "supply_current") {
		t.Errorf("an unknown measurement gave %v", err)
	}
}
