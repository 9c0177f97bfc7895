package capability_test

import (
	"fmt"

	"lotgate/limits/capability"
)

// Echo voltages in millivolts, four units an hour, against limits of 2 and 6 mV; a gauge study has
// found a standard deviation of 0.1 mV with 30 degrees of freedom.
func ExampleStudy() {
	lower, upper := 2.0, 6.0
	hours := [][]float64{
		{4.1, 3.7, 4.4, 3.9}, {4.6, 4.3, 3.9, 4.5}, {3.8, 4.3, 4.0, 4.1},
		{4.0, 3.4, 3.8, 3.6}, {4.4, 4.2, 4.0, 4.7}, {3.8, 4.1, 4.3, 3.9},
	}
	r, err := capability.Study(hours, capability.Limits{Lower: &lower, Upper: &upper}, 0.95)
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, i := range []capability.Index{r.Cp, r.Cpk, r.Ppk} {
		fmt.Printf("%s %.2f (%.2f to %.2f, %s)\n", i.Name, i.Value, i.Low, i.High, i.Method)
	}
	fmt.Println(r.Cpm.Missing)
	parts, err := r.WithoutGauge(capability.GaugeSpread{Sigma: 0.1, Dof: 30})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("parts alone: Ppk %.2f (%.2f to %.2f)\n", parts.Ppk.Value, parts.Ppk.Low, parts.Ppk.High)
	// Output:
	// Cp 2.48 (1.68 to 3.28, chi-square)
	// Cpk 2.39 (1.60 to 3.18, Bissell 1990)
	// Ppk 1.99 (1.40 to 2.58, Bissell 1990)
	// no Cpm: there is no target
	// parts alone: Ppk 2.10 (1.41 to 2.78)
}
