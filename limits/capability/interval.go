package capability

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// CpInterval is the exact confidence interval of Cp (or Pp) whose standard deviation is a pooled
// one with so many degrees of freedom: Cp·√(χ²/ν) at both tails (V.E. Kane, J. Qual. Technol. 18
// (1986) 41; D.C. Montgomery, Introduction to Statistical Quality Control, sect. 8.2.5).
func CpInterval(cp, dof, level float64) (low, high float64) {
	square := distuv.ChiSquared{K: dof}
	tail := (1 - level) / 2
	return cp * math.Sqrt(square.Quantile(tail)/dof), cp * math.Sqrt(square.Quantile(1-tail)/dof)
}

// BissellInterval is the approximate confidence interval of Cpk (or Ppk) with limits on both
// sides: Cpk ± z·√(1/(9n) + Cpk²/(2ν)) (A.F. Bissell, Applied Statistics 39 (1990) 331),
// n values in all and ν degrees of freedom of the standard deviation. It keeps its level
// from about 30 values up. Where the mean is known worse than to σ/√n, n is the
// number of values that would know it as well, and need not be whole.
func BissellInterval(cpk, n, dof, level float64) (low, high float64) {
	z := distuv.UnitNormal.Quantile(0.5 + level/2)
	half := z * math.Sqrt(1/(9*n)+cpk*cpk/(2*dof))
	return cpk - half, cpk + half
}

// OneSidedInterval is the exact confidence interval of Cpl or Cpu (or Ppl, Ppu, or Cpk where only
// one limit is given): 3√n times the index is a non-central t variable with ν degrees of freedom
// whose noncentrality is 3√n times the true index (Y.-M. Chou, D.B. Owen & S.A. Borrego A.,
// J. Qual. Technol. 22 (1990) 223).
func OneSidedInterval(index float64, n int, dof, level float64) (low, high float64) {
	scale := 3 * math.Sqrt(float64(n))
	tail := (1 - level) / 2
	return noncentrality(index*scale, dof, 1-tail) / scale, noncentrality(index*scale, dof, tail) / scale
}

// CpmInterval is the approximate confidence interval of Cpm (R.A. Boyles, J. Qual. Technol. 23
// (1991) 17): Cpm·√(χ²/ν) with ν = n(1+ξ²)²/(1+2ξ²), ξ the distance of the mean from the target
// in standard deviations.
func CpmInterval(cpm float64, n int, xi, level float64) (low, high float64) {
	dof := float64(n) * (1 + xi*xi) * (1 + xi*xi) / (1 + 2*xi*xi)
	return CpInterval(cpm, dof, level)
}
