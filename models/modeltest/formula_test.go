package modeltest_test

import (
	"math"
	"testing"

	"onebarrier/models/modeltest"
	"onebarrier/models/reference"
)

// Closed forms at T = 300 K.
func TestEvaluate(t *testing.T) {
	for formula, want := range map[string]float64{
		"2 + 3 − 4":                       1,
		"−2 T":                            -600,
		"12 K/T":                          0.04,
		"T/2 K":                           150, // a product before a quotient
		"12/3/2":                          2,
		"2 (600 K/T)^3/4":                 4,
		"1/[1/2 + 1/(2 − 0.5)]":           1 / (1/2. + 1/1.5),
		"exp(1 + 0.5 ln(T/298.15 K))":     math.E * math.Sqrt(300/298.15),
		"exp(2 − 300 K/T) [1 + (1)^2/24]": math.E * 25 / 24,
		"(300 K/T)/sin(300 K/T)":          1 / math.Sin(1),
		"exp(1 − 100 K/(T − 200 K))":      1,
		"ln(1 + 0.5 T/K)":                 math.Log(151),
	} {
		got, err := modeltest.Evaluate(formula, 300)
		if err != nil {
			t.Error(err)
		} else if !reference.Agrees(got, want, 1e-14) {
			t.Errorf("%q is %.15g, want %.15g", formula, got, want)
		}
	}
	for _, formula := range []string{"", "2 +", "exp 2", "exp(2", "(2]", "2)", "x", "1.2.3", "2 s^-1", "NaN", "+2", "2 −− 3"} {
		if v, err := modeltest.Evaluate(formula, 300); err == nil {
			t.Errorf("%q is accepted: %g", formula, v)
		}
	}
}
