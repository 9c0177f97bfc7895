package gauge

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// TestCoverage holds the intervals over simulated studies of 10 parts, 3 operators and 3 trials. The
// modified large-sample method is to keep its level or exceed it a little (Burdick, Borror &
// Montgomery 2003): from 93.5 % to 98.5 % here. Ranges approximate, so for them 92.5 %.
func TestCoverage(t *testing.T) {
	const runs, parts, operators, trials = 2000, 10, 3, 3
	truth := struct{ part, operator, interaction, repeat float64 }{5, 0.8, 0.5, 1}
	for _, c := range []struct {
		name        string
		interaction float64
		least       float64
		study       func([]Reading) (Study, error)
	}{
		{"analysis of variance", truth.interaction, 0.935, func(r []Reading) (Study, error) { return ANOVA(r, Options{Interaction: KeepInteraction}) }},
		{"analysis of variance, no interaction", 0, 0.935, func(r []Reading) (Study, error) { return ANOVA(r, Options{Interaction: DropInteraction}) }},
		{"analysis of variance, tested", 0, 0.935, func(r []Reading) (Study, error) { return ANOVA(r, Options{}) }},
		{"average and range", 0, 0.925, func(r []Reading) (Study, error) { return AverageAndRange(r, Options{}) }},
	} {
		random := rand.New(rand.NewPCG(2003, 342))
		normal := func(sigma float64) float64 { return sigma * random.NormFloat64() }
		rr := math.Sqrt(square(truth.operator) + square(c.interaction) + square(truth.repeat))
		total := math.Sqrt(rr*rr + square(truth.part))
		inside := map[string]int{}
		for range runs {
			var readings []Reading
			ofOperator := make([]float64, operators)
			for j := range ofOperator {
				ofOperator[j] = normal(truth.operator)
			}
			for i := range parts {
				part := normal(truth.part)
				for j := range operators {
					together := part + ofOperator[j] + normal(c.interaction)
					for k := range trials {
						readings = append(readings, Reading{fmt.Sprint(i), fmt.Sprint(j), k, together + normal(truth.repeat)})
					}
				}
			}
			s, err := c.study(readings)
			if err != nil {
				t.Fatal(err)
			}
			count := func(name string, e Estimate, want float64) {
				if e.Low <= want && want <= e.High {
					inside[name]++
				}
			}
			count("repeatability", s.Repeatability.Sigma, truth.repeat)
			count("R&R", s.RR.Sigma, rr)
			count("parts", s.Part.Sigma, truth.part)
			count("total", s.Total.Sigma, total)
			count("percent R&R", s.RR.PercentTotal, 100*rr/total)
			count("categories", s.DistinctCategories, categoryFactor*truth.part/rr)
			count("reproducibility", s.Reproducibility.Sigma, math.Hypot(truth.operator, c.interaction))
		}
		for name, k := range inside {
			share := float64(k) / runs
			t.Logf("%s: %s %.3f", c.name, name, share)
			if share < c.least || share > 0.985 {
				t.Errorf("%s: the interval of %s holds the truth in %.1f %%", c.name, name, 100*share)
			}
		}
	}
}
