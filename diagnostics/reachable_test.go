package diagnostics

import (
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// lists are the variables that only list or describe codes: what stands there raises
// nothing.
var lists = []string{"catalogue", "onlyToKnow", "States", "problemTexts", "noticeTexts", "ProblemCodes", "NoticeCodes"}

// raised collects the strings that files use as values: literals and string constants,
// outside declarations of constants, the lists, comparisons and the cases of a switch.
func raised(files []*ast.File) map[string]bool {
	constants := map[string]string{} // by name
	text := func(e ast.Expr) (string, bool) {
		l, ok := e.(*ast.BasicLit)
		if !ok || l.Kind != token.STRING {
			return "", false
		}
		s, err := strconv.Unquote(l.Value)
		return s, err == nil
	}
	for _, f := range files {
		for _, d := range f.Decls {
			if g, ok := d.(*ast.GenDecl); ok && g.Tok == token.CONST {
				for _, spec := range g.Specs {
					v := spec.(*ast.ValueSpec)
					for i, name := range v.Names {
						if i < len(v.Values) {
							if s, ok := text(v.Values[i]); ok {
								constants[name.Name] = s
							}
						}
					}
				}
			}
		}
	}
	out := map[string]bool{}
	var visit func(ast.Node) bool
	visit = func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.GenDecl:
			return n.Tok != token.CONST && n.Tok != token.IMPORT
		case *ast.ValueSpec:
			return !slices.Contains(lists, n.Names[0].Name)
		case *ast.BinaryExpr:
			return n.Op != token.EQL && n.Op != token.NEQ
		case *ast.CaseClause:
			for _, s := range n.Body {
				ast.Inspect(s, visit)
			}
			return false
		case *ast.BasicLit:
			if s, ok := text(n); ok {
				out[s] = true
			}
		case *ast.Ident:
			if s, ok := constants[n.Name]; ok {
				out[s] = true
			}
		}
		return true
	}
	for _, f := range files {
		ast.Inspect(f, visit)
	}
	return out
}

// Every code of the catalogue is raised somewhere: an explanation of what cannot
// happen misleads.
func TestEveryCodeIsRaised(t *testing.T) {
	var files []*ast.File
	set := token.NewFileSet()
	err := filepath.WalkDir("..", func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() {
			if name := d.Name(); name == "testdata" || (strings.HasPrefix(name, ".") && name != "..") {
				return fs.SkipDir
			}
			return nil
		}
		if !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
			return nil
		}
		f, err := parser.ParseFile(set, path, nil, parser.SkipObjectResolution)
		files = append(files, f)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	found := raised(files)
	for _, code := range Codes() {
		if !found[code] {
			t.Errorf("nothing raises %s", code)
		}
	}
}

// What only lists, compares or declares a code does not raise it.
func TestRaised(t *testing.T) {
	f, err := parser.ParseFile(token.NewFileSet(), "", `package p
const declared, used = "declared", "used"
var catalogue = []string{"listed", declared}
func f(code string) string {
	if code == "compared" || declared != code {
		return "returned"
	}
	switch code {
	case "in a case", declared:
		return g("argument", used)
	}
	return ""
}`, 0)
	if err != nil {
		t.Fatal(err)
	}
	got := raised([]*ast.File{f})
	for code, want := range map[string]bool{
		"returned": true, "argument": true, "used": true,
		"declared": false, "listed": false, "compared": false, "in a case": false,
	} {
		if got[code] != want {
			t.Errorf("%q: raised is %t", code, got[code])
		}
	}
}
