package signal

import "math"

// QuietLines marks the lines of a residual that show noise: away from the tones that were
// fitted (by 0.8 lines) and from the mains and its harmonics (by 1.5; 0 Hz for none).
func QuietLines(residual Spectrum, tonesHz []float64, mainsHz float64) []bool {
	quiet := make([]bool, len(residual.Power))
	for k := 2; k < len(quiet)-1; k++ {
		quiet[k] = true
	}
	loud := func(hz, lines float64) {
		at := hz / residual.Step
		for k := max(0, int(math.Ceil(at-lines))); k < len(quiet) && float64(k) < at+lines; k++ {
			quiet[k] = false
		}
	}
	for _, hz := range tonesHz {
		loud(hz, 0.8)
	}
	for hz := mainsHz; mainsHz > 0 && hz < float64(len(quiet))*residual.Step; hz += mainsHz {
		loud(hz, 1.5)
	}
	return quiet
}

// NoiseAround is the power density of a residual around a frequency: mean over the quiet lines
// within about a sixth of an octave to either side, or so many further that there are want of
// them. Scatter and degrees of freedom come with it.
func NoiseAround(residual Spectrum, quiet []bool, hz float64, want int) Estimate {
	for half := math.Max(hz*0.12, 6*residual.Step); half < hz+float64(8*want)*residual.Step; half *= 1.3 {
		sum, n := 0.0, 0
		first := max(0, int(math.Ceil((hz-half)/residual.Step)))
		last := min(len(quiet)-1, int((hz+half)/residual.Step))
		for k := first; k <= last; k++ {
			if quiet[k] {
				sum += residual.Power[k]
				n++
			}
		}
		if n >= want {
			return Estimate{Value: sum / float64(n), Sigma: sum / float64(n) * math.Sqrt(residual.Spread/float64(n)), Dof: 2 * float64(n) / residual.Spread}
		}
	}
	return Estimate{}
}

// StrongestNear finds the strongest tone within a relative distance of a frequency: the
// controller's clock is not the sound interface's. Steps of a quarter line.
func StrongestNear(x []float64, rate, hz, relative float64) float64 {
	step := rate / float64(len(x)) / 4
	span := int(hz * relative / step)
	w := make([]float64, 0, 2*span+1)
	for i := -span; i <= span; i++ {
		w = append(w, 2*math.Pi*(hz+float64(i)*step)/rate)
	}
	best := 0
	strengths := Strengths(x, w)
	for i, v := range strengths {
		if v > strengths[best] {
			best = i
		}
	}
	return w[best] * rate / (2 * math.Pi)
}
