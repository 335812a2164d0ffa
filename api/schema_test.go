package api

import (
	"encoding/json"
	"fmt"
	"math"
	"reflect"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"
)

// schemas checks values against the JSON Schema keywords that openapi.yaml uses (JSON Schema 2020-12, which
// OpenAPI 3.1 builds on). A keyword it does not know is a complaint, so that none is ignored in silence.
type schemas struct{ document map[string]any }

// ref follows "#/a/b".
func (s schemas) ref(pointer string) (map[string]any, error) {
	var at any = s.document
	for step := range strings.SplitSeq(strings.TrimPrefix(pointer, "#/"), "/") {
		m, ok := at.(map[string]any)
		if !ok || m[step] == nil {
			return nil, fmt.Errorf("%s leads nowhere", pointer)
		}
		at = m[step]
	}
	m, ok := at.(map[string]any)
	if !ok {
		return nil, fmt.Errorf("%s is not an object", pointer)
	}
	return m, nil
}

// deref returns the object itself or what its $ref leads to.
func (s schemas) deref(m map[string]any) (map[string]any, error) {
	if pointer, ok := m["$ref"].(string); ok {
		return s.ref(pointer)
	}
	return m, nil
}

// check returns every way in which v, decoded by encoding/json, differs from the schema.
func (s schemas) check(schema map[string]any, v any, place string) (errs []string) {
	bad := func(format string, args ...any) { errs = append(errs, place+": "+fmt.Sprintf(format, args...)) }
	object, _ := v.(map[string]any)
	array, _ := v.([]any)
	number, isNumber := v.(float64)
	text, isText := v.(string)
	for keyword, arg := range schema {
		switch keyword {
		case "description", "default", "contentMediaType":
		case "$ref":
			target, err := s.ref(arg.(string))
			if err != nil {
				bad("%v", err)
				continue
			}
			errs = append(errs, s.check(target, v, place)...)
		case "type":
			types, ok := arg.([]any)
			if !ok {
				types = []any{arg}
			}
			if !slices.ContainsFunc(types, func(t any) bool { return isType(v, t.(string)) }) {
				bad("%T is not of type %v", v, arg)
			}
		case "enum":
			if !slices.Contains(arg.([]any), v) {
				bad("%v is not one of %v", v, arg)
			}
		case "const":
			if !reflect.DeepEqual(v, arg) {
				bad("%v is not %v", v, arg)
			}
		case "anyOf":
			if !slices.ContainsFunc(arg.([]any), func(one any) bool { return s.check(one.(map[string]any), v, place) == nil }) {
				bad("matches none of %v", arg)
			}
		case "required":
			for _, name := range arg.([]any) {
				if _, ok := object[name.(string)]; object != nil && !ok {
					bad("%s is missing", name)
				}
			}
		case "properties":
			for name, sub := range arg.(map[string]any) {
				if value, ok := object[name]; ok {
					errs = append(errs, s.check(sub.(map[string]any), value, place+"."+name)...)
				}
			}
		case "additionalProperties":
			known, _ := schema["properties"].(map[string]any)
			for name := range object {
				if _, ok := known[name]; !ok && arg == false {
					bad("%s is not in the document", name)
				}
			}
		case "prefixItems":
			for i, sub := range arg.([]any) {
				if i < len(array) {
					errs = append(errs, s.check(sub.(map[string]any), array[i], fmt.Sprintf("%s[%d]", place, i))...)
				}
			}
		case "items":
			prefix, _ := schema["prefixItems"].([]any)
			for i := len(prefix); i < len(array); i++ {
				errs = append(errs, s.check(arg.(map[string]any), array[i], fmt.Sprintf("%s[%d]", place, i))...)
			}
		case "minItems", "maxItems":
			if n := float64(len(array)); array != nil && (keyword == "minItems" && n < arg.(float64) || keyword == "maxItems" && n > arg.(float64)) {
				bad("%d items against %s %v", len(array), keyword, arg)
			}
		case "minimum", "maximum":
			if isNumber && (keyword == "minimum" && number < arg.(float64) || keyword == "maximum" && number > arg.(float64)) {
				bad("%v against %s %v", number, keyword, arg)
			}
		case "pattern":
			if isText && !regexp.MustCompile(arg.(string)).MatchString(text) {
				bad("%q does not match %v", text, arg)
			}
		case "format":
			if _, err := time.Parse(time.RFC3339Nano, text); isText && (arg != "date-time" || err != nil) {
				bad("%q is not a %v", text, arg)
			}
		default:
			bad("the checker does not know the keyword %q", keyword)
		}
	}
	return errs
}

func isType(v any, name string) bool {
	switch v := v.(type) {
	case nil:
		return name == "null"
	case bool:
		return name == "boolean"
	case string:
		return name == "string"
	case float64:
		return name == "number" || name == "integer" && v == math.Trunc(v)
	case []any:
		return name == "array"
	case map[string]any:
		return name == "object"
	}
	return false
}

// The checker is only worth something if it finds what is wrong.
func TestSchemaCheckerComplains(t *testing.T) {
	s := schemas{map[string]any{"components": map[string]any{"small": map[string]any{"type": "integer", "maximum": 3.0}}}}
	for _, c := range []struct{ schema, good, bad string }{
		{`{"type":"integer"}`, `1`, `1.5`},
		{`{"type":["number","null"]}`, `null`, `"1"`},
		{`{"type":"boolean"}`, `true`, `null`},
		{`{"enum":["a","b"]}`, `"a"`, `"c"`},
		{`{"const":["a"]}`, `["a"]`, `["b"]`},
		{`{"$ref":"#/components/small"}`, `3`, `4`},
		{`{"anyOf":[{"type":"null"},{"$ref":"#/components/small"}]}`, `null`, `9`},
		{`{"type":"object","required":["a"],"properties":{"a":{"type":"string"}}}`, `{"a":""}`, `{}`},
		{`{"type":"object","properties":{"a":{"type":"string"}}}`, `{"a":""}`, `{"a":1}`},
		{`{"type":"object","additionalProperties":false,"properties":{"a":{}}}`, `{"a":1}`, `{"b":1}`},
		{`{"type":"array","items":{"type":"string"}}`, `["a"]`, `["a",1]`},
		{`{"type":"array","prefixItems":[{"type":"string"}],"items":{"type":"number"}}`, `["a",1]`, `["a","b"]`},
		{`{"type":"array","minItems":1}`, `[1]`, `[]`},
		{`{"type":"array","maxItems":1}`, `[1]`, `[1,2]`},
		{`{"type":"number","minimum":0}`, `0`, `-1`},
		{`{"type":"string","pattern":"^a$"}`, `"a"`, `"b"`},
		{`{"type":"string","format":"date-time"}`, `"2024-05-06T07:08:09Z"`, `"yesterday"`},
	} {
		var schema map[string]any
		var good, bad any
		for text, v := range map[string]any{c.schema: &schema, c.good: &good, c.bad: &bad} {
			if err := json.Unmarshal([]byte(text), v); err != nil {
				t.Fatal(err)
			}
		}
		if errs := s.check(schema, good, "good"); errs != nil {
			t.Errorf("%s: %v", c.schema, errs)
		}
		if errs := s.check(schema, bad, "bad"); errs == nil {
			t.Errorf("%s accepts %s", c.schema, c.bad)
		}
	}
	if errs := s.check(map[string]any{"multipleOf": 2.0}, 1.0, "unknown"); errs == nil {
		t.Error("an unknown keyword passes")
	}
}
