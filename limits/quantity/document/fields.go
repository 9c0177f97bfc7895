package document

import (
	"reflect"
	"strings"
	"sync"
)

type field struct {
	key   string
	doc   string
	need  bool
	rules fieldRules
	index []int
	typ   reflect.Type
}

// Keys lists the YAML keys of a struct type in the order of its fields.
func Keys(t reflect.Type) []string {
	var keys []string
	for _, f := range orderedFields(t) {
		keys = append(keys, f.key)
	}
	return keys
}

func fieldsOf(t reflect.Type) map[string]field {
	out := map[string]field{}
	for _, f := range orderedFields(t) {
		out[f.key] = f
	}
	return out
}

// known keeps the fields of types seen before: reading them is not free.
var known sync.Map // reflect.Type → []field

// orderedFields lists the tagged fields; an embedded struct's fields stand where
// it is embedded. The list must not be changed.
func orderedFields(t reflect.Type) []field {
	if list, ok := known.Load(t); ok {
		return list.([]field)
	}
	list := readFields(t)
	known.Store(t, list)
	return list
}

func readFields(t reflect.Type) []field {
	var out []field
	for i := range t.NumField() {
		sf := t.Field(i)
		if sf.Anonymous && sf.Type.Kind() == reflect.Struct {
			for _, f := range orderedFields(sf.Type) {
				f.index = append([]int{i}, f.index...) // a copy: the list itself stays
				out = append(out, f)
			}
			continue
		}
		key := sf.Tag.Get("key")
		if key == "" {
			continue
		}
		f := field{key: key, doc: sf.Tag.Get("doc"), need: sf.Tag.Get("need") == "yes", index: []int{i}, typ: sf.Type}
		f.rules.bound = sf.Tag.Get("range")
		if a := sf.Tag.Get("among"); a != "" {
			f.rules.among = strings.Split(a, "|")
		}
		out = append(out, f)
	}
	return out
}

// KeysOf lists the YAML keys of the struct type T.
func KeysOf[T any]() []string { return Keys(reflect.TypeFor[T]()) }
