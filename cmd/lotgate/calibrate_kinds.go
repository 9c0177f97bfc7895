package main

import (
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/curve"
	"lotgate/limits/quantity/document"
	"lotgate/station/calibrate"
)

func (a *app) calibrateLevel(o *calibrateOptions) *cobra.Command {
	var p calibrate.Level
	var meter, volts, reference, lowest string
	c := &cobra.Command{Use: "level", Short: "Volts at full scale of a sound input, its response, high-pass and linearity (15 minutes)",
		Long: `With --method dc: a direct voltage, read on a meter, is chopped by the controller: the square
wave's fundamental is 2/π of it, its odd harmonics 1/3, 1/5 … so that one recording gives the
input's response too. With --method ac: a tone of the sound output, read on a meter of true
effective value; without a response.`, Args: exactly(cobra.NoArgs)}
	f := c.Flags()
	f.StringVar(&p.Input, "input", "if", "the input's name in the station file")
	f.StringVar(&p.Method, "method", "dc", "dc or ac")
	f.StringVar(&meter, "meter", "", "expanded uncertainty (k = 2) of the voltmeter, such as 0.1 % (needed)")
	f.StringVar(&volts, "volts", "", "about the voltage to set the source to (default: 0.6 of nominal full scale)")
	f.StringVar(&reference, "reference", "400 Hz", "frequency at which full scale is stated")
	f.StringVar(&lowest, "lowest", "1 Hz", "lowest chopping frequency")
	c.RunE = func(c *cobra.Command, _ []string) error {
		var n numbers
		p.Meter, p.Volts = take[quantity.Ratio](&n, "meter", meter), take[quantity.Voltage](&n, "volts", volts)
		p.Reference, p.Lowest = take[quantity.Frequency](&n, "reference", reference), take[quantity.Frequency](&n, "lowest", lowest)
		switch {
		case n.err != nil:
			return n.err
		case p.Method != "dc" && p.Method != "ac":
			return misuse{fmt.Errorf("--method %q is not known: write dc or ac", p.Method)}
		case !(p.Meter > 0):
			return misuse{fmt.Errorf("--meter is needed: the voltmeter's expanded uncertainty, such as --meter 0.1%%")}
		}
		return a.perform(c.Context(), o, p)
	}
	return c
}

func (a *app) calibrateGain(o *calibrateOptions) *cobra.Command {
	var p calibrate.Gain
	var divider, uncertainty string
	c := &cobra.Command{Use: "gain", Short: "Gain of a preamplifier over the band (10 minutes)",
		Long: `Compares the same multitone at the same input without and with the preamplifier. With
--method divider a divider of known ratio stands before it; with --method difference the output
plays lower by a known factor instead, which trusts its level steps.`, Args: exactly(cobra.NoArgs)}
	f := c.Flags()
	f.StringVar(&p.Input, "input", "if", "the input's name in the station file")
	f.StringVar(&p.Method, "method", "divider", "divider or difference")
	f.StringVar(&divider, "divider", "", "the divider's ratio, input over output, such as 201")
	f.StringVar(&uncertainty, "divider-uncertainty", "", "its expanded uncertainty (k = 2), such as 0.1 %")
	c.RunE = func(c *cobra.Command, _ []string) error {
		var n numbers
		p.Divider, p.DividerU = take[quantity.Ratio](&n, "divider", divider), take[quantity.Ratio](&n, "divider-uncertainty", uncertainty)
		switch {
		case n.err != nil:
			return n.err
		case p.Method != "divider" && p.Method != "difference":
			return misuse{fmt.Errorf("--method %q is not known: write divider or difference", p.Method)}
		case p.Method == "divider" && !(p.Divider > 0 && p.DividerU > 0):
			return misuse{fmt.Errorf("--divider and --divider-uncertainty are needed, such as --divider 201 --divider-uncertainty 0.1%%")}
		}
		return a.perform(c.Context(), o, p)
	}
	return c
}

func (a *app) calibrateShunt(o *calibrateOptions) *cobra.Command {
	var p calibrate.Shunt
	var load, loadU, meter string
	c := &cobra.Command{Use: "shunt", Short: "The current shunt with its amplifier, by a load resistor (10 minutes)", Args: exactly(cobra.NoArgs)}
	f := c.Flags()
	f.StringVar(&load, "load", "", "the load resistor, such as 150 Ω (needed)")
	f.StringVar(&loadU, "load-uncertainty", "", "its expanded uncertainty (k = 2), such as 0.1 % (needed)")
	f.StringVar(&meter, "meter", "", "expanded uncertainty of the DC voltmeter, such as 0.1 % (needed)")
	c.RunE = func(c *cobra.Command, _ []string) error {
		var n numbers
		p.Load, p.LoadU, p.Meter = take[quantity.Resistance](&n, "load", load), take[quantity.Ratio](&n, "load-uncertainty", loadU), take[quantity.Ratio](&n, "meter", meter)
		switch {
		case n.err != nil:
			return n.err
		case !(p.Load > 0 && p.LoadU > 0 && p.Meter > 0):
			return misuse{fmt.Errorf("--load, --load-uncertainty and --meter are needed, such as --load 150Ω --load-uncertainty 0.1%% --meter 0.1%%")}
		}
		return a.perform(c.Context(), o, p)
	}
	return c
}

func (a *app) calibrateTarget(o *calibrateOptions) *cobra.Command {
	var p calibrate.Target
	var flatness, response, table, carrier, carrierU, low, high, at string
	c := &cobra.Command{Use: "target", Short: "Displacement per volt of the target over the band (15 minutes)",
		Long: `The size comes absolutely from a module: the ratios of the IF's harmonics tell the phase index
β = 4πX/λ. The course over frequency comes from an accelerometer on the plate, from a reference
module whose IF response is known (--response, YAML: high_pass and points of frequency and
value), or from a vibrometer's table (--table, YAML: points of frequency and value in m/V).`, Args: exactly(cobra.NoArgs)}
	f := c.Flags()
	f.StringVar(&p.By, "by", "accelerometer", "accelerometer, module or table")
	f.StringVar(&p.Accelerometer, "accelerometer", "sense", "input that the accelerometer is wired to")
	f.StringVar(&flatness, "flatness", "", "expanded uncertainty (k = 2) of the accelerometer's sensitivity at one frequency over that a decade away, such as 0.5 %")
	f.StringVar(&response, "response", "", "file with the reference module's IF response")
	f.StringVar(&table, "table", "", "file with the vibrometer's table")
	f.StringVar(&carrier, "carrier", "10.525 GHz", "the module's carrier")
	f.StringVar(&carrierU, "carrier-uncertainty", "0.1 %", "its expanded relative uncertainty (k = 2)")
	f.StringVar(&low, "low", "1 Hz", "lowest frequency")
	f.StringVar(&high, "high", "1.2 kHz", "highest frequency")
	f.StringVar(&at, "at", "19 Hz", "frequency of the absolute calibration, its harmonics off the mains")
	c.RunE = func(c *cobra.Command, _ []string) error {
		var n numbers
		p.Flatness, p.Carrier, p.CarrierU = take[quantity.Ratio](&n, "flatness", flatness), take[quantity.Frequency](&n, "carrier", carrier), take[quantity.Ratio](&n, "carrier-uncertainty", carrierU)
		p.Low, p.High, p.Absolute = take[quantity.Frequency](&n, "low", low), take[quantity.Frequency](&n, "high", high), take[quantity.Frequency](&n, "at", at)
		if n.err != nil {
			return n.err
		}
		switch p.By {
		case "accelerometer":
			if !(p.Flatness > 0) {
				return misuse{fmt.Errorf("--flatness is needed, such as --flatness 0.5%%")}
			}
		case "module":
			if err := readYAML(response, "--response", &p.Response); err != nil {
				return err
			}
		case "table":
			var t struct {
				Points curve.Curve[quantity.DisplacementPerVolt] `key:"points" need:"yes"`
			}
			if err := readYAML(table, "--table", &t); err != nil {
				return err
			}
			p.Table = t.Points
		default:
			return misuse{fmt.Errorf("--by %q is not known: write accelerometer, module or table", p.By)}
		}
		return a.perform(c.Context(), o, p)
	}
	return c
}

// readYAML reads a file that a flag names.
func readYAML(path, flag string, into any) error {
	if path == "" {
		return misuse{fmt.Errorf("%s is needed: name the file", flag)}
	}
	data, err := os.ReadFile(path)
	if err != nil {
		return fmt.Errorf("%s: %w", flag, err)
	}
	return document.Read(path, data, into)
}

func (a *app) calibrateStandoff(o *calibrateOptions) *cobra.Command {
	var p calibrate.Standoff
	var carrier, ruler, rulerU string
	c := &cobra.Command{Use: "standoff", Short: "Distance from module to target by a scan of the stage (5 minutes)", Args: exactly(cobra.NoArgs)}
	f := c.Flags()
	f.StringVar(&carrier, "carrier", "10.525 GHz", "the module's nominal carrier")
	f.StringVar(&ruler, "ruler", "", "the distance as measured otherwise, if it was: the law's exponent is then told")
	f.StringVar(&rulerU, "ruler-uncertainty", "2 mm", "its expanded uncertainty (k = 2)")
	c.RunE = func(c *cobra.Command, _ []string) error {
		var n numbers
		p.Carrier, p.Ruler, p.RulerU = take[quantity.Frequency](&n, "carrier", carrier), take[quantity.Length](&n, "ruler", ruler), take[quantity.Length](&n, "ruler-uncertainty", rulerU)
		if n.err != nil {
			return n.err
		}
		return a.perform(c.Context(), o, p)
	}
	return c
}

func (a *app) calibrateLoop(o *calibrateOptions) *cobra.Command {
	var p calibrate.Loop
	c := &cobra.Command{Use: "loop", Short: "Output to input: latency, clocks, crosstalk, noise, automatic gain (5 minutes)", Args: exactly(cobra.NoArgs)}
	c.Flags().StringVar(&p.Input, "input", "if", "the input that the output is wired to")
	c.RunE = func(c *cobra.Command, _ []string) error { return a.perform(c.Context(), o, p) }
	return c
}
