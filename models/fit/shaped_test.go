package fit

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"onebarrier/models"
)

// publishedSample reads T_K and k of a table under testdata/published.
func publishedSample(t testing.TB, path string) *Sample {
	t.Helper()
	var temp, k, v []float64
	for _, row := range readCSV(t, filepath.Join(published, path)) {
		temp = append(temp, number(t, row["T_K"]))
		k = append(k, number(t, row["k"]))
		v = append(v, 1)
	}
	s, err := NewSample(Relative, temp, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// golden reads quantity -> value of one fit of a golden file.
func golden(t testing.TB, file, dataset, fit string) map[string]float64 {
	t.Helper()
	g := map[string]float64{}
	for _, row := range readCSV(t, filepath.Join(published, file)) {
		if row["dataset"] == dataset && row["fit"] == fit {
			g[row["quantity"]] = number(t, row["value"])
		}
	}
	if len(g) == 0 {
		t.Fatalf("%s has no %s/%s", file, dataset, fit)
	}
	return g
}

// parallelNames are the golden files' names of the canonical parameters.
var parallelNames = []string{"lnk1ref", "E1", "lnk2ref", "E2"}

// TestParallelGolden checks fits of parallel against golden_fits_mp.csv, least
// squares in 50-digit arithmetic.
func TestParallelGolden(t *testing.T) {
	for _, set := range []string{"s2_tn_curved", "s3_parallel", "s6_replicates"} {
		s := publishedSample(t, "synthetic/"+set+".csv")
		g := golden(t, "golden_fits_mp.csv", set, "par2")
		res := Fit(s, models.Parallel{})
		if res.Status != Converged {
			t.Errorf("%s: %v: %s", set, res.Status, res.Reason)
			continue
		}
		check := func(what string, got, want, least float64) {
			t.Helper()
			if d := digits(got, want, 16); !(d >= least) {
				t.Errorf("%s: %s = %.17g, want %.17g: %.1f digits", set, what, got, want, d)
			} else if testing.Verbose() {
				t.Logf("%s: %s: %.1f digits", set, what, d)
			}
		}
		check("RSS", res.RSS, g["rss"], 10)
		for i, a := range parallelNames {
			check(a, res.P[i], g["coef:"+a], 10)
			check("se "+a, math.Sqrt(res.Cov[4*i+i]), g["se:"+a], 9)
			for j, b := range parallelNames[i:] {
				want, ok := g[fmt.Sprintf("cov[%s,%s]", a, b)]
				if !ok {
					t.Fatalf("no covariance of %s and %s", a, b)
				}
				check("cov "+a+" "+b, res.Cov[4*i+i+j], want, 9)
			}
		}
	}
}

// TestParallelPublishedSums recovers evaluated rate expressions that are sums of two
// exponentials from noise-free tables made from them.
func TestParallelPublishedSums(t *testing.T) {
	calorie := 4.184 // thermochemical, J: baulch_o_h2_2 states E in cal/mol
	found := 0
	for _, row := range readCSV(t, filepath.Join(published, "expressions/expressions.csv")) {
		id := row["id"]
		table := "expressions/table_" + id + ".csv"
		if !strings.HasPrefix(row["form"], "A1*exp") || id == "gierczak_oh_acetone_all" {
			continue
		}
		found++
		unit := models.GasConstant
		if strings.Contains(row["form"], "cal/mol") {
			unit = calorie
		}
		s := publishedSample(t, table)
		res := Fit(s, models.Parallel{})
		if res.Status != Converged {
			t.Errorf("%s: %v: %s", id, res.Status, res.Reason)
			continue
		}
		x := 1 / (models.GasConstant * s.TRef)
		for path := range 2 {
			a := number(t, row[fmt.Sprintf("p%d", 2*path+1)])
			e := number(t, row[fmt.Sprintf("p%d", 2*path+2)]) * unit
			gotE := res.P[2*path+1]
			// A zero barrier is compared on the scale of the other one.
			scale := math.Max(math.Abs(e), math.Abs(res.P[3]))
			if !(math.Abs(gotE-e) <= 1e-9*scale) {
				t.Errorf("%s: E%d = %.12g, want %.12g", id, path+1, gotE, e)
			}
			if got := math.Exp(res.P[2*path] + gotE*x); !(math.Abs(got-a) <= 1e-9*a) {
				t.Errorf("%s: A%d = %.12g, want %.12g: %g", id, path+1, got, a, got/a-1)
			}
		}
	}
	if found != 4 {
		t.Errorf("%d published sums, want 4", found)
	}
}

// series is barriers in series, 1/k = 1/k1 + 1/k2, for the kernel's other sign.
type series struct{ models.Parallel }

func (series) Info() models.Info {
	info := models.Parallel{}.Info()
	info.Name, info.Family, info.Trend = "series", "series", models.TrendFalls
	return info
}

func (series) LnK(tRef float64, t, p, f, jac []float64) {
	// ln k = -ln(exp(-l1) + exp(-l2)) is the sum of paths with every sign turned.
	q := []float64{-p[0], -p[1], -p[2], -p[3]}
	models.Parallel{}.LnK(tRef, t, q, f, jac)
	for i := range f {
		f[i] = -f[i]
	}
}

func (series) Shape(x, q, g, dg, d2g []float64) {
	models.Parallel{}.Shape(x, q, g, dg, d2g)
	for _, v := range [][]float64{g, dg, d2g} {
		for i := range v {
			v[i] = -v[i]
		}
	}
}

func (series) FromShape(a, e float64, q, p []float64) {
	p[0], p[1], p[2], p[3] = a, e, a-q[0], e-q[1]
	if p[3] < p[1] {
		p[0], p[1], p[2], p[3] = p[2], p[3], p[0], p[1]
	}
}

// TestSeriesGolden checks the kernel's other sign against golden_fits_mp.csv.
func TestSeriesGolden(t *testing.T) {
	for _, set := range []string{"s4_series", "s7_vft"} {
		g := golden(t, "golden_fits_mp.csv", set, "ser2")
		res := Fit(publishedSample(t, "synthetic/"+set+".csv"), series{})
		if res.Status != Converged {
			t.Errorf("%s: %v: %s", set, res.Status, res.Reason)
			continue
		}
		if d := digits(res.RSS, g["rss"], 16); !(d >= 10) {
			t.Errorf("%s: RSS = %.17g, want %.17g", set, res.RSS, g["rss"])
		}
		for i, a := range parallelNames {
			if d := digits(res.P[i], g["coef:"+a], 16); !(d >= 10) {
				t.Errorf("%s: %s = %.17g, want %.17g", set, a, res.P[i], g["coef:"+a])
			}
			if d := digits(math.Sqrt(res.Cov[5*i]), g["se:"+a], 16); !(d >= 9) {
				t.Errorf("%s: se of %s = %.17g, want %.17g", set, a, math.Sqrt(res.Cov[5*i]), g["se:"+a])
			}
		}
	}
}

// TestParallelExcluded: data made with E falling, or with one barrier and no
// scatter, leave nothing for a second path to describe.
func TestParallelExcluded(t *testing.T) {
	for _, set := range []string{"s4_series", "s7_vft"} {
		if res := Fit(publishedSample(t, "synthetic/"+set+".csv"), models.Parallel{}); res.Status != Excluded {
			t.Errorf("%s: parallel is %v: %s", set, res.Status, res.Reason)
		}
	}
	if res := Fit(publishedSample(t, "synthetic/s3_parallel.csv"), series{}); res.Status != Excluded {
		t.Errorf("s3_parallel: series is %v: %s", res.Status, res.Reason)
	}
	s := made(t, 12, 280, 340, []float64{-5, 60e3}, models.Straight(), nil)
	if res := Fit(s, models.Parallel{}); res.Status != Excluded {
		t.Errorf("exact straight line: parallel is %v: %s", res.Status, res.Reason)
	}
}

// TestParallelNotIdentified: one point too high at the hot end asks for a path that
// is felt there alone, whatever its barrier.
func TestParallelNotIdentified(t *testing.T) {
	s := made(t, 8, 280, 340, []float64{-5, 60e3}, models.Straight(), func(i int) float64 {
		if i == 7 {
			return 0.3
		}
		return 1e-3 * float64(i%2)
	})
	res := Fit(s, models.Parallel{})
	if res.Status != NotIdentified || res.Cov != nil || res.Reason == "" {
		t.Errorf("parallel is %v (%s), P = %v", res.Status, res.Reason, res.P)
	}
	if res.RSS > 1e-5 {
		t.Errorf("RSS = %g: the high point was not described", res.RSS)
	}
}

// made is a sample at n temperatures evenly spaced in 1/T, made from a curve with
// the canonical parameters p at the middle of 1/T and errors added to ln k.
func made(t testing.TB, n int, low, high float64, p []float64, c models.Curve, noise func(i int) float64) *Sample {
	t.Helper()
	temp, k, v := make([]float64, n), make([]float64, n), make([]float64, n)
	f := make([]float64, n)
	for i := range temp {
		x := 1/high + (1/low-1/high)*float64(n-1-i)/float64(n-1)
		temp[i], v[i] = 1/x, 1
	}
	c.LnK(2/(1/low+1/high), temp, p, f, nil)
	for i := range k {
		if noise != nil {
			f[i] += noise(i)
		}
		k[i] = math.Exp(f[i])
	}
	s, err := NewSample(Relative, temp, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}
