package fit

import (
	"math"
	"testing"
)

// A criterion that is not defined (an infinite penalty) leaves no first place; an
// RSS of +Inf or NaN is no winner.
func TestFirstPlace(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	n := make([]float64, 10)
	for _, c := range []struct {
		model        ErrorModel
		penalty, rss []float64
		want         int
	}{
		{Relative, []float64{4, 6, 8}, []float64{1, 1, 1}, 0},
		// 10 ln(RSS) falls by 6.93, by more than the 2 it costs.
		{Relative, []float64{4, 6, 8}, []float64{1, 0.5, inf}, 1},
		{Relative, []float64{4, 6, 8}, []float64{nan, nan, 0.5}, 2},
		{Stated, []float64{4, 6, 8}, []float64{9, 6, 5}, 1},
		{Stated, []float64{4, 6, 8}, []float64{9, 7.5, 5.5}, 0},
		{Relative, []float64{4, inf, inf}, []float64{1, 1e-300, 1e-300}, 0},
		{Relative, []float64{inf, 4, inf}, []float64{1e-300, 1, 1e-300}, 1},
		{Relative, []float64{inf, inf, inf}, []float64{1, 1, 1}, -1},
	} {
		k := newCriterion(&Sample{T: n, Model: c.model}, len(c.rss), c.penalty)
		out := &Refit{RSS: c.rss}
		if k.first(out); out.First != c.want {
			t.Errorf("%s %v %v: got %d, want %d", c.model, c.penalty, c.rss, out.First, c.want)
		}
	}
}
