package diagnostics

import (
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/fit"
)

// Every code that the package gives away is explained.
func TestEveryCodeIsExplained(t *testing.T) {
	files, err := filepath.Glob("*.go")
	if err != nil {
		t.Fatal(err)
	}
	call := regexp.MustCompile(`\b(?:find|newFinding|problem|add)\(\s*"([a-z0-9-]+)"`)
	seen := 0
	for _, f := range files {
		if strings.HasSuffix(f, "_test.go") {
			continue
		}
		src, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		for _, m := range call.FindAllStringSubmatch(string(src), -1) {
			seen++
			if _, err := Explain(m[1]); err != nil {
				t.Errorf("%s: %v", f, err)
			}
		}
	}
	if seen < 20 {
		t.Errorf("only %d codes found in the source: the pattern misses them", seen)
	}
	for _, s := range States {
		if e, err := Explain(string(s)); err != nil {
			t.Error(err)
		} else if s != StraightWithin && e.Title != s.Title() {
			t.Errorf("%s is shown as %q and explained as %q", s, s.Title(), e.Title)
		}
	}
	if _, err := Explain("no-such-code"); err == nil {
		t.Error("a code that does not exist was explained")
	}
}

func TestCatalogueIsComplete(t *testing.T) {
	codes := Codes()
	if !slices.IsSorted(codes) {
		t.Error("codes are not sorted")
	}
	if len(slices.Compact(slices.Clone(codes))) != len(codes) {
		t.Error("a code is listed twice")
	}
	for _, e := range Catalogue() {
		if e.Title == "" || e.Explanation == "" {
			t.Errorf("%s has no title or no explanation", e.Code)
		}
		if e.Severity != Info && e.Severity != Warning && e.Severity != Alarm {
			t.Errorf("%s: severity %q", e.Code, e.Severity)
		}
	}
	for _, e := range catalogue {
		if e.Severity != Info && e.Cure == "" {
			t.Errorf("%s warns and names no cure", e.Code)
		}
	}
	Catalogue()[0].Title = "changed"
	if Catalogue()[0].Title == "changed" {
		t.Error("the catalogue can be changed from outside")
	}
}

// A code that was never written down is a bug of this package.
func TestUnknownCodePanics(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("no panic")
		}
	}()
	newFinding("no-such-code", "", nil, nil)
}

// What Decide finds beside the verdict.
func TestDecideFindings(t *testing.T) {
	temps := span(290, 320, 9)
	s := sampleOf(t, fit.Relative, temps, curve(temps, 60, 0.002), nil)
	_, _, in := decideOn(t, s, "")
	in.PerMolecule = true
	codes := func() map[string]bool {
		_, fs := Decide(in)
		m := map[string]bool{}
		for _, f := range fs {
			m[f.Code] = true
			if f.Rows == nil || f.Values == nil || f.Message == "" {
				t.Errorf("%+v", f)
			}
		}
		return m
	}
	got := codes()
	for _, c := range []string{"exponent-not-a-prefactor", "conditional-on-choice", "band-narrow-for-gas-phase", "second-barrier"} {
		if !got[c] {
			t.Errorf("no %s among %v", c, got)
		}
	}
	in.Rule.Band = [2]float64{0, 3}
	in.Test.PValue = 0.03
	in.Test.Exponent.Value = 4
	got = codes()
	if got["band-narrow-for-gas-phase"] || got["exponent-not-a-prefactor"] {
		t.Errorf("%v", got)
	}
}
