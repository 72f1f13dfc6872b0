package rules

import (
	"bytes"
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// The house's order, held by tests over the whole tree. Each finding names the file, the line and the mend.

const (
	module       = "fluxwarden"
	fileLinesMax = 500
)

var topLevel = []string{"cmd", "ingest", "qc", "store", "rules", "testdata", "deploy", "go.mod", "go.sum", "README.md", "DEVELOPERS.md",
	".ci", ".git", ".gitignore", "LICENSE", ".golangci.yml"}

// A source is one parsed Go file; its name is relative to the root, with slashes.
type source struct {
	name string
	text []byte
	file *ast.File
	set  *token.FileSet
}

func (s *source) room() string { return strings.SplitN(s.name, "/", 2)[0] }
func (s *source) test() bool   { return strings.HasSuffix(s.name, "_test.go") }

func (s *source) in(folder string) bool { return strings.HasPrefix(s.name, folder+"/") }

func (s *source) finding(at token.Pos, format string, args ...any) string {
	return fmt.Sprintf("%s:%d: %s", s.name, s.set.Position(at).Line, fmt.Sprintf(format, args...))
}

func parseSource(name string, text []byte) (*source, error) {
	set := token.NewFileSet()
	file, err := parser.ParseFile(set, name, text, parser.ParseComments|parser.SkipObjectResolution)
	return &source{name: name, text: text, file: file, set: set}, err
}

const root = ".."

// sources are the Go files of the module. Nested modules, what git ignores and the toolchain's own folders are left out.
func sources(t *testing.T) []*source {
	t.Helper()
	ignored := ignoredNames(t)
	var all []*source
	err := filepath.WalkDir(root, func(at string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		name := filepath.ToSlash(strings.TrimPrefix(strings.TrimPrefix(at, root), string(filepath.Separator)))
		switch {
		case d.IsDir() && name != "" && (strings.HasPrefix(d.Name(), ".") || d.Name() == "testdata" || matchesAny(ignored, name)):
			return fs.SkipDir
		case d.IsDir() || !strings.HasSuffix(name, ".go"):
			return nil
		}
		text, err := os.ReadFile(at)
		if err != nil {
			return err
		}
		s, err := parseSource(name, text)
		if err != nil {
			return err
		}
		all = append(all, s)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(all) < 20 {
		t.Fatalf("found %d Go files under %s; is the test still one folder below the root?", len(all), root)
	}
	return all
}

func ignoredNames(t *testing.T) []string {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(root, ".gitignore"))
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, line := range strings.Fields(string(text)) {
		names = append(names, strings.Trim(line, "/"))
	}
	return names
}

func matchesAny(patterns []string, name string) bool {
	return slices.ContainsFunc(patterns, func(p string) bool { ok, _ := path.Match(p, name); return ok })
}

func check(t *testing.T, what func(*source) []string) {
	t.Helper()
	for _, s := range sources(t) {
		for _, finding := range what(s) {
			t.Error(finding)
		}
	}
}

func TestTopLevel(t *testing.T) {
	if _, err := os.Stat(filepath.Join(root, "go.mod")); err != nil {
		t.Fatal(err)
	}
	entries, err := os.ReadDir(root)
	if err != nil {
		t.Fatal(err)
	}
	ignored := ignoredNames(t)
	for _, e := range entries {
		if !slices.Contains(topLevel, e.Name()) && !matchesAny(ignored, e.Name()) {
			t.Errorf("%s:1: not a name of the top level; move it into one of %s", e.Name(), strings.Join(topLevel[:7], ", "))
		}
	}
}

func TestImportsPointOneWay(t *testing.T) { check(t, wrongImports) }

// mayImport lists, for each room, the prefixes of our own packages that it may import; a room may always import itself.
var mayImport = map[string][]string{
	"rules":  nil,
	"qc":     {"rules"},
	"ingest": {"rules", "qc/minute"},
	"store":  {"rules", "qc"},
	"cmd":    {"rules", "qc", "ingest", "store"},
}

// onlyIn lists libraries that only some folders may know, so that they can be exchanged there.
var onlyIn = []struct {
	prefixes, folders []string
}{
	{[]string{"github.com/nats-io/"}, []string{"ingest/broker", "ingest/gate"}},
	{[]string{"github.com/parquet-go/", "github.com/apache/arrow-go"}, []string{"store"}},
}

func wrongImports(s *source) (findings []string) {
	allowed, known := mayImport[s.room()]
	if !known {
		return []string{fmt.Sprintf("%s:1: Go code in the room %s; move it into cmd, ingest, qc, store or rules", s.name, s.room())}
	}
	for _, spec := range s.file.Imports {
		imported, err := strconv.Unquote(spec.Path.Value)
		if err != nil {
			continue
		}
		if own, ok := strings.CutPrefix(imported, module+"/"); ok && !under(own, append([]string{s.room()}, allowed...)) {
			findings = append(findings, s.finding(spec.Pos(), "%s imports %s; it may import %s only: move what is shared down, or hand it in as a value or an interface",
				s.room(), own, strings.Join(append([]string{s.room()}, allowed...), ", ")))
		}
		for _, rule := range onlyIn {
			if slices.ContainsFunc(rule.prefixes, func(p string) bool { return strings.HasPrefix(imported, p) }) && !slices.ContainsFunc(rule.folders, s.in) {
				findings = append(findings, s.finding(spec.Pos(), "imports %s; only %s may: use what that room exports", imported, strings.Join(rule.folders, " and ")))
			}
		}
	}
	return findings
}

func under(name string, prefixes []string) bool {
	return slices.ContainsFunc(prefixes, func(p string) bool { return name == p || strings.HasPrefix(name, p+"/") })
}

func TestFilesAreShort(t *testing.T) { check(t, tooLong) }

func tooLong(s *source) []string {
	if n := bytes.Count(s.text, []byte("\n")); n > fileLinesMax {
		return []string{fmt.Sprintf("%s:%d: the file has %d lines; split it at %d, by what a reader looks for", s.name, fileLinesMax+1, n, fileLinesMax)}
	}
	return nil
}

func TestNothingIsLeftForLater(t *testing.T) { check(t, leftForLater) }

var laterWords = regexp.MustCompile(`\b(TODO|FIXME|XXX|HACK)\b`)

func leftForLater(s *source) (findings []string) {
	for _, group := range s.file.Comments {
		for _, c := range group.List {
			if word := laterWords.FindString(c.Text); word != "" {
				findings = append(findings, s.finding(c.Pos(), "a comment with %s; do it, or say plainly in the documents that it is missing", word))
			}
		}
	}
	return findings
}

func TestOnlyCommandsPrint(t *testing.T) { check(t, prints) }

func prints(s *source) (findings []string) {
	if s.test() || s.in("cmd") {
		return nil
	}
	eachUse(s, "fmt", func(at token.Pos, name string) {
		if strings.HasPrefix(name, "Print") {
			findings = append(findings, s.finding(at, "fmt.%s outside cmd; return the value, write to an io.Writer, or log it", name))
		}
	})
	ast.Inspect(s.file, func(n ast.Node) bool {
		if call, ok := n.(*ast.CallExpr); ok {
			if f, ok := call.Fun.(*ast.Ident); ok && (f.Name == "println" || f.Name == "print") {
				findings = append(findings, s.finding(f.Pos(), "%s outside cmd; take it out", f.Name))
			}
		}
		return true
	})
	return findings
}

func TestNoClockInCoreAndStore(t *testing.T) { check(t, readsClock) }

func readsClock(s *source) (findings []string) {
	if s.test() || !s.in("qc") && !s.in("store") && !s.in("rules") {
		return nil
	}
	eachUse(s, "time", func(at token.Pos, name string) {
		switch name {
		case "Now", "Since", "Until", "Sleep", "After", "Tick", "NewTimer", "NewTicker", "AfterFunc":
			findings = append(findings, s.finding(at, "time.%s in %s; take the time as an argument", name, s.room()))
		}
	})
	return findings
}

// eachUse calls do for each name that the file takes from a package of the standard library, under whatever name it imports it.
func eachUse(s *source, pkg string, do func(at token.Pos, name string)) {
	local := ""
	for _, spec := range s.file.Imports {
		if spec.Path.Value == strconv.Quote(pkg) {
			local = pkg
			if spec.Name != nil {
				local = spec.Name.Name
			}
		}
	}
	if local == "" {
		return
	}
	ast.Inspect(s.file, func(n ast.Node) bool {
		if sel, ok := n.(*ast.SelectorExpr); ok {
			if x, ok := sel.X.(*ast.Ident); ok && x.Name == local {
				do(sel.Pos(), sel.Sel.Name)
			}
		}
		return true
	})
}

// The checks above can fail: each is shown a file that it has to refuse, and one that it has to let through.
func TestTidyChecksBite(t *testing.T) {
	for _, c := range []struct {
		check            func(*source) []string
		name, text, want string
	}{
		{wrongImports, "rules/x.go", "package x\nimport _ \"fluxwarden/qc\"\n", "rules/x.go:2: rules imports qc"},
		{wrongImports, "qc/sun/x.go", "package x\nimport _ \"fluxwarden/store\"\n", "qc/sun/x.go:2: qc imports store"},
		{wrongImports, "ingest/wire/x.go", "package x\nimport _ \"fluxwarden/qc/engine\"\n", "ingest imports qc/engine"},
		{wrongImports, "ingest/wire/x.go", "package x\nimport _ \"fluxwarden/qc/minute\"\n", ""},
		{wrongImports, "store/x.go", "package x\nimport _ \"fluxwarden/ingest/wire\"\n", "store imports ingest/wire"},
		{wrongImports, "store/x.go", "package x\nimport _ \"github.com/parquet-go/parquet-go\"\n", ""},
		{wrongImports, "cmd/x.go", "package x\nimport _ \"github.com/nats-io/nats.go\"\n", "only ingest/broker and ingest/gate may"},
		{wrongImports, "util/x.go", "package x\n", "util/x.go:1: Go code in the room util"},
		{tooLong, "qc/x.go", "package x\n" + strings.Repeat("\n", fileLinesMax), "split it at 500"},
		{leftForLater, "qc/x.go", "package x\n\n// TODO: later\n", "qc/x.go:3: a comment with TODO"},
		{prints, "qc/x.go", "package x\nimport f \"fmt\"\nfunc g() { f.Println() }\n", "qc/x.go:3: fmt.Println outside cmd"},
		{prints, "qc/x.go", "package x\nfunc g() { println() }\n", "println outside cmd"},
		{prints, "cmd/x.go", "package x\nimport \"fmt\"\nfunc g() { fmt.Println() }\n", ""},
		{readsClock, "store/x.go", "package x\nimport \"time\"\nvar t = time.Now()\n", "store/x.go:3: time.Now in store"},
		{readsClock, "qc/x.go", "package x\nimport \"time\"\nvar t = time.Unix(0, 0)\n", ""},
	} {
		s, err := parseSource(c.name, []byte(c.text))
		if err != nil {
			t.Fatal(err)
		}
		got := strings.Join(c.check(s), "\n")
		if c.want == "" && got != "" || !strings.Contains(got, c.want) {
			t.Errorf("%s %q: got %q, want %q", c.name, c.text, got, c.want)
		}
	}
}
