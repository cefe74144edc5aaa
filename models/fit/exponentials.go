package fit

import (
	"cmp"
	"math"
	"slices"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// With errors in k a curve is an amplitude times an exponential, or, for two paths
// side by side, a sum of two: the amplitudes are linear and are eliminated (variable
// projection: G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413), which
// leaves one or two exponents. Amplitudes must be positive.

// exponentials is the weighted problem of one curve with errors in k on one design:
//
//	z_i = Σ α v_i(θ) + error,  v_i = exp(w_i + Σ_j θ_j C_ij)
//
// with α > 0 and w = ln 1/√V. The columns C are those of the curve beyond the
// first, moved and scaled to range from -1/2 to 1/2. It is read-only once made.
type exponentials struct {
	n, d   int // points; columns, 1 or 2
	paths  int // 1, or 2 for two paths with a column each
	o      *objective
	lnW    []float64 // with the curve's offset
	col    [2][]float64
	centre [2]float64
	scale  [2]float64 // canonical parameter = θ·scale
	bound  float64    // of |θ|; +Inf where there is none
	nodes  []exponentialNode
	units  []quad    // vectors of the nodes, of unit length, n rows for each four
	gram   []float64 // products of these, for two paths; nil on a part of the design
}

// exponentialNode is a curve of a grid.
type exponentialNode struct {
	theta [2]float64
	v     []float64 // of unit length; nil once units holds it
}

// newExponentials returns nil for curves that are not of this kind, and where a
// column does not vary.
func newExponentials(s *Sample, c models.Curve) *exponentials {
	n := s.Len()
	e := &exponentials{n: n, paths: 1, o: newObjective(s, c), bound: math.Inf(1)}
	off := make([]float64, n)
	if sign, ok := softplusSign(c); ok && sign > 0 {
		e.d, e.paths = 1, 2
		e.col[0] = make([]float64, n)
		models.CentredX(s.TRef, s.T, e.col[0])
		floats.Scale(-1, e.col[0])
	} else if b, ok := c.(models.Basis); ok && (e.o.n == 2 || e.o.n == 3) {
		e.d = e.o.n - 1
		x := make([]float64, n*e.o.n)
		b.Columns(s.TRef, s.T, off, x)
		for j := range e.d {
			e.col[j] = make([]float64, n)
		}
		for i := range n {
			if x[i*e.o.n] != 1 {
				return nil
			}
			for j := range e.d {
				e.col[j][i] = x[i*e.o.n+1+j]
			}
		}
	} else {
		return nil
	}
	for j := range e.d {
		low, high := floats.Min(e.col[j]), floats.Max(e.col[j])
		if !(high > low) {
			return nil
		}
		e.centre[j], e.scale[j] = (low+high)/2, 1/(high-low)
		for i := range e.col[j] {
			e.col[j][i] = (e.col[j][i] - e.centre[j]) / (high - low)
		}
	}
	if e.paths == 2 {
		e.bound = maxBarrier / e.scale[0]
		e.col[1], e.centre[1], e.scale[1] = e.col[0], e.centre[0], e.scale[0]
	}
	e.lnW = make([]float64, n)
	for i, w := range e.o.root {
		e.lnW[i] = math.Log(w) + off[i]
	}
	e.layNodes()
	if e.paths == 2 {
		m, v := len(e.nodes), make([]float64, n)
		e.gram = make([]float64, m*m)
		for j := range m {
			e.unit(j, v)
			e.products(v, e.gram[j*m:(j+1)*m])
		}
	}
	return e
}

// unit fills v with the vector of node j.
func (e *exponentials) unit(j int, v []float64) {
	for i := range v {
		v[i] = e.units[j/4*e.n+i][j%4]
	}
}

// products fills out with the products of z with the vectors of all nodes.
func (e *exponentials) products(z, out []float64) {
	for j := 0; j < len(e.nodes); j += 4 {
		p := dot4(z, e.units[j/4*e.n:])
		copy(out[j:], p[:])
	}
}

// taken is the problem where entry i is taken counts[i] times, its variance that many
// times smaller. Exponents, bounds and grid keep their meaning.
func (e *exponentials) taken(counts []int) *exponentials {
	out := *e
	o := *e.o
	o.root, out.lnW, out.col = nil, nil, [2][]float64{}
	var index []int
	var root []float64
	for i, m := range counts {
		if m == 0 {
			continue
		}
		r := math.Sqrt(float64(m))
		index, root = append(index, i), append(root, r)
		o.root = append(o.root, e.o.root[i]*r)
		out.lnW = append(out.lnW, e.lnW[i]+math.Log(r))
		out.col[0] = append(out.col[0], e.col[0][i])
		if e.col[1] != nil {
			out.col[1] = append(out.col[1], e.col[1][i])
		}
	}
	out.n, out.o, out.gram = len(index), &o, nil
	out.units = make([]quad, len(e.units)/e.n*out.n)
	for j := range len(e.units) / e.n {
		from, to := e.units[j*e.n:], out.units[j*out.n:(j+1)*out.n]
		var norm2 quad
		for l, i := range index {
			for a, x := range from[i] {
				to[l][a] = x * root[l]
				norm2[a] += square(to[l][a])
			}
		}
		for a, n2 := range norm2 {
			if n2 > 0 { // else all it sees was not taken
				norm2[a] = 1 / math.Sqrt(n2)
			}
		}
		for l := range to {
			for a, f := range norm2 {
				to[l][a] *= f
			}
		}
	}
	return &out
}

const (
	// nodeAngle is the angle between neighbours of the grid in one exponent,
	// wideAngle that of the grid in two.
	nodeAngle, wideAngle = 0.12, 0.3
)

// layNodes makes the grid: neighbours stand at a constant angle, or θ grows by half
// where the curve hangs on the hottest or the coldest point alone.
func (e *exponentials) layNodes() {
	bends, angle := []float64{0}, nodeAngle
	if e.d == 2 {
		bends, angle = []float64{-32, -16, -8, -4, -2, 0, 2, 4, 8, 16, 32}, wideAngle
	}
	far := math.Min(maxBarrier/e.scale[0], 1000)
	for _, bend := range bends {
		for _, side := range []float64{1, -1} {
			for t := 0.0; ; {
				nd := exponentialNode{theta: [2]float64{side * t, bend}, v: make([]float64, e.n)}
				e.vector(nd.theta, nd.v)
				norm := floats.Norm(nd.v, 2)
				floats.Scale(1/norm, nd.v)
				if t > 0 || side > 0 {
					e.nodes = append(e.nodes, nd)
				}
				if t >= far {
					break
				}
				// The vector turns by the standard deviation of the column.
				var mean, variance float64
				for i, v := range nd.v {
					mean += v * v * e.col[0][i]
				}
				for i, v := range nd.v {
					variance += square(v * (e.col[0][i] - mean))
				}
				t = math.Min(far, t+math.Min(angle/math.Sqrt(variance), math.Max(2, t/2)))
			}
		}
	}
	slices.SortStableFunc(e.nodes, func(a, b exponentialNode) int {
		return cmp.Or(cmp.Compare(a.theta[1], b.theta[1]), cmp.Compare(a.theta[0], b.theta[0]))
	})
	all := make([][]float64, len(e.nodes))
	for j := range e.nodes {
		all[j], e.nodes[j].v = e.nodes[j].v, nil
	}
	e.units = quads(all, e.n)
}

// vector fills v with the exponential, divided by its largest element, and returns
// ln of that.
func (e *exponentials) vector(theta [2]float64, v []float64) (ln float64) {
	lnW, c0 := e.lnW[:len(v)], e.col[0][:len(v)]
	ln = math.Inf(-1)
	if e.d == 2 {
		c1 := e.col[1][:len(v)]
		for i := range v {
			v[i] = lnW[i] + theta[0]*c0[i] + theta[1]*c1[i]
			ln = max(ln, v[i])
		}
	} else {
		for i := range v {
			v[i] = lnW[i] + theta[0]*c0[i]
			ln = max(ln, v[i])
		}
	}
	for i := range v {
		v[i] = math.Exp(v[i] - ln)
	}
	return ln
}

// whiten fills z with values of k in the problem's unit.
func (e *exponentials) whiten(k, z []float64) {
	for i, ki := range k {
		z[i] = ki / e.o.scale * e.o.root[i]
	}
}

// thetaOf gives the exponents at canonical parameters.
func (e *exponentials) thetaOf(p []float64) (theta [2]float64) {
	if e.paths == 2 {
		return [2]float64{p[1] / e.scale[0], p[3] / e.scale[0]}
	}
	for j := range e.d {
		theta[j] = p[1+j] / e.scale[j]
	}
	return theta
}

// projection is the sum of squares of a curve at given exponents, with its
// derivatives: f = RSS/2, amplitudes eliminated.
type projection struct {
	theta     [2]float64
	amplitude [2]float64 // of vectors with largest element 1
	ln        [2]float64 // ln of that element
	rss       float64    // +Inf where an amplitude is not positive
	g         [2]float64
	h, gn     [3]float64 // 11, 12, 22: Hessian, and its part without the residuals
	decrement float64    // of RSS, by a full Newton step, where descend ends
}

// varpro is the memory of one search.
type varpro struct {
	e          *exponentials
	z, r       []float64
	v          [2][]float64
	perp       []float64
	zz         float64
	held       bool    // path 1 has a fixed amplitude at pivot, and θ1, θ2 are in order
	order      float64 // +1: θ1 <= θ2; -1: θ1 >= θ2
	noOther    bool    // held, with path 2 absent
	lnHeld     float64 // its ln there, in the problem's unit
	pivot      float64 // as an element of the column
	dim        int
	low, high  [2]float64 // bounds of θ
	cur, trial projection
	best       projection
	limit      float64 // descend gives up where it cannot come below; +Inf for never
	gain, move []float64
	// of a frame
	slope, length, mean, turn float64

	help   [3][]float64 // products of the nodes with the residuals of a line, it and its slope
	starts [][2]float64
	lead   [2][]float64 // what data add to θ in the first step from the sample's fit; nil where unknown
	ahead  [1][2]float64
}

func newVarpro(e *exponentials) *varpro {
	v := func() []float64 { return make([]float64, e.n) }
	w := &varpro{e: e, z: v(), r: v(), v: [2][]float64{v(), v()}, perp: v(), dim: e.d, limit: math.Inf(1)}
	m := func() []float64 { return make([]float64, len(e.nodes)) }
	w.gain, w.move, w.help = m(), m(), [3][]float64{m(), m(), m()}
	for j := range 2 {
		w.low[j], w.high[j] = -e.bound, e.bound
	}
	return w
}

// setData loads values of k.
func (w *varpro) setData(k []float64) {
	w.e.whiten(k, w.z)
	w.zz = dot(w.z, w.z)
}

// single evaluates one exponential at θ.
func (w *varpro) single(theta [2]float64, p *projection) {
	e, v, z := w.e, w.v[0], w.z
	p.theta = theta
	p.ln[0] = e.vector(theta, v)
	c := [2][]float64{e.col[0], e.col[1]}
	var s, q, s0, s1 float64
	for i, x := range v {
		x2 := x * x
		s += x * z[i]
		q += x2
		s0 += x2 * c[0][i]
		if e.d == 2 {
			s1 += x2 * c[1][i]
		}
	}
	a := s / q
	p.amplitude[0] = a
	if !(a > 0) {
		p.rss = math.Inf(1)
		return
	}
	m0, m1 := s0/q, s1/q
	var rss, g0, g1, b00, b01, b11, t00, t01, t11 float64
	for i, x := range v {
		r := z[i] - a*x
		w.r[i] = r
		rss += r * r
		d0 := c[0][i] - m0
		xr, xx := x*r, x*x
		g0 += d0 * xr
		b00 += d0 * d0 * xr
		t00 += d0 * d0 * xx
		if e.d == 2 {
			d1 := c[1][i] - m1
			g1 += d1 * xr
			b01 += d0 * d1 * xr
			b11 += d1 * d1 * xr
			t01 += d0 * d1 * xx
			t11 += d1 * d1 * xx
		}
	}
	p.rss = rss
	p.g = [2]float64{-a * g0, -a * g1}
	p.gn = [3]float64{a * a * t00, a * a * t01, a * a * t11}
	p.h = [3]float64{
		p.gn[0] - a*b00 - g0*g0/q, p.gn[1] - a*b01 - g0*g1/q, p.gn[2] - a*b11 - g1*g1/q,
	}
}

// pair evaluates two exponentials. Where the first is held its amplitude is not free.
func (w *varpro) pair(theta [2]float64, p *projection) {
	e, v1, v2, z := w.e, w.v[0], w.v[1], w.z
	p.theta = theta
	if w.held && (theta[1]-theta[0])*w.order < 0 {
		p.rss = math.Inf(1)
		return
	}
	p.ln[0] = e.vector([2]float64{theta[0]}, v1)
	p.ln[1] = e.vector([2]float64{theta[1]}, v2)
	p.rss = math.Inf(1)
	c := e.col[0]
	var q1, q12, q2, s1, m1, m2 float64
	for i, x := range v1 {
		y := v2[i]
		q1 += x * x
		q12 += x * y
		q2 += y * y
		s1 += x * z[i]
		m1 += x * x * c[i]
		m2 += y * y * c[i]
	}
	m1, m2 = m1/q1, m2/q2
	share := q12 / q1
	var a1, a2, n2 float64 // n2: squared length of what the fit of v1 leaves of v2
	if w.held {
		m1, share = w.pivot, 0
		a1 = math.Exp(w.lnHeld - theta[0]*w.pivot + p.ln[0])
	}
	var s2 float64
	for i, x := range v1 {
		y := v2[i] - share*x
		w.perp[i] = y
		n2 += y * y
		rest := z[i]
		if w.held {
			rest -= a1 * x
		}
		s2 += y * rest
	}
	if !(n2 > 1e-20*q2) {
		return
	}
	a2 = s2 / n2
	if !w.held {
		a1 = (s1 - q12*a2) / q1
	}
	p.amplitude = [2]float64{a1, a2}
	if !(a1 > 0 && a2 > 0) {
		return
	}
	var rss, g1, g2, u1, u2, t11, t12, t22, b11, b12, b21, b22 float64
	for i, x := range v1 {
		y, perp := v2[i], w.perp[i]
		r := z[i] - a1*x - a2*y
		w.r[i] = r
		rss += r * r
		d1, d2 := c[i]-m1, c[i]-m2
		dx, dy := d1*x, d2*y
		g1 += dx * r
		g2 += dy * r
		u1 += d1 * dx * r
		u2 += d2 * dy * r
		t11 += dx * dx
		t12 += dx * dy
		t22 += dy * dy
		b11 += dx * x
		b12 += dy * x
		b21 += dx * perp
		b22 += dy * perp
	}
	if math.IsNaN(rss) || math.IsInf(rss, 0) {
		return
	}
	p.rss = rss
	p.g = [2]float64{-a1 * g1, -a2 * g2}
	// The amplitudes take part in two orthonormal directions, v1 and what it leaves
	// of v2: rows c1 and c2 of the mixed derivatives, with and without residuals.
	root1, root2 := math.Sqrt(q1), math.Sqrt(n2)
	c1 := [2]float64{a1 * b11 / root1, a2 * b12 / root1}
	c2 := [2]float64{a1 * b21 / root2, a2 * b22 / root2}
	f1 := [2]float64{c1[0] - g1/root1, c1[1]}
	f2 := [2]float64{c2[0] + share*g1/root2, c2[1] - g2/root2}
	if w.held {
		c1, f1 = [2]float64{}, [2]float64{}
	}
	tt := [3]float64{a1 * a1 * t11, a1 * a2 * t12, a2 * a2 * t22}
	p.gn = [3]float64{
		tt[0] - c1[0]*c1[0] - c2[0]*c2[0], tt[1] - c1[0]*c1[1] - c2[0]*c2[1], tt[2] - c1[1]*c1[1] - c2[1]*c2[1],
	}
	p.h = [3]float64{
		tt[0] - a1*u1 - f1[0]*f1[0] - f2[0]*f2[0], tt[1] - f1[0]*f1[1] - f2[0]*f2[1],
		tt[2] - a2*u2 - f1[1]*f1[1] - f2[1]*f2[1],
	}
}

// heldAlone evaluates the first path alone with its amplitude fixed at the pivot.
func (w *varpro) heldAlone(theta [2]float64, p *projection) {
	v := w.v[0]
	p.theta = theta
	p.ln[0] = w.e.vector(theta, v)
	a := math.Exp(w.lnHeld - theta[0]*w.pivot + p.ln[0])
	p.amplitude[0] = a
	var rss, g, h, gn float64
	for i, x := range v {
		f := a * x
		r := w.z[i] - f
		d := w.e.col[0][i] - w.pivot
		rss += r * r
		g -= d * f * r
		h -= d * d * f * r
		gn += d * d * f * f
	}
	if p.rss = rss; !finite(rss, gn) {
		p.rss = math.Inf(1)
	}
	p.g, p.h, p.gn = [2]float64{g}, [3]float64{h + gn}, [3]float64{gn}
}

func (w *varpro) at(theta [2]float64, p *projection) {
	switch {
	case w.noOther:
		w.heldAlone(theta, p)
	case w.e.paths == 2 && w.dim == 2:
		w.pair(theta, p)
	default:
		w.single(theta, p)
	}
}

const (
	// descendTol is the Newton decrement, relative to RSS, at which a search ends:
	// RSS less the decrement is then good to far more than 1e-8.
	descendTol   = 1e-13
	nearTol      = 1e-9 // enough where rounding allows no more
	descendSteps = 60
	// exactFit is the share of the data's sum of squares that is rounding.
	exactFit = 1e-28
)

// descend takes damped Newton steps from θ, within the bounds, to a minimum left in
// w.cur. ok is false where it does not come to one.
func (w *varpro) descend(theta [2]float64) (ok bool) {
	cur := &w.cur
	w.at(theta, cur)
	if !(cur.rss < math.Inf(1)) {
		return false
	}
	cur.decrement = 0
	var damping float64
	near := false
	for steps := range descendSteps {
		if cur.rss <= exactFit*w.zz {
			return true
		}
		var free [2]bool
		for j := range w.dim {
			out := cur.theta[j] <= w.low[j] && cur.g[j] >= 0 || cur.theta[j] >= w.high[j] && cur.g[j] <= 0
			free[j] = !out && w.low[j] < w.high[j]
		}
		step, decrement, definite := newtonStep(&cur.h, &cur.g, free, 0)
		if definite && decrement <= descendTol*cur.rss {
			cur.decrement = decrement
			return true
		}
		near = definite && decrement <= nearTol*cur.rss
		// Newton's step foretells what is left to gain, but for its curvature.
		if definite && damping == 0 && steps > 0 && cur.rss-4*decrement > w.limit {
			return false
		}
		if !definite || damping > 0 {
			damping = max(damping, 1e-3)
			if step, _, definite = newtonStep(&cur.gn, &cur.g, free, damping); !definite {
				return near
			}
		}
		next := cur.theta
		for j := range w.dim {
			next[j] = max(w.low[j], min(w.high[j], next[j]+step[j]))
		}
		w.at(next, &w.trial)
		if w.trial.rss < cur.rss {
			*cur = w.trial
			if damping /= 10; damping < 1e-4 {
				damping = 0
			}
			continue
		}
		if damping = max(1e-2, damping*10); damping > 1e10 {
			return near
		}
	}
	return near
}

// newtonStep solves (H + damping·diag H) step = -g in the free variables, and gives
// g·H⁻¹g. definite is false where H is not positive definite.
func newtonStep(h *[3]float64, g *[2]float64, free [2]bool, damping float64) (step [2]float64, decrement float64, definite bool) {
	a, b, c := h[0]*(1+damping), h[1], h[2]*(1+damping)
	switch {
	case free[0] && free[1]:
		det := a*c - b*b
		if !(a > 0 && det > 1e-14*a*c) {
			return step, 0, false
		}
		step = [2]float64{(b*g[1] - c*g[0]) / det, (b*g[0] - a*g[1]) / det}
	case free[0]:
		if !(a > 0) {
			return step, 0, false
		}
		step[0] = -g[0] / a
	case free[1]:
		if !(c > 0) {
			return step, 0, false
		}
		step[1] = -g[1] / c
	}
	return step, -(step[0]*g[0] + step[1]*g[1]), true
}

// value is the RSS at a minimum found by descend.
func (p *projection) value() float64 { return p.rss - p.decrement }

// fitSingle fits one exponential from the starts given and from the grid; the minimum
// is left in w.best. ok is false where none was found.
func (w *varpro) fitSingle(warm ...[2]float64) (ok bool) {
	w.best.rss, w.best.decrement = math.Inf(1), 0
	for _, start := range warm {
		if w.descend(start) && w.cur.value() < w.best.value() {
			w.best = w.cur
		}
	}
	if w.alone() {
		return true
	}
	// Above and below no bend, or in one exponent all together: the best of each
	// is tried if it is not far worse than what is known.
	var cos [2]float64
	var node [2]int
	w.e.products(w.z, w.gain)
	for j, c := range w.gain {
		side := 0
		if w.e.nodes[j].theta[1] > 0 {
			side = 1
		}
		if c > cos[side] {
			cos[side], node[side] = c, j
		}
	}
	worse := 4.0
	if w.e.d == 1 {
		worse = 1
	}
	for side, c := range cos {
		if c > 0 && w.zz-c*c < worse*w.best.rss && w.descend(w.e.nodes[node[side]].theta) && w.cur.value() < w.best.value() {
			w.best = w.cur
		}
	}
	return w.best.rss < math.Inf(1)
}

// alone reports whether the minimum in w.best can be taken for the lowest without a
// look at the grid: the scatter is small beside the data, and the data are near the
// curve, compared with the radius at which the family of curves bends there, so that
// residuals change the Hessian little. Of 9,000 power curves of 15 points a minimum of
// a variance above a hundredth of the data's sum of squares, over N, was not the lowest
// in 0.2 %, below it none.
func (w *varpro) alone() bool {
	p := &w.best
	share := aloneShare
	if w.e.d == 2 {
		share = aloneShareOfTwo
	}
	if !(p.rss <= min(share*float64(w.e.n), 0.1)*w.zz) {
		return false
	}
	a, b, c := p.h[0]-p.gn[0]/2, p.h[1]-p.gn[1]/2, p.h[2]-p.gn[2]/2
	return a > 0 && (w.dim == 1 || a*c > b*b)
}

// aloneShare bounds the variance of a minimum, as a share of the data's sum of squares.
const aloneShare, aloneShareOfTwo = 1.3e-3, 3e-4

// setLead fills w.lead from a fit at θ to the data loaded: in the first Gauss–Newton
// step from there the exponents follow other data by fixed weights, since amplitudes
// and exponents of the fit itself ask for none.
func (w *varpro) setLead(theta [2]float64) {
	w.lead = [2][]float64{}
	if w.at(theta, &w.cur); !(w.cur.rss < math.Inf(1)) {
		return
	}
	n, e := w.e.n, w.e
	var q [][]float64 // orthogonal: amplitudes first
	var slopes [2][]float64
	for j := range w.dim {
		path := min(j, e.paths-1)
		slopes[j] = make([]float64, n)
		for i, x := range w.v[path] {
			slopes[j][i] = w.cur.amplitude[path] * e.col[j][i] * x
		}
	}
	r := 0.0
	for j, c := range [][]float64{w.v[0], w.v[1], slopes[0], slopes[1]} {
		if c == nil || j == 1 && e.paths == 1 {
			continue
		}
		c = append([]float64(nil), c...)
		before := dot(c, c)
		for range 2 {
			for _, other := range q {
				d := dot(other, c) / dot(other, other)
				if j == 3 && &other[0] == &q[len(q)-1][0] {
					r += d
				}
				floats.AddScaled(c, -d, other)
			}
		}
		if !(dot(c, c) > 1e-12*before) {
			return
		}
		q = append(q, c)
	}
	// What is left of the last column alone gives its exponent, the first less r
	// times that.
	last := q[len(q)-1]
	floats.Scale(1/dot(last, last), last)
	w.lead[w.dim-1] = last
	if w.dim == 2 {
		first := q[len(q)-2]
		floats.Scale(1/dot(first, first), first)
		floats.AddScaled(first, -r, last)
		w.lead[0] = first
	}
}

// led is θ of the sample's fit moved by the data loaded.
func (w *varpro) led(theta [2]float64) [2]float64 {
	if w.lead[0] == nil {
		return theta
	}
	for j := range w.dim {
		theta[j] = max(w.low[j], min(w.high[j], theta[j]+dot(w.lead[j], w.z)))
	}
	return theta
}

// addPath fits two exponentials, from the starts given and from the places where a
// second path helps the best single one, which is the best of line, with its frame. The
// minimum is left in w.best; found is false where no second path helps, and ok where no
// minimum was found though one must exist. Where w.limit is finite only a minimum below
// it is of interest: the search ends at the first, and where there can be none.
//
// Sums of any number of paths form a convex cone: where no vector of the grid has a
// positive product with the residuals, no other sum is better (B. G. Lindsay, Ann.
// Statist. 11 (1983) 86, has the theorem for mixtures), and the search ends.
func (w *varpro) addPath(line *varpro, warm ...[2]float64) (found, ok bool) {
	w.best = line.best
	decides := w.limit < math.Inf(1)
	w.look(line)
	if decides && w.hopeless(&line.best, line.best.value()-w.limit) {
		return false, true
	}
	better := func(start [2]float64) (best bool) {
		if w.descend(start) && w.cur.value() < w.best.value()*(1-1e-12) {
			w.best, found = w.cur, true
			if decides && w.best.value() < w.limit {
				return true
			}
			w.at(w.cur.theta, &w.cur)
			return w.certified(w.cur.rss)
		}
		return false
	}
	w.dim = 2
	for _, start := range warm {
		if better(start) {
			return true, true
		}
	}
	peaks := w.peaks(&line.best)
	for _, start := range peaks {
		if better(start) {
			return true, true
		}
	}
	if decides {
		return found, true
	}
	// One of the two paths against a third that would help them.
	for last := math.Inf(1); found && w.best.value() < last; {
		last = w.best.value()
		w.at(w.best.theta, &w.trial)
		_, third := w.steepest()
		for _, kept := range w.best.theta {
			if better([2]float64{kept, third}) {
				return true, true
			}
		}
	}
	return found, found || len(peaks) == 0
}

// steepest gives the node whose vector has the largest product with the residuals in
// w.r.
func (w *varpro) steepest() (product, theta float64) {
	product = math.Inf(-1)
	w.e.products(w.r, w.gain)
	for j, p := range w.gain {
		if p > product {
			product, theta = p, w.e.nodes[j].theta[0]
		}
	}
	return product, theta
}

// certified reports whether no vector of the grid would lower the sum of squares of
// the residuals in w.r.
func (w *varpro) certified(rss float64) bool {
	product, _ := w.steepest()
	return product <= 1e-7*math.Sqrt(rss)
}

// frame leaves the unit vector of a single exponential in w.v[0], that of its slope in
// w.v[1] and the residuals in w.r, all of w.best; length and slope are their lengths at
// unit amplitude, mean where the slope is 0.
func (w *varpro) frame() {
	v, s, c0 := w.v[0], w.v[1], w.e.col[0]
	w.e.vector(w.best.theta, v)
	var q, mean, t float64
	for i, x := range v {
		q += x * x
		mean += x * x * c0[i]
	}
	mean /= q
	for i, x := range v {
		w.r[i] = w.z[i] - w.best.amplitude[0]*x
		s[i] = (c0[i] - mean) * x
		t += s[i] * s[i]
	}
	w.slope, w.mean, w.length = math.Sqrt(t), mean, math.Sqrt(q)
	w.turn = w.length / w.slope
	root := w.length
	for i := range v {
		v[i] /= root
		s[i] /= w.slope
	}
}

// look fills w.help with the products of the nodes and the frame of line: residuals,
// line and slope.
func (w *varpro) look(line *varpro) {
	w.slope = line.slope
	for j, x := range [3][]float64{line.r, line.v[0], line.v[1]} {
		w.e.products(x, w.help[j])
	}
}

// leftover is the squared length of what line and slope leave of node j. Below
// minLeftover the node is the line itself.
func (w *varpro) leftover(j int) float64 {
	return 1 - square(w.help[1][j]) - square(w.help[2][j])
}

const minLeftover = 1e-8

// hopeless reports whether no two paths save needed on the sum of squares of line, by
// a bound in the complement of line and slope, which no fit of two paths can leave:
// the residuals' part in the plane of two vectors of the grid, one on either side of
// the line, and something for what lies between the vectors of the grid. After look.
func (w *varpro) hopeless(line *projection, needed float64) bool {
	between := betweenNodes * math.Sqrt(line.rss/float64(w.e.n))
	var most [2]float64
	for j, c := range w.help[0] {
		w.gain[j] = 0
		left := w.leftover(j)
		if !(c > 0 && left > minLeftover) {
			continue
		}
		g := c/math.Sqrt(left)*(1+betweenNodes/10) + between
		w.gain[j] = g
		side := 0
		if w.e.nodes[j].theta[0] > line.theta[0] {
			side = 1
		}
		most[side] = max(most[side], g*g)
	}
	if most[0]+most[1] < needed {
		return true
	}
	if max(most[0], most[1]) >= needed || w.e.gram == nil {
		return false
	}
	m := len(w.e.nodes)
	for j, g := range w.gain {
		if !(g*g+most[1] >= needed) || w.e.nodes[j].theta[0] > line.theta[0] {
			continue
		}
		for l := j + 1; l < m; l++ {
			h := w.gain[l]
			if !(g*g+h*h >= needed) || w.e.nodes[l].theta[0] <= line.theta[0] {
				continue
			}
			c := (w.e.gram[j*m+l] - w.help[1][j]*w.help[1][l] - w.help[2][j]*w.help[2][l]) / math.Sqrt(w.leftover(j)*w.leftover(l))
			// With amplitudes of 0 or more, as far as both are of use.
			if g > c*h && h > c*g && c < 1-1e-6 && (g*g-2*c*g*h+h*h)/(1-c*c) >= needed {
				return false
			}
		}
	}
	return true
}

// betweenNodes is the part of a standard deviation that a vector between those of the
// grid may have more in common with the residuals.
const betweenNodes = 0.2

// peaks gives the nodes that help a single exponential most, to first order: the
// residual's part along what line and its slope leave of the node's vector. After
// look.
func (w *varpro) peaks(line *projection) [][2]float64 {
	nodes := w.e.nodes
	for j, c := range w.help[0] {
		w.gain[j], w.move[j] = 0, 0
		if left := w.leftover(j); c > 0 && left > minLeftover {
			w.gain[j] = c * c / left
			w.move[j] = -c / left * w.help[2][j] / (w.slope * line.amplitude[0])
		}
	}
	w.starts = w.starts[:0]
	for j, g := range w.gain {
		if !(g > 1e-11*line.rss) || j > 0 && w.gain[j-1] > g || j+1 < len(nodes) && w.gain[j+1] >= g {
			continue
		}
		start := [2]float64{line.theta[0] + w.move[j], nodes[j].theta[0]}
		if (start[1]-start[0])*(start[1]-line.theta[0]) <= 0 || math.Abs(start[0]) > w.e.bound {
			start[0] = line.theta[0]
		}
		if w.pair(start, &w.trial); !(w.trial.rss < math.Inf(1)) {
			start[0] = line.theta[0]
		}
		w.starts = append(w.starts, start)
	}
	return w.starts
}

// pairs gives the pairs of nodes that are better than all their neighbours on the
// grid, as starts for a search that may take its time.
func (w *varpro) pairs() (starts [][2]float64) {
	nodes := w.e.nodes
	m := len(nodes)
	with := make([]float64, m)
	w.e.products(w.z, with)
	// gains is what a pair with positive amplitudes takes off the sum of squares.
	gains := make([]float64, m*m)
	for j := range m {
		for l := range j {
			c := w.e.gram[j*m+l]
			if with[j] > c*with[l] && with[l] > c*with[j] && c < 1 {
				gains[j*m+l] = (with[j]*with[j] - 2*c*with[j]*with[l] + with[l]*with[l]) / (1 - c*c)
			}
		}
	}
	for j := range m {
		for l := range j {
			g := gains[j*m+l]
			top := g > 0
			for a := max(0, j-1); a <= min(m-1, j+1); a++ {
				for b := max(0, l-1); b <= l+1; b++ {
					top = top && gains[a*m+b] <= g
				}
			}
			if top {
				starts = append(starts, [2]float64{nodes[l].theta[0], nodes[j].theta[0]})
			}
		}
	}
	return starts
}

// params fills the canonical parameters at a minimum.
func (e *exponentials) params(p *projection, out []float64) {
	ln := func(j int) float64 { return math.Log(p.amplitude[j]) - p.ln[j] + e.o.lnScale }
	if e.paths == 2 {
		a, b := 0, 1
		if p.theta[1] < p.theta[0] {
			a, b = 1, 0
		}
		// At the bound, rounding must not carry a barrier beyond it.
		barrier := func(theta float64) float64 { return max(-maxBarrier, min(maxBarrier, theta*e.scale[0])) }
		out[1], out[3] = barrier(p.theta[a]), barrier(p.theta[b])
		out[0], out[2] = ln(a)-out[1]*e.centre[0], ln(b)-out[3]*e.centre[0]
		return
	}
	out[0] = ln(0)
	for j := range e.d {
		out[1+j] = p.theta[j] * e.scale[j]
		out[0] -= out[1+j] * e.centre[j]
	}
}
