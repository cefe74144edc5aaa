package fit

import (
	"math"

	"onebarrier/models"
)

// StdErrorRefitter is a Refitter that knows the standard errors of what it refitted.
type StdErrorRefitter interface {
	OneRefitter
	// StdError is the standard error of the linear function w of the parameters of
	// candidate j in the last refit; NaN where there is none.
	StdError(j int, w []float64) float64
}

// limitRefitter refits to resamples of a sample with limits. Their values follow
// those of the measured entries: one on its side of the bound, or on it, is that limit
// again, and any other counts as measured (censoring at fixed bounds, of type I). RSS
// is as in Result, with the number of measured entries of the sample. Nuisance columns
// are fitted together with every curve, to every resample anew.
type limitRefitter struct {
	s      *Sample
	curves []models.Curve
	fits   []*Result
	params []int // parameters given out, of each curve
	criterion
	work     []*limitWork
	straight *limitWork // nil where the straight line is no candidate
	line     *limitWork // about which limits are completed, for starts of other curves
	plan     *plan      // of all entries; nil where the errors are in k
}

// limitWork is the memory of refits of one curve.
type limitWork struct {
	e     *censored
	from  []float64 // estimate of the sample; nil where there is none
	basis []float64 // its directions
	reach float64
	value float64 // of the last refit
	ok    bool
	cov   []float64
	known int // 0: cov not asked for yet, 1: good, -1: none
}

var _ StdErrorRefitter = (*limitRefitter)(nil)

func newLimitRefitter(s *Sample, curves []models.Curve, fits []*Result, c criterion, shapedParams bool) *limitRefitter {
	r := &limitRefitter{s: s, curves: curves, fits: fits, criterion: c, params: make([]int, len(curves))}
	for j, c := range curves {
		_, linear := c.(models.Basis)
		if linear || shapedParams {
			r.params[j] = len(c.Info().Params)
		}
		r.work = append(r.work, newLimitWork(s, c, fits[j]))
		if isStraight(c) {
			r.straight = r.work[j]
		}
		// The most flexible linear curve completes limits best.
		if w := r.work[j]; linear && w.from != nil && (r.line == nil || w.e.p > r.line.e.p) {
			r.line = w
		}
	}
	if r.line == nil {
		r.line = newLimitWork(s, models.Straight(), Fit(s, models.Straight()))
	}
	if !s.Model.InK() {
		all := s.All()
		r.plan = newPlan(all.T, all.V)
		r.plan.makeNodes()
	}
	return r
}

func isStraight(c models.Curve) bool { return c.Info().Name == models.Straight().Info().Name }

func newLimitWork(s *Sample, c models.Curve, f *Result) *limitWork {
	e := newCensored(s, c)
	w := &limitWork{e: e, cov: make([]float64, e.p*e.p)}
	from := append(append([]float64(nil), f.P...), f.Beside...)
	if f.Usable() && len(from) == e.p && limitsUnused(s, f.Measured()) == "" && e.start(from) {
		w.from, w.basis, w.reach = from, append([]float64(nil), e.b...), e.reach
	}
	return w
}

// Clone implements Refitter.
func (r *limitRefitter) Clone() Refitter {
	c := *r
	c.work, c.straight, c.line = nil, nil, nil
	for j, curve := range r.curves {
		c.work = append(c.work, newLimitWork(r.s, curve, r.fits[j]))
		if r.work[j] == r.line {
			c.line = c.work[j]
		}
		if r.work[j] == r.straight {
			c.straight = c.work[j]
		}
	}
	if c.line == nil {
		c.line = newLimitWork(r.s, models.Straight(), Fit(r.s, models.Straight()))
	}
	return &c
}

// Refit implements Refitter.
func (r *limitRefitter) Refit(y []float64, out *Refit) { r.refit(-1, y, nil, out) }

// RefitCounts implements Refitter.
func (r *limitRefitter) RefitCounts(y []float64, counts []int, out *Refit) {
	r.refit(-1, y, counts, out)
}

// RefitOne implements OneRefitter.
func (r *limitRefitter) RefitOne(j int, y []float64, counts []int, out *Refit) {
	r.refit(j, y, counts, out)
}

// StdError implements StdErrorRefitter.
func (r *limitRefitter) StdError(j int, w []float64) float64 {
	work := r.work[j]
	if !work.ok {
		return math.NaN()
	}
	if work.known == 0 {
		work.known = -1
		if work.e.covariance(work.cov) {
			work.known = 1
		}
	}
	if work.known < 0 {
		return math.NaN()
	}
	var v float64
	for i, wi := range w {
		for k, wk := range w {
			v += wi * work.cov[i*work.e.p+k] * wk
		}
	}
	return math.Sqrt(v)
}

// refit fits curve only, or all where that is negative.
func (r *limitRefitter) refit(only int, y []float64, counts []int, out *Refit) {
	if m := r.s.Len() + len(r.s.Limits); len(y) != m || counts != nil && len(counts) != m {
		panic("fit: a resample must have one value for each entry of the sample and each limit")
	}
	out.prepare(r.params)
	out.How, out.First = HowLinear, -1
	distinct := math.MaxInt
	if counts != nil && r.s.Spent() > 0 {
		distinct = 0 // as in offsetRefitter.RefitCounts
	} else if counts != nil {
		var taken []float64
		for i, t := range r.s.T {
			if counts[i] > 0 {
				taken = append(taken, t)
			}
		}
		distinct = models.CountTemperatures(taken)
	}
	r.line.linear(y, counts)
	if r.straight != nil && r.straight != r.line { // the others are compared with it
		r.straight.linear(y, counts)
	}
	var completed *Sample
	for j := range r.curves {
		if only >= 0 && j != only {
			continue
		}
		w := r.work[j]
		if distinct <= w.e.own {
			w.ok = false
			out.fail(j)
			continue
		}
		out.How = max(out.How, HowWarm)
		if w != r.line && w != r.straight {
			w.linear(y, counts)
		}
		_, shaped := r.curves[j].(models.Shaped)
		if !w.ok || shaped || !w.e.linear && w.from == nil {
			if completed == nil && r.line.ok {
				completed = r.line.e.completed(r.s)
			}
			r.cold(w, j, completed)
			if r.s.Model.InK() { // where minima are many
				r.cold(w, j, r.line.e.measured(r.s))
			}
			out.How = max(out.How, HowCold)
		}
		nests := nestsLine(r.curves[j])
		switch {
		case w.ok && !(nests && r.line.ok && r.worse(w)):
			out.RSS[j] = w.e.rss(w.value)
			copy(out.P[j], w.e.par)
		case nests || r.fits[j].Status == Excluded:
			out.RSS[j] = math.Inf(1)
			out.blank(j)
		default:
			out.fail(j)
		}
	}
	if only < 0 {
		r.first(out)
	}
}

// worse reports whether a curve that nests the straight line does not beat it, where
// that is a candidate.
func (r *limitRefitter) worse(w *limitWork) bool {
	l := r.straight
	return l != nil && l.ok && !(w.value < l.value-1e-9)
}

// linear refits from the estimate of the sample.
func (w *limitWork) linear(y []float64, counts []int) {
	e := w.e
	e.take(y, counts)
	w.ok, w.known = false, 0
	if w.from == nil {
		return
	}
	copy(e.par, w.from)
	copy(e.b, w.basis)
	e.d, e.edge, e.reach = e.p, 0, w.reach
	w.descend()
}

// descend goes down from par; Newton's method takes over where that of Gauss and
// Newton does not end soon. Where neither ends, the curve runs along a valley in which
// every point is as good as the last.
func (w *limitWork) descend() {
	e := w.e
	e.scatter()
	e.gauss, e.steps = true, 12
	w.value, w.ok = e.minimise(refitTolerance)
	if e.gauss = false; !w.ok {
		e.steps = 25
		w.value, w.ok = e.minimise(refitTolerance)
		w.ok = w.ok || !e.linear && finite(w.value)
	}
}

// refitTolerance is the decrement at which a resample has converged: a thousandth of
// a standard error before the last step, 1e-6 of one after it.
const refitTolerance = 1e-6

// cold looks for a better minimum from a fit to the resample with its limits
// completed and the offsets of r.line taken off; it keeps what w holds where there is
// none.
func (r *limitRefitter) cold(w *limitWork, j int, completed *Sample) {
	if completed == nil {
		return
	}
	c := r.curves[j]
	var f *Result
	shaped, is := c.(models.Shaped)
	if _, softplus := softplusSign(c); is && softplus && r.plan != nil && completed.Len() == len(r.plan.rows) {
		f = r.plan.fit(completed, shaped)
	} else {
		f = Fit(completed, c)
	}
	if f.P == nil {
		return
	}
	e := w.e
	before, lambda, value, ok := append([]float64(nil), e.par...), e.lambda, w.value, w.ok
	if e.start(r.line.e.withOffsets(f.P)) {
		if w.descend(); w.ok && (!ok || w.value < value-1e-9) {
			return
		}
	}
	e.release()
	copy(e.par, before)
	e.lambda, w.value, w.ok = lambda, value, ok
}
