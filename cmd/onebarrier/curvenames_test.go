package main_test

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"onebarrier/models"
)

// A curve is one file in models and one line in its registry. It is not, where other code
// names it: that code would have to be changed for the next curve. This test finds such
// names, in string literals and as values of package models.

// testCurves are the two curves that the exponent test compares. The method speaks of
// them, whatever the candidates are.
var testCurves = []string{"straight", "power-prefactor"}

// named lists where other curves and forms may be named, and why.
var named = []struct{ path, names, why string }{
	{"cmd/internal/figure/arrhenius.go", "arrhenius", "the name of a figure"},
	{"cmd/internal/figure/panel.go", "eyring", "the name of a figure"},
	{"cmd/internal/survey/table_compensation.go", "arrhenius", "ln A and E of the straight line"},
	{"cmd/speed/main.go", "parallel", "times one curve of each kind"},
	{"diagnostics/calibration", "parallel series", "simulates two barriers"},
	{"diagnostics/catalogue.go", "*", "catalogue of findings"},
	{"diagnostics/findings.go", "parallel modified-arrhenius eyring-heat-capacity", "the second-barrier test looks for a parallel path; two forms of the exponent test's curve"},
	{"diagnostics/judge.go", "fixed exponent", "the exponent test with n held"},
	{"diagnostics/maximum.go", "series reversible-inactivation", "the cure of a maximum"},
	{"diagnostics/publishing.go", "linear-prefactor", "ΔH‡ and ΔS‡ beside the E of a straight line"},
	{"diagnostics/secondbarrier.go", "parallel", "the second-barrier test looks for a parallel path"},
	{"diagnostics/verdict.go", "root-prefactor linear-prefactor", "what a usual prefactor is"},
}

// mention is a name of a curve or a form in code.
type mention struct{ path, name, where string }

// constructors gives the identifiers of package models that make a curve, each with the
// name of the curve.
func constructors(t *testing.T) map[string]string {
	t.Helper()
	of := map[string]string{"FixedExponent": "fixed exponent", "Tunnelling": "tunnelling"}
	for _, c := range models.All() {
		of[strings.TrimPrefix(fmt.Sprintf("%T", c), "models.")] = c.Info().Name
	}
	of["FixedExponent"], of["Tunnelling"] = "fixed exponent", "tunnelling" // several curves each
	paths, err := filepath.Glob(filepath.Join(root, "models", "*.go"))
	if err != nil || len(paths) == 0 {
		t.Fatal("package models is not found: ", err)
	}
	for _, path := range paths {
		file, err := parser.ParseFile(token.NewFileSet(), path, nil, 0)
		if err != nil {
			t.Fatal(err)
		}
		for _, d := range file.Decls {
			f, ok := d.(*ast.FuncDecl)
			if !ok || f.Recv != nil || !f.Name.IsExported() || f.Type.Results == nil || len(f.Type.Results.List) != 1 {
				continue
			}
			if kind, ok := f.Type.Results.List[0].Type.(*ast.Ident); ok && of[kind.Name] != "" {
				of[f.Name.Name] = kebabOf(f.Name.Name)
			}
		}
	}
	return of
}

// kebabOf turns RootPrefactor into root-prefactor.
func kebabOf(name string) string {
	return strings.ToLower(regexp.MustCompile(`([a-z])([A-Z])`).ReplaceAllString(name, "$1-$2"))
}

// mentions finds the names in one file of Go, given its path from the root.
func mentions(t *testing.T, path string, src any, makes map[string]string) []mention {
	t.Helper()
	fset := token.NewFileSet()
	file, err := parser.ParseFile(fset, path, src, 0)
	if err != nil {
		t.Fatal(err)
	}
	var out []mention
	add := func(n ast.Node, name string) {
		if !slices.Contains(testCurves, name) {
			out = append(out, mention{path, name, fset.Position(n.Pos()).String()})
		}
	}
	ast.Inspect(file, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.SelectorExpr:
			if x, ok := n.X.(*ast.Ident); ok && x.Name == "models" && makes[n.Sel.Name] != "" {
				add(n, makes[n.Sel.Name])
			}
		case *ast.BasicLit:
			text, err := strconv.Unquote(n.Value)
			if n.Kind != token.STRING || err != nil {
				break
			}
			for _, name := range models.Names() {
				// A name of one word may be a word.
				inText := strings.Contains(name, "-") && regexp.MustCompile(`(^|[^a-z-])`+name+`($|[^a-z-])`).MatchString(text)
				if text == name || inText {
					add(n, name)
				}
			}
		}
		return true
	})
	return out
}

func TestNoCurveIsNamedOutsideModels(t *testing.T) {
	makes := constructors(t)
	used := make([]bool, len(named))
	files := 0
	err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		rel, err := filepath.Rel(root, path)
		if err != nil {
			return err
		}
		rel = filepath.ToSlash(rel)
		switch {
		case d.IsDir():
			// models has the names; modeltest and reference serve tests.
			if rel == "models/modeltest" || rel == "models/reference" || rel != "." && strings.HasPrefix(d.Name(), ".") {
				return fs.SkipDir
			}
			return nil
		case !strings.HasSuffix(rel, ".go") || strings.HasSuffix(rel, "_test.go") || filepath.Dir(rel) == "models":
			return nil
		}
		files++
		src, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		for _, m := range mentions(t, rel, src, makes) {
			allowed := false
			for i, e := range named {
				if within(rel, e.path) && (e.names == "*" || slices.Contains(strings.Fields(e.names), m.name) || e.names == m.name) {
					allowed, used[i] = true, true
				}
			}
			if !allowed {
				t.Errorf("%s names the curve or form %q: ask the curve by an interface of models", m.where, m.name)
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if files < 100 {
		t.Errorf("only %d files were looked at", files)
	}
	for i, e := range named {
		if !used[i] {
			t.Errorf("%s names none of %q any more: take it off the list", e.path, e.names)
		}
	}
}

// The scan sees what it is made for.
func TestPlantedCurveNamesAreFound(t *testing.T) {
	makes := constructors(t)
	for src, want := range map[string]string{
		`var x = "vogel"`: "vogel",
		`var x = "to compute k, take drifting-heat-capacity by hand"`: "drifting-heat-capacity",
		`var x = models.Vogel{}`:                            "vogel",
		`var x = models.TunnellingBell()`:                   "tunnelling-bell",
		`func f(c any) { _, _ = c.(models.Series) }`:        "series",
		`var x = models.DriftingHeatCapacity{}`:             "drifting-heat-capacity",
		`var x = "modified-arrhenius"`:                      "modified-arrhenius",
		`var x, y = models.Straight(), "power-prefactor"`:   "",
		`var x = "two steps in series, or a parallel path"`: "",
		`var x = models.GasConstant`:                        "",
		`var x = "beyond-linear-prefactor"`:                 "",
	} {
		var got []string
		for _, m := range mentions(t, "planted.go", "package p\n"+src, makes) {
			got = append(got, m.name)
		}
		if strings.Join(got, " ") != want {
			t.Errorf("%s: found %q, want %q", src, got, want)
		}
	}
}
