package rules

import (
	_ "embed"
	"encoding/json"
	"strconv"
	"strings"
)

//go:embed site.schema.json
var siteSchema []byte

// Schema is the JSON Schema (draft 2020-12) of a site file, for editors that check while one types. It holds what a
// schema can say: keys, types, ranges and words. Parse holds the rest, such as calibrations that overlap.
func Schema() []byte { return append([]byte(nil), siteSchema...) }

// A schema is one JSON Schema object. Only what is used here.
type schema struct {
	Dialect              string             `json:"$schema,omitempty"`
	Title                string             `json:"title,omitempty"`
	Description          string             `json:"description,omitempty"`
	Type                 any                `json:"type,omitempty"` // a word or a list of words
	Pattern              string             `json:"pattern,omitempty"`
	Enum                 []string           `json:"enum,omitempty"`
	Default              any                `json:"default,omitempty"`
	Minimum              *float64           `json:"minimum,omitempty"`
	Maximum              *float64           `json:"maximum,omitempty"`
	MinLength            int                `json:"minLength,omitempty"`
	MaxLength            int                `json:"maxLength,omitempty"`
	Items                *schema            `json:"items,omitempty"`
	MinItems             int                `json:"minItems,omitempty"`
	MaxItems             int                `json:"maxItems,omitempty"`
	Properties           map[string]*schema `json:"properties,omitempty"`
	Required             []string           `json:"required,omitempty"`
	PropertyNames        *schema            `json:"propertyNames,omitempty"`
	AdditionalProperties any                `json:"additionalProperties,omitempty"` // false or a schema
	MaxProperties        int                `json:"maxProperties,omitempty"`
	OneOf                []*schema          `json:"oneOf,omitempty"`
}

// writeSchema makes the schema from the fields that the reader uses.
func writeSchema() ([]byte, error) {
	s := siteField.schema()
	s.Dialect = "https://json-schema.org/draft/2020-12/schema"
	s.Title = "Site file"
	text, err := json.MarshalIndent(s, "", "  ")
	return append(text, '\n'), err
}

func (f *field) schema() *schema {
	s := &schema{Description: f.doc}
	if f.unit != "" && f.unit != "1" {
		s.Description = strings.TrimSpace(s.Description + " Unit: " + f.unit + ".")
	}
	switch f.kind {
	case textKind:
		s.Type, s.MinLength, s.MaxLength = []string{"string", "number"}, 1, 2000
	case nameKind:
		s.Type, s.Pattern = []string{"string", "number"}, f.form.pattern
	case choiceKind:
		s.Type, s.Enum = "string", f.choices
	case numberKind:
		s.Type, s.Minimum, s.Maximum = "number", &f.low, &f.high
	case percentKind:
		s.Type, s.Pattern = "string", `^[0-9]+(\.[0-9]+)? *%$`
	case boolKind:
		s.Type = "boolean"
	case timeKind:
		s.Type, s.Pattern = "string", `^[0-9]{4}-[0-9]{2}-[0-9]{2}(T[0-9]{2}:[0-9]{2}:[0-9]{2}(\.[0-9]+)?(Z|[+-][0-9]{2}:[0-9]{2}))?$`
	case spanKind:
		s.Type, s.Pattern = "string", `^([0-9]+(\.[0-9]+)?(ms|s|m))+$`
	case numbersKind:
		s.Type, s.MinItems, s.MaxItems = "array", f.least, f.most
		s.Items = &schema{Type: "number", Minimum: &f.low, Maximum: &f.high}
	case objectKind:
		f.objectSchema(s)
	case listKind:
		s.Type, s.MinItems, s.MaxItems, s.Items = "array", f.least, f.most, f.item.schema()
	case mapKind:
		s.Type, s.MaxProperties = "object", f.most
		s.PropertyNames, s.AdditionalProperties = &schema{Pattern: f.form.pattern}, f.item.schema()
	case shortKind:
		long := &schema{}
		f.objectSchema(long)
		s.OneOf = []*schema{{Type: []string{"string", "number"}, Pattern: f.form.pattern}, long}
	}
	s.Default = f.defaultValue()
	return s
}

func (f *field) objectSchema(s *schema) {
	s.Type, s.AdditionalProperties, s.Properties = "object", false, map[string]*schema{}
	for i := range f.fields {
		c := &f.fields[i]
		s.Properties[c.key] = c.schema()
		if c.required {
			s.Required = append(s.Required, c.key)
		}
	}
}

func (f *field) defaultValue() any {
	switch {
	case f.fallback == "":
		return nil
	case f.kind == numberKind:
		x, err := strconv.ParseFloat(f.fallback, 64)
		if err != nil {
			panic("rules: " + f.key + ": default is not a number")
		}
		return x
	case f.kind == boolKind:
		return f.fallback == "true"
	}
	return f.fallback
}
