package figure

import (
	"math"
	"slices"
	"testing"
)

func labels(low, high float64, most int) (ls []string) {
	for _, t := range (linear{most}).Ticks(low, high) {
		if t.Label != "" {
			ls = append(ls, t.Label)
		}
	}
	return ls
}

func TestLinearTicks(t *testing.T) {
	for _, c := range []struct {
		low, high float64
		most      int
		want      []string
	}{
		{-0.0821, 0.0951, 5, []string{"−0.05", "0.00", "0.05"}},
		{3.05, 3.47, 8, []string{"3.1", "3.2", "3.3", "3.4"}},
		{-720, 3, 8, []string{"−700", "−600", "−500", "−400", "−300", "−200", "−100", "0"}},
		{0, 1, 5, []string{"0.0", "0.2", "0.4", "0.6", "0.8", "1.0"}},
	} {
		if got := labels(c.low, c.high, c.most); !slices.Equal(got, c.want) {
			t.Errorf("%g to %g: %v, want %v", c.low, c.high, got, c.want)
		}
	}
}

func TestWholeTicks(t *testing.T) {
	for _, tick := range (whole{linear{5}}).Ticks(0, 3) {
		if tick.Value != math.Trunc(tick.Value) {
			t.Errorf("count of %g", tick.Value)
		}
	}
}

// A scale of 1000/T that is 240 pt wide, and labels of 15 pt.
func TestCelsiusTicks(t *testing.T) {
	for _, c := range []struct {
		low, high float64
		want      []string
	}{
		{287, 329, []string{"15", "20", "25", "30", "35", "40", "45", "50", "55"}},
		{298.15, 308.15, []string{"25", "26", "27", "28", "29", "30", "31", "32", "33", "34", "35"}},
		{302, 302.9, []string{"28.9", "29.0", "29.1", "29.2", "29.3", "29.4", "29.5", "29.6", "29.7"}},
	} {
		at := func(k float64) float64 { return 240 * (1/k - 1/c.high) / (1/c.low - 1/c.high) }
		var got []string
		for _, tick := range celsius(c.low, c.high, at, func(string) float64 { return 15 }) {
			got = append(got, tick.Label)
		}
		if !slices.Equal(got, c.want) {
			t.Errorf("%g to %g K: %v, want %v", c.low, c.high, got, c.want)
		}
	}
}

// On a range over which 1/T crowds, labels keep their distance, lie inside, are in
// order, and there are enough of them.
func TestCelsiusTicksOfWideRanges(t *testing.T) {
	for _, r := range [][2]float64{{200, 1200}, {10, 1500}, {20, 300}, {250, 2500}, {77, 400}} {
		at := func(k float64) float64 { return 240 * (1/k - 1/r[1]) / (1/r[0] - 1/r[1]) }
		ts := celsius(r[0], r[1], at, func(l string) float64 { return 6 * float64(len([]rune(l))) })
		if len(ts) < 4 {
			t.Errorf("%v: only %d labels", r, len(ts))
		}
		for i, tick := range ts {
			if tick.Value < r[0]-1e-9 || tick.Value > r[1]+1e-9 {
				t.Errorf("%v: %s °C lies outside", r, tick.Label)
			}
			if i > 0 && !(at(ts[i-1].Value)-at(tick.Value) >= 12) {
				t.Errorf("%v: %s and %s °C run into each other", r, ts[i-1].Label, tick.Label)
			}
		}
	}
}
