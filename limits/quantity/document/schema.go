package document

import (
	"encoding/json"
	"reflect"

	"lotgate/limits/quantity"
)

// A Schemer describes itself as JSON Schema, for parts that read themselves.
type Schemer interface {
	Schema() map[string]any
}

// Schema writes the JSON Schema (draft 2020-12) of a file that is read into the
// struct type of v.
func Schema(title string, v any) ([]byte, error) {
	s := TypeSchema(reflect.TypeOf(v))
	s["$schema"] = "https://json-schema.org/draft/2020-12/schema"
	s["title"] = title
	out, err := json.MarshalIndent(s, "", "  ")
	return append(out, '\n'), err
}

// TypeSchema describes one Go type.
func TypeSchema(t reflect.Type) map[string]any {
	for t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	if s, ok := reflect.New(t).Interface().(Schemer); ok {
		return s.Schema()
	}
	if u, ok := quantity.UnitOfType(t); ok {
		return quantitySchema(u)
	}
	switch t.Kind() {
	case reflect.Struct:
		return structSchema(t)
	case reflect.Slice:
		return map[string]any{"type": "array", "items": TypeSchema(t.Elem())}
	case reflect.Map:
		return map[string]any{"type": "object", "additionalProperties": TypeSchema(t.Elem())}
	case reflect.Bool:
		return map[string]any{"type": []string{"boolean", "string"}}
	case reflect.Int, reflect.Int64:
		return map[string]any{"type": "integer"}
	}
	return map[string]any{"type": []string{"string", "number", "boolean"}}
}

func quantitySchema(u quantity.Unit) map[string]any {
	s := map[string]any{"type": "string", "description": u.Name + ", such as " + u.Example, "examples": []string{u.Example}}
	if u.Symbol == quantity.One.Symbol {
		s["type"] = []string{"number", "string"}
	}
	return s
}

func structSchema(t reflect.Type) map[string]any {
	properties := map[string]any{}
	var need []string
	for _, f := range orderedFields(t) {
		p := TypeSchema(f.typ)
		if f.doc != "" {
			if d, ok := p["description"].(string); ok {
				p["description"] = f.doc + " (" + d + ")"
			} else {
				p["description"] = f.doc
			}
		}
		if len(f.rules.among) > 0 {
			list := f.rules.among
			if f.typ.Kind() == reflect.Slice {
				p["items"] = map[string]any{"enum": list}
			} else {
				p = map[string]any{"enum": list, "description": p["description"]}
			}
		}
		if f.need {
			need = append(need, f.key)
		}
		properties[f.key] = p
	}
	s := map[string]any{"type": "object", "properties": properties, "additionalProperties": false}
	if len(need) > 0 {
		s["required"] = need
	}
	return s
}

// TypeOf describes the type T.
func TypeOf[T any]() map[string]any { return TypeSchema(reflect.TypeFor[T]()) }

// SchemaOf describes the type of v, even where that type would describe itself.
func SchemaOf(v any) map[string]any {
	t := reflect.TypeOf(v)
	for t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	return structSchema(t)
}
