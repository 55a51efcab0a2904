package scenarios_test

import (
	"bytes"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"
	"go.yaml.in/yaml/v3"

	"ferrule/scenarios"
	"ferrule/scenarios/library"
)

// compiled is the schema as another library reads it.
func compiled(t *testing.T) *jsonschema.Schema {
	t.Helper()
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(scenarios.Schema()))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("scenario.json", doc); err != nil {
		t.Fatal(err)
	}
	s, err := c.Compile("scenario.json")
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// value is a YAML file as JSON has it.
func value(t *testing.T, data []byte) any {
	t.Helper()
	var v any
	if err := yaml.Unmarshal(data, &v); err != nil {
		t.Fatal(err)
	}
	return v
}

// Every embedded scenario and every sound one of the tests is valid.
func TestSchemaOfSoundScenarios(t *testing.T) {
	s := compiled(t)
	names := library.Names()
	if len(names) < 3 {
		t.Fatalf("%d embedded scenarios", len(names))
	}
	for _, e := range names {
		data, _, err := library.Open(e.Name)
		if err != nil {
			t.Fatal(err)
		}
		if err := s.Validate(value(t, data)); err != nil {
			t.Errorf("%s: %v", e.Name, err)
		}
	}
	for _, name := range []string{"coast.yaml", "chain.yaml"} {
		data, err := os.ReadFile(filepath.Join("testdata", name))
		if err != nil {
			t.Fatal(err)
		}
		if err := s.Validate(value(t, data)); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Faults of form are found: a key, a word, a unit, a shape.
func TestSchemaFindsFaults(t *testing.T) {
	s := compiled(t)
	const head = "scenario: s\nrun: { length: 1s }\nclasses: [ { name: g } ]\nsites: [ { name: a } ]\n"
	if err := s.Validate(value(t, []byte(head))); err != nil {
		t.Fatal(err)
	}
	for _, text := range []string{
		"scenario: s\n", head + "sight: 1\n", head + "traffic: [ { name: t, model: poison } ]\n", head + "traffic: [ { name: t, rate: 5 } ]\n",
		head + "traffic: [ { name: t, rate: 5s } ]\n", head + "traffic: { name: t }\n", head + "aggregates: [ { flows: 1.5 } ]\n",
		head + "traffic: [ { name: t, model: replay, assign: [ { dscp: 64 } ] } ]\n", head + "traffic: [ { name: t, talkspurts: 1 } ]\n",
	} {
		if err := s.Validate(value(t, []byte(text))); err == nil {
			t.Errorf("valid:\n%s", text)
		}
	}
}

// Every key that the loader knows is in the schema.
func TestSchemaHasEveryKey(t *testing.T) {
	files, err := filepath.Glob("*.go")
	if err != nil {
		t.Fatal(err)
	}
	schema, keys := string(scenarios.Schema()), 0
	tag := regexp.MustCompile("`mapstructure:\"([^\"]+)\"`")
	for _, name := range files {
		text, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		if name == "session.go" { // of another file
			continue
		}
		for _, m := range tag.FindAllStringSubmatch(string(text), -1) {
			keys++
			if !strings.Contains(schema, `"`+m[1]+`": {`) {
				t.Errorf("%s: key %s is not in the schema", name, m[1])
			}
		}
	}
	if keys < 150 {
		t.Errorf("only %d keys", keys)
	}
}
