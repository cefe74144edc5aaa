package fit

import (
	"math"
	"sync"
	"testing"
)

// TestPlanOf: one design has one plan while it is kept, the least difference makes
// another, and what is kept is bounded.
func TestPlanOf(t *testing.T) {
	temp, v := []float64{290, 300, 310, 320, 330}, ones(5)
	p := planOf(temp, v)
	temp[0], temp[0] = 1, 290 // the slices of the caller are not held
	if planOf(temp, v) != p {
		t.Error("the plan was not kept")
	}
	moved := append([]float64{math.Nextafter(290, 300)}, temp[1:]...)
	if planOf(moved, v) == p {
		t.Error("another T has the same plan")
	}
	heavy := append([]float64{math.Nextafter(1, 2)}, v[1:]...)
	if planOf(temp, heavy) == p {
		t.Error("another variance has the same plan")
	}
	var all sync.WaitGroup
	for worker := range 4 {
		all.Go(func() {
			for i := range 500 {
				n := 5 + i%30
				temp := make([]float64, n)
				for j := range temp {
					temp[j] = 280 + float64(j) + 1e-3*float64(i) + float64(worker%2)
				}
				q := planOf(temp, ones(n))
				q.makeNodes()
				if len(q.rows) != n || len(q.nodes) == 0 {
					t.Errorf("%d rows for %d points, %d nodes", len(q.rows), n, len(q.nodes))
				}
			}
		})
	}
	all.Wait()
	sum := 0
	for _, k := range plans.kept {
		sum += len(k.t) * len(k.t)
	}
	if sum != plans.size || sum > maxPlansSize || sum < maxPlansSize/2 {
		t.Errorf("size %d, counted %d", plans.size, sum)
	}
	if planOf(temp, v) == p {
		t.Error("the plan used longest ago is kept")
	}
	long := make([]float64, 2000)
	for i := range long {
		long[i] = 250 + 0.1*float64(i)
	}
	if p := planOf(long, ones(2000)); planOf(long, ones(2000)) == p {
		t.Error("a plan of gigabytes is kept")
	}
}
