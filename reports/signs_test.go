package reports

import (
	"encoding/xml"
	"errors"
	"io"
	"math"
	"strings"
	"testing"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

func level(v float64) *quantity.Decibel { d := quantity.Decibel(v); return &d }

func wellFormed(t *testing.T, svg string) {
	t.Helper()
	d := xml.NewDecoder(strings.NewReader(svg))
	for {
		if _, err := d.Token(); errors.Is(err, io.EOF) {
			return
		} else if err != nil {
			t.Fatalf("%v in %s", err, svg)
		}
	}
}

func TestRings(t *testing.T) {
	// Colours after Okabe and Ito (2008), "Color Universal Design".
	for _, c := range []struct {
		v       limits.Verdict
		color   string
		strokes int
	}{
		{limits.Pass, "#009E73", 1}, {limits.Marginal, "#E69F00", 2}, {limits.Fail, "#D55E00", 2}, {limits.Void, "#767676", 12},
	} {
		svg := RingSVG(c.v, 40)
		wellFormed(t, svg)
		if n := strings.Count(svg, `stroke="`+c.color+`"`); n != c.strokes || strings.Count(svg, "<path") != n {
			t.Errorf("%s: %d strokes in %s, want %d", c.v, n, c.color, c.strokes)
		}
		if !strings.Contains(svg, "<title>"+string(c.v)+"</title>") {
			t.Errorf("%s: the ring does not say its word", c.v)
		}
		var r ink.Recording
		drawRing(&r, c.v, ink.Box{X: 3, Y: 4, W: 40, H: 40})
		w := 40 * ringWeight
		for _, m := range r.Marks {
			for _, s := range m.Path {
				for i, p := range s.Points() {
					if s.Op == ink.Cube && i < 2 {
						continue // handles lie outside
					}
					if d := math.Hypot(p.X-23, p.Y-24); math.Abs(d-(20-w/2)) > 1e-9 {
						t.Errorf("%s: a point is %g from the middle, want %g", c.v, d, 20-w/2)
					}
				}
			}
		}
	}
	wellFormed(t, RingSVG(limits.None, 10))
}

func TestRingsDifferByShapeAlone(t *testing.T) {
	shapes := map[string]limits.Verdict{}
	for _, v := range []limits.Verdict{limits.Pass, limits.Marginal, limits.Fail, limits.Void} {
		svg := RingSVG(v, 40)
		for _, color := range []string{"#009E73", "#E69F00", "#D55E00", "#767676", string(v)} {
			svg = strings.ReplaceAll(svg, color, "")
		}
		if other, twice := shapes[svg]; twice {
			t.Errorf("without colour and word, %s is %s", v, other)
		}
		shapes[svg] = v
	}
}

// tick finds where the value's tick stands; ok is false where there is none.
func tick(r ink.Recording) (x float64, ok bool) {
	for _, m := range r.Marks {
		if m.Pen != nil && m.Pen.Color == chart.Accent {
			return m.Path[0].P[0].X, true
		}
	}
	return 0, false
}

func TestRulerGeometry(t *testing.T) {
	box := ink.Box{X: 10, Y: 20, W: 100, H: 12}
	near := func(what string, got, want float64) {
		t.Helper()
		if math.Abs(got-want) > 1e-9 {
			t.Errorf("%s at %g, want %g", what, got, want)
		}
	}
	draw := func(ruler Ruler) ink.Recording {
		var r ink.Recording
		drawRuler(&r, ruler, box)
		for _, m := range r.Marks {
			if b := m.Bounds(); !box.Holds(b, 1) || math.IsNaN(b.X+b.W) {
				t.Errorf("%+v: a mark at %v leaves the ruler", ruler, b)
			}
		}
		return r
	}

	// Limits 16 and 84 of 100 wide: 22 mA … 40 mA, so 31 mA is in the middle.
	r := draw(Ruler{Lower: ptr(22e-3), Upper: ptr(40e-3), Nominal: ptr(31e-3), Value: 26.5e-3, U: 0.9e-3, Known: true})
	var ends []float64
	for _, m := range r.Marks {
		if m.Pen != nil && m.Pen.Color == chart.Ink {
			ends = append(ends, m.Path[0].P[0].X)
		}
	}
	if len(ends) != 2 {
		t.Fatalf("%d ends", len(ends))
	}
	near("lower end", ends[0], 26)
	near("upper end", ends[1], 94)
	x, _ := tick(r)
	near("tick", x, 26+17)
	bar := false
	for _, m := range r.Marks {
		if m.Filled != nil && *m.Filled == chart.Accent.Over(0.5) {
			b := m.Bounds()
			near("bar from", b.X, 43-0.9/18*68)
			near("bar to", b.Right(), 43+0.9/18*68)
			bar = true
		}
		if m.Pen != nil && m.Pen.Width == 0.45 { // a guard band, U to either side of its limit
			b := m.Path.Bounds()
			middle := 26.0
			if b.X > 60 {
				middle = 94
			}
			near("guard band from", b.X, middle-0.9/18*68)
			near("guard band to", b.Right(), middle+0.9/18*68)
		}
	}
	if !bar {
		t.Error("no bar")
	}

	// One limit: the open side reaches zero.
	x, _ = tick(draw(Ruler{Upper: ptr(5), Value: 2.5, Known: true}))
	near("tick below an upper limit", x, 10+42)
	x, _ = tick(draw(Ruler{Lower: ptr(800), Value: 1200, U: 10, Known: true}))
	near("tick above a lower limit", x, 10+16+84*0.5)
	if at, ok := (Ruler{Lower: ptr(2), Value: 10, U: 1, Known: true}).place(100); !ok || at(10) > 100 || at(11) > 100 {
		t.Error("a value far above its only limit must stay on the ruler")
	}

	// Beyond the scale an arrow stands in for the tick.
	for _, v := range []float64{-100, 100} {
		far := draw(Ruler{Lower: ptr(1), Upper: ptr(2), Value: v, U: 1, Known: true})
		if _, ok := tick(far); ok {
			t.Errorf("%g is drawn as if it were on the scale", v)
		}
		last := far.Marks[len(far.Marks)-1]
		if last.Filled == nil || *last.Filled != chart.Accent || len(last.Path) != 4 {
			t.Errorf("%g has no arrow", v)
		}
	}

	if _, ok := tick(draw(Ruler{Lower: ptr(1), Upper: ptr(2), Value: 1.5})); ok {
		t.Error("a value that is not known was drawn")
	}
	if r := draw(Ruler{Value: 3, U: 1, Known: true}); len(r.Marks) != 0 {
		t.Error("without limits there is no ruler")
	}
	for _, odd := range []Ruler{
		{Upper: ptr(0), Value: math.NaN(), U: math.NaN(), Known: true}, {Lower: ptr(0), Value: 0, Known: true}, {Lower: ptr(2), Upper: ptr(1), Value: 1, Known: true},
		{Lower: ptr(1), Upper: ptr(2), Value: 1.5, U: math.Inf(1), Known: true}, {Lower: ptr(1), Upper: ptr(2), Value: 1.5, U: 9, Known: true}, {Upper: ptr(1), Value: math.Inf(-1), Known: true},
	} {
		draw(odd)
	}
}

func TestSimpleDecisionHasNoGuardBands(t *testing.T) {
	hatches := func(simple bool) int {
		var r ink.Recording
		drawRuler(&r, Ruler{Lower: ptr(1), Upper: ptr(2), Value: 1.5, U: 0.1, Known: true, Simple: simple}, ink.Box{W: 100, H: 10})
		n := 0
		for _, m := range r.Marks {
			if m.Pen != nil && m.Pen.Width == 0.45 {
				n++
			}
		}
		return n
	}
	if hatches(false) != 2 || hatches(true) != 0 {
		t.Errorf("%d guard bands guarded, %d simple; want 2 and 0", hatches(false), hatches(true))
	}
}

func TestRulerSVG(t *testing.T) {
	svg := RulerSVG(Ruler{Lower: ptr(22e-3), Upper: ptr(40e-3), Value: 31e-3, U: 0.5e-3, Known: true}, 140, 14, "supply current 31.00 mA ± 0.50 mA, 22 mA … 40 mA")
	wellFormed(t, svg)
	for _, need := range []string{`viewBox="0 0 140 14"`, "M22.4 0L22.4 14", "M117.6 0L117.6 14", `stroke="#0072B2"`, "<title>supply current 31.00 mA"} {
		if !strings.Contains(svg, need) {
			t.Errorf("the ruler lacks %s:\n%s", need, svg)
		}
	}
}
