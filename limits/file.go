package limits

import (
	"errors"
	"fmt"
	"sort"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity"
	"lotgate/limits/quantity/document"
)

// Decision is the rule that turns a value, its uncertainty and a limit into a verdict.
type Decision string

// The decision rules.
const (
	Guarded Decision = "guarded" // pass and fail only where proven by the expanded uncertainty (ISO 14253-1)
	Simple  Decision = "simple"  // inside is pass, outside is fail
)

// Limit is what one reading must be. A missing bound is open.
type Limit struct {
	Reading               string
	Unit                  quantity.Unit
	Lower, Nominal, Upper *float64 // in Unit
	Decision              Decision
	Mask                  *Mask
}

// File is a limits file.
type File struct {
	Name     string
	Revision int
	Decision Decision
	Readings map[string]Limit
}

// UnitOf tells the unit of a reading by its name and whether it is a curve; known is
// false for a name it has not heard of.
type UnitOf func(reading string) (unit quantity.Unit, curve, known bool)

// Any knows no reading: each limit's own unit is taken.
func Any(string) (quantity.Unit, bool, bool) { return quantity.Unit{}, false, false }

type rawFile struct {
	Limits   string              `key:"limits" need:"yes" doc:"name of these limits"`
	Revision int                 `key:"revision" need:"yes" range:">0" doc:"revision, counted up at every change"`
	Decision string              `key:"decision" among:"guarded|simple" doc:"guarded (default): the uncertainty is counted in; simple: it is not"`
	Readings map[string]rawLimit `key:"readings" need:"yes" doc:"what each reading must be, by its name"`
}

type rawLimit struct {
	Lower    *yaml.Node `key:"lower"`
	Nominal  *yaml.Node `key:"nominal"`
	Upper    *yaml.Node `key:"upper"`
	Decision string     `key:"decision" among:"guarded|simple"`
	Mask     *rawMask   `key:"mask"`
	node     *yaml.Node
}

type rawMask struct {
	Upper []maskPoint `key:"upper" doc:"points [frequency, level], joined linearly in dB against log frequency"`
	Lower []maskPoint `key:"lower" doc:"points [frequency, level], joined linearly in dB against log frequency"`
	node  *yaml.Node
}

type maskPoint struct {
	hz quantity.Frequency
	db quantity.Decibel
}

// ReadNode reads [10 Hz, 1 dB].
func (p *maskPoint) ReadNode(r *document.Reader, n *yaml.Node) {
	if n.Kind != yaml.SequenceNode || len(n.Content) != 2 {
		r.Fail(n, "a point of a mask is not readable", "write [frequency, level], such as [10 Hz, 1 dB]")
		return
	}
	r.Node(n.Content[0], &p.hz)
	r.Node(n.Content[1], &p.db)
	if p.hz <= 0 && len(r.Errors) == 0 {
		r.Fail(n, "a mask's frequency is not possible", "write a value above zero, such as 10 Hz")
	}
}

// Schema describes a mask's point.
func (p maskPoint) Schema() map[string]any {
	return map[string]any{"type": "array", "prefixItems": []any{document.TypeOf[quantity.Frequency](), document.TypeOf[quantity.Decibel]()}, "minItems": 2, "maxItems": 2}
}

// ReadNode reads a mask and keeps where it stood.
func (m *rawMask) ReadNode(r *document.Reader, n *yaml.Node) {
	type plain struct {
		Upper []maskPoint `key:"upper"`
		Lower []maskPoint `key:"lower"`
	}
	var p plain
	r.Node(n, &p)
	m.Upper, m.Lower, m.node = p.Upper, p.Lower, n
}

// Schema describes a mask.
func (m rawMask) Schema() map[string]any {
	list := map[string]any{"type": "array", "items": maskPoint{}.Schema()}
	return map[string]any{"type": "object", "properties": map[string]any{"upper": list, "lower": list}, "additionalProperties": false}
}

// ReadNode keeps the nodes of a limit: its dimension is known only with its name.
func (l *rawLimit) ReadNode(r *document.Reader, n *yaml.Node) {
	type plain struct {
		Lower    rawNode  `key:"lower"`
		Nominal  rawNode  `key:"nominal"`
		Upper    rawNode  `key:"upper"`
		Decision string   `key:"decision" among:"guarded|simple"`
		Mask     *rawMask `key:"mask"`
	}
	var p plain
	r.Node(n, &p)
	*l = rawLimit{p.Lower.n, p.Nominal.n, p.Upper.n, p.Decision, p.Mask, n}
}

// Schema describes a limit.
func (l rawLimit) Schema() map[string]any {
	text := map[string]any{"type": []string{"string", "number"}, "description": "a quantity of the reading's unit, such as 40 mA"}
	return map[string]any{"type": "object", "additionalProperties": false, "properties": map[string]any{
		"lower": text, "nominal": text, "upper": text, "decision": map[string]any{"enum": []string{"guarded", "simple"}}, "mask": rawMask{}.Schema()}}
}

type rawNode struct{ n *yaml.Node }

func (q *rawNode) ReadNode(_ *document.Reader, n *yaml.Node) { q.n = n }

// Schema writes the JSON Schema of limits files.
func Schema() ([]byte, error) { return document.Schema("Lotgate limits", rawFile{}) }

// Read reads a limits file. unitOf tells the dimension each reading must have; Any
// where no plan is known. All mistakes are named, by line.
func Read(file string, data []byte, unitOf UnitOf) (*File, error) {
	var raw rawFile
	if err := document.Read(file, data, &raw); err != nil {
		return nil, err
	}
	f := &File{Name: raw.Limits, Revision: raw.Revision, Decision: Decision(raw.Decision), Readings: map[string]Limit{}}
	if f.Decision == "" {
		f.Decision = Guarded
	}
	r := &document.Reader{File: file}
	names := make([]string, 0, len(raw.Readings))
	for name := range raw.Readings {
		names = append(names, name)
	}
	sort.Slice(names, func(i, k int) bool { return raw.Readings[names[i]].node.Line < raw.Readings[names[k]].node.Line })
	for _, name := range names {
		l := raw.Readings[name].limit(r, name, f.Decision, unitOf)
		f.Readings[name] = l
	}
	if len(names) == 0 {
		r.Errors = append(r.Errors, &document.Error{File: file, What: "no reading has a limit", Expected: "write at least one under readings"})
	}
	return f, errors.Join(r.Errors...)
}

func (raw rawLimit) limit(r *document.Reader, name string, decision Decision, unitOf UnitOf) Limit {
	l := Limit{Reading: name, Decision: decision}
	if raw.Decision != "" {
		l.Decision = Decision(raw.Decision)
	}
	unit, curve, known := unitOf(name)
	if raw.Mask != nil {
		if known && !curve {
			r.Fail(raw.node, name+" is no curve and has no mask", "write lower: or upper:")
			return l
		}
		if raw.Lower != nil || raw.Upper != nil || raw.Nominal != nil {
			r.Fail(raw.node, name+" has a mask and single limits too", "keep the mask")
			return l
		}
		l.Unit = quantity.DecibelUnit
		l.Mask = newMask(r, name, raw.Mask)
		return l
	}
	if known && curve {
		r.Fail(raw.node, name+" is a curve and needs a mask", "write mask: {upper: [[10 Hz, 1 dB], …], lower: …}")
		return l
	}
	l.Unit = unit
	for _, b := range []struct {
		key  string
		node *yaml.Node
		to   **float64
	}{{"lower", raw.Lower, &l.Lower}, {"nominal", raw.Nominal, &l.Nominal}, {"upper", raw.Upper, &l.Upper}} {
		if b.node == nil {
			continue
		}
		if !known && l.Unit.Symbol == "" {
			l.Unit = quantity.Detect(b.node.Value)
		}
		v, err := quantity.Parse(b.node.Value, l.Unit)
		if err != nil {
			var wrong *quantity.WrongUnitError
			if errors.As(err, &wrong) {
				r.Fail(b.node, fmt.Sprintf("%s: %s %q %s", name, b.key, wrong.Text, wrong.What), "write a "+wrong.Want.Name+", such as "+wrong.Want.Example)
			}
			continue
		}
		*b.to = &v
	}
	switch {
	case l.Lower == nil && l.Upper == nil:
		if len(r.Errors) == 0 {
			r.Fail(raw.node, name+" has neither lower nor upper limit", "write one of them, or take the reading out")
		}
	case l.Lower != nil && l.Upper != nil && *l.Lower >= *l.Upper:
		r.Fail(raw.node, name+": the lower limit is not below the upper", "exchange them, or correct one")
	case l.Nominal != nil && (l.Lower != nil && *l.Nominal < *l.Lower || l.Upper != nil && *l.Nominal > *l.Upper):
		r.Fail(raw.node, name+": the nominal value lies outside the limits", "correct one of them")
	}
	return l
}
