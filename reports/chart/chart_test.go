package chart

import (
	"bytes"
	"compress/zlib"
	"encoding/xml"
	"fmt"
	"image"
	"image/color"
	"io"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/ink"
)

func level(v float64) *quantity.Decibel { d := quantity.Decibel(v); return &d }

func someNoise(n int) Noise {
	upper := quantity.NoiseDensity(1e-7)
	s := Noise{Low: 10, High: 1000, Readings: []NoiseReading{
		{NoisePoint: NoisePoint{100, 1.2e-7}, U: 4e-9, Upper: &upper, Verdict: limits.Fail}}}
	for i := range n {
		f := 5 + 1200*float64(i)/float64(n)
		s.Spectrum = append(s.Spectrum, NoisePoint{quantity.Frequency(f), quantity.NoiseDensity(6e-8 * math.Sqrt(1+40/f))})
	}
	return s
}

func someCurve() Curve {
	return Curve{Reference: 80, Points: []ResponsePoint{
		{10, -1, 0.2, level(-2), level(1), limits.Pass},
		{100, 0.1, 0.1, level(-2.7), level(1), limits.Pass},
		{500, -3.9, 0.3, level(-4), level(1), limits.Marginal},
		{1000, -9, 0.4, level(-6), level(1), limits.Fail}}}
}

func must(t *testing.T) func(*Chart, error) *Chart {
	return func(c *Chart, err error) *Chart {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return c
	}
}

// operators gives what the first page of a PDF draws: every number that a path step
// takes, with y from the top, and how many strokes, fills and texts there are.
func operators(t *testing.T, pdf []byte) (places []float64, counts map[string]int) {
	t.Helper()
	counts = map[string]int{}
	start := bytes.Index(pdf, []byte("stream\n"))
	r, err := zlib.NewReader(bytes.NewReader(pdf[start+len("stream\n"):]))
	if err != nil {
		t.Fatal(err)
	}
	page, err := io.ReadAll(r)
	if err != nil {
		t.Fatal(err)
	}
	step := regexp.MustCompile(`^((?:-?[0-9.]+ )+)([mlc])$`)
	for line := range strings.SplitSeq(string(page), "\n") {
		if m := step.FindStringSubmatch(line); m != nil {
			for i, field := range strings.Fields(m[1]) {
				v, err := strconv.ParseFloat(field, 64)
				if err != nil {
					t.Fatal(err)
				}
				if i%2 == 1 {
					v = ink.A4.H - v
				}
				places = append(places, v)
			}
		}
		switch {
		case line == "S", line == "f":
			counts[line]++
		case strings.Contains(line, " Tj ET"):
			counts["text"]++
		}
	}
	return places, counts
}

func TestPaperAndPageShowTheSamePlot(t *testing.T) {
	charts := map[string]*Chart{
		"noise":    must(t)(NoiseSpectrum(someNoise(300))),
		"response": must(t)(Response(someCurve())),
	}
	box := ink.Box{X: 40, Y: 60, W: 245, H: 150}
	for name, c := range charts {
		var r ink.Recording
		c.Draw(&r, box)
		var want []float64
		count := map[string]int{}
		for _, m := range r.Marks {
			for _, s := range m.Path {
				for _, p := range s.Points() {
					want = append(want, p.X, p.Y)
				}
			}
			switch {
			case m.Written != nil:
				count["text"]++
			case m.Pen != nil:
				count["S"]++
			default:
				count["f"]++
			}
		}
		if len(want) < 100 || count["text"] < 8 {
			t.Fatalf("%s: only %d coordinates and %d texts were drawn", name, len(want)/2, count["text"])
		}

		pdf := ink.NewPDF(ink.Facts{})
		c.Draw(pdf, box)
		var b bytes.Buffer
		if err := pdf.Output(&b); err != nil {
			t.Fatal(err)
		}
		got, counts := operators(t, b.Bytes())
		same(t, name+" on paper", got, want, 0.0101) // the PDF keeps hundredths
		if fmt.Sprint(counts) != fmt.Sprint(count) {
			t.Errorf("%s on paper: %v, drawn %v", name, counts, count)
		}

		svg := ink.NewSVG(400, 300, "")
		c.Draw(svg, box)
		got, counts = elements(t, svg.String())
		same(t, name+" on the page", got, want, 0.00051) // the SVG keeps thousandths
		if fmt.Sprint(counts) != fmt.Sprint(count) {
			t.Errorf("%s on the page: %v, drawn %v", name, counts, count)
		}
	}
}

func elements(t *testing.T, svg string) (places []float64, counts map[string]int) {
	t.Helper()
	counts = map[string]int{}
	d := xml.NewDecoder(strings.NewReader(svg))
	for {
		token, err := d.Token()
		if err == io.EOF {
			return places, counts
		}
		if err != nil {
			t.Fatal(err)
		}
		e, ok := token.(xml.StartElement)
		if !ok {
			continue
		}
		if e.Name.Local == "text" {
			counts["text"]++
		}
		for _, a := range e.Attr {
			switch {
			case a.Name.Local == "d":
				for _, field := range strings.FieldsFunc(a.Value, func(r rune) bool { return strings.ContainsRune("MLCZ ", r) }) {
					v, err := strconv.ParseFloat(field, 64)
					if err != nil {
						t.Fatal(err)
					}
					places = append(places, v)
				}
			case a.Name.Local == "stroke":
				counts["S"]++
			case a.Name.Local == "fill" && a.Value != "none" && e.Name.Local == "path":
				counts["f"]++
			}
		}
	}
}

func same(t *testing.T, what string, got, want []float64, tol float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: %d numbers, drawn %d", what, len(got), len(want))
	}
	for i := range got {
		if math.Abs(got[i]-want[i]) > tol {
			t.Fatalf("%s: number %d is %g, drawn %g", what, i, got[i], want[i])
		}
	}
}

func TestTicks(t *testing.T) {
	labels := func(ticks []plot.Tick) (s []string) {
		for _, k := range ticks {
			if k.Label != "" {
				s = append(s, k.Label)
			}
		}
		return s
	}
	for _, c := range []struct {
		low, high float64
		want      string
	}{
		{10, 1000, "[10 Hz 100 Hz 1 kHz]"},
		{2.5, 1250, "[10 Hz 100 Hz 1 kHz]"},
		{1, 20000, "[1 Hz 10 Hz 100 Hz 1 kHz 10 kHz]"},
		{150, 900, "[200 Hz 500 Hz]"},
		{40, 400, "[50 Hz 100 Hz 200 Hz]"},
	} {
		if got := fmt.Sprint(labels(decades{hertz}.Ticks(c.low, c.high))); got != c.want {
			t.Errorf("%g to %g Hz: %s, want %s", c.low, c.high, got, c.want)
		}
	}
	for _, c := range []struct {
		low, high float64
		want      string
	}{
		{-6.5, 1.5, "[−6 −4 −2 0]"},
		{-0.4, 0.4, "[−0.4 −0.2 0 0.2 0.4]"},
		{-44, 3, "[−40 −30 −20 −10 0]"},
	} {
		if got := fmt.Sprint(labels(even{}.Ticks(c.low, c.high))); got != c.want {
			t.Errorf("%g to %g dB: %s, want %s", c.low, c.high, got, c.want)
		}
	}
}

func TestThinLosesNoPeak(t *testing.T) {
	var points []vg.Point
	for i := range 5000 {
		y := 10.0
		if i == 2345 {
			y = 99
		}
		if i == 2346 {
			y = 1
		}
		points = append(points, point(float64(i)/50, y))
	}
	out := thin(points, 0.5)
	low, high := math.Inf(1), math.Inf(-1)
	for i, p := range out {
		low, high = math.Min(low, p.Y.Points()), math.Max(high, p.Y.Points())
		if i > 0 && p.X < out[i-1].X {
			t.Fatal("the order was changed")
		}
	}
	if low != 1 || high != 99 || len(out) > 4*201 {
		t.Errorf("%d points left, from %g to %g", len(out), low, high)
	}
	if out[0] != points[0] || out[len(out)-1] != points[len(points)-1] {
		t.Error("an end is missing")
	}
}

func TestNothingToDrawIsAnError(t *testing.T) {
	for _, n := range []Noise{{}, {Spectrum: []NoisePoint{{0, 1}, {10, 0}, {20, quantity.NoiseDensity(math.NaN())}}}} {
		if _, err := NoiseSpectrum(n); err == nil || !strings.Contains(err.Error(), "give two or more") {
			t.Errorf("noise %v: %v", n, err)
		}
	}
	for _, c := range []Curve{{}, {Points: []ResponsePoint{{Frequency: 10, Level: quantity.Decibel(math.NaN())}}}} {
		if _, err := Response(c); err == nil || !strings.Contains(err.Error(), "give one or more") {
			t.Errorf("response %v: %v", c, err)
		}
	}
}

func TestOddNumbersAreDrawnInside(t *testing.T) {
	flat := Noise{Spectrum: []NoisePoint{{10, 1e-8}, {10.1, 1e-8}}}
	deep := someNoise(50)
	deep.Spectrum[7].Density = 1e-30
	deep.Readings[0].U = 1 // the bar reaches below zero
	one := Curve{Points: []ResponsePoint{{Frequency: 80, Level: 0, U: quantity.Decibel(math.Inf(1))}}}
	masked := someCurve()
	masked.Mask = &limits.Mask{Upper: []limits.MaskPoint{{FrequencyHz: 5, DB: 2}, {FrequencyHz: 2000, DB: 2}}}
	charts := map[string]*Chart{
		"flat": must(t)(NoiseSpectrum(flat)), "deep": must(t)(NoiseSpectrum(deep)),
		"one": must(t)(Response(one)), "masked": must(t)(Response(masked)),
	}
	box := ink.Box{X: 10, Y: 10, W: 150, H: 90}
	for name, c := range charts {
		var r ink.Recording
		c.Draw(&r, box)
		for _, m := range r.Marks {
			b := m.Bounds()
			if math.IsNaN(b.X+b.Y+b.W+b.H) || !box.Holds(b, 3) {
				t.Errorf("%s: a mark at %v leaves the chart's box %v", name, b, box)
			}
		}
	}
}

func TestViolationsAreMarkedByShape(t *testing.T) {
	var r ink.Recording
	must(t)(Response(someCurve())).Draw(&r, ink.Box{W: 245, H: 150})
	crosses, diamonds := 0, 0
	for _, m := range r.Marks {
		if m.Pen == nil {
			continue
		}
		switch {
		case m.Pen.Color == Fail && len(m.Path) == 2 && m.Path[0].P[0].X != m.Path[1].P[0].X && m.Path[0].P[0].Y != m.Path[1].P[0].Y:
			crosses++
		case m.Pen.Color == Marginal && len(m.Path) == 5:
			diamonds++
		}
	}
	// One point of each and its entry in the key; a cross has two strokes.
	if crosses != 4 || diamonds != 2 {
		t.Errorf("%d strokes of crosses and %d diamonds, want 4 and 2", crosses, diamonds)
	}
}

func TestCanvasTransformsLikeAnyOther(t *testing.T) {
	var r ink.Recording
	c := NewCanvas(&r, ink.Box{X: 100, Y: 200, W: 50, H: 40})
	if w, h := c.Size(); w != 50 || h != 40 {
		t.Errorf("size %v × %v", w, h)
	}
	line := func(x0, y0, x1, y1 float64) {
		var p vg.Path
		p.Move(point(x0, y0))
		p.Line(point(x1, y1))
		c.Stroke(p)
	}
	face := font.Face{Font: font.Font{Size: 5, Weight: xfont.WeightBold}, Face: ink.Bold.Font()}
	line(0, 0, 1, 2)
	c.Push()
	c.Translate(point(10, 10))
	c.Rotate(math.Pi / 2)
	c.Scale(2, 2)
	c.SetLineWidth(3)
	c.SetLineDash([]vg.Length{1, 2}, 1)
	c.SetColor(color.NRGBA{0, 0, 0, 128})
	line(0, 0, 1, 2)
	c.FillString(face, point(1, 0), "x\u4e2d")
	c.Pop()
	line(0, 0, 1, 2)
	c.SetLineWidth(0)
	line(5, 5, 6, 6) // not drawn
	if len(r.Marks) != 4 {
		t.Fatalf("%d marks", len(r.Marks))
	}
	for i, want := range []ink.Point{{X: 101, Y: 238}, {X: 106, Y: 228}, {}, {X: 101, Y: 238}} {
		if i == 2 {
			continue
		}
		got := r.Marks[i].Path[1].P[0]
		if math.Hypot(got.X-want.X, got.Y-want.Y) > 1e-9 {
			t.Errorf("line %d ends at %v, want %v", i, got, want)
		}
	}
	pen := r.Marks[1].Pen
	if math.Abs(pen.Width-6) > 1e-12 || len(pen.Dash) != 2 || math.Abs(pen.Dash[1]-4) > 1e-12 || math.Abs(pen.Offset-2) > 1e-12 || pen.Color != (ink.Color{R: 127, G: 127, B: 127}) {
		t.Errorf("the scaled pen is %+v", *pen)
	}
	if last := r.Marks[3].Pen; last.Width != 1 || last.Dash != nil || last.Color != (ink.Color{}) {
		t.Errorf("after Pop the pen is %+v", *last)
	}
	text := r.Marks[2].Written
	if text.S != `x\u{4E2D}` || text.Face != ink.Bold || math.Abs(text.Size-10) > 1e-9 || math.Abs(text.Angle-math.Pi/2) > 1e-9 ||
		math.Abs(text.X-110) > 1e-9 || math.Abs(text.Y-228) > 1e-9 {
		t.Errorf("the turned text is %+v", *text)
	}
}

func TestCanvasCurvesAndImages(t *testing.T) {
	var r ink.Recording
	c := NewCanvas(&r, ink.Box{W: 100, H: 100})
	var p vg.Path
	p.Move(point(10, 0))
	p.Arc(point(0, 0), 10, 0, math.Pi/2)
	p.QuadTo(point(-10, 10), point(-10, 0))
	p.CubeTo(point(1, 1), point(2, 2), point(3, 3))
	p.Close()
	c.Fill(p)
	end := func(i int) ink.Point { s := r.Marks[0].Path[i]; return s.P[len(s.Points())-1] }
	path := r.Marks[0].Path
	if q := end(2); math.Hypot(q.X, q.Y-90) > 1e-9 {
		t.Errorf("the arc ends at %v", q)
	}
	if q := path[3].P[0]; math.Hypot(q.X+20./3, q.Y-90) > 1e-9 { // two thirds of the way from (0, 10) to (−10, 10)
		t.Errorf("the quadratic curve's first handle is %v", q)
	}
	if path[len(path)-1].Op != ink.Close {
		t.Error("the path is not closed")
	}

	var full ink.Recording
	c = NewCanvas(&full, ink.Box{W: 100, H: 100})
	var ring vg.Path
	ring.Arc(point(50, 50), 10, 0, 2*math.Pi) // without a Move, as glyphs of plots do
	c.Stroke(ring)
	if b := full.Marks[0].Path.Bounds(); math.Abs(b.W-20) > 1e-9 || math.Abs(b.H-20) > 1e-9 {
		t.Errorf("the ring's box is %v", b)
	}

	var picture ink.Recording
	c = NewCanvas(&picture, ink.Box{W: 100, H: 100})
	img := image.NewGray(image.Rect(0, 0, 4, 2))
	img.SetGray(3, 1, color.Gray{200})
	c.DrawImage(vg.Rectangle{Min: point(0, 0), Max: point(40, 20)}, img)
	if len(picture.Marks) != 3 { // a whole row; three equal pixels; one other
		t.Fatalf("%d rectangles", len(picture.Marks))
	}
	if b := picture.Marks[2].Path.Bounds(); b != (ink.Box{X: 30, Y: 90, W: 10, H: 10}) || *picture.Marks[2].Filled != (ink.Color{R: 200, G: 200, B: 200}) {
		t.Errorf("the odd pixel is at %v", b)
	}
}

func TestSVGStandsAlone(t *testing.T) {
	svg := must(t)(Response(someCurve())).SVG(300, 180)
	if !strings.HasPrefix(svg, `<svg xmlns="http://www.w3.org/2000/svg" width="300" height="180"`) || !strings.Contains(svg, "<title>IF response in dB, 0 dB at 80 Hz</title>") {
		t.Error(svg[:200])
	}
	elements(t, svg)
}
