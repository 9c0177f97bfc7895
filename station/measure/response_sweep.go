package measure

import (
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/dsp/fourier"

	"lotgate/limits/quantity"
)

// sweepRest is the share of the record that is kept still before and after the sweep,
// so that the latency and the decay fit in.
const sweepRest = 0.08

// sweepSchedule plays one logarithmic sweep. The drive has one amplitude, so the motion
// follows the target's own displacement per volt.
func (m *Response) sweepSchedule(c Conditions, b Bench, tones []Tone, frames int) (Schedule, error) {
	seconds := float64(frames) / float64(b.SampleRate)
	drive := 0.9 * float64(b.LargestDrive)
	for _, t := range tones {
		per := float64(b.PerVolt(t.Frequency))
		drive = math.Min(drive, math.Min(float64(m.Largest), float64(b.Largest))/per)
	}
	for i := range tones {
		tones[i].Displacement = quantity.Length(drive * float64(b.PerVolt(tones[i].Frequency)))
		tones[i].Phase = 0
	}
	// The sweep reaches a sixth of an octave beyond the outer tones: its ends ring.
	sweep := Sweep{From: tones[0].Frequency / 1.12, To: tones[len(tones)-1].Frequency * 1.12,
		Duration: quantity.Time(seconds * (1 - 3*sweepRest)), Lead: quantity.Time(seconds * sweepRest)}
	if float64(sweep.To) > 0.45*float64(b.SampleRate) {
		return Schedule{}, fmt.Errorf("the sweep's end %v is too near half the sample rate", sweep.To)
	}
	c.Tones, c.Sweep = tones, &sweep
	return Schedule{Conditions: c, Acquisitions: []Acquisition{{What: "response, sweep", Roles: []string{m.role()}, Frames: frames, Tones: tones, Sweep: &sweep, Settle: 0.3}}}, nil
}

// SweepSamples is a logarithmic sweep of amplitude one after its lead: sin of the phase
// 2π·f1·T/ln(f2/f1)·(exp(t/T·ln(f2/f1)) − 1) (A. Farina, AES 108th convention 2000,
// preprint 5093, eq. 2), faded in and out over a fiftieth of its length.
func SweepSamples(s Sweep, rate float64, frames int) []float64 {
	out := make([]float64, frames)
	lead, count := int(math.Round(float64(s.Lead)*rate)), int(math.Round(float64(s.Duration)*rate))
	ratio := math.Log(float64(s.To) / float64(s.From))
	fade := count / 50
	for n := 0; n < count && lead+n < frames; n++ {
		t := float64(n) / rate
		v := math.Sin(2 * math.Pi * float64(s.From) * float64(s.Duration) / ratio * (math.Exp(t/float64(s.Duration)*ratio) - 1))
		if edge := min(n, count-1-n); edge < fade {
			v *= 0.5 - 0.5*math.Cos(math.Pi*float64(edge)/float64(fade))
		}
		out[lead+n] = v
	}
	return out
}

// fromSweep divides the record's spectrum by the sweep's. Around each tone's frequency
// the quotient is a short impulse response's: over a narrow span of lines it is a constant
// and a slope, turned by the latency; what the straight line leaves is the scatter.
func (m *Response) fromSweep(c *Capture) ([]toneLevel, *Void, error) {
	s, err := c.channel(0, m.role())
	if err != nil {
		return nil, nil, err
	}
	volts, err := c.volts(m.role())
	if err != nil {
		return nil, nil, err
	}
	if len(c.Tones) == 0 {
		return nil, nil, fmt.Errorf("step %s: the sweep's displacement is not given: add tones: [{frequency: …, displacement: …}, …]", c.Step)
	}
	if v := check(s, m.role()); v != nil {
		return nil, v, nil
	}
	n := len(s.Samples)
	fft := fourier.NewFFT(n)
	played := fft.Coefficients(nil, SweepSamples(*c.Sweep, s.Rate, n))
	heard := fft.Coefficients(nil, s.Samples)
	step := s.Rate / float64(n)
	delay := latency(played, heard, step, float64(c.Sweep.From), float64(c.Sweep.To))
	var out []toneLevel
	for _, t := range c.Tones {
		hz := float64(t.Frequency)
		half := math.Max(0.03*hz, 4*step)
		value, sigma, dof := localTransfer(played, heard, step, delay, hz, half)
		made := 2 * math.J1(phaseIndex(float64(t.Displacement), c.Carrier))
		gain, gainU := c.gainAt(m.role(), hz)
		scale := volts / gain
		out = append(out, toneLevel{hz, value * scale / made, sigma * scale / made, dof, value * scale, sigma * scale, c.shape(t, gainU)})
	}
	return out, nil, nil
}

// latency is the delay, s, between the two spectra: the slope of the phase over the band,
// weighted by power, from line to line.
func latency(played, heard []complex128, step, lowHz, highHz float64) float64 {
	var sum complex128
	for k := int(lowHz / step); k < int(highHz/step) && k+1 < len(played); k++ {
		a, b := heard[k]*cmplx.Conj(played[k]), heard[k+1]*cmplx.Conj(played[k+1])
		sum += b * cmplx.Conj(a)
	}
	return -cmplx.Phase(sum) / (2 * math.Pi * step)
}

// localTransfer fits heard/played around a frequency by a complex straight line, each
// line weighted by what was played there.
func localTransfer(played, heard []complex128, step, delay, hz, half float64) (value, sigma, dof float64) {
	first, last := int(math.Ceil((hz-half)/step)), int((hz+half)/step)
	var s0, s1, s2 float64
	var r0, r1 complex128
	at := func(k int) (x float64, w float64, y complex128) {
		f := float64(k) * step
		w = real(played[k])*real(played[k]) + imag(played[k])*imag(played[k])
		return (f - hz) / half, w, heard[k] / played[k] * cmplx.Exp(complex(0, 2*math.Pi*f*delay))
	}
	for k := first; k <= last; k++ {
		x, w, y := at(k)
		s0, s1, s2 = s0+w, s1+w*x, s2+w*x*x
		r0, r1 = r0+complex(w, 0)*y, r1+complex(w*x, 0)*y
	}
	det := s0*s2 - s1*s1
	a := (complex(s2, 0)*r0 - complex(s1, 0)*r1) / complex(det, 0)
	b := (complex(s0, 0)*r1 - complex(s1, 0)*r0) / complex(det, 0)
	rest := 0.0
	for k := first; k <= last; k++ {
		x, w, y := at(k)
		d := cmplx.Abs(y - a - complex(x, 0)*b)
		rest += w * d * d
	}
	dof = float64(2 * (last - first + 1 - 2))
	return cmplx.Abs(a), math.Sqrt(rest / dof * s2 / det), dof
}
