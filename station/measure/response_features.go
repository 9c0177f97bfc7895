package measure

import (
	"fmt"
	"math"
)

// curvePoint is a point of the response curve: level in dB and its own standard
// uncertainty, the reference's not counted in.
type curvePoint struct {
	hz, db, own, dof float64
	reference        bool
}

// smoothPoints is over how many neighbouring tones the local parabola reaches.
const smoothPoints = 7

// edgeDB is the level that ends the band, relative to the reference (−3 dB).
const edgeDB = -3.0

// features reads flatness and edges off the curve, each with the scatter that comes
// through from the points.
func (m *Response) features(c *Capture, points []curvePoint, common float64) []Reading {
	flat := Reading{Name: c.Step + ".flatness", Unit: "dB"}
	if len(points) < smoothPoints {
		flat.Missing = fmt.Sprintf("only %d tones stand out of the noise: %d are needed", len(points), smoothPoints)
	} else {
		var top, bottom smoothed
		for i := range points {
			s := smoothAt(points, math.Log(points[i].hz))
			if i == 0 || s.db > top.db {
				top = s
			}
			if i == 0 || s.db < bottom.db {
				bottom = s
			}
		}
		flat.Value = top.db - bottom.db
		variance := 0.0
		for k := range points {
			w := top.weight[k] - bottom.weight[k]
			variance += w * w * points[k].own * points[k].own
		}
		flat.Budget = Combine(Component{"scatter of the tones", math.Sqrt(variance), 0})
	}
	return []Reading{flat, m.edge(c, points, common, ".lower_edge", false), m.edge(c, points, common, ".upper_edge", true)}
}

// smoothed is the value of a local parabola and the weight each point has in it.
type smoothed struct {
	db, slope float64
	weight    []float64
}

// smoothAt fits a parabola in log frequency to the nearest points, weighted by their
// certainty, and gives its value and slope at a log frequency.
func smoothAt(points []curvePoint, x float64) smoothed {
	first := 0
	for first+smoothPoints < len(points) && x-math.Log(points[first].hz) > math.Log(points[first+smoothPoints].hz)-x {
		first++
	}
	last := min(first+smoothPoints, len(points))
	// Points that are very certain must not carry the fit alone: the parabola itself is
	// good to about a hundredth of a dB.
	const model = 0.01
	var s [5]float64
	for k := first; k < last; k++ {
		d := math.Log(points[k].hz) - x
		w := 1 / (points[k].own*points[k].own + model*model)
		for q, v := 0, w; q < 5; q, v = q+1, v*d {
			s[q] += v
		}
	}
	det := s[0]*(s[2]*s[4]-s[3]*s[3]) - s[1]*(s[1]*s[4]-s[2]*s[3]) + s[2]*(s[1]*s[3]-s[2]*s[2])
	out := smoothed{weight: make([]float64, len(points))}
	for k := first; k < last; k++ {
		d := math.Log(points[k].hz) - x
		w := 1 / (points[k].own*points[k].own + model*model)
		level := w * ((s[2]*s[4] - s[3]*s[3]) - d*(s[1]*s[4]-s[2]*s[3]) + d*d*(s[1]*s[3]-s[2]*s[2])) / det
		slope := w * (-(s[1]*s[4] - s[2]*s[3]) + d*(s[0]*s[4]-s[2]*s[2]) - d*d*(s[0]*s[3]-s[1]*s[2])) / det
		out.weight[k] = level
		out.db += level * points[k].db
		out.slope += slope * points[k].db
	}
	return out
}

// edge finds where the curve passes −3 dB between the tones measured.
func (m *Response) edge(c *Capture, points []curvePoint, common float64, suffix string, upper bool) Reading {
	r := Reading{Name: c.Step + suffix, Unit: "Hz"}
	side, place := "below", 0
	if upper {
		side = "above"
	}
	if len(points) < smoothPoints {
		r.Missing = fmt.Sprintf("only %d tones stand out of the noise: %d are needed", len(points), smoothPoints)
		return r
	}
	end := points[0]
	if upper {
		end = points[len(points)-1]
	}
	// From the reference outwards, the first pair of points that the edge lies between.
	start := 0
	for i, p := range points {
		if p.reference {
			start = i
		}
	}
	place = -1
	if upper {
		for i := start; i+1 < len(points); i++ {
			if points[i].db > edgeDB && points[i+1].db <= edgeDB {
				place = i
				break
			}
		}
	} else {
		for i := start; i > 0; i-- {
			if points[i].db > edgeDB && points[i-1].db <= edgeDB {
				place = i - 1
				break
			}
		}
	}
	if place < 0 {
		r.Missing = fmt.Sprintf("%s the band measured (%.2f dB at %.5g Hz)", side, end.db, end.hz)
		return r
	}
	low, high := math.Log(points[place].hz), math.Log(points[place+1].hz)
	rising := smoothAt(points, low).db < smoothAt(points, high).db
	from, to := low-0.3*(high-low), high+0.3*(high-low) // the smoothed curve may pass a little outside
	for range 60 {
		mid := (from + to) / 2
		if (smoothAt(points, mid).db < edgeDB) == rising {
			from = mid
		} else {
			to = mid
		}
	}
	at := smoothAt(points, (from+to)/2)
	variance := common * common
	for k, w := range at.weight {
		variance += w * w * points[k].own * points[k].own
	}
	r.Value = math.Exp((from + to) / 2)
	const parabola = 0.01 // dB, how well a parabola follows the curve between tones
	perDB := r.Value / math.Max(math.Abs(at.slope), 1e-3)
	r.Budget = Combine(Component{"scatter of the tones around the edge", math.Sqrt(variance) * perDB, 0},
		Component{"interpolation between tones", parabola / math.Sqrt(3) * perDB, 0})
	return r
}
