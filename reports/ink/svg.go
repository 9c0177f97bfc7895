package ink

import (
	"fmt"
	"html"
	"io"
	"math"
	"strconv"
	"strings"
)

// SVG is a drawing for a page. It is one element that can stand alone in a file or
// inside HTML: no style, script, font or link in it.
type SVG struct {
	width, height float64
	title         string
	body          strings.Builder
}

var _ Surface = (*SVG)(nil)

// NewSVG starts a drawing of a size in points; title says in words what it shows.
func NewSVG(width, height float64, title string) *SVG {
	return &SVG{width: width, height: height, title: title}
}

func number(v float64) string {
	v = math.Round(v*1000) / 1000
	if v == 0 {
		v = 0 // no minus before zero
	}
	return strconv.FormatFloat(v, 'f', -1, 64)
}

func (c Color) hex() string { return fmt.Sprintf("#%02X%02X%02X", c.R, c.G, c.B) }

func data(p Path) string {
	var b strings.Builder
	for _, s := range p {
		b.WriteByte("MLCZ"[s.Op])
		for i, q := range s.Points() {
			if i > 0 {
				b.WriteByte(' ')
			}
			b.WriteString(number(q.X) + " " + number(q.Y))
		}
	}
	return b.String()
}

// Stroke strokes a path.
func (v *SVG) Stroke(p Path, pen Pen) {
	if pen.Width <= 0 || len(p) == 0 {
		return
	}
	fmt.Fprintf(&v.body, `<path d="%s" fill="none" stroke="%s" stroke-width="%s" stroke-linejoin="round"`, data(p), pen.Color.hex(), number(pen.Width))
	if len(pen.Dash) > 0 {
		lengths := make([]string, len(pen.Dash))
		for i, d := range pen.Dash {
			lengths[i] = number(d)
		}
		fmt.Fprintf(&v.body, ` stroke-dasharray="%s"`, strings.Join(lengths, " "))
		if pen.Offset != 0 {
			fmt.Fprintf(&v.body, ` stroke-dashoffset="%s"`, number(pen.Offset))
		}
	}
	v.body.WriteString("/>\n")
}

// Fill fills a path.
func (v *SVG) Fill(p Path, c Color) {
	if len(p) > 0 {
		fmt.Fprintf(&v.body, `<path d="%s" fill="%s"/>`+"\n", data(p), c.hex())
	}
}

// Write sets a line of text. Its length is given too, so that the drawing keeps its
// proportions in whatever font the page has.
func (v *SVG) Write(t Text) {
	if t.S == "" || t.Size <= 0 {
		return
	}
	fmt.Fprintf(&v.body, `<text x="%s" y="%s" font-family="Go, Arial, sans-serif" font-size="%s"`, number(t.X), number(t.Y), number(t.Size))
	if t.Face == Bold {
		v.body.WriteString(` font-weight="bold"`)
	}
	if t.Angle != 0 {
		fmt.Fprintf(&v.body, ` transform="rotate(%s %s %s)"`, number(-t.Angle*180/math.Pi), number(t.X), number(t.Y))
	}
	fmt.Fprintf(&v.body, ` textLength="%s" lengthAdjust="spacingAndGlyphs" fill="%s">%s</text>`+"\n",
		number(Width(t.Face, t.Size, t.S)), t.Color.hex(), html.EscapeString(t.S))
}

// String is the whole drawing.
func (v *SVG) String() string {
	title := html.EscapeString(v.title)
	w, h := number(v.width), number(v.height)
	return fmt.Sprintf(`<svg xmlns="http://www.w3.org/2000/svg" width="%s" height="%s" viewBox="0 0 %s %s" role="img" aria-label="%s">`+
		"\n<title>%s</title>\n%s</svg>\n", w, h, w, h, title, title, v.body.String())
}

// WriteTo writes the whole drawing.
func (v *SVG) WriteTo(w io.Writer) (int64, error) {
	n, err := io.WriteString(w, v.String())
	if err != nil {
		err = fmt.Errorf("writing the SVG: %w", err)
	}
	return int64(n), err
}
