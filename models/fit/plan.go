package fit

import (
	"math"
	"slices"
	"sync"

	"onebarrier/models"
)

// maxBarrier bounds |E| and the difference of two barriers, in J/mol: a strong
// bond. A fit that wants more is not identified.
const maxBarrier = 1e6

// plan holds what fits of ln k = a + e·U + s(c + d·u) share on one design (T, V):
// the scaled abscissa, the projector onto the complement of {1, u} and the nodes of
// the cold search. Workers share it: it is read-only, but for parts that are made when
// first asked for.
//
// u = U/width with U = (T - T_c)/(R T T_c), T_c the weighted harmonic mean of T and
// width the range of U, so that u has range 1 and weighted mean 0.
type plan struct {
	tab       *softplusTable
	rows      []basisRow
	tc        float64 // K
	width     float64 // mol/J
	n1, n2    float64 // lengths of the whitened columns 1 and u
	mean      float64 // weighted mean of u: 0 but for rounding
	low, high float64 // ends of u
	maxD      float64 // bound of |d|
	distinct  int     // temperatures
	nodes     []node
	shapes    []quad // projected whitened shapes of the nodes, N rows for each four

	noded, covered, compared sync.Once // what is made when first asked for

	coarse, fine *cover
	toFine       []int // shape of fine nearest to each node
	holding      sync.Mutex
	held         map[heldLine]*plan // with another projector, for profiles
}

// node is a starting point of the cold search.
type node struct {
	c, d  float64
	norm2 float64 // squared length of its projected shape
	level int32
}

// newPlan makes the plan of a design.
func newPlan(t, v []float64) *plan {
	p := &plan{tab: softplusNodes(), rows: make([]basisRow, len(t))}
	p.abscissa(t, v)
	p.n1, p.n2, p.mean = orthonormal(p.rows)
	return p
}

// abscissa fills u and w.
func (p *plan) abscissa(t, v []float64) {
	var sw, swx float64
	for i, ti := range t {
		sw += 1 / v[i]
		swx += 1 / (v[i] * ti)
	}
	p.tc = sw / swx
	lowT, highT := slices.Min(t), slices.Max(t)
	p.width = (highT - lowT) / (models.GasConstant * highT * lowT)
	for i, ti := range t {
		r := &p.rows[i]
		r.w = 1 / math.Sqrt(v[i])
		if p.width > 0 {
			r.u = (ti - p.tc) / (models.GasConstant * ti * p.tc) / p.width
		}
	}
	p.distinct = models.CountTemperatures(t)
	p.low, p.high = math.Inf(1), math.Inf(-1)
	for _, r := range p.rows {
		p.low, p.high = math.Min(p.low, r.u), math.Max(p.high, r.u)
	}
	p.maxD = maxBarrier * p.width
}

// orthonormal fills p1 and p2 of rows from w and u, and returns the lengths of the
// whitened columns 1 and u - mean, and the weighted mean of u.
func orthonormal(rows []basisRow) (n1, n2, mean float64) {
	var s0, s1, s2 float64
	for i := range rows {
		w2 := rows[i].w * rows[i].w
		s0 += w2
		s1 += w2 * rows[i].u
	}
	mean = s1 / s0
	n1 = math.Sqrt(s0)
	for i := range rows {
		r := &rows[i]
		r.p1 = r.w / n1
		r.p2 = r.w * (r.u - mean)
		s2 += r.p2 * r.p2
	}
	n2 = math.Sqrt(s2)
	if n2 > 0 {
		for i := range rows {
			rows[i].p2 /= n2
		}
	}
	return n1, n2, mean
}

// lineAt turns coordinates on (p1, p2) into the line a + b u.
func (p *plan) lineAt(a1, a2 float64) (a, b float64) {
	b = a2 / p.n2
	return a1/p.n1 - b*p.mean, b
}

// kernel returns a workspace for this plan with d free up to its bound. (c, d) and
// (-c, -d) are the same curve, so both signs are open.
func (p *plan) kernel() *kernel {
	n := len(p.rows)
	scratch := make([]float64, 3*n)
	return &kernel{
		tab: p.tab, rows: p.rows, z: scratch[:n:n], ws: scratch[n : 2*n : 2*n], slope: scratch[2*n:],
		low: -p.maxD, up: p.maxD,
	}
}

// setData whitens and projects y·sign into k.z and sets the floor. It returns the
// residual sum of squares of the straight line.
func (k *kernel) setData(y []float64, sign float64) (straight float64) {
	var big float64
	for i, yi := range y {
		k.z[i] = sign * yi * k.rows[i].w
		big = math.Max(big, math.Abs(k.z[i]))
	}
	projectOutTwice(k.rows, k.z)
	for _, zi := range k.z {
		straight += zi * zi
	}
	const eps = 0x1p-53
	k.floor = math.Max(1e-28*straight, float64(len(y))*(eps*big)*(eps*big))
	return straight
}

// projectOut removes from the whitened vector z what the basis spans. Done twice it
// leaves z orthogonal to the basis to rounding.
func projectOut(rows []basisRow, z []float64) {
	z = z[:len(rows)]
	var a1, a2 float64
	for i := range rows {
		r := &rows[i]
		a1 += r.p1 * z[i]
		a2 += r.p2 * z[i]
	}
	for i := range rows {
		r := &rows[i]
		z[i] -= a1*r.p1 + a2*r.p2
	}
}

func projectOutTwice(rows []basisRow, z []float64) {
	projectOut(rows, z)
	projectOut(rows, z)
}

// makeNodes makes the nodes of the cold search and their shapes, once.
func (p *plan) makeNodes() {
	p.noded.Do(func() {
		p.layNodes()
		p.projectShapes()
	})
}

// layNodes lays out the cold search: levels d = 1/2, 1, 2 ... 256 (range of u = 1)
// up to the bound, on each level crossovers every 1.5/d but at most three per gap
// of the design, out to 4/d beyond the ends. Between such neighbours the shapes
// change little enough for Newton steps to find the minimum.
func (p *plan) layNodes() {
	gap := p.gaps()
	level := int32(0)
	for d := 0.5; ; d *= 2 {
		last := d >= p.maxD || d >= 256
		d := math.Min(d, p.maxD)
		for x := p.low - 4/d; x <= p.high+4/d; {
			p.nodes = append(p.nodes, node{c: -d * x, d: d, level: level})
			x += math.Max(1.5/d, gap(x)/3)
		}
		level++
		if last {
			break
		}
	}
}

// projectShapes fills shapes and norm2 of the nodes.
func (p *plan) projectShapes() {
	n := len(p.rows)
	p.shapes = make([]quad, (len(p.nodes)+3)/4*n)
	v, slope := make([]float64, n), make([]float64, n)
	for j := range p.nodes {
		nd := &p.nodes[j]
		p.tab.shape(nd.c, nd.d, p.rows, v, slope)
		projectOut(p.rows, v)
		nd.norm2 = dot(v, v)
		for i, vi := range v {
			p.shapes[j/4*n+i][j%4] = vi
		}
	}
}

// quad holds the same entry of four vectors, so that four products take one pass.
type quad [4]float64

// dot4 is the product of z with four vectors.
func dot4(z []float64, v []quad) (p quad) {
	v = v[:len(z)]
	var p0, p1, p2, p3 float64
	for i, zi := range z {
		r := &v[i]
		p0 += zi * r[0]
		p1 += zi * r[1]
		p2 += zi * r[2]
		p3 += zi * r[3]
	}
	return quad{p0, p1, p2, p3}
}

// quads lays vectors of length n out in fours, the last filled up with zeros.
func quads(vectors [][]float64, n int) []quad {
	q := make([]quad, (len(vectors)+3)/4*n)
	for j, v := range vectors {
		for i, vi := range v {
			q[j/4*n+i][j%4] = vi
		}
	}
	return q
}

func dot(a, b []float64) float64 {
	b = b[:len(a)]
	var s float64
	for i, ai := range a {
		s += ai * b[i]
	}
	return s
}

// gaps returns a function that gives the width of the gap of the design in which x
// lies, 0 outside.
func (p *plan) gaps() func(x float64) float64 {
	us := make([]float64, len(p.rows))
	for i, r := range p.rows {
		us[i] = r.u
	}
	slices.Sort(us)
	us = slices.Compact(us)
	return func(x float64) float64 {
		i := 0
		for i < len(us) && us[i] <= x {
			i++
		}
		if i == 0 || i == len(us) {
			return 0
		}
		return us[i] - us[i-1]
	}
}

const (
	coldStarts = 12 // level-wise minima that get Newton steps
	coldFaint  = 2  // faint shapes of either kind that do so too
	coldSteps  = 5
	coldFinal  = 2 // distinct ones that go on to convergence
)

// search is the scratch of a cold fit.
type search struct {
	rss   []float64 // at the nodes
	skip  []bool    // nodes that are known to lead nowhere; nil for none
	pass  []bool    // scratch of keep
	start [coldStarts + 2*coldFaint]normal
	trial normal
	most  int // starts to use
}

func (p *plan) newSearch() *search {
	return &search{rss: make([]float64, len(p.nodes)), most: coldStarts}
}

// keep leaves only the nodes near a lead to the search.
func (s *search) keep(p *plan, leads []lead) {
	nearest := p.nearest()
	if s.skip == nil {
		s.skip, s.pass = make([]bool, len(nearest)), make([]bool, len(p.fine.shapes))
	}
	clear(s.pass)
	for _, l := range leads {
		s.pass[l.shape] = true
	}
	for j, k := range nearest {
		s.skip[j] = !s.pass[k]
	}
}

// cold is the global fit of the data in k.z: the best minimum found, converged to a
// decrement of tol·RSS. ok is false where nothing improves on the straight line.
func (p *plan) cold(k *kernel, s *search, straight, tol float64) (best *normal, ok bool) {
	p.atNodes(k, s, straight)
	return p.descend(k, s, straight, tol)
}

// atNodes fills the residual sums of squares at the nodes.
func (p *plan) atNodes(k *kernel, s *search, straight float64) {
	n := len(p.rows)
	for j := 0; j < len(p.nodes); j += 4 {
		product := dot4(k.z[:n], p.shapes[j/4*n:])
		for i, nd := range p.nodes[j:min(j+4, len(p.nodes))] {
			s.rss[j+i] = straight - 2*product[i] + nd.norm2
		}
	}
}

// pick lists the lowest level-wise minima among the nodes, lowest first.
func (p *plan) pick(s *search, pick *[coldStarts]int) (picked int) {
	for j := range p.nodes {
		v, level := s.rss[j], p.nodes[j].level
		before := j > 0 && p.nodes[j-1].level == level
		after := j+1 < len(p.nodes) && p.nodes[j+1].level == level
		if before && s.rss[j-1] <= v || after && s.rss[j+1] < v {
			continue
		}
		if s.skip != nil && s.skip[j] && !(before && !s.skip[j-1]) && !(after && !s.skip[j+1]) {
			continue
		}
		at := picked
		for at > 0 && s.rss[pick[at-1]] > v {
			at--
		}
		if at == s.most {
			continue
		}
		picked = min(picked+1, s.most)
		copy(pick[at+1:picked], pick[at:picked-1])
		pick[at] = j
	}
	return picked
}

// faint adds starts for data more precise than the nodes are strong: the outermost
// nodes of each level, where the shape is an exponential whose length goes as e^c or
// e^-c, and those of the lowest level, where it goes as d², each cut down to the length
// that fits best. It returns the number of starts.
func (p *plan) faint(k *kernel, s *search, straight float64, picked int) int {
	const weak = 0.3
	var best [2][coldFaint]struct {
		saved float64
		start node
	}
	for j := range p.nodes {
		nd := p.nodes[j]
		outer := j == 0 || j+1 == len(p.nodes) || p.nodes[j-1].level != nd.level || p.nodes[j+1].level != nd.level
		if !outer && nd.level > 0 || s.skip != nil && s.skip[j] {
			continue
		}
		product := (straight + nd.norm2 - s.rss[j]) / 2
		length := product / nd.norm2
		if !(length > 0 && length < weak) {
			continue
		}
		kind := 0
		if !outer {
			kind = 1
		}
		nd.c, nd.d = shorten(nd.c, nd.d, length, !outer)
		saved := product * length
		list := &best[kind]
		for i := range list {
			if saved > list[i].saved {
				copy(list[i+1:], list[i:])
				list[i].saved, list[i].start = saved, nd
				break
			}
		}
	}
	for kind := range best {
		for _, b := range best[kind] {
			if b.saved > 0 {
				k.at(b.start.c, b.start.d, &s.start[picked])
				picked++
			}
		}
	}
	return picked
}

// shorten multiplies the length of a shape by factor < 1: by way of d where it goes as
// d², which is where d is small and the bend lies inside the range, else by way of c.
func shorten(c, d, factor float64, small bool) (float64, float64) {
	switch {
	case small:
		return c, d * math.Sqrt(factor)
	case c < 0: // all t are negative, and s is about e^t
		return c + math.Log(factor), d
	default: // all are positive, and s is about t + e^-t
		return c - math.Log(factor), d
	}
}

// starts puts where a global search goes from into s.start, and returns their number.
func (p *plan) starts(k *kernel, s *search, straight float64) int {
	var pick [coldStarts]int
	picked := p.pick(s, &pick)
	for i, j := range pick[:picked] {
		k.at(p.nodes[j].c, p.nodes[j].d, &s.start[i])
	}
	return p.faint(k, s, straight, picked)
}

// descend is cold once the residual sums of squares at the nodes are known.
func (p *plan) descend(k *kernel, s *search, straight, tol float64) (best *normal, ok bool) {
	picked := p.starts(k, s, straight)
	for i := range picked {
		k.converge(&s.start[i], &s.trial, tol, coldSteps)
	}
	for f := range coldFinal {
		// The best that is left, unless it is one of the earlier finals.
		at := -1
		for i := f; i < picked; i++ {
			if f > 0 && near(&s.start[0], &s.start[i], 1e-3) {
				continue
			}
			if at < 0 || s.start[i].rss < s.start[at].rss {
				at = i
			}
		}
		if at < 0 {
			break
		}
		s.start[f], s.start[at] = s.start[at], s.start[f]
		k.converge(&s.start[f], &s.trial, tol, 100)
		if s.start[f].rss < s.start[0].rss {
			s.start[0], s.start[f] = s.start[f], s.start[0]
		}
	}
	best = &s.start[0]
	return best, picked > 0 && best.rss < straight*(1-improvement)
}

// improvement is the share of the straight line's RSS that a shape must save: below
// it the two are the same curve.
const improvement = 1e-10

// near reports whether two points of the search agree to tol, in either of their two
// notations.
func near(a, b *normal, tol float64) bool {
	c, d := b.c, b.d
	if a.d*d < 0 {
		c, d = -c, -d
	}
	tol *= 1 + math.Abs(a.d)
	return math.Abs(a.d-d) < tol && math.Abs(a.c-c) < tol
}
