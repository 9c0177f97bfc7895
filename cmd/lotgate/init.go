package main

import (
	"fmt"
	"path/filepath"

	"github.com/spf13/cobra"

	"lotgate/fixtures/driver"
	"lotgate/station/starter"
)

func (a *app) init() *cobra.Command {
	return &cobra.Command{
		Use:   "init DIR",
		Short: "Write a commented starter set: plan, limits, a virtual and a hardware station, a driver",
		Args:  exactly(cobra.ExactArgs(1)),
		RunE: func(_ *cobra.Command, args []string) error {
			text, _ := driver.Shipped("bench-controller")
			names, err := starter.Write(args[0], map[string][]byte{"driver-bench-controller.yaml": text})
			if err != nil {
				return err
			}
			for _, n := range names {
				fmt.Fprintln(a.out, filepath.Join(args[0], n))
			}
			fmt.Fprintf(a.out, "\nnext:  lotgate test --station %s --plan %s --lot L-0001 --operator YOU\n",
				filepath.Join(args[0], "station-virtual.yaml"), filepath.Join(args[0], "plan.yaml"))
			return nil
		},
	}
}
