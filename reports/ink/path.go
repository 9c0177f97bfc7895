package ink

import "math"

// Point is a place on the sheet: points (1/72 inch) from its top left corner, y down.
type Point struct{ X, Y float64 }

// Box is an upright rectangle, in points.
type Box struct{ X, Y, W, H float64 }

// Right and Bottom are the far edges.
func (b Box) Right() float64  { return b.X + b.W }
func (b Box) Bottom() float64 { return b.Y + b.H }

// Overlaps tells whether two boxes share more than slack points in both directions.
func (b Box) Overlaps(c Box, slack float64) bool {
	return math.Min(b.Right(), c.Right())-math.Max(b.X, c.X) > slack &&
		math.Min(b.Bottom(), c.Bottom())-math.Max(b.Y, c.Y) > slack
}

// Holds tells whether c lies within b, up to slack points.
func (b Box) Holds(c Box, slack float64) bool {
	return c.X >= b.X-slack && c.Y >= b.Y-slack && c.Right() <= b.Right()+slack && c.Bottom() <= b.Bottom()+slack
}

// Op is what a step of a path does.
type Op uint8

// The steps of a path, with the number of points each takes.
const (
	Move  Op = iota // 1: lift the pen
	Line            // 1
	Cube            // 3: two control points, end
	Close           // 0: straight back to the last Move
)

// Step is one step of a path.
type Step struct {
	Op Op
	P  [3]Point
}

// Path is an outline.
type Path []Step

// MoveTo starts a new piece.
func (p *Path) MoveTo(x, y float64) { *p = append(*p, Step{Move, [3]Point{{x, y}}}) }

// LineTo draws a straight line.
func (p *Path) LineTo(x, y float64) { *p = append(*p, Step{Line, [3]Point{{x, y}}}) }

// CubeTo draws a cubic Bézier curve.
func (p *Path) CubeTo(a, b, end Point) { *p = append(*p, Step{Cube, [3]Point{a, b, end}}) }

// Close draws straight back to where the piece started.
func (p *Path) Close() { *p = append(*p, Step{Op: Close}) }

// Segment is one straight line.
func Segment(x0, y0, x1, y1 float64) Path {
	var p Path
	p.MoveTo(x0, y0)
	p.LineTo(x1, y1)
	return p
}

// Rect adds an upright rectangle.
func (p *Path) Rect(b Box) {
	p.MoveTo(b.X, b.Y)
	p.LineTo(b.Right(), b.Y)
	p.LineTo(b.Right(), b.Bottom())
	p.LineTo(b.X, b.Bottom())
	p.Close()
}

// Rectangle is an upright rectangle.
func Rectangle(b Box) Path {
	var p Path
	p.Rect(b)
	return p
}

// Circle is a closed circle.
func Circle(x, y, r float64) Path {
	p := Arc(x, y, r, 0, 2*math.Pi)
	p.Close()
	return p
}

// Arc is a piece of a circle from one angle to another, in radians; angles grow
// clockwise on the sheet, from three o'clock. Each quarter or less is a cubic with
// handles of (4/3)·tan(angle/4) radii, which leaves the circle by less than 0.03 % of
// the radius.
func Arc(x, y, r, from, to float64) Path {
	var p Path
	p.MoveTo(x+r*math.Cos(from), y+r*math.Sin(from))
	p.arc(x, y, r, from, to)
	return p
}

func (p *Path) arc(x, y, r, from, to float64) {
	n := math.Ceil(math.Abs(to-from)/(math.Pi/2) - 1e-9)
	for i := 0.0; i < n; i++ {
		a := from + (to-from)*i/n
		b := from + (to-from)*(i+1)/n
		h := 4.0 / 3 * math.Tan((b-a)/4) * r
		p.CubeTo(
			Point{x + r*math.Cos(a) - h*math.Sin(a), y + r*math.Sin(a) + h*math.Cos(a)},
			Point{x + r*math.Cos(b) + h*math.Sin(b), y + r*math.Sin(b) - h*math.Cos(b)},
			Point{x + r*math.Cos(b), y + r*math.Sin(b)})
	}
}

// Bounds is the box of all points of a path, control points included.
func (p Path) Bounds() Box {
	x0, y0, x1, y1 := math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	for _, s := range p {
		for _, q := range s.Points() {
			x0, y0 = math.Min(x0, q.X), math.Min(y0, q.Y)
			x1, y1 = math.Max(x1, q.X), math.Max(y1, q.Y)
		}
	}
	if x1 < x0 {
		return Box{}
	}
	return Box{x0, y0, x1 - x0, y1 - y0}
}

// Points gives the points a step uses.
func (s Step) Points() []Point {
	switch s.Op {
	case Close:
		return nil
	case Cube:
		return s.P[:]
	}
	return s.P[:1]
}
