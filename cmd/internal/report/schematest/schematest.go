// Package schematest checks documents against the JSON Schemas of package report,
// for tests.
package schematest

import (
	"bytes"
	"fmt"

	"github.com/santhosh-tekuri/jsonschema/v6"

	"onebarrier/cmd/internal/report"
)

// Validate checks one document. It is stricter than the published schema, which
// lets later versions add fields: a name that the schema does not know is an
// error, so that program and schema cannot drift apart.
func Validate(name string, document []byte) error {
	source, err := report.Schema(name)
	if err != nil {
		return err
	}
	schema, err := jsonschema.UnmarshalJSON(bytes.NewReader(source))
	if err != nil {
		return fmt.Errorf("schema %s: %w", name, err)
	}
	if err := close(schema); err != nil {
		return fmt.Errorf("schema %s: %w", name, err)
	}
	c := jsonschema.NewCompiler()
	const url = "onebarrier:strict"
	if err := c.AddResource(url, schema); err != nil {
		return err
	}
	compiled, err := c.Compile(url)
	if err != nil {
		return fmt.Errorf("schema %s: %w", name, err)
	}
	d, err := jsonschema.UnmarshalJSON(bytes.NewReader(document))
	if err != nil {
		return fmt.Errorf("not one JSON document: %w", err)
	}
	return compiled.Validate(d)
}

// close forbids unknown names in every object of a schema, and wants every
// property to be required: this project leaves no field out.
func close(schema any) error {
	switch s := schema.(type) {
	case []any:
		for _, e := range s {
			if err := close(e); err != nil {
				return err
			}
		}
	case map[string]any:
		if props, ok := s["properties"].(map[string]any); ok {
			if s["additionalProperties"] == nil {
				s["additionalProperties"] = false
			}
			if required, _ := s["required"].([]any); len(required) != len(props) {
				return fmt.Errorf("%d properties, of which %d are required: %v", len(props), len(required), required)
			}
			for _, e := range props {
				if err := close(e); err != nil {
					return err
				}
			}
		}
		delete(s, "$id") // the strict schema has an address of its own
		for key, e := range s {
			if key != "properties" {
				if err := close(e); err != nil {
					return err
				}
			}
		}
	}
	return nil
}
