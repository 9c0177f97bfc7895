package measure

import (
	"math"

	"lotgate/limits/quantity/tolerance"
)

// positionTolerance is the expanded uncertainty (k = 2) of where the stage stops, where the
// station does not state one under "position": 10 µm, a leadscrew with a preloaded nut
// (common practice).
var positionTolerance = tolerance.Tolerance{Absolute: 10e-6, Unit: "m"}

// position is the standard uncertainty of where the stage stops, m, and what to call it.
func (c *Capture) position() (sigma float64, source string) {
	if t, ok := c.Uncertainty["position"]; ok && t.Absolute > 0 {
		return t.Absolute / 2, "where the stage stops (calibration)"
	}
	return positionTolerance.Absolute / 2, "where the stage stops (10 µm, common practice)"
}

// pickUpTolerance is the standard uncertainty, relative to the largest amplitude of the tone, of what is heard
// at the tone wherever the plate stands: the shaker's frame and the nest move a little too (common
// practice).
const pickUpTolerance = 0.001

// pickedUp is what a constant of size one in every row does to P and Q worked out as sums of rows, in
// the direction of (P, Q) and across it.
func pickedUp(p, q float64, weightP, weightQ []float64) (along, across float64) {
	size := math.Hypot(p, q)
	if size == 0 {
		return 0, 0
	}
	var dp, dq float64
	for k := range weightP {
		dp, dq = dp+weightP[k], dq+weightQ[k]
	}
	return math.Abs(p*dp+q*dq) / size, math.Abs(q*dp-p*dq) / size
}

// astray is what a stage that stops astray by sigma (m, independently at each place) does to
// P = V0·sin φ0 and Q = V0·cos φ0 worked out as sums of rows: row k, at the phase psi[k], is off by
// V0·cos(φ0 − ψ_k)·4πσ/λ. along is the effect in the direction of V0 (V), across that at right
// angles to it (V).
func astray(p, q float64, psi, weightP, weightQ []float64, sigma, lambda float64) (along, across float64) {
	size := math.Hypot(p, q)
	if size == 0 {
		return 0, 0
	}
	for k := range psi {
		sin, cos := math.Sincos(psi[k])
		off := (p*sin + q*cos) * 4 * math.Pi * sigma / lambda
		along += math.Pow((p*weightP[k]+q*weightQ[k])/size*off, 2)
		across += math.Pow((q*weightP[k]-p*weightQ[k])/size*off, 2)
	}
	return math.Sqrt(along), math.Sqrt(across)
}
