package rules

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
	"time"

	"gopkg.in/yaml.v3"
)

// A value is one node of the file after it was held against its field. ok is false where something is wrong with it;
// the problem is already written down then, and whoever builds on it leaves it alone.
type value struct {
	node    *yaml.Node
	ok      bool
	text    string
	number  float64
	yes     bool
	when    time.Time
	span    time.Duration
	numbers []float64
	items   []*value
	keys    []string // of an object or map, in the file's order
	objects map[string]*value
}

// at gives the value of a key, nil where the file has none.
func (v *value) at(key string) *value {
	if v == nil {
		return nil
	}
	return v.objects[key]
}

// given says whether the key is there and sound.
func (v *value) given(key string) bool {
	c := v.at(key)
	return c != nil && c.ok
}

func (v *value) textAt(key, fallback string) string {
	if v.given(key) {
		return v.at(key).text
	}
	return fallback
}

func (v *value) numberAt(key string, fallback float64) float64 {
	if v.given(key) {
		return v.at(key).number
	}
	return fallback
}

// numbersAt gives the numbers of a list, nil where the file has none.
func (v *value) numbersAt(key string) []float64 {
	if v.given(key) {
		return v.at(key).numbers
	}
	return nil
}

// A reader collects what is wrong while it walks a file.
type reader struct {
	file     string
	problems Problems
	warnings []Problem
	patterns map[string]*regexp.Regexp
	local    localCompiler
	refused  map[*yaml.Node]bool // expressions of the network that were found wrong already
}

func (r *reader) problem(n *yaml.Node, mend, what string, args ...any) {
	if len(r.problems) < problemsMax {
		r.problems = append(r.problems, Problem{r.file, n.Line, n.Column, fmt.Sprintf(what, args...), mend})
	}
}

func (r *reader) warn(n *yaml.Node, mend, what string, args ...any) {
	if len(r.warnings) < problemsMax {
		r.warnings = append(r.warnings, Problem{r.file, n.Line, n.Column, fmt.Sprintf(what, args...), mend})
	}
}

// plain refuses what a site file has no use for: aliases can make a small file huge, tags change the meaning of a value.
func (r *reader) plain(n *yaml.Node) bool {
	switch {
	case n.Kind == yaml.AliasNode:
		r.problem(n, "write the value out", "alias *%s: a site file has no anchors or aliases", bare(n.Value))
	case n.Anchor != "":
		r.problem(n, "leave the anchor out", "anchor &%s: a site file has no anchors or aliases", bare(n.Anchor))
	case n.Style&yaml.TaggedStyle != 0:
		r.problem(n, "leave the tag out", "tag %s: a site file has no tags", bare(n.Tag))
	default:
		return true
	}
	return false
}

// read holds a node against its field; path names it in messages.
func (r *reader) read(n *yaml.Node, f *field, path string) *value {
	v := &value{node: n}
	if !r.plain(n) {
		return v
	}
	switch f.kind {
	case objectKind:
		r.readObject(v, f, path)
	case mapKind:
		r.readMap(v, f, path)
	case listKind:
		r.readList(v, f, path)
	case numbersKind:
		r.readNumbers(v, f, path)
	case shortKind:
		if n.Kind == yaml.MappingNode {
			r.readObject(v, f, path)
			return v
		}
		v.ok = r.scalar(n, f, path, "a channel's name") && r.name(n, f.form, path)
		v.text = n.Value
	default:
		r.readScalar(v, f, path)
	}
	return v
}

func (r *reader) readObject(v *value, f *field, path string) {
	n := v.node
	if n.Kind != yaml.MappingNode {
		r.problem(n, "write keys and values: "+firstOf(f.keys()), "%s is %s, not keys and values", path, describe(n))
		return
	}
	v.ok, v.objects = true, map[string]*value{}
	seen := map[string]*yaml.Node{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, body := n.Content[i], n.Content[i+1]
		if !r.key(key, seen, path) {
			continue
		}
		child := f.find(key.Value)
		if child == nil {
			r.unknownKey(key, f, path)
			continue
		}
		v.keys = append(v.keys, key.Value)
		v.objects[key.Value] = r.read(body, child, join(path, key.Value))
	}
	for i := range f.fields {
		if c := &f.fields[i]; c.required && seen[c.key] == nil {
			r.problem(n, "add "+c.key+": "+example(c), "%s has no %s", path, c.key)
		}
	}
}

// key holds a key itself to the rules: a plain scalar, and there once.
func (r *reader) key(key *yaml.Node, seen map[string]*yaml.Node, path string) bool {
	if key.Value == "<<" {
		r.problem(key, "write the keys out", "%s has a merge key <<: a site file has no anchors or aliases", path)
		return false
	}
	if !r.plain(key) {
		return false
	}
	if key.Kind != yaml.ScalarNode {
		r.problem(key, "write a plain word before the colon", "%s has a key that is %s", path, describe(key))
		return false
	}
	if first := seen[key.Value]; first != nil {
		r.problem(key, "keep one of them", "%s has the key %s twice, first on line %d", path, short(key.Value), first.Line)
		return false
	}
	seen[key.Value] = key
	return true
}

func (r *reader) unknownKey(key *yaml.Node, f *field, path string) {
	keys := f.keys()
	mend := "known here: " + strings.Join(keys, ", ")
	if len(keys) > 20 {
		mend = "the site's schema lists them"
	}
	if word, ok := nearest(key.Value, keys); ok {
		mend = "did you mean " + word + "?"
	}
	r.problem(key, mend, "%s has an unknown key %s", path, short(key.Value))
}

func (r *reader) readMap(v *value, f *field, path string) {
	n := v.node
	if n.Kind != yaml.MappingNode {
		r.problem(n, "write name: channel", "%s is %s, not keys and values", path, describe(n))
		return
	}
	if len(n.Content)/2 > f.most {
		r.problem(n, fmt.Sprintf("keep at most %d", f.most), "%s has %d entries", path, len(n.Content)/2)
		return
	}
	v.ok, v.objects = true, map[string]*value{}
	seen := map[string]*yaml.Node{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		key := n.Content[i]
		if r.key(key, seen, path) && r.name(key, f.form, path+"'s key") {
			v.keys = append(v.keys, key.Value)
			v.objects[key.Value] = r.read(n.Content[i+1], f.item, join(path, key.Value))
		}
	}
}

func (r *reader) readList(v *value, f *field, path string) {
	n := v.node
	if n.Kind != yaml.SequenceNode {
		r.problem(n, "write a list: a line with - for each", "%s is %s, not a list", path, describe(n))
		return
	}
	if len(n.Content) < f.least || len(n.Content) > f.most {
		r.problem(n, fmt.Sprintf("write %d to %d", f.least, f.most), "%s has %d entries", path, len(n.Content))
		return
	}
	v.ok = true
	for i, c := range n.Content {
		v.items = append(v.items, r.read(c, f.item, itemPath(path, c, i)))
	}
}

// itemPath names an item by its id where it has one, so that a message says which instrument is meant.
func itemPath(path string, n *yaml.Node, i int) string {
	word := strings.TrimSuffix(path[strings.LastIndexByte(path, ' ')+1:], "s")
	head := path[:strings.LastIndexByte(path, ' ')+1]
	if n.Kind == yaml.MappingNode {
		for k := 0; k+1 < len(n.Content); k += 2 {
			if n.Content[k].Value == "id" && n.Content[k+1].Kind == yaml.ScalarNode && n.Content[k+1].Value != "" {
				return head + word + " " + bare(n.Content[k+1].Value)
			}
		}
	}
	return fmt.Sprintf("%s%s %d", head, word, i+1)
}

func (r *reader) readNumbers(v *value, f *field, path string) {
	n := v.node
	if n.Kind != yaml.SequenceNode || len(n.Content) < f.least || len(n.Content) > f.most {
		count := strconv.Itoa(f.least)
		if f.most > f.least {
			count += " to " + strconv.Itoa(f.most)
		}
		r.problem(n, "write "+count+" numbers in brackets, as in [0, 2.5]", "%s is %s", path, describe(n))
		return
	}
	v.ok = true
	for _, c := range n.Content {
		item := &value{node: c}
		if r.plain(c) {
			r.readNumber(item, f, path)
		}
		v.ok = v.ok && item.ok
		v.numbers = append(v.numbers, item.number)
	}
}

// scalar says whether the node is one plain value that is not empty.
func (r *reader) scalar(n *yaml.Node, f *field, path, want string) bool {
	if n.Kind != yaml.ScalarNode {
		r.problem(n, "write "+want, "%s is %s", path, describe(n))
		return false
	}
	if n.Tag == "!!null" || strings.TrimSpace(n.Value) == "" {
		if !f.required {
			want += ", or leave the key out"
		}
		r.problem(n, "write "+want, "%s is empty", path)
		return false
	}
	return true
}

func (r *reader) name(n *yaml.Node, f *form, path string) bool {
	re := r.patterns[f.pattern]
	if re == nil {
		re = regexp.MustCompile(f.pattern)
		r.patterns[f.pattern] = re
	}
	if !re.MatchString(n.Value) {
		r.problem(n, "use "+f.words, "%s is %s", path, short(n.Value))
		return false
	}
	return true
}

func (r *reader) readScalar(v *value, f *field, path string) {
	n := v.node
	if !r.scalar(n, f, path, example(f)) {
		return
	}
	v.text = n.Value
	switch f.kind {
	case textKind:
		v.ok = len(n.Value) <= 2000
		if !v.ok {
			r.problem(n, "keep it under 2000 bytes", "%s has %d bytes", path, len(n.Value))
		}
	case nameKind:
		v.ok = r.name(n, f.form, path)
	case choiceKind:
		r.readChoice(v, f, path)
	case numberKind:
		r.readNumber(v, f, path)
	case percentKind:
		r.readPercent(v, f, path)
	case boolKind:
		v.yes, v.ok = n.Value == "true", n.Value == "true" || n.Value == "false"
		if !v.ok {
			r.problem(n, "write true or false", "%s is %s", path, short(n.Value))
		}
	case timeKind:
		r.readTime(v, path)
	case spanKind:
		r.readSpan(v, f, path)
	}
}

func (r *reader) readChoice(v *value, f *field, path string) {
	for _, c := range f.choices {
		if c == v.node.Value {
			v.ok = true
			return
		}
	}
	mend := "write one of " + strings.Join(f.choices, ", ")
	if word, ok := nearest(v.node.Value, f.choices); ok && len(f.choices) > 2 {
		mend = "did you mean " + word + "? known: " + strings.Join(f.choices, ", ")
	}
	r.problem(v.node, mend, "%s is %s", path, short(v.node.Value))
}

func (r *reader) readNumber(v *value, f *field, path string) {
	n := v.node
	if !r.scalar(n, f, path, "a number") {
		return
	}
	x, err := strconv.ParseFloat(n.Value, 64)
	if err != nil || math.IsNaN(x) || math.IsInf(x, 0) || strings.ContainsAny(n.Value, "xXpP_") {
		mend := "write a plain number such as 57.121"
		if unit := f.unitAfter(); unit != "" {
			mend += "; the unit is" + unit + " and is not written"
		}
		r.problem(n, mend, "%s is %s, not a number", path, short(n.Value))
		return
	}
	v.number, v.ok = x, true
	r.inRange(v, x, f, path)
}

func (r *reader) inRange(v *value, x float64, f *field, path string) {
	if x < f.low || x > f.high {
		v.ok = false
		r.problem(v.node, fmt.Sprintf("it must lie between %s and %s%s", formatNumber(f.low), formatNumber(f.high), f.unitAfter()), "%s is %s", path, short(v.node.Value))
	}
}

func (r *reader) readPercent(v *value, f *field, path string) {
	digits, ok := strings.CutSuffix(v.node.Value, "%")
	x, err := strconv.ParseFloat(strings.TrimSpace(digits), 64)
	if !ok || err != nil || math.IsNaN(x) {
		r.problem(v.node, "write a percentage with its sign, such as 1.2%", "%s is %s", path, short(v.node.Value))
		return
	}
	v.number, v.ok = x, true
	r.inRange(v, x, f, path)
}

func (r *reader) readTime(v *value, path string) {
	text := v.node.Value
	when, err := time.Parse(time.DateOnly, text)
	if err != nil {
		when, err = time.Parse(time.RFC3339, text)
	}
	if err != nil {
		r.problem(v.node, "write a date such as 2026-01-31 (UTC midnight) or a time with its zone such as 2026-01-31T09:30:00Z", "%s is %s, not a time", path, short(text))
		return
	}
	v.when = when.UTC()
	if v.when.Year() < 1900 || v.when.Year() > 2200 {
		r.problem(v.node, "write a year between 1900 and 2200", "%s is %s", path, short(text))
		return
	}
	v.ok = true
}

func (r *reader) readSpan(v *value, f *field, path string) {
	span, err := time.ParseDuration(v.node.Value)
	if err != nil {
		r.problem(v.node, "write a number with its unit, such as 60s", "%s is %s", path, short(v.node.Value))
		return
	}
	v.span, v.ok = span, true
	r.inRange(v, span.Seconds(), f, path)
}
