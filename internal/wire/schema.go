package wire

import (
	"embed"
	"fmt"
	"slices"
	"strings"
)

//go:embed schema/*.json
var schemas embed.FS

// Schema gives the JSON Schema (draft 2020-12) of a message, an order or a record: alarm, standing, features, health;
// order, command, receipt, act; journal, entry, alarms; learning; why, why-block, why-turn; turn,
// finding, transition.
func Schema(name string) ([]byte, error) {
	b, err := schemas.ReadFile("schema/" + name + ".json")
	if err != nil {
		return nil, fmt.Errorf("wire: no schema %q; there are %s", name, strings.Join(SchemaNames(), ", "))
	}
	return b, nil
}

// SchemaNames lists what Schema knows, in alphabetical order.
func SchemaNames() []string {
	entries, err := schemas.ReadDir("schema")
	if err != nil {
		panic(err) // the folder is compiled in
	}
	var out []string
	for _, e := range entries {
		out = append(out, strings.TrimSuffix(e.Name(), ".json"))
	}
	return slices.Sorted(slices.Values(out))
}
