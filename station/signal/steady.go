package signal

import (
	"math"
	"sort"
	"sync"

	"gonum.org/v1/gonum/stat/distuv"
)

// Unsteady describes a piece of a record that is unlike the rest.
type Unsteady struct {
	Seconds       float64 // middle of the piece, from the record's start
	LowHz, HighHz float64 // octave in which it shows
	Ratio         float64 // its power over the median piece's
}

// falseAlarm is the probability that one piece in one octave of undisturbed Gaussian
// noise is called unsteady. Some 150 are looked at in a record, so that about one
// good record in 10 000 is taken again.
const falseAlarm = 1e-6

// FindUnsteady looks for a piece of a record of noise whose power, in some octave
// between two frequencies, stands out of the median of all pieces further than Gaussian
// noise does: power in a band is distributed as χ² with twice as many degrees of freedom
// as there are independent lines, so the ratio of extreme to median is known. ok is
// true where nothing stands out. Records shorter than four pieces are not judged.
func FindUnsteady(pieces []Spectrum, lowHz, highHz float64) (worst Unsteady, ok bool) {
	if len(pieces) < 4 {
		return worst, true
	}
	step := pieces[0].Step
	over := 0.0
	for low := lowHz; low < highHz; low *= 2 {
		high := math.Min(2*low, highHz)
		first, last := int(math.Ceil(low/step)), int(math.Floor(high/step))
		last = min(last, len(pieces[0].Power)-1)
		if last < first || first < 1 {
			continue
		}
		power := make([]float64, len(pieces))
		for i, p := range pieces {
			for k := first; k <= last; k++ {
				power[i] += p.Power[k]
			}
		}
		dof := 2 * (1 + float64(last-first)/pieces[0].Spread)
		sorted := append([]float64(nil), power...)
		sort.Float64s(sorted)
		median := sorted[len(sorted)/2]
		bound := steadyBound(dof)
		for i, v := range power {
			if ratio := v / median; median > 0 && ratio > bound && ratio/bound > over {
				over = ratio / bound
				worst = Unsteady{Seconds: (float64(i)/2 + 0.5) * pieces[0].Seconds, LowHz: low, HighHz: high, Ratio: ratio}
			}
		}
	}
	return worst, over == 0
}

// bounds keeps the bounds worked out before.
var bounds sync.Map // float64 → float64

// steadyBound is how far the strongest piece may stand above the median one, with room for
// the median's own scatter.
func steadyBound(dof float64) float64 {
	if b, ok := bounds.Load(dof); ok {
		return b.(float64)
	}
	chi := distuv.ChiSquared{K: dof}
	b := chi.Quantile(1-falseAlarm) / chi.Quantile(0.5) * 1.3
	bounds.Store(dof, b)
	return b
}

// Health is what a raw record looks like before anything is made of it.
type Health struct {
	AtFullScale int     // samples at or beyond full scale
	StepRMS     float64 // effective value of white noise that has the record's third differences, fraction of full scale
	GapStart    float64 // s; where the first gap is, −1 for none
	GapSeconds  float64
}

// fullScaleShare is where a sample counts as clipped: converters saturate a few steps
// below their nominal full scale.
const fullScaleShare = 0.9995

// gapShare is how far the power of the third differences of a 4 ms piece must fall
// below the median piece's to be a gap filled with silence. Third differences take slow tones
// out, whose turning points would look silent. For noise of 32 samples the chance is
// below 1e-15 a piece.
const gapShare = 0.01

// Look passes once over a raw record: overload, silence, and gaps that the sound
// system filled with silence or dither.
func Look(x []float64, rate float64) Health {
	h := Health{GapStart: -1}
	if len(x) == 0 {
		return h
	}
	block := max(32, int(rate/250))
	steps := make([]float64, 0, len(x)/block)
	a, b, c := x[0], x[0], x[0] // the three samples before
	high, low, total := x[0], x[0], 0.0
	for start := 0; start < len(x); start += block {
		part := x[start:min(start+block, len(x))]
		full := len(part) == block
		// Two samples at a time, with a sum of their own each: one sum would be waited for.
		var even, odd float64
		for len(part) >= 2 {
			v, w := part[0], part[1]
			d, e := v-c+3*(b-a), w-b+3*(a-v)
			a, b, c = w, v, a
			even += d * d
			odd += e * e
			if v > high {
				high = v
			} else if v < low {
				low = v
			}
			if w > high {
				high = w
			} else if w < low {
				low = w
			}
			part = part[2:]
		}
		if len(part) == 1 {
			v := part[0]
			d := v - c + 3*(b-a)
			a, b, c = v, a, b
			even += d * d
			high, low = math.Max(high, v), math.Min(low, v)
		}
		d2 := even + odd
		total += d2
		if full {
			steps = append(steps, d2)
		}
	}
	h.StepRMS = math.Sqrt(total / float64(len(x)) / 20)
	if high >= fullScaleShare || low <= -fullScaleShare {
		for _, v := range x {
			if math.Abs(v) >= fullScaleShare {
				h.AtFullScale++
			}
		}
	}
	findGap(&h, steps, float64(block)/rate)
	return h
}

func findGap(h *Health, steps []float64, seconds float64) {
	if len(steps) < 8 {
		return
	}
	sorted := append([]float64(nil), steps...)
	sort.Float64s(sorted)
	bound := sorted[len(sorted)/2] * gapShare
	for i, v := range steps {
		if v < bound {
			if h.GapStart < 0 {
				h.GapStart = float64(i) * seconds
			}
			h.GapSeconds += seconds
		} else if h.GapStart >= 0 {
			return
		}
	}
}
