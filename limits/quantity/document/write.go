package document

import (
	"bytes"
	"fmt"
	"reflect"
	"sort"
	"strconv"

	"gopkg.in/yaml.v3"

	"lotgate/limits/quantity"
)

// A NodeWriter writes itself as a YAML node; nil leaves it out.
type NodeWriter interface {
	WriteNode() (*yaml.Node, error)
}

// Write writes a struct as YAML, the inverse of Read: quantities with their unit and all
// their digits, fields that hold nothing left out.
func Write(v any) ([]byte, error) {
	n, err := NodeOf(v)
	if err != nil {
		return nil, err
	}
	var out bytes.Buffer
	e := yaml.NewEncoder(&out)
	e.SetIndent(2)
	if err := e.Encode(n); err != nil {
		return nil, err
	}
	return out.Bytes(), e.Close()
}

// NodeOf gives the YAML node of a value.
func NodeOf(v any) (*yaml.Node, error) { return nodeOf(reflect.ValueOf(v)) }

// StructNode gives the node of a struct's tagged fields, even where its type would
// write itself.
func StructNode(v any) (*yaml.Node, error) {
	r := reflect.ValueOf(v)
	for r.Kind() == reflect.Pointer {
		r = r.Elem()
	}
	return structNode(r)
}

func nodeOf(v reflect.Value) (*yaml.Node, error) {
	for v.Kind() == reflect.Pointer || v.Kind() == reflect.Interface {
		if v.IsNil() {
			return nil, nil
		}
		if w, ok := v.Interface().(NodeWriter); ok {
			return w.WriteNode()
		}
		v = v.Elem()
	}
	if w, ok := v.Interface().(NodeWriter); ok {
		return w.WriteNode()
	}
	if unit, ok := quantity.UnitOfType(v.Type()); ok {
		return Text(quantity.PrintExact(v.Float(), unit)), nil
	}
	switch v.Kind() {
	case reflect.Struct:
		return structNode(v)
	case reflect.Slice:
		n := &yaml.Node{Kind: yaml.SequenceNode}
		flow := true
		for i := range v.Len() {
			item, err := nodeOf(v.Index(i))
			if err != nil {
				return nil, err
			}
			flow = flow && item.Kind == yaml.ScalarNode
			n.Content = append(n.Content, item)
		}
		if flow {
			n.Style = yaml.FlowStyle
		}
		return n, nil
	case reflect.Map:
		return mapNode(v)
	case reflect.String:
		return Text(v.String()), nil
	case reflect.Bool:
		if v.Bool() {
			return Text("yes"), nil
		}
		return Text("no"), nil
	case reflect.Int, reflect.Int64:
		return Text(strconv.FormatInt(v.Int(), 10)), nil
	}
	return nil, fmt.Errorf("document: a value of type %s cannot be written", v.Type())
}

// Text is a scalar node.
func Text(s string) *yaml.Node {
	n := &yaml.Node{Kind: yaml.ScalarNode, Value: s}
	if s == "" {
		n.Style = yaml.DoubleQuotedStyle
	}
	return n
}

func structNode(v reflect.Value) (*yaml.Node, error) {
	n := &yaml.Node{Kind: yaml.MappingNode}
	for _, f := range orderedFields(v.Type()) {
		item := v.FieldByIndex(f.index)
		if item.IsZero() && !f.need {
			continue
		}
		value, err := nodeOf(item)
		if err != nil {
			return nil, err
		}
		if value != nil {
			n.Content = append(n.Content, Text(f.key), value)
		}
	}
	if short(n) {
		n.Style = yaml.FlowStyle
	}
	return n, nil
}

// short tells whether a mapping of single values fits a line.
func short(n *yaml.Node) bool {
	for _, c := range n.Content {
		if c.Kind != yaml.ScalarNode {
			return false
		}
	}
	return len(n.Content) <= 8
}

func mapNode(v reflect.Value) (*yaml.Node, error) {
	n := &yaml.Node{Kind: yaml.MappingNode}
	keys := v.MapKeys()
	sort.Slice(keys, func(i, k int) bool { return keys[i].String() < keys[k].String() })
	for _, k := range keys {
		item, err := nodeOf(v.MapIndex(k))
		if err != nil {
			return nil, err
		}
		n.Content = append(n.Content, Text(k.String()), item)
	}
	if short(n) {
		n.Style = yaml.FlowStyle
	}
	return n, nil
}
