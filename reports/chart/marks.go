package chart

import (
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lotgate/limits"
	"lotgate/reports/ink"
)

// drawing is a plotter made of one function; it draws in data coordinates by way of a
// frame.
type drawing func(f frame)

// Plot draws.
func (d drawing) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	d(frame{c, func(v float64) float64 { return x(v).Points() }, func(v float64) float64 { return y(v).Points() }})
}

// frame is the part of a chart between its axes.
type frame struct {
	c    draw.Canvas
	x, y func(float64) float64
}

func (f frame) left() float64   { return f.c.Min.X.Points() }
func (f frame) right() float64  { return f.c.Max.X.Points() }
func (f frame) bottom() float64 { return f.c.Min.Y.Points() }
func (f frame) top() float64    { return f.c.Max.Y.Points() }

func point(x, y float64) vg.Point { return vg.Point{X: vg.Length(x), Y: vg.Length(y)} }

// stroke draws an open line, cut at the frame.
func (f frame) stroke(points []vg.Point, width float64, c ink.Color, dash ...vg.Length) {
	f.c.StrokeLines(draw.LineStyle{Color: rgba(c), Width: vg.Length(width), Dashes: dash}, f.c.ClipLinesXY(points)...)
}

// fill fills an outline, cut at the frame.
func (f frame) fill(points []vg.Point, c ink.Color) {
	if len(points) > 2 {
		f.c.FillPolygon(rgba(c), f.c.ClipPolygonXY(points))
	}
}

// inside tells whether a place lies within the frame.
func (f frame) inside(p vg.Point) bool {
	const slack = 1e-6
	return p.X.Points() >= f.left()-slack && p.X.Points() <= f.right()+slack &&
		p.Y.Points() >= f.bottom()-slack && p.Y.Points() <= f.top()+slack
}

// grid draws hairlines at the labelled ticks.
func grid(p *plot.Plot) drawing {
	return func(f frame) {
		for _, t := range p.X.Tick.Marker.Ticks(p.X.Min, p.X.Max) {
			if t.Label != "" {
				f.stroke([]vg.Point{point(f.x(t.Value), f.bottom()), point(f.x(t.Value), f.top())}, 0.4, Rule)
			}
		}
		for _, t := range p.Y.Tick.Marker.Ticks(p.Y.Min, p.Y.Max) {
			if t.Label != "" {
				f.stroke([]vg.Point{point(f.left(), f.y(t.Value)), point(f.right(), f.y(t.Value))}, 0.4, Rule)
			}
		}
	}
}

// bar draws an uncertainty: a stem with feet.
func (f frame) bar(x, low, high float64, c ink.Color) {
	const foot = 1.4
	px := f.x(x)
	a, b := f.y(low), f.y(high)
	f.stroke([]vg.Point{point(px, a), point(px, b)}, 0.6, c)
	f.stroke([]vg.Point{point(px-foot, a), point(px+foot, a)}, 0.6, c)
	f.stroke([]vg.Point{point(px-foot, b), point(px+foot, b)}, 0.6, c)
}

// pointColor is the colour of a point by its verdict: accent where nothing is wrong.
func pointColor(v limits.Verdict) ink.Color {
	switch v {
	case limits.Fail:
		return Fail
	case limits.Marginal:
		return Marginal
	case limits.Void:
		return Void
	}
	return Accent
}

// sign draws a point in the shape of its verdict: a dot, an open diamond where it is
// marginal, a cross where it fails.
func sign(s drawer, x, y float64, v limits.Verdict) {
	c := pointColor(v)
	switch v {
	case limits.Fail:
		const r = 2.4
		s.Stroke(ink.Segment(x-r, y-r, x+r, y+r), ink.Pen{Width: 1.3, Color: c})
		s.Stroke(ink.Segment(x-r, y+r, x+r, y-r), ink.Pen{Width: 1.3, Color: c})
	case limits.Marginal:
		const r = 2.9
		var p ink.Path
		p.MoveTo(x, y-r)
		p.LineTo(x+r, y)
		p.LineTo(x, y+r)
		p.LineTo(x-r, y)
		p.Close()
		s.Fill(p, ink.Color{R: 255, G: 255, B: 255})
		s.Stroke(p, ink.Pen{Width: 1.1, Color: c})
	default:
		s.Fill(ink.Circle(x, y, 1.4), c)
	}
}

// sign draws a point's sign at a place in data coordinates, where it is in the frame.
func (f frame) sign(x, y float64, v limits.Verdict) {
	if p := point(f.x(x), f.y(y)); f.inside(p) {
		sign(upright{f.c}, p.X.Points(), -p.Y.Points(), v)
	}
}

// drawer is what a sign is drawn on: a sheet, or a plot.
type drawer interface {
	Stroke(ink.Path, ink.Pen)
	Fill(ink.Path, ink.Color)
}

// upright draws on a plot, whose y grows upwards: y on it is minus y on the sheet.
type upright struct{ c draw.Canvas }

func (u upright) path(p ink.Path) vg.Path {
	var out vg.Path
	for _, s := range p {
		var q [3]vg.Point
		for i, a := range s.P {
			q[i] = point(a.X, -a.Y)
		}
		switch s.Op {
		case ink.Move:
			out.Move(q[0])
		case ink.Line:
			out.Line(q[0])
		case ink.Cube:
			out.CubeTo(q[0], q[1], q[2])
		case ink.Close:
			out.Close()
		}
	}
	return out
}

// Stroke strokes a path with a solid line.
func (u upright) Stroke(p ink.Path, pen ink.Pen) {
	u.c.SetLineStyle(draw.LineStyle{Color: rgba(pen.Color), Width: vg.Length(pen.Width)})
	u.c.Stroke(u.path(p))
}

// Fill fills a path.
func (u upright) Fill(p ink.Path, c ink.Color) {
	u.c.SetColor(rgba(c))
	u.c.Fill(u.path(p))
}

// usable tells whether a number can be drawn on a logarithmic axis.
func usable(v float64) bool { return v > 0 && !math.IsInf(v, 0) }

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
