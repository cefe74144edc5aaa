package fit

import (
	"math"
	"slices"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// quantile returns the two-sided quantile of Student's t with Nu degrees of
// freedom, or of the normal distribution where σ is known; NaN where Nu < 1 and σ
// is not known. Its square is the quantile of F(1, Nu), or of χ² with 1.
func (r *Result) quantile(confidence float64) float64 {
	if !(confidence > 0 && confidence < 1) {
		panic("fit: a confidence lies between 0 and 1")
	}
	p := (1 + confidence) / 2
	if r.Model.KnownSigma() {
		return distuv.UnitNormal.Quantile(p)
	}
	if r.Nu < 1 {
		return math.NaN()
	}
	return StudentQuantile(p, r.Nu)
}

// Interval returns value with its standard error by the delta method, from jac
// (length p, the derivatives of value with respect to the canonical parameters),
// and the interval of Student's t, or of the normal where σ is known. It is exact
// for linear functions of the parameters of a models.Basis with errors in ln k.
// Without a covariance all but the value is NaN; where the fit is not usable the
// value too.
func (r *Result) Interval(jac []float64, value, confidence float64) Estimate {
	e := Unknown()
	if r.Status != Converged {
		return e
	}
	e.Value = value
	p := r.Params()
	if len(jac) != p {
		panic("fit: the length of jac does not match the parameters")
	}
	if r.Cov == nil {
		return e
	}
	var v float64
	for i := range p {
		for j := range p {
			v += jac[i] * r.Cov[i*p+j] * jac[j]
		}
	}
	e.StdError = math.Sqrt(math.Max(0, v))
	h := r.quantile(confidence) * e.StdError
	e.Lower, e.Upper = value-h, value+h
	return e
}

// ProfileExponent is Profile for the exponent n of a curve that has one: the
// interval the verdict rests on. It is unknown for other curves.
func ProfileExponent(s *Sample, r *Result, confidence float64) Estimate {
	c := make([]float64, r.Params())
	found := false
	for j, p := range r.Curve.Info().Params {
		if p.Symbol == "n" {
			c[j], found = 1, true
		}
	}
	if !found {
		return Unknown()
	}
	return Profile(s, r, c, confidence)
}

// Profile returns the profile interval of the linear function c·p of the canonical
// parameters, c of length p: all values g for which the best fit with c·p = g has
//
//	(S(g) - S_min)/(S_min/ν) <= F(1, ν), or S(g) - S_min <= χ²(1) with σ known
//
// (Bates & Watts 1988, section 6.1.2), as far as they hang together with the estimate.
// An end that is not reached within 2^20 half-widths is open and infinite. With errors
// in ln k and a models.Basis it is the interval of Interval, which is then exact. With
// errors in k and a function of one path of parallel it is held to E1 <= E2, and an end
// is open where ProfileShaped has it so. For a models.Seeded it is that of Region. Beside
// nuisance columns a path is not held to its place.
func Profile(s *Sample, r *Result, c []float64, confidence float64) Estimate {
	if len(c) != r.Params() {
		panic("fit: the length of c does not match the parameters")
	}
	if !r.Usable() || r.P == nil {
		return Unknown()
	}
	if len(s.Limits) > 0 {
		return profileLimits(s, r, c, confidence)
	}
	if _, seeded := r.Curve.(models.Seeded); seeded {
		return NewRegion(s, r, confidence).Interval(linearFunction(c))
	}
	value := floats.Dot(c, r.P)
	wald := r.Interval(c, value, confidence)
	if _, linear := r.Curve.(models.Basis); linear && !s.Model.InK() {
		return wald
	}
	e := Estimate{Value: value, StdError: wald.StdError, Lower: math.NaN(), Upper: math.NaN()}
	if r.Status != Converged {
		e.Value, e.StdError = math.NaN(), math.NaN()
	}
	t := r.quantile(confidence)
	if math.IsNaN(t) {
		return e
	}
	var end func(step, smin, criterion float64) (float64, bool)
	var smin float64
	if s.Spent() > 0 {
		f := newProfiler(s, r, append(slices.Clone(c), make([]float64, s.Spent())...))
		smin = f.start(append(slices.Clone(r.P), r.Beside...))
		end = func(step, smin, criterion float64) (float64, bool) { return f.end(value, step, smin, criterion) }
	} else if h := onePath(s, r, c); h != nil {
		smin = math.Min(h.at(value), r.RSS/square(h.w.e.o.unit))
		end = func(step, smin, criterion float64) (float64, bool) { return h.end(value, step, smin, criterion) }
	} else {
		f := newProfiler(s, r, c)
		smin = f.start(r.P)
		end = func(step, smin, criterion float64) (float64, bool) { return f.end(value, step, smin, criterion) }
	}
	criterion := t * t
	if !s.Model.KnownSigma() {
		criterion *= smin / float64(r.Nu)
	}
	if criterion == 0 { // no scatter
		e.Lower, e.Upper = value, value
		return e
	}
	step := wald.Upper - value
	if !(step > 0) || math.IsInf(step, 0) {
		step = 0.1 * math.Abs(value)
	}
	if step == 0 {
		step = 1
	}
	lower, okLower := end(-step, smin, criterion)
	upper, okUpper := end(step, smin, criterion)
	return e.between(lower, upper, okLower, okUpper)
}

// between returns the estimate with these ends; an end that was not found is open.
func (e Estimate) between(lower, upper float64, okLower, okUpper bool) Estimate {
	e.Lower, e.Upper = lower, upper
	switch {
	case !okLower && !okUpper:
		e.Open = OpenBoth
	case !okLower:
		e.Open = OpenLower
	case !okUpper:
		e.Open = OpenUpper
	}
	return e
}

// profiler minimises the sum of squares under c·p = g by eliminating p[pivot].
type profiler struct {
	c      []float64
	pivot  int
	g      float64
	low    float64 // g is not looked for beyond these
	high   float64
	best   []float64 // full parameters of the unconstrained minimum
	full   []float64
	jac    []float64
	inner  Problem
	engine *solver
}

func newProfiler(s *Sample, r *Result, c []float64) *profiler {
	o := newObjective(s, r.Curve)
	f := &profiler{c: c, inner: o.problem(), low: math.Inf(-1), high: math.Inf(1)}
	own := f.inner.N
	if s.Spent() > 0 {
		f.inner = Problem{M: s.Len(), N: own + s.Spent(), Eval: o.withNuisance()}
	}
	n := f.inner.N
	// Eliminate the parameter on which the value hangs most, in units of its
	// standard error, or of itself where there is none.
	most := 0.0
	for j := range own { // c is 0 on nuisance columns
		w := math.Abs(c[j] * r.P[j])
		if r.Cov != nil {
			w = math.Abs(c[j]) * math.Sqrt(r.Cov[j*own+j])
		}
		if w > most || (most == 0 && c[j] != 0) {
			f.pivot, most = j, w
		}
	}
	if c[f.pivot] == 0 {
		panic("fit: the function to profile depends on no parameter")
	}
	f.full = make([]float64, n)
	f.jac = make([]float64, f.inner.M*n)
	f.engine = newSolver(f.inner.M, n-1)
	return f
}

// start returns the sum of squares at the unconstrained minimum p.
func (f *profiler) start(p []float64) float64 {
	f.best = append([]float64(nil), p...)
	r := make([]float64, f.inner.M)
	f.inner.Eval(p, r, nil)
	return floats.Dot(r, r)
}

// expand puts the full parameters for the reduced q into f.full.
func (f *profiler) expand(q []float64) {
	rest := f.g
	k := 0
	for j := range f.full {
		if j == f.pivot {
			continue
		}
		f.full[j] = q[k]
		rest -= f.c[j] * q[k]
		k++
	}
	f.full[f.pivot] = rest / f.c[f.pivot]
}

// problem is the reduced problem in the parameters without p[pivot].
func (f *profiler) problem() Problem {
	n := f.inner.N
	return Problem{M: f.inner.M, N: n - 1, Eval: func(q, r, jac []float64) {
		f.expand(q)
		if jac == nil {
			f.inner.Eval(f.full, r, nil)
			return
		}
		f.inner.Eval(f.full, r, f.jac)
		for i := range f.inner.M {
			row := f.jac[i*n : (i+1)*n]
			k := i * (n - 1)
			for j := range row {
				if j == f.pivot {
					continue
				}
				jac[k] = row[j] - row[f.pivot]*f.c[j]/f.c[f.pivot]
				k++
			}
		}
	}}
}

// at returns the sum of squares under c·p = g, from the full parameters p, and the
// parameters there; NaN where the fit fails.
func (f *profiler) at(g float64, p []float64) (float64, []float64) {
	f.g = g
	var q []float64
	for j, pj := range p {
		if j != f.pivot {
			q = append(q, pj)
		}
	}
	_, ok, _ := f.engine.trustRegion(f.problem(), q, Options{})
	if !ok {
		return math.NaN(), nil
	}
	f.expand(f.engine.p)
	return floats.Dot(f.engine.r, f.engine.r), append([]float64(nil), f.full...)
}

// end walks from value in steps that double until the sum of squares has risen by
// the criterion, and finds where; ok is false, and the end infinite, where it never
// does. Each constrained fit starts from the last.
func (f *profiler) end(value, step, smin, criterion float64) (limit float64, ok bool) {
	const doublings = 20
	p, inside := f.best, value
	// The square root is nearly linear in g.
	distance := func(s float64) float64 {
		return math.Sqrt(math.Max(0, s-smin)) - math.Sqrt(criterion)
	}
	dInside := distance(smin)
	for range doublings {
		g := math.Max(f.low, math.Min(f.high, inside+step))
		s, q := f.at(g, p)
		if math.IsNaN(s) {
			step /= 4
			continue
		}
		d := distance(s)
		if d >= 0 {
			return findRoot(func(g float64) float64 {
				s, _ := f.at(g, p)
				return distance(s)
			}, inside, dInside, g, d), true
		}
		if g == f.low || g == f.high {
			break
		}
		inside, dInside, p = g, d, q
		step *= 2
	}
	return math.Copysign(math.Inf(1), step), false
}

// findRoot returns a root of f between a and b, where fa = f(a) and fb = f(b) have
// opposite signs, to about 1e-13 of the bracket or the rounding of the root (T. R.
// Chandrupatla, Adv. Eng. Softw. 28 (1997) 145: inverse quadratic interpolation
// where it is safe, else bisection). A NaN of f ends the search at the best point.
func findRoot(f func(float64) float64, a, fa, b, fb float64) float64 {
	tol := 1e-13 * math.Abs(b-a)
	t := fa / (fa - fb)
	for range 200 {
		x := a + t*(b-a)
		fx := f(x)
		if math.IsNaN(fx) {
			break
		}
		// [a, b] is the bracket, a the newest point and c the one before.
		c, fc := a, fa
		if (fx > 0) != (fa > 0) {
			c, fc = b, fb
			b, fb = a, fa
		}
		a, fa = x, fx
		least := (tol + 0x1p-52*math.Abs(a)) / math.Abs(b-a)
		if fa == 0 || least > 0.5 {
			break
		}
		xi, phi := (a-b)/(c-b), (fa-fb)/(fc-fb)
		t = 0.5
		if phi*phi < xi && (1-phi)*(1-phi) < 1-xi {
			t = fa/(fb-fa)*fc/(fb-fc) + (c-a)/(b-a)*fa/(fc-fa)*fb/(fc-fb)
		}
		t = math.Min(1-least, math.Max(least, t))
	}
	if math.Abs(fb) < math.Abs(fa) {
		return b
	}
	return a
}
