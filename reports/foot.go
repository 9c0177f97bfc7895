package reports

import (
	"strconv"

	"lotgate/limits/quantity"
	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// foot sets calibrations, cautions and the last line below y.
func (s *sheet) foot(y float64, chartsLeftOut bool) float64 {
	if chartsLeftOut {
		s.Block = "left out"
		y, _ = s.paragraph("The charts of noise and response were left out for room; the store keeps them.",
			leftEdge, y, fullWidth, s.small, ink.Bold, chart.Ink, 2)
		y += s.gap * 0.5
	}
	y = s.calibrations(y)
	s.Block = "cautions"
	y = s.heading("Cautions", y)
	for _, text := range Cautions() {
		y, _ = s.paragraph(text, leftEdge, y, fullWidth, s.small, ink.Regular, chart.Ink, 3)
	}
	y += s.gap * 0.5
	s.Block = "last line"
	s.rule(y, chart.Rule)
	y += 3
	const right = "Lotgate, complete on one page"
	w := ink.Width(ink.Regular, smallest, right)
	left := s.c.Serial
	if s.c.Virtual {
		left = "Virtual bench. " + left
	}
	if s.c.Lot != "" {
		left += ", lot " + s.c.Lot
	}
	if s.c.Attempt > 0 {
		left += ", attempt " + strconv.Itoa(s.c.Attempt)
	}
	left += ": " + word(s.c.Verdict)
	s.paragraph(left, leftEdge, y, fullWidth-w-14, smallest, ink.Regular, chart.Grey, 1)
	return s.lines([]string{right}, rightEdge-w, y, smallest, ink.Regular, chart.Grey)
}

// calibrations sets what the numbers rest on, in two columns.
func (s *sheet) calibrations(y float64) float64 {
	s.Block = "calibrations"
	list := s.c.Calibrations
	if len(list) == 0 {
		return y
	}
	y = s.heading("Calibrations used", y)
	const between = 16
	const width = (fullWidth - between) / 2
	half := (len(list) + 1) / 2
	bottom := y
	for k, column := range [][]Calibration{list[:half], list[half:]} {
		x, down := leftEdge+float64(k)*(width+between), y
		for _, c := range column {
			face := ink.Regular
			if c.Overdue {
				face = ink.Bold
			}
			down, _ = s.paragraph(c.text(), x, down, width, s.small, face, chart.Ink, 3)
		}
		bottom = max(bottom, down)
	}
	return bottom + s.gap*0.5
}

func (c Calibration) text() string {
	unit, ok := quantity.UnitBySymbol(c.Unit)
	if !ok {
		unit = quantity.Unit{Symbol: c.Unit}
	}
	text := c.What + ": " + minus(quantity.PrintWith(c.Value, c.U, unit))
	if c.Date != "" {
		text += ", " + c.Date
	}
	switch {
	case c.Overdue:
		text += ", overdue since " + c.Due
	case c.Due != "":
		text += ", due " + c.Due
	}
	return text
}
