package measure

import (
	"encoding/json"
	"math"
	"os"
	"testing"
)

// TestCoverageFactor holds Student's t for 95 % against JCGM 100:2008, table G.2.
func TestCoverageFactor(t *testing.T) {
	for _, c := range []struct{ dof, want float64 }{
		{1, 12.71}, {2, 4.30}, {3, 3.18}, {5, 2.57}, {10, 2.23}, {16, 2.12}, {20, 2.09}, {30, 2.04}, {50, 2.01}, {100, 1.984}, {0, 1.960},
	} {
		if k := CoverageFactor(c.dof); math.Abs(k-c.want) > 0.006 {
			t.Errorf("dof %g: k = %.3f, GUM %.3f", c.dof, k, c.want)
		}
	}
}

// TestEndGauge is example H.1 of JCGM 100:2008: combined uncertainty and effective degrees of
// freedom of an end gauge's length, nm.
func TestEndGauge(t *testing.T) {
	data, err := os.ReadFile("../../testdata/reference/uncertainty/gum_examples.json")
	if err != nil {
		t.Fatal(err)
	}
	var g struct {
		Source string `json:"_source"`
		H1     struct {
			Published struct {
				Components    map[string]float64 `json:"components_nm"`
				Dof           map[string]float64 `json:"dof"`
				Subcomponents map[string]float64 `json:"d_subcomponents_nm"`
				SubDof        map[string]float64 `json:"d_sub_dof"`
			} `json:"published"`
			Recomputed struct {
				U   float64 `json:"uc_nm"`
				Nu  float64 `json:"nu_eff"`
				UD  float64 `json:"u_d_nm"`
				NuD float64 `json:"nu_d"`
			} `json:"recomputed"`
		} `json:"H1_end_gauge"`
	}
	if err := json.Unmarshal(data, &g); err != nil || g.Source == "" {
		t.Fatalf("no source: %v", err)
	}
	p := g.H1.Published
	var parts []Component
	for name, u := range p.Subcomponents {
		parts = append(parts, Component{name, u, p.SubDof[name]})
	}
	d := Combine(parts...)
	if math.Abs(d.Combined-g.H1.Recomputed.UD) > 0.01 || math.Abs(d.Dof-g.H1.Recomputed.NuD) > 0.25 { // the reference rounds u to 9.7 first
		t.Errorf("comparison: u = %.3f nm with %.2f degrees of freedom, recomputed %.3f with %.2f", d.Combined, d.Dof, g.H1.Recomputed.UD, g.H1.Recomputed.NuD)
	}
	parts = nil
	for name, u := range p.Components {
		if u > 0 {
			parts = append(parts, Component{name, u, p.Dof[name]})
		}
	}
	whole := Combine(parts...)
	if math.Abs(whole.Combined-g.H1.Recomputed.U) > 0.06 || math.Abs(whole.Dof-g.H1.Recomputed.Nu) > 0.15 {
		t.Errorf("end gauge: u = %.2f nm with %.2f degrees of freedom, GUM %.2f with %.2f", whole.Combined, whole.Dof, g.H1.Recomputed.U, g.H1.Recomputed.Nu)
	}
}

// TestBessel holds the Bessel functions the methods rest on against Abramowitz & Stegun, tables
// 9.1 and 9.2, and their slopes against differences.
func TestBessel(t *testing.T) {
	data, err := os.ReadFile("../../testdata/reference/signal/bessel.json")
	if err != nil {
		t.Fatal(err)
	}
	var reference struct {
		Source string                       `json:"_source"`
		J      map[string]map[string]string `json:"J"`
	}
	if err := json.Unmarshal(data, &reference); err != nil || reference.Source == "" || len(reference.J) < 5 {
		t.Fatalf("no source: %v", err)
	}
	for x, row := range reference.J {
		var beta float64
		if err := json.Unmarshal([]byte(x), &beta); err != nil {
			t.Fatal(err)
		}
		for n := range 5 {
			var want float64
			if err := json.Unmarshal([]byte(row["J"+string(rune('0'+n))]), &want); err != nil {
				t.Fatal(err)
			}
			if got := math.Jn(n, beta); math.Abs(got-want) > 1e-11*math.Max(1, math.Abs(want)) {
				t.Errorf("J%d(%g) = %.12g, table %.12g", n, beta, got, want)
			}
		}
	}
	for _, beta := range []float64{0.05, 0.5, 1, 1.5} {
		for n := 1; n <= 4; n++ {
			const h = 1e-5
			want := (math.Log(math.Jn(n, beta*(1+h))) - math.Log(math.Jn(n, beta*(1-h)))) / (2 * h)
			if got := slopeOfJ(n, beta); math.Abs(got-want) > 1e-5 {
				t.Errorf("dln J%d/dln β at %g: %.6f, by differences %.6f", n, beta, got, want)
			}
		}
		for n := 1; n <= 2; n++ {
			if got, ok := betaOfRatio(n, math.Jn(n+2, beta)/math.Jn(n, beta)); !ok || math.Abs(got-beta) > 1e-9 {
				t.Errorf("β %g came back from J%d/J%d as %g", beta, n+2, n, got)
			}
		}
	}
}

// TestDopplerFactor: f_D = 2·v·f0/c is 70.2 Hz per m/s at 10.525 GHz, two fringes a wavelength.
func TestDopplerFactor(t *testing.T) {
	m := Module{Carrier: 10.525e9}
	if f := 2 / float64(m.Wavelength()); math.Abs(f-70.215242) > 1e-6 {
		t.Errorf("%.6f Hz per m/s", f)
	}
}
