package fit

import (
	"fmt"
	"math"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// seededDesign is what fits of one models.Seeded share on the temperatures t: its curves
// at the seeds, ln k = off + a + E phi. It is read-only once made.
type seededDesign struct {
	c                   models.Seeded
	tRef                float64
	t                   []float64
	low, straight, high float64
	seeds               []float64
	off, phi            []float64 // of each seed, len(t) values
}

func newSeededDesign(c models.Seeded, tRef float64, t []float64) *seededDesign {
	tMin, tMax := floats.Min(t), floats.Max(t)
	d := &seededDesign{c: c, tRef: tRef, t: t, seeds: c.Seeds(tRef, tMin, tMax)}
	d.low, d.straight, d.high = c.Bounds(tRef, tMin, tMax)
	n := len(t)
	jac := make([]float64, 3*n)
	d.off, d.phi = make([]float64, n*len(d.seeds)), make([]float64, n*len(d.seeds))
	for j, q := range d.seeds {
		c.LnK(tRef, t, []float64{0, 0, q}, d.off[j*n:(j+1)*n], jac)
		for i := range n {
			d.phi[j*n+i] = jac[3*i+1]
		}
	}
	return d
}

// seededWork fits one set of data after another. It is a workspace of one goroutine.
type seededWork struct {
	*seededDesign
	y, weight []float64 // of the fit under way; weights are 1/variance, 0 allowed
	rss       []float64 // at the seeds
	p         []float64
	f, jac    []float64
	best, cur seededPoint
}

// seededPoint is the curve at q with the line that fits best there. A Gauss-Newton step
// in q alone goes to q + g/m and saves g²/m.
type seededPoint struct {
	q, a, e, rss, g, m float64
}

func (d *seededDesign) work() *seededWork {
	n := len(d.t)
	return &seededWork{
		seededDesign: d, rss: make([]float64, len(d.seeds)),
		p: make([]float64, 3), f: make([]float64, n), jac: make([]float64, 3*n),
	}
}

// line fits y - off = a + e phi.
func (w *seededWork) line(off, phi []float64, stride int) (a, e, rss float64) {
	y, weight := w.y, w.weight[:len(w.y)]
	off = off[:len(y)]
	var sw, mx, my float64
	for i, yi := range y {
		wi := weight[i]
		sw += wi
		mx += wi * phi[i*stride]
		my += wi * (yi - off[i])
	}
	mx, my = mx/sw, my/sw
	var xx, xy, yy float64
	for i, yi := range y {
		x, r := phi[i*stride]-mx, yi-off[i]-my
		wx := weight[i] * x
		xx += wx * x
		xy += wx * r
		yy += weight[i] * r * r
	}
	e = xy / xx
	return my - e*mx, e, yy - xy*e
}

// at evaluates c at q. By the envelope theorem the slope of the least RSS over a and E is
// that at fixed a and E (G. H. Golub, V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413).
func (w *seededWork) at(q float64, out *seededPoint) {
	p, f, jac := w.p, w.f, w.jac
	p[0], p[1], p[2] = 0, 0, q
	w.c.LnK(w.tRef, w.t, p, f, jac)
	p[0], p[1], _ = w.line(f, jac[1:], 3)
	w.c.LnK(w.tRef, w.t, p, f, jac)
	var sw, mx, mj, rss, g float64
	for i, yi := range w.y {
		wi, r := w.weight[i], yi-f[i]
		sw += wi
		mx += wi * jac[3*i+1]
		mj += wi * jac[3*i+2]
		rss += wi * r * r
		g += wi * r * jac[3*i+2]
	}
	mx, mj = mx/sw, mj/sw
	var xx, xj, jj float64
	for i := range w.y {
		wi, x, j := w.weight[i], jac[3*i+1]-mx, jac[3*i+2]-mj
		xx += wi * x * x
		xj += wi * x * j
		jj += wi * j * j
	}
	*out = seededPoint{q, p[0], p[1], rss, g, jj - xj*xj/xx}
}

// minimise leaves in w.best the least RSS over the bounds, each minimum among the seeds
// being followed until a step saves no more than tol·RSS.
func (w *seededWork) minimise(y, weight []float64, tol float64) {
	w.y, w.weight = y, weight
	n := len(y)
	for j := range w.seeds {
		_, _, w.rss[j] = w.line(w.off[j*n:(j+1)*n], w.phi[j*n:(j+1)*n], 1)
	}
	w.best.rss = math.Inf(1)
	last := len(w.seeds) - 1
	for j, v := range w.rss {
		if j > 0 && !(w.rss[j-1] > v) || j < last && !(w.rss[j+1] >= v) {
			continue
		}
		w.refine(w.seeds[max(j-1, 0)], w.seeds[j], w.seeds[min(j+1, last)], tol)
		if w.cur.rss < w.best.rss {
			w.best = w.cur
		}
	}
}

// refine follows the minimum between low and high from q. Where it lies at the end of
// that range, which is then a bound, it stops there.
func (w *seededWork) refine(low, q, high, tol float64) {
	const most = 80
	cur := &w.cur
	w.at(q, cur)
	if q == low && cur.g <= 0 || q == high && cur.g >= 0 {
		return
	}
	width := high - low
	for range most {
		if !(cur.g*cur.g > tol*cur.m*cur.rss) {
			return
		}
		if cur.g > 0 {
			low = cur.q
		} else {
			high = cur.q
		}
		next := cur.q + cur.g/cur.m
		// A step that would leave the bracket, or has long not shortened it, halves it.
		if !(next > low && next < high) || high-low > width {
			next = low + (high-low)/2
		}
		width *= 0.8
		if next == cur.q {
			return
		}
		w.at(next, cur)
	}
}

// reciprocals are the weights 1/V.
func reciprocals(v []float64) []float64 {
	w := make([]float64, len(v))
	for i, vi := range v {
		w[i] = 1 / vi
	}
	return w
}

// fitSeeded fits a seeded curve to a sample whose errors are additive in ln k. N, Nu,
// Sigma and LogLik are left to Fit, and Cov is (JᵀV⁻¹J)⁻¹, without σ².
func fitSeeded(s *Sample, c models.Seeded) *Result {
	res := &Result{Curve: c, TRef: s.TRef, RSS: math.NaN()}
	if d := s.DistinctT(); d < 3 {
		res.Reason = fmt.Sprintf("needs 3 distinct temperatures, has %d", d)
		return res
	}
	w := newSeededDesign(c, s.TRef, s.T).work()
	w.minimise(s.Y, reciprocals(s.V), 1e-26)
	w.at(w.straight, &w.cur)
	line := w.cur.rss
	if line <= float64(s.Len())*square(1e-12*maxAbsWhitened(s)) || !(w.best.rss < line*(1-improvement)) {
		res.Status, res.RSS = Excluded, line
		res.Reason = bendsTheOtherWay
		return res
	}
	res.P = []float64{w.best.a, w.best.e, w.best.q}
	finish(s, c, res)
	switch reason := w.edge(w.best.q); {
	case reason != "":
		res.Status, res.Cov, res.Reason = NotIdentified, nil, reason
	case res.Cov == nil:
		res.Status = NotIdentified
		res.Reason = "the data do not determine its parameters one by one"
	default:
		res.Status = Converged
	}
	return res
}

// boundReach is how near to a bound counts as at it, of the range of bounds.
const boundReach = 1e-9

const bendsTheOtherWay = "the data bend the other way, or not at all"

// edge says where q lies at a bound, "" where it does not.
func (d *seededDesign) edge(q float64) string {
	reach := boundReach * (d.high - d.low)
	if q > d.low+reach && q < d.high-reach {
		return ""
	}
	p := d.c.Info().Params[2]
	unit := ""
	if p.Unit != "1" {
		unit = " " + p.Unit
	}
	return fmt.Sprintf("the best fit lies at a limit of this curve: %.4g%s for %s", q, unit, p.Name)
}

// boxed is the problem of a seeded curve in (a, E, φ), q = middle + half·sin φ, so that
// no step leaves the bounds.
type boxed struct {
	Problem
	middle, half float64
	full         []float64
}

func (o *objective) boxed(d *seededDesign) *boxed {
	inner := o.problem()
	b := &boxed{middle: (d.low + d.high) / 2, half: (d.high - d.low) / 2, full: make([]float64, 3)}
	b.Problem = Problem{M: inner.M, N: 3, Eval: func(p, r, jac []float64) {
		b.expand(p)
		inner.Eval(b.full, r, jac)
		if jac != nil {
			slope := b.half * math.Cos(p[2])
			for i := 2; i < len(jac); i += 3 {
				jac[i] *= slope
			}
		}
	}}
	return b
}

// expand puts the parameters of a point into b.full.
func (b *boxed) expand(p []float64) {
	b.full[0], b.full[1] = p[0], p[1]
	b.full[2] = b.middle + b.half*math.Sin(p[2])
}

// shrink turns parameters into a point, off the bounds: there the slope in φ vanishes.
func (b *boxed) shrink(p []float64) {
	const inside = 0.999
	p[2] = math.Asin(math.Max(-inside, math.Min(inside, (p[2]-b.middle)/b.half)))
}

// fitSeededInK is fitInK for seeded curves.
func fitSeededInK(s *Sample, c models.Seeded) *Result {
	r := newResult(s, c)
	if d := s.DistinctT(); d < 3 {
		r.Reason = fmt.Sprintf("needs 3 distinct temperatures, has %d", d)
		return r
	}
	line := fitInK(s, models.Straight())
	if !line.Usable() {
		r.Reason = line.Reason
		return r
	}
	o := newObjective(s, c)
	w := newBentInK(o)
	p, found := w.fit(line.P, line.RSS/square(o.unit), nil)
	if !found {
		r.Status, r.RSS, r.Reason = Excluded, line.RSS, bendsTheOtherWay
		r.settle(s, nil, 1)
		return r
	}
	sol := &Solution{}
	copy(w.engine.p, p)
	w.engine.finish(o.problem(), sol)
	r.Status, r.Reason = sol.Status, sol.Reason
	r.P, r.RSS, r.Leverage = p, sol.RSS, sol.Leverage
	cov := sol.Cov
	if reason := w.seeded.edge(p[2]); reason != "" {
		r.Status, cov, r.Reason = NotIdentified, nil, reason
	} else if !(sol.Condition <= shapedCondition) {
		r.Status, cov = NotIdentified, nil
		r.Reason = "the data do not determine its parameters one by one"
	}
	r.Fitted = make([]float64, r.N)
	c.LnK(s.TRef, s.T, r.P, r.Fitted, nil)
	r.Residuals = make([]float64, r.N)
	for i, f := range r.Fitted {
		r.Residuals[i] = s.K[i] - math.Exp(f)
	}
	r.settle(s, cov, o.unit)
	return r
}
