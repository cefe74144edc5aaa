// Package reference is for tests: it reads the published and reference data of
// testdata/published and compares numbers with them.
package reference

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strconv"
	"strings"
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

// Records reads a table as text: one map a row, from heading to cell.
func Records(t testing.TB, name string) []map[string]string {
	t.Helper()
	rs := rows(t, name)
	out := make([]map[string]string, len(rs)-1)
	for i, r := range rs[1:] {
		out[i] = make(map[string]string, len(r))
		for j, cell := range r {
			out[i][rs[0][j]] = cell
		}
	}
	return out
}

// Number reads one cell.
func Number(t testing.TB, cell string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(strings.TrimSpace(cell), 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// Table reads columns of a data file by heading.
func Table(t testing.TB, name string, headings ...string) [][]float64 {
	t.Helper()
	rs := rows(t, name)
	out := make([][]float64, len(headings))
	for j, h := range headings {
		at := slices.Index(rs[0], h)
		if at < 0 {
			t.Fatalf("%s: no column %q", name, h)
		}
		for _, r := range rs[1:] {
			out[j] = append(out[j], Number(t, r[at]))
		}
	}
	return out
}

// Key names one value of a golden file.
type Key struct{ Dataset, Fit, Quantity string }

// Values are those of a golden file.
type Values map[Key]float64

// Golden reads a golden_*.csv file: dataset, fit, quantity, value. What R gives as NA
// is left out.
func Golden(t testing.TB, name string) Values {
	t.Helper()
	g := Values{}
	for _, r := range Records(t, name) {
		if v := r["value"]; v != "NA" && v != "" {
			g[Key{r["dataset"], r["fit"], r["quantity"]}] = Number(t, v)
		}
	}
	if len(g) == 0 {
		t.Fatalf("%s: no values", name)
	}
	return g
}

// Of is one value, which must exist.
func (g Values) Of(t testing.TB, dataset, fit, quantity string) float64 {
	t.Helper()
	v, ok := g[Key{dataset, fit, quantity}]
	if !ok {
		t.Fatalf("no reference value of %s, %s, %s", dataset, fit, quantity)
	}
	return v
}

// Fit gives all quantities of one fit; empty where there are none.
func (g Values) Fit(dataset, fit string) map[string]float64 {
	out := map[string]float64{}
	for k, v := range g {
		if k.Dataset == dataset && k.Fit == fit {
			out[k.Quantity] = v
		}
	}
	return out
}

// SyntheticSets are the names of the eight invented sets.
var SyntheticSets = []string{"s1_straight", "s2_tn_curved", "s3_parallel", "s4_series", "s5_hetero", "s6_replicates", "s7_vft", "s8_tiny6"}

// Data are the columns of a set of rate constants.
type Data struct {
	T, K   []float64 // K; the unit of the data
	SigmaK []float64 // standard uncertainty of K; nil where none is stated
}

// Synthetic reads one of the SyntheticSets.
func Synthetic(t testing.TB, name string) Data {
	t.Helper()
	file := "synthetic/" + name + ".csv"
	c := Table(t, file, "T_K", "k")
	d := Data{T: c[0], K: c[1]}
	if slices.Contains(rows(t, file)[0], "sigma_k") {
		d.SigmaK = Table(t, file, "sigma_k")[0]
	}
	return d
}

// Ones are equal variances.
func (d Data) Ones() []float64 {
	v := make([]float64, len(d.T))
	for i := range v {
		v[i] = 1
	}
	return v
}

// Stated are the squared standard uncertainties of k, or of ln k; Ones where none are
// stated.
func (d Data) Stated(inK bool) []float64 {
	v := d.Ones()
	for i, u := range d.SigmaK {
		if !inK {
			u /= d.K[i]
		}
		v[i] = u * u
	}
	return v
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

// Within fails the test unless got is want to within tol. NaN is never within.
func Within(t testing.TB, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.12g, want %.12g ± %.3g", what, got, want, tol)
	}
}
