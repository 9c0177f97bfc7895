package main

import (
	"context"
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/sound"
	"lotgate/fixtures/virtual"
	"lotgate/limits/quantity"
)

func (a *app) virtual() *cobra.Command {
	var o struct {
		station, lot, serial, playback, capture, write, store string
		rate, period                                          int
	}
	c := &cobra.Command{
		Use:   "virtual",
		Short: "Run the virtual bench as a process of its own, in real time",
		Long: `Runs the virtual bench behind a serial port (a pseudo terminal) and a sound device, as
the hardware would behave. It records the station's drive and plays the IF on channel 1
and the sense voltage on channel 2. --write-station writes the station file that
describes it. Standard input takes what an operator does, one on a line: seat SERIAL,
lot NAME, take, open, close, walk, drop, overload, sick.`,
		Args: exactly(cobra.NoArgs),
	}
	f := c.Flags()
	f.StringVar(&o.station, "station", "", "station file whose virtual: part describes the bench (default: the usual bench)")
	f.StringVar(&o.lot, "lot", "V-0001", "lot of the units")
	f.StringVar(&o.serial, "serial", "V00001", "unit in the nest at the start; empty: none")
	f.StringVar(&o.capture, "record", "", "sound device on which the station's drive is recorded")
	f.StringVar(&o.playback, "play", "", "sound device on which IF and sense are played")
	f.IntVar(&o.rate, "rate", 48000, "sample rate of the sound device, Hz")
	f.IntVar(&o.period, "period", 2400, "frames per period")
	f.StringVar(&o.write, "write-station", "", "write the station file of this bench to this new file")
	f.StringVar(&o.store, "store", "store", "with --write-station: the store it names")
	stationPlay := f.String("station-play", "", "with --write-station: the station's playback device")
	stationRecord := f.String("station-record", "", "with --write-station: the station's recording device")
	c.RunE = func(c *cobra.Command, _ []string) error {
		settings := virtual.Default()
		if o.station != "" {
			file, err := attach.Read(o.station)
			if err != nil {
				return err
			}
			if file.Virtual == nil {
				return fmt.Errorf("%s describes real devices: name a station file with virtual:", o.station)
			}
			settings = *file.Virtual
		}
		settings.SampleRate = quantity.Frequency(o.rate)
		bench, err := virtual.New(settings)
		if err != nil {
			return err
		}
		return virtual.Serve(c.Context(), virtual.ServeOptions{
			Bench: bench, Lot: o.lot, Serial: o.serial, Rate: quantity.Frequency(o.rate), Commands: a.in,
			Log: func(text string) { fmt.Fprintln(a.err, text) },
			OnPort: func(path string) {
				if o.write != "" {
					if err := writeStation(o.write, attach.Describe(bench, path, o.store, *stationPlay, *stationRecord, o.rate, o.period)); err != nil {
						fmt.Fprintln(a.err, "lotgate:", err)
						return
					}
				}
				fmt.Fprintf(a.out, "controller on %s\n", path)
			},
			Sound: func(ctx context.Context, process func(recorded, played [][]float32)) error {
				return sound.Stream(ctx, sound.Settings{Playback: o.playback, Capture: o.capture, Rate: quantity.Frequency(o.rate), Inputs: 2, Outputs: 2, Period: o.period}, process)
			},
		})
	}
	return c
}

// writeStation writes a new file; one that exists is not touched.
func writeStation(path string, text []byte) error {
	f, err := os.OpenFile(path, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
	if err != nil {
		return fmt.Errorf("the station file cannot be written: %w", err)
	}
	if _, err := f.Write(text); err != nil {
		f.Close()
		return err
	}
	return f.Close()
}
