// Package ink is marks on a sheet: paths and text, drawn alike on paper (PDF), on a
// page (SVG) or into a list that can be looked at before it is drawn.
package ink

import "math"

// Color is an opaque colour; there is no transparency, so that a sheet prints the
// same everywhere.
type Color struct{ R, G, B uint8 }

// Over mixes a colour with white: 1 leaves it, 0 gives white.
func (c Color) Over(strength float64) Color {
	mix := func(v uint8) uint8 { return uint8(math.Round(255 - strength*(255-float64(v)))) }
	return Color{mix(c.R), mix(c.G), mix(c.B)}
}

// Pen is how a path is stroked.
type Pen struct {
	Width  float64 // points, above 0
	Color  Color
	Dash   []float64 // lengths of dashes and gaps in turn, in points; nil is solid
	Offset float64   // distance into the pattern at the start, in points
}

// Text is one line of text. S must be Printable.
type Text struct {
	X, Y  float64 // where the base line starts
	Size  float64 // points
	Face  Face
	Color Color
	Angle float64 // radians, turned against the clock about the start
	S     string
}

// Surface is what marks end on: later marks cover earlier ones.
type Surface interface {
	Stroke(Path, Pen)
	Fill(Path, Color) // non-zero winding
	Write(Text)
}

// Bounds is the box of a text from its ascenders to its descenders.
func (t Text) Bounds() Box {
	w, up, down := Width(t.Face, t.Size, t.S), Ascent*t.Size, Descent*t.Size
	if t.Angle == 0 {
		return Box{t.X, t.Y - up, w, up + down}
	}
	var p Path
	sin, cos := math.Sincos(t.Angle)
	for _, q := range []Point{{0, -up}, {w, -up}, {0, down}, {w, down}} {
		p.MoveTo(t.X+q.X*cos+q.Y*sin, t.Y-q.X*sin+q.Y*cos)
	}
	return p.Bounds()
}

// Mark is one thing that was drawn; exactly one of Pen, Filled and Written is set.
type Mark struct {
	Block   string // what the mark belongs to
	Path    Path
	Pen     *Pen
	Filled  *Color
	Written *Text
}

// Bounds is the box of the mark, the pen's width included.
func (m Mark) Bounds() Box {
	if m.Written != nil {
		return m.Written.Bounds()
	}
	b := m.Path.Bounds()
	if m.Pen != nil {
		w := m.Pen.Width
		b = Box{b.X - w/2, b.Y - w/2, b.W + w, b.H + w}
	}
	return b
}

// Recording keeps marks in the order they were drawn.
type Recording struct {
	Marks []Mark
	Block string // given to the marks that follow
}

var _ Surface = (*Recording)(nil)

// Stroke keeps a stroke.
func (r *Recording) Stroke(p Path, pen Pen) {
	r.Marks = append(r.Marks, Mark{Block: r.Block, Path: p, Pen: &pen})
}

// Fill keeps a fill.
func (r *Recording) Fill(p Path, c Color) {
	r.Marks = append(r.Marks, Mark{Block: r.Block, Path: p, Filled: &c})
}

// Write keeps a text.
func (r *Recording) Write(t Text) {
	r.Marks = append(r.Marks, Mark{Block: r.Block, Written: &t})
}

// Play draws all marks on another surface.
func (r *Recording) Play(s Surface) {
	for _, m := range r.Marks {
		switch {
		case m.Written != nil:
			s.Write(*m.Written)
		case m.Pen != nil:
			s.Stroke(m.Path, *m.Pen)
		default:
			s.Fill(m.Path, *m.Filled)
		}
	}
}
