package measure

import (
	"fmt"
	"math"

	"lotgate/station/signal"
)

// chopped is what the chopped channel says of the supply current in time.
type chopped struct {
	onset  float64 // s from the start of the record; the best guess
	sigma  float64 // s, its standard uncertainty
	late   float64 // s: how far from onset it may be at most
	period float64 // s
	// value is the fundamental's peak (fractions of full scale) from period to period, second the
	// time it stands for.
	value, second []float64
}

// onsetShare is how high, relative to the final step, the first sample is that counts as the
// onset: the edges of a record that a converter has filtered reach half of it.
const onsetShare = 0.35

// followChopper finds the chopper's phase in the last part of a record, where the current is steady,
// follows it back to the current's onset, and demodulates each period in between.
func followChopper(s Signal, hz float64) (chopped, *Void) {
	silent := &Void{"silent", "no supply current was seen to come on", "check the sense cable, the chopper and the supply's switch"}
	n := len(s.Samples)
	tail := s.Samples[n-n/3:]
	if 10*hz > s.Rate || float64(len(tail))*hz/s.Rate < 20 {
		return chopped{}, &Void{"chopper", fmt.Sprintf("a chopper of %.4g Hz cannot be followed in a third of %.2g s at a sample rate of %.0f Hz", hz, float64(n)/s.Rate, s.Rate),
			"lower the chopping frequency or record longer"}
	}
	hz = signal.StrongestNear(tail, s.Rate, hz, 0.03)
	fit, err := signal.FitDriven(tail, s.Rate, []float64{hz, 3 * hz}, nil)
	if err != nil {
		return chopped{}, silent
	}
	hz = fit.FrequencyHz[0]
	first, third := fit.Amplitude[0], fit.Amplitude[1]
	peak := math.Hypot(real(first), imag(first))
	// Noise before the onset stands for the whole record's.
	lead := s.Samples[:max(1, n/50)]
	if noise := math.Sqrt(meanSquareOf(lead)); peak < 20*noise || peak == 0 {
		return chopped{}, silent
	}
	if v := chopperVoid(peak, math.Hypot(real(third), imag(third)), 0, hz, hz); v != nil {
		return chopped{}, v
	}
	c := chopped{period: 1 / hz}
	// The connected half is the one around the fundamental's crest.
	crest := (float64(n-len(tail))+float64(len(tail)-1)/2)/s.Rate - math.Atan2(imag(first), real(first))/(2*math.Pi*hz)
	step := math.Pi / 2 * peak // of the square wave, from its fundamental (2/π)
	base := 0.0
	for _, v := range lead {
		base += v / float64(len(lead))
	}
	seen := -1
	for i, v := range s.Samples {
		if v-base > onsetShare*step {
			seen = i
			break
		}
	}
	if seen < n/50 || seen > n-len(tail) {
		return chopped{}, silent
	}
	c.place(float64(seen)/s.Rate, crest, s.Rate)
	c.demodulate(s)
	return c, nil
}

func meanSquareOf(x []float64) float64 {
	mean, square := 0.0, 0.0
	for _, v := range x {
		mean += v / float64(len(x))
	}
	for _, v := range x {
		square += (v - mean) * (v - mean) / float64(len(x))
	}
	return square
}

// place says when the current came on, for a first sample that shows it. Where that is the first of a
// connected half, it may have come at any time of the half before.
func (c *chopped) place(seen, crest, rate float64) {
	sample := 1 / rate
	intoHalf := math.Mod(seen-crest+c.period/4, c.period)
	if intoHalf < 0 {
		intoHalf += c.period
	}
	if intoHalf > c.period*3/4 { // a sample that belongs to the edge that follows
		intoHalf -= c.period
	}
	if intoHalf < 1.5*sample {
		// From a sample before the last falling edge, too late to be seen, to where it is no edge.
		low, high := seen-intoHalf-c.period/2-sample, seen-intoHalf+1.5*sample
		c.onset, c.sigma, c.late = (low+high)/2, (high-low)/math.Sqrt(12), (high-low)/2
		return
	}
	c.onset, c.sigma, c.late = seen-sample/2, sample/math.Sqrt(3), sample
}

// window is how many periods of the chopper one value is worked out of. Under a Hann window of four
// periods what is steady and all harmonics fall on zeros, and a decay with the time constant τ is
// smoothed by 1 + (1.8 ms/τ)²/2 at 400 Hz only.
const window = 4

// demodulate works out the fundamental's size period by period.
func (c *chopped) demodulate(s Signal) {
	half := window / 2 * c.period
	for middle := c.onset + c.late + half; ; middle += c.period {
		low, high := int(math.Ceil((middle-half)*s.Rate)), int((middle+half)*s.Rate)
		if high >= len(s.Samples) {
			return
		}
		var cosine, sine, weight float64
		for i := low; i <= high; i++ {
			t := float64(i)/s.Rate - middle
			w := 0.5 + 0.5*math.Cos(math.Pi*t/half)
			sin, cos := math.Sincos(2 * math.Pi * t / c.period)
			cosine += w * s.Samples[i] * cos
			sine += w * s.Samples[i] * sin
			weight += w / 2
		}
		c.value, c.second = append(c.value, math.Hypot(cosine, sine)/weight), append(c.second, middle)
	}
}
