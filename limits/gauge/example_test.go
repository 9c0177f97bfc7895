package gauge_test

import (
	"fmt"

	"lotgate/limits/gauge"
)

// The echo of four modules in millivolts, measured twice in each of two nests, against limits 4 mV apart.
func ExampleANOVA() {
	parts := [][]float64{
		{3.12, 3.15, 3.20, 3.18}, {4.41, 4.37, 4.46, 4.49},
		{2.65, 2.69, 2.74, 2.72}, {5.03, 5.08, 5.09, 5.14},
	}
	var readings []gauge.Reading
	for p, values := range parts {
		for i, v := range values {
			readings = append(readings, gauge.Reading{Part: fmt.Sprint("M", p+1), Operator: fmt.Sprint("nest ", 1+i/2), Trial: 1 + i%2, Value: v})
		}
	}
	s, err := gauge.ANOVA(readings, gauge.Options{Tolerance: 4})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("repeatability %.3f mV (%.3f to %.3f)\n", s.Repeatability.Sigma.Value, s.Repeatability.Sigma.Low, s.Repeatability.Sigma.High)
	fmt.Println(gauge.Acceptance(*s.RR.PercentTolerance))
	for _, note := range s.Notes {
		fmt.Println(note)
	}
	// Output:
	// repeatability 0.023 mV (0.016 to 0.039)
	// R&R of 7.6 % is acceptable, not proven: between 4.4 % (acceptable) and 220.0 % (not acceptable); a greater study tells
	// the interaction of operators with parts (p = 0.84) was pooled with the repeats
}

func ExampleLinearityOf() {
	l, err := gauge.LinearityOf([]gauge.ReferenceUnit{
		{Name: "R1", Value: 2.00, Uncertainty: 0.01, Readings: []float64{2.01, 2.03, 2.02, 2.00}},
		{Name: "R2", Value: 4.00, Uncertainty: 0.02, Readings: []float64{4.05, 4.08, 4.06, 4.07}},
		{Name: "R3", Value: 6.00, Uncertainty: 0.03, Readings: []float64{6.12, 6.09, 6.13, 6.10}},
	}, 0.95)
	if err != nil {
		fmt.Println(err)
		return
	}
	at := l.Band(5)
	fmt.Printf("slope %.4f, p = %.3f; bias at 5 mV: %.3f mV (%.3f to %.3f)\n", l.Slope.Value, l.Slope.Test.P, at.Value, at.Low, at.High)
	// Output:
	// slope 0.0237, p = 0.004; bias at 5 mV: 0.087 mV (0.049 to 0.125)
}

func ExamplePlan() {
	steps, err := gauge.Plan([]string{"M1", "M2", "M3"}, []string{"nest 1", "nest 2"}, 2, 2026)
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, s := range steps[:6] {
		fmt.Println(s.Order, s.Trial, s.Operator, s.Part)
	}
	// Output:
	// 1 1 nest 1 M2
	// 2 1 nest 1 M3
	// 3 1 nest 1 M1
	// 4 1 nest 2 M1
	// 5 1 nest 2 M2
	// 6 1 nest 2 M3
}

func ExampleType1Of() {
	s, err := gauge.Type1Of(gauge.ReferenceUnit{Name: "R1", Value: 4.00, Uncertainty: 0.005, Readings: []float64{
		4.01, 3.99, 4.02, 4.00, 4.01, 4.03, 4.00, 3.98, 4.01, 4.02, 4.00, 4.01, 3.99,
		4.01, 4.02, 4.00, 4.01, 3.99, 4.00, 4.02, 4.01, 4.00, 4.03, 3.99, 4.01}}, 1, 0.95)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("Cg %.2f (%.2f to %.2f), Cgk %.2f (%.2f to %.2f)\n", s.Cg.Value, s.Cg.Low, s.Cg.High, s.Cgk.Value, s.Cgk.Low, s.Cgk.High)
	// Output:
	// Cg 2.59 (1.86 to 3.32), Cgk 2.42 (1.68 to 3.17)
}
