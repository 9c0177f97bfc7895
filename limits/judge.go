package limits

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"

	"lotgate/limits/quantity"
)

// Measured is a reading as far as judging needs it.
type Measured struct {
	Name     string
	Unit     string  // SI symbol
	Value    float64 // in Unit
	Expanded float64 // U at 95 %, in Unit
	Points   []MeasuredPoint
	Missing  string // sentence in place of a number
	Void     string // why the measurement is void
}

// MeasuredPoint is a point of a curve.
type MeasuredPoint struct {
	FrequencyHz, Value, Expanded float64
}

// Judgement is what the limits say of a reading.
type Judgement struct {
	Verdict               Verdict
	Reason                string
	Lower, Upper, Nominal *float64
	Points                []JudgedPoint
}

// JudgedPoint is a curve's point with its bounds.
type JudgedPoint struct {
	MeasuredPoint
	Lower, Upper *float64
	Verdict      Verdict
}

// Judge holds a reading against its limits. A reading without limits has no verdict.
//
// Guarded (ISO 14253-1; JCGM 106:2012, 8.3): with U the expanded uncertainty, pass only
// if inside by U or more, fail only if outside by more than U, else marginal. Simple:
// on or inside the limits is pass, outside is fail. A reading that is void or has no number
// is void where it has limits: nothing was proven of the unit.
func (f *File) Judge(m Measured) (Judgement, error) {
	l, ok := f.Readings[m.Name]
	if !ok {
		if m.Void != "" {
			return Judgement{Verdict: Void, Reason: m.Void}, nil
		}
		return Judgement{}, nil
	}
	j := Judgement{Lower: l.Lower, Upper: l.Upper, Nominal: l.Nominal}
	if l.Mask == nil && l.Unit.Symbol != m.Unit {
		return j, fmt.Errorf("limits %s: %s is judged in %s but measured in %s: correct the limits file", f.Name, m.Name, l.Unit.Symbol, m.Unit)
	}
	if m.Void != "" || m.Missing != "" {
		j.Verdict, j.Reason = Void, m.Void+m.Missing
		return j, nil
	}
	if l.Mask != nil {
		return judgeCurve(l, m), nil
	}
	unit, _ := quantity.UnitBySymbol(m.Unit)
	j.Verdict = judge(l.Decision, m.Value, m.Expanded, l.Lower, l.Upper)
	j.Reason = reason(j.Verdict, l, unit, m.Value, m.Expanded, l.Lower, l.Upper)
	return j, nil
}

// judge is the decision rule for one number.
func judge(d Decision, value, u float64, lower, upper *float64) Verdict {
	inside := math.Inf(1) // least distance inside a limit; negative outside
	if lower != nil {
		inside = math.Min(inside, value-*lower)
	}
	if upper != nil {
		inside = math.Min(inside, *upper-value)
	}
	if d == Simple {
		u = 0
	}
	switch {
	case math.IsNaN(inside) || math.IsNaN(u):
		return Void
	case inside >= u:
		return Pass
	case inside < -u:
		return Fail
	case u == 0 && inside < 0:
		return Fail
	}
	return Marginal
}

// nearest is the limit that decides, and whether it is the lower one.
func nearest(value float64, lower, upper *float64) (limit float64, isLower bool) {
	if upper == nil || lower != nil && value-*lower < *upper-value {
		return *lower, true
	}
	return *upper, false
}

func reason(v Verdict, l Limit, unit quantity.Unit, value, u float64, lower, upper *float64) string {
	limit, isLower := nearest(value, lower, upper)
	distance := quantity.PrintTo(math.Abs(value-limit), u, unit)
	need := "at most "
	if isLower {
		need = "at least "
	}
	if l.Mask != nil { // between two corners: as many digits as the value
		limit = math.Round(limit*100) / 100
	}
	need += quantity.Print(limit, unit)
	name := plainName(l.Reading)
	shown := quantity.PrintTo(value, u, unit)
	switch v {
	case Pass:
		return fmt.Sprintf("%s %s, inside by %s (%s)", name, shown, distance, need)
	case Fail:
		return fmt.Sprintf("%s %s, needs %s", name, shown, need)
	case Marginal:
		side := "inside"
		if isLower && value < limit || !isLower && value > limit {
			side = "outside"
		}
		return fmt.Sprintf("%s %s, %s the limit %s by %s, less than its uncertainty %s: neither pass nor fail is proven",
			name, shown, side, quantity.Print(limit, unit), distance, quantity.PrintTo(u, u, unit))
	}
	return name + " has no usable number"
}

// plainName turns "sensitivity.echo" into "echo" for the person at the bench.
func plainName(reading string) string {
	if step, part, ok := strings.Cut(reading, "."); ok {
		switch {
		case part == "curve":
			return step
		case strings.HasPrefix(part, "band"):
			return "noise in the band"
		case strings.HasPrefix(part, "density"):
			return "noise " + part
		}
		return strings.ReplaceAll(part, "_", " ")
	}
	return strings.ReplaceAll(reading, "_", " ")
}

func judgeCurve(l Limit, m Measured) Judgement {
	var j Judgement
	worst, judged := -1, 0
	worstInside := math.Inf(1)
	for _, p := range m.Points {
		q := JudgedPoint{MeasuredPoint: p}
		q.Lower, q.Upper = l.Mask.At(p.FrequencyHz)
		if q.Lower != nil || q.Upper != nil {
			judged++
			q.Verdict = judge(l.Decision, p.Value, p.Expanded, q.Lower, q.Upper)
			limit, isLower := nearest(p.Value, q.Lower, q.Upper)
			inside := limit - p.Value
			if isLower {
				inside = -inside
			}
			better := worst >= 0 && rank(q.Verdict) < rank(j.Verdict)
			if worst < 0 || rank(q.Verdict) > rank(j.Verdict) || !better && inside < worstInside {
				worst, worstInside, j.Verdict = len(j.Points), inside, q.Verdict
			}
		}
		j.Points = append(j.Points, q)
	}
	if judged == 0 {
		j.Verdict, j.Reason = Void, "no point of the curve lies under the mask"
		return j
	}
	p := j.Points[worst]
	at := fmt.Sprintf(" at %s", quantity.PrintTo(p.FrequencyHz, p.FrequencyHz/50, quantity.Hertz))
	named := l
	named.Reading = l.Reading
	j.Reason = plainName(l.Reading) + at + strings.TrimPrefix(reason(p.Verdict, named, quantity.DecibelUnit, p.Value, p.Expanded, p.Lower, p.Upper), plainName(l.Reading))
	return j
}

// rank orders verdicts from best to worst.
func rank(v Verdict) int {
	switch v {
	case Pass:
		return 1
	case Marginal:
		return 2
	case Fail:
		return 3
	case Void:
		return 4
	}
	return 0
}

// Unit is a unit's verdict: its worst reading's, void over fail over marginal over
// pass, except that a void reading cannot hide a proven fail. With no judged reading
// the verdict is void.
func Unit(readings []Judgement) (Verdict, string) {
	count := map[Verdict]int{}
	reasons := map[Verdict][]string{}
	for _, j := range readings {
		count[j.Verdict]++
		if j.Verdict != None && !contains(reasons[j.Verdict], j.Reason) {
			reasons[j.Verdict] = append(reasons[j.Verdict], j.Reason)
		}
	}
	for _, v := range []Verdict{Fail, Void, Marginal} {
		if count[v] > 0 {
			return v, strings.Join(reasons[v], "; ")
		}
	}
	if count[Pass] == 0 {
		return Void, "no reading was judged: the limits name none of the plan's readings"
	}
	return Pass, fmt.Sprintf("all %d judged readings are inside their limits", count[Pass])
}

func contains(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
}

// Conformance is the probability that the true value lies within the limits when the
// value has the standard uncertainty u and nothing else is known (JCGM 106:2012, 7.2–7.4,
// normal distribution). A nil limit is open; u must be above zero.
func Conformance(value, u float64, lower, upper *float64) float64 {
	high, low := 1.0, 0.0
	n := distuv.Normal{Mu: value, Sigma: u}
	if upper != nil {
		high = n.CDF(*upper)
	}
	if lower != nil {
		low = n.CDF(*lower)
	}
	return high - low
}
