package fit

import (
	"fmt"
	"math"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// objective is the weighted problem of one curve on one sample, with residuals
// (model - data)/√V, in ln k or, where the errors are in k, in k divided by unit:
// rate constants over 300 decades then neither overflow nor vanish when squared.
type objective struct {
	s       *Sample
	c       models.Curve
	n       int
	inK     bool
	unit    float64 // largest |k|; 1 where unit does not enter RSS or errors are in ln k
	lnScale float64 // ln of the unit in which k is compared
	y, root []float64
}

func newObjective(s *Sample, c models.Curve) *objective {
	o := &objective{s: s, c: c, n: len(c.Info().Params), inK: s.Model.InK(), unit: 1}
	o.y = append([]float64(nil), s.Y...)
	o.root = make([]float64, s.Len())
	for i, v := range s.V {
		o.root[i] = 1 / math.Sqrt(v)
	}
	if !o.inK {
		return o
	}
	scale := math.Max(floats.Max(s.K), -floats.Min(s.K))
	if scale == 0 {
		scale = 1
	}
	o.lnScale = math.Log(scale)
	for i, k := range s.K {
		o.y[i] = k / scale
		if s.Model.KnownSigma() {
			o.root[i] *= scale // χ² has no unit
		}
	}
	if !s.Model.KnownSigma() {
		o.unit = scale
	}
	return o
}

func (o *objective) problem() Problem {
	m := o.s.Len()
	f := make([]float64, m)
	return Problem{M: m, N: o.n, Eval: func(p, r, jac []float64) {
		o.c.LnK(o.s.TRef, o.s.T, p, f, jac)
		for i := range f {
			slope := o.root[i]
			if o.inK {
				f[i] = math.Exp(f[i] - o.lnScale)
				slope *= f[i]
			}
			r[i] = (f[i] - o.y[i]) * o.root[i]
			if jac != nil {
				for j := i * o.n; j < (i+1)*o.n; j++ {
					jac[j] *= slope
				}
			}
		}
	}}
}

// fitInK fits a curve to data with errors in k, where every curve is nonlinear: the
// best of the minima reached from several fits in ln k.
func fitInK(s *Sample, c models.Curve) *Result {
	r := newResult(s, c)
	p := r.Params()
	starts, status, reason := startsInK(s, c)
	shaped, isShaped := c.(models.Shaped)
	var line *Result
	if isShaped {
		line = fitInK(s, models.Straight())
	}
	exclude := func() *Result {
		r.Status, r.RSS = Excluded, line.RSS
		r.Reason = "the data bend the other way, or not at all"
		r.settle(s, nil, 1)
		return r
	}
	if len(starts) == 0 {
		if status == Excluded && line.Usable() {
			return exclude()
		}
		r.Reason = reason
		return r
	}
	o := newObjective(s, c)
	pr, engine := o.problem(), newSolver(s.Len(), p)
	least := math.Inf(1)
	var p0 []float64
	for _, start := range starts {
		_, ok, reason := engine.trustRegion(pr, start, Options{})
		if rss := floats.Dot(engine.r, engine.r); ok && rss < least {
			least, p0 = rss, append(p0[:0], engine.p...)
		}
		r.Reason = reason
	}
	if p0 == nil {
		return r
	}
	if isShaped { // parameters in their canonical order
		a, e, q := shaped.ToShape(p0)
		shaped.FromShape(a, e, q, p0)
	}
	best := engine.solve(pr, p0, Options{})
	if best.Status == Failed {
		r.Reason = best.Reason
		return r
	}
	if isShaped && line.Usable() && !(best.RSS*o.unit*o.unit < line.RSS*(1-1e-12)) {
		return exclude()
	}

	r.Status, r.Reason = best.Status, best.Reason
	r.P, r.RSS, r.Leverage = best.P, best.RSS, best.Leverage
	cov := best.Cov
	if d := s.DistinctT(); d < p {
		r.Status, cov = NotIdentified, nil
		r.Reason = fmt.Sprintf("needs at least %d distinct temperatures, has %d", p, d)
	}
	if isShaped {
		for j, param := range c.Info().Params {
			if param.Unit == "J/mol" && !(math.Abs(r.P[j]) <= maxBarrier) {
				r.Status, cov = NotIdentified, nil
				r.Reason = fmt.Sprintf("a barrier beyond %g kJ/mol would fit better still", maxBarrier/1000)
			}
		}
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

// startsInK fits the points with k > 0 in ln k with variances V/k^m, m = 2, 1, 0:
// to first order m = 2 is the error model itself, and m = 0 hears the small k.
// Without a start the status and reason of the last such fit say why.
func startsInK(s *Sample, c models.Curve) (starts [][]float64, status Status, reason string) {
	for m := 2.0; m >= 0; m-- {
		sub := &Sample{Model: Relative, TRef: s.TRef}
		least := math.Inf(1)
		for i, k := range s.K {
			if !(k > 0) {
				continue
			}
			sub.T, sub.K, sub.Y = append(sub.T, s.T[i]), append(sub.K, k), append(sub.Y, s.Y[i])
			lnV := math.Log(s.V[i]) - m*s.Y[i]
			sub.V = append(sub.V, lnV)
			least = math.Min(least, lnV)
		}
		if sub.Len() == 0 {
			return nil, Failed, "no rate constant is positive"
		}
		const range16 = 37 // ln 1e16: points that weigh less still steer nothing astray
		for i, lnV := range sub.V {
			sub.V[i] = math.Exp(math.Min(lnV-least, range16))
		}
		f := Fit(sub, c)
		if f.P != nil {
			starts = append(starts, f.P)
		} else {
			status, reason = f.Status, "among the points with k > 0: "+f.Reason
		}
	}
	return starts, status, reason
}
