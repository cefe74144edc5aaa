package diagnostics

import (
	"math"

	"onebarrier/models"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
)

// nearPower fits power-prefactor beside the nuisance columns to a sample with errors in
// k, from parameters near the answer: Newton's method for
//
//	S(u) = Σ (k_i - e^{f_i(u)})²/V_i,  f(u) = f(0) + D u,
//
// in coordinates u for which the weighted columns of D are orthonormal at the start and
// the last is what the exponent n alone moves: to hold n is to hold it. Inside the
// exponential the curve is linear in its parameters, so that a step costs one exponential
// an entry. It is for one goroutine.
type nearPower struct {
	s       *fit.Sample
	row     *exponentRow
	p       int // coordinates
	n, e    float64
	perE    []float64 // what u adds to E, J/mol
	unit    float64   // in which k is compared
	f0      []float64 // ln of k in that unit, at u = 0
	d       []float64 // n x p, row-major
	y, root []float64 // k in its unit, and 1/√V: 0 of what is left out

	f                []float64 // ln of k in its unit, at the u of the last value
	grad, hess, step []float64
	low, trial       []float64
}

// mostNewton is the most steps of nearPower.
const mostNewton = 60

// newNearPower starts at the parameters p of power-prefactor at tRef and the coefficients
// of the nuisance columns; nil where the sample does not determine n from there.
func newNearPower(s *fit.Sample, tRef float64, p, beside []float64) *nearPower {
	at := *s
	at.TRef = tRef
	n := s.Len()
	f := &nearPower{s: &at, n: p[2], e: p[1], unit: math.Max(floats.Max(s.K), -floats.Min(s.K)),
		f0: make([]float64, n), y: make([]float64, n), root: make([]float64, n), f: make([]float64, n)}
	models.PowerPrefactor{}.LnK(tRef, s.T, p, f.f0, nil)
	lnUnit := math.Log(f.unit)
	steep := make([]float64, n)
	for i := range f.f0 {
		for j, z := range s.Nuisance {
			f.f0[i] += beside[j] * z[i]
		}
		f.f0[i] -= lnUnit
		f.y[i] = s.K[i] / f.unit
		f.root[i] = 1 / math.Sqrt(s.V[i])
		if s.Model.KnownSigma() { // χ² has no unit
			f.root[i] *= f.unit
		}
		if steep[i] = f.root[i] * math.Exp(f.f0[i]); !(steep[i] > 0) || math.IsInf(steep[i], 0) {
			return nil
		}
	}
	if f.row = newExponentRow(&at, steep); f.row == nil {
		return nil
	}
	f.p = len(f.row.columns)
	f.d = make([]float64, n*f.p)
	for j, q := range f.row.columns {
		for i, v := range q {
			f.d[i*f.p+j] = v / steep[i]
		}
	}
	f.perE = f.row.perEnergy()
	v := func(k int) []float64 { return make([]float64, k) }
	f.grad, f.step, f.trial, f.hess, f.low = v(f.p), v(f.p), v(f.p), v(f.p*f.p), v(f.p*f.p)
	return f
}

// perEnergy is what a unit along each column adds to E: the row of R⁻¹ for it, R the
// triangle that takes the orthonormal columns into those of the curve.
func (e *exponentRow) perEnergy() []float64 {
	n, p := e.s.Len(), len(e.columns)
	out, col := make([]float64, p), make([]float64, n)
	for k := 1; k < p; k++ {
		for i := range col {
			switch {
			case k == 1:
				col[i] = e.root[i] * e.x[3*i+1]
			case k == p-1:
				col[i] = e.root[i] * e.x[3*i+2]
			default:
				col[i] = e.root[i] * e.s.Nuisance[k-2][i]
			}
		}
		if k == 1 {
			out[1] = 1 / floats.Dot(e.columns[1], col)
			continue
		}
		var sum float64
		for j := 1; j < k; j++ {
			sum += out[j] * floats.Dot(e.columns[j], col)
		}
		out[k] = -sum / floats.Dot(e.columns[k], col)
	}
	return out
}

// put replaces an entry: weight is over that which it has in the sample, 0 to leave it out.
// It returns what undoes that.
func (f *nearPower) put(i int, k, weight float64) (undo func()) {
	y, root := f.y[i], f.root[i]
	f.y[i], f.root[i] = k/f.unit, root*math.Sqrt(weight)
	return func() { f.y[i], f.root[i] = y, root }
}

// exponent is n at u, and coordinate the last of u where n is that.
func (f *nearPower) exponent(u []float64) float64 {
	return f.n + u[f.p-1]*math.Sqrt(f.row.unscaled)
}

func (f *nearPower) coordinate(n float64) float64 { return (n - f.n) / math.Sqrt(f.row.unscaled) }

// energy is E at u, J/mol.
func (f *nearPower) energy(u []float64) float64 { return f.e + floats.Dot(f.perE, u) }

// value is S at u.
func (f *nearPower) value(u []float64) (rss float64) {
	for i, root := range f.root {
		f.f[i] = f.f0[i] + floats.Dot(f.d[i*f.p:(i+1)*f.p], u)
		if root == 0 {
			continue
		}
		r := (math.Exp(f.f[i]) - f.y[i]) * root
		rss += r * r
	}
	return rss
}

// matrix fills grad and hess with half of the gradient of S and of its second derivatives,
// of which Gauss's part alone leaves out what hangs on the residuals.
func (f *nearPower) matrix(gauss bool) {
	p := f.p
	clear(f.grad)
	clear(f.hess)
	for i, root := range f.root {
		if root == 0 {
			continue
		}
		k := math.Exp(f.f[i])
		w := root * root * k
		g, h := w*(k-f.y[i]), w*k
		if !gauss {
			h += g
		}
		row := f.d[i*p : (i+1)*p]
		for j, x := range row {
			f.grad[j] += g * x
			for l := range j + 1 {
				f.hess[j*p+l] += h * x * row[l]
			}
		}
	}
}

// cholesky factors the first m rows of hess into low.
func (f *nearPower) cholesky(m int) bool {
	p := f.p
	for j := range m {
		for k := range j + 1 {
			v := f.hess[j*p+k]
			for l := range k {
				v -= f.low[j*p+l] * f.low[k*p+l]
			}
			if k < j {
				f.low[j*p+k] = v / f.low[k*p+k]
				continue
			}
			if !(v > 1e-12*f.hess[j*p+j]) {
				return false
			}
			f.low[j*p+j] = math.Sqrt(v)
		}
	}
	return true
}

// search takes u to the minimum of S near it, over all coordinates, or over all but the
// last where held. ok is false where it finds none. The decrement at which it ends is that
// of S relative to itself.
func (f *nearPower) search(u []float64, held bool) (rss float64, ok bool) {
	p, m := f.p, f.p
	if held {
		m--
	}
	rss = f.value(u)
	for range mostNewton {
		f.matrix(false)
		if !f.cholesky(m) {
			if f.matrix(true); !f.cholesky(m) {
				return rss, false
			}
		}
		copy(f.step, f.grad)
		for j := range m {
			for k := range j {
				f.step[j] -= f.low[j*p+k] * f.step[k]
			}
			f.step[j] /= f.low[j*p+j]
		}
		decrement := floats.Dot(f.step[:m], f.step[:m])
		for j := m - 1; j >= 0; j-- {
			for k := j + 1; k < m; k++ {
				f.step[j] -= f.low[k*p+j] * f.step[k]
			}
			f.step[j] /= f.low[j*p+j]
		}
		copy(f.trial, u)
		floats.AddScaled(f.trial[:m], -1, f.step[:m])
		if decrement <= 1e-12*rss { // the step squares what is left of it
			copy(u, f.trial)
			return math.Min(rss, f.value(u)), true
		}
		size := 1.0
		next := f.value(f.trial)
		for !(next <= rss) && size > 1e-6 {
			size /= 2
			copy(f.trial, u)
			floats.AddScaled(f.trial[:m], -size, f.step[:m])
			next = f.value(f.trial)
		}
		if !(next <= rss) {
			return rss, false
		}
		copy(u, f.trial)
		rss = next
	}
	return rss, false
}

// exponentError is the standard error of n at σ = 1, linearised about u.
func (f *nearPower) exponentError(u []float64) float64 {
	f.value(u)
	f.matrix(true)
	if !f.cholesky(f.p) {
		return math.NaN()
	}
	return math.Sqrt(f.row.unscaled) / f.low[f.p*f.p-1]
}

// refitNear is refit from nearby. The state asks of the interval of n only whether it holds
// the few exponents at which the rule changes: so many profiles of n are enough. ok is false
// where a search does not end well.
func (o *omitter) refitNear(l leaving) (out omission, ok bool) {
	f, s := o.near, o.s
	if l.point >= 0 {
		p, g := o.a.data.single, l.entries[0]
		whole, w := 1/s.V[g], 1/p.V[l.point]
		defer f.put(g, (whole*s.K[g]-w*p.K[l.point])/(whole-w), (whole-w)/whole)()
	} else {
		for _, i := range l.entries {
			defer f.put(i, s.K[i], 0)()
		}
	}
	free := make([]float64, f.p)
	rss, ok := f.search(free, false)
	if !ok {
		return out, false
	}
	out = unknownOmission("")
	out.n = f.exponent(free)
	rule := o.a.rule
	nu, enough := o.left(l, &rule)
	known, sigma := s.Model.KnownSigma(), 1.0
	if !known {
		sigma = math.Sqrt(rss / float64(nu))
	}
	f.value(free)
	var above []float64 // temperatures at which k stands out of the noise
	for i, t := range s.T {
		if k := math.Exp(f.f[i]); f.root[i] > 0 && k*f.root[i] > 3*sigma {
			above = append(above, t)
		}
	}
	if i := l.entries[0]; l.point < 0 && len(l.entries) == 1 {
		out.predicted = s.K[i] - math.Exp(f.f[i])*f.unit
	}
	if !enough || models.CountTemperatures(above) < minTemperatures || !(sigma > 0) {
		return out, true
	}
	out.se = sigma * f.exponentError(free)
	u := make([]float64, f.p)
	rise := func(n float64) (float64, bool) {
		copy(u, free)
		u[f.p-1] = f.coordinate(n)
		at, ok := f.search(u, true)
		return math.Max(0, at-rss) / (sigma * sigma), ok
	}
	zero, ok := rise(0)
	if !ok {
		return out, false
	}
	if out.p = pF(zero, 1, float64(nu)); known {
		out.p = pNormal(math.Sqrt(zero))
	}
	rule.ToleranceKJ = o.a.tolerance.Apply(f.energy(u) / 1000)
	critical := criticalValue(o.a.opt.Confidence, nu, known)
	low, high := math.Inf(-1), math.Inf(1)
	outside := func(n, r float64) {
		switch {
		case !(r > critical*critical):
		case n < out.n:
			low = math.Max(low, n+1e-9*(out.n-n))
		default:
			high = math.Min(high, n-1e-9*(n-out.n))
		}
	}
	outside(0, zero)
	edge := rule.ToleranceKJ / rule.ChangePerUnit
	for _, n := range []float64{rule.Band[0], rule.Band[1], -edge, edge} {
		if n == 0 {
			continue
		}
		r, ok := rise(n)
		if !ok {
			return out, false
		}
		outside(n, r)
	}
	out.judge(rule, low, high, o.second)
	return out, true
}
