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

func inGap(hz float64, gaps []Gap) bool {
	for _, g := range gaps {
		if hz >= g.LowHz && hz <= g.HighHz {
			return true
		}
	}
	return false
}

// BandPower integrates a spectrum between two frequencies. Lines in gaps are filled
// with the mean of as many lines on either side as the gap is wide. The scatter is that
// of exponentially distributed lines: variance Spread·Σ(P·Step)², with what was
// filled counted for the neighbours it came from.
func BandPower(s Spectrum, lowHz, highHz float64, gaps []Gap) Estimate {
	weight := map[int]float64{}
	filled := []struct {
		share float64
		lines []int
	}{}
	lines := len(s.Power)
	sum := 0.0
	direct := make([]float64, lines)
	for k := 1; k < lines; k++ {
		hz := float64(k) * s.Step
		share := lineShare(hz, s.Step, lowHz, highHz)
		if share == 0 {
			continue
		}
		if !inGap(hz, gaps) {
			direct[k] += share
			continue
		}
		filled = append(filled, struct {
			share float64
			lines []int
		}{share, neighbours(s, hz, gaps)})
	}
	for _, f := range filled {
		for _, n := range f.lines {
			weight[n] += f.share / float64(len(f.lines))
		}
	}
	variance := 0.0
	for k := 1; k < lines; k++ {
		g := direct[k] + weight[k]
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

// neighbours lists lines outside all gaps on either side of the gap that hz lies in,
// as many on each side as make up the gap's width (at least three).
func neighbours(s Spectrum, hz float64, gaps []Gap) []int {
	var own Gap
	for _, g := range gaps {
		if hz >= g.LowHz && hz <= g.HighHz {
			own = g
		}
	}
	want := max(3, int((own.HighHz-own.LowHz)/s.Step))
	var out []int
	for dir := -1; dir <= 1; dir += 2 {
		edge := own.LowHz
		if dir > 0 {
			edge = own.HighHz
		}
		found := 0
		for k := s.Line(edge); k > 0 && k < len(s.Power) && found < want; k += dir {
			if !inGap(float64(k)*s.Step, gaps) {
				out = append(out, k)
				found++
			}
		}
	}
	return out
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
	for k := first; k < len(s.Power); k++ {
		hz := float64(k) * s.Step
		if hz > highHz*(1+1e-12) {
			break
		}
		if inGap(hz, gaps) {
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
