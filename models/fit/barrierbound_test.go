package fit

import (
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// Two paths with errors in k whose best fit lies at the largest barrier that is looked
// for (invented data, the last of them a step up). The sum of squares and E1 are those of
// R, with the amplitudes by solve(crossprod(M), crossprod(M, k)) and E1 by
// optimize(tol = 1e-6): the least sum falls with E2 as far as 1000 kJ/mol, and these are
// found there.
func TestTwoPathsAtTheLargestBarrier(t *testing.T) {
	temps := []float64{280, 286.7, 293.3, 300, 306.7, 313.3, 320, 326.7, 333.3, 340}
	k := []float64{3.9853e-05, 7.3876e-05, 1.2536e-04, 2.2109e-04, 3.8013e-04, 6.1776e-04, 1.0074e-03, 1.5877e-03, 2.4155e-03, 3.8107e-03}
	v := make([]float64, len(k))
	for i := range v {
		v[i] = 1
	}
	r := Fit(mustSample(t, Absolute, temps, k, v), models.Parallel{})
	if r.Status != NotIdentified || r.P == nil {
		t.Fatalf("%s: %s", r.Status, r.Reason)
	}
	reference.Close(t, "sum of squares", r.RSS, 3.8795041114245e-10, 1e-9)
	reference.Close(t, "E1", r.P[1], 58971.8034827403, 1e-6)
	reference.Close(t, "E2", r.P[3], 1e6, 1e-12)
}
