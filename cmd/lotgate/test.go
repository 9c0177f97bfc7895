package main

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"unicode"

	"github.com/spf13/cobra"

	"lotgate/station"
	"lotgate/station/record"
)

func (a *app) test() *cobra.Command {
	var o struct {
		station, plan, lot, operator, serial string
		json                                 bool
	}
	c := &cobra.Command{
		Use:   "test",
		Short: "Test units, one serial number after another",
		Long: `Tests units by a plan. Serial numbers are read from standard input, one on a line, as a
scanner types them, until its end; --serial tests one. Every attempt is kept in the
store before its verdict is shown; yield log and certificate follow.
` + exitHelp,
		Example: "  lotgate test --station station-virtual.yaml --plan plan.yaml --lot L-0001 --operator ann",
		Args:    exactly(cobra.NoArgs),
	}
	f := c.Flags()
	f.StringVar(&o.station, "station", "station.yaml", "station file")
	f.StringVar(&o.plan, "plan", "plan.yaml", "plan file")
	f.StringVar(&o.lot, "lot", "", "lot the units belong to (needed)")
	f.StringVar(&o.operator, "operator", "", "who is testing (needed)")
	f.StringVar(&o.serial, "serial", "", "test this one unit")
	f.BoolVar(&o.json, "json", false, "print one JSON object for each attempt, in SI units")
	c.RunE = func(c *cobra.Command, _ []string) error {
		if strings.TrimSpace(o.lot) == "" || strings.TrimSpace(o.operator) == "" {
			return misuse{errors.New("test needs --lot and --operator: they go into the record of every unit")}
		}
		b, err := openBench(c.Context(), o.station, o.plan)
		if err != nil {
			return err
		}
		s := &session{app: a, bench: b, lot: o.lot, operator: o.operator, json: o.json, lines: bufio.NewScanner(a.in)}
		return errors.Join(s.run(c.Context(), o.serial), b.close())
	}
	return c
}

// session is one operator's run of the test command.
type session struct {
	*app
	bench         *bench
	lot, operator string
	json          bool
	lines         *bufio.Scanner
}

func (s *session) run(ctx context.Context, only string) error {
	bar := newBar(s.err)
	r := s.bench.runner
	r.Ask = func(ctx context.Context, text string) error {
		bar.clear()
		fmt.Fprintln(s.err, "→", text)
		if s.bench.attached.Virtual == nil && s.bench.attached.Bench.Interlock == nil && terminal(s.in) {
			fmt.Fprintln(s.err, "  press Enter when done")
			s.lines.Scan()
		}
		return ctx.Err()
	}
	r.Tell = func(e record.Event) {
		switch e.Kind {
		case "progress":
			share := 0.0
			if i := strings.LastIndex(e.Text, " "); i > 0 {
				fmt.Sscanf(e.Text[strings.LastIndex(e.Text[:i], " ")+1:], "%f", &share)
			}
			bar.set(share/100, e.Step)
		case "void", "fault":
			bar.clear()
			fmt.Fprintln(s.err, e.Kind+":", e.Text)
		}
	}
	defer bar.clear()
	if only != "" {
		return s.unit(ctx, only, bar)
	}
	for {
		if err := ctx.Err(); err != nil {
			return errors.New("stopped by the operator: supply off, target still")
		}
		fmt.Fprint(s.err, "serial number: ")
		if !s.lines.Scan() {
			fmt.Fprintln(s.err)
			return s.lines.Err()
		}
		serial := strings.TrimSpace(s.lines.Text())
		if serial == "" {
			continue
		}
		if err := s.unit(ctx, serial, bar); err != nil {
			return err
		}
	}
}

// unitOutput is an attempt in the form of --json.
func unitOutput(at *record.Attempt) station.UnitOutput {
	return station.UnitOutput{Lot: at.Lot, Serial: at.Serial, Attempt: at.ID, Number: at.Number, Verdict: at.Verdict, Reason: at.Reason, Readings: station.Output(at.Readings)}
}

// longestSerial is the longest serial number taken, in characters.
const longestSerial = 100

// checkSerial refuses what no scanner should have sent.
func checkSerial(serial string) error {
	if len([]rune(serial)) > longestSerial {
		return fmt.Errorf("the serial number has more than %d characters: scan it again", longestSerial)
	}
	for _, c := range serial {
		if !unicode.IsPrint(c) {
			return fmt.Errorf("the serial number %q holds a character that cannot be printed: scan it again", serial)
		}
	}
	return nil
}

// unit tests one unit and shows what came out.
func (s *session) unit(ctx context.Context, serial string, bar *bar) error {
	if err := checkSerial(serial); err != nil {
		fmt.Fprintln(s.err, "lotgate:", err)
		s.worse(statusVoid)
		return nil
	}
	s.bench.seat(s.lot, serial)
	attempts, runErr := s.bench.runner.Run(ctx, station.Unit{Lot: s.lot, Serial: serial, Operator: s.operator})
	bar.clear()
	for _, at := range attempts {
		certificate, notes, err := station.Finish(context.WithoutCancel(ctx), s.bench.store, at, s.bench.limits)
		if s.json {
			if err := json.NewEncoder(s.out).Encode(unitOutput(at)); err != nil {
				return err
			}
		} else {
			fmt.Fprintf(s.out, "%s  unit %s, attempt %d\n   %s\n", signed(s.out, at.Verdict, 8), at.Serial, at.Number, at.Reason)
			table(s.out, at.Readings)
			if certificate != "" {
				fmt.Fprintln(s.out, "  certificate", certificate)
			}
		}
		for _, n := range append(notes, at.Warnings...) {
			fmt.Fprintln(s.err, "note:", n)
		}
		if err != nil {
			return errors.Join(runErr, err)
		}
	}
	if n := len(attempts); n > 0 {
		s.verdict(attempts[n-1].Verdict)
	}
	if errors.Is(runErr, context.Canceled) {
		return errors.New("stopped by the operator")
	}
	return runErr
}
