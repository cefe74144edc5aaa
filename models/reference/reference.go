// Package reference is for tests: it reads the published and reference data of
// testdata/published and compares numbers with them.
package reference

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"testing"
)

// Path is where a file of testdata/published lies.
func Path(name string) string {
	_, here, _, _ := runtime.Caller(0)
	return filepath.Join(filepath.Dir(here), "..", "..", "testdata", "published", filepath.FromSlash(name))
}

func rows(t testing.TB, name string) [][]string {
	t.Helper()
	f, err := os.Open(Path(name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return r
}

// Key names one value of a golden file.
type Key struct{ Dataset, Fit, Quantity string }

// Golden reads a golden_*.csv file: dataset, fit, quantity, value.
func Golden(t testing.TB, name string) map[Key]float64 {
	t.Helper()
	g := map[Key]float64{}
	for _, r := range rows(t, name)[1:] {
		v, err := strconv.ParseFloat(r[3], 64)
		if err != nil {
			continue // NA: R had no value either
		}
		g[Key{r[0], r[1], r[2]}] = v
	}
	if len(g) == 0 {
		t.Fatalf("%s: no values", name)
	}
	return g
}

// Table reads columns of a data file by heading.
func Table(t testing.TB, name string, headings ...string) [][]float64 {
	t.Helper()
	rs := rows(t, name)
	out := make([][]float64, len(headings))
	for j, h := range headings {
		at := -1
		for i, have := range rs[0] {
			if have == h {
				at = i
			}
		}
		if at < 0 {
			t.Fatalf("%s: no column %q", name, h)
		}
		for _, r := range rs[1:] {
			v, err := strconv.ParseFloat(r[at], 64)
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			out[j] = append(out[j], v)
		}
	}
	return out
}

// Agrees reports whether got is want to within tol·|want|. NaN never agrees.
func Agrees(got, want, tol float64) bool { return math.Abs(got-want) <= tol*math.Abs(want) }

// Close fails the test unless got is want to within tol·|want|.
func Close(t testing.TB, what string, got, want, tol float64) {
	t.Helper()
	if !Agrees(got, want, tol) {
		t.Errorf("%s: got %.17g, want %.17g (off by %.2g relative, allowed %.2g)", what, got, want, math.Abs(got-want)/math.Abs(want), tol)
	}
}
