package gauge

import (
	"slices"
	"strings"
	"testing"
)

func TestPlan(t *testing.T) {
	parts, operators := []string{"p1", "p2", "p3", "p4", "p5"}, []string{"nest 1", "nest 2"}
	steps, err := Plan(parts, operators, 3, 7)
	if err != nil {
		t.Fatal(err)
	}
	again, _ := Plan(parts, operators, 3, 7)
	other, _ := Plan(parts, operators, 3, 8)
	if !slices.Equal(steps, again) || slices.Equal(steps, other) {
		t.Error("the seed alone must decide the plan")
	}
	var readings []Reading
	for i, s := range steps {
		if s.Order != i+1 {
			t.Errorf("step %d has order %d", i+1, s.Order)
		}
		readings = append(readings, Reading{s.Part, s.Operator, s.Trial, float64(i)})
	}
	if _, err := crossed(readings); err != nil || len(steps) != 30 {
		t.Errorf("the plan is not a complete crossed study: %v", err)
	}
	for i := 0; i < len(steps); i += len(parts) { // one operator at a time, each part once
		seen := map[string]bool{}
		for _, s := range steps[i : i+len(parts)] {
			seen[s.Part] = true
			if s.Operator != steps[i].Operator || s.Trial != steps[i].Trial {
				t.Errorf("step %d: the operator changes within a round", s.Order)
			}
		}
		if len(seen) != len(parts) {
			t.Errorf("round at step %d has %d parts", i+1, len(seen))
		}
	}
}

// TestPlanIsFair: over many seeds each part comes first about equally often (chi-square with 4 degrees of
// freedom is above 18.47 once in a thousand, printed tables).
func TestPlanIsFair(t *testing.T) {
	first := map[string]float64{}
	const seeds = 2000
	for seed := range uint64(seeds) {
		steps, err := Plan([]string{"a", "b", "c", "d", "e"}, []string{"o"}, 2, seed)
		if err != nil {
			t.Fatal(err)
		}
		first[steps[0].Part]++
	}
	sum := 0.0
	for _, k := range first {
		sum += square(k-seeds/5) / (seeds / 5)
	}
	if sum > 18.47 || len(first) != 5 {
		t.Errorf("first parts %v", first)
	}
}

func TestPlanRefuses(t *testing.T) {
	for _, c := range []struct {
		parts, operators []string
		trials           int
		want             string
	}{
		{[]string{"a"}, []string{"o"}, 2, "has 1, 1 and 2"},
		{[]string{"a", "b"}, nil, 2, "has 2, 0 and 2"},
		{[]string{"a", "b"}, []string{"o"}, 1, "has 2, 1 and 1"},
		{[]string{"a", "a"}, []string{"o"}, 2, `part "a" is named twice`},
		{[]string{"a", "b"}, []string{"o", "o"}, 2, `operator "o" is named twice`},
	} {
		if _, err := Plan(c.parts, c.operators, c.trials, 1); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("want %q, got %v", c.want, err)
		}
	}
}

func TestAcceptance(t *testing.T) {
	for want, e := range map[string]Estimate{
		"R&R of 5.0 % is acceptable, proven: between 4.0 % and 9.0 %":  {5, 4, 9},
		"R&R of 45.0 % is not acceptable, proven: between 31.0 % and":  {45, 31, 80},
		"R&R of 9.0 % is acceptable, not proven: between 6.0 % (accep": {9, 6, 31},
		"and 31.0 % (not acceptable); a greater study tells":           {9, 6, 31},
	} {
		if got := Acceptance(e); !strings.Contains(got, want) {
			t.Errorf("%q has not %q", got, want)
		}
	}
}
