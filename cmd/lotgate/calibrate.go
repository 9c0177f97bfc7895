package main

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
	"lotgate/station"
	"lotgate/station/calibrate"
	"lotgate/station/record"
)

// calibrateOptions are common to all calibrations.
type calibrateOptions struct {
	station string
	repeats int
	ambient string
	months  int
	json    bool
}

func (a *app) calibrate() *cobra.Command {
	o := &calibrateOptions{}
	c := &cobra.Command{
		Use:   "calibrate",
		Short: "Calibrate the bench: guided, dated, kept",
		Long: `Calibrates one thing after another: what to connect, what to read off the meter, what was
found and what it means. Each ends in a dated file in the station's calibrations folder, to
which the station file refers with "from:"; earlier ones are kept. In this order, on a new bench:

  lotgate calibrate level --input if      volts at full scale, response, high-pass, linearity
  lotgate calibrate level --input sense
  lotgate calibrate loop                  latency, clocks, crosstalk, noise, automatic gain
  lotgate calibrate gain                  the preamplifier over the band
  lotgate calibrate shunt                 the current shunt with its amplifier
  lotgate calibrate standoff              distance from module to target
  lotgate calibrate target                displacement per volt over the band
  lotgate calibrate list                  what there is, how it drifted, what is due

Modules radiate and shakers and supplies can hurt: both are off while you wire. Follow local
codes; mains wiring is work for licensed people.
` + exitHelp,
	}
	p := c.PersistentFlags()
	p.StringVar(&o.station, "station", "station.yaml", "station file")
	p.IntVar(&o.repeats, "repeats", 3, "how often each recording is taken, at least 3")
	p.StringVar(&o.ambient, "ambient", "", "temperature, if known, such as 23 °C")
	p.IntVar(&o.months, "months", 12, "months until it is due again")
	p.BoolVar(&o.json, "json", false, "print one JSON object, in SI units")
	c.AddCommand(a.calibrateLevel(o), a.calibrateGain(o), a.calibrateShunt(o), a.calibrateTarget(o), a.calibrateStandoff(o), a.calibrateLoop(o), a.calibrateList(o))
	return c
}

// perform opens the bench, runs a calibration, and files what it found.
func (a *app) perform(ctx context.Context, o *calibrateOptions, p calibrate.Procedure) (err error) {
	var ambient *calibration.Amount
	if o.ambient != "" {
		t, err := quantity.ParseAs[quantity.Temperature](o.ambient)
		if err != nil {
			return misuse{fmt.Errorf("--ambient: %w", err)}
		}
		v := calibration.Of(t)
		ambient = &v
	}
	if o.months < 1 || o.months > 120 {
		return misuse{fmt.Errorf("--months %d is not possible: write 1 to 120", o.months)}
	}
	file, err := attach.Read(o.station)
	if err != nil {
		return err
	}
	attached, err := file.OpenToCalibrate(ctx)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, attached.Close()) }()
	s := &calibrate.Session{Bench: attached.Bench, Setup: attached.Setup, Repeats: o.repeats}
	bar := newBar(a.err)
	defer bar.clear()
	s.Tell = func(text string) { bar.clear(); fmt.Fprintln(a.err, "  "+text) }
	s.Progress = func(share float64) { bar.set(share, "recording") }
	var clock station.Clock = station.WallClock{}
	if attached.Virtual != nil {
		clock = station.FastClock{}
		attached.Virtual.Seat("calibration", "reference")
		s.Hands = shownHands{attached.Virtual.Hands(), a.err, bar}
	} else {
		s.Hands = &person{in: bufio.NewScanner(a.in), out: a.err, bar: bar}
	}
	s.Wait = func(ctx context.Context, t quantity.Time) error {
		return clock.Sleep(ctx, time.Duration(float64(t)*float64(time.Second)))
	}
	found, err := s.Do(ctx, p)
	if err != nil {
		bar.clear()
		return fmt.Errorf("%w\nnothing was written", err)
	}
	bar.clear()
	found.Station, found.Ambient = file.Station, ambient
	found.Stamp(time.Now(), o.months)
	folder, err := calibration.Open(file.CalibrationFolder())
	if err != nil {
		return err
	}
	older := folder.Newest(found.Calibration, found.Of)
	path, err := a.fileCalibration(file, found)
	if err != nil {
		return err
	}
	if o.json {
		return json.NewEncoder(a.out).Encode(calibrationOutput(found, older, path, time.Now()))
	}
	a.showCalibration(found, older, path)
	return nil
}

// fileCalibration writes the file whole, under a name that is free.
func (a *app) fileCalibration(file *attach.File, found *calibration.File) (string, error) {
	data, err := found.Bytes()
	if err != nil {
		return "", err
	}
	if err := os.MkdirAll(file.CalibrationFolder(), 0o755); err != nil {
		return "", fmt.Errorf("the calibrations' folder cannot be made: %w: check the rights, or name another under calibrations: in the station file", err)
	}
	return record.WriteNew(filepath.Join(file.CalibrationFolder(), found.FileName()), data)
}

// number reads a flag's quantity; an empty one is zero.
func number[T ~float64](flag, text string) (T, error) {
	if text == "" {
		return 0, nil
	}
	v, err := quantity.ParseAs[T](text)
	if err != nil {
		return 0, misuse{fmt.Errorf("--%s: %w", flag, err)}
	}
	return v, nil
}

// numbers reads several flags of different quantities; the first error counts.
type numbers struct{ err error }

func take[T ~float64](n *numbers, flag, text string) T {
	v, err := number[T](flag, text)
	if err != nil && n.err == nil {
		n.err = err
	}
	return v
}
