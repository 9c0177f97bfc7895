// Package document reads the program's YAML files strictly into Go structs whose
// fields are quantities, and describes the same structs as JSON Schema, so that
// what is read and what an editor is told can never differ.
//
// A field is described by its tags:
//
//	key:"name"            the YAML key (snake_case)
//	doc:"…"               one sentence for the schema
//	need:"yes"            the key must be there
//	among:"a|b|c"         the texts allowed
//	range:">0", ">=0"     the values allowed
//
// An unknown key, a quantity of the wrong dimension or an impossible value is
// refused with file and line, what is wrong and what was expected.
package document

import (
	"errors"
	"fmt"
	"reflect"
	"sort"
	"strconv"
	"strings"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity"
)

// An Error names the place, what is wrong there and what was expected.
type Error struct {
	File     string
	Line     int // from 1; 0 where the file as a whole is meant
	What     string
	Expected string
}

func (e *Error) Error() string {
	place := e.File
	if e.Line > 0 {
		place += ":" + strconv.Itoa(e.Line)
	}
	if e.Expected == "" {
		return place + ": " + e.What
	}
	return place + ": " + e.What + ": " + e.Expected
}

// A NodeReader reads itself from a YAML node, for parts whose shape depends on
// their content. It reports through r and returns nothing: reading goes on, so
// that one run names every mistake.
type NodeReader interface {
	ReadNode(r *Reader, n *yaml.Node)
}

// A Checker looks for impossible values after its fields were read. The returned
// errors' key, where not empty, tells the line.
type Checker interface {
	Check() []Problem
}

// A Problem is one impossible value found by a Checker.
type Problem struct {
	Key      string // the key it stands at; empty for the mapping as a whole
	What     string
	Expected string
}

// Reader collects what is wrong while a document is read.
type Reader struct {
	File   string
	Errors []error
}

// Fail notes what is wrong at a node.
func (r *Reader) Fail(n *yaml.Node, what, expected string) {
	line := 0
	if n != nil {
		line = n.Line
	}
	r.Errors = append(r.Errors, &Error{r.File, line, what, expected})
}

// Read reads one YAML document into the struct that into points to. The error
// joins an *Error for each mistake, in the order of the lines.
func Read(file string, data []byte, into any) error {
	var root yaml.Node
	if err := yaml.Unmarshal(data, &root); err != nil {
		return yamlError(file, err)
	}
	r := &Reader{File: file}
	if len(root.Content) == 0 {
		return &Error{file, 0, "the file is empty", "write a mapping, see lotgate schema"}
	}
	r.Node(root.Content[0], into)
	sort.SliceStable(r.Errors, func(i, k int) bool {
		return lineOf(r.Errors[i]) < lineOf(r.Errors[k])
	})
	return errors.Join(r.Errors...)
}

func lineOf(err error) int {
	var e *Error
	if errors.As(err, &e) {
		return e.Line
	}
	return 0
}

// yamlError turns the YAML library's "yaml: line 3: …" into our form.
func yamlError(file string, err error) error {
	text := strings.TrimPrefix(err.Error(), "yaml: ")
	line := 0
	if rest, ok := strings.CutPrefix(text, "line "); ok {
		if number, message, found := strings.Cut(rest, ": "); found {
			if k, convErr := strconv.Atoi(number); convErr == nil {
				line, text = k, message
			}
		}
	}
	return &Error{file, line, "not readable as YAML: " + text, "check indentation, colons and quotes"}
}

// Node reads one node into the value that into points to.
func (r *Reader) Node(n *yaml.Node, into any) {
	r.value(n, reflect.ValueOf(into).Elem(), "", fieldRules{})
}

type fieldRules struct {
	among []string
	bound string
}

func (r *Reader) value(n *yaml.Node, v reflect.Value, name string, rules fieldRules) {
	for n.Kind == yaml.AliasNode {
		n = n.Alias
	}
	if v.Kind() == reflect.Pointer {
		if v.IsNil() {
			v.Set(reflect.New(v.Type().Elem()))
		}
		r.value(n, v.Elem(), name, rules)
		return
	}
	if v.CanAddr() {
		if custom, ok := v.Addr().Interface().(NodeReader); ok {
			custom.ReadNode(r, n)
			return
		}
	}
	if unit, ok := quantity.UnitOfType(v.Type()); ok {
		r.quantity(n, v, name, unit, rules)
		return
	}
	switch v.Kind() {
	case reflect.Struct:
		r.mapping(n, v, name)
	case reflect.Slice:
		r.list(n, v, name, rules)
	case reflect.Map:
		r.dictionary(n, v, name, rules)
	default:
		r.scalar(n, v, name, rules)
	}
}

func (r *Reader) quantity(n *yaml.Node, v reflect.Value, name string, unit quantity.Unit, rules fieldRules) {
	if n.Kind != yaml.ScalarNode {
		r.Fail(n, name+" is a "+kindName(n), "write a "+unit.Name+", such as "+unit.Example)
		return
	}
	value, err := quantity.Parse(n.Value, unit)
	if err != nil {
		var wrong *quantity.WrongUnitError
		if errors.As(err, &wrong) {
			r.Fail(n, fmt.Sprintf("%s %q %s", name, wrong.Text, wrong.What),
				"write a "+unit.Name+", such as "+unit.Example)
			return
		}
		r.Fail(n, err.Error(), "")
		return
	}
	if !inBound(value, rules.bound) {
		r.Fail(n, fmt.Sprintf("%s %q is not possible", name, n.Value), boundText(rules.bound)+", such as "+unit.Example)
		return
	}
	v.SetFloat(value)
}

func inBound(v float64, bound string) bool {
	switch bound {
	case ">0":
		return v > 0
	case ">=0":
		return v >= 0
	}
	return true
}

func boundText(bound string) string {
	if bound == ">0" {
		return "write a value above zero"
	}
	return "write zero or more"
}

func (r *Reader) mapping(n *yaml.Node, v reflect.Value, name string) {
	if n.Kind != yaml.MappingNode {
		r.Fail(n, orDocument(name)+" is a "+kindName(n), "write a mapping with the keys "+strings.Join(Keys(v.Type()), ", "))
		return
	}
	before := len(r.Errors)
	fields := fieldsOf(v.Type())
	seen := map[string]bool{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, item := n.Content[i], n.Content[i+1]
		if seen[key.Value] {
			r.Fail(key, fmt.Sprintf("the key %q stands here twice", key.Value), "keep one of them")
			continue
		}
		seen[key.Value] = true
		f, ok := fields[key.Value]
		if !ok {
			r.Fail(key, fmt.Sprintf("unknown key %q in %s", key.Value, orDocument(name)), "one of "+strings.Join(Keys(v.Type()), ", "))
			continue
		}
		r.value(item, v.FieldByIndex(f.index), key.Value, f.rules)
	}
	for _, k := range Keys(v.Type()) {
		if fields[k].need && !seen[k] {
			r.Fail(n, fmt.Sprintf("%s has no key %q", orDocument(name), k), fields[k].doc)
		}
	}
	if len(r.Errors) > before || !v.CanAddr() {
		return
	}
	if checker, ok := v.Addr().Interface().(Checker); ok {
		for _, p := range checker.Check() {
			r.Fail(keyNode(n, p.Key), p.What, p.Expected)
		}
	}
}

func keyNode(n *yaml.Node, key string) *yaml.Node {
	for i := 0; i+1 < len(n.Content); i += 2 {
		if n.Content[i].Value == key {
			return n.Content[i]
		}
	}
	return n
}

func (r *Reader) list(n *yaml.Node, v reflect.Value, name string, rules fieldRules) {
	if n.Kind != yaml.SequenceNode {
		r.Fail(n, name+" is a "+kindName(n), "write a list")
		return
	}
	out := reflect.MakeSlice(v.Type(), len(n.Content), len(n.Content))
	for i, item := range n.Content {
		r.value(item, out.Index(i), name, rules)
	}
	v.Set(out)
}

func (r *Reader) dictionary(n *yaml.Node, v reflect.Value, name string, rules fieldRules) {
	if n.Kind != yaml.MappingNode {
		r.Fail(n, name+" is a "+kindName(n), "write a mapping")
		return
	}
	out := reflect.MakeMap(v.Type())
	for i := 0; i+1 < len(n.Content); i += 2 {
		key := n.Content[i]
		if out.MapIndex(reflect.ValueOf(key.Value)).IsValid() {
			r.Fail(key, fmt.Sprintf("the key %q stands here twice", key.Value), "keep one of them")
			continue
		}
		item := reflect.New(v.Type().Elem()).Elem()
		r.value(n.Content[i+1], item, key.Value, rules)
		out.SetMapIndex(reflect.ValueOf(key.Value), item)
	}
	v.Set(out)
}

func (r *Reader) scalar(n *yaml.Node, v reflect.Value, name string, rules fieldRules) {
	if n.Kind != yaml.ScalarNode {
		r.Fail(n, name+" is a "+kindName(n), "write a single value")
		return
	}
	switch v.Kind() {
	case reflect.String:
		if len(rules.among) > 0 && !contains(rules.among, n.Value) {
			r.Fail(n, fmt.Sprintf("%s %q is not known", name, n.Value), "one of "+strings.Join(rules.among, ", "))
			return
		}
		v.SetString(n.Value)
	case reflect.Bool:
		switch n.Value {
		case "true", "yes", "on":
			v.SetBool(true)
		case "false", "no", "off":
			v.SetBool(false)
		default:
			r.Fail(n, fmt.Sprintf("%s %q is neither yes nor no", name, n.Value), "write yes or no")
		}
	case reflect.Int, reflect.Int64:
		k, err := strconv.ParseInt(n.Value, 10, 64)
		if err != nil || !inBound(float64(k), rules.bound) {
			r.Fail(n, fmt.Sprintf("%s %q is not possible", name, n.Value), "write a whole number"+wholeBound(rules.bound))
			return
		}
		v.SetInt(k)
	default:
		r.Fail(n, name+" cannot be read", "this is a fault of the program: a field of kind "+v.Kind().String())
	}
}

func wholeBound(bound string) string {
	switch bound {
	case ">0":
		return " of 1 or more"
	case ">=0":
		return " of 0 or more"
	}
	return ""
}

func contains(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
}

func orDocument(name string) string {
	if name == "" {
		return "this mapping"
	}
	return name
}

func kindName(n *yaml.Node) string {
	switch n.Kind {
	case yaml.MappingNode:
		return "mapping"
	case yaml.SequenceNode:
		return "list"
	}
	return "single value"
}

// Struct reads a mapping into the struct that into points to, even where that type
// would read itself.
func (r *Reader) Struct(n *yaml.Node, into any) {
	r.mapping(n, reflect.ValueOf(into).Elem(), "")
}
