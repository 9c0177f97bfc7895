package calibrate

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"lotgate/fixtures/virtual"
)

// fisher gives the covariance that noise alone leaves to parameters (Cramér–Rao bound): rows are
// the derivatives of each value, in its own standard deviations.
func fisher(t *testing.T, rows [][]float64) *mat.Dense {
	t.Helper()
	n := len(rows[0])
	information := mat.NewDense(n, n, nil)
	for _, g := range rows {
		for i := range n {
			for k := range n {
				information.Set(i, k, information.At(i, k)+g[i]*g[k])
			}
		}
	}
	var out mat.Dense
	if err := out.Inverse(information); err != nil {
		t.Fatal(err)
	}
	return &out
}

// contrast is the standard deviation of Σ g·parameter.
func contrast(c *mat.Dense, g []float64) float64 {
	sum := 0.0
	for i := range g {
		for k := range g {
			sum += g[i] * g[k] * c.At(i, k)
		}
	}
	return math.Sqrt(sum)
}

// inputLimits are twice the bounds, for the input's noise, of the corner (Hz), level and corner being
// fitted to the lines of a square wave of 0.5 V at the chopping frequencies of Level, (2/π)·V/n each;
// and of the gain at each frequency over that at 400 Hz, by the best line within half an octave and the
// fundamental at 400 Hz: an input need not be a plain high-pass. The noise is taken as white behind the
// high-pass: where it arises cannot be known from outside.
func inputLimits(t *testing.T, s virtual.Settings, list []float64) (corner float64, gain map[float64]float64) {
	fc := float64(s.Sound.Coupling)
	line := func(chop, n float64) float64 {
		return float64(s.Sound.Noise) / math.Sqrt(3*math.Max(2, 24/chop)) / (2 / math.Pi * 0.5 / n)
	}
	best := map[float64]float64{}
	var rows [][]float64
	for _, chop := range (Level{Lowest: 1, Reference: 400}).chops() {
		for n := 1.0; n < 2*harmonicsOf && n*chop <= highestHz; n += 2 {
			sigma := line(chop, n) / highPassGain(n*chop, fc)
			rows = append(rows, []float64{1 / sigma, -1 / (1 + square(n*chop/fc)) / sigma})
			for _, hz := range list {
				if math.Abs(math.Log2(n*chop/hz)) < 0.5 && (best[hz] == 0 || sigma < best[hz]) {
					best[hz] = sigma
				}
			}
		}
	}
	gain = map[float64]float64{}
	for _, hz := range list {
		gain[hz] = 2 * math.Hypot(best[hz], line(400, 1))
	}
	return 2 * fc * contrast(fisher(t, rows), []float64{0, 1}), gain
}

// toneLimit is twice the bound of the ratio of one tone of a multitone, heard twice at two fifths of full scale.
func toneLimit(s virtual.Settings, p play, seconds, fullScale float64) float64 {
	return 2 * math.Sqrt2 * float64(s.Sound.Noise) / math.Sqrt(3*seconds) / (0.4 * fullScale / p.peak)
}

// latencyLimit is twice the bound of the latency beside a phase that falls as 1/ω.
func latencyLimit(t *testing.T, s virtual.Settings, p play, rate, fullScale float64) float64 {
	sigma := float64(s.Sound.Noise) / math.Sqrt(3) / (0.5 * fullScale / p.peak)
	var rows [][]float64
	for _, hz := range p.hz(rate) {
		w := 2 * math.Pi * hz
		rows = append(rows, []float64{w / sigma, 1 / w / sigma})
	}
	return 2 * contrast(fisher(t, rows), []float64{1, 0})
}

// scanLimits are twice the bounds of standoff and φ0 for the module's noise under the tone and where
// the stage stops (Repeatability), for the law A·(S/(S+p))²·sin(φ0 − 4πp/λ) with λ, a cube law and a
// pick-up fitted too.
func scanLimits(t *testing.T, s virtual.Settings, m virtual.Truth, standoff float64) (distance, phase float64) {
	beta := 4 * math.Pi * 0.4 * shakerAt(40, float64(s.Target.PerVolt), s.Target) / 0.02848
	top := 2 * float64(m.EchoAt(40)) * math.J1(beta)
	q := []float64{top, float64(m.Phase), standoff, 0.02848, 0.01, 0.01}
	law := func(q []float64, p float64) float64 {
		y := q[0] * square(q[2]/(q[2]+p)) * math.Sin(q[1]-4*math.Pi*p/q[3])
		return y*(1+q[4]*square(y/top)) + q[5]*top
	}
	var rows [][]float64
	for i := range 31 {
		p := 0.03 * (2*float64(i)/30 - 1)
		slope := (law(q, p+1e-7) - law(q, p-1e-7)) / 2e-7
		sigma := math.Hypot(float64(m.Density(40)), slope*float64(s.Target.Repeatability)) / math.Sqrt2 // there and back
		row := make([]float64, len(q))
		for k := range q {
			up, down := append([]float64(nil), q...), append([]float64(nil), q...)
			h := 1e-6 * math.Abs(q[k])
			up[k], down[k] = q[k]+h, q[k]-h
			row[k] = (law(up, p) - law(down, p)) / (2 * h) / sigma
		}
		rows = append(rows, row)
	}
	c := fisher(t, rows)
	return 2 * contrast(c, []float64{0, 0, 1, 0, 0, 0}), 2 * contrast(c, []float64{0, 1, 0, 0, 0, 0})
}
