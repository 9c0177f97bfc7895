package main

import (
	"encoding/json"
	"errors"
	"fmt"

	"github.com/spf13/cobra"

	"lotgate/station/plan"
)

func (a *app) plan() *cobra.Command {
	var asJSON bool
	show := &cobra.Command{Use: "show FILE", Short: "Show a plan's steps in plain words and the time they take at least", Args: exactly(cobra.ExactArgs(1)),
		RunE: func(_ *cobra.Command, files []string) error { return a.planShow(files[0], asJSON) }}
	show.Flags().BoolVar(&asJSON, "json", false, "print one JSON object, in SI units")
	c := &cobra.Command{Use: "plan", Short: "Check and show plans", Args: exactly(cobra.NoArgs),
		RunE: func(c *cobra.Command, _ []string) error { return c.Help() }}
	c.AddCommand(
		&cobra.Command{Use: "check FILE…", Short: "Check plans and the limits they name", Args: exactly(cobra.MinimumNArgs(1)),
			RunE: func(_ *cobra.Command, files []string) error { return a.planCheck(files) }},
		show,
	)
	return c
}

func (a *app) planCheck(files []string) error {
	var wrong []error
	for _, file := range files {
		p, err := plan.Read(file)
		if err == nil {
			_, _, err = p.ReadLimits()
		}
		if err == nil {
			_, err = p.Describe(nil)
		}
		if err != nil {
			wrong = append(wrong, err)
			continue
		}
		fmt.Fprintf(a.out, "%s: plan %q revision %d is in order\n", file, p.Name, p.Revision)
	}
	return errors.Join(wrong...)
}

func (a *app) planShow(file string, asJSON bool) error {
	p, err := plan.Read(file)
	if err != nil {
		return err
	}
	d, err := p.Describe(nil)
	if err != nil {
		return err
	}
	if asJSON {
		return json.NewEncoder(a.out).Encode(map[string]any{"plan": p.Name, "revision": p.Revision, "steps": d.Lines, "least_s": float64(d.Least), "readings": p.Names()})
	}
	fmt.Fprintf(a.out, "%s, revision %d\nmodule: %s at %v (wavelength %v)\nlimits: %s\n\n", p.Name, p.Revision, p.Module.Kind, p.Module.Carrier, p.Module.Wavelength(), p.LimitsPath())
	for i, line := range d.Lines {
		fmt.Fprintf(a.out, "%2d. %s\n", i+1, line)
	}
	fmt.Fprintf(a.out, "\nat least %.1f s for each unit\n", float64(d.Least))
	fmt.Fprintf(a.out, "a void unit is tried again %d times, a marginal one %d times and then counts as %s\n", p.Retry.Void, p.Retry.Marginal, p.Retry.Then)
	return nil
}
