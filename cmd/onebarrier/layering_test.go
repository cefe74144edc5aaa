package main_test

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path"
	"slices"
	"strings"
	"testing"
)

const module = "onebarrier"

// layers ranks the packages of the house: models <- dataset, fit <- bootstrap <-
// diagnostics <- cmd. A package may import those of a lower rank only; two of one
// rank do not know each other, except under cmd.
var layers = map[string]int{
	"models":           0,
	"models/dataset":   1,
	"models/fit":       1,
	"models/modeltest": 1,
	"models/reference": 1,
	"bootstrap":        2,
	"diagnostics":      3,
	// The study of the verdict's error rates looks at it from outside.
	"diagnostics/calibration": 4,
}

const rankOfCmd = 5

// forTests are packages that serve tests: nothing else imports them, and they alone
// may depend on package testing.
var forTests = []string{"models/modeltest", "models/reference"}

// notInLibrary are the modules on which no library package may depend, however
// far down: a chemist's own program imports the library without them.
var notInLibrary = []string{
	"github.com/spf13/cobra", "gonum.org/v1/plot", "github.com/xuri/excelize", "github.com/parquet-go", "database/sql", "modernc.org/sqlite", "testing",
}

// pkg is a package with its own imports and everything it depends on.
type pkg struct {
	path          string
	imports, deps []string
}

func rank(rel string) (int, bool) {
	if rel == "cmd" || strings.HasPrefix(rel, "cmd/") {
		return rankOfCmd, true
	}
	r, ok := layers[rel]
	return r, ok
}

func within(p, root string) bool { return p == root || strings.HasPrefix(p, root+"/") }

// violations lists what breaks the layering, sorted.
func violations(pkgs []pkg) []string {
	var out []string
	for _, p := range pkgs {
		rel := strings.TrimPrefix(p.path, module+"/")
		own, ok := rank(rel)
		if !ok {
			out = append(out, fmt.Sprintf("%s belongs to no layer", rel))
			continue
		}
		for _, imp := range p.imports {
			if !within(imp, module) {
				continue
			}
			r := strings.TrimPrefix(imp, module+"/")
			other, ok := rank(r)
			switch {
			case !ok:
				out = append(out, fmt.Sprintf("%s imports %s, which belongs to no layer", rel, r))
			case slices.Contains(forTests, r):
				out = append(out, fmt.Sprintf("%s imports %s, which is for tests", rel, r))
			case own == rankOfCmd && other == rankOfCmd:
			case other >= own:
				out = append(out, fmt.Sprintf("%s imports %s, which is not below it", rel, r))
			}
		}
		if own == rankOfCmd {
			continue
		}
		for _, dep := range p.deps {
			for _, no := range notInLibrary {
				if within(dep, no) && !(dep == "testing" && slices.Contains(forTests, rel)) {
					out = append(out, fmt.Sprintf("%s depends on %s", rel, dep))
				}
			}
		}
	}
	slices.Sort(out)
	return out
}

// list asks the go command for every package of the module, tests left out.
func list(t *testing.T) []pkg {
	t.Helper()
	cmd := exec.Command("go", "list", "-f", `{{.ImportPath}}|{{join .Imports ","}}|{{join .Deps ","}}`, module+"/...")
	cmd.Dir = root
	var errOut bytes.Buffer
	cmd.Stderr = &errOut
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list: %v\n%s", err, errOut.String())
	}
	var pkgs []pkg
	for line := range strings.Lines(string(out)) {
		f := strings.Split(strings.TrimSpace(line), "|")
		pkgs = append(pkgs, pkg{f[0], strings.Split(f[1], ","), strings.Split(f[2], ",")})
	}
	return pkgs
}

// root is the top of the repository, seen from this package.
const root = "../.."

func TestLayering(t *testing.T) {
	pkgs := list(t)
	for rel := range layers {
		if !slices.ContainsFunc(pkgs, func(p pkg) bool { return p.path == module+"/"+rel }) {
			t.Errorf("go list does not show %s: the test would see nothing", rel)
		}
	}
	for _, v := range violations(pkgs) {
		t.Error(v)
	}
}

func TestPlantedImportsAreFound(t *testing.T) {
	for _, c := range []struct {
		p    pkg
		want string
	}{
		{pkg{"onebarrier/diagnostics", []string{"math", "onebarrier/bootstrap", "onebarrier/models/fit"}, []string{"math", "gonum.org/v1/gonum/stat"}}, ""},
		{pkg{"onebarrier/cmd/internal/cli", []string{"onebarrier/cmd/internal/report", "onebarrier/diagnostics"}, []string{"github.com/spf13/cobra", "gonum.org/v1/plot/vg"}}, ""},
		{pkg{"onebarrier/models", []string{"onebarrier/models/fit"}, nil}, "models imports models/fit, which is not below it"},
		{pkg{"onebarrier/models/fit", []string{"onebarrier/models/dataset"}, nil}, "models/fit imports models/dataset, which is not below it"},
		{pkg{"onebarrier/bootstrap", []string{"onebarrier/diagnostics"}, nil}, "bootstrap imports diagnostics, which is not below it"},
		{pkg{"onebarrier/diagnostics", []string{"onebarrier/cmd/internal/report"}, nil}, "diagnostics imports cmd/internal/report, which is not below it"},
		{pkg{"onebarrier/models/fit", nil, []string{"gonum.org/v1/plot/vg"}}, "models/fit depends on gonum.org/v1/plot/vg"},
		{pkg{"onebarrier/models/dataset", nil, []string{"github.com/spf13/cobra"}}, "models/dataset depends on github.com/spf13/cobra"},
		{pkg{"onebarrier/models/dataset", nil, []string{"github.com/xuri/excelize/v2"}}, "models/dataset depends on github.com/xuri/excelize/v2"},
		{pkg{"onebarrier/diagnostics", []string{"onebarrier/cmd/internal/workbook"}, nil}, "diagnostics imports cmd/internal/workbook, which is not below it"},
		{pkg{"onebarrier/models/fit", []string{"onebarrier/models/modeltest"}, nil}, "models/fit imports models/modeltest, which is for tests"},
		{pkg{"onebarrier/bootstrap", []string{"onebarrier/models/reference"}, nil}, "bootstrap imports models/reference, which is for tests"},
		{pkg{"onebarrier/models/fit", nil, []string{"testing"}}, "models/fit depends on testing"},
		{pkg{"onebarrier/models/reference", nil, []string{"testing"}}, ""},
		{pkg{"onebarrier/util", nil, nil}, "util belongs to no layer"},
		{pkg{"onebarrier/diagnostics", []string{"onebarrier/util"}, nil}, "diagnostics imports util, which belongs to no layer"},
	} {
		if got := strings.Join(violations([]pkg{c.p}), "; "); got != c.want {
			t.Errorf("%s: %q, want %q", c.p.path, got, c.want)
		}
	}
}

// agreed are the names at the top of the repository, and no others.
var agreed = []string{
	"cmd", "models", "diagnostics", "bootstrap", "testdata", "go.mod", "go.sum",
	"README.md", "DEVELOPERS.md", ".ci", ".gitignore",
}

// topLevel compares names with the agreed ones. Names that a pattern of .gitignore
// covers, and .git, are not part of the repository.
func topLevel(names, ignored []string) []string {
	var out []string
	for _, n := range names {
		covered := func(pattern string) bool {
			ok, err := path.Match(strings.Trim(pattern, "/"), n)
			return err == nil && ok
		}
		if n != ".git" && !slices.Contains(agreed, n) && !slices.ContainsFunc(ignored, covered) {
			out = append(out, n+" is not one of the agreed names")
		}
	}
	for _, n := range agreed {
		if !slices.Contains(names, n) {
			out = append(out, n+" is missing")
		}
	}
	return out
}

func TestTopLevel(t *testing.T) {
	entries, err := os.ReadDir(root)
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, e := range entries {
		names = append(names, e.Name())
	}
	ignore, err := os.ReadFile(root + "/.gitignore")
	if err != nil {
		t.Fatal(err)
	}
	for _, v := range topLevel(names, strings.Fields(string(ignore))) {
		t.Error(v)
	}
}

func TestPlantedTopLevelNamesAreFound(t *testing.T) {
	ignored := []string{"/onebarrier", "*.test", "/figures/"}
	clean := append([]string{".git", "onebarrier", "fit.test", "figures"}, agreed...)
	if got := topLevel(clean, ignored); got != nil {
		t.Errorf("a clean tree gives %q", got)
	}
	for what, names := range map[string][]string{
		"notes is not one of the agreed names": append([]string{"notes"}, agreed...),
		"bootstrap is missing":                 slices.DeleteFunc(slices.Clone(agreed), func(n string) bool { return n == "bootstrap" }),
	} {
		if got := topLevel(names, ignored); !slices.Equal(got, []string{what}) {
			t.Errorf("%q, want %q", got, what)
		}
	}
}
