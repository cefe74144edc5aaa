package diagnostics

import (
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// optimum is an invented enzyme: E = 50 kJ/mol, half of it lost at half K.
func optimum(n int, half, sd float64, rng *rand.Rand) *dataset.Set {
	var t, k []float64
	for i := range n {
		ti := 285 + 45*float64(i)/float64(n-1)
		ln := 25 - 50000/(models.GasConstant*ti) - math.Log1p(math.Exp(-300000/models.GasConstant*(1/ti-1/half)))
		t, k = append(t, ti), append(k, math.Exp(ln+sd*rng.NormFloat64()))
	}
	return setOf(t, k, nil)
}

func TestRateMaximum(t *testing.T) {
	for _, n := range []int{7, 10, 16} {
		for _, half := range []float64{318, 323, 326} {
			hits := 0
			const sets = 40
			for i := range sets {
				hits += len(screened(t, optimum(n, half, 0.03, rand.New(rand.NewPCG(uint64(i), 7))), lean(), (*assessor).rateMaximum))
			}
			t.Logf("N = %d, half lost at %g K: %d of %d", n, half, hits, sets)
			if n == 10 && half == 318 && hits < 36 {
				t.Errorf("found in %d of %d", hits, sets)
			}
		}
	}
}

// The finding says where, and how to go on.
func TestRateMaximumSays(t *testing.T) {
	a := mustAssess(t, optimum(10, 318, 0.03, rand.New(rand.NewPCG(1, 7))), quick())
	i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "rate-maximum" })
	if i < 0 {
		t.Fatal("no maximum found")
	}
	if f := a.Findings[i]; strings.Contains(f.Cure, "--t-max") || !strings.Contains(f.Message, "up to 315 K") || f.Values["t_k"] != 315 {
		t.Errorf("%+v", f)
	}
}

// What is left at half of the largest k or less has the barrier of the active enzyme, no
// maximum, and no curvature but by chance; up to the maximum itself it is curved.
func TestCutBelowTheMaximum(t *testing.T) {
	const sets = 20
	curved, off := 0, 0
	for i := range sets {
		set := optimum(20, 326, 0.01, rand.New(rand.NewPCG(uint64(i), 7)))
		a := mustAssess(t, set, quick())
		at := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "rate-maximum" })
		if at < 0 {
			continue
		}
		cure := a.Findings[at].Cure
		first, flag, ok := strings.Cut(cure, "--t-max ")
		if !ok || !strings.Contains(first, "reversible-inactivation") {
			t.Fatalf("set %d: cure %q", i, cure)
		}
		high, err := strconv.ParseFloat(strings.TrimSuffix(flag, "K"), 64)
		if err != nil {
			t.Fatal(err)
		}
		cut := *set
		cut.Points = slices.DeleteFunc(slices.Clone(set.Points), func(p dataset.Point) bool { return p.T > high })
		b := mustAssess(t, &cut, quick())
		if slices.Contains(codesOf(b), "rate-maximum") {
			t.Errorf("set %d: a maximum below %g K", i, high)
		}
		if b.Verdict.State.Curved() {
			curved++
		}
		line := b.Fits["straight"]
		if math.Abs(line.P[1]-50e3) > 2.5*math.Sqrt(line.Cov[3]) {
			off++
		}
	}
	if curved > 3 || off > 2 { // of 20 at 5 %, and at 1 to 5 % by Student's t
		t.Errorf("%d of %d sets are curved, in %d E is not that of the active enzyme", curved, sets, off)
	}
}

// The number keeps to its side of both temperatures, in the fewest decimals.
func TestNumberBetween(t *testing.T) {
	for _, c := range []struct {
		low, high float64
		want      string
	}{{310, 315, "312"}, {315.15, 319.15, "317"}, {300.1, 300.9, "300.5"}, {300.15000000000003, 300.17, "300.16"}, {299.996, 300.004, "300"}, {300, 300.6, "300.3"}, {299.4, 300, "299.7"}} {
		if got := numberBetween(c.low, c.high); got != c.want {
			t.Errorf("between %g and %g: %s, want %s", c.low, c.high, got, c.want)
		}
	}
}

// Straight data of any slope, E = 0 included, hardly ever look like a maximum: fewer
// than 0.5 % of 2000 sets each.
func TestRateMaximumFalseAlarms(t *testing.T) {
	if testing.Short() {
		t.Skip("a simulation of one goroutine")
	}
	o := lean()
	for _, n := range []int{5, 8, 12, 20} {
		for _, e := range []float64{0, 500, 2000, -2000, 60000} {
			for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
				hits, sets := 0, 2000
				if model == fit.Absolute {
					sets = 200
				}
				for i := range sets {
					s := lineSet(n, 280, 340, e, 0.03, uint64(i))
					o.ErrorModel = model
					if len(screened(t, s, o, (*assessor).rateMaximum)) > 0 {
						hits++
					}
				}
				if float64(hits) > 0.005*float64(sets) {
					t.Errorf("N = %d, E = %g J/mol, %s: %d of %d", n, e, model, hits, sets)
				}
			}
		}
	}
}

// Errors in k leave ln k little scatter at the hot end, where neighbours of a fine
// series overtake each other: no maximum.
func TestRateMaximumOfManyNoisyPoints(t *testing.T) {
	if testing.Short() {
		t.Skip("a simulation of one goroutine")
	}
	o := lean()
	o.ErrorModel = fit.Absolute
	for seed := range uint64(10) {
		rng := rand.New(rand.NewPCG(seed, 21))
		var ts, ks []float64
		for i := range 2000 {
			ti := 280 + 0.05*float64(i)
			ts, ks = append(ts, ti), append(ks, math.Exp(20-6000/ti)*(1+0.02*rng.NormFloat64()))
		}
		if len(screened(t, setOf(ts, ks, nil), o, (*assessor).rateMaximum)) > 0 {
			t.Errorf("seed %d: a maximum of straight data", seed)
		}
	}
}

// Where one point decides n, the fall of k above its maximum still stands: invented data of
// an enzyme half of which is inactive at 331 K.
func TestMaximumStandsBesideADecidingPoint(t *testing.T) {
	temps := []float64{285.00, 289.55, 294.09, 298.64, 303.18, 307.73, 312.27, 316.82, 321.36, 325.91, 330.45, 335.00}
	k := []float64{4.56895e+00, 6.39740e+00, 9.21358e+00, 1.22014e+01, 1.76523e+01, 2.26042e+01, 3.16512e+01, 4.06666e+01, 5.63545e+01, 6.95225e+01, 5.53779e+01, 8.43690e+00}
	a := mustAssess(t, setOf(temps, k, nil), quick())
	found := 0
	for _, f := range a.Findings {
		switch f.Code {
		case "rate-maximum":
			found++
		case "deciding-point":
			found++
			if !strings.Contains(f.Cure, "on the 2 temperatures above it, and stands by itself: see rate-maximum") || strings.Contains(f.Cure, "no finding") {
				t.Errorf("cure %q", f.Cure)
			}
		}
	}
	if found != 2 {
		t.Errorf("%v", codesOf(a))
	}
}
