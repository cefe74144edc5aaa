package reference

import (
	"math"
	"testing"
)

// A comparison that cannot fail is worth nothing: NaN must not pass, nor what is
// just outside.
func TestAgrees(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		got, want, tol float64
		ok             bool
	}{
		{1, 1, 0, true}, {1 + 1e-9, 1, 1e-8, true}, {-2, -2, 0, true}, {0, 0, 0, true},
		{1 + 1e-7, 1, 1e-8, false}, {1, -1, 1, false}, {1e-300, 0, 1, false},
		{nan, 1, 1, false}, {1, nan, 1, false}, {nan, nan, 1, false}, {1, 1, nan, false}, {inf, 1, 1, false},
	} {
		if Agrees(c.got, c.want, c.tol) != c.ok {
			t.Errorf("Agrees(%g, %g, %g) is %t", c.got, c.want, c.tol, !c.ok)
		}
	}
}

// Close and Within fail where Agrees does, and NaN fails both.
func TestComparisonsFail(t *testing.T) {
	for _, c := range []struct {
		got, want float64
		ok        bool
	}{{1, 1, true}, {1.2, 1, false}, {math.NaN(), 1, false}, {1, math.NaN(), false}, {math.Inf(1), 1, false}} {
		for name, compare := range map[string]func(testing.TB, string, float64, float64, float64){"Close": Close, "Within": Within} {
			var probe testing.T
			if compare(&probe, "", c.got, c.want, 0.1); probe.Failed() == c.ok {
				t.Errorf("%s(%g, %g): failed is %t", name, c.got, c.want, !c.ok)
			}
		}
	}
}

// From the files themselves.
func TestFilesAreRead(t *testing.T) {
	g := Golden(t, "golden_fits.csv")
	Close(t, "n of s1", g.Of(t, "s1_straight", "mod", "n_exp"), -1.9272444011085772, 0)
	if f := g.Fit("s1_straight", "mod"); f["n_exp"] != g.Of(t, "s1_straight", "mod", "n_exp") || len(f) < 30 {
		t.Errorf("the fit has %d values", len(f))
	}
	if f := g.Fit("s1_straight", "none"); len(f) != 0 {
		t.Errorf("a fit that does not exist has %v", f)
	}
	if d := Synthetic(t, "s1_straight"); len(d.T) != 12 || d.T[0] != 280 || d.K[0] != 4.13275e-04 || d.SigmaK != nil || d.Stated(false)[11] != 1 {
		t.Errorf("s1 read as %v", d)
	}
	d := Synthetic(t, "s5_hetero")
	if len(d.SigmaK) != 15 {
		t.Fatalf("s5 has sigma_k %v", d.SigmaK)
	}
	u := d.SigmaK[3]
	Close(t, "variance of k", d.Stated(true)[3], u*u, 1e-15)
	Close(t, "variance of ln k", d.Stated(false)[3], u*u/(d.K[3]*d.K[3]), 1e-15)
	if r := Records(t, "expressions/expressions.csv"); len(r) != 13 || r[0]["reaction"] != "OH + CH4" {
		t.Errorf("expressions read as %v", r)
	}
}
