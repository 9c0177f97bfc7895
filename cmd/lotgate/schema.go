package main

import (
	"errors"
	"fmt"

	"github.com/spf13/cobra"

	"lotgate/fixtures/attach"
	"lotgate/fixtures/driver"
	"lotgate/limits"
	"lotgate/station/plan"
)

func (a *app) schema() *cobra.Command {
	kinds := map[string]func() ([]byte, error){"plan": plan.Schema, "limits": limits.Schema, "station": attach.Schema, "driver": driver.Schema}
	return &cobra.Command{
		Use:   "schema plan|limits|station|driver",
		Short: "Print the JSON Schema of a kind of file, for editors",
		Args:  exactly(cobra.ExactArgs(1)),
		RunE: func(_ *cobra.Command, args []string) error {
			make, ok := kinds[args[0]]
			if !ok {
				return misuse{errors.New("schema: " + args[0] + " is no kind of file: one of plan, limits, station, driver")}
			}
			text, err := make()
			if err != nil {
				return err
			}
			_, err = fmt.Fprintf(a.out, "%s", text)
			return err
		},
	}
}
