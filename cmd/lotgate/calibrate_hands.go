package main

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"strings"

	"lotgate/fixtures"
	"lotgate/limits/quantity"
)

// person wires the bench and reads instruments, told and asked on the terminal.
type person struct {
	in  *bufio.Scanner
	out io.Writer
	bar *bar
}

var errNoAnswer = fmt.Errorf("the calibration was stopped: no answer")

// Connect tells what to wire and waits for Enter.
func (p *person) Connect(ctx context.Context, _ fixtures.Wiring, text string) error {
	p.bar.clear()
	fmt.Fprintf(p.out, "→ %s\n  press Enter when done ", text)
	if !p.in.Scan() {
		fmt.Fprintln(p.out)
		return errNoAnswer
	}
	return ctx.Err()
}

// Read asks for a reading with its unit until it can be understood.
func (p *person) Read(ctx context.Context, i fixtures.Instrument, text string) (float64, error) {
	for {
		p.bar.clear()
		fmt.Fprintf(p.out, "→ %s, as the %s shows it (with its unit, such as 853.2 mV): ", text, i)
		if !p.in.Scan() {
			fmt.Fprintln(p.out)
			return 0, errNoAnswer
		}
		if err := ctx.Err(); err != nil {
			return 0, err
		}
		v, err := quantity.ParseAs[quantity.Voltage](strings.TrimSpace(p.in.Text()))
		if err == nil {
			return float64(v), nil
		}
		fmt.Fprintln(p.out, "  ", err)
	}
}

// shownHands are the virtual bench's own, with what they do shown.
type shownHands struct {
	fixtures.Hands
	out io.Writer
	bar *bar
}

func (h shownHands) Connect(ctx context.Context, w fixtures.Wiring, text string) error {
	h.bar.clear()
	fmt.Fprintf(h.out, "→ %s\n  done by the virtual bench\n", text)
	return h.Hands.Connect(ctx, w, text)
}

func (h shownHands) Read(ctx context.Context, i fixtures.Instrument, text string) (float64, error) {
	v, err := h.Hands.Read(ctx, i, text)
	h.bar.clear()
	if err == nil {
		fmt.Fprintf(h.out, "→ %s: the virtual bench's %s shows %v\n", text, i, quantity.Voltage(v))
	}
	return v, err
}
