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

func TestGoldenIsRead(t *testing.T) {
	g := Golden(t, "golden_fits.csv")
	// From the file itself: s1_straight, mod, n_exp.
	Close(t, "n of s1", g[Key{"s1_straight", "mod", "n_exp"}], -1.9272444011085772, 0)
	if c := Table(t, "synthetic/s1_straight.csv", "T_K", "k"); len(c[0]) != 12 || c[1][0] != 4.13275e-04 {
		t.Errorf("s1 read as %v", c)
	}
}
