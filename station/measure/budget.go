package measure

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/stat/distuv"
)

// Component is one source of uncertainty of a reading.
type Component struct {
	Source string  `json:"source"` // "full scale of the input (calibration)"
	U      float64 `json:"u"`      // standard uncertainty contributed, in the reading's unit
	Dof    float64 `json:"dof"`    // degrees of freedom; 0 stands for infinitely many
}

// Budget is a reading's uncertainty after the GUM (JCGM 100:2008): standard
// uncertainties combined in quadrature (eq. 10, uncorrelated inputs), effective
// degrees of freedom by Welch–Satterthwaite (eq. G.2b), expanded by Student's t to
// the coverage asked for (G.3).
type Budget struct {
	Components []Component `json:"components"`
	Combined   float64     `json:"combined"` // standard uncertainty, reading's unit
	Dof        float64     `json:"dof"`      // effective; 0 stands for infinitely many
	Coverage   float64     `json:"coverage"` // 0.95
	Factor     float64     `json:"factor"`   // k
	Expanded   float64     `json:"expanded"` // U = k·u
}

// Coverage is the level of confidence of all expanded uncertainties.
const Coverage = 0.95

// Combine makes the budget of uncorrelated components. A component of zero is kept,
// so that a reader sees it was thought of.
func Combine(components ...Component) Budget { return CombineCorrelated(nil, components...) }

// CombineCorrelated makes the budget of components of which some are correlated (GUM eq. 13 and
// 16): r[i][k] is the correlation coefficient of components i and k, read for i < k; nil for none.
// A component's U then carries the sign of its sensitivity. The degrees of freedom are those of
// the uncorrelated case (the GUM gives no formula for others).
func CombineCorrelated(r [][]float64, components ...Component) Budget {
	b := Budget{Components: components, Coverage: Coverage}
	variance, fourth := 0.0, 0.0
	for i, c := range components {
		variance += c.U * c.U
		if c.Dof > 0 {
			fourth += c.U * c.U * c.U * c.U / c.Dof
		}
		if i < len(r) {
			for k := i + 1; k < len(components); k++ {
				variance += 2 * r[i][k] * c.U * components[k].U
			}
		}
	}
	variance = math.Max(0, variance)
	b.Combined = math.Sqrt(variance)
	if fourth > 0 {
		b.Dof = variance * variance / fourth
	}
	b.Factor = CoverageFactor(b.Dof)
	b.Expanded = b.Factor * b.Combined
	return b
}

// CoverageFactor is the k that gives 95 % at so many degrees of freedom (0 stands
// for infinitely many): 1.960 for a normal distribution, Student's t otherwise. The
// degrees of freedom are not truncated to a whole number (GUM G.4.1 allows both), but
// taken to three digits, which changes k by less than one part in a thousand.
func CoverageFactor(dof float64) float64 {
	if dof <= 0 || dof > 1e6 {
		return normalFactor
	}
	size := math.Pow10(int(math.Floor(math.Log10(dof))) - 2)
	dof = math.Round(dof/size) * size
	if k, ok := factors.Load(dof); ok {
		return k.(float64)
	}
	k := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.Quantile(0.5 + Coverage/2)
	factors.Store(dof, k)
	return k
}

var (
	normalFactor = distuv.UnitNormal.Quantile(0.5 + Coverage/2)
	// factors keeps those worked out before: a response asks for dozens.
	factors sync.Map // float64 → float64
)
