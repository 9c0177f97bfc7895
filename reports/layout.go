package reports

import (
	"fmt"

	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// The page, in points.
const (
	leftEdge   = 42.5 // 15 mm
	rightEdge  = 595.28 - 42.5
	topEdge    = 40.0
	bottomEdge = 841.89 - 34
	fullWidth  = rightEdge - leftEdge
)

// smallest is the least size of type, in points.
const smallest = 6.5

// style is how tightly a page is set; sizes and distances in points.
type style struct {
	ring, verdict, serial float64
	reason                float64 // at most; smaller where the reason is long
	reasonLines           int     // at most
	body                  float64 // the grid of facts
	gap                   float64 // between blocks
	label, value, remark  float64 // in the table
	pad                   float64 // above and below a row's content
	ruler                 float64 // height
	remarkLines           int     // at most, per row; 0: only of rows that are not a pass
	namesBeside           bool    // the reading's name stands in the label's line
	chartLow, chartHigh   float64 // height; chartHigh 0: charts are left out
	small                 float64 // calibrations and cautions
}

// styles are tried in this order until everything has its place.
var styles = []style{
	{ring: 58, verdict: 36, serial: 15, reason: 10, reasonLines: 99, body: 9, gap: 16, label: 9, value: 9, remark: 7, pad: 5, ruler: 14, remarkLines: 9, chartLow: 170, chartHigh: 250, small: 6.8},
	{ring: 54, verdict: 34, serial: 15, reason: 9.5, reasonLines: 99, body: 8.5, gap: 12, label: 8.5, value: 8.5, remark: 6.8, pad: 3.4, ruler: 13, remarkLines: 9, chartLow: 135, chartHigh: 215, small: 6.8},
	{ring: 48, verdict: 30, serial: 14, reason: 9, reasonLines: 99, body: 8, gap: 9, label: 8, value: 8, remark: smallest, pad: 2.2, ruler: 11, remarkLines: 9, chartLow: 110, chartHigh: 215, small: smallest},
	{ring: 42, verdict: 26, serial: 12, reason: 8, reasonLines: 99, body: 7.5, gap: 7, label: 7.5, value: 7.5, remark: smallest, pad: 1.4, ruler: 9, remarkLines: 9, namesBeside: true, chartLow: 92, chartHigh: 215, small: smallest},
	{ring: 42, verdict: 26, serial: 12, reason: 8, reasonLines: 99, body: 7.5, gap: 7, label: 7.5, value: 7.5, remark: smallest, pad: 1.4, ruler: 9, remarkLines: 9, namesBeside: true, small: smallest},
	{ring: 42, verdict: 26, serial: 12, reason: 8, reasonLines: 40, body: 7, gap: 6, label: 7, value: 7, remark: smallest, pad: 1, ruler: 8, remarkLines: 4, namesBeside: true, small: smallest},
	{ring: 42, verdict: 26, serial: 12, reason: 8, reasonLines: 30, body: 7, gap: 6, label: 7, value: 7, remark: smallest, pad: 1, ruler: 8, remarkLines: 2, namesBeside: true, small: smallest},
	{ring: 42, verdict: 26, serial: 12, reason: 8, reasonLines: 22, body: 7, gap: 6, label: 7, value: 7, remark: smallest, pad: 1, ruler: 8, remarkLines: 1, namesBeside: true, small: smallest},
	{ring: 36, verdict: 22, serial: 11, reason: 7, reasonLines: 14, body: 7, gap: 5, label: 7, value: 7, remark: smallest, pad: 0.6, ruler: 8, remarkLines: 0, namesBeside: true, small: smallest},
}

// sheet is a page while it is being set.
type sheet struct {
	ink.Recording
	style
	c   Certificate
	cut bool // something said of the unit or a reading was shortened
}

// leading is the distance of lines, as a factor of the size.
const leading = 1.25

// lines sets wrapped lines below y and gives the y below the last.
func (s *sheet) lines(lines []string, x, y, size float64, face ink.Face, c ink.Color) float64 {
	for _, l := range lines {
		s.Write(ink.Text{X: x, Y: y + size*(ink.Ascent+(leading-1)/2), Size: size, Face: face, Color: c, S: l})
		y += size * leading
	}
	return y
}

// paragraph wraps a text, cuts it to max lines and sets it.
func (s *sheet) paragraph(text string, x, y, width, size float64, face ink.Face, c ink.Color, max int) (bottom float64, cut bool) {
	lines, cut := ink.Shorten(ink.Wrap(ink.Printable(text), face, size, width), max, face, size, width)
	return s.lines(lines, x, y, size, face, c), cut
}

// rule draws a hairline over the page's width.
func (s *sheet) rule(y float64, c ink.Color) {
	s.Stroke(ink.Segment(leftEdge, y, rightEdge, y), ink.Pen{Width: 0.5, Color: c})
}

// heading sets the name of a block.
func (s *sheet) heading(text string, y float64) float64 {
	return s.lines([]string{text}, leftEdge, y, 8, ink.Bold, chart.Ink) + 1
}

// layOut finds the first style in which the whole certificate has its place.
func layOut(c Certificate) (*sheet, error) {
	code, err := square(c.Code)
	if err != nil {
		return nil, err
	}
	figures, err := charts(c)
	if err != nil {
		return nil, fmt.Errorf("certificate of unit %s: %w", c.Serial, err)
	}
	for _, st := range styles {
		s := &sheet{style: st, c: c}
		y := s.header(topEdge, code) + s.gap
		y = s.facts(y)
		y = s.warnings(y)
		y = s.table(y+s.gap) + s.gap*0.6

		foot := &sheet{style: st, c: c}
		low := bottomEdge - foot.foot(0, len(figures) > 0 && st.chartHigh == 0)
		room := low - s.gap - y
		switch {
		case len(figures) > 0 && st.chartHigh > 0:
			if room < st.chartLow {
				continue
			}
			s.figures(figures, y, min(room, st.chartHigh))
		case room < 0:
			continue
		}
		s.foot(low, len(figures) > 0 && st.chartHigh == 0)
		return s, nil
	}
	return nil, fmt.Errorf("certificate of unit %s: %d readings, %d calibrations and %d warnings do not fit on one page: measure less in one plan, or split it",
		c.Serial, len(c.Rows), len(c.Calibrations), len(c.Warnings))
}

// charts makes the charts of what was measured.
func charts(c Certificate) ([]*chart.Chart, error) {
	var list []*chart.Chart
	if c.Noise != nil && len(c.Noise.Spectrum) > 0 {
		f, err := chart.NoiseSpectrum(*c.Noise)
		if err != nil {
			return nil, err
		}
		list = append(list, f)
	}
	if c.Response != nil && len(c.Response.Points) > 0 {
		f, err := chart.Response(*c.Response)
		if err != nil {
			return nil, err
		}
		list = append(list, f)
	}
	return list, nil
}

// figures draws the charts side by side.
func (s *sheet) figures(list []*chart.Chart, y, height float64) {
	const between = 20
	n := float64(len(list))
	w := (fullWidth - (n-1)*between) / n
	for i, f := range list {
		s.Block = fmt.Sprintf("chart %d", i+1)
		f.Draw(&s.Recording, ink.Box{X: leftEdge + float64(i)*(w+between), Y: y, W: w, H: height})
	}
}
