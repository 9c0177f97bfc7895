package station

import (
	"fmt"

	"lotgate/limits"
	"lotgate/station/measure"
	"lotgate/station/record"
)

// Evaluation is what captures said of a unit: readings, judged, and figures.
type Evaluation struct {
	Readings []record.Judged
	Figures  []measure.Figure
	Verdict  limits.Verdict
	Reason   string
}

// Evaluate works readings out of captures and judges them. Live tests and replays both
// come this way. Captures taken with the supply off are the station's own and give the
// unit no readings.
func Evaluate(captures []*measure.Capture, l *limits.File) (Evaluation, error) {
	var e Evaluation
	for _, c := range captures {
		if c.Supply.Off {
			continue
		}
		result, err := c.Parameters.Evaluate(c)
		if err != nil {
			return e, err
		}
		if err := e.add(result, l); err != nil {
			return e, err
		}
	}
	e.conclude()
	return e, nil
}

// add judges a capture's result.
func (e *Evaluation) add(result measure.Result, l *limits.File) error {
	for _, r := range result.Readings {
		j, err := Judge(r, l)
		if err != nil {
			return err
		}
		e.Readings = append(e.Readings, j)
	}
	e.Figures = append(e.Figures, result.Figures...)
	return nil
}

// conclude forms the unit's verdict.
func (e *Evaluation) conclude() {
	var all []limits.Judgement
	for _, r := range e.Readings {
		all = append(all, limits.Judgement{Verdict: r.Verdict, Reason: r.Reason})
	}
	e.Verdict, e.Reason = limits.Unit(all)
}

// Judge holds a reading against the limits.
func Judge(r measure.Reading, l *limits.File) (record.Judged, error) {
	m := limits.Measured{Name: r.Name, Unit: r.Unit, Value: r.Value, Expanded: r.Budget.Expanded, Missing: r.Missing}
	if r.Void != nil {
		m.Void = r.Void.Error()
	}
	for _, p := range r.Points {
		m.Points = append(m.Points, limits.MeasuredPoint{FrequencyHz: p.FrequencyHz, Value: p.Value, Expanded: p.Expanded})
	}
	j, err := l.Judge(m)
	if err != nil {
		return record.Judged{}, fmt.Errorf("reading %s: %w", r.Name, err)
	}
	out := record.Judged{Reading: r, Lower: j.Lower, Upper: j.Upper, Nominal: j.Nominal, Verdict: j.Verdict, Reason: j.Reason}
	for i, p := range r.Points {
		q := record.JudgedPoint{FrequencyHz: p.FrequencyHz, Value: p.Value, Expanded: p.Expanded}
		if i < len(j.Points) {
			q.Lower, q.Upper, q.Verdict = j.Points[i].Lower, j.Points[i].Upper, j.Points[i].Verdict
		}
		out.Points = append(out.Points, q)
	}
	return out, nil
}
