package report

import (
	"math"
	"strings"
	"testing"

	"onebarrier/diagnostics"
)

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
		probability(0):                       "< 10⁻³⁰⁰",
		pIs(0, false):                        "p < 10⁻³⁰⁰",
		pIs(5e-5, true):                      "p ≤ 5.0×10⁻⁵",
		pIs(0.2, false):                      "p = 0.20",
		ShellWord("a b.csv"):                 "'a b.csv'",
		ShellWord("it's"):                    `'it'\''s'`,
		ShellWord("testdata/demo/a-b_c.csv"): "testdata/demo/a-b_c.csv",
	} {
		if got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
}

func nan() float64 { return math.NaN() }

func TestWrap(t *testing.T) {
	got := Wrap("one  two three\nfour\u00a0five averyverylongword x", 10)
	want := []string{"one two", "three", "four\u00a0five", "averyverylongword", "x"}
	if strings.Join(got, "|") != strings.Join(want, "|") {
		t.Errorf("wrap gives %q, want %q", got, want)
	}
	if got := Wrap("", 10); len(got) != 0 {
		t.Errorf("nothing wraps to %q", got)
	}
}
