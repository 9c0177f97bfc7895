package station

import (
	"crypto/sha256"
	"encoding/hex"

	"lotgate/fixtures/attach"
	"lotgate/limits"
	"lotgate/station/plan"
	"lotgate/station/record"
)

// Sources are snapshots of all files that attempts are run by.
func Sources(f *attach.File, a *attach.Attached, p *plan.Plan, limitsData []byte) []record.SourceFile {
	out := []record.SourceFile{
		snapshot("plan", p.Path(), p.Content()),
		snapshot("limits", p.LimitsPath(), limitsData),
		snapshot("station", f.Path(), f.Content()),
	}
	for _, d := range a.Drivers {
		out = append(out, snapshot("driver", d.Name, d.Content))
	}
	for _, c := range a.Setup.Files {
		out = append(out, snapshot("calibration", c.Name(), c.Content()))
	}
	return out
}

func snapshot(kind, name string, content []byte) record.SourceFile {
	sum := sha256.Sum256(content)
	return record.SourceFile{Kind: kind, Name: name, SHA256: hex.EncodeToString(sum[:]), Content: content}
}

// NewRunner makes the runner of a plan on an opened bench.
func NewRunner(f *attach.File, a *attach.Attached, p *plan.Plan, l *limits.File, limitsData []byte, store *record.Store, clock Clock) *Runner {
	return &Runner{File: f, Setup: a.Setup, Bench: a.Bench, Plan: p, Limits: l, Sources: Sources(f, a, p, limitsData), Store: store, Clock: clock,
		Captures: store.Dir() + "/captures"}
}
