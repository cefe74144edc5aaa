package fit

import (
	"slices"
	"sync"
)

// Plans of designs are kept for those that fit them again: one assessment does so a dozen
// times, and archives repeat their temperatures. A design counts as the same where
// temperatures and variances are, to the last bit, so that nothing but time depends on
// what was kept. The plans kept are the ones used last, so many that the squares of their
// numbers of points, to which their memory goes, sum to at most maxPlansSize: about 20 MB.
const maxPlansSize = 12_800

var plans struct {
	sync.Mutex
	kept []*keptPlan // the one used last comes first
	size int
}

type keptPlan struct {
	t, v []float64
	*plan
}

// planOf is newPlan with what is kept. The plan is shared.
func planOf(t, v []float64) *plan {
	n := len(t)
	if n*n > maxPlansSize/8 {
		return newPlan(t, v)
	}
	plans.Lock()
	defer plans.Unlock()
	for i, p := range plans.kept {
		if slices.Equal(p.t, t) && slices.Equal(p.v, v) {
			copy(plans.kept[1:], plans.kept[:i])
			plans.kept[0] = p
			return p.plan
		}
	}
	p := &keptPlan{slices.Clone(t), slices.Clone(v), newPlan(t, v)}
	plans.kept = slices.Insert(plans.kept, 0, p)
	for plans.size += n * n; plans.size > maxPlansSize; {
		last := len(plans.kept) - 1
		plans.size -= len(plans.kept[last].t) * len(plans.kept[last].t)
		plans.kept[last] = nil
		plans.kept = plans.kept[:last]
	}
	return p.plan
}
