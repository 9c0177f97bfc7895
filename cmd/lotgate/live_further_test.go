//go:build linux && cgo

package main

import (
	"math"
	"os"
	"path/filepath"
	"testing"

	"lotgate/fixtures/virtual"
)

// TestLiveSupplyChanges switches the supply while a real sound device records, and puts a ripple on it, over a
// real serial line: the values are those of the unit, within what the real-time bench's filters bend.
func TestLiveSupplyChanges(t *testing.T) {
	l := startLive(t)
	files := filepath.Join(l.dir, "files")
	for name, text := range map[string]string{
		"plan.yaml": `plan: supply
revision: 1
module: {kind: single IF, carrier: 10.525 GHz}
limits: limits.yaml
retry: {void: 1, marginal: 0, then: marginal}
steps:
  - supply: 5 V
  - {measure: startup, coupling: 0.2 Hz}
  - {measure: supply_rejection}
  - {measure: pushing, listen: 2 s, floor_age: 0 s}
`,
		"limits.yaml": "limits: supply\nrevision: 1\nreadings:\n  startup.if: {upper: 1 s}\n",
	} {
		if err := os.WriteFile(filepath.Join(files, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	u, _, said := l.test(t, 0, nil)
	bench, err := virtual.New(virtual.Default())
	if err != nil {
		t.Fatal(err)
	}
	truth := bench.TruthOf("V-0001", "L00001")
	standoff := bench.Actual().Standoff
	want := map[string][2]float64{ // truth, and what is allowed beside the reading's own uncertainty
		"startup.if":       {float64(truth.IFSettles(5, 0.2e-3, standoff)), 0.005},
		"startup.current":  {float64(truth.CurrentSettles(0.02)), 0.002},
		"supply_rejection": {float64(truth.SupplyRejection(85, standoff)), 0.1},
		"pushing.current":  {float64(truth.Pushing.Current), 0.002},
		"pushing.echo":     {float64(truth.Pushing.Echo), 0.003},
	}
	found := 0
	for _, r := range l.kept(t)[0].Readings {
		w, ok := want[r.Name]
		if !ok {
			continue
		}
		found++
		if r.Void != nil || r.Missing != "" || math.Abs(r.Value-w[0]) > 1.5*r.Budget.Expanded+w[1] {
			t.Errorf("%s: %s, truth %.5g (%v)", r.Name, r.Quantity(), w[0], r.Void)
		}
	}
	if found != len(want) {
		t.Errorf("%d of %d readings (%s: %s)\n%s", found, len(want), u.Verdict, u.Reason, said)
	}
}
