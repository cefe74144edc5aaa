package fit

import (
	"math"
)

const (
	// warmTol stops a warm start: with Newton decrement δ² <= warmTol·RSS the
	// minimum is RSS - δ² to a relative 1e-9 or so.
	warmTol = 1e-6
	// warmMost is the largest number of Newton steps tried before the warm start
	// is given up.
	warmMost = 5
	// decideTol and decideMost are the same where only the first place is asked for,
	// decideHope is how many times what the quadratic model promises is hoped for, and
	// decideStarts the number of shapes gone from.
	decideTol    = 1e-2
	decideMost   = 12
	decideHope   = 8
	decideStarts = 2
	// coldTol is the same for the steps of a global search.
	coldTol = 1e-9
	// lostDigits is the share of the straight line's RSS below which differences
	// of sums of squares have lost too many digits.
	lostDigits = 1e-6
)

// fastRefitter refits the linear curves by products with stored columns and the
// shaped ones by verified warm starts. It is a workspace of one goroutine.
type fastRefitter struct {
	*resampleDesign
	full, taken workspace
	index       []int     // entries taken
	root        []float64 // sqrt of their counts
	scaled      []float64 // their data times root
	search      *search
	leads       []lead // scratch
	cur, trial  normal
	q           [2]float64
	seededWork  []*seededWork
	counted     []float64 // weights times counts
	y           []float64 // data, 0 where not taken
}

// workspace is a kernel on the design of a resample and what the linear curves need
// on it.
type workspace struct {
	kernel
	data         []float64   // projected data
	directions   [][]float64 // projected directions
	gram         []float64
	product      []float64 // data·columns
	d1, d2       []float64 // coordinates of the directions on the basis
	n1, n2, mean float64
	a1, a2       float64 // coordinates of the data on the basis
	zz           float64
}

var _ Refitter = (*fastRefitter)(nil)

func (d *resampleDesign) refitter() *fastRefitter {
	n, m := len(d.rows), len(d.directions)
	r := &fastRefitter{resampleDesign: d, search: d.newSearch(), index: make([]int, n), root: make([]float64, n), scaled: make([]float64, n)}
	for _, w := range []*workspace{&r.full, &r.taken} {
		w.kernel = *d.kernel()
		w.data = make([]float64, n)
		w.product = make([]float64, 4*len(d.columns)/n)
		w.d1, w.d2 = make([]float64, m), make([]float64, m)
	}
	for _, sc := range d.seeded {
		r.seededWork = append(r.seededWork, sc.design.work())
	}
	r.counted, r.y = make([]float64, n), make([]float64, n)
	r.full.directions, r.full.gram = d.directions, d.gram
	r.full.n1, r.full.n2, r.full.mean = d.n1, d.n2, d.mean
	r.taken.rows = make([]basisRow, n)
	r.taken.gram = make([]float64, m*m)
	for range m {
		r.taken.directions = append(r.taken.directions, make([]float64, n))
	}
	return r
}

// Clone implements Refitter.
func (r *fastRefitter) Clone() Refitter { return r.refitter() }

// Refit implements Refitter.
func (r *fastRefitter) Refit(y []float64, out *Refit) {
	mustMatch(r.s, y, nil)
	out.prepare(r.params)
	w := &r.full
	n := len(r.rows)
	z, base := w.data[:n], r.base[:n]
	var a1, a2 float64
	for i := range r.rows {
		b := &r.rows[i]
		v := b.w * (y[i] - base[i])
		z[i] = v
		a1 += b.p1 * v
		a2 += b.p2 * v
	}
	var zz float64
	for i := range r.rows {
		b := &r.rows[i]
		v := z[i] - a1*b.p1 - a2*b.p2
		z[i] = v
		zz += v * v
	}
	w.a1, w.a2, w.zz = a1+r.base1, a2+r.base2, zz
	for g := 0; g*n < len(r.columns); g++ {
		*(*quad)(w.product[4*g:]) = dot4(z, r.columns[g*n:])
	}
	out.How = HowLinear
	best := math.Inf(1)
	for j := range r.linear {
		lc := &r.linear[j]
		rss := r.fitLinear(w, lc, out.P[lc.index])
		out.RSS[lc.index] = rss
		best = math.Min(best, r.of(lc.index, rss))
	}
	for j := range r.shaped {
		sc := &r.shaped[j]
		if r.distinct < r.needs[sc.index] {
			out.fail(sc.index)
			continue
		}
		rss, how := r.fitShaped(w, sc, best)
		r.give(w, sc, rss, how, out)
		best = math.Min(best, r.of(sc.index, rss))
	}
	if len(r.seeded) > 0 {
		r.fitSeeded(y, r.weight, w.zz, r.distinct+1, out)
	}
	r.first(out)
}

// seededTol stops the steps of a seeded curve: what they would still save, of RSS.
const seededTol = 1e-10

// fitSeeded fits the seeded candidates to y. straight is the RSS of the line, and
// distinct the number of temperatures, of which there must be more than parameters.
func (r *fastRefitter) fitSeeded(y, weight []float64, straight float64, distinct int, out *Refit) {
	for j := range r.seeded {
		i, w := r.seeded[j].index, r.seededWork[j]
		if distinct <= r.needs[i] {
			out.fail(i)
			continue
		}
		w.minimise(y, weight, seededTol)
		out.How = max(out.How, HowCold)
		if !(w.best.rss < straight*(1-improvement)) {
			out.RSS[i] = math.Inf(1)
			out.blank(i)
			continue
		}
		out.RSS[i] = w.best.rss
		if p := out.P[i]; len(p) > 0 {
			p[0], p[1], p[2] = w.best.a, w.best.e, w.best.q
		}
	}
}

// give records the outcome of a shaped curve.
func (r *fastRefitter) give(w *workspace, sc *shapedCandidate, rss float64, how How, out *Refit) {
	out.RSS[sc.index] = rss
	out.How = max(out.How, how)
	if p := out.P[sc.index]; len(p) > 0 {
		if how == HowFailed || math.IsInf(rss, 1) {
			for i := range p {
				p[i] = math.NaN()
			}
			return
		}
		r.shapedParams(w, sc, p)
	}
}

// fitLinear returns the residual sum of squares of a linear curve and its canonical
// parameters.
func (r *fastRefitter) fitLinear(w *workspace, lc *linearCandidate, p []float64) float64 {
	m := len(w.directions)
	o, alpha := lc.offset.direction, lc.offset.scale
	rss := w.zz
	if o >= 0 {
		rss += alpha * (alpha*w.gram[o*m+o] - 2*w.product[o])
	}
	// The coefficients of the extra directions: one or two normal equations
	// between vectors that are orthogonal to lines.
	var theta [2]float64
	switch len(lc.extra) {
	case 1:
		k := lc.extra[0].direction
		t := w.residualProduct(k, o, alpha)
		theta[0] = t / w.gram[k*m+k]
		rss -= t * theta[0]
	case 2:
		k, l := lc.extra[0].direction, lc.extra[1].direction
		tk, tl := w.residualProduct(k, o, alpha), w.residualProduct(l, o, alpha)
		kk, kl, ll := w.gram[k*m+k], w.gram[k*m+l], w.gram[l*m+l]
		det := kk*ll - kl*kl
		theta[0], theta[1] = (ll*tk-kl*tl)/det, (kk*tl-kl*tk)/det
		rss -= tk*theta[0] + tl*theta[1]
	}
	if rss < lostDigits*w.zz {
		rss = w.explicit(lc, &theta)
	}
	// What is left for the line, in the coordinates of the basis, then at u.
	a1, a2 := w.a1, w.a2
	if o >= 0 {
		a1 -= alpha * w.d1[o]
		a2 -= alpha * w.d2[o]
	}
	for j, e := range lc.extra {
		a1 -= theta[j] * w.d1[e.direction]
		a2 -= theta[j] * w.d2[e.direction]
	}
	b := a2 / w.n2
	a := a1/w.n1 - b*w.mean
	a -= lc.offset.a
	b -= lc.offset.b
	for j, e := range lc.extra {
		beta := theta[j] / e.scale
		a -= beta * e.a
		b -= beta * e.b
		p[2+j] = beta
	}
	p[0] = a + b*r.atRef
	p[1] = b / r.width
	return rss
}

// residualProduct is direction k times the data less the offset.
func (w *workspace) residualProduct(k, o int, alpha float64) float64 {
	if o < 0 {
		return w.product[k]
	}
	return w.product[k] - alpha*w.gram[k*len(w.directions)+o]
}

// explicit sums the squared residuals themselves.
func (w *workspace) explicit(lc *linearCandidate, theta *[2]float64) float64 {
	var rss float64
	for i := range w.rows {
		v := w.data[i]
		if o := lc.offset.direction; o >= 0 {
			v -= lc.offset.scale * w.directions[o][i]
		}
		for j, e := range lc.extra {
			v -= theta[j] * w.directions[e.direction][i]
		}
		rss += v * v
	}
	return rss
}

// load puts the data of a shaped curve into the kernel.
func (w *workspace) load(sign float64) {
	z, data := w.z[:len(w.rows)], w.data[:len(w.rows)]
	for i, v := range data {
		z[i] = sign * v
	}
	w.floor = 1e-28 * w.zz
}

// fitShaped fits a shaped curve to the data of r.full; best is the criterion to beat.
func (r *fastRefitter) fitShaped(w *workspace, sc *shapedCandidate, best float64) (float64, How) {
	w.load(sc.sign)
	if sc.warm != nil {
		var t [5]float64
		for j := range t {
			t[j] = sc.sign * w.product[sc.warm.first+j]
		}
		c, d := sc.warm.predict(&t)
		if rss, ok := r.warm(w, c, d); ok && sc.warm.trusts(&r.cur) {
			return rss, HowWarm
		}
	}
	limit := math.Inf(1)
	if r.screens {
		limit = r.limit(sc.index, best)
		coarse, fine := r.covers()
		if coarse.excludes(w.data, sc.sign, w.zz, limit) {
			return math.Inf(1), HowScreened
		}
		if rss, how, ok := r.screen(fine, w, sc, limit); ok {
			return rss, how
		}
	}
	e, ok := r.cold(&w.kernel, r.search, w.zz, coldTol)
	return r.settle(e, ok, limit)
}

// screen tells without a global search whether a shaped curve gets below the limit. ok
// is false where its parameters are wanted and it may: the nodes of the search that
// lead nowhere are then marked.
func (r *fastRefitter) screen(fine *cover, w *workspace, sc *shapedCandidate, limit float64) (rss float64, how How, ok bool) {
	if r.leads == nil {
		r.leads = make([]lead, 0, len(fine.shapes))
	}
	if w == &r.full {
		r.leads = fine.leads(w.data, sc.sign, w.zz, limit, r.leads[:0])
	} else {
		r.leads = r.leadsTaken(fine, w, sc.sign, limit, r.leads[:0])
	}
	if len(r.leads) == 0 {
		return math.Inf(1), HowScreened, true
	}
	if r.params[sc.index] > 0 {
		r.search.keep(r.plan, r.leads)
		return 0, HowCold, false
	}
	leads := r.leads
	for range decideStarts {
		var l lead
		if l, leads = fine.next(leads); r.decide(&w.kernel, fine, l, limit) {
			return r.cur.rss - r.cur.decrement, HowDecided, true
		}
		if len(leads) == 0 {
			break
		}
	}
	return math.Inf(1), HowDecided, true
}

// decide takes Newton steps from near a shape of the cover towards the minimum next to it, and reports
// whether that lies below the limit: any minimum below it, the lowest or not, puts the
// curve first.
func (r *fastRefitter) decide(k *kernel, fine *cover, l lead, limit float64) bool {
	cur := &r.cur
	c, d := fine.start(l)
	k.at(c, d, cur)
	for range decideMost {

		k.solve(cur)
		if cur.newton && !cur.bound {
			if cur.rss < limit && cur.decrement <= decideTol*cur.rss {
				return true
			}
			if decideHope*cur.decrement < cur.rss-limit {
				return false
			}
		}
		if !k.step(cur, &r.trial) {
			break
		}
	}
	return cur.rss < limit
}

// settle keeps the outcome of a global search. A minimum above the limit need not be
// the lowest one, and is no more than proof that the curve does not come first.
func (r *fastRefitter) settle(e *normal, ok bool, limit float64) (float64, How) {
	r.cur = *e
	if !ok || e.rss > limit {
		return math.Inf(1), HowCold
	}
	return e.rss, HowCold
}

// warm takes Newton steps from (c, d) until the decrement shows the minimum to be
// RSS - decrement. ok is false where it does not come to that inside the bounds.
func (r *fastRefitter) warm(w *workspace, c, d float64) (rss float64, ok bool) {
	k, cur := &w.kernel, &r.cur
	if !(math.Abs(d) < k.up) || math.IsNaN(c) {
		return 0, false
	}
	k.at(c, d, cur)
	for range warmMost {
		k.solve(cur)
		if cur.rss <= k.floor {
			return cur.rss, true
		}
		if cur.newton && !cur.bound && cur.decrement <= warmTol*cur.rss {
			return cur.rss - cur.decrement, cur.rss < w.zz
		}
		if !k.step(cur, &r.trial) {
			return 0, false
		}
	}
	return 0, false
}

// shapedParams gives the canonical parameters at r.cur, one Newton step on.
func (r *fastRefitter) shapedParams(w *workspace, sc *shapedCandidate, p []float64) {
	w.load(sc.sign)
	k, e := &w.kernel, &r.cur
	k.solve(e)
	if e.newton && math.Abs(e.step0)+math.Abs(e.step1) < 1 {
		k.at(e.c+e.step0, math.Max(k.low, math.Min(k.up, e.d+e.step1)), e)
	}
	b := (sc.sign*w.a2 - e.a2) / w.n2
	a := (sc.sign*w.a1-e.a1)/w.n1 - b*w.mean
	r.q[0], r.q[1] = e.c+e.d*r.atRef, e.d/r.width
	sc.curve.FromShape(sc.sign*(a+b*r.atRef), sc.sign*b/r.width, r.q[:], p)
}

// RefitCounts implements Refitter. The projector is rebuilt from the counts, with
// the weight of an entry taken m times multiplied by sqrt(m).
func (r *fastRefitter) RefitCounts(y []float64, counts []int, out *Refit) {
	mustMatch(r.s, y, counts)
	out.prepare(r.params)
	w := &r.taken
	n, distinct, last := 0, 0, -1
	w.rows, w.data = w.rows[:cap(w.rows)], w.data[:cap(w.data)]
	for i, m := range counts {
		if m == 0 {
			continue
		}
		// Entries are in order of T.
		if g := r.group[i]; g != last {
			distinct, last = distinct+1, g
		}
		root := 1.0
		if m > 1 {
			root = math.Sqrt(float64(m))
		}
		b := &r.rows[i]
		r.index[n], r.root[n] = i, root
		w.rows[n] = basisRow{u: b.u, w: b.w * root}
		w.data[n] = b.w * root * (y[i] - r.base[i])
		n++
	}
	w.rows, w.data = w.rows[:n], w.data[:n]
	w.n1, w.n2, w.mean = orthonormal(w.rows)
	r.project(w)

	out.How = HowLinear
	best := math.Inf(1)
	for j := range r.linear {
		lc := &r.linear[j]
		if distinct <= r.needs[lc.index] {
			out.fail(lc.index)
			continue
		}
		rss := r.fitLinear(w, lc, out.P[lc.index])
		out.RSS[lc.index] = rss
		best = math.Min(best, r.of(lc.index, rss))
	}
	for j := range r.shaped {
		sc := &r.shaped[j]
		if distinct <= r.needs[sc.index] {
			out.fail(sc.index)
			continue
		}
		rss, how := r.fitTaken(w, sc, best)
		r.give(w, sc, rss, how, out)
		best = math.Min(best, r.of(sc.index, rss))
	}
	if len(r.seeded) > 0 {
		for i, m := range counts {
			r.counted[i], r.y[i] = 0, 0
			if m > 0 {
				r.counted[i], r.y[i] = float64(m)*r.weight[i], y[i]
			}
		}
		r.fitSeeded(r.y, r.counted, w.zz, distinct, out)
	}
	r.first(out)
}

// project projects the data and the directions of a resample with counts.
func (r *fastRefitter) project(w *workspace) {
	n := len(w.rows)
	z := w.data[:n]
	var a1, a2 float64
	for i := range w.rows {
		b := &w.rows[i]
		a1 += b.p1 * z[i]
		a2 += b.p2 * z[i]
	}
	var zz, b1, b2 float64
	for i := range w.rows {
		b := &w.rows[i]
		v := z[i] - a1*b.p1 - a2*b.p2
		z[i] = v
		zz += v * v
		// The base line's coordinates on this basis.
		v = b.w * r.base[r.index[i]]
		b1 += b.p1 * v
		b2 += b.p2 * v
	}
	w.a1, w.a2, w.zz = a1+b1, a2+b2, zz
	for k, e := range r.directions {
		v := w.directions[k][:n]
		var c1, c2 float64
		for i := range w.rows {
			b := &w.rows[i]
			x := e[r.index[i]] * r.root[i]
			v[i] = x
			c1 += b.p1 * x
			c2 += b.p2 * x
		}
		var product float64
		for i := range w.rows {
			b := &w.rows[i]
			v[i] -= c1*b.p1 + c2*b.p2
			product += v[i] * z[i]
		}
		w.d1[k], w.d2[k], w.product[k] = c1, c2, product
		m := len(r.directions)
		for l := range k + 1 {
			g := dot(v, w.directions[l][:n])
			w.gram[k*m+l], w.gram[l*m+k] = g, g
		}
	}
}

// fitTaken is fitShaped for a resample with counts.
func (r *fastRefitter) fitTaken(w *workspace, sc *shapedCandidate, best float64) (float64, How) {
	w.load(sc.sign)
	for i, v := range w.data {
		r.scaled[i] = v * r.root[i]
	}
	if sc.warm != nil {
		if rss, ok := r.warm(w, sc.warm.c, sc.warm.d); ok && sc.warm.trusts(&r.cur) {
			return rss, HowWarm
		}
	}
	limit := math.Inf(1)
	if r.screens {
		limit = r.limit(sc.index, best)
		_, fine := r.covers()
		if rss, how, ok := r.screen(fine, w, sc, limit); ok {
			return rss, how
		}
	}
	// The stored shapes differ from those of this projector by lines alone.
	n := len(r.resampleDesign.rows)
	for j := 0; j < len(r.nodes); j += 4 {
		full := r.shapes[j/4*n:]
		zs := r.takenProducts(w, full)
		var norm2 quad
		r.takenNorms(w, full, 0, &norm2)
		r.takenNorms(w, full, 2, &norm2)
		for i := range min(4, len(r.nodes)-j) {
			r.search.rss[j+i] = w.zz - 2*sc.sign*zs[i] + norm2[i]
		}
	}
	e, ok := r.descend(&w.kernel, r.search, w.zz, coldTol)
	return r.settle(e, ok, limit)
}

// takenProducts returns the products of four whitened vectors of the full design with
// the data, which are orthogonal to the basis already.
func (r *fastRefitter) takenProducts(w *workspace, full []quad) (p quad) {
	data, index := r.scaled[:len(w.rows)], r.index[:len(w.rows)]
	var p0, p1, p2, p3 float64
	for i, z := range data {
		f := &full[index[i]]
		p0 += z * f[0]
		p1 += z * f[1]
		p2 += z * f[2]
		p3 += z * f[3]
	}
	return quad{p0, p1, p2, p3}
}

// takenNorms fills the squared lengths, after projection, of vectors j and j+1 of four
// of the full design; more than two at a time leave the registers.
func (r *fastRefitter) takenNorms(w *workspace, full []quad, j int, norm2 *quad) {
	rows := w.rows
	index, root := r.index[:len(rows)], r.root[:len(rows)]
	var c1, c2, s, d1, d2, t float64
	for i := range rows {
		b := &rows[i]
		f := &full[index[i]]
		x, y := f[j]*root[i], f[j+1]*root[i]
		c1 += b.p1 * x
		c2 += b.p2 * x
		s += x * x
		d1 += b.p1 * y
		d2 += b.p2 * y
		t += y * y
	}
	norm2[j], norm2[j+1] = s-c1*c1-c2*c2, t-d1*d1-d2*d2
}

// leadsTaken is cover.leads on the projector of a resample with counts.
func (r *fastRefitter) leadsTaken(c *cover, w *workspace, sign, limit float64, to []lead) []lead {
	b, decided, excluded := c.against(w.zz, limit)
	if excluded {
		return to
	}
	n := len(r.resampleDesign.rows)
	for k := 0; k < len(c.shapes); k += 4 {
		full := c.quads[k/4*n:]
		p := r.takenProducts(w, full)
		var norm2 quad
		for j := 0; j < 4; j += 2 {
			// Only shapes that point the way of the data can be of use.
			if decided || sign*p[j] > 0 || sign*p[j+1] > 0 {
				r.takenNorms(w, full, j, &norm2)
			}
		}
		for j := range min(4, len(c.shapes)-k) {
			if !(norm2[j] > 1e-12) {
				continue // the shape is a line here
			}
			norm, pj := math.Sqrt(norm2[j]), sign*p[j]
			if decided || pj > b.most*norm && b.beaten(pj/norm, c.low[k+j]*norm, c.high[k+j]*norm) {
				to = append(to, c.lead(k+j, pj, norm))
			}
		}
	}
	return to
}
