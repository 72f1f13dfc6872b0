package rules

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"regexp"
	"sort"
	"strconv"
	"strings"
	"unicode/utf8"

	"gopkg.in/yaml.v3"
)

// siteBytesMax is the largest site file that is read: two thousand stations with long histories are about a third of it.
const siteBytesMax = 4 << 20

// Load reads a site file. The error is of type Problems where the file could be read but something in it is wrong; it
// then lists all that was found, each with file, line, column and how to mend it.
func Load(path string) (*Site, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("site file: %w", err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, siteBytesMax+1))
	if err != nil {
		return nil, fmt.Errorf("site file: %w", err)
	}
	return Parse(path, text)
}

// Parse reads the text of a site file; name stands in messages. It is strict: an unknown key, a value out of its range,
// a calibration history with a hole, and the like are refused, all of them at once.
func Parse(name string, text []byte) (*Site, error) {
	r := &reader{file: name, patterns: map[string]*regexp.Regexp{}}
	root, ok := r.document(text)
	var site *Site
	if ok {
		v := r.read(root, &siteField, "the file")
		site = r.site(v)
	}
	if len(r.problems) > 0 {
		r.problems.sort()
		return nil, r.problems
	}
	Problems(r.warnings).sort()
	site.Warnings = r.warnings
	site.digest()
	return site, nil
}

// document gives the one YAML document of a file.
func (r *reader) document(text []byte) (*yaml.Node, bool) {
	refuse := func(line, column int, mend, what string) (*yaml.Node, bool) {
		r.problems = append(r.problems, Problem{r.file, line, column, what, mend})
		return nil, false
	}
	if len(text) > siteBytesMax {
		return refuse(0, 0, "keep it under 4 MiB; split the network", "the file is too large")
	}
	text = bytes.TrimPrefix(text, []byte("\xef\xbb\xbf"))
	if !utf8.Valid(text) {
		at := validBytes(text)
		line, column := position(text, at)
		return refuse(line, column, "save the file as UTF-8", "the file is not UTF-8")
	}
	var doc, second yaml.Node
	dec := yaml.NewDecoder(bytes.NewReader(text))
	err := dec.Decode(&doc)
	switch {
	case errors.Is(err, io.EOF) || err == nil && (len(doc.Content) == 0 || doc.Content[0].Tag == "!!null"):
		return refuse(0, 0, "write network: and stations:", "the file is empty")
	case err != nil:
		line, what, mend := yamlTrouble(err, text)
		return refuse(line, 1, mend, what)
	}
	err = dec.Decode(&second)
	switch {
	case err == nil:
		return refuse(second.Line, 1, "keep one document, without ---", "the file has a second YAML document")
	case !errors.Is(err, io.EOF):
		line, what, mend := yamlTrouble(err, text)
		return refuse(line, 1, mend, what)
	}
	return doc.Content[0], true
}

// validBytes is how many bytes at the start are UTF-8.
func validBytes(text []byte) int {
	at := 0
	for at < len(text) {
		c, n := utf8.DecodeRune(text[at:])
		if c == utf8.RuneError && n == 1 {
			break
		}
		at += n
	}
	return at
}

func position(text []byte, at int) (line, column int) {
	before := text[:at]
	return 1 + bytes.Count(before, []byte("\n")), at - bytes.LastIndexByte(before, '\n')
}

// The library counts lines from nothing in what its parser says, from one in what its scanner says.
var yamlCountsFromZero = regexp.MustCompile("did not find expected (<|'-'|key|node content|',')")

var yamlMessage = regexp.MustCompile(`^yaml: (?:line (\d+): )?(.*)`)

// yamlTrouble takes the line out of the YAML library's message and adds how to mend the usual causes.
func yamlTrouble(err error, text []byte) (line int, what, mend string) {
	m := yamlMessage.FindStringSubmatch(err.Error())
	if m == nil {
		return 1, "not YAML", "check quotes, brackets and indentation"
	}
	line, _ = strconv.Atoi(m[1])
	if line == 0 || yamlCountsFromZero.MatchString(m[2]) {
		line++
	}
	what = "not YAML: " + m[2]
	anchor, isAnchor := strings.CutPrefix(m[2], "unknown anchor '")
	tab := firstTab(text)
	switch {
	case isAnchor:
		name, _, _ := strings.Cut(anchor, "'")
		if at := bytes.Index(text, []byte("*"+name)); at >= 0 {
			line, _ = position(text, at)
		}
		mend = "write the value out: a site file has no anchors or aliases"
	case tab > 0:
		line, what, mend = tab, "not YAML: the line is indented with a tab", "indent with spaces"
	case strings.Contains(what, "cannot start any token"):
		mend = "put a value that starts with a special character in quotes"
	case strings.Contains(what, "mapping values are not allowed"):
		mend = "put a value with a colon in it in quotes, and check the indentation of the line above"
	case strings.Contains(what, "expected ',' or"):
		mend = "close the bracket that is opened here, and check the commas"
	case strings.Contains(what, "expected key") || strings.Contains(what, "expected '-'"):
		line = breakingLine(text, m[2], line)
		mend = "indent the line like its neighbours, and check the quotes on the line above"
	default:
		mend = "check quotes, brackets and indentation"
	}
	return line, what, mend
}

// bisectBytesMax bounds the work of finding a line; a file above it is told where the block begins.
const bisectBytesMax = 256 << 10

// breakingLine finds the line that breaks a block, for messages where the library only tells the line where the block begins: the
// last line of the shortest beginning of the text that gives the same message.
func breakingLine(text []byte, message string, line int) int {
	if len(text) > bisectBytesMax {
		return line
	}
	var ends []int
	for i, c := range text {
		if c == '\n' || i == len(text)-1 {
			ends = append(ends, i+1)
		}
	}
	return 1 + sort.Search(len(ends)-1, func(i int) bool {
		var doc yaml.Node
		err := yaml.Unmarshal(text[:ends[i]], &doc)
		return err != nil && strings.HasSuffix(err.Error(), message)
	})
}

// firstTab is the first line with a tab in its indentation, 0 if there is none.
func firstTab(text []byte) int {
	for i, line := range bytes.Split(text, []byte("\n")) {
		if body := bytes.TrimLeft(line, " \t"); len(body) > 0 && bytes.IndexByte(line[:len(line)-len(body)], '\t') >= 0 {
			return i + 1
		}
	}
	return 0
}
