// Package chart draws the curves of a unit: noise spectrum and response. One builder
// serves paper (PDF) and page (SVG), since both are surfaces of package ink.
package chart

import (
	"image/color"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lotgate/reports/ink"
)

// The colours of charts: one accent for what was measured, greys for the rest, and
// those of the verdicts (Okabe and Ito, 2008) for points that are not inside.
var (
	Ink    = ink.Color{R: 0x1A, G: 0x1A, B: 0x1A}
	Grey   = ink.Color{R: 0x5A, G: 0x5A, B: 0x5A}
	Rule   = ink.Color{R: 0xD4, G: 0xD4, B: 0xD4}
	Shade  = ink.Color{R: 0xF0, G: 0xF0, B: 0xF0}
	Accent = ink.Color{R: 0x00, G: 0x72, B: 0xB2}

	Pass     = ink.Color{R: 0x00, G: 0x9E, B: 0x73}
	Marginal = ink.Color{R: 0xE6, G: 0x9F, B: 0x00}
	Fail     = ink.Color{R: 0xD5, G: 0x5E, B: 0x00}
	Void     = ink.Color{R: 0x76, G: 0x76, B: 0x76}
)

// Sizes of a chart's text, in points.
const (
	TitleSize = 8
	LabelSize = 6.5
)

// Chart is a plot with a title above its left edge and a key above its right.
type Chart struct {
	Title string // what is drawn, with its unit
	plot  *plot.Plot
	key   []keyEntry
}

// keyEntry explains one sign in the chart.
type keyEntry struct {
	sign func(s ink.Surface, x, y float64)
	text string
}

var fonts = font.NewCache(font.Collection{
	{Font: font.Font{Typeface: "Go"}, Face: ink.Regular.Font()},
	{Font: font.Font{Typeface: "Go", Weight: xfont.WeightBold}, Face: ink.Bold.Font()},
})

func rgba(c ink.Color) color.Color { return color.NRGBA{c.R, c.G, c.B, 255} }

// newPlot is an empty plot in our style.
func newPlot() *plot.Plot {
	p := plot.New()
	p.TextHandler = text.Plain{Fonts: fonts}
	p.BackgroundColor = nil
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.LineStyle = draw.LineStyle{Color: rgba(Grey), Width: 0.5}
		a.Tick.LineStyle = draw.LineStyle{Color: rgba(Grey), Width: 0.4}
		a.Tick.Length = 3
		a.Tick.Label.Font = font.Font{Typeface: "Go", Size: LabelSize}
		a.Tick.Label.Color = rgba(Grey)
		a.Tick.Label.Handler = p.TextHandler
		a.Label.TextStyle.Handler = p.TextHandler
		a.Label.TextStyle.Font = font.Font{Typeface: "Go", Size: LabelSize}
		a.Padding = 0
	}
	p.Title.TextStyle.Handler = p.TextHandler
	p.Title.TextStyle.Font = font.Font{Typeface: "Go", Size: TitleSize}
	return p
}

// Draw draws the chart into a box of a surface; 150 × 90 points is the least that can
// be read.
func (c *Chart) Draw(s ink.Surface, box ink.Box) {
	const head = 14
	s.Write(ink.Text{X: box.X, Y: box.Y + TitleSize, Size: TitleSize, Face: ink.Bold, Color: Ink, S: ink.Printable(c.Title)})
	x := box.Right()
	for i := len(c.key) - 1; i >= 0; i-- {
		k := c.key[i]
		x -= ink.Width(ink.Regular, LabelSize, k.text)
		s.Write(ink.Text{X: x, Y: box.Y + TitleSize, Size: LabelSize, Color: Grey, S: k.text})
		x -= 8
		k.sign(s, x, box.Y+TitleSize-2.3)
		x -= 10
	}
	lower := ink.Box{X: box.X, Y: box.Y + head, W: box.W, H: box.H - head}
	canvas := NewCanvas(s, lower)
	c.plot.Draw(draw.Canvas{Canvas: canvas, Rectangle: vg.Rectangle{Max: vg.Point{X: vg.Length(lower.W), Y: vg.Length(lower.H)}}})
}

// SVG is the chart as a drawing of its own, sizes in points.
func (c *Chart) SVG(width, height float64) string {
	v := ink.NewSVG(width, height, c.Title)
	c.Draw(v, ink.Box{W: width, H: height})
	return v.String()
}
