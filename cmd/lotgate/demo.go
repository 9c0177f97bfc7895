package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lotgate/station"
	"lotgate/station/record"
	"lotgate/station/starter"
)

func (a *app) demo() *cobra.Command {
	var units, seed int
	var out string
	var asJSON bool
	c := &cobra.Command{
		Use:   "demo",
		Short: "Screen a lot on the virtual bench, start to finish, without hardware",
		Args:  exactly(cobra.NoArgs),
	}
	c.Flags().IntVar(&units, "units", 40, "number of units in the lot")
	c.Flags().IntVar(&seed, "seed", 7, "all chance comes from this number")
	c.Flags().StringVar(&out, "out", "", "folder to make (default: lotgate-demo, with a number where it exists)")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object for each unit, in SI units; the rest goes to standard error")
	c.RunE = func(c *cobra.Command, _ []string) error {
		if units < 1 || units > 100000 {
			return misuse{fmt.Errorf("--units %d is not possible: write 1 to 100000", units)}
		}
		dir, err := freeFolder(out)
		if err != nil {
			return err
		}
		text := *a
		if asJSON {
			text.out = a.err
		}
		return text.screen(c.Context(), dir, units, seed, asJSON, a.out)
	}
	return c
}

// freeFolder is the folder asked for, or the first of the default names that is free.
func freeFolder(asked string) (string, error) {
	if asked != "" {
		if entries, err := os.ReadDir(asked); err == nil && len(entries) > 0 {
			return "", fmt.Errorf("%s is not empty: name a new folder with --out", asked)
		}
		return asked, nil
	}
	for n := 1; ; n++ {
		name := "lotgate-demo"
		if n > 1 {
			name = fmt.Sprintf("lotgate-demo-%d", n)
		}
		if _, err := os.Lstat(name); os.IsNotExist(err) {
			return name, nil
		} else if err != nil {
			return "", err
		}
	}
}

// again says how often something was taken again.
func again(attempts []*record.Attempt) string {
	taken := 0
	for _, a := range attempts {
		for _, e := range a.Events {
			if e.Kind == "void" {
				taken++
			}
		}
	}
	text := ""
	if n := len(attempts); n > 1 {
		text = fmt.Sprintf(" (attempt %d)", n)
	}
	if taken > 0 {
		text += fmt.Sprintf(" (%d disturbed acquisition taken again)", taken)
	}
	return text
}

const demoLot = "DEMO-0001"

// screen tests a whole lot and prints what a quality engineer wants to see of it.
func (a *app) screen(ctx context.Context, dir string, units, seed int, asJSON bool, out io.Writer) (err error) {
	if _, err := starter.Write(dir, nil); err != nil {
		return err
	}
	stationPath := filepath.Join(dir, "station-virtual.yaml")
	text := strings.Replace(string(starter.Content("station-virtual.yaml")), "seed: 1 ", fmt.Sprintf("seed: %d ", seed), 1)
	if err := os.WriteFile(stationPath, []byte(text), 0o644); err != nil {
		return err
	}
	b, err := openBench(ctx, stationPath, filepath.Join(dir, "plan.yaml"))
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, b.close()) }()
	fmt.Fprintf(a.out, "Lot %s: %d units on the virtual bench (simulated: no evidence of a real unit)\n\n", demoLot, units)
	started := time.Now()
	bar := newBar(a.err)
	for i := range units {
		serial := fmt.Sprintf("D%05d", i+1)
		bar.set(float64(i)/float64(units), serial)
		b.seat(demoLot, serial)
		attempts, err := b.runner.Run(ctx, station.Unit{Lot: demoLot, Serial: serial, Operator: "demo"})
		if err != nil {
			bar.clear()
			return err
		}
		for _, at := range attempts {
			if _, _, err := station.Finish(ctx, b.store, at, b.limits); err != nil {
				bar.clear()
				return err
			}
		}
		bar.clear()
		last := attempts[len(attempts)-1]
		if asJSON {
			if err := json.NewEncoder(out).Encode(unitOutput(last)); err != nil {
				return err
			}
			continue
		}
		more := again(attempts)
		fmt.Fprintf(a.out, "%s  %s%s  %s\n", signed(a.out, last.Verdict, 8), serial, more, last.Reason)
	}
	summary, err := station.Summarise(ctx, b.store, demoLot)
	if err != nil {
		return err
	}
	fmt.Fprint(a.out, "\n", summary)
	lot := filepath.Join(b.store.Dir(), "lots", record.SafeName(demoLot))
	fmt.Fprintf(a.out, "\n%.1f s for %d units. All is kept in %s:\n  certificates  %s\n  yield log     %s\n  store         %s\n",
		time.Since(started).Seconds(), units, dir, filepath.Join(lot, "certificates"), filepath.Join(lot, "yield.csv"), filepath.Join(b.store.Dir(), record.DatabaseFile))
	fmt.Fprintf(a.out, "\nWhy a reading is what it is:  lotgate explain --store %s D00001 sensitivity.echo\n", b.store.Dir())
	return nil
}
