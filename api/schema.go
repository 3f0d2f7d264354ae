package api

import (
	"encoding/json"
	"fmt"
	"reflect"
	"strings"
	"time"
	"unicode"

	"epitally/analytics/uniformity"
)

// schemas makes JSON schemas from the Go types of the answers, by the rules of
// encoding/json, so that the document says what is really sent.
type schemas struct {
	components object
	types      map[string]reflect.Type // by name of the component
	clash      error                   // two types of one name: a fault of the program
}

func newSchemas() *schemas { return &schemas{components: object{}, types: map[string]reflect.Type{}} }

// omitted is the type of a field that hides one of an embedded struct.
type omitted struct{}

func (s *schemas) of(t reflect.Type) object {
	switch {
	case t == reflect.TypeFor[time.Time]():
		return object{"type": "string", "format": "date-time"}
	case t == reflect.TypeFor[json.RawMessage]():
		return object{} // anything
	case t == reflect.TypeFor[anything]():
		return object{"type": "object"}
	}
	switch t.Kind() {
	case reflect.Pointer:
		return orNull(s.of(t.Elem()))
	case reflect.String:
		return object{"type": "string"}
	case reflect.Bool:
		return object{"type": "boolean"}
	case reflect.Float64, reflect.Float32:
		return object{"type": "number"}
	case reflect.Slice:
		return object{"type": "array", "items": s.of(t.Elem())}
	case reflect.Map:
		return object{"type": "object", "additionalProperties": s.of(t.Elem())}
	case reflect.Struct:
		return s.reference(t)
	}
	return object{"type": "integer"}
}

func orNull(schema object) object {
	if _, ok := schema["$ref"]; ok {
		return object{"nullable": true, "allOf": []object{schema}}
	}
	schema["nullable"] = true
	return schema
}

// reference names a struct's schema among the components, made at first use.
func (s *schemas) reference(t reflect.Type) object {
	name := schemaName(t)
	switch first, ok := s.types[name]; {
	case !ok:
		s.types[name] = t // before its fields, which ends a recursion
		s.components[name] = s.structure(t)
	case first != t:
		s.clash = fmt.Errorf("schema %s is both %v and %v: rename one", name, first, t)
	}
	return object{"$ref": "#/components/schemas/" + name}
}

func schemaName(t reflect.Type) string {
	name := []rune(strings.TrimSuffix(t.Name(), "Out"))
	name[0] = unicode.ToUpper(name[0])
	return string(name)
}

func (s *schemas) structure(t reflect.Type) object {
	properties, required := object{}, []string{}
	// The shallowest field of a name is the one that is sent.
	depth := map[string]int{}
	for _, f := range reflect.VisibleFields(t) {
		name, options, _ := strings.Cut(f.Tag.Get("json"), ",")
		if f.Anonymous || name == "" || name == "-" {
			continue
		}
		if d, ok := depth[name]; ok && d <= len(f.Index) {
			continue
		}
		depth[name] = len(f.Index)
		delete(properties, name)
		required = without(required, name)
		if f.Type == reflect.TypeFor[*omitted]() {
			continue
		}
		schema := s.of(f.Type)
		if isNullable(t, f) {
			schema = orNull(schema)
		}
		if doc := f.Tag.Get("doc"); doc != "" && schema["$ref"] == nil {
			schema["description"] = doc
		}
		properties[name] = schema
		if !strings.Contains(options, "omitempty") {
			required = append(required, name)
		}
	}
	out := object{"type": "object", "properties": properties}
	if len(required) > 0 {
		out["required"] = required
	}
	return out
}

// isNullable says whether null may be sent for a field that is no pointer.
// Package uniformity sends the NaN of any of its figures as null.
func isNullable(t reflect.Type, f reflect.StructField) bool {
	return f.Type.Kind() == reflect.Float64 && t.PkgPath() == reflect.TypeFor[uniformity.Summary]().PkgPath()
}

func without(names []string, name string) []string {
	out := names[:0]
	for _, n := range names {
		if n != name {
			out = append(out, n)
		}
	}
	return out
}
