package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"lotgate/station/record"
)

func (a *app) verify() *cobra.Command {
	var store string
	var asJSON bool
	c := &cobra.Command{
		Use:   "verify CODE|SERIAL|ATTEMPT",
		Short: "Check a certificate's code against the store",
		Args:  exactly(cobra.ExactArgs(1)),
	}
	c.Flags().StringVar(&store, "store", "store", "the store's folder")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object for each attempt found")
	c.RunE = func(c *cobra.Command, args []string) error { return a.verifyCode(c.Context(), store, args[0], asJSON) }
	return c
}

func (a *app) verifyCode(ctx context.Context, dir, asked string, asJSON bool) (err error) {
	if _, err := os.Stat(dir); err != nil {
		return fmt.Errorf("there is no store: %w: name its folder with --store", err)
	}
	s, err := record.Open(ctx, dir)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, s.Close()) }()
	code := strings.ToUpper(strings.TrimSpace(asked))
	found := 0
	if err := s.Attempts(ctx, record.Filter{}, func(at *record.Attempt) bool {
		f := record.Fingerprint(at)
		if f == code || at.ID == asked || at.Serial == asked {
			found++
			if asJSON {
				_ = json.NewEncoder(a.out).Encode(map[string]any{"lot": at.Lot, "serial": at.Serial, "number": at.Number, "attempt": at.ID, "verdict": at.Verdict, "ended": at.Ended, "code": f})
				return true
			}
			fmt.Fprintf(a.out, "%s  unit %s of lot %s, attempt %d, %s, code %s\n", signed(a.out, at.Verdict, 8), at.Serial, at.Lot, at.Number, at.Ended.Format("2006-01-02 15:04:05 MST"), f)
		}
		return true
	}); err != nil {
		return err
	}
	if found == 0 {
		a.worse(statusFail)
		fmt.Fprintf(a.err, "the store %s holds no attempt with the code %s: the certificate was changed, or comes from another store\n", dir, asked)
	}
	return nil
}
