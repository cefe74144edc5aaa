package models

import (
	"cmp"
	"math"
	"slices"
)

// SameTemperature reports whether two temperatures in K are one setting, read perhaps
// in two units: closer than 1e-9 of either, far more than conversion rounds and far
// less than thermostats differ.
func SameTemperature(a, b float64) bool { return math.Abs(a-b) <= 1e-9*math.Max(a, b) }

// CountTemperatures gives how many settings there are among the temperatures t, in any
// order. Of several within reach of each other the lowest decides.
func CountTemperatures(t []float64) int {
	if !slices.IsSorted(t) {
		t = slices.Sorted(slices.Values(t))
	}
	n := 0
	var low float64
	for i, ti := range t {
		if i == 0 || !SameTemperature(low, ti) {
			n, low = n+1, ti
		}
	}
	return n
}

// NumberTemperatures gives how many settings there are among the temperatures t, and
// which of them each entry has: 0 is the coldest. It agrees with CountTemperatures.
func NumberTemperatures(t []float64) (n int, number []int) {
	order := make([]int, len(t))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int { return cmp.Compare(t[a], t[b]) })
	number = make([]int, len(t))
	var low float64
	for j, i := range order {
		if j == 0 || !SameTemperature(low, t[i]) {
			n, low = n+1, t[i]
		}
		number[i] = n - 1
	}
	return n, number
}
