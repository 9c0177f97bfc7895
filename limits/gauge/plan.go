package gauge

import (
	"fmt"
	"math/rand/v2"
	"slices"
)

// Step is one measurement of a planned study.
type Step struct {
	Order    int    `json:"order"` // from 1
	Trial    int    `json:"trial"` // from 1
	Operator string `json:"operator"`
	Part     string `json:"part"`
}

// planStream keeps a plan's random numbers apart from others of the same seed.
const planStream = 0x67617567

// Plan is the order of a crossed study: trial by trial, operator by operator, each operator meeting all
// parts once in an order of its own drawing, so that drift and memory fall on no part
// in particular (AIAG, Measurement Systems Analysis, 4th ed. 2010, ch. III-B). The same seed gives
// the same plan.
func Plan(parts, operators []string, trials int, seed uint64) ([]Step, error) {
	if len(parts) < 2 || len(operators) < 1 || trials < 2 {
		return nil, fmt.Errorf("a gauge study needs at least 2 parts, 1 operator and 2 trials and has %d, %d and %d", len(parts), len(operators), trials)
	}
	if err := distinct("part", parts); err != nil {
		return nil, err
	}
	if err := distinct("operator", operators); err != nil {
		return nil, err
	}
	random := rand.New(rand.NewPCG(seed, planStream))
	var steps []Step
	for trial := 1; trial <= trials; trial++ {
		for _, operator := range operators {
			for _, i := range random.Perm(len(parts)) {
				steps = append(steps, Step{len(steps) + 1, trial, operator, parts[i]})
			}
		}
	}
	return steps, nil
}

func distinct(what string, names []string) error {
	for i, name := range names {
		if slices.Contains(names[:i], name) {
			return fmt.Errorf("%s %q is named twice: give each a name of its own", what, name)
		}
	}
	return nil
}
