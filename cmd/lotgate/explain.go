package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/station"
	"lotgate/station/record"
)

func (a *app) explain() *cobra.Command {
	var store, folder, limitsPath string
	var asJSON bool
	c := &cobra.Command{
		Use:   "explain [SERIAL|ATTEMPT] [READING]",
		Short: "Explain a reading: its uncertainty budget and how it came about",
		Long: `Shows how readings came about: value, each source of uncertainty with its share, the
limits and the reason for the verdict. The last attempt on the unit is taken, or the
one named by its identifier; --captures explains a capture folder instead.`,
		Args: exactly(cobra.MaximumNArgs(2)),
	}
	c.Flags().StringVar(&store, "store", "store", "the store's folder")
	c.Flags().StringVar(&folder, "captures", "", "explain this capture folder")
	c.Flags().StringVar(&limitsPath, "limits", "", "with --captures: limits to judge by")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object for each reading, in SI units")
	c.RunE = func(c *cobra.Command, args []string) error {
		show := a.explainReadings
		if asJSON {
			show = a.explainJSON
		}
		if folder != "" {
			return a.explainFolder(folder, limitsPath, args, show, asJSON)
		}
		if len(args) == 0 {
			return misuse{errors.New("explain needs a serial number or an attempt's identifier, or --captures DIR")}
		}
		return a.explainStored(c.Context(), store, args, show, asJSON)
	}
	return c
}

// shower shows readings, all or the one named.
type shower func(readings []record.Judged, only string) error

func (a *app) explainFolder(folder, limitsPath string, args []string, show shower, quiet bool) error {
	f, err := record.ReadFolder(folder)
	if err != nil {
		return err
	}
	l := &limits.File{Name: "none", Readings: map[string]limits.Limit{}}
	if limitsPath != "" {
		data, err := os.ReadFile(limitsPath)
		if err != nil {
			return fmt.Errorf("the limits file cannot be read: %w", err)
		}
		if l, err = limits.Read(limitsPath, data, limits.Any); err != nil {
			return err
		}
	}
	e, err := station.Evaluate(f.Captures, l)
	if err != nil {
		return err
	}
	if !quiet {
		fmt.Fprintf(a.out, "unit %s of lot %s, captures in %s\n", f.Serial, f.Lot, folder)
	}
	return show(e.Readings, reading(args, 0))
}

func reading(args []string, i int) string {
	if i < len(args) {
		return args[i]
	}
	return ""
}

func (a *app) explainStored(ctx context.Context, dir string, args []string, show shower, quiet bool) (err error) {
	if _, err := os.Stat(dir); err != nil {
		return fmt.Errorf("there is no store: %w: name its folder with --store", err)
	}
	s, err := record.Open(ctx, dir)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, s.Close()) }()
	found, err := lastAttempt(ctx, s, args[0])
	if err != nil {
		return err
	}
	if quiet {
		return show(found.Readings, reading(args, 1))
	}
	fmt.Fprintf(a.out, "unit %s of lot %s, attempt %d (%s) at %s by %s\nplan %s revision %d, limits %s revision %d\n%s: %s\n", found.Serial, found.Lot, found.Number, found.ID,
		found.Started.Format("2006-01-02 15:04:05 MST"), found.Operator, found.Plan, found.PlanRevision, found.Limits, found.LimitsRev, signed(a.out, found.Verdict, 0), found.Reason)
	return show(found.Readings, reading(args, 1))
}

// lastAttempt finds an attempt by its identifier, or a unit's last one.
func lastAttempt(ctx context.Context, s *record.Store, name string) (*record.Attempt, error) {
	var found *record.Attempt
	for _, f := range []record.Filter{{ID: name}, {Serial: name}} {
		if err := s.Attempts(ctx, f, func(at *record.Attempt) bool { found = at; return true }); err != nil {
			return nil, err
		}
		if found != nil {
			return found, nil
		}
	}
	return nil, fmt.Errorf("the store %s holds no attempt and no unit %q", s.Dir(), name)
}

func (a *app) explainReadings(readings []record.Judged, only string) error {
	chosen, err := choose(readings, only)
	for _, r := range chosen {
		a.explainOne(r)
	}
	return err
}

func (a *app) explainJSON(readings []record.Judged, only string) error {
	chosen, err := choose(readings, only)
	for _, r := range chosen {
		if err := json.NewEncoder(a.out).Encode(r); err != nil {
			return err
		}
	}
	return err
}

// choose picks the reading named, or all.
func choose(readings []record.Judged, only string) ([]record.Judged, error) {
	if only == "" {
		return readings, nil
	}
	var names []string
	for _, r := range readings {
		if r.Name == only {
			return []record.Judged{r}, nil
		}
		names = append(names, r.Name)
	}
	return nil, fmt.Errorf("there is no reading %q: one of %s", only, strings.Join(names, ", "))
}

func (a *app) explainOne(r record.Judged) {
	unit, _ := quantity.UnitBySymbol(r.Unit)
	fmt.Fprintf(a.out, "\n%s\n", r.Name)
	switch {
	case r.Void != nil:
		fmt.Fprintf(a.out, "  void: %s\n  do:   %s\n", r.Void.Reason, r.Void.Action)
		return
	case r.Missing != "":
		fmt.Fprintf(a.out, "  no number: %s\n", r.Missing)
	case r.Curve:
		for _, p := range r.Points {
			fmt.Fprintf(a.out, "  %10v  %s  %s\n", quantity.Frequency(p.FrequencyHz), quantity.PrintWith(p.Value, p.Expanded, unit), p.Verdict)
		}
	default:
		fmt.Fprintf(a.out, "  %s\n", r.Quantity())
	}
	if r.Verdict != limits.None {
		fmt.Fprintf(a.out, "  %s: %s\n", r.Verdict, r.Reason)
	}
	for _, n := range r.Notes {
		fmt.Fprintf(a.out, "  note: %s\n", n)
	}
	b := r.Budget
	if len(b.Components) == 0 {
		return
	}
	fmt.Fprintf(a.out, "  %-70s %14s %7s %8s\n", "source of uncertainty", "u", "share", "dof")
	for _, c := range b.Components {
		dof := "∞"
		if c.Dof > 0 {
			dof = fmt.Sprintf("%.0f", c.Dof)
		}
		fmt.Fprintf(a.out, "  %-70s %14s %5.1f %% %8s\n", c.Source, quantity.PrintTo(c.U, math.Max(c.U, 1e-30)/5, unit), 100*c.U*c.U/(b.Combined*b.Combined), dof)
	}
	dof := "∞"
	if b.Dof > 0 {
		dof = fmt.Sprintf("%.0f", b.Dof)
	}
	fmt.Fprintf(a.out, "  combined u = %s, effective degrees of freedom %s, k = %.2f at %.0f %%: U = %s\n",
		quantity.PrintTo(b.Combined, b.Combined/5, unit), dof, b.Factor, b.Coverage*100, quantity.PrintTo(b.Expanded, b.Expanded/5, unit))
}
