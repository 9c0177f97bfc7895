package main

import (
	"encoding/json"
	"fmt"
	"math"
	"path/filepath"
	"sort"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/calibration"
	"lotgate/limits/quantity"
)

// calibrationJSON is a calibration as --json prints it, in SI units.
type calibrationJSON struct {
	Calibration string               `json:"calibration"`
	Of          string               `json:"of,omitempty"`
	File        string               `json:"file"`
	Date        string               `json:"date"`
	Due         string               `json:"due"`
	Overdue     bool                 `json:"overdue"`
	InUse       bool                 `json:"in_use"`
	Values      map[string]valueJSON `json:"values"`
	Notes       []string             `json:"notes,omitempty"`
}

type valueJSON struct {
	Value    float64  `json:"value"`
	Unit     string   `json:"unit"`
	Expanded float64  `json:"expanded_uncertainty"`
	Coverage float64  `json:"coverage_factor"`
	Drift    *float64 `json:"relative_change,omitempty"`
	DriftU   *float64 `json:"relative_change_expanded_uncertainty,omitempty"`
}

func calibrationOutput(f, older *calibration.File, path string, now time.Time) calibrationJSON {
	out := calibrationJSON{Calibration: f.Calibration, Of: f.Of, File: path, Date: f.Date, Due: f.Due, Overdue: overdue(f, now), InUse: true, Values: map[string]valueJSON{}, Notes: f.Notes}
	for name, v := range f.Values {
		out.Values[name] = valueJSON{Value: v.Value.Value, Unit: v.Value.Unit.Symbol, Expanded: v.Uncertainty.Value, Coverage: 2}
	}
	if older != nil {
		for _, d := range f.DriftFrom(older) {
			v := out.Values[d.Name]
			change, u := d.Relative, d.Expanded
			v.Drift, v.DriftU = &change, &u
			out.Values[d.Name] = v
		}
	}
	return out
}

func overdue(f *calibration.File, now time.Time) bool {
	return now.After(f.DueDay().AddDate(0, 0, 1))
}

// showCalibration prints what was found and what it means.
func (a *app) showCalibration(f, older *calibration.File, path string) {
	fmt.Fprintf(a.out, "%s, by %s\n", f.Subject(), f.Method)
	a.values(f, older, "  ")
	if f.Scatter != nil {
		fmt.Fprintf(a.out, "  one of %d repeats scatters by %.2g %%\n", f.Repeats, 100*f.Scatter.Value)
	}
	if n := len(f.Curve); n > 0 {
		fmt.Fprintf(a.out, "  curve of %d points from %v to %v:\n", n, f.Curve[0].Frequency, f.Curve[n-1].Frequency)
		for i := 0; i < n; i += max(1, (n-1)/6) {
			p := f.Curve[i]
			fmt.Fprintf(a.out, "    %12v  %s\n", quantity.Frequency(round(float64(p.Frequency))), quantity.PrintWith(p.Value.Value, 2*p.Uncertainty.Standard(p.Value.Value)*p.Value.Value, p.Value.Unit))
		}
	}
	for _, n := range f.Notes {
		fmt.Fprintln(a.out, "  note:", n)
	}
	fmt.Fprintf(a.out, "  due %s, written to %s\n", f.Due, path)
}

// round keeps four digits.
func round(v float64) float64 {
	var out float64
	fmt.Sscanf(fmt.Sprintf("%.4g", v), "%g", &out)
	return out
}

// shownValue prints a value with its uncertainty; small plain numbers in percent or ppm.
func shownValue(v calibration.Value) string {
	size := math.Max(math.Abs(v.Value.Value), v.Uncertainty.Value)
	switch {
	case v.Value.Unit.Symbol != quantity.One.Symbol || size > 0.05:
		return quantity.PrintWith(v.Value.Value, v.Uncertainty.Value, v.Value.Unit)
	case size > 1e-4:
		return "(" + quantity.PrintWith(100*v.Value.Value, 100*v.Uncertainty.Value, quantity.One) + ") %"
	}
	return "(" + quantity.PrintWith(1e6*v.Value.Value, 1e6*v.Uncertainty.Value, quantity.One) + ") ppm"
}

// values prints a calibration's values, with their change since an older one.
func (a *app) values(f, older *calibration.File, indent string) {
	var names []string
	for name := range f.Values {
		names = append(names, name)
	}
	sort.Strings(names)
	drift := map[string]calibration.Drift{}
	if older != nil {
		for _, d := range f.DriftFrom(older) {
			drift[d.Name] = d
		}
	}
	for _, name := range names {
		v := f.Values[name]
		text := ""
		if d, ok := drift[name]; ok {
			text = fmt.Sprintf("  %+.2g %% since the last", 100*d.Relative)
			if d.Shown() {
				text += ": more than both uncertainties explain"
			}
		}
		fmt.Fprintf(a.out, "%s%-22s %s%s\n", indent, name, shownValue(v), text)
	}
}

func (a *app) calibrateList(o *calibrateOptions) *cobra.Command {
	c := &cobra.Command{Use: "list", Short: "Value, history, drift of all calibrations, and what is due", Args: exactly(cobra.NoArgs)}
	c.RunE = func(*cobra.Command, []string) error {
		file, err := attach.Read(o.station)
		if err != nil {
			return err
		}
		folder, err := calibration.Open(file.CalibrationFolder())
		if err != nil {
			return err
		}
		now := time.Now()
		if len(folder.Files) == 0 && !o.json {
			fmt.Fprintf(a.out, "no calibrations in %s yet: begin with lotgate calibrate level --station %s\n", folder.Path, o.station)
			return nil
		}
		return a.listCalibrations(folder, now, o.json)
	}
	return c
}

func (a *app) listCalibrations(folder calibration.Folder, now time.Time, asJSON bool) error {
	groups := map[string][]*calibration.File{}
	var subjects []string
	for _, f := range folder.Files {
		if groups[f.Subject()] == nil {
			subjects = append(subjects, f.Subject())
		}
		groups[f.Subject()] = append(groups[f.Subject()], f)
	}
	sort.Strings(subjects)
	for _, subject := range subjects {
		list := groups[subject]
		if asJSON {
			for i, f := range list {
				var older *calibration.File
				if i > 0 {
					older = list[i-1]
				}
				out := calibrationOutput(f, older, f.Name(), now)
				out.InUse = i == len(list)-1
				if err := json.NewEncoder(a.out).Encode(out); err != nil {
					return err
				}
			}
			continue
		}
		last := list[len(list)-1]
		fmt.Fprintf(a.out, "%s  %s\n", subject, dueText(last, now))
		for i := len(list) - 1; i >= 0; i-- {
			var older *calibration.File
			if i > 0 {
				older = list[i-1]
			}
			fmt.Fprintf(a.out, "  %s  %s\n", strings.Replace(list[i].Date, "T", " ", 1), filepath.Base(list[i].Name()))
			a.values(list[i], older, "    ")
		}
	}
	return nil
}

// dueText says until when a calibration holds.
func dueText(f *calibration.File, now time.Time) string {
	days := int(f.DueDay().Sub(now).Hours() / 24)
	switch {
	case overdue(f, now):
		return fmt.Sprintf("OVERDUE since %s: calibrate it before testing", f.Due)
	case days <= 30:
		return fmt.Sprintf("due on %s, in %d days", f.Due, days)
	}
	return "due on " + f.Due
}
