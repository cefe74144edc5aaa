package report

import (
	"embed"
	"fmt"
	"strings"
)

//go:embed schema/*.json
var schemaFiles embed.FS

// SchemaNames lists the documents that have a JSON Schema, such as "assessment".
func SchemaNames() []string {
	entries, err := schemaFiles.ReadDir("schema")
	if err != nil {
		panic(err) // the files are part of the program
	}
	names := make([]string, len(entries))
	for i, e := range entries {
		names[i] = strings.TrimSuffix(e.Name(), ".json")
	}
	return names
}

// Schema returns the JSON Schema (draft 2020-12) of one kind of document.
func Schema(name string) ([]byte, error) {
	b, err := schemaFiles.ReadFile("schema/" + name + ".json")
	if err != nil {
		return nil, fmt.Errorf("no document is named %q; known are %s", name, strings.Join(SchemaNames(), ", "))
	}
	return b, nil
}
