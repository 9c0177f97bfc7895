// Package limits judges: limits files, masks, guard bands, verdicts. It knows
// nothing of hardware or of how a number was measured.
package limits

// Verdict is what is said of a reading or of a unit.
type Verdict string

// The four verdicts.
const (
	Pass     Verdict = "pass"     // inside the limits, proven with the uncertainty counted in
	Marginal Verdict = "marginal" // too near a limit to prove either
	Fail     Verdict = "fail"     // outside the limits, proven
	Void     Verdict = "void"     // the station could not measure: says nothing about the unit
	None     Verdict = ""         // no limits given
)

// Sign is the verdict's ring in a terminal.
func (v Verdict) Sign() string {
	switch v {
	case Pass:
		return "●"
	case Marginal:
		return "◐"
	case Fail:
		return "⊘"
	case Void:
		return "◌"
	}
	return " "
}
