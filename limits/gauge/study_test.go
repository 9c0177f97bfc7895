package gauge

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"
)

const reference = "../../testdata/reference/gauge/"

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.7g, reference %.7g ± %g", what, got, want, tolerance)
	}
}

// classic reads the 10 × 3 × 3 study of AIAG, Measurement Systems Analysis, 4th ed. 2010, ch. III-B.
func classic(t *testing.T) []Reading {
	t.Helper()
	text, err := os.ReadFile(reference + "gauge_study_10x3x3.csv")
	if err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(strings.NewReader(string(text)))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var readings []Reading
	for _, row := range rows[1:] {
		trial, err1 := strconv.Atoi(row[1])
		value, err2 := strconv.ParseFloat(row[3], 64)
		if err1 != nil || err2 != nil {
			t.Fatal(row, err1, err2)
		}
		readings = append(readings, Reading{Operator: row[0], Trial: trial, Part: row[2], Value: value})
	}
	if len(readings) != 90 {
		t.Fatalf("%d readings", len(readings))
	}
	return readings
}

// results are the published and recomputed results of that study.
func results(t *testing.T) (r struct {
	Constants struct {
		K1 float64 `json:"K1_3_trials"`
		K2 float64 `json:"K2_3_appraisers"`
		K3 float64 `json:"K3_10_parts"`
	} `json:"constants"`
	Ranges struct{ Published, Recomputed map[string]float64 } `json:"average_and_range"`
	ANOVA  struct {
		Published  map[string]float64 `json:"published"`
		Pooled     map[string]any     `json:"pooled_published"`
		Recomputed map[string]any     `json:"recomputed"`
	} `json:"anova"`
}) {
	t.Helper()
	text, err := os.ReadFile(reference + "gauge_study_10x3x3_results.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(text, &r); err != nil {
		t.Fatal(err)
	}
	return r
}

// figures are a study's results by the names of the reference file.
func figures(s Study) map[string]float64 {
	return map[string]float64{
		"EV": s.Repeatability.Sigma.Value, "AV": s.Reproducibility.Sigma.Value, "GRR": s.RR.Sigma.Value,
		"PV": s.Part.Sigma.Value, "TV": s.Total.Sigma.Value, "pct_EV": s.Repeatability.PercentTotal.Value,
		"pct_AV": s.Reproducibility.PercentTotal.Value, "pct_GRR": s.RR.PercentTotal.Value,
		"pct_PV": s.Part.PercentTotal.Value, "ndc_raw": s.DistinctCategories.Value,
	}
}

// TestAverageAndRange holds the published results. They were made with K rounded to four digits, which
// leaves 1e-4 of a standard deviation (PV and TV: 3.511·5e-5, half a digit of K3) and 0.02 of a
// percentage; K1 to K3 are exact to the digits printed. "Recomputed" used the rounded K as well.
func TestAverageAndRange(t *testing.T) {
	want := results(t)
	s, err := AverageAndRange(classic(t), Options{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "K1", s.Ranges.K1, want.Constants.K1, 5e-5)
	near(t, "K2", s.Ranges.K2, want.Constants.K2, 5e-5)
	near(t, "K3", s.Ranges.K3, want.Constants.K3, 5e-5)
	near(t, "Rbar", s.Ranges.Average, want.Ranges.Published["Rbar"], 5e-5)
	near(t, "Xbar_diff", s.Ranges.OperatorRange, want.Ranges.Published["Xbar_diff"], 5e-5)
	near(t, "Rp", s.Ranges.PartRange, want.Ranges.Published["Rp"], 5e-4)
	near(t, "UCL_R", s.Ranges.UpperRangeLimit, want.Ranges.Recomputed["UCL_R"], 3e-4) // D4 = 2.574 printed
	got := figures(s)
	for name, tolerance := range map[string]float64{"EV": 1e-4, "AV": 1e-4, "GRR": 1e-4, "PV": 1.8e-4, "TV": 1.8e-4,
		"pct_EV": 0.02, "pct_AV": 0.02, "pct_GRR": 0.02, "pct_PV": 0.02} {
		near(t, name, got[name], want.Ranges.Published[name], tolerance)
	}
	near(t, "ndc", got["ndc_raw"], want.Ranges.Recomputed["ndc_raw"], 1e-3)
	if s.Categories != 5 {
		t.Errorf("%d categories", s.Categories)
	}
}

// TestANOVATable holds the published table of the study with interaction.
func TestANOVATable(t *testing.T) {
	want := results(t).ANOVA.Published
	s, err := ANOVA(classic(t), Options{Interaction: KeepInteraction})
	if err != nil {
		t.Fatal(err)
	}
	for i, name := range []string{"part", "appraiser", "interaction", "equipment"} {
		near(t, "SS "+name, s.Table[i].SS, want["SS_"+name], 5e-5)
		near(t, "MS "+name, s.Table[i].MS, want["MS_"+name], 5e-6)
		near(t, "df "+name, s.Table[i].Dof, want["df_"+name], 0)
	}
	near(t, "F part", s.Table[0].MS/s.Table[3].MS, want["F_part_vs_equipment"], 0.005)
	near(t, "F appraiser", s.Table[1].MS/s.Table[3].MS, want["F_appraiser_vs_equipment"], 0.005)
	near(t, "F interaction", *s.Table[2].F, want["F_interaction"], 5e-4)
	recomputed := results(t).ANOVA.Recomputed
	near(t, "p interaction", *s.Table[2].P, recomputed["p_interaction"].(float64), 1e-9)
	near(t, "F part vs interaction", *s.Table[0].F, recomputed["F_part_vs_interaction"].(float64), 1e-6)
	near(t, "F appraiser vs interaction", *s.Table[1].F, recomputed["F_appraiser_vs_interaction"].(float64), 1e-6)
	if s.Interaction.Sigma.Value != 0 || len(s.Notes) != 1 || !strings.Contains(s.Notes[0], "interaction came out below zero") {
		t.Errorf("interaction %+v, notes %q", s.Interaction, s.Notes)
	}
}

// TestANOVAPooled holds the published results without interaction, which the rule chooses here. The
// printed GRR is 1.5e-6 above the root of its own printed parts, 0.199933² + 0.226838².
func TestANOVAPooled(t *testing.T) {
	want := results(t).ANOVA
	s, err := ANOVA(classic(t), Options{Tolerance: 12})
	if err != nil {
		t.Fatal(err)
	}
	digits := map[string]float64{"EV": 5e-7, "AV": 5e-7, "GRR": 2e-6, "PV": 5e-7, "TV": 5e-4, "ndc_raw": 5e-4}
	for name, got := range figures(s) {
		tolerance, ok := digits[name]
		if !ok {
			tolerance = 0.05
		}
		near(t, name, got, want.Pooled[name].(float64), tolerance)
		near(t, name+" recomputed", got, want.Recomputed[name].(float64), 1e-9)
	}
	contribution := want.Pooled["contribution_pct"].(map[string]any)
	for name, c := range map[string]Component{"EV": s.Repeatability, "AV": s.Reproducibility, "GRR": s.RR, "PV": s.Part} {
		near(t, "contribution "+name, c.Contribution.Value, contribution[name].(float64), 0.05)
		for what, e := range map[string]Estimate{"σ": c.Sigma, "contribution": c.Contribution, "percent of total": c.PercentTotal, "percent of tolerance": *c.PercentTolerance} {
			if !(e.Low < e.Value && e.Value < e.High) {
				t.Errorf("%s of %s: %+v", what, name, e)
			}
		}
	}
	// 100·6·0.302373/12, by hand.
	near(t, "percent of tolerance", s.RR.PercentTolerance.Value, 15.1186, 1e-4)
	if s.Categories != 4 || !strings.Contains(s.Notes[0], "was pooled with the repeats") {
		t.Errorf("%d categories, notes %q", s.Categories, s.Notes)
	}
}

// TestIntervals of the classic study with interaction: repeatability is exact (chi-square with 60 degrees
// of freedom: 83.298 and 40.482 in printed tables), parts by the equations of Burdick, Borror &
// Montgomery (2003) worked out step by step with printed F and chi-square points.
func TestIntervals(t *testing.T) {
	s, err := ANOVA(classic(t), Options{Interaction: KeepInteraction})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "EV low", s.Repeatability.Sigma.Low, math.Sqrt(2.758933/83.298), 1e-5)
	near(t, "EV high", s.Repeatability.Sigma.High, math.Sqrt(2.758933/40.482), 1e-5)
	// Points of printed tables: chi-square 9 at 97.5 %, chi-square 18 at 2.5 %, F 9 and 18 at 97.5 %.
	g1, h3 := 1-9/19.0228, 18/8.2307-1
	f := 2.9291
	g13 := ((f-1)*(f-1) - g1*g1*f*f - h3*h3) / f
	part, interaction := 9.817993, 0.019943
	low := (part - interaction - math.Sqrt(g1*g1*part*part+h3*h3*interaction*interaction+g13*part*interaction)) / 9
	near(t, "PV low", s.Part.Sigma.Low, math.Sqrt(low), 2e-4)
}

// TestAsJSON: no infinity and no NaN is left in a result.
func TestAsJSON(t *testing.T) {
	for _, rule := range []InteractionRule{PoolInteraction, KeepInteraction, DropInteraction} {
		s, err := ANOVA(small("a", "b"), Options{Interaction: rule, Tolerance: 3})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := json.Marshal(s); err != nil {
			t.Error(err)
		}
	}
	for _, operators := range [][]string{{"a"}, {"a", "b"}} {
		s, err := AverageAndRange(small(operators...), Options{})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := json.Marshal(s); err != nil {
			t.Error(err)
		}
	}
}
