package capability

import "math"

// indices are the four indices of a kind ("C" or "P") from a spread: (U−L)/6σ, (x̄−L)/3σ, (U−x̄)/3σ and
// the lesser of the last two (Kane 1986; NIST/SEMATECH e-Handbook 6.1.6).
func (r *Result) indices(kind string, s Spread) (both, lower, upper, least Index) {
	l := r.Limits
	both, lower, upper, least = Index{Name: kind + "p"}, Index{Name: kind + "pl"}, Index{Name: kind + "pu"}, Index{Name: kind + "pk"}
	if s.Missing != "" {
		for _, i := range []*Index{&both, &lower, &upper, &least} {
			i.Missing = "no " + i.Name + ": " + s.Missing
		}
		return both, lower, upper, least
	}
	approximate := ""
	if s.Dof != math.Trunc(s.Dof) {
		approximate = ", with effective degrees of freedom of the moving range"
	}
	oneSided := func(i *Index, room float64) {
		i.Value = room / (3 * s.Sigma)
		i.Low, i.High = OneSidedInterval(i.Value, r.N, s.Dof, r.Level)
		i.Method = "non-central t" + approximate
	}
	if l.Lower != nil {
		oneSided(&lower, r.Mean-*l.Lower)
	} else {
		lower.Missing = "no " + lower.Name + ": there is no lower limit"
	}
	if l.Upper != nil {
		oneSided(&upper, *l.Upper-r.Mean)
	} else {
		upper.Missing = "no " + upper.Name + ": there is no upper limit"
	}
	switch {
	case l.Lower == nil:
		both.Missing = "no " + both.Name + ": it needs limits on both sides and there is no lower one"
		least.Value, least.Low, least.High, least.Method = upper.Value, upper.Low, upper.High, upper.Method
	case l.Upper == nil:
		both.Missing = "no " + both.Name + ": it needs limits on both sides and there is no upper one"
		least.Value, least.Low, least.High, least.Method = lower.Value, lower.Low, lower.High, lower.Method
	default:
		both.Value = (*l.Upper - *l.Lower) / (6 * s.Sigma)
		both.Low, both.High = CpInterval(both.Value, s.Dof, r.Level)
		both.Method = "chi-square" + approximate
		least.Value = math.Min(lower.Value, upper.Value)
		least.Low, least.High = BissellInterval(least.Value, float64(r.N), s.Dof, r.Level)
		least.Method = "Bissell 1990" + approximate
	}
	return both, lower, upper, least
}

// cpm is (U−L)/(6·√(s² + (x̄−T)²)) (L.K. Chan, S.W. Cheng & F.A. Spiring, J. Qual. Technol. 20 (1988)
// 162; NIST/SEMATECH e-Handbook 6.1.6), with the standard deviation of all values.
func (r *Result) cpm() Index {
	l := r.Limits
	i := Index{Name: "Cpm"}
	switch {
	case l.Target == nil:
		i.Missing = "no Cpm: there is no target"
		return i
	case l.Lower == nil || l.Upper == nil:
		i.Missing = "no Cpm: it needs limits on both sides"
		return i
	}
	xi := (r.Mean - *l.Target) / r.Overall.Sigma
	i.Value = (*l.Upper - *l.Lower) / (6 * r.Overall.Sigma * math.Sqrt(1+xi*xi))
	i.Low, i.High = CpmInterval(i.Value, r.N, xi, r.Level)
	i.Method = "Boyles 1991"
	return i
}
