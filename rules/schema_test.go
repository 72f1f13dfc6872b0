package rules

import (
	"bytes"
	"encoding/json"
	"flag"
	"os"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"
	"gopkg.in/yaml.v3"
)

var update = flag.Bool("update", false, "write site.schema.json anew")

func TestSchemaIsWrittenFromTheFields(t *testing.T) {
	want, err := writeSchema()
	if err != nil {
		t.Fatal(err)
	}
	if *update {
		if err := os.WriteFile("site.schema.json", want, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	if !bytes.Equal(Schema(), want) {
		t.Error("site.schema.json is not what the fields say; run: go test ./rules -run TestSchemaIsWritten -update")
	}
}

func compiled(t *testing.T) *jsonschema.Schema {
	t.Helper()
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(Schema()))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("site.schema.json", doc); err != nil {
		t.Fatal(err)
	}
	s, err := c.Compile("site.schema.json")
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// TestSchemaAgrees holds the published schema against the reader. What only the reader can see, such as an overlap,
// is in files without the line "# schema refuses"; those the schema has to let through, or an editor would
// underline what is right.
func TestSchemaAgrees(t *testing.T) {
	s := compiled(t)
	for _, file := range append(goodFiles(t), badFiles(t)...) {
		text, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		var doc yaml.Node
		if err := yaml.Unmarshal(text, &doc); err != nil {
			continue // not YAML: no editor gets as far as the schema
		}
		err = s.Validate(jsonOf(&doc))
		switch refuses := strings.Contains(string(text), "\n# schema refuses\n"); {
		case refuses && err == nil:
			t.Errorf("%s: the schema lets it through", file)
		case !refuses && err != nil:
			t.Errorf("%s: the schema refuses it: %v", file, err)
		}
	}
}

// jsonOf is what an editor's schema check sees of a YAML node: dates stay text.
func jsonOf(n *yaml.Node) any {
	switch n.Kind {
	case yaml.DocumentNode:
		return jsonOf(n.Content[0])
	case yaml.AliasNode:
		return jsonOf(n.Alias)
	case yaml.MappingNode:
		m := map[string]any{}
		for i := 0; i+1 < len(n.Content); i += 2 {
			m[n.Content[i].Value] = jsonOf(n.Content[i+1])
		}
		return m
	case yaml.SequenceNode:
		list := []any{}
		for _, c := range n.Content {
			list = append(list, jsonOf(c))
		}
		return list
	}
	switch n.Tag {
	case "!!null":
		return nil
	case "!!bool":
		return n.Value == "true"
	case "!!int", "!!float":
		if json.Valid([]byte(n.Value)) {
			return json.Number(n.Value)
		}
	}
	return n.Value
}
