package reports

import (
	"fmt"
	"strconv"

	"github.com/boombuler/barcode"

	"lotgate/reports/chart"
	"lotgate/reports/ink"
)

// header sets verdict, serial number, reason and code.
func (s *sheet) header(y float64, code barcode.Barcode) float64 {
	width, below := fullWidth, y
	if code != nil {
		const column = 160
		width -= column + 14
		below = s.code(code, rightEdge-column, y, column)
	}
	s.Block = "header"
	top, _ := s.paragraph("Certificate of one motion module at goods-in", leftEdge, y, width, 8, ink.Regular, chart.Grey, 1)
	top += s.gap * 0.4
	drawRing(&s.Recording, s.c.Verdict, ink.Box{X: leftEdge, Y: top, W: s.ring, H: s.ring})
	x := leftEdge + s.ring + s.ring*0.28
	right := leftEdge + width - x
	// The word's capitals begin where the ring does.
	base := top + s.verdict*0.74
	s.Write(ink.Text{X: x - s.verdict*0.025, Y: base, Size: s.verdict, Face: ink.Bold, Color: chart.Ink, S: word(s.c.Verdict)})
	down := s.serialNumber(x, base+s.verdict*0.26, right)
	down = max(down, top+s.ring) + s.gap*0.5
	return max(s.reasonText(down, width), below)
}

// serialNumber sets the serial number as large as it fits on one line, else wrapped.
func (s *sheet) serialNumber(x, y, width float64) float64 {
	text := ink.Printable(s.c.Serial)
	size := s.serial
	for size > 9 && ink.Width(ink.Bold, size, text) > width {
		size -= 0.5
	}
	y, _ = s.paragraph(text, x, y, width, size, ink.Bold, chart.Ink, 4)
	return y
}

// reasonText sets the unit's reason, smaller where it is long.
func (s *sheet) reasonText(y, width float64) float64 {
	text := ink.Printable(minus(s.c.Reason))
	size := s.reason
	for size > smallest && len(ink.Wrap(text, ink.Regular, size, width)) > 4 {
		size = max(smallest, size-0.5)
	}
	y, cut := s.paragraph(text, leftEdge, y, width, size, ink.Regular, chart.Ink, s.reasonLines)
	if cut {
		s.cut = true
		y, _ = s.paragraph("The whole reason, "+strconv.Itoa(len([]rune(text)))+" characters, stands in this file's Subject and in the store.",
			leftEdge, y, width, smallest, ink.Bold, chart.Ink, 2)
	}
	return y
}

// code sets the square code with its text.
func (s *sheet) code(code barcode.Barcode, x, y, width float64) float64 {
	s.Block = "code"
	const side = 74
	drawSquare(&s.Recording, code, ink.Box{X: x + width - side, Y: y, W: side, H: side})
	y += side + 8 // four modules of quiet
	lines, _ := ink.Shorten(ink.Wrap(ink.Printable(s.c.Code), ink.Regular, smallest, width), 4, ink.Regular, smallest, width)
	for _, l := range lines {
		y = s.lines([]string{l}, x+width-ink.Width(ink.Regular, smallest, l), y, smallest, ink.Regular, chart.Grey)
	}
	return y
}

// fact is one entry of the grid: a caption with its value.
type fact struct {
	caption, value, more string
	columns              int // of four
}

func (s *sheet) factList() [][]fact {
	c := s.c
	var first []fact
	add := func(caption, value string) {
		if value != "" {
			first = append(first, fact{caption: caption, value: value, columns: 1})
		}
	}
	add("Lot", c.Lot)
	add("Part", c.Part)
	add("Supplier", c.Supplier)
	if c.Attempt > 0 {
		add("Attempt", strconv.Itoa(c.Attempt))
	}
	add("Measured", c.Time.UTC().Format("2006-01-02 15:04:05 UTC"))
	add("Station", c.Station)
	add("Nest", c.Nest)
	add("Operator", c.Operator)
	var rows [][]fact
	for len(first) > 0 {
		n := min(4, len(first))
		rows = append(rows, first[:n])
		first = first[n:]
	}
	var files []fact
	for _, f := range []struct {
		caption string
		Source
	}{{"Plan", c.Plan}, {"Limits", c.Limits}} {
		if f.Source != (Source{}) {
			files = append(files, source(f.caption, f.Source))
		}
	}
	if len(files) > 0 {
		rows = append(rows, files)
	}
	return rows
}

func source(caption string, f Source) fact {
	value := f.Name
	if f.Revision > 0 {
		value = fmt.Sprintf("%s, revision %d", f.Name, f.Revision)
	}
	if f.SHA256 != "" {
		caption += ", with its SHA-256"
	}
	return fact{caption, value, f.SHA256, 2}
}

// facts sets the grid that says whose, where, when and by what.
func (s *sheet) facts(y float64) float64 {
	s.Block = "facts"
	s.rule(y, chart.Ink)
	y += s.gap * 0.4
	const between = 12
	column := (fullWidth - 3*between) / 4
	for _, row := range s.factList() {
		x, bottom := leftEdge, y
		for _, f := range row {
			w := float64(f.columns)*(column+between) - between
			down := s.lines([]string{f.caption}, x, y, smallest, ink.Regular, chart.Grey)
			down, _ = s.paragraph(f.value, x, down, w, s.body, ink.Regular, chart.Ink, 5)
			if f.more != "" {
				down, _ = s.paragraph(f.more, x, down, w, smallest, ink.Regular, chart.Grey, 2)
			}
			bottom = max(bottom, down)
			x += w + between
		}
		y = bottom + s.gap*0.25
	}
	return y
}

// warnings sets what a reader must know before the numbers.
func (s *sheet) warnings(y float64) float64 {
	s.Block = "warnings"
	list := s.c.Warnings
	if s.c.Virtual {
		list = append([]string{VirtualWarning}, list...)
	}
	if len(list) == 0 {
		return y
	}
	y += s.gap * 0.3
	const inset = 9
	var lines []string
	for _, w := range list {
		lines = append(lines, ink.Wrap(ink.Printable(minus(w)), ink.Bold, s.body, fullWidth-2*inset)...)
	}
	height := float64(len(lines))*s.body*leading + 8
	s.Fill(ink.Rectangle(ink.Box{X: leftEdge, Y: y, W: fullWidth, H: height}), chart.Shade)
	s.Fill(ink.Rectangle(ink.Box{X: leftEdge, Y: y, W: 2.5, H: height}), chart.Ink)
	s.lines(lines, leftEdge+inset, y+4, s.body, ink.Bold, chart.Ink)
	return y + height
}
