package rules

import (
	"fmt"
	"strconv"
	"strings"

	"gopkg.in/yaml.v3"
)

// How the messages about a site file name places and values.

// describe says what a node is, for a message.
func describe(n *yaml.Node) string {
	switch n.Kind {
	case yaml.MappingNode:
		return "keys and values"
	case yaml.SequenceNode:
		return fmt.Sprintf("a list of %d", len(n.Content))
	case yaml.AliasNode:
		return "an alias"
	}
	if n.Tag == "!!null" || n.Value == "" {
		return "empty"
	}
	return short(n.Value)
}

// short quotes a word of the file so that it cannot break the message.
func short(s string) string {
	const most = 60
	if len(s) > most {
		s = s[:most] + "..."
	}
	return strconv.Quote(s)
}

// bare leaves a plain word as it is and quotes the rest.
func bare(s string) string {
	if quoted := short(s); len(quoted) != len(s)+2 || strings.ContainsAny(s, " \"") {
		return quoted
	}
	return s
}

func join(path, key string) string {
	if path == "" || path == "the file" {
		return key
	}
	return path + " " + key
}

func firstOf(keys []string) string {
	if len(keys) > 4 {
		return strings.Join(keys[:4], ", ") + ", ..."
	}
	return strings.Join(keys, ", ")
}

// unitAfter is the unit to stand after a number in a message; a pure number has none.
func (f *field) unitAfter() string {
	if f.unit == "" || f.unit == "1" {
		return ""
	}
	return " " + f.unit
}

// example shows what to write for a field.
func example(f *field) string {
	switch f.kind {
	case choiceKind:
		return "one of " + strings.Join(f.choices, ", ")
	case numberKind:
		return "a number" + f.unitAfter()
	case percentKind:
		return "a percentage such as 1.2%"
	case boolKind:
		return "true or false"
	case timeKind:
		return "a date such as 2026-01-31"
	case spanKind:
		return "a time such as 60s"
	case numbersKind:
		return "numbers in brackets"
	case listKind:
		return "a list"
	case objectKind, mapKind:
		return "keys and values"
	case nameKind:
		return "a name of " + f.form.words
	case shortKind:
		return "a channel's name"
	}
	return "text"
}

func formatNumber(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
