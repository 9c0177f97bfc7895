// Package starter holds the files that a new station begins with.
package starter

import (
	"embed"
	"fmt"
	"os"
	"path/filepath"
)

//go:embed plan.yaml limits.yaml station-virtual.yaml station-hardware.yaml station-new.yaml plan-wide.yaml
var files embed.FS

// Names of the starter files, in the order a newcomer reads them.
var Names = []string{"plan.yaml", "limits.yaml", "station-virtual.yaml", "station-hardware.yaml", "station-new.yaml", "plan-wide.yaml"}

// Content of a starter file.
func Content(name string) []byte {
	data, err := files.ReadFile(name)
	if err != nil {
		panic("starter: " + err.Error()) // a name that is not in Names
	}
	return data
}

// Write puts the starter files and further ones into a folder, which is made where it does
// not exist. None that exists is touched: then nothing is written and the error names it.
func Write(dir string, further map[string][]byte) ([]string, error) {
	all := map[string][]byte{}
	var order []string
	for _, n := range Names {
		all[n] = Content(n)
		order = append(order, n)
	}
	for n, data := range further {
		all[n] = data
		order = append(order, n)
	}
	for _, n := range order {
		if _, err := os.Lstat(filepath.Join(dir, n)); err == nil {
			return nil, fmt.Errorf("%s exists already: name an empty folder", filepath.Join(dir, n))
		}
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, fmt.Errorf("the folder cannot be made: %w", err)
	}
	for _, n := range order {
		if err := os.WriteFile(filepath.Join(dir, n), all[n], 0o644); err != nil {
			return nil, err
		}
	}
	return order, nil
}
