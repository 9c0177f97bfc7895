package chart

import (
	"image"
	"image/color"
	"math"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"

	"lotgate/reports/ink"
)

// Canvas lets gonum/plot draw on a surface of ours: it turns the plot's coordinates
// (points from the lower left corner, y up) and transformations into the sheet's.
type Canvas struct {
	surface ink.Surface
	box     ink.Box
	now     state
	stack   []state
}

var _ vg.CanvasSizer = (*Canvas)(nil)

// matrix maps x to a·x + c·y + e and y to b·x + d·y + f.
type matrix struct{ a, b, c, d, e, f float64 }

type state struct {
	m      matrix
	width  float64
	dash   []float64
	offset float64
	color  ink.Color
}

// NewCanvas gives the part of a surface that lies in box as a canvas.
func NewCanvas(s ink.Surface, box ink.Box) *Canvas {
	return &Canvas{surface: s, box: box, now: state{m: matrix{a: 1, d: -1, e: box.X, f: box.Bottom()}, width: 1}}
}

// Size is the size of the canvas.
func (c *Canvas) Size() (x, y vg.Length) { return vg.Length(c.box.W), vg.Length(c.box.H) }

// SetLineWidth sets the width of strokes, before scaling.
func (c *Canvas) SetLineWidth(w vg.Length) { c.now.width = w.Points() }

// SetLineDash sets the dashes of strokes.
func (c *Canvas) SetLineDash(pattern []vg.Length, offset vg.Length) {
	c.now.dash = nil
	for _, p := range pattern {
		c.now.dash = append(c.now.dash, p.Points())
	}
	c.now.offset = offset.Points()
}

// SetColor sets the colour of all that follows; what is transparent is mixed with the
// white of the sheet.
func (c *Canvas) SetColor(col color.Color) { c.now.color = opaque(col) }

func opaque(col color.Color) ink.Color {
	if col == nil {
		return ink.Color{}
	}
	r, g, b, a := col.RGBA() // premultiplied, so white is added for what is missing
	mix := func(v uint32) uint8 { return uint8((v + 0xFFFF - a) >> 8) }
	return ink.Color{R: mix(r), G: mix(g), B: mix(b)}
}

// Rotate turns what follows, in radians against the clock.
func (c *Canvas) Rotate(rad float64) {
	sin, cos := math.Sincos(rad)
	c.apply(matrix{cos, sin, -sin, cos, 0, 0})
}

// Translate moves what follows.
func (c *Canvas) Translate(p vg.Point) { c.apply(matrix{1, 0, 0, 1, p.X.Points(), p.Y.Points()}) }

// Scale stretches what follows.
func (c *Canvas) Scale(x, y float64) { c.apply(matrix{x, 0, 0, y, 0, 0}) }

// apply puts t before the transformation so far.
func (c *Canvas) apply(t matrix) {
	m := c.now.m
	c.now.m = matrix{
		m.a*t.a + m.c*t.b, m.b*t.a + m.d*t.b,
		m.a*t.c + m.c*t.d, m.b*t.c + m.d*t.d,
		m.a*t.e + m.c*t.f + m.e, m.b*t.e + m.d*t.f + m.f,
	}
}

// Push keeps the state until the matching Pop.
func (c *Canvas) Push() { c.stack = append(c.stack, c.now) }

// Pop goes back to the state at the matching Push.
func (c *Canvas) Pop() {
	c.now = c.stack[len(c.stack)-1]
	c.stack = c.stack[:len(c.stack)-1]
}

func (c *Canvas) at(p vg.Point) ink.Point {
	x, y, m := p.X.Points(), p.Y.Points(), c.now.m
	return ink.Point{X: m.a*x + m.c*y + m.e, Y: m.b*x + m.d*y + m.f}
}

// scale is by how much lengths grow, the mean of both directions.
func (c *Canvas) scale() float64 {
	m := c.now.m
	return math.Sqrt(math.Abs(m.a*m.d - m.b*m.c))
}

// Stroke strokes a path.
func (c *Canvas) Stroke(p vg.Path) {
	if c.now.width <= 0 {
		return
	}
	k := c.scale()
	pen := ink.Pen{Width: c.now.width * k, Color: c.now.color, Offset: c.now.offset * k}
	for _, d := range c.now.dash {
		pen.Dash = append(pen.Dash, d*k)
	}
	c.surface.Stroke(c.path(p), pen)
}

// Fill fills a path.
func (c *Canvas) Fill(p vg.Path) { c.surface.Fill(c.path(p), c.now.color) }

func (c *Canvas) path(p vg.Path) ink.Path {
	var out ink.Path
	var here vg.Point
	for _, s := range p {
		switch s.Type {
		case vg.MoveComp:
			q := c.at(s.Pos)
			out.MoveTo(q.X, q.Y)
			here = s.Pos
		case vg.LineComp:
			q := c.at(s.Pos)
			out.LineTo(q.X, q.Y)
			here = s.Pos
		case vg.CurveComp:
			a, b := s.Control[0], s.Control[len(s.Control)-1]
			if len(s.Control) == 1 { // a quadratic curve, raised to a cubic one
				a, b = between(here, a, 2./3), between(s.Pos, a, 2./3)
			}
			out.CubeTo(c.at(a), c.at(b), c.at(s.Pos))
			here = s.Pos
		case vg.ArcComp:
			here = c.arc(&out, s)
		case vg.CloseComp:
			out.Close()
		}
	}
	return out
}

func between(p, q vg.Point, t vg.Length) vg.Point {
	return vg.Point{X: p.X + (q.X-p.X)*t, Y: p.Y + (q.Y-p.Y)*t}
}

// arc adds a piece of a circle, joined by a line to what is there.
func (c *Canvas) arc(out *ink.Path, s vg.PathComp) vg.Point {
	piece := ink.Arc(s.Pos.X.Points(), s.Pos.Y.Points(), s.Radius.Points(), s.Start, s.Start+s.Angle)
	var end vg.Point
	for i, step := range piece {
		var q [3]ink.Point
		for k, p := range step.Points() {
			end = vg.Point{X: vg.Length(p.X), Y: vg.Length(p.Y)}
			q[k] = c.at(end)
		}
		switch {
		case i > 0:
			out.CubeTo(q[0], q[1], q[2])
		case len(*out) == 0:
			out.MoveTo(q[0].X, q[0].Y)
		default:
			out.LineTo(q[0].X, q[0].Y)
		}
	}
	return end
}

// FillString sets a line of text.
func (c *Canvas) FillString(f font.Face, p vg.Point, s string) {
	face := ink.Regular
	if f.Font.Weight >= xfont.WeightSemiBold {
		face = ink.Bold
	}
	q, m := c.at(p), c.now.m
	c.surface.Write(ink.Text{X: q.X, Y: q.Y, Size: f.Font.Size.Points() * c.scale(), Face: face,
		Color: c.now.color, Angle: math.Atan2(-m.b, m.a), S: ink.Printable(s)})
}

// DrawImage draws an image as rectangles, one for each run of equal colour in a row.
func (c *Canvas) DrawImage(rect vg.Rectangle, img image.Image) {
	b := img.Bounds()
	w := rect.Size().X / vg.Length(b.Dx())
	h := rect.Size().Y / vg.Length(b.Dy())
	before := c.now.color
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; {
			run := x + 1
			for run < b.Max.X && opaque(img.At(run, y)) == opaque(img.At(x, y)) {
				run++
			}
			c.SetColor(img.At(x, y))
			left, right := rect.Min.X+w*vg.Length(x-b.Min.X), rect.Min.X+w*vg.Length(run-b.Min.X)
			top := rect.Max.Y - h*vg.Length(y-b.Min.Y)
			c.Fill(vg.Path{{Type: vg.MoveComp, Pos: vg.Point{X: left, Y: top}}, {Type: vg.LineComp, Pos: vg.Point{X: right, Y: top}},
				{Type: vg.LineComp, Pos: vg.Point{X: right, Y: top - h}}, {Type: vg.LineComp, Pos: vg.Point{X: left, Y: top - h}}, {Type: vg.CloseComp}})
			x = run
		}
	}
	c.now.color = before
}
