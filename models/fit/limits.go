package fit

import (
	"fmt"
	"math"

	"onebarrier/models"
)

// Limit is an entry of a sample of which only a bound is known: "< value" or
// "> value". It enters the likelihood as the probability of its side of the bound
// (J. Tobin, Econometrica 26 (1958) 24), in ln k, or in k where the model is InK,
// without a Jacobian: a probability is the same for k and for ln k.
type Limit struct {
	T     float64 // K
	K     float64 // the bound, in the data's unit
	Below bool    // k lies below the bound, else above it
	V     float64 // variance of what would have been measured, as in Sample.V
	// Beside are the values of the sample's nuisance columns for this entry; nil where
	// it has none.
	Beside []float64
}

// WithLimits returns the sample with limits, which its entries do not hold: T, Y, K
// and V stay those of the measured entries.
func (s *Sample) WithLimits(limits []Limit) (*Sample, error) {
	for i, l := range limits {
		switch {
		case !(l.T > 0) || math.IsInf(l.T, 0):
			return nil, fmt.Errorf("fit: limit %d: T = %g K is not a positive temperature", i+1, l.T)
		case !(l.V > 0) || math.IsInf(l.V, 0):
			return nil, fmt.Errorf("fit: limit %d: variance %g is not positive", i+1, l.V)
		case math.IsNaN(l.K) || math.IsInf(l.K, 0) || !(l.K > 0) && !s.Model.InK():
			return nil, fmt.Errorf("fit: limit %d: a limit of k = %g cannot be used under %q", i+1, l.K, s.Model)
		case len(l.Beside) != s.Spent():
			return nil, fmt.Errorf("fit: limit %d: it needs a value for each of %d nuisance columns, and has %d", i+1, s.Spent(), len(l.Beside))
		}
	}
	out := *s
	out.Limits = limits
	return &out, nil
}

// Measured is the sample without its limits.
func (s *Sample) Measured() *Sample {
	if len(s.Limits) == 0 {
		return s
	}
	out := *s
	out.Limits = nil
	return &out
}

// All holds the measured entries and, after them, the limits as if the bound had
// been measured: the temperatures and variances of a resample.
func (s *Sample) All() *Sample {
	if len(s.Limits) == 0 {
		return s
	}
	n := s.Len()
	out := &Sample{Model: s.Model, TRef: s.TRef, T: s.T[:n:n], Y: s.Y[:n:n], K: s.K[:n:n], V: s.V[:n:n]}
	for _, l := range s.Limits {
		out.add(l.T, l.K, l.V)
	}
	return out
}

// add appends one entry.
func (s *Sample) add(t, k, v float64) {
	y := math.NaN()
	if k > 0 {
		y = math.Log(k)
	}
	s.T, s.K, s.V, s.Y = append(s.T, t), append(s.K, k), append(s.V, v), append(s.Y, y)
}

// Measured is the fit to the measured entries alone: what tests of adequacy go by.
func (r *Result) Measured() *Result {
	if r.Exact != nil {
		return r.Exact
	}
	return r
}

// mills returns ln Φ(z), m = φ(z)/Φ(z) and z + m, which is positive, without
// underflow or cancellation in either tail.
func mills(z float64) (lnPhi, m, zm float64) {
	const lnRoot2Pi = 0.91893853320467274178
	if z < -30 {
		// Φ(-x) = φ(x)/x (1 - 1/x² + 3/x⁴ - 15/x⁶ + …), Abramowitz & Stegun 26.2.12;
		// beyond x = 30 seven terms leave less than 1e-16.
		u := 1 / (z * z)
		missing := u * (1 - u*(3-u*(15-u*(105-u*(945-u*(10395-u*135135))))))
		m = -z / (1 - missing)
		return -z*z/2 - lnRoot2Pi - math.Log(-z) + math.Log1p(-missing), m, m * missing
	}
	phi := math.Erfc(-z/math.Sqrt2) / 2
	lnPhi = math.Log(phi)
	if z > 0 {
		lnPhi = math.Log1p(-math.Erfc(z/math.Sqrt2) / 2)
	}
	m = math.Exp(-z*z/2-lnRoot2Pi) / phi
	return lnPhi, m, z + m
}

// censored is -2 ln L of one curve on a sample with limits, up to a constant of the
// sample:
//
//	D = Σ r²/(σ²V) + 2n ln σ - 2 Σ ln Φ(z),  z = ±(L - f)/(σ√V)
//
// the first sum over the n measured entries, the second over the limits, + for "<";
// f is ln k, or k where the model is InK, and without ln σ where σ is known; nuisance
// columns are part of ln k. It is minimised over the parameters, the coefficients of
// the columns and ln σ by Newton's method, the third parameter of a seeded curve within
// its bounds. For a curve that is linear in ln k the minimum is the only one (R. J.
// Olsen, Econometrica 46 (1978) 1211). It is a workspace for one goroutine.
type censored struct {
	c          models.Curve
	linear     bool // the curve has no second derivatives
	gauss      bool // do without them: a resample needs no covariance, and a step costs a ninth
	inK, known bool
	tRef       float64
	n, p       int     // measured entries of the sample; parameters, those of nuisance columns included
	own        int     // parameters of the curve
	taken      float64 // measured entries that take part
	spent      int     // degrees of freedom that the fit takes
	steps      int     // of minimise
	unit       float64 // in which k is compared
	lnUnit     float64
	least      float64 // bound of ln σ: what rounding of the data leaves

	t, y, w []float64 // all entries, measured ones first; w = 1/√V
	side    []float64 // 0 measured, 1 below y, -1 above y
	count   []float64 // how often each entry is taken
	bound   []float64 // of the limits
	below   []bool

	barriers []int
	seeded   *seededDesign // nil for other curves

	par    []float64 // canonical parameters and, after them, coefficients of nuisance columns
	lambda float64   // ln σ
	d      int       // directions in which par may move
	b      []float64 // p x d: those directions, orthonormal for the measured entries
	edge   int       // -1 or 1 where a seeded parameter is held at its lower or upper bound
	all    []float64 // b and d without that
	allD   int

	x, off              []float64 // of a linear curve: design and offset
	beside              []float64 // nuisance columns, row-major
	inner               []float64 // Jacobian without them
	f, jac, ju, slope   []float64
	pull                []float64 // ∂D/∂f
	grad, hess, low     []float64 // of D; Cholesky factor
	step, best, shifted []float64
	sums                []float64
	reach               float64 // length of a step of difference quotients
}

func newCensored(s *Sample, c models.Curve) *censored {
	all, o := s.All(), newObjective(s.Measured(), c)
	n, m, own := s.Len(), s.Len()+len(s.Limits), len(c.Info().Params)
	p := own + s.Spent()
	e := &censored{
		c: c, inK: s.Model.InK(), known: s.Model.KnownSigma(), tRef: s.TRef,
		n: n, p: p, own: own, spent: p, steps: 100, unit: o.scale, lnUnit: o.lnScale, barriers: o.barriers,
		t: all.T, y: make([]float64, m), w: make([]float64, m),
		side: make([]float64, m), count: make([]float64, m),
		par: make([]float64, p), b: make([]float64, p*p), all: make([]float64, p*p), d: p,
		f: make([]float64, m), jac: make([]float64, m*p), ju: make([]float64, m*p), slope: make([]float64, m),
		pull: make([]float64, m), grad: make([]float64, p+1), hess: make([]float64, (p+1)*(p+1)),
		low: make([]float64, (p+1)*(p+1)), step: make([]float64, p+1), best: make([]float64, p), shifted: make([]float64, p),
		sums: make([]float64, p),
	}
	for i, v := range all.V {
		e.y[i], e.w[i] = all.Y[i], 1/math.Sqrt(v)
		if e.inK {
			e.y[i] = all.K[i] / e.unit
			if e.known {
				e.w[i] *= e.unit // the same variances, of k in this unit
			}
		}
	}
	for i, l := range s.Limits {
		e.bound, e.below = append(e.bound, e.y[n+i]), append(e.below, l.Below)
	}
	e.least = (lnRounding(s.Measured()) - math.Log(float64(n))) / 2
	if e.inK && !e.known {
		e.least -= e.lnUnit
	}
	for i := range e.t {
		for j, c := range s.Nuisance {
			if i < n {
				e.beside = append(e.beside, c[i])
			} else {
				e.beside = append(e.beside, s.Limits[i-n].Beside[j])
			}
		}
	}
	e.inner = e.jac
	if p > own {
		e.inner = make([]float64, m*own)
	}
	switch c := c.(type) {
	case models.Basis:
		e.linear = true
		e.x, e.off = make([]float64, m*p), make([]float64, m)
		c.Columns(e.tRef, e.t, e.off, e.inner)
		e.widen(e.x)
	case models.Seeded:
		e.seeded = newSeededDesign(c, e.tRef, e.t)
	}
	e.take(nil, nil)
	return e
}

// take sets the data: y as in Refitter.Refit, nil for those of the sample; entry i
// is taken counts[i] times, nil for once. A value on the allowed side of a bound, or
// on it, is that limit again, and any other counts as measured.
func (e *censored) take(y []float64, counts []int) {
	e.taken = 0
	for i := range e.y {
		if y != nil {
			e.y[i] = y[i]
			if e.inK {
				e.y[i] /= e.unit
			}
		}
		e.side[i], e.count[i] = 0, 1
		if counts != nil {
			e.count[i] = float64(counts[i])
		}
		if i >= e.n {
			b := e.bound[i-e.n]
			switch below := e.below[i-e.n]; {
			case y == nil || e.y[i] == b || (e.y[i] < b) == below:
				e.y[i], e.side[i] = b, -1
				if below {
					e.side[i] = 1
				}
			}
		}
		if e.side[i] == 0 {
			e.taken += e.count[i]
		}
	}
}

// widen fills jac with the rows of inner, each followed by those of the nuisance
// columns.
func (e *censored) widen(jac []float64) {
	q := e.p - e.own
	for i := range e.t {
		row := jac[i*e.p : (i+1)*e.p]
		copy(row, e.inner[i*e.own:(i+1)*e.own])
		copy(row[e.own:], e.beside[i*q:(i+1)*q])
	}
}

// offset is what the nuisance columns add to ln k of entry i at par.
func (e *censored) offset(i int, par []float64) float64 {
	q := e.p - e.own
	return dot(e.beside[i*q:(i+1)*q], par[e.own:])
}

// curve fills f, and jac where it is asked for, at par.
func (e *censored) curve(par []float64, jac []float64) {
	if !e.linear {
		var inner []float64
		if jac != nil {
			inner = e.inner
		}
		e.c.LnK(e.tRef, e.t, par[:e.own], e.f, inner)
		if e.p == e.own { // inner is jac
			return
		}
		for i := range e.f {
			e.f[i] += e.offset(i, par)
		}
		if jac != nil {
			e.widen(jac)
		}
		return
	}
	for i := range e.f {
		row := e.x[i*e.p : (i+1)*e.p]
		e.f[i] = e.off[i] + dot(row, par)
	}
	if jac != nil {
		copy(jac, e.x)
	}
}

// turn multiplies jac by b into ju.
func (e *censored) turn() {
	for i := range e.f {
		for l := range e.d {
			var s float64
			for j := range e.p {
				s += e.jac[i*e.p+j] * e.b[j*e.d+l]
			}
			e.ju[i*e.d+l] = s
		}
	}
}

// free is the number of variables.
func (e *censored) free() int {
	if e.known {
		return e.d
	}
	return e.d + 1
}

// value is D at par and lambda; with derivs it fills grad and hess, in the
// directions b and ln σ. It is +Inf where the curve is not finite or a barrier is out
// of bounds.
func (e *censored) value(par []float64, lambda float64, derivs bool) float64 {
	for _, j := range e.barriers {
		if !(math.Abs(par[j]) <= maxBarrier) {
			return math.Inf(1)
		}
	}
	if derivs {
		e.curve(par, e.jac)
		e.turn()
		clear(e.grad)
		clear(e.hess)
	} else {
		e.curve(par, nil)
	}
	d, q := e.d, e.d+1
	narrow := math.Exp(-lambda)
	var sum float64
	for i, eta := range e.f {
		c := e.count[i]
		if c == 0 {
			e.pull[i] = 0
			continue
		}
		slope := 1.0
		if e.inK {
			eta = math.Exp(eta - e.lnUnit)
			slope = eta
		}
		w := e.w[i] * narrow
		var g, gg, gl, l, ll float64 // derivatives with respect to f and ln σ
		if side := e.side[i]; side == 0 {
			r := (eta - e.y[i]) * w
			sum += c * r * r
			g, gg, gl, l, ll = 2*r*w, 2*w*w, -4*r*w, -2*r*r, 4*r*r
		} else {
			z := side * (e.y[i] - eta) * w
			lnPhi, m, zm := mills(z)
			sum -= 2 * c * lnPhi
			b := m * zm
			g, gg, gl = 2*m*side*w, 2*b*w*w, 2*side*w*(b*z-m)
			l, ll = 2*m*z, 2*(b*z*z-m*z)
		}
		if !derivs {
			continue
		}
		e.pull[i], e.slope[i] = c*g*slope, slope
		gg *= slope * slope
		if e.inK {
			gg += g * slope
		}
		row := e.ju[i*d : (i+1)*d]
		for k, jk := range row {
			e.grad[k] += c * g * slope * jk
			for m, jm := range row[:k+1] {
				e.hess[k*q+m] += c * gg * jk * jm
			}
			e.hess[d*q+k] += c * gl * slope * jk
		}
		e.grad[d] += c * l
		e.hess[d*q+d] += c * ll
	}
	if !e.known {
		sum += 2 * e.taken * lambda
		e.grad[d] += 2 * e.taken
	}
	if derivs && !e.linear && !e.gauss {
		e.bend(par)
	}
	if math.IsNaN(sum) {
		return math.Inf(1)
	}
	return sum
}

// bend adds what the second derivatives of the curve contribute to hess: difference
// quotients of its Jacobian along each direction.
func (e *censored) bend(par []float64) {
	d, q := e.d, e.d+1
	s := e.sums[:d]
	for k := range d {
		clear(s)
		reach, width := e.reach, 0.0
		if e.seeded != nil { // small beside the bounds too
			reach = math.Min(reach, 1e-3*(e.seeded.high-e.seeded.low)/math.Abs(e.b[2*d+k]))
		}
		for _, sign := range []float64{1, -1} {
			for j := range par {
				e.shifted[j] = par[j] + sign*reach*e.b[j*d+k]
			}
			if width += reach; e.beyond(e.shifted) != 0 {
				width -= reach // a quotient of one side
				copy(e.shifted, par)
			}
			e.curve(e.shifted, e.jac)
			for i, g := range e.pull {
				if g == 0 {
					continue
				}
				for l := range k + 1 {
					var v float64
					for j := range e.p {
						v += e.jac[i*e.p+j] * e.b[j*d+l]
					}
					s[l] += sign * g * v
				}
			}
		}
		for l, v := range s[:k+1] {
			e.hess[k*q+l] += v / width
		}
	}
}

// beyond is -1 or 1 where the third parameter of a seeded curve lies below or above its
// bounds, 0 elsewhere.
func (e *censored) beyond(par []float64) int {
	switch {
	case e.seeded == nil:
	case par[2] < e.seeded.low:
		return -1
	case par[2] > e.seeded.high:
		return 1
	}
	return 0
}

// edgeValue is the value of the third parameter of a seeded curve at one of its bounds.
func (e *censored) edgeValue(edge int) float64 {
	if edge < 0 {
		return e.seeded.low
	}
	return e.seeded.high
}

// hug holds the third parameter of a seeded curve at a bound that it has reached.
func (e *censored) hug(edge int) {
	copy(e.all, e.b)
	e.allD, e.edge = e.d, edge
	c := make([]float64, e.p)
	c[2] = 1
	e.hold(c, 0)
	e.par[2] = e.edgeValue(edge)
}

// release undoes hug.
func (e *censored) release() {
	if e.edge != 0 {
		copy(e.b, e.all)
		e.d, e.edge = e.allD, 0
	}
}

// pullsInward reports whether D falls from the bound that is hugged into the interior,
// at the minimum along it: the slope of the least D is then that at fixed other
// parameters. Directions and derivatives are afterwards those without the bound.
func (e *censored) pullsInward() bool {
	edge := e.edge
	e.release()
	e.value(e.par, e.lambda, true)
	var slope float64
	for k := range e.d {
		slope += e.grad[k] * e.b[2*e.d+k]
	}
	return float64(edge)*slope > 0
}

// start puts the search at canonical parameters, followed by coefficients of the
// nuisance columns or, where these lack, zeros, and chooses directions that are
// orthonormal for the measured entries there. A seeded parameter out of its bounds is
// put on them. It reports false where the curve is not finite.
func (e *censored) start(p []float64) bool {
	clear(e.par)
	copy(e.par, p)
	if edge := e.beyond(e.par); edge != 0 {
		e.par[2] = e.edgeValue(edge)
	}
	e.d, e.edge = e.p, 0
	e.curve(e.par, e.jac)
	var most float64
	for i := range e.n {
		slope := e.w[i]
		if e.inK {
			slope *= math.Exp(e.f[i] - e.lnUnit)
		}
		most = math.Max(most, slope)
		for j := range e.p {
			e.jac[i*e.p+j] *= slope
		}
	}
	if !finite(e.jac[:e.n*e.p]...) || !(most > 0) {
		return false
	}
	e.reach = 1e-4 * most // moves ln k by about 1e-4
	scale := make([]float64, e.p)
	columnScale(e.jac[:e.n*e.p], e.n, e.p, scale)
	q := newQR(e.n, e.p)
	q.load(e.jac[:e.n*e.p], scale)
	q.factor()
	whole := q.rank() == e.p
	unit, col := make([]float64, e.p), make([]float64, e.p)
	for k := range e.p {
		clear(unit)
		unit[k] = 1
		if whole {
			q.solve(unit, col, e.p)
		} else {
			copy(col, unit)
		}
		for j := range e.p {
			e.b[j*e.d+k] = col[j] / scale[j]
		}
	}
	return true
}

// hold keeps c·par at what start gave plus shift: par moves there along the shortest
// way, and the directions left are those in which c·par does not change.
func (e *censored) hold(c []float64, shift float64) {
	p, d := e.p, e.d
	v, along := make([]float64, d), make([]float64, p)
	var length float64
	for k := range d {
		for j := range p {
			v[k] += c[j] * e.b[j*d+k]
		}
		length += v[k] * v[k]
	}
	for j := range p {
		for k := range d {
			along[j] += e.b[j*d+k] * v[k] / length
		}
		e.par[j] += shift * along[j]
	}
	// The Householder reflection that takes v to the first axis; its other columns
	// are orthogonal to v.
	length = math.Sqrt(length)
	if v[0] < 0 {
		length = -length
	}
	v[0] += length
	var vv float64
	for _, x := range v {
		vv += x * x
	}
	out := make([]float64, p*(d-1))
	for j := range p {
		var bv float64
		for k := range d {
			bv += e.b[j*d+k] * v[k]
		}
		for k := 1; k < d; k++ {
			out[j*(d-1)+k-1] = e.b[j*d+k] - 2*bv*v[k]/vv
		}
	}
	copy(e.b, out)
	e.d = d - 1
}

// scatter sets ln σ to that of the residuals of the measured entries about par.
func (e *censored) scatter() {
	e.lambda = 0
	if e.known {
		return
	}
	e.curve(e.par, nil)
	var sum float64
	for i, f := range e.f {
		if e.side[i] != 0 {
			continue
		}
		if e.inK {
			f = math.Exp(f - e.lnUnit)
		}
		sum += e.count[i] * square((f-e.y[i])*e.w[i])
	}
	e.lambda = math.Max(math.Log(sum/e.taken)/2, e.least)
}

// minimise takes par and lambda to the minimum near them. It stops where Newton's
// decrement, by which D still exceeds the minimum, is at most tolerance: D is in units
// of twice the log-likelihood, in which 1 is one standard error. ok is false where that
// is not reached in the steps allowed. A step that would leave the bounds of a seeded
// curve ends on them; the search goes on along the bound, and leaves it where D falls
// inwards.
func (e *censored) minimise(tolerance float64) (value float64, ok bool) {
	value = e.value(e.par, e.lambda, true)
	var damping float64
	returns := 2 // from a bound
	for range e.steps {
		if math.IsInf(value, 0) {
			return value, false
		}
		dim := e.free()
		if !e.known && e.lambda <= e.least && e.grad[e.d] > 0 {
			dim = e.d // ln σ stays at its bound
		}
		if !e.newton(dim, damping) {
			damping = math.Max(1e-3, 10*damping)
			if damping > 1e12 {
				return value, false
			}
			continue
		}
		var decrement float64
		for k := range dim {
			decrement -= e.grad[k] * e.step[k]
		}
		lambda, edge := e.move(dim)
		if damping == 0 && decrement <= tolerance && edge == 0 {
			// The last step: no longer worth a look at what it gains.
			copy(e.par, e.best)
			e.lambda = lambda
			value -= decrement / 2
			if at := e.edge; at != 0 && returns > 0 {
				if returns--; e.pullsInward() {
					value = e.value(e.par, e.lambda, true)
					continue
				}
				e.hug(at)
			}
			return value, true
		}
		next := e.value(e.best, lambda, false)
		if next <= value+1e-13*(math.Abs(value)+e.taken) {
			copy(e.par, e.best)
			e.lambda = lambda
			if edge != 0 {
				e.hug(edge)
			}
			value = e.value(e.par, e.lambda, true)
			damping /= 10
			if damping < 1e-4 {
				damping = 0
			}
			continue
		}
		damping = math.Max(1e-3, 10*damping)
		if damping > 1e12 {
			return value, false
		}
	}
	return value, false
}

// move puts par after the step into best and returns ln σ after it. A step that would
// leave the bounds of a seeded curve is cut short there; edge is then -1 or 1.
func (e *censored) move(dim int) (lambda float64, edge int) {
	copy(e.best, e.par)
	for j := range e.p {
		for k := range e.d {
			e.best[j] += e.b[j*e.d+k] * e.step[k]
		}
	}
	lambda = e.lambda
	if dim > e.d {
		lambda = math.Max(e.lambda+math.Max(-2, math.Min(2, e.step[e.d])), e.least)
	}
	if e.edge != 0 {
		e.best[2] = e.par[2] // but for rounding it is
		return lambda, 0
	}
	if edge = e.beyond(e.best); edge != 0 {
		part := (e.edgeValue(edge) - e.par[2]) / (e.best[2] - e.par[2])
		for j, p := range e.par {
			e.best[j] = p + part*(e.best[j]-p)
		}
		e.best[2] = e.edgeValue(edge)
		lambda = e.lambda + part*(lambda-e.lambda)
	}
	return lambda, edge
}

// newton puts the damped Newton step of the first dim variables into step; false
// where the matrix is not positive definite.
func (e *censored) newton(dim int, damping float64) bool {
	if !e.cholesky(dim, damping) {
		return false
	}
	for k := range dim {
		e.step[k] = -e.grad[k]
	}
	e.solve(dim, e.step)
	return finite(e.step[:dim]...)
}

// cholesky factors the damped hess into low.
func (e *censored) cholesky(dim int, damping float64) bool {
	q := e.d + 1
	for i := range dim {
		for j := range i + 1 {
			s := e.hess[i*q+j]
			if i == j {
				s += damping * math.Abs(s)
			}
			before := s
			for k := range j {
				s -= e.low[i*q+k] * e.low[j*q+k]
			}
			if i != j {
				e.low[i*q+j] = s / e.low[j*q+j]
				continue
			}
			if !(s > 1e-13*math.Abs(before)) {
				return false
			}
			e.low[i*q+i] = math.Sqrt(s)
		}
	}
	return true
}

// solve overwrites x with the solution of hess x = x.
func (e *censored) solve(dim int, x []float64) {
	q := e.d + 1
	for i := range dim {
		for k := range i {
			x[i] -= e.low[i*q+k] * x[k]
		}
		x[i] /= e.low[i*q+i]
	}
	for i := dim - 1; i >= 0; i-- {
		for k := i + 1; k < dim; k++ {
			x[i] -= e.low[k*q+i] * x[k]
		}
		x[i] /= e.low[i*q+i]
	}
}

// covariance fills cov (p x p) with that of the parameters at par, from the observed
// information of parameters and ln σ, times stretch²; false where it is not positive
// definite.
func (e *censored) covariance(cov []float64) bool {
	dim := e.free()
	if math.IsInf(e.value(e.par, e.lambda, true), 0) || !e.cholesky(dim, 0) {
		return false
	}
	p, d := e.p, e.d
	cols := make([]float64, d*d)
	x := make([]float64, dim)
	for k := range d {
		clear(x)
		x[k] = 1
		e.solve(dim, x)
		copy(cols[k*d:], x[:d])
	}
	factor := 2 * square(e.stretch()) // D is twice -ln L
	for i := range p {
		for j := range p {
			var s float64
			for k := range d {
				for l := range d {
					s += e.b[i*d+k] * cols[k*d+l] * e.b[j*d+l]
				}
			}
			cov[i*p+j] = factor * s
		}
	}
	return true
}

// stretch turns the σ of largest likelihood into the σ̂ that is reported: √(n/ν), n
// counting measured entries. Without limits that is √(RSS/ν).
func (e *censored) stretch() float64 {
	if e.known {
		return 1
	}
	return math.Sqrt(e.taken / (e.taken - float64(e.spent)))
}

// rss is the Σ r²/V that a sample without limits of so many measured entries would
// have at the same likelihood: n ln RSS, or RSS where σ is known, is D up to a
// constant.
func (e *censored) rss(value float64) float64 {
	if e.known {
		return value
	}
	n := float64(e.n)
	rss := n * math.Exp(value/n-1)
	if e.inK {
		rss *= e.unit * e.unit
	}
	return rss
}

// completed puts in place of each limit what is expected of it about the curve at
// par with scatter lambda: the first half of a step of the EM algorithm (J. Schmee,
// G. J. Hahn, Technometrics 21 (1979) 417). Entries not taken are left out, and what
// nuisance columns add at par is taken off.
func (e *censored) completed(s *Sample) *Sample {
	out := &Sample{Model: s.Model, TRef: s.TRef}
	e.curve(e.par, nil)
	for i, t := range e.t {
		if e.count[i] == 0 {
			continue
		}
		y := e.y[i]
		if side := e.side[i]; side != 0 {
			eta := e.f[i]
			if e.inK {
				eta = math.Exp(eta - e.lnUnit)
			}
			width := math.Exp(e.lambda) / e.w[i]
			_, m, _ := mills(side * (y - eta) / width)
			y = eta - side*width*m
		}
		e.put(out, i, t, y)
	}
	return out
}

// put appends entry i with the value y to a sample, what nuisance columns add at par
// taken off.
func (e *censored) put(out *Sample, i int, t, y float64) {
	var o float64
	if e.p > e.own {
		o = e.offset(i, e.par)
	}
	v := 1 / square(e.w[i])
	if !e.inK {
		y -= o
		out.add(t, math.Exp(y), v/e.count[i])
		out.Y[len(out.Y)-1] = y
		return
	}
	shrink := math.Exp(-o)
	if e.known {
		v *= e.unit * e.unit
	}
	out.add(t, y*e.unit*shrink, v*shrink*shrink/e.count[i])
}

// measured are the entries taken that are not limits, what nuisance columns add at par
// taken off.
func (e *censored) measured(s *Sample) *Sample {
	out := &Sample{Model: s.Model, TRef: s.TRef}
	for i, t := range e.t {
		if e.side[i] != 0 || e.count[i] == 0 {
			continue
		}
		e.put(out, i, t, e.y[i])
	}
	return out
}

// withOffsets joins parameters of the curve with the coefficients of nuisance columns at par.
func (e *censored) withOffsets(p []float64) []float64 {
	return append(append(make([]float64, 0, e.p), p...), e.par[e.own:]...)
}

// limitTolerance is the decrement at which a fit with limits has converged; Newton's
// method squares the error once more with the last step.
const limitTolerance = 1e-9

// fitLimits fits a curve to a sample with limits. The measured entries alone have to
// determine the curve, with a degree of freedom left where σ is not known: a limit
// bounds from one side only, and a likelihood that σ → 0 makes infinite has no
// maximum. Where they do not, the limits are not used and a warning says so.
func fitLimits(s *Sample, c models.Curve) *Result {
	exact := Fit(s.Measured(), c)
	if why := limitsUnused(s, exact); why != "" {
		r := *exact
		r.Exact = exact
		r.Warnings = append(append([]string(nil), exact.Warnings...), "limits are not used: "+why)
		if exact.Usable() {
			r.LogLik = math.NaN()
		}
		return &r
	}
	r := newResult(s, c)
	r.Exact = exact
	r.N += len(s.Limits)
	e := newCensored(s, c)
	e.spent = s.Len() - r.Nu
	starts := [][]float64{nil}
	if exact.P != nil {
		starts[0] = append(append([]float64(nil), exact.P...), exact.Beside...)
	}
	_, linear := c.(models.Basis)
	var line *Result
	if !linear || e.inK {
		var more [][]float64
		more, line = limitStarts(s, c, e)
		starts = append(starts, more...)
	}
	least := math.Inf(1)
	var par []float64
	var lambda float64
	converged := false
	for _, p := range starts {
		if p == nil || !e.start(p) {
			continue
		}
		e.scatter()
		value, ok := e.minimise(limitTolerance)
		if value < least-1e-9*(1+math.Abs(least)) || par == nil && !math.IsInf(value, 0) {
			least, par, lambda, converged = value, append(par[:0], e.par...), e.lambda, ok
		}
	}
	if par == nil && !nestsLine(c) {
		r.Reason = "no fit with the limits was found" + because(exact.Reason)
		return r
	}
	if par == nil || line != nil && !(e.rss(least) < line.RSS*(1-1e-12)) {
		r.Status, r.RSS, r.LogLik = Excluded, line.RSS, line.LogLik
		r.Reason = bendsTheOtherWay
		return r
	}
	r.finishLimits(s, e, par, lambda, least, converged)
	return r
}

// nestsLine reports whether a curve is the straight line at the end of what it can be,
// and so is excluded where the data bend the other way.
func nestsLine(c models.Curve) bool {
	switch c.(type) {
	case models.Shaped, models.Seeded:
		return true
	}
	return false
}

func because(reason string) string {
	if reason == "" {
		return ""
	}
	return ": " + reason
}

// limitsUnused says why the limits of a sample cannot be used for a curve, "" where
// they can.
func limitsUnused(s *Sample, exact *Result) string {
	p := exact.Params()
	switch d := s.DistinctT(); {
	case exact.Nu < 0 || d < p:
		return fmt.Sprintf("k is measured at %d temperatures, and the curve needs %d", d, p)
	case exact.Nu < 1 && !s.Model.KnownSigma():
		return "the measured points leave no degree of freedom"
	case s.Spent() > 0 && !s.determinesOffsets(exact.Curve):
		return "the measured points do not determine the curve beside the offsets"
	}
	return ""
}

// limitStarts are fits of the curve to the sample with its limits completed about the
// straight line and about power-prefactor, and where these come from. line is the
// fit of the straight line, where the curve has to beat it; nil for other curves.
func limitStarts(s *Sample, c models.Curve, e *censored) (starts [][]float64, line *Result) {
	if nestsLine(c) {
		line = fitLimits(s, models.Straight())
	}
	for _, about := range []models.Curve{models.Straight(), models.PowerPrefactor{}} {
		a := newCensored(s, about)
		f := Fit(s.Measured(), about)
		if f.P == nil || !a.start(f.P) {
			continue
		}
		a.scatter()
		if _, ok := a.minimise(limitTolerance); !ok {
			continue
		}
		if p := Fit(a.completed(s), c).P; p != nil {
			starts = append(starts, a.withOffsets(p))
		}
	}
	return starts, line
}

// finishLimits fills a result at the minimum of -2 ln L.
func (r *Result) finishLimits(s *Sample, e *censored, par []float64, lambda, value float64, converged bool) {
	n, p := s.Len(), r.Params()
	p += r.Spent
	own := r.Params()
	r.P, r.RSS = par[:own:own], e.rss(value)
	if r.Spent > 0 {
		r.Beside = par[own:]
	}
	r.Sigma = 1
	if !e.known {
		r.Sigma = math.Exp(lambda) * e.stretch()
		if e.inK {
			r.Sigma *= e.unit
		}
	}
	r.LogLik = LogLikelihood(s.Measured(), r.RSS)
	r.Fitted, r.Residuals, r.Leverage = make([]float64, n), make([]float64, n), make([]float64, n)
	jac := make([]float64, n*own)
	r.Curve.LnK(s.TRef, s.T, r.P, r.Fitted, jac)
	jac = s.widened(jac, own)
	for i := range r.Fitted {
		for j, c := range s.Nuisance {
			r.Fitted[i] += r.Beside[j] * c[i]
		}
	}
	r.LimitMass = make([]float64, len(s.Limits))
	at := make([]float64, 1)
	for i, l := range s.Limits {
		r.Curve.LnK(s.TRef, []float64{l.T}, r.P, at, nil)
		at[0] += dot(l.Beside, r.Beside)
		d := math.Log(l.K) - at[0]
		if e.inK {
			d = l.K - math.Exp(at[0])
		}
		if !l.Below {
			d = -d
		}
		r.LimitMass[i] = math.Erfc(-d/(r.Sigma*math.Sqrt(l.V))/math.Sqrt2) / 2
	}
	r.Status = Converged
	cov := make([]float64, p*p)
	good := e.start(par)
	if good {
		e.lambda = lambda
		good = e.covariance(cov)
	}
	switch {
	case e.seeded != nil && e.seeded.edge(par[2]) != "":
		r.Status, r.Reason = NotIdentified, e.seeded.edge(par[2])
	case !converged || !good:
		r.Status, r.Reason = NotIdentified, "the data do not determine the parameters one by one"
	case e.farBarrier(par):
		r.Status, r.Reason = NotIdentified, fmt.Sprintf("a barrier beyond %g kJ/mol would fit better still", maxBarrier/1000)
	}
	for _, j := range e.barriers {
		if r.Status == Converged && !(math.Sqrt(cov[j*p+j]) < maxBarrier) {
			r.Status, r.Reason = NotIdentified, fmt.Sprintf("one path leaves too little trace in these data: the standard error of its barrier exceeds %g kJ/mol", maxBarrier/1000)
		}
	}
	if r.Status == Converged {
		r.Cov = cov
	}
	for i, f := range r.Fitted {
		r.Residuals[i] = s.Y[i] - f
		slope := 1.0
		if e.inK {
			slope = math.Exp(f)
			r.Residuals[i] = s.K[i] - slope
		}
		r.Leverage[i] = math.NaN()
		if r.Cov != nil {
			var h float64
			for j := range p {
				for k := range p {
					h += jac[i*p+j] * cov[j*p+k] * jac[i*p+k]
				}
			}
			r.Leverage[i] = math.Min(1, h*square(slope/r.Sigma)/s.V[i])
		}
	}
	r.split(own)
}

// farBarrier reports whether a barrier lies at maxBarrier.
func (e *censored) farBarrier(p []float64) bool {
	for _, j := range e.barriers {
		if !(math.Abs(p[j]) < 0.99*maxBarrier) {
			return true
		}
	}
	return false
}

// profileLimits is Profile for a sample with limits: the signed root of the profile
// likelihood referred to t, with W = 2 ln L_max - 2 ln L(g),
//
//	ν (e^{W/n} - 1) <= t²(ν), or W <= χ²(1) with σ known,
//
// n counting measured entries. Without limits that is the interval of Profile; with
// them it is approximate. An end at which a barrier would pass the other one of its
// curve is open.
func profileLimits(s *Sample, r *Result, c []float64, confidence float64) Estimate {
	value := dot(c, r.P)
	wald := r.Interval(c, value, confidence)
	c = append(append([]float64(nil), c...), make([]float64, r.Spent)...)
	best := append(append([]float64(nil), r.P...), r.Beside...)
	out := Estimate{Value: value, StdError: wald.StdError, Lower: math.NaN(), Upper: math.NaN()}
	if r.Status != Converged {
		out.Value, out.StdError = math.NaN(), math.NaN()
	}
	t := r.quantile(confidence)
	e := newCensored(s, r.Curve)
	if math.IsNaN(t) || r.LimitMass == nil || !e.start(best) {
		return out
	}
	e.scatter()
	least, ok := e.minimise(limitTolerance)
	if !ok {
		return out
	}
	step := wald.Upper - value
	if !(step > 0) || math.IsInf(step, 0) {
		step = math.Max(0.1*math.Abs(value), 1e-3)
	}
	root := func(g float64, from []float64) (float64, []float64) {
		if !e.start(from) {
			return math.NaN(), nil
		}
		e.hold(c, g-dot(c, from))
		if e.beyond(e.par) != 0 {
			return math.NaN(), nil
		}
		e.scatter()
		d, ok := e.minimise(limitTolerance)
		if !ok {
			return math.NaN(), nil
		}
		w := math.Max(0, d-least)
		if !e.known {
			w = float64(r.Nu) * math.Expm1(w/float64(e.n))
		}
		return math.Sqrt(w) - t, append([]float64(nil), e.par...)
	}
	end := func(step float64) (float64, bool) {
		const doublings = 20
		from, inside, at := best, value, -t
		for range doublings {
			g := inside + step
			d, p := root(g, from)
			if math.IsNaN(d) {
				step /= 4
				continue
			}
			if d >= 0 {
				return findRoot(func(g float64) float64 { d, _ := root(g, from); return d }, inside, at, g, d), true
			}
			if len(e.barriers) == 2 && (p[e.barriers[0]] > p[e.barriers[1]]) != (r.P[e.barriers[0]] > r.P[e.barriers[1]]) {
				break
			}
			inside, at, from = g, d, p
			step *= 2
		}
		return math.Copysign(math.Inf(1), step), false
	}
	lower, okLower := end(-step)
	upper, okUpper := end(step)
	return out.between(lower, upper, okLower, okUpper)
}
