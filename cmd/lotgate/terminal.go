package main

import (
	"fmt"
	"io"
	"os"
	"strings"

	"golang.org/x/term"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/station/record"
)

// colours of the verdicts in a terminal, from the Okabe–Ito palette.
var colours = map[limits.Verdict]string{
	limits.Pass: "\x1b[38;2;0;158;115m", limits.Marginal: "\x1b[38;2;230;159;0m",
	limits.Fail: "\x1b[38;2;213;94;0m", limits.Void: "\x1b[38;2;118;118;118m",
}

// terminal tells whether a stream is a terminal that takes colours.
func terminal(w any) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd())) && os.Getenv("NO_COLOR") == ""
}

// signed is a verdict with its ring, coloured where that can be seen.
func signed(w io.Writer, v limits.Verdict, width int) string {
	text := fmt.Sprintf("%s %-*s", v.Sign(), width, v)
	if terminal(w) {
		return colours[v] + text + "\x1b[0m"
	}
	return text
}

// table prints an attempt's readings.
func table(w io.Writer, readings []record.Judged) {
	for _, r := range readings {
		value := r.Quantity()
		switch {
		case r.Void != nil:
			value = "—"
		case r.Curve && len(r.Points) > 0:
			value = fmt.Sprintf("%d points from %v to %v", len(r.Points), quantity.Frequency(r.Points[0].FrequencyHz), quantity.Frequency(r.Points[len(r.Points)-1].FrequencyHz))
		}
		fmt.Fprintf(w, "  %s  %-28s %-28s %s\n", signed(w, r.Verdict, 8), r.Name, value, bounds(r))
		if r.Verdict != limits.Pass && r.Verdict != limits.None {
			fmt.Fprintf(w, "              %s\n", r.Reason)
		}
	}
}

// bounds are a reading's limits in words.
func bounds(r record.Judged) string {
	unit, _ := quantity.UnitBySymbol(r.Unit)
	switch {
	case r.Curve && r.Verdict != limits.None:
		return "against its mask"
	case r.Lower != nil && r.Upper != nil:
		return quantity.Print(*r.Lower, unit) + " to " + quantity.Print(*r.Upper, unit)
	case r.Lower != nil:
		return "at least " + quantity.Print(*r.Lower, unit)
	case r.Upper != nil:
		return "at most " + quantity.Print(*r.Upper, unit)
	}
	return ""
}

// bar is a progress bar on one line of a terminal; elsewhere it prints nothing.
type bar struct {
	w    io.Writer
	show bool
	last string
}

func newBar(w io.Writer) *bar { return &bar{w: w, show: terminal(w)} }

// set shows a share (0 to 1) and a text.
func (b *bar) set(share float64, text string) {
	if !b.show {
		return
	}
	const width = 28
	full := int(share*width + 0.5)
	line := fmt.Sprintf("\r\x1b[K[%s%s] %3.0f %%  %s", strings.Repeat("━", full), strings.Repeat(" ", width-full), share*100, text)
	if line != b.last {
		fmt.Fprint(b.w, line)
		b.last = line
	}
}

// clear takes the bar away.
func (b *bar) clear() {
	if b.show && b.last != "" {
		fmt.Fprint(b.w, "\r\x1b[K")
		b.last = ""
	}
}
