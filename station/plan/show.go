package plan

import (
	"errors"
	"fmt"
	"strings"

	"lotgate/limits/quantity"
	"lotgate/station/measure"
)

func joined(list []error) error { return errors.Join(list...) }

// typical is a bench on which a plan's times are worked out where no station is named.
func typical(m measure.Module) measure.Bench {
	return measure.Bench{Module: m, SampleRate: 48000, Standoff: 0.22, Chop: 400, Mains: 50, Largest: 1, LargestDrive: 1e9, Travel: 0.03, Ripple: true,
		PerVolt: func(quantity.Frequency) quantity.DisplacementPerVolt { return 1e-3 }}
}

// Description is a plan in plain words.
type Description struct {
	Lines []string
	Least quantity.Time // time the steps take at least, without the operator's part
}

// Describe says what the plan does, step by step, on a bench (nil: a typical one), and
// the time it takes at least. An error names the step that the bench cannot do.
func (p *Plan) Describe(b *measure.Bench) (Description, error) {
	if b == nil {
		t := typical(p.Module)
		b = &t
	}
	var d Description
	add := func(seconds quantity.Time, format string, a ...any) {
		d.Least += seconds
		d.Lines = append(d.Lines, fmt.Sprintf(format, a...))
	}
	for _, s := range p.Steps {
		switch {
		case s.Measure != nil:
			schedule, err := s.Measure.Prepare(*b)
			if err != nil {
				return d, fmt.Errorf("%s:%d: %s: %w", p.path, s.Line, s.ID, err)
			}
			var seconds quantity.Time
			for _, a := range schedule.Acquisitions {
				seconds += a.Duration(b.SampleRate)
			}
			text := fmt.Sprintf("measure %s", s.Kind)
			if s.ID != s.Kind {
				text += " as " + s.ID
			}
			if s.Supply != nil {
				text += fmt.Sprintf(" at %v", *s.Supply)
				seconds += s.Settle
			}
			if n := len(schedule.Acquisitions); n > 1 {
				text += fmt.Sprintf(", %d acquisitions", n)
			}
			if schedule.FloorAge != nil {
				text += fmt.Sprintf("; the station's own floor is taken first where the last one is older than %s", spoken(*schedule.FloorAge))
			}
			var names []string
			for _, o := range s.Measure.Readings() {
				names = append(names, s.ID+o.Suffix)
			}
			add(seconds, "%s: %.1f s → %s", text, float64(seconds), strings.Join(names, ", "))
		case s.Supply != nil && *s.Supply > 0:
			add(s.Settle, "supply %v, settle %v", *s.Supply, s.Settle)
		case s.Supply != nil:
			add(s.Settle, "supply off, settle %v", s.Settle)
		default:
			add(0, "ask: %s", s.Ask)
		}
	}
	add(0, "supply off, target off (always, whatever happened)")
	return d, nil
}

func spoken(t quantity.Time) string {
	switch {
	case t >= 3600:
		return fmt.Sprintf("%.3g h", float64(t)/3600)
	case t >= 60:
		return fmt.Sprintf("%.3g min", float64(t)/60)
	}
	return t.String()
}
