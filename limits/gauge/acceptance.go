package gauge

import "fmt"

// The guideline's bounds of R&R in percent of the total or of the tolerance (AIAG, Measurement Systems
// Analysis, 4th ed. 2010, ch. III-B): up to 10 % acceptable, above 30 % not, between by the use made of it.
const (
	acceptableUpTo     = 10
	notAcceptableAbove = 30
)

// Acceptance says what the guideline makes of a percentage of R&R, its interval counted in.
func Acceptance(percent Estimate) string {
	zone := func(p float64) int {
		switch {
		case p <= acceptableUpTo:
			return 0
		case p <= notAcceptableAbove:
			return 1
		}
		return 2
	}
	words := []string{"acceptable", "acceptable for some uses", "not acceptable"}
	sentence := fmt.Sprintf("R&R of %.1f %% is %s", percent.Value, words[zone(percent.Value)])
	low, high := zone(percent.Low), zone(percent.High)
	if low == high {
		return sentence + fmt.Sprintf(", proven: between %.1f %% and %.1f %%", percent.Low, percent.High)
	}
	return sentence + fmt.Sprintf(", not proven: between %.1f %% (%s) and %.1f %% (%s); a greater study tells", percent.Low, words[low], percent.High, words[high])
}
