package measure

import (
	"fmt"
	"math"
)

// curvePoint is a point of the response curve: level in dB and its own standard
// uncertainty, that of the reference not counted in.
type curvePoint struct {
	hz, db, own, dof float64
}

// smoothPoints is over how many neighbouring tones the local parabola reaches: wider
// would be quieter, but a parabola no longer follows a first-order fall-off.
const smoothPoints = 7

// beyond is how far past the outermost tone, in e-folds of frequency, an edge is still
// looked for on the parabola through the last tones.
const beyond = 0.14

// edgeDB is the level that ends the band, relative to the reference (−3 dB).
const edgeDB = -3.0

// parabola is the standard uncertainty, dB, with which a parabola through smoothPoints
// tones follows a first-order fall-off between tones a sixth of an octave or two apart.
const parabola = 0.01

// smoothed is the value of a local parabola and the weight each point has in it.
type smoothed struct {
	db, slope, sigma float64
	weight           []float64
}

// smoothAt fits a parabola in log frequency to the nearest points, weighted by their
// certainty, and gives its value, slope (dB per e-fold) and scatter at a log frequency.
// With fewer points than asked for all are used; below three it is the nearest point.
func smoothAt(points []curvePoint, x float64, count int) smoothed {
	out := smoothed{weight: make([]float64, len(points))}
	count = min(count, len(points))
	if count < 3 {
		best := 0
		for k := range points {
			if math.Abs(math.Log(points[k].hz)-x) < math.Abs(math.Log(points[best].hz)-x) {
				best = k
			}
		}
		out.weight[best], out.db, out.sigma = 1, points[best].db, points[best].own
		return out
	}
	first := 0
	for first+count < len(points) && x-math.Log(points[first].hz) > math.Log(points[first+count].hz)-x {
		first++
	}
	last := first + count
	weightOf := func(k int) float64 { return 1 / (points[k].own*points[k].own + parabola*parabola) }
	var s [5]float64
	for k := first; k < last; k++ {
		d, v := math.Log(points[k].hz)-x, weightOf(k)
		for q := range s {
			s[q] += v
			v *= d
		}
	}
	// The first two rows of the inverse of the normal matrix, by cofactors.
	c0, c1, c2 := s[2]*s[4]-s[3]*s[3], s[2]*s[3]-s[1]*s[4], s[1]*s[3]-s[2]*s[2]
	det := s[0]*c0 + s[1]*c1 + s[2]*c2
	e1, e2 := s[0]*s[4]-s[2]*s[2], s[1]*s[2]-s[0]*s[3]
	variance := 0.0
	for k := first; k < last; k++ {
		d := math.Log(points[k].hz) - x
		w := weightOf(k) / det
		level := w * (c0 + d*c1 + d*d*c2)
		out.weight[k] = level
		out.db += level * points[k].db
		out.slope += w * (c1 + d*e1 + d*d*e2) * points[k].db
		variance += level * level * points[k].own * points[k].own
	}
	out.sigma = math.Sqrt(variance)
	return out
}

// features reads flatness and edges off the smoothed curve, each with the scatter that
// comes through from the points. reference holds the weights of the reference level.
func (m *Response) features(c *Capture, points []curvePoint, reference []float64, referenceHz float64) []Reading {
	flat := Reading{Name: c.Step + ".flatness", Unit: "dB"}
	lower := Reading{Name: c.Step + ".lower_edge", Unit: "Hz"}
	upper := Reading{Name: c.Step + ".upper_edge", Unit: "Hz"}
	if len(points) < smoothPoints {
		missing := fmt.Sprintf("only %d tones stand out of the noise: %d are needed", len(points), smoothPoints)
		flat.Missing, lower.Missing, upper.Missing = missing, missing, missing
		return []Reading{flat, lower, upper}
	}
	m.flatness(&flat, points)
	edge(&lower, points, reference, referenceHz, -1)
	edge(&upper, points, reference, referenceHz, +1)
	return []Reading{flat, lower, upper}
}

// chosenShare is how much of the scatter the choice of the largest and the smallest of many
// scattered values adds in quadrature; found by simulation over 500 units.
const chosenShare = 0.35

func (m *Response) flatness(r *Reading, points []curvePoint) {
	var top, bottom smoothed
	for i := range points {
		x := math.Log(points[i].hz)
		s := smoothAt(points, x, smoothPoints)
		if i == 0 || s.db > top.db {
			top = s
		}
		if i == 0 || s.db < bottom.db {
			bottom = s
		}
	}
	r.Value = top.db - bottom.db
	scatter := scatterBetween(points, top.weight, bottom.weight)
	r.Budget = Combine(Component{"scatter of the tones", scatter, 0},
		Component{"choice of the extremes among scattered tones", chosenShare * scatter, 0},
		Component{"smoothing", parabola * math.Sqrt2, 0})
}

// scatterBetween is the standard uncertainty of the difference of two weighted sums of
// the points.
func scatterBetween(points []curvePoint, a, b []float64) float64 {
	variance := 0.0
	for k := range points {
		w := (a[k] - b[k]) * points[k].own
		variance += w * w
	}
	return math.Sqrt(variance)
}

// edgeSteps is how finely the smoothed curve is searched, per e-fold of frequency.
const edgeSteps = 100

// edge finds where the smoothed curve first passes −3 dB, going out from the reference.
func edge(r *Reading, points []curvePoint, reference []float64, referenceHz float64, direction float64) {
	end, side := points[0], "below"
	if direction > 0 {
		end, side = points[len(points)-1], "above"
	}
	x, stop := math.Log(referenceHz), math.Log(end.hz)
	at := func(x float64) smoothed { return smoothAt(points, x, smoothPoints) }
	found := false
	for !found && (stop+direction*beyond-x)*direction > 0 {
		x += direction / edgeSteps
		found = at(x).db < edgeDB
	}
	if !found {
		r.Missing = fmt.Sprintf("%s the band measured (%.2f dB at %.5g Hz)", side, at(stop).db, end.hz)
		return
	}
	inside, outside := x-direction/edgeSteps, x
	for range 50 {
		if mid := (inside + outside) / 2; at(mid).db < edgeDB {
			outside = mid
		} else {
			inside = mid
		}
	}
	s := at(inside)
	r.Value = math.Exp(inside)
	if (inside-stop)*direction > 0 {
		r.Notes = append(r.Notes, fmt.Sprintf("just beyond the outermost tone at %.5g Hz: extrapolated", end.hz))
	}
	perDB := r.Value / math.Max(math.Abs(s.slope), 0.3)
	r.Budget = Combine(Component{"scatter of the tones around the edge and of the reference", scatterBetween(points, s.weight, reference) * perDB, 0},
		Component{"interpolation between tones", parabola * perDB, 0})
}
