package gauge

import (
	"math"
	"strings"
	"testing"
)

func small(operators ...string) []Reading {
	var list []Reading
	for i, p := range []string{"p1", "p2", "p3"} {
		for j, o := range operators {
			for trial := 1; trial <= 2; trial++ {
				list = append(list, Reading{Part: p, Operator: o, Trial: trial, Value: float64(10*i+j) + 0.1*float64(trial*(i+1))})
			}
		}
	}
	return list
}

func TestRefuses(t *testing.T) {
	without := func(i int) []Reading { l := small("a", "b"); return append(l[:i:i], l[i+1:]...) }
	with := func(i int, v float64) []Reading { l := small("a", "b"); l[i].Value = v; return l }
	same, coarse := small("a", "b"), small("a", "b")
	for i := range same {
		same[i].Value = 7
		coarse[i].Value = math.Trunc(float64(i / 4))
	}
	for _, c := range []struct {
		readings []Reading
		want     string
	}{
		{nil, "at least 2 parts and 2 trials and has 0 and 0"},
		{small("a")[:2], "at least 2 parts and 2 trials and has 1 and 2"},
		{without(7), `part "p2", operator "b", trial 2: there is no value; measure this cell`},
		{without(7)[1:], `part "p1", operator "a", trial 1: there is no value, nor in 1 more of 12 cells`},
		{append(small("a", "b"), Reading{"p3", "a", 2, 5}), `part "p3", operator "a", trial 2: there are two values`},
		{with(3, math.NaN()), `part "p1", operator "b", trial 2: the value is NaN`},
		{with(4, math.Inf(-1)), `part "p2", operator "a", trial 1: the value is -Inf`},
		{same, "all 12 values are 7"},
		{coarse, "repeats and operators agree in every digit"},
	} {
		for _, method := range []func([]Reading, Options) (Study, error){ANOVA, AverageAndRange} {
			if _, err := method(c.readings, Options{}); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("want %q, got %v", c.want, err)
			}
		}
	}
	for want, o := range map[string]Options{"level of confidence is 95": {Level: 95}, "tolerance is -1": {Tolerance: -1}} {
		if _, err := ANOVA(small("a"), o); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("want %q, got %v", want, err)
		}
	}
}

// TestOneOperator: an automatic station. Mean squares by hand: repeats 0.1, 0.2 and 0.3 apart give
// (0.01+0.04+0.09)/2/3; both methods leave reproducibility out.
func TestOneOperator(t *testing.T) {
	for _, method := range []func([]Reading, Options) (Study, error){ANOVA, AverageAndRange} {
		s, err := method(small("station"), Options{Tolerance: 20})
		if err != nil {
			t.Fatal(err)
		}
		if s.Reproducibility.Missing == "" || s.Operator.Missing == "" || s.Interaction.Missing == "" || len(s.Notes) == 0 {
			t.Errorf("%+v", s)
		}
		if s.RR.Sigma != s.Repeatability.Sigma || !(s.RR.Sigma.Low < s.RR.Sigma.Value) {
			t.Errorf("R&R %+v", s.RR)
		}
	}
	s, err := ANOVA(small("station"), Options{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "repeatability", s.Repeatability.Sigma.Value, math.Sqrt(0.14/6), 1e-12)
	if s.RR.PercentTolerance != nil {
		t.Error("a percentage of no tolerance")
	}
}

// TestShift: what is added to all values changes nothing, and a factor only scales.
func TestShift(t *testing.T) {
	base, err := ANOVA(classic(t), Options{})
	if err != nil {
		t.Fatal(err)
	}
	moved := classic(t)
	for i := range moved {
		moved[i].Value = 1e-3 * (moved[i].Value + 40)
	}
	s, err := ANOVA(moved, Options{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "R&R", s.RR.Sigma.High, 1e-3*base.RR.Sigma.High, 1e-12)
	near(t, "percent", s.RR.PercentTotal.Low, base.RR.PercentTotal.Low, 1e-7)
	near(t, "categories", s.DistinctCategories.High, base.DistinctCategories.High, 1e-8)
}
