package diagnostics

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/dataset"
)

// Every code that reading a file can raise is explained, and only codes that
// exist are listed as asking for nothing.
func TestReadingCodesAreExplained(t *testing.T) {
	for _, code := range slices.Concat(dataset.ProblemCodes, dataset.NoticeCodes) {
		if e, err := Explain(code); err != nil || e.Title == "" || e.Explanation == "" {
			t.Errorf("%s: entry %+v, %v", code, e, err)
		}
	}
	for _, code := range onlyToKnow {
		if !slices.Contains(dataset.NoticeCodes, code) {
			t.Errorf("%s is no code of a notice", code)
		}
	}
	seen := map[string]bool{}
	for _, code := range Codes() {
		if seen[code] {
			t.Errorf("%s is explained twice", code)
		}
		seen[code] = true
	}
}

// Repeats side by side share a row; each keeps its own residual, as in the same table
// with a row for each.
func TestRepeatsOfOneRowKeepTheirResiduals(t *testing.T) {
	var wide, long strings.Builder
	wide.WriteString("T/K,k (run 1)/s^-1,k (run 2)/s^-1\n")
	long.WriteString("T/K,k/s^-1\n")
	for i, k := range []float64{1e-4, 2.1e-4, 4e-4, 8.4e-4, 1.5e-3, 2.8e-3} {
		fmt.Fprintf(&wide, "%d,%g,%g\n", 280+10*i, 1.1*k, 0.9*k)
		fmt.Fprintf(&long, "%d,%g\n%[1]d,%[3]g\n", 280+10*i, 1.1*k, 0.9*k)
	}
	var got [2]*Assessment
	for i, text := range []string{wide.String(), long.String()} {
		sets, err := dataset.Read("k.csv", strings.NewReader(text), dataset.Options{})
		if err != nil {
			t.Fatal(err)
		}
		got[i] = mustAssess(t, sets[0], quick())
	}
	a, b := got[0], got[1]
	if a.Curvature.Basis != b.Curvature.Basis || a.Curvature.PValue != b.Curvature.PValue || len(a.Data) != 12 || len(b.Data) != 12 {
		t.Fatalf("%s, %v and %s, %v; %d and %d rows", a.Curvature.Basis, a.Curvature.PValue, b.Curvature.Basis, b.Curvature.PValue, len(a.Data), len(b.Data))
	}
	for i := range a.Data {
		if x, y := a.Data[i], b.Data[i]; x.Row != 2+i/2 || x.K != y.K || x.Residual != y.Residual {
			t.Errorf("point %d: %+v and %+v", i, x, y)
		}
	}
}
