// Package record keeps attempts and lots in the store, and captures on disk.
// Evidence is never overwritten or deleted.
package record

import (
	"encoding/json"
	"time"

	"lotgate/limits"
	"lotgate/station/measure"
)

// Attempt is one run of a plan on one unit, whole: what was read, how it was judged,
// by which files, with which calibrations, and what happened meanwhile.
type Attempt struct {
	ID       string    `json:"id"` // UUID, version 7
	Lot      string    `json:"lot"`
	Serial   string    `json:"serial"`
	Number   int       `json:"number"` // 1 for the unit's first attempt in its lot; the store assigns it when saving
	Station  string    `json:"station"`
	Nest     string    `json:"nest"`
	Operator string    `json:"operator"`
	Started  time.Time `json:"started"` // UTC
	Ended    time.Time `json:"ended"`   // UTC

	Plan         string `json:"plan"` // the plan's name
	PlanRevision int    `json:"plan_revision"`
	Limits       string `json:"limits"`
	LimitsRev    int    `json:"limits_revision"`

	Verdict limits.Verdict `json:"verdict"`
	Reason  string         `json:"reason"`

	Readings     []Judged         `json:"readings"`
	Figures      []measure.Figure `json:"figures,omitempty"`
	Files        []SourceFile     `json:"files"`
	Calibrations []Calibration    `json:"calibrations"`
	Warnings     []string         `json:"warnings,omitempty"` // "calibration overdue …", printed on the certificate
	Events       []Event          `json:"events"`
	Captures     string           `json:"captures,omitempty"` // folder, where they were kept
	Virtual      bool             `json:"virtual,omitempty"`  // measured on the virtual bench: no evidence of a real unit
}

// Judged is a reading with its limits and what they say of it.
type Judged struct {
	measure.Reading
	Lower   *float64       `json:"lower,omitempty"` // reading's unit
	Upper   *float64       `json:"upper,omitempty"`
	Nominal *float64       `json:"nominal,omitempty"`
	Points  []JudgedPoint  `json:"points,omitempty"` // curves: replaces the reading's own points
	Verdict limits.Verdict `json:"verdict,omitempty"`
	Reason  string         `json:"reason,omitempty"`
}

// JudgedPoint is a curve's point with its mask.
type JudgedPoint struct {
	FrequencyHz float64        `json:"frequency_hz"`
	Value       float64        `json:"value"`
	Expanded    float64        `json:"expanded_uncertainty"`
	Lower       *float64       `json:"lower,omitempty"`
	Upper       *float64       `json:"upper,omitempty"`
	Verdict     limits.Verdict `json:"verdict,omitempty"`
}

// SourceFile is a snapshot of a file the attempt was run by.
type SourceFile struct {
	Kind    string `json:"kind"` // plan, limits, station, driver
	Name    string `json:"name"` // path as given
	SHA256  string `json:"sha256"`
	Content []byte `json:"content"`
}

// Calibration is the state of one calibration at the time of the attempt.
type Calibration struct {
	What        string  `json:"what"` // "full scale of input if"
	Value       float64 `json:"value"`
	Unit        string  `json:"unit"`
	Uncertainty float64 `json:"uncertainty"` // expanded, k = 2, in Unit
	Date        string  `json:"date"`        // RFC 3339 full-date
	Due         string  `json:"due"`         // RFC 3339 full-date
	Overdue     bool    `json:"overdue"`
}

// Event is something that happened during an attempt.
type Event struct {
	Time time.Time       `json:"time"`
	Kind string          `json:"kind"` // step, progress, reading, void, verdict, safe, fault
	Step string          `json:"step,omitempty"`
	Text string          `json:"text"`
	Data json.RawMessage `json:"data,omitempty"`
}
