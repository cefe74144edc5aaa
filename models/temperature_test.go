package models

import (
	"math"
	"slices"
	"testing"
)

// 25 °C and 77 °F differ in the last digits of a float64; a thermostat set 1 mK
// higher is another setting.
func TestSameTemperature(t *testing.T) {
	fahrenheit := (77. + 459.67) / 1.8
	celsius := 25 + 273.15
	for _, c := range []struct {
		a, b float64
		same bool
	}{
		{298.15, 298.15, true}, {fahrenheit, celsius, true}, {1 / (1 / celsius), celsius, true},
		{298.15, 298.15 * (1 + 0.9e-9), true}, {298.15, 298.15 * (1 + 1.1e-9), false}, {298.15, 298.151, false},
		{math.NaN(), 298.15, false}, {math.NaN(), math.NaN(), false},
	} {
		if SameTemperature(c.a, c.b) != c.same || SameTemperature(c.b, c.a) != c.same {
			t.Errorf("%.17g and %.17g: same is %t", c.a, c.b, !c.same)
		}
	}
}

func TestNumberTemperatures(t *testing.T) {
	step := 298.15 * 0.8e-9
	for _, c := range []struct {
		t      []float64
		n      int
		number []int
	}{
		{nil, 0, []int{}},
		{[]float64{300}, 1, []int{0}},
		{[]float64{320, 300, 310, 300, 320}, 3, []int{2, 0, 1, 0, 2}},
		{[]float64{298.15, 310, 298.15 * (1 + 1e-13), 310 * (1 - 1e-13)}, 2, []int{0, 1, 0, 1}},
		// A chain of close values does not run on: the lowest decides.
		{[]float64{298.15, 298.15 + step, 298.15 + 2*step}, 2, []int{0, 0, 1}},
	} {
		before := slices.Clone(c.t)
		n, number := NumberTemperatures(c.t)
		if n != c.n || !slices.Equal(number, c.number) || CountTemperatures(c.t) != c.n {
			t.Errorf("%v: %d settings, numbered %v; %d counted", c.t, n, number, CountTemperatures(c.t))
		}
		if !slices.Equal(before, c.t) {
			t.Error("the input was modified")
		}
	}
}
