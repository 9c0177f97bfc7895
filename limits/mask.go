package limits

import (
	"fmt"
	"math"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/document"
)

// Mask bounds a curve: points joined linearly in dB against log frequency. Outside
// its first and last point a side does not bound.
type Mask struct {
	Upper, Lower []MaskPoint
}

// MaskPoint is a corner of a mask.
type MaskPoint struct {
	FrequencyHz, DB float64
}

// At gives the bounds at a frequency; nil where the mask does not reach.
func (m *Mask) At(hz float64) (lower, upper *float64) {
	return interpolate(m.Lower, hz), interpolate(m.Upper, hz)
}

func interpolate(points []MaskPoint, hz float64) *float64 {
	for i := range points {
		if points[i].FrequencyHz == hz {
			v := points[i].DB
			return &v
		}
		if i == 0 || hz > points[i].FrequencyHz || hz < points[i-1].FrequencyHz {
			continue
		}
		a, b := points[i-1], points[i]
		v := a.DB + (b.DB-a.DB)*math.Log(hz/a.FrequencyHz)/math.Log(b.FrequencyHz/a.FrequencyHz)
		return &v
	}
	return nil
}

func newMask(r *document.Reader, name string, raw *rawMask) *Mask {
	m := &Mask{}
	for _, side := range []struct {
		key string
		raw []maskPoint
		to  *[]MaskPoint
	}{{"upper", raw.Upper, &m.Upper}, {"lower", raw.Lower, &m.Lower}} {
		for i, p := range side.raw {
			if i > 0 && p.hz <= side.raw[i-1].hz {
				r.Fail(raw.node, fmt.Sprintf("%s: the %s mask does not rise in frequency at %v", name, side.key, p.hz), "list the points from low to high frequency")
				return m
			}
			*side.to = append(*side.to, MaskPoint{float64(p.hz), float64(p.db)})
		}
		if len(side.raw) == 1 {
			r.Fail(raw.node, fmt.Sprintf("%s: the %s mask has one point only", name, side.key), "write two points or more")
		}
	}
	if len(m.Upper) == 0 && len(m.Lower) == 0 {
		r.Fail(raw.node, name+" has an empty mask", "write upper: or lower: with points")
	}
	for _, p := range append(append([]MaskPoint(nil), m.Upper...), m.Lower...) {
		lo, hi := m.At(p.FrequencyHz)
		if lo != nil && hi != nil && *lo >= *hi {
			r.Fail(raw.node, fmt.Sprintf("%s: at %v the lower mask is not below the upper", name, quantity.Frequency(p.FrequencyHz)), "correct one of them")
			break
		}
	}
	return m
}
