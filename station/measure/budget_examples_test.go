package measure

import (
	"encoding/json"
	"math"
	"os"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// example reads a worked example of JCGM 100:2008, annex H.
func example(t *testing.T, name string, into any) {
	t.Helper()
	data, err := os.ReadFile("../../testdata/reference/uncertainty/gum_examples.json")
	if err != nil {
		t.Fatal(err)
	}
	var all map[string]json.RawMessage
	if err := json.Unmarshal(data, &all); err != nil || all["_source"] == nil {
		t.Fatalf("no source: %v", err)
	}
	if err := json.Unmarshal(all[name], into); err != nil {
		t.Fatal(err)
	}
}

// TestResistanceAndReactance is example H.2 of JCGM 100:2008: three quantities measured at once
// correlate, and so do what is worked out of them: R = V/I·cos φ, X = V/I·sin φ, Z = V/I.
func TestResistanceAndReactance(t *testing.T) {
	var g struct {
		Data struct {
			V   []float64 `json:"V_volt"`
			I   []float64 `json:"I_mA"`
			Phi []float64 `json:"phi_rad"`
		} `json:"data"`
		Recomputed map[string]float64 `json:"recomputed_approach1"`
		Published  map[string]any     `json:"published"`
	}
	example(t, "H2_resistance_reactance", &g)
	n := float64(len(g.Data.V))
	for i := range g.Data.I {
		g.Data.I[i] /= 1000
	}
	v, i, phi := stat.Mean(g.Data.V, nil), stat.Mean(g.Data.I, nil), stat.Mean(g.Data.Phi, nil)
	u := func(x []float64) float64 { return stat.StdDev(x, nil) / math.Sqrt(n) }
	r := [][]float64{
		{0, stat.Correlation(g.Data.V, g.Data.I, nil), stat.Correlation(g.Data.V, g.Data.Phi, nil)},
		{0, 0, stat.Correlation(g.Data.I, g.Data.Phi, nil)},
	}
	for name, c := range map[string]struct{ value, dv, di, dphi float64 }{
		"R": {v / i * math.Cos(phi), math.Cos(phi) / i, -v / (i * i) * math.Cos(phi), -v / i * math.Sin(phi)},
		"X": {v / i * math.Sin(phi), math.Sin(phi) / i, -v / (i * i) * math.Sin(phi), v / i * math.Cos(phi)},
		"Z": {v / i, 1 / i, -v / (i * i), 0},
	} {
		b := CombineCorrelated(r, Component{"V", c.dv * u(g.Data.V), 0}, Component{"I", c.di * u(g.Data.I), 0}, Component{"φ", c.dphi * u(g.Data.Phi), 0})
		if want := g.Recomputed[name]; math.Abs(c.value-want) > 2e-6*want {
			t.Errorf("%s = %.6f Ω, want %.6f", name, c.value, want)
		}
		if want := g.Recomputed["u_"+name]; math.Abs(b.Combined-want) > 2e-6 {
			t.Errorf("u(%s) = %.6f Ω, recomputed %.6f", name, b.Combined, want)
		}
		published := g.Published["u_"+name].(float64)
		if math.Abs(b.Combined-published) > 0.0006 {
			t.Errorf("u(%s) = %.4f Ω, GUM table H.4 prints %.3f", name, b.Combined, published)
		}
	}
}

// TestVoltageStandardOverDays is example H.5 of JCGM 100:2008: days scatter more than readings
// within a day; the mean's uncertainty is that of both.
func TestVoltageStandardOverDays(t *testing.T) {
	var g struct {
		Data struct {
			Means      []float64 `json:"day_means_V"`
			Deviations []float64 `json:"day_sd_uV"`
			Readings   float64   `json:"obs_per_day"`
		} `json:"data"`
		Published map[string]float64 `json:"published"`
	}
	example(t, "H5_anova_zener", &g)
	days, each := float64(len(g.Data.Means)), g.Data.Readings
	within := 0.0
	for _, s := range g.Data.Deviations {
		within += s * s / days
	}
	between := math.Pow(1e6*stat.StdDev(g.Data.Means, nil), 2) - within/each
	b := Combine(Component{"between days", math.Sqrt(between / days), days - 1}, Component{"within a day", math.Sqrt(within / (days * each)), days * (each - 1)})
	for name, c := range map[string]struct{ got, want, slack float64 }{
		"s_W": {math.Sqrt(within), g.Published["s_W_uV"], 0.5}, "s_B": {math.Sqrt(between), g.Published["s_B_uV"], 0.5},
		"u of the mean": {b.Combined, g.Published["u_mean_with_day_effect_uV"], 0.5},
	} {
		if math.Abs(c.got-c.want) > c.slack {
			t.Errorf("%s = %.2f µV, GUM prints %g", name, c.got, c.want)
		}
	}
}
