package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// parallelNames are the golden files' names of the canonical parameters.
var parallelNames = []string{"lnk1ref", "E1", "lnk2ref", "E2"}

// TestParallelGolden checks fits of parallel against golden_fits_mp.csv, least
// squares in 50-digit arithmetic.
func TestParallelGolden(t *testing.T) {
	for _, set := range []string{"s2_tn_curved", "s3_parallel", "s6_replicates"} {
		s := synthetic(t, set, Relative)
		g := reference.Golden(t, "golden_fits_mp.csv").Fit(set, "par2")
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
	for _, row := range reference.Records(t, "expressions/expressions.csv") {
		id := row["id"]
		if !strings.HasPrefix(row["form"], "A1*exp") || id == "gierczak_oh_acetone_all" {
			continue
		}
		found++
		unit := models.GasConstant
		if strings.Contains(row["form"], "cal/mol") {
			unit = calorie
		}
		d := reference.Table(t, "expressions/table_"+id+".csv", "T_K", "k")
		s := mustSample(t, Relative, d[0], d[1], ones(len(d[0])))
		res := Fit(s, models.Parallel{})
		if res.Status != Converged {
			t.Errorf("%s: %v: %s", id, res.Status, res.Reason)
			continue
		}
		x := 1 / (models.GasConstant * s.TRef)
		for path := range 2 {
			a := reference.Number(t, row[fmt.Sprintf("p%d", 2*path+1)])
			e := reference.Number(t, row[fmt.Sprintf("p%d", 2*path+2)]) * unit
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

// TestParallelAtAnyPrecision: what parallel gains over the line in pure scatter, and
// how its fit ends, hardly depends on the size of the scatter, since small shapes are
// all sums of a parabola, a cubic and exponentials at the ends.
func TestParallelAtAnyPrecision(t *testing.T) {
	var first float64
	for _, size := range []float64{1e-2, 1e-4, 1e-6, 1e-8} {
		gain := 0.0
		for seed := range uint64(30) {
			rng := rand.New(rand.NewPCG(seed, 1))
			s := made(t, 12, 280, 340, []float64{-5, 60e3}, models.Straight(), func(int) float64 { return size * rng.NormFloat64() })
			if r := Fit(s, models.Parallel{}); r.Usable() {
				gain += 1 - r.RSS/Fit(s, models.Straight()).RSS
			}
		}
		if first == 0 {
			first = gain
		}
		if !(math.Abs(gain/first-1) < 0.02) {
			t.Errorf("scatter %g: summed gain %.4g, with 0.01 %.4g", size, gain, first)
		}
	}
}

// TestSeriesGolden checks the kernel's other sign against golden_fits_mp.csv.
func TestSeriesGolden(t *testing.T) {
	for _, set := range []string{"s4_series", "s7_vft"} {
		g := reference.Golden(t, "golden_fits_mp.csv").Fit(set, "ser2")
		res := Fit(synthetic(t, set, Relative), models.Series{})
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
		if res := Fit(synthetic(t, set, Relative), models.Parallel{}); res.Status != Excluded {
			t.Errorf("%s: parallel is %v: %s", set, res.Status, res.Reason)
		}
	}
	if res := Fit(synthetic(t, "s3_parallel", Relative), models.Series{}); res.Status != Excluded {
		t.Errorf("s3_parallel: series is %v: %s", res.Status, res.Reason)
	}
	// An exact line, and one whose ln k are rounded to 13 digits: the curvature of
	// that rounding is none.
	for _, decimals := range []float64{math.Inf(1), 1e12} {
		for seed := range 5 {
			s := made(t, 12, 280, 340, []float64{-5, 60e3 + float64(seed)}, models.Straight(), nil)
			for i, y := range s.Y {
				if !math.IsInf(decimals, 1) {
					s.Y[i] = math.Round(y*decimals) / decimals
				}
			}
			if res := Fit(s, models.Parallel{}); res.Status != Excluded {
				t.Errorf("exact straight line: parallel is %v: %s", res.Status, res.Reason)
			}
		}
	}
}

// TestParallelNotIdentified: one point too high at the hot end asks for a path that
// is felt there alone, whatever its barrier.
func TestParallelNotIdentified(t *testing.T) {
	s := highEnd(t)
	// The same on a line that falls with T: the second barrier stays below 1000
	// kJ/mol, and their difference is what knows no bound.
	falling := made(t, 8, 280, 340, []float64{-5, -200e3}, models.Straight(), func(i int) float64 {
		return 0.3 * float64(i/7)
	})
	if res := Fit(falling, models.Parallel{}); res.Status != NotIdentified {
		t.Errorf("falling: parallel is %v, P = %v", res.Status, res.P)
	}
	res := Fit(s, models.Parallel{})
	if res.Status != NotIdentified || res.Cov != nil || res.Reason == "" {
		t.Errorf("parallel is %v (%s), P = %v", res.Status, res.Reason, res.P)
	}
	if res.RSS > 1e-5 {
		t.Errorf("RSS = %g: the high point was not described", res.RSS)
	}
}

func highEnd(t testing.TB) *Sample {
	return made(t, 8, 280, 340, []float64{-5, 60e3}, models.Straight(), func(i int) float64 {
		if i == 7 {
			return 0.3
		}
		return 1e-3 * float64(i%2)
	})
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
	return mustSample(t, Relative, temp, k, v)
}

// TestParallelProfileAgainstR checks profile intervals against golden_fits.csv:
// prof_t95_* from R, S(θ) = S_min (1 + F(1, ν)/ν).
func TestParallelProfileAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_fits.csv")
	compared := 0
	for _, c := range []struct {
		set, fit string
		curve    models.Shaped
	}{
		{"s2_tn_curved", "par2", models.Parallel{}},
		{"s3_parallel", "par2", models.Parallel{}},
		{"s6_replicates", "par2", models.Parallel{}},
		{"s4_series", "ser2", models.Series{}},
		{"s7_vft", "ser2", models.Series{}},
	} {
		s := synthetic(t, c.set, Relative)
		r := Fit(s, c.curve)
		for j, name := range parallelNames {
			param := []string{"ln_k1_ref", "E1", "ln_k2_ref", "E2"}[j]
			lo, okLo := g[reference.Key{Dataset: c.set, Fit: c.fit, Quantity: "prof_t95_lo:" + name}]
			hi, okHi := g[reference.Key{Dataset: c.set, Fit: c.fit, Quantity: "prof_t95_hi:" + name}]
			if !okLo && !okHi {
				continue
			}
			e := ProfileShaped(s, r, param, 0.95)
			if okLo {
				compared++
				reference.Close(t, c.set+" lower "+param, e.Lower, lo, 1e-9)
			}
			if okHi {
				compared++
				reference.Close(t, c.set+" upper "+param, e.Upper, hi, 1e-9)
			}
		}
	}
	if compared != 36 {
		t.Errorf("%d ends compared, want 36", compared)
	}
}

// TestParallelProfileOfLnA checks the intervals of ln A against R 4.2.2: nls.lm of
// minpack.lm 1.2-3 on ln k with ln A held, uniroot on S(θ) = S_min (1 + F(1, ν)/ν).
func TestParallelProfileOfLnA(t *testing.T) {
	for _, c := range []struct {
		set, param              string
		value, se, lower, upper float64
	}{
		{"s3_parallel", "ln_A1", 8.33088644376, 0.0536283032, 8.2187720213, 8.441026154},
		{"s3_parallel", "ln_A2", 28.9483427815, 0.451408826, 28.037416451, 29.898821228},
		{"s2_tn_curved", "ln_A1", 25.0018075084, 0.114293954, 24.697209232, 25.257145634},
		{"s2_tn_curved", "ln_A2", 28.5649233748, 0.147148287, 28.226945132, 28.94718957},
	} {
		s := synthetic(t, c.set, Relative)
		e := ProfileShaped(s, Fit(s, models.Parallel{}), c.param, 0.95)
		reference.Close(t, c.set+" "+c.param, e.Value, c.value, 1e-9)
		reference.Close(t, c.set+" se "+c.param, e.StdError, c.se, 1e-7)
		reference.Close(t, c.set+" lower "+c.param, e.Lower, c.lower, 1e-9)
		reference.Close(t, c.set+" upper "+c.param, e.Upper, c.upper, 1e-9)
		if e.Open != OpenNone {
			t.Errorf("%s %s: open %q", c.set, c.param, e.Open)
		}
	}
}

// TestParallelProfileOpen: in the set of TestParallelNotIdentified any barrier of the
// second path from somewhere on describes the one high point, and so does any
// prefactor that goes with it.
func TestParallelProfileOpen(t *testing.T) {
	s := highEnd(t)
	r := Fit(s, models.Parallel{})
	for _, param := range []string{"E2", "ln_A2"} {
		e := ProfileShaped(s, r, param, 0.95)
		if e.Open != OpenUpper || !math.IsInf(e.Upper, 1) || !(e.Lower > 0) || !math.IsNaN(e.Value) {
			t.Errorf("%s: %+v, want a finite lower end and an open upper one", param, e)
		}
	}
	if e := ProfileShaped(s, r, "E1", 0.95); e.Open != OpenNone || !(e.Lower > 59e3 && e.Upper < 61e3) {
		t.Errorf("E1: %+v, want an interval about 60 kJ/mol", e)
	}
}

// Computed data of two paths have no scatter: their profile is a point, and looking
// for its ends must end.
func TestParallelProfileWithoutScatter(t *testing.T) {
	var temp, k, v []float64
	for i := range 11 {
		ti := 280 + 10*float64(i)
		temp, v = append(temp, ti), append(v, 1)
		k = append(k, 1e12*math.Exp(-66.4e3/(models.GasConstant*ti))+1e19*math.Exp(-131e3/(models.GasConstant*ti)))
	}
	s, err := NewSample(Relative, temp, k, v)
	if err != nil {
		t.Fatal(err)
	}
	r := Fit(s, models.Parallel{})
	for param, want := range map[string]float64{"E1": 66.4e3, "E2": 131e3} {
		e := ProfileShaped(s, r, param, 0.95)
		reference.Close(t, param, e.Value, want, 1e-9)
		if e.Lower != e.Value || e.Upper != e.Value {
			t.Errorf("%s: from %g to %g", param, e.Lower, e.Upper)
		}
	}
}

// TestProfileWhereAPathMayBeLost: a path too slow to matter beside another, or a step too
// fast to matter before another, leaves a straight line. Where that lies within the 95 %
// set, no value of the lost barrier, far enough, and no prefactor that loses it is outside.
func TestProfileWhereAPathMayBeLost(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 9))
	within, outside := 0, 0
	for range 60 {
		s := made(t, 10, 280, 340, []float64{-5, 60e3}, models.Straight(), func(int) float64 { return 0.03 * rng.NormFloat64() })
		line := Fit(s, models.Straight()).RSS
		for _, c := range []models.Shaped{models.Parallel{}, models.Series{}} {
			r := Fit(s, c)
			if !r.Usable() {
				continue
			}
			quantile := r.quantile(0.95)
			if line >= r.RSS*(1+square(quantile)/float64(r.Nu)) {
				outside++
				continue
			}
			within++
			losing := 1.0 // the sign of ln A that loses a step
			if c == (models.Parallel{}) {
				losing = -1
			}
			for param, dir := range map[string]float64{"E1": -1, "E2": 1, "ln_A1": losing, "ln_A2": losing} {
				e := ProfileShaped(s, r, param, 0.95)
				end := e.Upper
				if dir < 0 {
					end = e.Lower
				}
				if !math.IsInf(end, int(dir)) {
					t.Errorf("%s: %s from %g to %g, but the line has RSS %g and the curve %g", c.Info().Name, param, e.Lower, e.Upper, line, r.RSS)
				}
			}
		}
	}
	if within < 20 || outside < 1 {
		t.Errorf("%d fits with the line within the set, %d without", within, outside)
	}
}
