package scenarios

import (
	"encoding/json"
	"fmt"
	"reflect"
	"strings"
	"unicode"

	"ferrule/des"
	"ferrule/nodes"
)

// choices are the words that a key of a mapping takes, where they are few.
var choices = map[string][]string{
	"traffic.model": modelWords, "traffic.flows-arrive": arrivalWords, "traffic.format": formatWords,
	"traffic.transport": transportWords, "traffic.codec": codecs, "assign.way": wayWords,
	"circuit.carries": carriesWords, "circuit.recovery": recoveryWords, "circuit.when-down": whenDownWords, "circuit.framing": framingWords,
	"circuit-defaults.carries": carriesWords, "circuit-defaults.recovery": recoveryWords,
	"circuit-defaults.when-down": whenDownWords, "circuit-defaults.framing": framingWords,
	"act.order": orderWords, "plan.when-blocked": whenBlockedWords,
}

// Schema returns the JSON Schema (draft 2020-12) of a scenario file, for
// editors that complete and check YAML by one. It knows every key, every word
// of a short list and every unit; what depends on more than one key only Load
// finds. The bytes are the same on every call.
func Schema() []byte {
	s := schemer{defs: map[string]any{}}
	root := s.object(reflect.TypeFor[rawScenario]())
	root["$schema"] = "https://json-schema.org/draft/2020-12/schema"
	root["title"] = "Ferrule scenario"
	root["required"] = []string{"scenario", "run", "classes", "sites"}
	root["$defs"] = s.defs
	b, err := json.MarshalIndent(root, "", "  ") // in order of keys
	if err != nil {
		panic("scenarios: " + err.Error())
	}
	return append(b, '\n')
}

// schemer makes a schema of the raw types.
type schemer struct{ defs map[string]any }

// defName is how a type of a mapping is called: rawCircuitDefaults is
// circuit-defaults.
func defName(typ reflect.Type) string {
	var b strings.Builder
	for i, c := range strings.TrimPrefix(typ.Name(), "raw") {
		if unicode.IsUpper(c) && i > 0 {
			b.WriteByte('-')
		}
		b.WriteRune(unicode.ToLower(c))
	}
	return b.String()
}

// object is the schema of a mapping.
func (s *schemer) object(typ reflect.Type) map[string]any {
	keys := map[string]any{}
	for i, tag := range tagsOf(typ) {
		keys[tag] = s.of(typ.Field(i).Type)
		if words := choices[defName(typ)+"."+tag]; words != nil {
			keys[tag] = map[string]any{"enum": words}
		}
	}
	return map[string]any{"type": "object", "properties": keys, "additionalProperties": false}
}

// of is the schema of a value.
func (s *schemer) of(typ reflect.Type) any {
	for typ.Kind() == reflect.Pointer {
		typ = typ.Elem()
	}
	if leaf := leafSchema(typ); leaf != nil {
		return leaf
	}
	switch typ.Kind() {
	case reflect.Struct:
		name := defName(typ)
		if s.defs[name] == nil {
			s.defs[name] = true // against a type that holds itself
			s.defs[name] = s.object(typ)
		}
		return map[string]any{"$ref": "#/$defs/" + name}
	case reflect.Slice:
		return map[string]any{"type": "array", "items": s.of(typ.Elem())}
	case reflect.String:
		return map[string]any{"type": "string"}
	case reflect.Bool:
		return map[string]any{"type": "boolean"}
	case reflect.Int:
		return map[string]any{"type": "integer"}
	case reflect.Uint64:
		return map[string]any{"type": "integer", "minimum": 0}
	default:
		panic(fmt.Sprintf("scenarios: no schema of %v", typ))
	}
}

// decimal is the pattern of a number, as splitNumber reads it, up to its unit.
const decimal = `^[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)? ?`

// quantity is the schema of a number with one of the units.
func quantity(units string) map[string]any {
	return map[string]any{"type": "string", "pattern": decimal + "(" + strings.ReplaceAll(units, " ", "|") + ")$"}
}

// either is the schema of a value that has one of several forms.
func either(forms ...any) map[string]any { return map[string]any{"anyOf": forms} }

// leafSchema is the schema of a value with a form of its own, or nil.
func leafSchema(typ reflect.Type) any {
	number := map[string]any{"type": "number"}
	law := map[string]any{"type": "object"} // many forms, which Load tells apart
	switch typ {
	case reflect.TypeFor[des.Time]():
		return quantity(timeMeasure.names())
	case reflect.TypeFor[nodes.Rate]():
		return quantity(rateMeasure.names())
	case reflect.TypeFor[nodes.Length]():
		return quantity(lengthMeasure.names())
	case reflect.TypeFor[nodes.Bytes]():
		return quantity(bytesMeasure.names())
	case reflect.TypeFor[timeLaw]():
		return either(quantity(timeMeasure.names()), law)
	case reflect.TypeFor[byteLaw]():
		return either(quantity(bytesMeasure.names()), law)
	case reflect.TypeFor[warmUp]():
		return either(quantity(timeMeasure.names()), map[string]any{"const": "auto"})
	case reflect.TypeFor[buffer]():
		return quantity(timeMeasure.names() + " " + bytesMeasure.names() + " packets packet")
	case reflect.TypeFor[ratio]():
		return either(map[string]any{"type": "number", "minimum": 0, "maximum": 1}, quantity("%"))
	case reflect.TypeFor[percent]():
		return quantity("%")
	case reflect.TypeFor[frequency]():
		return quantity("/s")
	case reflect.TypeFor[codePoint]():
		return either(map[string]any{"type": "integer", "minimum": 0, "maximum": 63},
			map[string]any{"type": "string", "pattern": "^(BE|DF|LE|EF|VA|CS[0-7]|AF[1-4][1-3])$"})
	}
	if typ.Kind() == reflect.Float64 {
		return number
	}
	return nil
}
