package exact

import (
	"bytes"
	"fmt"
	"go/ast"
	"go/importer"
	"go/parser"
	"go/token"
	"go/types"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"sort"
	"strings"
	"testing"
)

// inexactMath are the functions of package math whose last bit depends on the CPU or on
// the compiler. What is left (Sqrt, Abs, Floor, NaN, Float64bits ...) is exact everywhere.
var inexactMath = words(`Acos Acosh Asin Asinh Atan Atan2 Atanh Cbrt Cos Cosh Erf Erfc Erfinv Erfcinv Exp Exp2 Expm1
	FMA Gamma Hypot J0 J1 Jn Lgamma Log Log10 Log1p Log2 Pow Pow10 Sin Sincos Sinh Tan Tanh Y0 Y1 Yn`)

// forbiddenImports hold clocks, disks, networks, chance and concurrency.
var forbiddenImports = words(`os os/exec os/signal io/fs io/ioutil net net/http math/rand math/rand/v2 crypto/rand
	sync sync/atomic syscall runtime path/filepath log log/slog`)

var forbiddenTime = words(`Now Since Until Sleep After AfterFunc Tick NewTimer NewTicker`)

func words(s string) map[string]bool {
	m := map[string]bool{}
	for _, w := range strings.Fields(s) {
		m[w] = true
	}
	return m
}

// qcPackage is one type-checked directory below qc, without its test files.
type qcPackage struct {
	dir   string
	files []*ast.File
	info  *types.Info
}

// TestNoFusableProducts holds the purity of qc: no product that a compiler may fuse into a
// sum, no elementary function of package math, no clock, disk, network, chance,
// goroutine or map order. TestNoFusedInstructions proves the first on the machine code.
func TestNoFusableProducts(t *testing.T) {
	fset := token.NewFileSet()
	packages := loadQC(t, fset)
	if len(packages) == 0 {
		t.Fatal("qc: no packages found: the test must run inside the module")
	}
	var found []string
	for _, p := range packages {
		inExact := filepath.Base(p.dir) == "exact"
		for _, f := range p.files {
			report := func(n ast.Node, text string) {
				found = append(found, fmt.Sprintf("%s: %s", fset.Position(n.Pos()), text))
			}
			checkFile(f, p.info, inExact, report)
		}
	}
	sort.Strings(found)
	for _, s := range found {
		t.Error(s)
	}
}

func checkFile(f *ast.File, info *types.Info, inExact bool, report func(ast.Node, string)) {
	for _, imp := range f.Imports {
		if path := strings.Trim(imp.Path.Value, `"`); forbiddenImports[path] {
			report(imp, "qc imports "+path+": qc is pure; take the value as an argument, from the caller")
		}
	}
	ast.Inspect(f, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.BinaryExpr:
			if n.Op == token.ADD || n.Op == token.SUB {
				checkOperand(n.X, info, report)
				checkOperand(n.Y, info, report)
			}
		case *ast.AssignStmt:
			if n.Tok == token.ADD_ASSIGN || n.Tok == token.SUB_ASSIGN {
				checkOperand(n.Rhs[0], info, report)
			}
		case *ast.GoStmt:
			report(n, "go statement in qc: results must not depend on a scheduler; start goroutines in cmd")
		case *ast.RangeStmt:
			if tv, ok := info.Types[n.X]; ok && tv.Type != nil {
				if _, isMap := tv.Type.Underlying().(*types.Map); isMap {
					report(n, "range over a map in qc: the order is random; keep a sorted slice of the keys")
				}
			}
		case *ast.SelectorExpr:
			checkSelector(n, info, inExact, report)
		}
		return true
	})
}

// checkOperand refuses a bare floating-point product as an operand of a sum.
func checkOperand(e ast.Expr, info *types.Info, report func(ast.Node, string)) {
	switch x := e.(type) {
	case *ast.ParenExpr:
		checkOperand(x.X, info, report)
	case *ast.UnaryExpr:
		checkOperand(x.X, info, report)
	case *ast.BinaryExpr:
		tv := info.Types[e]
		if x.Op != token.MUL || tv.Value != nil || tv.Type == nil {
			return
		}
		if b, ok := tv.Type.Underlying().(*types.Basic); ok && b.Info()&types.IsFloat != 0 {
			report(x, fmt.Sprintf("product %s feeds a sum and may be fused on some CPUs: write float64(%s)",
				types.ExprString(x), types.ExprString(x)))
		}
	}
}

func checkSelector(n *ast.SelectorExpr, info *types.Info, inExact bool, report func(ast.Node, string)) {
	id, ok := n.X.(*ast.Ident)
	if !ok {
		return
	}
	pkg, ok := info.Uses[id].(*types.PkgName)
	if !ok {
		return
	}
	switch name := n.Sel.Name; pkg.Imported().Path() {
	case "math":
		if inexactMath[name] {
			report(n, fmt.Sprintf("math.%s differs between CPUs: use exact.%s of qc/exact", name, name))
		}
	case "time":
		if forbiddenTime[name] {
			report(n, "time."+name+" in qc: qc has no clock; take the time as an argument")
		}
	}
}

// loadQC parses and type-checks every package below qc. Imports that cannot be resolved
// from source leave types unknown, never wrong, so errors of the checker are ignored: the
// build itself reports them.
func loadQC(t *testing.T, fset *token.FileSet) []qcPackage {
	t.Helper()
	var packages []qcPackage
	imp := importer.ForCompiler(fset, "source", nil)
	err := filepath.WalkDir("..", func(path string, d os.DirEntry, err error) error {
		if err != nil || !d.IsDir() {
			return err
		}
		if d.Name() == "testdata" {
			return filepath.SkipDir
		}
		names, err := filepath.Glob(filepath.Join(path, "*.go"))
		if err != nil {
			return err
		}
		p := qcPackage{dir: mustAbs(t, path), info: &types.Info{
			Types: map[ast.Expr]types.TypeAndValue{}, Uses: map[*ast.Ident]types.Object{}}}
		for _, name := range names {
			if strings.HasSuffix(name, "_test.go") {
				continue
			}
			f, err := parser.ParseFile(fset, name, nil, parser.SkipObjectResolution)
			if err != nil {
				return err
			}
			p.files = append(p.files, f)
		}
		if len(p.files) == 0 {
			return nil
		}
		conf := types.Config{Importer: imp, Error: func(error) {}}
		_, _ = conf.Check(path, fset, p.files, p.info)
		packages = append(packages, p)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return packages
}

func mustAbs(t *testing.T, path string) string {
	t.Helper()
	abs, err := filepath.Abs(path)
	if err != nil {
		t.Fatal(err)
	}
	return abs
}

// The checker itself is checked on a source that breaks each rule once.
func TestRulesCheckerFinds(t *testing.T) {
	const source = `package p
import ("math"; "os"; "time")
type deg float64
func f(a, b, c float64, d deg, m map[int]int, n int) float64 {
	x := a*b + c
	x = c - (a*b)
	x += -(a * b)
	x = float64(d*d + d)
	x = float64(a*b) + c + float64(n*n+1) + 2*3.0
	x = a*(b+c) - a/b
	x += math.Exp(x) + math.Sqrt(x)
	for range m { go f(a, b, c, d, m, n) }
	_ = time.Now
	_ = os.Args
	return x
}`
	fset := token.NewFileSet()
	file, err := parser.ParseFile(fset, "p.go", source, parser.SkipObjectResolution)
	if err != nil {
		t.Fatal(err)
	}
	info := &types.Info{Types: map[ast.Expr]types.TypeAndValue{}, Uses: map[*ast.Ident]types.Object{}}
	conf := types.Config{Importer: importer.ForCompiler(fset, "source", nil), Error: func(e error) { t.Error(e) }}
	if _, err := conf.Check("p", fset, []*ast.File{file}, info); err != nil {
		t.Fatal(err)
	}
	lines := map[int]int{}
	checkFile(file, info, false, func(n ast.Node, _ string) { lines[fset.Position(n.Pos()).Line]++ })
	want := map[int]int{2: 1, 5: 1, 6: 1, 7: 1, 8: 1, 10: 1, 11: 1, 12: 2, 13: 1}
	for line := 1; line <= 16; line++ {
		if lines[line] != want[line] {
			t.Errorf("line %d: %d findings, want %d", line, lines[line], want[line])
		}
	}
}

// TestNoFusedInstructions compiles qc for CPUs that have fused multiply-add and looks for
// the instruction in the machine code. It sees what the source check cannot: a product
// in a variable, or returned by an inlined function, that meets its sum later.
func TestNoFusedInstructions(t *testing.T) {
	goTool, err := exec.LookPath("go")
	if err != nil {
		t.Skip("no go command in PATH: the machine code of qc was not checked for fused multiply-add")
	}
	// FMADDD, FMSUBD, FNMSUBD ... and VFMADD231SD ...
	fused := regexp.MustCompile(`\(([^()]+\.go:\d+)\)\s+(V?FN?M(?:ADD|SUB)\w*)`)
	for _, target := range [][]string{{"GOARCH=arm64"}, {"GOARCH=amd64", "GOAMD64=v3"}} {
		t.Run(strings.Join(target, ","), func(t *testing.T) {
			cmd := exec.Command(goTool, "build", "-gcflags=-S", "fluxwarden/qc/...")
			cmd.Env = append(append(os.Environ(), "GOOS=linux", "CGO_ENABLED=0"), target...)
			var out bytes.Buffer
			cmd.Stdout, cmd.Stderr = &out, &out
			if err := cmd.Run(); err != nil {
				t.Fatalf("go build of qc: %v: %s", err, tail(out.String(), 2000))
			}
			if !strings.Contains(out.String(), "exact.Exp STEXT") {
				t.Fatal("the listing does not hold exact.Exp: nothing was checked")
			}
			seen := map[string]bool{}
			for _, m := range fused.FindAllStringSubmatch(out.String(), -1) {
				if place := m[1]; !seen[place] {
					seen[place] = true
					t.Errorf("%s: compiled to %s: wrap the product, or the division by a power of two (compiled to a product), in float64(...) where it is formed", place, m[2])
				}
			}
		})
	}
}

func tail(s string, n int) string {
	if len(s) > n {
		return s[len(s)-n:]
	}
	return s
}
