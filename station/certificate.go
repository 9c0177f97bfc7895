package station

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/reports"
	"lotgate/reports/chart"
	"lotgate/station/record"
)

// CertificatePath is where an attempt's certificate goes: the unit's first under its serial
// number, further ones with the attempt's number.
func CertificatePath(storeDir string, a *record.Attempt) string {
	name := record.SafeName(a.Serial)
	if a.Number > 1 {
		name += fmt.Sprintf("-attempt%d", a.Number)
	}
	return filepath.Join(storeDir, "lots", record.SafeName(a.Lot), "certificates", name+".pdf")
}

// WriteCertificate writes an attempt's certificate and gives its path. One that exists
// is not overwritten.
func WriteCertificate(storeDir string, a *record.Attempt, l *limits.File) (string, error) {
	var page bytes.Buffer
	if err := reports.WriteCertificate(&page, certificate(a, l)); err != nil {
		return "", err
	}
	path := CertificatePath(storeDir, a)
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return "", fmt.Errorf("the folder for certificates cannot be made: %w", err)
	}
	return record.WriteNew(path, page.Bytes())
}

func certificate(a *record.Attempt, l *limits.File) reports.Certificate {
	c := reports.Certificate{Serial: a.Serial, Lot: a.Lot, Station: a.Station, Nest: a.Nest, Operator: a.Operator, Time: a.Ended, Attempt: a.Number,
		Plan: source(a, "plan", a.Plan, a.PlanRevision), Limits: source(a, "limits", a.Limits, a.LimitsRev),
		Verdict: a.Verdict, Reason: a.Reason, Warnings: a.Warnings, Virtual: a.Virtual, Code: record.Fingerprint(a)}
	for _, k := range a.Calibrations {
		c.Calibrations = append(c.Calibrations, reports.Calibration{What: k.What, Value: k.Value, U: k.Uncertainty, Unit: k.Unit, Date: k.Date, Due: k.Due, Overdue: k.Overdue})
	}
	for _, r := range a.Readings {
		row := reports.Row{Name: r.Name, Label: label(r.Name), Unit: r.Unit, Value: r.Value, U: r.Budget.Expanded, Lower: r.Lower, Upper: r.Upper, Nominal: r.Nominal,
			Verdict: r.Verdict, Reason: r.Reason, Missing: r.Missing, Notes: r.Notes, Curve: r.Curve && len(r.Points) > 0}
		if r.Void != nil {
			row.Missing, row.Verdict = r.Void.Reason, limits.Void
		}
		limit, judged := l.Readings[r.Name]
		row.Simple = judged && limit.Decision == limits.Simple
		c.Rows = append(c.Rows, row)
		if len(r.Points) > 1 && c.Response == nil {
			c.Response = curveOf(r, limit)
		}
	}
	for _, f := range a.Figures {
		if strings.HasSuffix(f.Name, ".spectrum") && c.Noise == nil && len(f.Series) > 1 {
			c.Noise = noise(f.Series, strings.TrimSuffix(f.Name, ".spectrum"), a)
		}
	}
	return c
}

func source(a *record.Attempt, kind, name string, revision int) reports.Source {
	s := reports.Source{Name: name, Revision: revision}
	for _, f := range a.Files {
		if f.Kind == kind {
			s.SHA256 = f.SHA256
		}
	}
	return s
}

func curveOf(r record.Judged, limit limits.Limit) *chart.Curve {
	c := &chart.Curve{Mask: limit.Mask}
	bound := func(v *float64) *quantity.Decibel {
		if v == nil {
			return nil
		}
		d := quantity.Decibel(*v)
		return &d
	}
	for _, p := range r.Points {
		c.Points = append(c.Points, chart.ResponsePoint{Frequency: quantity.Frequency(p.FrequencyHz), Level: quantity.Decibel(p.Value), U: quantity.Decibel(p.Expanded),
			Lower: bound(p.Lower), Upper: bound(p.Upper), Verdict: p.Verdict})
	}
	return c
}

func noise(series [][2]float64, step string, a *record.Attempt) *chart.Noise {
	n := &chart.Noise{}
	for _, p := range series {
		n.Spectrum = append(n.Spectrum, chart.NoisePoint{Frequency: quantity.Frequency(p[0]), Density: quantity.NoiseDensity(p[1])})
	}
	for _, r := range a.Readings {
		inner, ok := strings.CutPrefix(r.Name, step+".density(")
		if !ok || r.Void != nil || r.Missing != "" {
			continue
		}
		hz, err := quantity.ParseAs[quantity.Frequency](strings.TrimSuffix(inner, ")"))
		if err != nil {
			continue
		}
		reading := chart.NoiseReading{NoisePoint: chart.NoisePoint{Frequency: hz, Density: quantity.NoiseDensity(r.Value)}, U: quantity.NoiseDensity(r.Budget.Expanded), Verdict: r.Verdict}
		if r.Upper != nil {
			d := quantity.NoiseDensity(*r.Upper)
			reading.Upper = &d
		}
		n.Readings = append(n.Readings, reading)
	}
	return n
}

// label is a reading's name for people.
func label(name string) string {
	step, part, _ := strings.Cut(name, ".")
	known := map[string]string{"band": "noise in the band", "mains": "mains hum", "corner": "noise corner", "echo": "echo", "phase": "mixer phase φ0",
		"curve": "response", "flatness": "flatness", "lower_edge": "lower edge", "upper_edge": "upper edge", "displacement": "displacement",
		"current": "current", "noise": "noise", "wavelength": "wavelength", "residual": "residual of the fit",
		"second": "second harmonic", "third": "third harmonic", "gain": "gain of Q to I",
		"offset_i": "pick-up of I", "offset_q": "pick-up of Q", "correlation": "correlation of the noises", "if": "IF"}
	text := strings.ReplaceAll(step, "_", " ")
	if inner, ok := strings.CutPrefix(part, "density("); ok {
		text = "noise density at " + strings.TrimSuffix(inner, ")")
	} else if k, ok := known[part]; ok {
		text = k
	}
	if text == "" {
		return name
	}
	return strings.ToUpper(text[:1]) + text[1:]
}

// Finish files what follows a saved attempt: the yield log's row and the certificate.
// Its notes are sentences for the operator.
func Finish(ctx context.Context, s *record.Store, a *record.Attempt, l *limits.File) (certificate string, notes []string, err error) {
	note, err := record.YieldLog{Store: s}.Append(ctx, a)
	if note != "" {
		notes = append(notes, note)
	}
	if err != nil {
		return "", notes, fmt.Errorf("the attempt is kept in the store, but not in the yield log: %w", err)
	}
	certificate, err = WriteCertificate(s.Dir(), a, l)
	if err != nil {
		return "", notes, fmt.Errorf("the attempt is kept in the store, but has no certificate: %w", err)
	}
	return certificate, notes, nil
}
