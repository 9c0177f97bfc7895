package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"runtime"
	"sync"

	"github.com/spf13/cobra"

	"lotgate/limits"
	"lotgate/station"
	"lotgate/station/record"
)

func (a *app) replay() *cobra.Command {
	var limitsPath string
	var asJSON bool
	c := &cobra.Command{
		Use:   "replay --limits FILE DIR…",
		Short: "Judge saved captures again",
		Long: `Works the readings out of capture folders and judges them, on the same road as a live
test takes from its captures onwards. Nothing is written.
` + exitHelp,
		Args: exactly(cobra.MinimumNArgs(1)),
	}
	c.Flags().StringVar(&limitsPath, "limits", "", "limits file (needed)")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object for each folder, in SI units")
	c.RunE = func(_ *cobra.Command, dirs []string) error {
		if limitsPath == "" {
			return misuse{errors.New("replay needs --limits FILE: the limits to judge by")}
		}
		data, err := os.ReadFile(limitsPath)
		if err != nil {
			return fmt.Errorf("the limits file cannot be read: %w", err)
		}
		l, err := limits.Read(limitsPath, data, limits.Any)
		if err != nil {
			return err
		}
		return a.replayAll(dirs, l, asJSON)
	}
	return c
}

// replayed is one folder's result.
type replayed struct {
	folder *record.Folder
	result station.Evaluation
	err    error
}

// replayAll works on as many folders at once as there are processors, and prints in the
// order given.
func (a *app) replayAll(dirs []string, l *limits.File, asJSON bool) error {
	results := make([]chan replayed, len(dirs))
	for i := range results {
		results[i] = make(chan replayed, 1)
	}
	next := make(chan int)
	var workers sync.WaitGroup
	for range min(runtime.GOMAXPROCS(0), len(dirs)) {
		workers.Go(func() {
			for i := range next {
				results[i] <- replayOne(dirs[i], l)
			}
		})
	}
	go func() {
		for i := range dirs {
			next <- i
		}
		close(next)
	}()
	bar := newBar(a.err)
	var failed []error
	for i, dir := range dirs {
		bar.set(float64(i)/float64(len(dirs)), dir)
		r := <-results[i]
		bar.clear()
		if r.err != nil {
			failed = append(failed, r.err)
			continue
		}
		if err := a.printReplay(dir, r, asJSON); err != nil {
			failed = append(failed, err)
		}
	}
	workers.Wait()
	return errors.Join(failed...)
}

func replayOne(dir string, l *limits.File) replayed {
	f, err := record.ReadFolder(dir)
	if err != nil {
		return replayed{err: err}
	}
	e, err := station.Evaluate(f.Captures, l)
	if err != nil {
		err = fmt.Errorf("%s: %w", dir, err)
	}
	f.Release()
	return replayed{f, e, err}
}

func (a *app) printReplay(dir string, r replayed, asJSON bool) error {
	a.verdict(r.result.Verdict)
	if asJSON {
		return json.NewEncoder(a.out).Encode(station.UnitOutput{Lot: r.folder.Lot, Serial: r.folder.Serial, Verdict: r.result.Verdict, Reason: r.result.Reason,
			Folder: dir, Readings: station.Output(r.result.Readings)})
	}
	fmt.Fprintf(a.out, "%s  unit %s of lot %s (%s)\n   %s\n", signed(a.out, r.result.Verdict, 8), r.folder.Serial, r.folder.Lot, dir, r.result.Reason)
	table(a.out, r.result.Readings)
	return nil
}
