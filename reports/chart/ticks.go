package chart

import (
	"math"
	"strconv"

	"gonum.org/v1/plot"

	"lotgate/limits/quantity"
)

// decades are the ticks of a logarithmic axis: each power of ten with its label, 2 and
// 5 labelled too where there are fewer than two powers of ten, the rest unlabelled.
type decades struct{ label func(float64) string }

// Ticks gives the ticks between min and max, both above 0.
func (d decades) Ticks(min, max float64) []plot.Tick {
	const slack = 1 + 1e-9
	first, last := math.Floor(math.Log10(min/slack)), math.Ceil(math.Log10(max*slack))
	powers := 0
	for p := first; p <= last; p++ {
		if v := math.Pow(10, p); v >= min/slack && v <= max*slack {
			powers++
		}
	}
	var ticks []plot.Tick
	for p := first; p <= last; p++ {
		for k := 1.0; k < 10; k++ {
			v := tenTimes(k, p)
			if v < min/slack || v > max*slack {
				continue
			}
			t := plot.Tick{Value: v}
			if k == 1 || powers < 2 && (k == 2 || k == 5) {
				t.Label = d.label(v)
			}
			ticks = append(ticks, t)
		}
	}
	return ticks
}

// tenTimes is k·10^p, divided where p is negative so that 2e-3 is the nearest float64.
func tenTimes(k, p float64) float64 {
	if p < 0 {
		return k / math.Pow(10, -p)
	}
	return k * math.Pow(10, p)
}

func hertz(v float64) string { return quantity.Print(v, quantity.Hertz) }

// even are ticks at whole multiples of a round step, four to eight of them.
type even struct{}

// Ticks gives the ticks between min and max.
func (even) Ticks(min, max float64) []plot.Tick {
	step := roundStep((max - min) / 6)
	var ticks []plot.Tick
	for k := math.Ceil(min/step - 1e-9); k*step <= max+1e-9*step; k++ {
		ticks = append(ticks, plot.Tick{Value: k * step, Label: signed(k * step)})
	}
	return ticks
}

// roundStep is the 1, 2 or 5 times a power of ten at or above a length.
func roundStep(least float64) float64 {
	p := math.Floor(math.Log10(least))
	for _, k := range []float64{1, 2, 5} {
		if s := tenTimes(k, p); s >= least*(1-1e-9) {
			return s
		}
	}
	return tenTimes(1, p+1)
}

// signed prints a number with a true minus.
func signed(v float64) string {
	s := strconv.FormatFloat(math.Abs(v), 'g', 6, 64)
	if v < 0 && s != "0" {
		return "−" + s
	}
	return s
}
