package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"

	"lotgate/limits"
)

// Exit statuses.
const (
	statusPass   = 0
	statusFail   = 1 // fail or marginal
	statusVoid   = 2 // void, or a fault of the station or the program
	statusMisuse = 64
)

const exitHelp = `
Exit status: 0 pass (or done), 1 fail or marginal, 2 void or a fault of the station,
64 wrong use.`

// app is what all commands share: the streams and the status the process ends with.
type app struct {
	in       io.Reader
	out, err io.Writer
	status   int
}

// worse keeps the worst status seen.
func (a *app) worse(status int) { a.status = max(a.status, status) }

func (a *app) verdict(v limits.Verdict) {
	switch v {
	case limits.Pass:
	case limits.Fail, limits.Marginal:
		a.worse(statusFail)
	default:
		a.worse(statusVoid)
	}
}

// misuse marks an error as wrong use of the command line.
type misuse struct{ error }

// run is the whole program but for the process: what tests call.
func run(ctx context.Context, args []string, in io.Reader, out, errOut io.Writer) int {
	a := &app{in: in, out: out, err: errOut}
	root := &cobra.Command{
		Use:   "lotgate",
		Short: "Judges microwave Doppler motion modules at goods-in, unit by unit and lot by lot",
		Long: `Lotgate runs a test station that decides whether microwave Doppler motion modules may
be built in. It needs no RF instruments; the virtual bench needs no hardware at all:
try "lotgate demo".
` + exitHelp,
		SilenceErrors:     true,
		SilenceUsage:      true,
		CompletionOptions: cobra.CompletionOptions{HiddenDefaultCmd: true},
	}
	root.SetArgs(args)
	root.SetIn(in)
	root.SetOut(out)
	root.SetErr(errOut)
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return misuse{err} })
	root.AddCommand(a.demo(), a.test(), a.replay(), a.explain(), a.verify(), a.devices(), a.plan(), a.calibrate(), a.init(), a.schema(), a.virtual())
	if err := root.ExecuteContext(ctx); err != nil {
		fmt.Fprintln(errOut, "lotgate:", err)
		var wrong misuse
		if errors.As(err, &wrong) || strings.HasPrefix(err.Error(), "unknown command") {
			fmt.Fprintln(errOut, `see "lotgate --help"`)
			return statusMisuse
		}
		a.worse(statusVoid)
	}
	return a.status
}

// exactly wraps cobra's argument checks so that their errors count as misuse.
func exactly(check cobra.PositionalArgs) cobra.PositionalArgs {
	return func(c *cobra.Command, args []string) error {
		if err := check(c, args); err != nil {
			return misuse{fmt.Errorf("%s: %w", c.CommandPath(), err)}
		}
		return nil
	}
}
