package ink

import (
	"bytes"
	"encoding/xml"
	"errors"
	"io"
	"math"
	"strings"
	"testing"
	"time"
)

func TestArcStaysOnTheCircle(t *testing.T) {
	// A quarter circle by one cubic with handles of (4/3)·tan(π/8) radii is off by 0.0273 % at
	// most (common practice; follows from the cubic itself).
	const tol = 2.8e-4
	p := Circle(10, 20, 5)
	at := p[0].P[0]
	for _, s := range p[1:5] {
		for k := 0; k <= 50; k++ {
			u := float64(k) / 50
			v := 1 - u
			x := v*v*v*at.X + 3*v*v*u*s.P[0].X + 3*v*u*u*s.P[1].X + u*u*u*s.P[2].X
			y := v*v*v*at.Y + 3*v*v*u*s.P[0].Y + 3*v*u*u*s.P[1].Y + u*u*u*s.P[2].Y
			if r := math.Hypot(x-10, y-20); math.Abs(r/5-1) > tol {
				t.Fatalf("the circle of radius 5 is at %g", r)
			}
		}
		at = s.P[2]
	}
	if d := math.Hypot(at.X-15, at.Y-20); d > 1e-12 {
		t.Errorf("the circle ends %g from its start", d)
	}
}

func TestPrintable(t *testing.T) {
	for _, c := range []struct{ in, want, why string }{
		{"MM10-0417", "MM10-0417", "plain"},
		{"0.4 µV/√Hz ± 2 Ω ≤ 1 … − Δφ°", "0.4 µV/√Hz ± 2 Ω ≤ 1 … − Δφ°", "the trade's characters"},
		{"Мир Ζωή", "Мир Ζωή", "Cyrillic and Greek"},
		{"中文", `\u{4E2D}\u{6587}`, "not in the faces"},
		{"ok \U0001F642", `ok \u{1F642}`, "beyond the basic plane"},
		{"e\u0301", "é", "composed"},
		{"x\u0301\u0302", `x\u{0301}\u{0302}`, "marks with nothing to join"},
		{"a\u202eb\u200bc\x07", `a\u{202E}b\u{200B}c\u{0007}`, "what cannot be seen"},
		{" a\t\n b ", "a b", "white space"},
		{"a\xffb", `a\u{FFFD}b`, "not UTF-8"},
		{"", "", "nothing"},
	} {
		if got := Printable(c.in); got != c.want {
			t.Errorf("%s: Printable(%q) = %q, want %q", c.why, c.in, got, c.want)
		}
	}
}

func TestWrapKeepsEveryCharacterAndTheWidth(t *testing.T) {
	texts := []string{"", "word", "a few short words", strings.Repeat("unbroken", 40), strings.Repeat("ab cde fghij ", 30), "é " + strings.Repeat("Ω√", 60)}
	for _, s := range texts {
		for width := 12.0; width < 300; width += 23 {
			lines := Wrap(s, Regular, 9, width)
			for _, l := range lines {
				if w := Width(Regular, 9, l); w > width+1e-9 {
					t.Errorf("line %q is %g wide, allowed %g", l, w, width)
				}
			}
			squeeze := func(s string) string { return strings.ReplaceAll(s, " ", "") }
			if got := squeeze(strings.Join(lines, "")); got != squeeze(s) {
				t.Errorf("width %g: %q became %q", width, s, got)
			}
		}
	}
	if got := Wrap("WW", Regular, 9, 1); len(got) != 2 {
		t.Errorf("a width too small for a character must still give one character per line, got %q", got)
	}
}

func TestShorten(t *testing.T) {
	lines := Wrap(strings.Repeat("one two three ", 20), Bold, 8, 90)
	short, cut := Shorten(lines, 3, Bold, 8, 90)
	if !cut || len(short) != 3 || !strings.HasSuffix(short[2], "…") || Width(Bold, 8, short[2]) > 90 {
		t.Errorf("got %q, cut %v", short, cut)
	}
	if same, cut := Shorten(lines, len(lines), Bold, 8, 90); cut || len(same) != len(lines) {
		t.Error("lines that fit were cut")
	}
	if none, cut := Shorten(nil, 3, Bold, 8, 90); cut || len(none) != 0 {
		t.Error("nothing was cut")
	}
}

func TestWidthAgreesWithThePDF(t *testing.T) {
	p := NewPDF(Facts{})
	for _, f := range []Face{Regular, Bold} {
		const s = "Supply current 31.02 mA ± 0.14 mA, 73 nV/√Hz"
		p.Write(Text{X: 10, Y: 10, Size: 10, Face: f, S: s})
		// The PDF keeps each advance as a whole number of thousandths of the size.
		tol := 0.001 * 10 * float64(len([]rune(s)))
		if got, want := Width(f, 10, s), p.doc.GetStringWidth(s); math.Abs(got-want) > tol {
			t.Errorf("face %d: width %g, in the PDF %g", f, got, want)
		}
	}
}

func draw(s Surface) {
	s.Fill(Rectangle(Box{1, 2, 30, 40}), Color{1, 2, 3})
	s.Stroke(Circle(50, 50, 10), Pen{Width: 2, Color: Color{200, 0, 10}, Dash: []float64{2, 1}, Offset: 0.5})
	s.Stroke(Segment(0, 0, 9, 9), Pen{Width: 0, Color: Color{}})
	s.Write(Text{X: 5, Y: 60, Size: 9, Face: Bold, Angle: math.Pi / 2, S: `<&"> Ω`})
	s.Write(Text{X: 5, Y: 60, Size: 9, S: ""})
}

func TestSVGIsWellFormed(t *testing.T) {
	v := NewSVG(100, 80, `a "title" & <more>`)
	draw(v)
	d := xml.NewDecoder(strings.NewReader(v.String()))
	count := map[string]int{}
	text := ""
	for {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		switch e := token.(type) {
		case xml.StartElement:
			count[e.Name.Local]++
		case xml.CharData:
			text += string(e)
		}
	}
	if count["svg"] != 1 || count["path"] != 2 || count["text"] != 1 || count["title"] != 1 {
		t.Errorf("elements: %v", count)
	}
	if !strings.Contains(text, `<&"> Ω`) || !strings.Contains(text, `a "title" & <more>`) {
		t.Errorf("text: %q", text)
	}
	if strings.Contains(v.String(), "style=") || strings.Contains(v.String(), "<script") {
		t.Error("the drawing must be usable where a page forbids inline styles and scripts")
	}
}

type brokenWriter struct{}

func (brokenWriter) Write([]byte) (int, error) { return 0, errors.New("disk full") }

func TestWritersSayWhatFailed(t *testing.T) {
	if _, err := NewSVG(1, 1, "").WriteTo(brokenWriter{}); err == nil || err.Error() != "writing the SVG: disk full" {
		t.Errorf("SVG: %v", err)
	}
	if err := NewPDF(Facts{}).Output(brokenWriter{}); err == nil || !strings.HasPrefix(err.Error(), "writing the PDF: ") {
		t.Errorf("PDF: %v", err)
	}
}

func TestPDFBytesAreDecidedByTheMarks(t *testing.T) {
	at := time.Date(2026, 8, 3, 9, 41, 27, 0, time.UTC)
	output := func(f Facts) []byte {
		p := NewPDF(f)
		draw(p)
		p.AddPage()
		draw(p)
		if p.Pages() != 2 {
			t.Errorf("%d pages", p.Pages())
		}
		var b bytes.Buffer
		if err := p.Output(&b); err != nil {
			t.Fatal(err)
		}
		return b.Bytes()
	}
	one := output(Facts{"t", "s", at})
	if !bytes.Equal(one, output(Facts{"t", "s", at.In(time.FixedZone("", 3600))})) {
		t.Error("the same facts gave different bytes")
	}
	if bytes.Equal(one, output(Facts{"t", "s", at.Add(time.Second)})) {
		t.Error("another time gave the same bytes")
	}
}

func TestRecordingPlaysWhatItHeard(t *testing.T) {
	var r Recording
	draw(&r)
	a, b := NewSVG(9, 9, ""), NewSVG(9, 9, "")
	draw(a)
	r.Play(b)
	if a.String() != b.String() {
		t.Error("played back, the drawing is another")
	}
}

func TestBounds(t *testing.T) {
	if got := (Mark{Path: Segment(1, 2, 5, 2), Pen: &Pen{Width: 2}}).Bounds(); got != (Box{0, 1, 6, 2}) {
		t.Errorf("stroke: %v", got)
	}
	up := Text{X: 10, Y: 50, Size: 10, S: "IIII", Angle: math.Pi / 2}.Bounds()
	w := Width(Regular, 10, "IIII")
	want := Box{10 - 10*Ascent, 50 - w, 10 * (Ascent + Descent), w}
	for _, d := range []float64{up.X - want.X, up.Y - want.Y, up.W - want.W, up.H - want.H} {
		if math.Abs(d) > 1e-9 {
			t.Fatalf("upright text: %v, want %v", up, want)
		}
	}
	a := Box{0, 0, 10, 10}
	if !a.Overlaps(Box{9, 9, 5, 5}, 0.5) || a.Overlaps(Box{10, 0, 5, 5}, 0) || a.Overlaps(Box{9.8, 0, 5, 5}, 0.5) {
		t.Error("overlap is judged wrongly")
	}
	if !a.Holds(Box{0, 0, 10, 10}, 0) || a.Holds(Box{0, 0, 10.2, 10}, 0.1) {
		t.Error("holding is judged wrongly")
	}
	if (Path{}).Bounds() != (Box{}) {
		t.Error("an empty path has no box")
	}
}
