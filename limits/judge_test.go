package limits

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"

	"lotgate/limits/quantity"
)

func at(v float64) *float64 { return &v }

// TestDecisionRules holds the rules of ISO 14253-1 (guard band U on either side) at and around
// their borders. Values are thousandths so that the sums are exact.
func TestDecisionRules(t *testing.T) {
	for _, c := range []struct {
		name            string
		value, u        float64
		lower, upper    *float64
		guarded, simple Verdict
	}{
		{"well inside", 5, 1, at(2), at(8), Pass, Pass},
		{"inside by exactly U", 3, 1, at(2), nil, Pass, Pass},
		{"inside by less than U", 2.5, 1, at(2), nil, Marginal, Pass},
		{"on the limit", 2, 1, at(2), nil, Marginal, Pass},
		{"outside by less than U", 1.5, 1, at(2), nil, Marginal, Fail},
		{"outside by exactly U", 1, 1, at(2), nil, Marginal, Fail},
		{"outside by more than U", 0.5, 1, at(2), nil, Fail, Fail},
		{"above", 10, 1, nil, at(8), Fail, Fail},
		{"exactly known, on the limit", 8, 0, nil, at(8), Pass, Pass},
		{"exactly known, outside", 8.5, 0, nil, at(8), Fail, Fail},
		{"U wider than the tolerance", 5, 4, at(2), at(8), Marginal, Pass},
	} {
		if v := judge(Guarded, c.value, c.u, c.lower, c.upper); v != c.guarded {
			t.Errorf("%s, guarded: %s, want %s", c.name, v, c.guarded)
		}
		if v := judge(Simple, c.value, c.u, c.lower, c.upper); v != c.simple {
			t.Errorf("%s, simple: %s, want %s", c.name, v, c.simple)
		}
	}
}

// TestJudgingLaws: moving a value outward never improves its verdict, and a smaller U never
// turns a pass into a fail.
func TestJudgingLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for range 20000 {
		lower, width, u := r.NormFloat64(), r.Float64()+0.01, r.Float64()
		upper := lower + width
		value := upper + r.NormFloat64()
		v := judge(Guarded, value, u, &lower, &upper)
		if w := judge(Guarded, value+r.Float64(), u, &lower, &upper); value > (lower+upper)/2 && rank(w) < rank(v) {
			t.Fatalf("moving %g outward improved %s to %s", value, v, w)
		}
		if w := judge(Guarded, value, u*r.Float64(), &lower, &upper); v == Pass && w != Pass {
			t.Fatalf("a smaller U turned pass into %s", w)
		}
		mirrored := judge(Guarded, lower+upper-value, u, &lower, &upper)
		if mirrored != v && math.Abs(math.Abs(value-upper)-u) > 1e-9 {
			t.Fatalf("judging is not symmetric: %s and %s", v, mirrored)
		}
	}
}

func TestUnitVerdict(t *testing.T) {
	list := func(v ...Verdict) (out []Judgement) {
		for _, x := range v {
			out = append(out, Judgement{Verdict: x, Reason: "because " + string(x)})
		}
		return out
	}
	for _, c := range []struct {
		in   []Judgement
		want Verdict
	}{
		{list(Pass, Pass, None), Pass},
		{list(Pass, Marginal), Marginal},
		{list(Marginal, Fail, Pass), Fail},
		{list(Pass, Void, Marginal), Void},
		{list(Void, Fail), Fail}, // a void reading cannot hide a proven fail
		{list(None), Void},
		{nil, Void},
	} {
		v, why := Unit(c.in)
		if v != c.want || why == "" {
			t.Errorf("%v: %s (%q), want %s", c.in, v, why, c.want)
		}
	}
}

func TestReasonsInWords(t *testing.T) {
	f := &File{Name: "x", Readings: map[string]Limit{
		"sensitivity.echo": {Reading: "sensitivity.echo", Unit: quantity.Volt, Lower: at(2e-3), Upper: at(9e-3), Decision: Guarded},
		"response.curve": {Reading: "response.curve", Decision: Guarded, Mask: &Mask{
			Upper: []MaskPoint{{10, 1.5}, {1000, 1.5}}, Lower: []MaskPoint{{10, -2}, {300, -3}, {1000, -6}}}},
	}}
	for _, c := range []struct {
		in   Measured
		v    Verdict
		want string
	}{
		{Measured{Name: "sensitivity.echo", Unit: "V", Value: 1.31e-3, Expanded: 0.02e-3}, Fail, "echo 1.310 mV, needs at least 2 mV"},
		{Measured{Name: "sensitivity.echo", Unit: "V", Value: 2.01e-3, Expanded: 0.02e-3}, Marginal, "echo 2.010 mV, inside the limit 2 mV by 10 µV, less than its uncertainty 20 µV: neither pass nor fail is proven"},
		{Measured{Name: "sensitivity.echo", Unit: "V", Missing: "too little"}, Void, "too little"},
		{Measured{Name: "sensitivity.echo", Unit: "V", Void: "dropout"}, Void, "dropout"},
		{Measured{Name: "response.curve", Unit: "dB", Points: []MeasuredPoint{{100, 0, 0.1}, {1000, -8, 0.5}, {2000, -20, 1}}}, Fail, "response at 1.000 kHz -8.00 dB, needs at least -6 dB"},
		{Measured{Name: "response.curve", Unit: "dB", Points: []MeasuredPoint{{2000, -20, 1}}}, Void, "no point of the curve lies under the mask"},
		{Measured{Name: "other", Unit: "V", Value: 1}, None, ""},
	} {
		j, err := f.Judge(c.in)
		if err != nil || j.Verdict != c.v || j.Reason != c.want {
			t.Errorf("%+v:\n got %s %q %v\nwant %s %q", c.in, j.Verdict, j.Reason, err, c.v, c.want)
		}
	}
	if _, err := f.Judge(Measured{Name: "sensitivity.echo", Unit: "A", Value: 1}); err == nil || !strings.Contains(err.Error(), "measured in A") {
		t.Errorf("a wrong unit gave %v", err)
	}
}

// TestMaskIsStraightInLogFrequency: halfway between two corners in log frequency the bound is
// halfway in dB.
func TestMaskIsStraightInLogFrequency(t *testing.T) {
	m := &Mask{Lower: []MaskPoint{{10, -2}, {1000, -6}}}
	lower, upper := m.At(100)
	if upper != nil || math.Abs(*lower+4) > 1e-12 {
		t.Errorf("at 100 Hz %v, %v", lower, upper)
	}
	if l, _ := m.At(9.999); l != nil {
		t.Error("the mask reaches below its first point")
	}
}

// TestConformanceProbability holds the examples of JCGM 106:2012.
func TestConformanceProbability(t *testing.T) {
	data, err := os.ReadFile("../testdata/reference/uncertainty/jcgm106_examples.json")
	if err != nil {
		t.Fatal(err)
	}
	var reference struct {
		Source   string `json:"_source"`
		Examples []struct {
			Case      string  `json:"case"`
			Published float64 `json:"pc_published"`
		} `json:"conformance_probability"`
	}
	if err := json.Unmarshal(data, &reference); err != nil || reference.Source == "" {
		t.Fatalf("no source: %v", err)
	}
	inputs := []struct {
		key          string
		value, u     float64
		lower, upper *float64
	}{
		{"Zener", -5.47, 0.05, nil, at(-5.40)},
		{"bursting", 507, 8, at(490), nil},
		{"oil viscosity", 13.6, 1.8, at(12.5), at(16.3)},
	}
	for _, in := range inputs {
		found := false
		for _, e := range reference.Examples {
			if !strings.Contains(e.Case, in.key) {
				continue
			}
			found = true
			if p := Conformance(in.value, in.u, in.lower, in.upper); math.Abs(p-e.Published) > 0.005 { // two printed digits
				t.Errorf("%s: %.4f, published %.2f", in.key, p, e.Published)
			}
		}
		if !found {
			t.Errorf("the example %q is not in the reference", in.key)
		}
	}
}
