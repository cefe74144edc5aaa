package diagnostics

import (
	"math"
	"strings"
	"testing"

	"onebarrier/models/fit"
)

// A Monte Carlo p-value that no draw reached is a bound, and one that underflowed is
// not 0.
func TestLeastPValues(t *testing.T) {
	for _, c := range []struct{ p, draws, want any }{
		{1. / 20000, 19999, "p ≤ 5×10^-5"}, {2. / 20000, 19999, "p = 0.0001"}, {0.3, 19999, "p = 0.3"}, {1. / 100, 99, "p ≤ 0.01"},
	} {
		b := &SecondBarrier{PValue: Real(c.p.(float64)), Draws: c.draws.(int)}
		if got := b.PText(); got != c.want {
			t.Errorf("p = %v of %v draws: %q, want %q", c.p, c.draws, got, c.want)
		}
	}
	for p, want := range map[float64]string{0: "p < 10^-300", 1e-310: "p < 10^-300", 1e-20: "p = 1×10^-20", 0.04: "p = 0.04"} {
		if got := pIs(p); got != want {
			t.Errorf("%g: %q, want %q", p, got, want)
		}
	}
	for _, c := range []struct {
		a    Adequacy
		want bool
	}{{Adequacy{TestRuns, 2, 1. / 2000}, true}, {Adequacy{TestRuns, 2, 1. / 500}, true}, {Adequacy{TestRuns, 2, 2. / 2000}, false}, {Adequacy{TestChiSquared, 2, 1. / 2000}, false}} {
		if c.a.AtFloor() != c.want {
			t.Errorf("%+v: at its floor is %v", c.a, !c.want)
		}
	}
}

// The end of the data is no estimate of where a second path takes over.
func TestCrossoverText(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		from, to float64
		want     string
	}{
		{353.57, 900, "above 354 K"}, {353.57, 899.9999999, "above 354 K"}, {220, 610, "below 610 K"}, {353.57, 600, "354 to 600 K"},
		{353.57, 361.2, "353.6 to 361.2 K"}, {220, 900, "somewhere in the measured range"}, {nan, nan, ""},
	} {
		b := &SecondBarrier{Crossover: [2]Real{Real(c.from), Real(c.to)}}
		if got := b.CrossoverText(220, 900); got != c.want {
			t.Errorf("%g to %g: %q, want %q", c.from, c.to, got, c.want)
		}
	}
}

// What a prefactor may be is chosen before the data are seen, a maximum is what a
// strongly falling prefactor has too, and one right data set in five is no warning.
func TestTextsAreTrue(t *testing.T) {
	for _, c := range []struct {
		code, field string
		holds       []string
		lacks       string
	}{
		{"band-narrow-for-gas-phase", "", []string{"before looking at n"}, "where theory or precedent allows it"},
		{"rate-maximum", "", []string{"nor does a usual prefactor"}, "nor a prefactor"},
		{"chi2-low", "", []string{"One in five", "upper end"}, "may be too small"},
	} {
		e, err := Explain(c.code)
		if err != nil {
			t.Fatal(err)
		}
		text := e.Title + " " + e.Explanation + " " + e.Cure
		for _, h := range c.holds {
			if !strings.Contains(text, h) {
				t.Errorf("%s lacks %q", c.code, h)
			}
		}
		if strings.Contains(text, c.lacks) {
			t.Errorf("%s says %q", c.code, c.lacks)
		}
	}
	if e, _ := Explain("chi2-low"); e.Severity != Info {
		t.Errorf("chi2-low is a %s", e.Severity)
	}
	if f := bandNarrow([2]float64{0, 1}); !strings.Contains(f.Message, "before looking at n") {
		t.Errorf("%q", f.Message)
	}
	in := VerdictInput{Sample: sampleOf(t, fit.Relative, []float64{300, 400}, []float64{0, 0}, nil), Rule: Rule{Band: [2]float64{0, 1}}}
	in.Test.Exponent = fit.Estimate{Value: 2.4, Lower: 0.4, Upper: 4.4}
	if s := in.sentence(CurvedOpen, ""); !strings.Contains(s, "n up to 4.4 is not excluded: a usual prefactor (n from 0 to 1) may be the whole cause") {
		t.Errorf("%q", s)
	}
}
