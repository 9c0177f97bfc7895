package reports

import (
	"fmt"
	"strconv"
	"strings"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// The columns of the table of readings, from the page's left.
const (
	labelLeft   = leftEdge
	labelWidth  = 110
	rulerLeft   = labelLeft + labelWidth + 6
	rulerWidth  = 128
	valueLeft   = rulerLeft + rulerWidth + 6
	valueRight  = valueLeft + 118
	limitsLeft  = valueRight + 12
	verdictLeft = rightEdge - 46
	limitsWidth = verdictLeft - limitsLeft - 6
	remarkWidth = rightEdge - rulerLeft
)

// table sets the readings.
func (s *sheet) table(y float64) float64 {
	s.Block = "table head"
	right := func(text string, x, y float64, size float64, face ink.Face, c ink.Color) {
		s.lines([]string{text}, x-ink.Width(face, size, text), y, size, face, c)
	}
	s.lines([]string{"Reading"}, labelLeft, y, smallest, ink.Regular, chart.Grey)
	s.lines([]string{"Value between its limits"}, rulerLeft, y, smallest, ink.Regular, chart.Grey)
	right("Value ± U (95 %)", valueRight, y, smallest, ink.Regular, chart.Grey)
	s.lines([]string{"Limits"}, limitsLeft, y, smallest, ink.Regular, chart.Grey)
	y = s.lines([]string{"Verdict"}, verdictLeft, y, smallest, ink.Regular, chart.Grey) + 1.5
	s.rule(y, chart.Ink)
	for i, r := range s.c.Rows {
		s.Block = fmt.Sprintf("reading %d", i+1)
		y = s.row(r, y+s.pad) + s.pad
		s.rule(y, chart.Rule)
	}
	s.Block = "table foot"
	if len(s.c.Rows) == 0 {
		y, _ = s.paragraph("No reading was taken.", labelLeft, y+2, fullWidth, s.label, ink.Regular, chart.Grey, 1)
		return y
	}
	y, _ = s.paragraph("Ends: limits. Hatched: guard band, U to either side of a limit; neither pass nor fail is proven there. Tick: value. Bar: its U. Arrow: beyond the scale.",
		labelLeft, y+2, fullWidth, smallest, ink.Regular, chart.Grey, 2)
	if s.cut {
		y, _ = s.paragraph("What ends in … stands whole in this file's Subject and in the store.", labelLeft, y, fullWidth, smallest, ink.Bold, chart.Ink, 1)
	}
	return y
}

// row sets one reading and gives the y below it.
func (s *sheet) row(r Row, y float64) float64 {
	r, at := r.decided(s.c.Response)
	left := s.rowName(r, y)

	drawRuler(&s.Recording, Ruler{r.Lower, r.Upper, r.Nominal, r.Value, r.U, r.known(), r.Simple},
		ink.Box{X: rulerLeft, Y: y + 0.5, W: rulerWidth, H: s.ruler})
	value := r.valueText()
	if at > 0 && r.known() {
		value += " at " + frequency(at)
	}
	color := chart.Ink
	if !r.known() {
		color = chart.Grey
	}
	down := max(y+s.ruler+2, s.valueLines(value, y, color))
	down = max(down, s.limitLines(r.limitsText(), y))
	if r.Verdict != limits.None {
		ring := s.value
		drawRing(&s.Recording, r.Verdict, ink.Box{X: verdictLeft, Y: y + (s.value*leading-ring)/2, W: ring, H: ring})
		size := min(s.value, 7.8)
		s.Write(ink.Text{X: verdictLeft + ring + 3, Y: y + s.value*(ink.Ascent+(leading-1)/2), Size: size, Face: ink.Regular, Color: chart.Ink, S: word(r.Verdict)})
	} else {
		s.Write(ink.Text{X: verdictLeft, Y: y + s.value*(ink.Ascent+(leading-1)/2), Size: smallest, Color: chart.Grey, S: "not judged"})
	}
	if remark := ink.Printable(r.remark()); remark != "" && (s.remarkLines > 0 || r.Verdict != limits.Pass) {
		var cut bool
		down, cut = s.paragraph(remark, rulerLeft, down, remarkWidth, s.remark, ink.Regular, chart.Grey, max(1, s.remarkLines))
		s.cut = s.cut || cut
	}
	return max(left, down)
}

// limitLines sets the limits, a little smaller where they fit one line only so.
func (s *sheet) limitLines(text string, y float64) float64 {
	size := s.value
	for size > 7 && ink.Width(ink.Regular, size, text) > limitsWidth {
		size -= 0.25
	}
	text = ink.Printable(text)
	y += (s.value - size) * (ink.Ascent + (leading-1)/2) // on the value's base line
	bottom, _ := s.paragraph(text, limitsLeft, y, limitsWidth, size, ink.Regular, chart.Grey, 3)
	return bottom
}

// frequency prints where on a curve a point lies, in three digits.
func frequency(f quantity.Frequency) string {
	digits, err := strconv.ParseFloat(strconv.FormatFloat(float64(f), 'g', 3, 64), 64)
	if err != nil {
		digits = float64(f)
	}
	return quantity.Print(digits, quantity.Hertz)
}

// rowName sets label and name.
func (s *sheet) rowName(r Row, y float64) float64 {
	label, name := ink.Printable(r.Label), ink.Printable(r.Name)
	if label == "" {
		label, name = name, ""
	}
	if name != "" && s.namesBeside {
		both := label + "  "
		x := ink.Width(ink.Regular, s.label, both)
		if x+ink.Width(ink.Regular, smallest, name) <= labelWidth {
			s.Write(ink.Text{X: labelLeft + x, Y: y + s.label*(ink.Ascent+(leading-1)/2), Size: smallest, Color: chart.Grey, S: name})
			name = ""
		}
	}
	y, _ = s.paragraph(label, labelLeft, y, labelWidth, s.label, ink.Regular, chart.Ink, 2)
	if name != "" {
		y, _ = s.paragraph(name, labelLeft, y, labelWidth, smallest, ink.Regular, chart.Grey, 2)
	}
	return y
}

// valueLines sets the value to the right edge of its column: on one line if it fits,
// else its uncertainty and its frequency below.
func (s *sheet) valueLines(text string, y float64, c ink.Color) float64 {
	const width = valueRight - valueLeft
	lines := []string{text}
	if ink.Width(ink.Regular, s.value, text) > width {
		head, tail, _ := strings.Cut(text, " ± ")
		lines = []string{head}
		if tail != "" {
			lines = append(lines, "± "+tail)
		}
	}
	for _, l := range lines {
		for _, part := range ink.Wrap(l, ink.Regular, s.value, width) {
			y = s.lines([]string{part}, valueRight-ink.Width(ink.Regular, s.value, part), y, s.value, ink.Regular, c)
		}
	}
	return y
}
