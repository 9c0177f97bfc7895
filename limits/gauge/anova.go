package gauge

import (
	"fmt"

	"gonum.org/v1/gonum/stat/distuv"

	"lotgate/limits/gauge/variance"
)

// InteractionRule says what becomes of the interaction of operators with parts.
type InteractionRule int

const (
	// PoolInteraction drops the interaction from the model, its sum of squares joining that of the
	// repeats, where its F test gives p above PoolAbove; else it stays.
	PoolInteraction InteractionRule = iota
	KeepInteraction
	DropInteraction
)

// PoolAbove is the p of the interaction's F test above which it is pooled: 0.25, so that a real
// interaction is seldom lost (T.A. Bancroft, Biometrics 20 (1964) 427; D.C. Montgomery & G.C.
// Runger, Quality Engineering 6 (1993) 289).
const PoolAbove = 0.25

// Row is a line of the analysis of variance. F and P are nil where there is no test.
type Row struct {
	Source string   `json:"source"`
	Dof    float64  `json:"dof"`
	SS     float64  `json:"ss"` // sum of squares
	MS     float64  `json:"ms"` // mean square
	F      *float64 `json:"f,omitempty"`
	P      *float64 `json:"p,omitempty"`
}

func row(source string, ss, dof float64) Row {
	return Row{Source: source, Dof: dof, SS: ss, MS: ss / dof}
}

// test fills in the F test of a row against another.
func (r *Row) test(against Row) {
	if against.MS == 0 {
		return
	}
	f := r.MS / against.MS
	p := distuv.F{D1: r.Dof, D2: against.Dof}.Survival(f)
	r.F, r.P = &f, &p
}

func (r Row) square() variance.MeanSquare { return variance.MeanSquare{Value: r.MS, Dof: r.Dof} }

// ANOVA is the two-way random analysis of variance of a crossed study (AIAG, Measurement Systems
// Analysis, 4th ed. 2010, ch. III-B; Burdick, Borror & Montgomery 2003). With p parts, o operators and
// r trials the variances are: repeatability MS(repeats), interaction (MS(interaction) − MS(repeats))/r,
// operators (MS(operators) − MS(interaction))/(p·r), parts (MS(parts) − MS(interaction))/(o·r). Without
// interaction, the pooled mean square takes its place. With one operator it is the one-way analysis.
func ANOVA(readings []Reading, o Options) (Study, error) {
	g, err := crossed(readings)
	if err != nil {
		return Study{}, err
	}
	s, err := newStudy("analysis of variance", g, o)
	if err != nil {
		return Study{}, err
	}
	part, operator, interaction, repeats := g.squares()
	var m model
	switch {
	case len(g.operators) == 1:
		m, err = oneWay(&s, g, part, repeats)
	case o.Interaction == KeepInteraction:
		m, err = withInteraction(&s, g, part, operator, interaction, repeats)
	default:
		interaction.test(repeats)
		if o.Interaction == PoolInteraction && (interaction.P == nil || *interaction.P <= PoolAbove) {
			m, err = withInteraction(&s, g, part, operator, interaction, repeats)
			break
		}
		if interaction.P != nil {
			s.Notes = append(s.Notes, fmt.Sprintf("the interaction of operators with parts (p = %.2g) was pooled with the repeats", *interaction.P))
		}
		m, err = withoutInteraction(&s, g, part, operator, interaction, repeats)
	}
	if err != nil {
		return Study{}, err
	}
	return s, s.fill(m, o.Tolerance)
}

// squares are the rows of the two-way table; operator and interaction mean nothing with one operator.
func (g *grid) squares() (part, operator, interaction, repeats Row) {
	p, o, r := g.size()
	grand := g.mean(-1, -1)
	ofPart, ofOperator, ofCell, within := 0.0, 0.0, 0.0, 0.0
	for i := range g.parts {
		d := g.mean(i, -1) - grand
		ofPart += o * r * d * d
	}
	for j := range g.operators {
		d := g.mean(-1, j) - grand
		ofOperator += p * r * d * d
	}
	for i := range g.parts {
		for j := range g.operators {
			mean := g.mean(i, j)
			d := mean - g.mean(i, -1) - g.mean(-1, j) + grand
			ofCell += r * d * d
			for _, v := range g.value[i][j] {
				within += (v - mean) * (v - mean)
			}
		}
	}
	return row("parts", ofPart, p-1), row("operators", ofOperator, o-1),
		row("operators × parts", ofCell, (p-1)*(o-1)), row("repeats", within, p*o*(r-1))
}

func withInteraction(s *Study, g *grid, part, operator, interaction, repeats Row) (m model, err error) {
	p, o, r := g.size()
	part.test(interaction)
	operator.test(interaction)
	interaction.test(repeats)
	s.Table = []Row{part, operator, interaction, repeats}
	m.set, err = variance.New(s.Level, part.square(), operator.square(), interaction.square(), repeats.square())
	if err != nil {
		return m, err
	}
	m.repeatability = m.term(0, 0, 0, 1)
	m.interaction = m.term(0, 0, 1/r, -1/r)
	m.operator = m.term(0, 1/(p*r), -1/(p*r), 0)
	m.part = m.term(1/(o*r), 0, -1/(o*r), 0)
	return m, nil
}

func withoutInteraction(s *Study, g *grid, part, operator, interaction, repeats Row) (m model, err error) {
	p, o, r := g.size()
	pooled := row("repeats and interaction", interaction.SS+repeats.SS, interaction.Dof+repeats.Dof)
	part.test(pooled)
	operator.test(pooled)
	s.Table = []Row{part, operator, interaction, repeats, pooled}
	m.set, err = variance.New(s.Level, part.square(), operator.square(), pooled.square())
	if err != nil {
		return m, err
	}
	m.repeatability = m.term(0, 0, 1)
	m.operator = m.term(0, 1/(p*r), -1/(p*r))
	m.part = m.term(1/(o*r), 0, -1/(o*r))
	return m, nil
}

func oneWay(s *Study, g *grid, part, repeats Row) (m model, err error) {
	_, _, r := g.size()
	part.test(repeats)
	s.Table = []Row{part, repeats}
	m.set, err = variance.New(s.Level, part.square(), repeats.square())
	if err != nil {
		return m, err
	}
	m.repeatability = m.term(0, 1)
	m.part = m.term(1/r, -1/r)
	return m, nil
}
