package report

import (
	"math"
	"strings"
	"testing"

	"onebarrier/diagnostics"
)

// JCGM 100:2008, 7.2.2: 100.021 47 g with u = 0.35 mg is written 100.021 47(35) g.
func TestBrackets(t *testing.T) {
	for _, c := range []struct {
		value, u float64
		want     string
	}{
		{100.02147, 0.00035, "100.02147(35)"},
		{52.34, 0.18, "52.34(18)"},
		{52.34, 0.0996, "52.34(10)"},
		{-71.2, 1.1, "−71.2(1.1)"},
		{1234.4, 12, "1234(12)"},
		{1234.4, 340, "1230(340)"},
		{1234.4, 996, "1200(1000)"},
		{7, math.NaN(), "7.0000(–)"},
		{math.NaN(), 1, "–"},
	} {
		got := brackets(diagnostics.Estimate{Value: diagnostics.Real(c.value), StdError: diagnostics.Real(c.u),
			Lower: diagnostics.Real(math.NaN()), Upper: diagnostics.Real(math.NaN())})
		if got != c.want {
			t.Errorf("brackets(%v, %v) = %q, want %q", c.value, c.u, got, c.want)
		}
	}
}

func TestBracketsWithoutStandardError(t *testing.T) {
	upper := "upper"
	none := diagnostics.Real(math.NaN())
	for want, e := range map[string]diagnostics.Estimate{
		"31.0 (+20.0 to open)":  {Value: 31, StdError: none, Lower: 20, Upper: none, Open: &upper},
		"31.0 (+28.5 to +34.2)": {Value: 31, StdError: none, Lower: 28.5, Upper: 34.2},
	} {
		if got := brackets(e); got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
}

func TestNumbers(t *testing.T) {
	for got, want := range map[string]string{
		plain(-0.001, 2):                     "0.00",
		plain(-1.5, 1):                       "−1.5",
		signed(2, 1):                         "+2.0",
		plain(diagnostics.Real(nan()), 2):    "–",
		significant(0.00032, 2):              "0.00032",
		significant(3.2e-7, 2):               "3.2×10⁻⁷",
		significant(12345, 2):                "12345",
		percent(0.002):                       "< 1 %",
		percent(0):                           "0 %",
		percent(diagnostics.Real(nan())):     "–",
		probability(0.999):                   "1",
		probability(0.031):                   "0.031",
		shellWord("a b.csv"):                 "'a b.csv'",
		shellWord("it's"):                    `'it'\''s'`,
		shellWord("testdata/demo/a-b_c.csv"): "testdata/demo/a-b_c.csv",
	} {
		if got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
}

func nan() float64 { return math.NaN() }

func TestWrap(t *testing.T) {
	got := wrap("one  two three\nfour\u00a0five averyverylongword x", 10)
	want := []string{"one two", "three", "four\u00a0five", "averyverylongword", "x"}
	if strings.Join(got, "|") != strings.Join(want, "|") {
		t.Errorf("wrap gives %q, want %q", got, want)
	}
	if got := wrap("", 10); len(got) != 0 {
		t.Errorf("nothing wraps to %q", got)
	}
}
