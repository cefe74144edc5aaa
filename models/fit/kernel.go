package fit

import "math"

// basisRow is one point of a projected problem: the shape's abscissa u, the weight
// w = 1/sqrt(V), and the entries of the whitened orthonormal basis (p1, p2) that is
// projected out. A basis of one column has p2 = 0.
type basisRow struct{ u, w, p1, p2 float64 }

// kernel minimises ‖z - P W s(c + d u)‖² over (c, d), s = softplus, where P projects
// onto the complement of the basis. That is all that is left of a - e x + s(c - d x)
// once {1, x} has been projected out, since the shape's coefficient is 1 (variable
// projection with a fixed basis; Golub & Pereyra 1973, SIAM J. Numer. Anal. 10, 413,
// for the general case).
//
// It is a workspace of one goroutine.
type kernel struct {
	tab     *softplusTable
	rows    []basisRow
	z       []float64 // whitened, projected data
	ws      []float64 // scratch: weighted shape
	slope   []float64 // scratch: its slope
	low, up float64   // bounds of d
	floor   float64   // an RSS that is all rounding
}

// normal holds the residual sum of squares and what Newton's step needs at (c, d):
// half the negative gradient, the Gauss-Newton matrix and the second-order term, in
// the order cc, cd, dd.
type normal struct {
	c, d          float64
	rss           float64
	a1, a2        float64 // p1·Ws, p2·Ws
	gc, gd        float64
	m00, m01, m11 float64
	k00, k01, k11 float64
	newton        bool // the last step used the second-order term
	step0, step1  float64
	decrement     float64 // what the quadratic model says the step saves
	bound         bool    // d is held at a bound
}

// at evaluates everything at (c, d).
func (k *kernel) at(c, d float64, e *normal) {
	rows := k.rows
	n := len(rows)
	ws, slope, z := k.ws[:n], k.slope[:n], k.z[:n]
	k.tab.shape(c, d, rows, ws, slope)
	var a1, a2 float64
	for i := range rows {
		r := &rows[i]
		a1 += r.p1 * ws[i]
		a2 += r.p2 * ws[i]
	}
	var rss, gc, gd, k00, k01, k11 float64
	for i := range rows {
		r := &rows[i]
		res := z[i] - ws[i] + a1*r.p1 + a2*r.p2
		rss += res * res
		g := res * r.w * slope[i]
		gc += g
		gd += g * r.u
		h := g * (1 - slope[i])
		k00 += h
		hu := h * r.u
		k01 += hu
		k11 += hu * r.u
	}
	var m00, m01, m11, b10, b11, b20, b21 float64
	for i := range rows {
		r := &rows[i]
		j0 := r.w * slope[i]
		j1 := j0 * r.u
		m00 += j0 * j0
		m01 += j0 * j1
		m11 += j1 * j1
		b10 += r.p1 * j0
		b11 += r.p1 * j1
		b20 += r.p2 * j0
		b21 += r.p2 * j1
	}
	e.c, e.d, e.rss, e.a1, e.a2 = c, d, rss, a1, a2
	e.gc, e.gd = gc, gd
	e.m00 = m00 - b10*b10 - b20*b20
	e.m01 = m01 - b10*b11 - b20*b21
	e.m11 = m11 - b11*b11 - b21*b21
	e.k00, e.k01, e.k11 = k00, k01, k11
}

// singular is the relative determinant below which a 2 x 2 matrix is taken as
// not positive definite.
const singular = 1e-13

// solve fills the step from e: Newton's where the Hessian is positive definite, a
// damped Gauss-Newton one elsewhere. With d at a bound that the step would cross,
// the step is in c alone.
func (k *kernel) solve(e *normal) {
	h00, h01, h11 := e.m00-e.k00, e.m01-e.k01, e.m11-e.k11
	det := h00*h11 - h01*h01
	e.newton = h00 > 0 && h11 > 0 && det > singular*h00*h11
	if !e.newton {
		const ridge = 1e-3
		h00, h01, h11 = e.m00*(1+ridge), e.m01, e.m11*(1+ridge)
		det = h00*h11 - h01*h01
		if !(h00 > 0 && h11 > 0 && det > 0) {
			e.step0, e.step1, e.decrement = 0, 0, math.NaN()
			return
		}
	}
	e.step0 = (h11*e.gc - h01*e.gd) / det
	e.step1 = (h00*e.gd - h01*e.gc) / det
	e.bound = (e.d >= k.up && e.step1 > 0) || (e.d <= k.low && e.step1 < 0)
	if e.bound {
		e.step0, e.step1 = e.gc/h00, 0
	}
	e.decrement = e.step0*e.gc + e.step1*e.gd
}

// step moves cur by one step, shortened until the residual sum of squares falls.
// It reports whether it did. trial is scratch.
func (k *kernel) step(cur, trial *normal) bool {
	k.solve(cur)
	if math.IsNaN(cur.decrement) {
		return false
	}
	// A flat stretch gives a step across the whole plane: no more than the
	// crossover's width in c, and a doubling of d.
	scale := 1.0
	if m := 1 + math.Abs(cur.d); math.Abs(cur.step1) > m {
		scale = m / math.Abs(cur.step1)
	}
	if m := 2 + math.Abs(cur.d); math.Abs(cur.step0)*scale > m {
		scale = m / math.Abs(cur.step0)
	}
	for range 12 {
		c, d := cur.c+scale*cur.step0, cur.d+scale*cur.step1
		if d > k.up {
			d = k.up
		} else if d < k.low {
			d = k.low
		}
		k.at(c, d, trial)
		if trial.rss < cur.rss {
			*cur, *trial = *trial, *cur
			return true
		}
		scale *= 0.25
	}
	return false
}

// converge takes steps until the decrement is at most tol·RSS, or RSS is at its
// floor, or nothing more is gained.
func (k *kernel) converge(cur, trial *normal, tol float64, most int) {
	for range most {
		if cur.rss <= k.floor || !k.step(cur, trial) {
			return
		}
		k.solve(cur)
		if cur.newton && cur.decrement <= tol*cur.rss {
			return
		}
	}
}

// polish takes undamped steps for as long as they shrink: the residual sum of
// squares cannot show the last half of the digits.
func (k *kernel) polish(cur, trial *normal) {
	last := math.Inf(1)
	for range 50 {
		k.solve(cur)
		if math.IsNaN(cur.decrement) {
			return
		}
		width := 1 + math.Abs(cur.d)
		size := math.Hypot(cur.step0, cur.step1) / width
		if !(size < last) || size > 0.1 {
			return
		}
		last = size
		d := math.Max(k.low, math.Min(k.up, cur.d+cur.step1))
		k.at(cur.c+cur.step0, d, trial)
		if trial.rss > cur.rss*(1+1e-6)+k.floor {
			return
		}
		*cur, *trial = *trial, *cur
	}
}
