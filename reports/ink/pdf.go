package ink

import (
	"fmt"
	"io"
	"math"
	"slices"
	"time"

	"github.com/jung-kurt/gofpdf"
)

// PDF is a document with the surface of its current page. The same marks and the same
// facts give the same bytes.
type PDF struct {
	doc   *gofpdf.Fpdf
	known [2]bool // faces already embedded
	pen   Pen
	lined bool // pen is what the page has set
}

var _ Surface = (*PDF)(nil)

// A4 is the size of a page, in points.
var A4 = Box{0, 0, 595.28, 841.89}

// Facts is what a document says of itself.
type Facts struct {
	Title, Subject string
	Created        time.Time // printed into the file; decides its bytes
}

// NewPDF starts a document with one empty A4 page.
func NewPDF(f Facts) *PDF {
	doc := gofpdf.New("P", "pt", "A4", "")
	doc.SetCatalogSort(true)
	doc.SetCreationDate(f.Created.UTC())
	doc.SetModificationDate(f.Created.UTC())
	doc.SetTitle(f.Title, true)
	doc.SetSubject(f.Subject, true)
	doc.SetProducer("Lotgate", true)
	doc.SetMargins(0, 0, 0)
	doc.SetAutoPageBreak(false, 0)
	p := &PDF{doc: doc}
	p.AddPage()
	return p
}

// AddPage starts a further page.
func (p *PDF) AddPage() {
	p.doc.AddPage()
	p.doc.SetLineCapStyle("butt")
	p.doc.SetLineJoinStyle("round")
	p.lined = false
}

// Pages is how many pages there are.
func (p *PDF) Pages() int { return p.doc.PageCount() }

// Stroke strokes a path.
func (p *PDF) Stroke(path Path, pen Pen) {
	if pen.Width <= 0 || len(path) == 0 {
		return
	}
	if !p.lined || pen.Color != p.pen.Color {
		p.doc.SetDrawColor(int(pen.Color.R), int(pen.Color.G), int(pen.Color.B))
	}
	if !p.lined || pen.Width != p.pen.Width {
		p.doc.SetLineWidth(pen.Width)
	}
	if !p.lined || pen.Offset != p.pen.Offset || !slices.Equal(pen.Dash, p.pen.Dash) {
		p.doc.SetDashPattern(slices.Clone(pen.Dash), pen.Offset)
	}
	p.pen, p.lined = pen, true
	p.trace(path)
	p.doc.DrawPath("D")
}

// Fill fills a path.
func (p *PDF) Fill(path Path, c Color) {
	if len(path) == 0 {
		return
	}
	p.doc.SetFillColor(int(c.R), int(c.G), int(c.B))
	p.trace(path)
	p.doc.DrawPath("F")
}

func (p *PDF) trace(path Path) {
	for _, s := range path {
		a, b, c := s.P[0], s.P[1], s.P[2]
		switch s.Op {
		case Move:
			p.doc.MoveTo(a.X, a.Y)
		case Line:
			p.doc.LineTo(a.X, a.Y)
		case Cube:
			p.doc.CurveBezierCubicTo(a.X, a.Y, b.X, b.Y, c.X, c.Y)
		case Close:
			p.doc.ClosePath()
		}
	}
}

var faceNames = [...]string{Regular: "go", Bold: "gobold"}

// Write sets a line of text; its face is embedded at its first use.
func (p *PDF) Write(t Text) {
	if t.S == "" || t.Size <= 0 {
		return
	}
	name := faceNames[t.Face]
	if !p.known[t.Face] {
		p.doc.AddUTF8FontFromBytes(name, "", slices.Clone(faceBytes[t.Face]))
		p.known[t.Face] = true
	}
	p.doc.SetFont(name, "", t.Size)
	p.doc.SetTextColor(int(t.Color.R), int(t.Color.G), int(t.Color.B))
	if t.Angle != 0 {
		p.doc.TransformBegin()
		p.doc.TransformRotate(t.Angle*180/math.Pi, t.X, t.Y)
	}
	p.doc.Text(t.X, t.Y, t.S)
	if t.Angle != 0 {
		p.doc.TransformEnd()
	}
}

// Output writes the document and ends it.
func (p *PDF) Output(w io.Writer) error {
	if err := p.doc.Output(w); err != nil {
		return fmt.Errorf("writing the PDF: %w", err)
	}
	return nil
}
