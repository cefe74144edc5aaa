package diagnostics

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"sync"

	"gonum.org/v1/gonum/stat"
)

// Levels of the run order.
const (
	driftLevel = 0.05
	// orderFollows is the |rank correlation| of order and T above which a drift can
	// hide in the curve. It describes the plan and is no test.
	orderFollows = 0.9
	// exactOrder is the most points whose null distribution is enumerated.
	exactOrder = 9
)

// RunOrder tells whether the residuals follow the order of the runs.
type RunOrder struct {
	Points       int  `json:"points"` // with an order
	Temperature  Real `json:"rank_correlation_with_t"`
	Residual     Real `json:"rank_correlation_with_residual"` // from power-prefactor
	PValue       Real `json:"p_value"`                        // of the latter, two-sided
	Exact        bool `json:"exact"`
	OrderFollows bool `json:"order_follows_t"`
}

// runOrder compares the order of the runs with T and with the residuals from
// power-prefactor.
func (a *assessor) runOrder() {
	var order, t, r []float64
	var rows []int
	single, curve := a.data.single, a.power.Measured()
	if !curve.Usable() {
		curve = a.straight.Measured()
	}
	for j, p := range a.data.points {
		if math.IsNaN(p.Order) {
			continue
		}
		g := j
		if a.data.basis == BasisMeans {
			g = a.data.group[j]
		}
		residual := single.Y[j] - curve.Fitted[g]
		if single.Model.InK() {
			residual = single.K[j] - math.Exp(curve.Fitted[g])
		}
		order, t, r = append(order, p.Order), append(t, p.T), append(r, residual/math.Sqrt(single.V[j]))
		rows = append(rows, p.Row)
	}
	if len(order) < minTemperatures || slices.Min(order) == slices.Max(order) {
		return
	}
	o := &RunOrder{Points: len(order), Residual: Real(math.NaN()), PValue: Real(math.NaN())}
	a.order = o
	rho, _, _ := spearman(order, t)
	o.Temperature = Real(rho)
	if o.OrderFollows = math.Abs(rho) >= orderFollows; o.OrderFollows {
		way := "rises with"
		if rho < 0 {
			way = "runs against"
		}
		a.find("order-follows-temperature", fmt.Sprintf("the order of the runs %s T (rank correlation %s): a drift of the experiment would look like a change of E", way, number(rho, 2)), nil,
			map[string]Real{"rank_correlation": Real(rho)})
	}
	if noScatter(a.data.sample, curve.RSS) || curve.Nu < 1 {
		return
	}
	rho, p, exact := spearman(order, r)
	o.Residual, o.PValue, o.Exact = Real(rho), Real(p), exact
	if p < driftLevel {
		way := "rise"
		if rho < 0 {
			way = "fall"
		}
		slices.Sort(rows)
		a.find("drift-with-order", fmt.Sprintf("the residuals %s with the order of the runs (rank correlation %s, p = %s)", way, number(rho, 2), pText(p)), nil,
			map[string]Real{"rank_correlation": Real(rho), "p_value": Real(p)})
	}
}

// spearman is the rank correlation of x and y and its two-sided p-value: exact without
// ties up to nine pairs, else by t = ρ√((n-2)/(1-ρ²)) with n - 2 degrees of freedom
// (M. G. Kendall, A. Stuart, The Advanced Theory of Statistics 2, ch. 31).
func spearman(x, y []float64) (rho, p float64, exact bool) {
	rx, tiesX := ranks(x)
	ry, tiesY := ranks(y)
	n := len(x)
	rho = stat.Correlation(rx, ry, nil)
	if tiesX || tiesY || n > exactOrder {
		nu := float64(n - 2)
		return rho, pF(nu*rho*rho/((1-rho)*(1+rho)), 1, nu), false
	}
	d := 0
	for i := range rx {
		k := int(rx[i] - ry[i])
		d += k * k
	}
	below := squaredDifferences(n)
	most := len(below) - 1 // n(n²-1)/3, of the reverse order
	// D is symmetric about most/2.
	return rho, math.Min(1, 2*below[min(d, most-d)]), true
}

// ranks are the ranks of v from 1, means where values are equal.
func ranks(v []float64) (r []float64, ties bool) {
	at := make([]int, len(v))
	for i := range at {
		at[i] = i
	}
	sort.Slice(at, func(i, j int) bool { return v[at[i]] < v[at[j]] })
	r = make([]float64, len(v))
	for i := 0; i < len(at); {
		j := i + 1
		for j < len(at) && v[at[j]] == v[at[i]] {
			j++
		}
		ties = ties || j-i > 1
		for _, k := range at[i:j] {
			r[k] = float64(i+j+1) / 2
		}
		i = j
	}
	return r, ties
}

// squared remembers squaredDifferences by n.
var squared sync.Map

// squaredDifferences gives P(D <= d) for D = Σ (i - π_i)² of a random permutation of n,
// at d = 0 … n(n²-1)/3, by counting: after the first k places are filled with a set of
// numbers only the set and the sum so far matter.
func squaredDifferences(n int) []float64 {
	if p, ok := squared.Load(n); ok {
		return p.([]float64)
	}
	most := n * (n*n - 1) / 3
	counts := make([][]float64, 1<<n)
	counts[0] = make([]float64, most+1)
	counts[0][0] = 1
	for set := 1; set < 1<<n; set++ {
		counts[set] = make([]float64, most+1)
		place := -1 // the last one filled
		for s := set; s > 0; s &= s - 1 {
			place++
		}
		for i := range n {
			if set&(1<<i) == 0 {
				continue
			}
			d := (i - place) * (i - place)
			for k, c := range counts[set&^(1<<i)][:most+1-d] {
				counts[set][k+d] += c
			}
		}
	}
	p := counts[len(counts)-1]
	for d := 1; d <= most; d++ {
		p[d] += p[d-1]
	}
	for d := range p {
		p[d] /= p[most]
	}
	squared.Store(n, p)
	return p
}
