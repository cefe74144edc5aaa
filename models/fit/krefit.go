package fit

import (
	"math"

	"onebarrier/models"
)

// kRefitter refits to errors in k, each curve from its fit to the sample and never
// from another resample, so that the order of resamples does not matter. Curves
// that are not exponentials, and searches that do not end, are left to Fit.
type kRefitter struct {
	slowRefitter
	fits []*Result
	work *kWork
}

var _ OneRefitter = (*kRefitter)(nil)

// kWork is the memory of refits on one design.
type kWork struct {
	curves []*varpro // of each candidate, nil where it is left to Fit; then the line
	warm   [][][2]float64
	line   int // the straight line, which two paths start from
	fitted []bool
	ok     []bool // of fitted
	found  []bool // a second path; true for other curves
}

// newKWork lays out a design. fits are those of the whole sample.
func newKWork(s *Sample, curves []models.Curve, fits []*Result) *kWork {
	w := &kWork{line: -1}
	straight := models.Straight()
	for j, c := range curves {
		if c.Info().Name == straight.Info().Name {
			w.line = j
		}
		var e *exponentials
		if f := fits[j]; f.Usable() || f.Status == Excluded {
			e = newExponentials(s, c)
		}
		w.add(e, fits[j].P)
	}
	if w.line < 0 || w.curves[w.line] == nil {
		w.line = len(w.curves)
		w.add(newExponentials(s, straight), nil)
	}
	n := len(w.curves)
	w.fitted, w.ok, w.found = make([]bool, n), make([]bool, n), make([]bool, n)
	return w
}

func (w *kWork) add(e *exponentials, p []float64) {
	var v *varpro
	var warm [][2]float64
	if e != nil {
		v = newVarpro(e)
		if p != nil {
			warm = append(warm, e.thetaOf(p))
		}
	}
	w.curves, w.warm = append(w.curves, v), append(w.warm, warm)
}

// taken is the memory of one refit to entries taken counts times, of curve only or,
// where that is negative, of all.
func (w *kWork) taken(counts []int, only int) *kWork {
	n := len(w.curves)
	out := &kWork{
		curves: make([]*varpro, n), warm: w.warm, line: w.line,
		fitted: make([]bool, n), ok: make([]bool, n), found: make([]bool, n),
	}
	for j, v := range w.curves {
		if v != nil && (only < 0 || j == only || j == w.line) {
			out.curves[j] = newVarpro(v.e.taken(counts))
		}
	}
	return out
}

// fit fits curve j to k, once; reset forgets. ok is false where it is left to Fit.
func (w *kWork) fit(j int, k []float64) (ok bool) {
	v := w.curves[j]
	if v == nil || w.fitted[j] {
		return w.ok[j]
	}
	v.setData(k)
	w.fitted[j], w.found[j] = true, true
	switch {
	case v.e.paths == 1:
		w.ok[j] = v.fitSingle(w.warm[j]...)
	case w.fit(w.line, k):
		w.found[j], w.ok[j] = v.addPath(&w.curves[w.line].best, w.warm[j]...)
	default:
		w.ok[j] = false
	}
	return w.ok[j]
}

func (w *kWork) reset() { clear(w.fitted) }

// Clone implements Refitter.
func (r *kRefitter) Clone() Refitter {
	c := *r
	c.work = newKWork(r.s, r.curves, r.fits)
	return &c
}

// Refit implements Refitter.
func (r *kRefitter) Refit(y []float64, out *Refit) { r.refit(-1, y, nil, out) }

// RefitCounts implements Refitter.
func (r *kRefitter) RefitCounts(y []float64, counts []int, out *Refit) { r.refit(-1, y, counts, out) }

// RefitOne implements OneRefitter.
func (r *kRefitter) RefitOne(j int, y []float64, counts []int, out *Refit) {
	r.refit(j, y, counts, out)
}

// refit fits curve only, or all where that is negative.
func (r *kRefitter) refit(only int, y []float64, counts []int, out *Refit) {
	mustMatch(r.s, y, counts)
	out.prepare(r.params)
	work, k := r.work, y
	var sub *Sample // of the entries taken
	distinct := 0
	if counts != nil {
		sub = r.resample(y, counts)
		distinct, k = sub.DistinctT(), sub.K
		work = work.taken(counts, only)
	}
	work.reset()
	out.How, out.First = HowLinear, -1
	for j, c := range r.curves {
		if only >= 0 && j != only {
			continue
		}
		if counts != nil && distinct <= len(c.Info().Params) {
			out.fail(j)
			continue
		}
		if !work.fit(j, k) {
			if sub == nil {
				sub = r.resample(y, nil)
			}
			r.cold(sub, j, out)
			continue
		}
		v := work.curves[j]
		out.How = max(out.How, HowWarm)
		if !work.found[j] {
			out.RSS[j] = math.Inf(1)
			out.blank(j)
			continue
		}
		out.RSS[j] = v.best.value() * square(v.e.o.unit)
		if len(out.P[j]) > 0 {
			v.e.params(&v.best, out.P[j])
		}
	}
	if only < 0 {
		r.first(out)
	}
}
