package survey

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
)

// falseDiscovery gives the q-value of a p-value among all p-values of a store: the
// share of false discoveries to expect where every set with that p or a smaller one is
// called curved (Y. Benjamini and Y. Hochberg, J. R. Stat. Soc. B 57 (1995) 289,
// procedure (1)). It depends on p alone, so that rows need not be kept.
type falseDiscovery struct {
	p []float64 // ascending
	q []float64 // of p, not descending
}

// newFalseDiscovery takes the p-values of all testable sets, in any order. It sorts
// them in place.
func newFalseDiscovery(p []float64) falseDiscovery {
	slices.Sort(p)
	q := make([]float64, len(p))
	m, least := float64(len(p)), 1.0
	for i := len(p) - 1; i >= 0; i-- {
		// Least over all j ≥ i of m p_(j)/j.
		least = math.Min(least, m*p[i]/float64(i+1))
		q[i] = least
	}
	return falseDiscovery{p, q}
}

// of is the q-value of p, NaN where p is not known. A p that is not among those that
// were given, since a survey still writes to the store, has the q of the next larger.
func (f falseDiscovery) of(p float64) float64 {
	if math.IsNaN(p) || len(f.p) == 0 {
		return math.NaN()
	}
	// The last of equal p-values has the least m p/j; q is carried down to the first.
	i, _ := slices.BinarySearchFunc(f.p, p, cmp.Compare[float64])
	if i == len(f.p) {
		return 1
	}
	return f.q[i]
}

// falseDiscoveries reads the p-values of all testable sets of the store.
func (s *Store) falseDiscoveries(ctx context.Context) (p, band falseDiscovery, err error) {
	var ps, bands []float64
	rows, err := s.db.QueryContext(ctx, "SELECT p_value, p_band FROM sets WHERE settings = ? AND error_code = '' AND p_value IS NOT NULL", s.id)
	if err != nil {
		return p, band, s.explain(err)
	}
	defer rows.Close()
	for rows.Next() {
		var x, y float64
		if err := rows.Scan(orUnknown[float64]{&x, math.NaN()}, orUnknown[float64]{&y, math.NaN()}); err != nil {
			return p, band, s.explain(err)
		}
		for _, v := range []float64{x, y} {
			if v < 0 || v > 1 {
				return p, band, s.explain(fmt.Errorf("a p-value is %g: the file is damaged; take a copy of it from before, or run the survey again", v))
			}
		}
		ps = append(ps, x)
		if !math.IsNaN(y) {
			bands = append(bands, y)
		}
	}
	if err := rows.Err(); err != nil {
		return p, band, s.explain(err)
	}
	return newFalseDiscovery(ps), newFalseDiscovery(bands), nil
}
