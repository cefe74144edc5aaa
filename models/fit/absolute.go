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

	barriers []int // parameters that are bounded
}

func newObjective(s *Sample, c models.Curve) *objective {
	o := &objective{s: s, c: c, n: len(c.Info().Params), inK: s.Model.InK(), unit: 1}
	o.y = append([]float64(nil), s.Y...)
	o.root = make([]float64, s.Len())
	for i, v := range s.V {
		o.root[i] = 1 / math.Sqrt(v)
	}
	if _, ok := c.(models.Shaped); ok {
		for j, p := range c.Info().Params {
			if p.Unit == "J/mol" {
				o.barriers = append(o.barriers, j)
			}
		}
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

// beyond reports whether a barrier of a shaped curve exceeds maxBarrier: such steps
// are refused, since two paths could follow any single point with them.
func (o *objective) beyond(p []float64) bool {
	for _, j := range o.barriers {
		if !(math.Abs(p[j]) <= maxBarrier) {
			return true
		}
	}
	return false
}

func (o *objective) problem() Problem {
	m := o.s.Len()
	f := make([]float64, m)
	return Problem{M: m, N: o.n, Eval: func(p, r, jac []float64) {
		o.c.LnK(o.s.TRef, o.s.T, p, f, jac)
		if o.beyond(p) {
			f[0] = math.NaN()
		}
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
	starts = append(starts, o.bentStarts(pr)...)
	least := math.Inf(1)
	var p0 []float64
	for _, start := range starts {
		// Short first steps stay in the valley in which a start lies; the best is
		// taken to convergence below.
		_, _, r.Reason = engine.trustRegion(pr, start, Options{Factor: 0.01, Tolerance: 1e-6, MaxIterations: 50})
		if rss := floats.Dot(engine.r, engine.r); rss < least {
			least, p0 = rss, append(p0[:0], engine.p...)
		}
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
		// A valley without end: where the search stopped is as good as any point in it.
		reason := best.Reason
		engine.finish(pr, best)
		best.Status, best.Reason, best.Cov = NotIdentified, reason, nil
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
	for _, j := range o.barriers {
		if !(math.Abs(r.P[j]) < 0.99*maxBarrier) {
			r.Status, cov = NotIdentified, nil
			r.Reason = fmt.Sprintf("a barrier beyond %g kJ/mol would fit better still", maxBarrier/1000)
		}
	}
	if isShaped && cov != nil && !(relativeError(c, best.RSS/float64(max(1, r.Nu)), s.Model, cov) <= maxLnError) {
		r.Status, cov = NotIdentified, nil
		r.Reason = "one path is too slow everywhere to leave a trace in these data"
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

// maxLnError is the standard error of ln k_ref past which a path counts as lost: its
// own rate constant is then uncertain by a factor of e^100, and its barrier is noise.
const maxLnError = 100

// relativeError is the largest standard error of a parameter that is the ln of a rate
// constant, from the unscaled covariance and s² = RSS/ν.
func relativeError(c models.Curve, s2 float64, m ErrorModel, cov []float64) (most float64) {
	if m.KnownSigma() {
		s2 = 1
	}
	ps := c.Info().Params
	for j, p := range ps {
		if p.Unit == "k" {
			most = math.Max(most, math.Sqrt(s2*cov[j*len(ps)+j]))
		}
	}
	return most
}

// startsInK fits the points with k > 0 in ln k with variances V/k^m, m = 2 and 0:
// to first order m = 2 is the error model itself, and m = 0 hears the small k.
// Without a start the status and reason of the last such fit say why.
func startsInK(s *Sample, c models.Curve) (starts [][]float64, status Status, reason string) {
	for _, m := range []float64{2, 0} {
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

// bentStarts bends a line by given amounts and fits the line to what is left, in ln
// k with variances V/k², for the curves that have more than a line: with errors in k
// they have local minima, in which the curve runs through a single high point at the
// cold end, for one. Of 1,500 sets with a scatter of 3 % of the largest k the fits in
// ln k alone miss the best minimum of a power curve in 1 %, with these in 0.1 %.
func (o *objective) bentStarts(pr Problem) (starts [][]float64) {
	s, m := o.s, o.s.Len()
	x := make([]float64, m) // (1/T - 1/T_ref)/R
	models.CentredX(s.TRef, s.T, x)
	g := make([]float64, m)
	switch c := o.c.(type) {
	case models.Basis:
		if o.n != 3 {
			return nil
		}
		off, design := make([]float64, m), make([]float64, m*o.n)
		c.Columns(s.TRef, s.T, off, design)
		var most float64
		for i := range m {
			most = math.Max(most, math.Abs(design[3*i+2]))
		}
		for _, bend := range []float64{-16, -4, -1, 1, 4} { // in ln k
			n := bend / most
			for i := range m {
				g[i] = off[i] + n*design[3*i+2]
			}
			a, e := s.weightedLine(x, g)
			starts = append(starts, []float64{a, e, n})
		}
	case models.Shaped:
		if _, ok := softplusSign(c); !ok {
			return nil
		}
		low, high := floats.Min(x), floats.Max(x)
		r := make([]float64, m)
		for _, width := range []float64{2, 6, 20, 60, 200} { // difference of barriers times range
			var best []float64
			least := math.Inf(1)
			for _, at := range []float64{0.1, 0.3, 0.5, 0.7, 0.9} { // crossover
				d := math.Min(width/(high-low), maxBarrier/2)
				q := []float64{d * (low + at*(high-low)), d}
				c.Shape(x, q, g, nil, nil)
				a, e := s.weightedLine(x, g)
				p := make([]float64, o.n)
				c.FromShape(a, e, q, p)
				pr.Eval(p, r, nil)
				if rss := floats.Dot(r, r); rss < least {
					least, best = rss, p
				}
			}
			if best != nil {
				starts = append(starts, best)
			}
		}
	}
	return starts
}

// weightedLine fits ln k - g = a - e x to the points with k > 0, weights k²/V.
func (s *Sample) weightedLine(x, g []float64) (a, e float64) {
	var lnW []float64
	most := math.Inf(-1)
	for i, k := range s.K {
		l := math.Inf(-1)
		if k > 0 {
			l = 2*s.Y[i] - math.Log(s.V[i])
		}
		lnW = append(lnW, l)
		most = math.Max(most, l)
	}
	var sw, sx, sy float64
	for i, l := range lnW {
		if w := math.Exp(l - most); w > 0 {
			sw, sx, sy = sw+w, sx+w*x[i], sy+w*(s.Y[i]-g[i])
		}
	}
	mx, my := sx/sw, sy/sw
	var sxx, sxy float64
	for i, l := range lnW {
		if w := math.Exp(l - most); w > 0 {
			d := x[i] - mx
			sxx, sxy = sxx+w*d*d, sxy+w*d*(s.Y[i]-g[i]-my)
		}
	}
	e = -sxy / sxx
	return my + e*mx, e
}
