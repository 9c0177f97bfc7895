// Package plan is test plans: what is done to a unit, in order.
package plan

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"gopkg.in/yaml.v3"

	"lotgate/limits"
	"lotgate/limits/quantity"
	"lotgate/limits/quantity/document"
	"lotgate/station/measure"
)

// Plan is a plan file.
type Plan struct {
	Name         string         `key:"plan" need:"yes" doc:"the plan's name"`
	Revision     int            `key:"revision" need:"yes" range:">0" doc:"revision, counted up at every change"`
	Module       measure.Module `key:"module" need:"yes" doc:"the kind of module"`
	Limits       string         `key:"limits" need:"yes" doc:"the limits file, beside this file unless absolute"`
	Retry        Retry          `key:"retry" doc:"how often a unit is tried again"`
	KeepCaptures bool           `key:"keep_captures" doc:"yes: the samples of every attempt are kept in the store's folder"`
	AllowOverdue bool           `key:"allow_overdue" doc:"yes: go on with an overdue calibration; every certificate then says so"`
	Steps        []Step         `key:"steps" need:"yes" doc:"the steps, in order"`

	path string
	data []byte
}

// Retry says how often a unit whose verdict is void or marginal is tried again, and what
// one that stays marginal counts as.
type Retry struct {
	Void     int    `key:"void" range:">=0" doc:"further attempts after a void one; default 0"`
	Marginal int    `key:"marginal" range:">=0" doc:"further attempts after a marginal one; default 0"`
	Then     string `key:"then" among:"pass|marginal|fail" doc:"what a unit still marginal counts as; default marginal"`
}

// Step is one step: exactly one of Ask, Supply and Measure.
type Step struct {
	Line    int
	Ask     string
	Supply  *quantity.Voltage // a supply step; or a measuring step's own corner
	Settle  quantity.Time
	ID      string
	Measure measure.Measurement
	Kind    string
}

// defaultSettle is how long the supply settles where the plan does not say.
const defaultSettle = 0.5

// ReadNode reads a step by the key that tells what it is.
func (s *Step) ReadNode(r *document.Reader, n *yaml.Node) {
	s.Line, s.Settle = n.Line, defaultSettle
	if n.Kind != yaml.MappingNode {
		r.Fail(n, "a step is not a mapping", "write - ask: …, - supply: … or - measure: …")
		return
	}
	keys := map[string]*yaml.Node{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		keys[n.Content[i].Value] = n.Content[i+1]
	}
	switch {
	case keys["measure"] != nil:
		s.readMeasure(r, n, keys)
	case keys["supply"] != nil:
		var p supplyStep
		r.Node(n, &p)
		s.Supply = &p.Supply
		if p.Settle != nil {
			s.Settle = *p.Settle
		}
	case keys["ask"] != nil:
		var p askStep
		r.Node(n, &p)
		s.Ask = p.Ask
	default:
		r.Fail(n, "a step has none of the keys ask, supply, measure", "write - ask: …, - supply: … or - measure: …")
	}
}

type supplyStep struct {
	Supply quantity.Voltage `key:"supply" need:"yes" range:">=0" doc:"supply voltage; 0 V switches it off"`
	Settle *quantity.Time   `key:"settle" range:">=0" doc:"time to wait after it; default 0.5 s"`
}

type askStep struct {
	Ask string `key:"ask" need:"yes" doc:"what the operator is asked to do"`
}

type measureStep struct {
	Measure string            `key:"measure" need:"yes" doc:"the measurement"`
	ID      string            `key:"id" doc:"the step's name, which its readings carry; default: the measurement's name"`
	Supply  *quantity.Voltage `key:"supply" range:">0" doc:"supply voltage for this step only"`
	Settle  *quantity.Time    `key:"settle" range:">=0" doc:"time to wait after this step's supply is set; default 0.5 s"`
}

// readMeasure splits the keys between the step and the measurement.
func (s *Step) readMeasure(r *document.Reader, n *yaml.Node, keys map[string]*yaml.Node) {
	s.Kind = keys["measure"].Value
	m, err := measure.New(s.Kind)
	if err != nil {
		r.Fail(keys["measure"], err.Error(), "")
		return
	}
	own := map[string]bool{}
	for _, k := range document.KeysOf[measureStep]() {
		own[k] = true
	}
	step, parameters := *n, *n
	step.Content, parameters.Content = nil, nil
	for i := 0; i+1 < len(n.Content); i += 2 {
		to := &parameters
		if own[n.Content[i].Value] {
			to = &step
		}
		to.Content = append(to.Content, n.Content[i], n.Content[i+1])
	}
	var p measureStep
	r.Node(&step, &p)
	r.Struct(&parameters, m)
	s.Measure, s.ID, s.Supply = m, p.ID, p.Supply
	if s.ID == "" {
		s.ID = s.Kind
	}
	if p.Settle != nil {
		s.Settle = *p.Settle
	}
}

// Schema describes a step.
func (s Step) Schema() map[string]any {
	forms := []any{document.TypeOf[askStep](), document.TypeOf[supplyStep]()}
	for _, k := range measure.Kinds() {
		form := document.TypeOf[measureStep]()
		properties := form["properties"].(map[string]any)
		for key, p := range document.SchemaOf(k.New())["properties"].(map[string]any) {
			properties[key] = p
		}
		properties["measure"] = map[string]any{"const": k.Name, "description": k.Summary}
		forms = append(forms, form)
	}
	return map[string]any{"oneOf": forms}
}

// Schema writes the JSON Schema of plan files.
func Schema() ([]byte, error) { return document.Schema("Lotgate plan", Plan{}) }

// Read reads and checks a plan file.
func Read(path string) (*Plan, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("the plan cannot be read: %w: name it with --plan, or make one with lotgate init", err)
	}
	return Parse(path, data)
}

// Parse reads and checks a plan's content.
func Parse(path string, data []byte) (*Plan, error) {
	p := &Plan{path: path, data: data, Retry: Retry{Then: "marginal"}}
	if err := document.Read(path, data, p); err != nil {
		return nil, err
	}
	r := &document.Reader{File: path}
	fail := func(line int, what, expected string) {
		r.Errors = append(r.Errors, &document.Error{File: path, Line: line, What: what, Expected: expected})
	}
	seen := map[string]bool{}
	powered, measures := false, 0
	for _, s := range p.Steps {
		switch {
		case s.Measure != nil:
			measures++
			if err := s.Measure.Check(p.Module); err != nil {
				fail(s.Line, s.ID+": "+err.Error(), "")
			}
			if seen[s.ID] {
				fail(s.Line, fmt.Sprintf("two steps are called %q", s.ID), "give one of them an id of its own")
			}
			if strings.ContainsAny(s.ID, ". \t/\\") {
				fail(s.Line, fmt.Sprintf("the id %q has a dot, a slash or a space", s.ID), "write letters, digits and _ only")
			}
			seen[s.ID] = true
			if !powered && s.Supply == nil {
				fail(s.Line, s.ID+" comes before the supply is on", "write - supply: … before it")
			}
		case s.Supply != nil:
			powered = *s.Supply > 0
		}
	}
	if measures == 0 {
		fail(0, "the plan measures nothing", "write at least one step - measure: …")
	}
	if len(r.Errors) > 0 {
		return nil, joined(r.Errors)
	}
	return p, nil
}

// Path is where the plan was read from.
func (p *Plan) Path() string { return p.path }

// Content is the plan's text.
func (p *Plan) Content() []byte { return p.data }

// LimitsPath is the limits file the plan names.
func (p *Plan) LimitsPath() string {
	if filepath.IsAbs(p.Limits) {
		return p.Limits
	}
	return filepath.Join(filepath.Dir(p.path), p.Limits)
}

// UnitOf tells the unit of a reading of this plan; known is false for a name that none
// of its steps gives.
func (p *Plan) UnitOf(reading string) (unit quantity.Unit, curve, known bool) {
	for _, s := range p.Steps {
		if s.Measure == nil {
			continue
		}
		for _, o := range s.Measure.Readings() {
			if s.ID+o.Suffix == reading {
				return o.Unit, o.Curve, true
			}
		}
	}
	return quantity.Unit{}, false, false
}

// ReadLimits reads the plan's limits file and checks it against the plan: a limit on a
// reading that no step gives would never be judged, and is refused.
func (p *Plan) ReadLimits() (*limits.File, []byte, error) {
	path := p.LimitsPath()
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, nil, fmt.Errorf("the limits file of plan %s cannot be read: %w: correct limits: in the plan", p.path, err)
	}
	f, err := limits.Read(path, data, p.UnitOf)
	if err != nil {
		return nil, nil, err
	}
	for name := range f.Readings {
		if _, _, known := p.UnitOf(name); !known {
			return nil, nil, &document.Error{File: path, What: fmt.Sprintf("no step of plan %s gives a reading %q", p.path, name), Expected: "one of " + strings.Join(p.Names(), ", ")}
		}
	}
	return f, data, nil
}

// Names lists all readings the plan gives.
func (p *Plan) Names() []string {
	var out []string
	for _, s := range p.Steps {
		if s.Measure == nil {
			continue
		}
		for _, o := range s.Measure.Readings() {
			out = append(out, s.ID+o.Suffix)
		}
	}
	return out
}
