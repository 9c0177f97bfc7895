package signal

import (
	"math"
)

// Estimate is a number with its standard uncertainty and degrees of freedom (0
// stands for infinitely many).
type Estimate struct {
	Value, Sigma, Dof float64
}

// A Gap is a stretch of a spectrum that is left out, Hz.
type Gap struct{ LowHz, HighHz float64 }

// gapMask marks the lines of a spectrum that lie in gaps; nil where there are none.
func gapMask(s Spectrum, gaps []Gap) []bool {
	if len(gaps) == 0 {
		return nil
	}
	mask := make([]bool, len(s.Power))
	for _, g := range gaps {
		first := max(0, int(math.Ceil(g.LowHz/s.Step-1e-9)))
		for k := first; k < len(mask) && float64(k)*s.Step <= g.HighHz*(1+1e-12); k++ {
			mask[k] = true
		}
	}
	return mask
}

// BandPower integrates a spectrum between two frequencies. Lines in gaps are filled
// with the mean of as many lines on either side as the gap is wide. The scatter is that
// of exponentially distributed lines: variance Spread·Σ(P·Step)², with what was
// filled counted for the neighbours it came from.
func BandPower(s Spectrum, lowHz, highHz float64, gaps []Gap) Estimate {
	first := max(1, int(lowHz/s.Step))
	last := min(len(s.Power)-1, int(highHz/s.Step)+1)
	if len(gaps) == 0 {
		return bandPower(s, first, last, func(k int) float64 { return lineShare(float64(k)*s.Step, s.Step, lowHz, highHz) })
	}
	weight := make([]float64, len(s.Power))
	for k := first; k <= last; k++ {
		weight[k] = 1
	}
	for _, k := range []int{first, first + 1, last - 1, last} { // only lines at the edges are cut
		if k >= first && k <= last {
			weight[k] = lineShare(float64(k)*s.Step, s.Step, lowHz, highHz)
		}
	}
	fillGaps(weight, gapMask(s, gaps), first, last)
	return bandPower(s, 1, len(weight)-1, func(k int) float64 { return weight[k] })
}

// bandPower sums lines by their weights.
func bandPower(s Spectrum, first, last int, weight func(k int) float64) Estimate {
	sum, variance := 0.0, 0.0
	for k := first; k <= last; k++ {
		g := weight(k)
		if g == 0 {
			continue
		}
		p := g * s.Power[k] * s.Step
		sum += p
		// E[P̂²] of an exponential is 2·P²: half the square estimates the variance.
		variance += p * p / 2
	}
	variance *= s.Spread
	e := Estimate{Value: sum, Sigma: math.Sqrt(variance)}
	if variance > 0 {
		e.Dof = 2 * sum * sum / variance
	}
	return e
}

// lineShare is how much of a line's width lies between two frequencies.
func lineShare(hz, step, lowHz, highHz float64) float64 {
	low, high := math.Max(hz-step/2, lowHz), math.Min(hz+step/2, highHz)
	if high <= low {
		return 0
	}
	return (high - low) / step
}

// fillGaps moves the weights of masked lines to their neighbours: to as many unmasked lines
// on each side as the gap has (three at least), in equal parts.
func fillGaps(weight []float64, mask []bool, first, last int) {
	for k := first; k <= last; k++ {
		if !mask[k] {
			continue
		}
		end, moved := k, 0.0
		for end <= last && mask[end] {
			moved += weight[end]
			weight[end] = 0
			end++
		}
		whole := k
		for whole > 1 && mask[whole-1] {
			whole--
		}
		beyond := end
		for beyond < len(mask) && mask[beyond] {
			beyond++
		}
		want := max(3, beyond-whole)
		var to []int
		for n, found := whole-1, 0; n > 0 && found < want; n-- {
			if !mask[n] {
				to = append(to, n)
				found++
			}
		}
		for n, found := beyond, 0; n < len(mask) && found < want; n++ {
			if !mask[n] {
				to = append(to, n)
				found++
			}
		}
		for _, n := range to {
			weight[n] += moved / float64(len(to))
		}
		k = end
	}
}

// group is some neighbouring lines taken together.
type group struct {
	hz, power, count float64
}

// groups gathers the lines between two frequencies into steps of about a thirty-second
// of an octave, gaps left out.
func groups(s Spectrum, lowHz, highHz float64, gaps []Gap) []group {
	var out []group
	var g group
	upper := 0.0
	flush := func() {
		if g.count > 0 {
			out = append(out, group{g.hz / g.count, g.power / g.count, g.count})
		}
		g = group{}
	}
	first := max(1, int(math.Ceil(lowHz/s.Step-1e-9)))
	mask := gapMask(s, gaps)
	for k := first; k < len(s.Power); k++ {
		hz := float64(k) * s.Step
		if hz > highHz*(1+1e-12) {
			break
		}
		if mask != nil && mask[k] {
			continue
		}
		if hz > upper {
			flush()
			upper = hz * math.Exp2(1.0/32)
		}
		g.hz += hz
		g.power += s.Power[k]
		g.count++
	}
	flush()
	return out
}

// MinLines is how many spectral lines a local estimate needs to be given at all.
const MinLines = 8

// Density estimates the power density at one frequency by a local straight line of
// the logarithm of the density against the logarithm of frequency, half an octave to either
// side, fitted by maximum likelihood to exponentially distributed lines (P. Whittle
// 1953; local likelihood after J. Fan & I. Gijbels 1996, ch. 5). ok is false where
// the record has fewer than MinLines lines there.
func Density(s Spectrum, hz float64, gaps []Gap) (e Estimate, ok bool) {
	gs := groups(s, hz/math.Sqrt2, hz*math.Sqrt2, gaps)
	count, mean := 0.0, 0.0
	for _, g := range gs {
		count += g.count
		mean += g.count * g.power
	}
	if count < MinLines || mean <= 0 {
		return Estimate{}, false
	}
	a, b := math.Log(mean/count), 0.0
	var s00, s01, s11 float64
	for range 50 {
		s00, s01, s11 = 0, 0, 0
		var r0, r1 float64
		for _, g := range gs {
			x := math.Log(g.hz / hz)
			ratio := g.power / math.Exp(a+b*x)
			// Score n·(P/μ − 1), information n: Fisher scoring of a gamma model, log link.
			r := g.count * (ratio - 1)
			r0 += r
			r1 += r * x
			s00 += g.count
			s01 += g.count * x
			s11 += g.count * x * x
		}
		det := s00*s11 - s01*s01
		if det <= 1e-12*s00*s00 {
			// All lines at one frequency: a level without a slope.
			a += r0 / s00
			s11, s01 = 1, 0
			if math.Abs(r0/s00) < 1e-10 {
				break
			}
			continue
		}
		da, db := (s11*r0-s01*r1)/det, (s00*r1-s01*r0)/det
		da, db = clamp(da, 1), clamp(db, 3)
		a, b = a+da, b+db
		if math.Abs(da)+math.Abs(db) < 1e-10 {
			break
		}
	}
	relative := math.Sqrt(s.Spread * s11 / (s00*s11 - s01*s01))
	v := math.Exp(a)
	return Estimate{Value: v, Sigma: v * relative, Dof: 2 / (relative * relative)}, true
}

func clamp(v, limit float64) float64 { return math.Max(-limit, math.Min(limit, v)) }

// Corner is a fit of w²·(1 + fc/f) to a power spectrum.
type Corner struct {
	White  Estimate // w², power per Hz
	Corner Estimate // fc, Hz
}

// FitCorner fits the power density w²·(1 + fc/f) between two frequencies by maximum
// likelihood for exponentially distributed lines, after taking a floor's smooth power
// density (nil for none) off each line's expectation. The uncertainty is that of the
// Fisher information. ok is false where the fit has no meaning: too few lines or no
// white part.
func FitCorner(s Spectrum, lowHz, highHz float64, gaps []Gap, floor func(hz float64) float64) (c Corner, ok bool) {
	gs := groups(s, lowHz, highHz, gaps)
	total := 0.0
	for _, g := range gs {
		total += g.count
	}
	if len(gs) < 6 || total < 50 {
		return c, false
	}
	// Start from the mean level, then iterate weighted least squares (identity link).
	var m, weightSum float64
	for _, g := range gs {
		m += g.power * g.count
		weightSum += g.count
	}
	a, b := m/weightSum, 0.0
	var v00, v01, v11 float64
	for round := range 100 {
		var s00, s01, s11, r0, r1 float64
		for _, g := range gs {
			f := 0.0
			if floor != nil {
				f = floor(g.hz)
			}
			mu := a + b/g.hz + f
			if round == 0 {
				mu = g.power
			}
			if mu <= 0 {
				mu = g.power
			}
			w := g.count / (mu * mu)
			x, y := 1/g.hz, g.power-f
			s00 += w
			s01 += w * x
			s11 += w * x * x
			r0 += w * y
			r1 += w * x * y
		}
		det := s00*s11 - s01*s01
		na, nb := (s11*r0-s01*r1)/det, (s00*r1-s01*r0)/det
		v00, v01, v11 = s11/det, -s01/det, s00/det
		done := math.Abs(na-a) <= 1e-12*math.Abs(na) && math.Abs(nb-b) <= 1e-12*math.Abs(nb)
		a, b = na, nb
		if done {
			break
		}
	}
	if a <= 0 {
		return c, false
	}
	fc := b / a
	v00, v01, v11 = v00*s.Spread, v01*s.Spread, v11*s.Spread
	variance := v11/(a*a) + fc*fc*v00/(a*a) - 2*fc*v01/(a*a)
	c.White = Estimate{Value: a, Sigma: math.Sqrt(v00)}
	c.Corner = Estimate{Value: fc, Sigma: math.Sqrt(math.Max(variance, 0))}
	return c, true
}
