package chart

import (
	"fmt"
	"math"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/ink"
)

// NoisePoint is one line of a noise spectrum.
type NoisePoint struct {
	Frequency quantity.Frequency
	Density   quantity.NoiseDensity
}

// NoiseReading is a density that was judged, drawn on the spectrum with its limit.
type NoiseReading struct {
	NoisePoint
	U       quantity.NoiseDensity  // expanded, at 95 %
	Upper   *quantity.NoiseDensity // nil where there is no limit
	Verdict limits.Verdict
}

// Noise is what a noise spectrum shows.
type Noise struct {
	Spectrum []NoisePoint // rising in frequency; points not above zero are left out
	Low      quantity.Frequency
	High     quantity.Frequency // band that is judged; both zero where there is none
	Readings []NoiseReading
}

// NoiseSpectrum is the chart of a noise spectrum: density against frequency, both
// logarithmic, with the judged band shaded. It gives an error where no point can be
// drawn.
func NoiseSpectrum(n Noise) (*Chart, error) {
	xs, ys := newSpan(), newSpan()
	line := make([]NoisePoint, 0, len(n.Spectrum))
	for _, p := range n.Spectrum {
		if usable(float64(p.Frequency)) && usable(float64(p.Density)) {
			line = append(line, p)
			xs.include(float64(p.Frequency))
			ys.include(float64(p.Density))
		}
	}
	if len(line) < 2 {
		return nil, fmt.Errorf("noise spectrum: %d of %d points are above zero: give two or more", len(line), len(n.Spectrum))
	}
	for _, r := range n.Readings {
		for _, v := range []float64{float64(r.Density - r.U), float64(r.Density), float64(r.Density + r.U)} {
			if usable(v) {
				ys.include(v)
			}
		}
		if r.Upper != nil && usable(float64(*r.Upper)) {
			ys.include(float64(*r.Upper))
		}
		if usable(float64(r.Frequency)) {
			xs.include(float64(r.Frequency))
		}
	}
	// At most six decades down from the top: what lies deeper is the estimator's own zero.
	ys.low = math.Max(ys.low, ys.high*1e-6)
	prefix, factor := densityPrefix(ys.high)

	p := newPlot()
	p.X.Min, p.X.Max = xs.low, xs.high
	p.Y.Min, p.Y.Max = roundDown(ys.low), roundUp(ys.high)*1.12 // room for half the top label
	if p.X.Max < 2*p.X.Min {
		p.X.Min, p.X.Max = p.X.Min/2, p.X.Max*2
	}
	if p.Y.Max < 10*p.Y.Min {
		p.Y.Min, p.Y.Max = p.Y.Min/2, p.Y.Max*2
	}
	p.X.Scale, p.Y.Scale = plot.LogScale{}, plot.LogScale{}
	p.X.Tick.Marker = decades{hertz}
	p.Y.Tick.Marker = decades{func(v float64) string { return plainNumber(v / factor) }}
	p.Add(bandShade(n), grid(p), spectrumLine(line), noiseReadings(n.Readings))
	return &Chart{Title: "IF noise in " + prefix + "V/√Hz", plot: p, key: noiseKey(n)}, nil
}

type span struct{ low, high float64 }

func newSpan() span { return span{math.Inf(1), math.Inf(-1)} }

func (s *span) include(v float64) {
	s.low, s.high = math.Min(s.low, v), math.Max(s.high, v)
}

// roundDown and roundUp go to the next 1, 2 or 5 times a power of ten.
func roundDown(v float64) float64 {
	p := math.Floor(math.Log10(v))
	for _, k := range []float64{5, 2} {
		if s := tenTimes(k, p); s <= v {
			return s
		}
	}
	return tenTimes(1, p)
}

func roundUp(v float64) float64 { return roundStep(v) }

// densityPrefix keeps the axis in nV/√Hz up to 10 µV/√Hz and in µV/√Hz above.
func densityPrefix(top float64) (string, float64) {
	if top <= 1e-5 {
		return "n", 1e-9
	}
	return "µ", 1e-6
}

func plainNumber(v float64) string { return strconv.FormatFloat(v, 'g', 6, 64) }

func bandShade(n Noise) drawing {
	return func(f frame) {
		if !usable(float64(n.Low)) || n.High <= n.Low {
			return
		}
		a, b := f.x(float64(n.Low)), f.x(float64(n.High))
		f.fill([]vg.Point{point(a, f.bottom()), point(b, f.bottom()), point(b, f.top()), point(a, f.top())}, Accent.Over(0.07))
	}
}

func spectrumLine(line []NoisePoint) drawing {
	return func(f frame) {
		places := make([]vg.Point, len(line))
		for i, p := range line {
			places[i] = point(f.x(float64(p.Frequency)), f.y(float64(p.Density)))
		}
		f.stroke(thin(places, 0.5), 0.6, Accent.Over(0.6))
	}
}

// thin leaves out what cannot be seen: of the points that fall on one column of the
// given width only the first, lowest, highest and last stay, in their order, so that no
// peak is lost.
func thin(points []vg.Point, column vg.Length) []vg.Point {
	out := make([]vg.Point, 0, len(points))
	for i := 0; i < len(points); {
		end, low, high := i, i, i
		for end < len(points) && points[end].X < points[i].X+column {
			if points[end].Y < points[low].Y {
				low = end
			}
			if points[end].Y > points[high].Y {
				high = end
			}
			end++
		}
		last := -1
		for _, k := range []int{i, min(low, high), max(low, high), end - 1} {
			if k > last {
				out = append(out, points[k])
				last = k
			}
		}
		i = end
	}
	return out
}

func noiseReadings(readings []NoiseReading) drawing {
	return func(f frame) {
		for _, r := range readings {
			x := float64(r.Frequency)
			if !usable(x) {
				continue
			}
			if r.Upper != nil && usable(float64(*r.Upper)) {
				px, py := f.x(x), f.y(float64(*r.Upper))
				f.stroke([]vg.Point{point(px-8, py), point(px+8, py)}, 1.2, Ink)
			}
			if !usable(float64(r.Density)) {
				continue
			}
			if low := float64(r.Density - r.U); r.U > 0 && usable(low) {
				f.bar(x, low, float64(r.Density+r.U), pointColor(r.Verdict))
			}
			f.sign(x, float64(r.Density), r.Verdict)
		}
	}
}

func noiseKey(n Noise) []keyEntry {
	var key []keyEntry
	for _, r := range n.Readings {
		if r.Upper != nil {
			key = append(key, keyEntry{func(s ink.Surface, x, y float64) {
				s.Stroke(ink.Segment(x-6, y, x+5, y), ink.Pen{Width: 1.2, Color: Ink})
			}, "limit"})
			break
		}
	}
	var verdicts []limits.Verdict
	for _, r := range n.Readings {
		verdicts = append(verdicts, r.Verdict)
	}
	key = append(key, verdictKey(verdicts)...)
	if n.High > n.Low && n.Low > 0 {
		key = append(key, keyEntry{func(s ink.Surface, x, y float64) {
			s.Fill(ink.Rectangle(ink.Box{X: x - 5, Y: y - 3, W: 9, H: 6}), Accent.Over(0.16))
		}, "band"})
	}
	return key
}

// verdictKey explains the signs of points that are not inside, where there are any.
func verdictKey(verdicts []limits.Verdict) []keyEntry {
	var key []keyEntry
	for _, v := range []limits.Verdict{limits.Fail, limits.Marginal} {
		for _, w := range verdicts {
			if v == w {
				key = append(key, keyEntry{func(s ink.Surface, x, y float64) { sign(s, x, y, v) }, string(v)})
				break
			}
		}
	}
	return key
}
