package wire_test

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"lapwing/internal/wire"
)

// schema is a strict reader of the part of JSON Schema (draft 2020-12) that our schemas use. A keyword that it does
// not know is an error: nothing in a schema may go unchecked.
type schema struct {
	root map[string]any
}

func loadSchema(t testing.TB, name string) schema {
	t.Helper()
	raw, err := wire.Schema(name)
	if err != nil {
		t.Fatal(err)
	}
	var root map[string]any
	if err := json.Unmarshal(raw, &root); err != nil {
		t.Fatalf("schema %s: %v", name, err)
	}
	return schema{root}
}

// check says where a document breaks the schema; nil when it does not.
func (s schema) check(doc []byte) error {
	dec := json.NewDecoder(bytes.NewReader(doc))
	dec.UseNumber()
	var v any
	if err := dec.Decode(&v); err != nil {
		return fmt.Errorf("not JSON: %w", err)
	}
	return s.walk(s.root, v, "$")
}

func (s schema) walk(sc map[string]any, v any, at string) error {
	for key := range sc {
		switch key {
		case "$schema", "$id", "$defs", "title", "description", "type", "const", "enum", "properties", "required",
			"additionalProperties", "items", "minItems", "maxItems", "minimum", "maximum", "minLength", "format", "anyOf", "$ref":
		default:
			return fmt.Errorf("%s: schema keyword %q is not checked", at, key)
		}
	}
	if ref, ok := sc["$ref"].(string); ok {
		name, _ := strings.CutPrefix(ref, "#/$defs/")
		to, ok := s.root["$defs"].(map[string]any)[name].(map[string]any)
		if !ok {
			return fmt.Errorf("%s: %s leads nowhere", at, ref)
		}
		return s.walk(to, v, at)
	}
	if some, ok := sc["anyOf"].([]any); ok {
		var why []string
		for _, one := range some {
			err := s.walk(one.(map[string]any), v, at)
			if err == nil {
				return nil
			}
			why = append(why, err.Error())
		}
		return fmt.Errorf("%s: fits none of anyOf: %s", at, strings.Join(why, "; "))
	}
	if want, ok := sc["const"]; ok && !same(want, v) {
		return fmt.Errorf("%s: %v is not %v", at, v, want)
	}
	if list, ok := sc["enum"].([]any); ok && !slices.ContainsFunc(list, func(x any) bool { return same(x, v) }) {
		return fmt.Errorf("%s: %v is none of %v", at, v, list)
	}
	if sc["type"] == nil && (sc["const"] != nil || sc["enum"] != nil) {
		return nil
	}
	typ, _ := sc["type"].(string)
	switch x := v.(type) {
	case map[string]any:
		if typ != "object" {
			return fmt.Errorf("%s: an object, not a %s", at, typ)
		}
		return s.object(sc, x, at)
	case []any:
		if typ != "array" {
			return fmt.Errorf("%s: an array, not a %s", at, typ)
		}
		if n, ok := sc["minItems"].(float64); ok && len(x) < int(n) {
			return fmt.Errorf("%s: %d items, at least %v", at, len(x), n)
		}
		if n, ok := sc["maxItems"].(float64); ok && len(x) > int(n) {
			return fmt.Errorf("%s: %d items, at most %v", at, len(x), n)
		}
		for i := range x {
			if err := s.walk(sc["items"].(map[string]any), x[i], fmt.Sprintf("%s[%d]", at, i)); err != nil {
				return err
			}
		}
	case json.Number:
		f, err := x.Float64()
		if err != nil || math.IsInf(f, 0) {
			return fmt.Errorf("%s: number %s: %v", at, x, err)
		}
		if typ == "integer" && strings.ContainsAny(x.String(), ".eE") || typ != "integer" && typ != "number" {
			return fmt.Errorf("%s: %s is no %s", at, x, typ)
		}
		if n, ok := sc["minimum"].(float64); ok && f < n {
			return fmt.Errorf("%s: %s is under %v", at, x, n)
		}
		if n, ok := sc["maximum"].(float64); ok && f > n {
			return fmt.Errorf("%s: %s is over %v", at, x, n)
		}
	case string:
		if typ != "string" {
			return fmt.Errorf("%s: a string, not a %s", at, typ)
		}
		if n, ok := sc["minLength"].(float64); ok && len(x) < int(n) {
			return fmt.Errorf("%s: empty", at)
		}
		if sc["format"] == "date-time" {
			when, err := time.Parse(time.RFC3339Nano, x)
			if err != nil || !strings.HasSuffix(x, "Z") || when.Year() < 1900 {
				return fmt.Errorf("%s: %q is no UTC time: %v", at, x, err)
			}
		}
	case bool:
		if typ != "boolean" {
			return fmt.Errorf("%s: true or false, not a %s", at, typ)
		}
	default:
		return fmt.Errorf("%s: %v stands on the wire", at, v) // null: what is not known is absent
	}
	return nil
}

func (s schema) object(sc, x map[string]any, at string) error {
	props, _ := sc["properties"].(map[string]any)
	if req, ok := sc["required"].([]any); ok {
		for _, r := range req {
			if _, there := x[r.(string)]; !there {
				return fmt.Errorf("%s: %s is missing", at, r)
			}
		}
	}
	for _, k := range slices.Sorted(func(yield func(string) bool) {
		for k := range x {
			if !yield(k) {
				return
			}
		}
	}) {
		sub, known := props[k].(map[string]any)
		if !known {
			switch more := sc["additionalProperties"].(type) {
			case map[string]any:
				sub = more
			case bool:
				return fmt.Errorf("%s: %s is not in the schema", at, k)
			default:
				return fmt.Errorf("%s: the schema does not say what else may stand here", at)
			}
		}
		if err := s.walk(sub, x[k], at+"."+k); err != nil {
			return err
		}
	}
	return nil
}

func same(want, got any) bool {
	if n, ok := got.(json.Number); ok {
		f, err := n.Float64()
		return err == nil && want == f
	}
	return want == got
}

// The checker must be able to say no, or every check below is worthless.
func TestCheckerRefuses(t *testing.T) {
	good := `{"v":1,"skid":"s","id":1,"at":"2026-03-01T10:00:00Z","turn":3,"key":"k","subject":"a","kind":"b","from":"normal","to":"unacknowledged","severity":"alert","was":"none","sentence":"x","caution":"c"}`
	s := loadSchema(t, "alarm")
	if err := s.check([]byte(good)); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ name, from, to, want string }{
		{"missing", `"skid":"s",`, ``, "skid is missing"},
		{"unknown key", `"v":1`, `"v":1,"extra":2`, "extra is not in the schema"},
		{"wrong version", `"v":1`, `"v":2`, "is not 1"},
		{"zero id", `"id":1`, `"id":0`, "under 1"},
		{"fraction", `"turn":3`, `"turn":3.5`, "is no integer"},
		{"word outside the list", `"alert"`, `"panic"`, "is none of"},
		{"null", `"turn":3`, `"turn":null`, "stands on the wire"},
		{"local time", `10:00:00Z`, `10:00:00+02:00`, "no UTC time"},
		{"time of nothing", `2026-03-01`, `0001-01-01`, "no UTC time"},
		{"string for number", `"turn":3`, `"turn":"3"`, "a string, not a integer"},
		{"empty name", `"skid":"s"`, `"skid":""`, "empty"},
		{"detail of no kind", `"v":1`, `"v":1,"detail":{"x":1}`, "fits none"},
	} {
		t.Run(c.name, func(t *testing.T) {
			doc := strings.Replace(good, c.from, c.to, 1)
			if doc == good {
				t.Fatal("nothing was changed")
			}
			if err := s.check([]byte(doc)); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got %v, want %q", err, c.want)
			}
		})
	}
}

func TestSchemas(t *testing.T) {
	want := []string{"act", "alarm", "alarms", "command", "entry", "features", "finding", "health", "journal", "learning", "order", "receipt", "standing", "transition", "turn", "why", "why-block", "why-turn"}
	if got := wire.SchemaNames(); !slices.Equal(got, want) {
		t.Errorf("schemas %v, want %v", got, want)
	}
	for _, name := range want {
		s := loadSchema(t, name)
		if s.root["$schema"] != "https://json-schema.org/draft/2020-12/schema" {
			t.Errorf("%s: $schema is %v", name, s.root["$schema"])
		}
		if id := "urn:lapwing:schema:" + name + ":1"; s.root["$id"] != id {
			t.Errorf("%s: $id is %v, want %s", name, s.root["$id"], id)
		}
		closed(t, name, s.root)
	}
	if _, err := wire.Schema("../doc"); err == nil {
		t.Error("a name outside the folder was read")
	}
}

// closed checks that every object of a schema says what else may stand in it, and that required keys are described.
func closed(t *testing.T, at string, v any) {
	switch x := v.(type) {
	case map[string]any:
		if x["type"] == "object" {
			if _, ok := x["additionalProperties"]; !ok {
				t.Errorf("%s: open object", at)
			}
			props, _ := x["properties"].(map[string]any)
			for _, r := range asList(x["required"]) {
				if props[r.(string)] == nil {
					t.Errorf("%s: %v is required and not described", at, r)
				}
			}
		}
		for k, sub := range x {
			closed(t, at+"."+k, sub)
		}
	case []any:
		for _, sub := range x {
			closed(t, at, sub)
		}
	}
}

func asList(v any) []any {
	l, _ := v.([]any)
	return l
}
