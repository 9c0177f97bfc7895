package signal

import "math"

// OddLines picks up to count lines of a record (multiples of 1/seconds), spread evenly
// over the logarithm of frequency between two frequencies, all odd, at least apart
// lines from each other and clearHz away from every multiple of mainsHz (0 for none).
// Odd lines only: products of even order of a mixer then fall between the tones
// (R. Pintelon & J. Schoukens, System Identification, 2nd ed. 2012, ch. 5).
func OddLines(seconds, lowHz, highHz float64, count, apart int, mainsHz, clearHz float64) []int {
	var out []int
	last := -apart
	for i := range count {
		share := 0.0
		if count > 1 {
			share = float64(i) / float64(count-1)
		}
		want := lowHz * math.Pow(highHz/lowHz, share) * seconds
		line := nearestOdd(want)
		for tries := 0; tries < 4000; tries++ {
			candidate := spiral(line, tries)
			if candidate < last+apart || candidate < 1 {
				continue
			}
			hz := float64(candidate) / seconds
			if i == 0 && hz < lowHz {
				continue
			}
			if mainsHz > 0 && math.Abs(hz-mainsHz*math.Max(1, math.Round(hz/mainsHz))) < clearHz {
				continue
			}
			out = append(out, candidate)
			last = candidate
			break
		}
	}
	return out
}

func nearestOdd(v float64) int { return 2*int(math.Round((v-1)/2)) + 1 }

// spiral visits odd numbers around a start: 0, +2, −2, +4, −4 …
func spiral(start, step int) int {
	if step%2 == 1 {
		return start + step + 1
	}
	return start - step
}

// SchroederPhases are the phases, rad, that keep the crest factor of a multitone with
// the given amplitudes low: φ_n = −2π·Σ_{l<n}(n−l)·p_l with p the relative powers
// (M.R. Schroeder, IEEE Trans. IT-16 (1970) 85, eq. 11), for tones of any spacing
// read as a sweep whose time at each tone is in proportion to its power.
func SchroederPhases(lines []int, amplitude []float64) []float64 {
	total := 0.0
	for _, a := range amplitude {
		total += a * a
	}
	out := make([]float64, len(lines))
	passed, phase := 0.0, 0.0
	for k := 1; k < len(lines); k++ {
		passed += amplitude[k-1] * amplitude[k-1] / total
		phase -= 2 * math.Pi * passed * float64(lines[k]-lines[k-1])
		out[k] = math.Mod(phase, 2*math.Pi)
	}
	return out
}

// Multitone adds cosines: Σ a_k·cos(2π·line_k·n/period + φ_k) for n = 0…period−1.
func Multitone(lines []int, amplitude, phase []float64, period int) []float64 {
	out := make([]float64, period)
	for k, line := range lines {
		// The phase of a line repeats after the period: integer arithmetic keeps it exact.
		w := 2 * math.Pi / float64(period)
		for n := range out {
			out[n] += amplitude[k] * math.Cos(w*float64(line*n%period)+phase[k])
		}
	}
	return out
}

// Crest is the peak of a signal over its effective value; 0 for silence.
func Crest(x []float64) float64 {
	top := 0.0
	for _, v := range x {
		top = math.Max(top, math.Abs(v))
	}
	rms := math.Sqrt(meanSquare(x))
	if rms == 0 {
		return 0
	}
	return top / rms
}
