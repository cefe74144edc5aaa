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
	curves []*varpro // of each candidate, nil where it is left to bent or Fit; then the line
	bent   []*bentInK
	steps  []*steps      // of a bent curve, where only first places are asked for
	rss    []float64     // of a bent curve
	from   [][][]float64 // starts of bent
	warm   [][][2]float64
	line   int // the straight line, which two paths start from
	fitted []bool
	ok     []bool // of fitted
	found  []bool // better than the line; true for curves of one exponential
	atLine [2]float64
	framed bool
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
		var bent *bentInK
		if f := fits[j]; f.Usable() || f.Status == Excluded {
			if e = newExponentials(s, c); e == nil {
				bent = newBentInK(newObjective(s, c))
			}
		}
		w.add(e, s, fits[j])
		w.bent = append(w.bent, bent)
		var from [][]float64
		if fits[j].P != nil {
			from = append(from, fits[j].P)
		}
		w.from = append(w.from, from)
	}
	if w.line < 0 || w.curves[w.line] == nil {
		w.line = len(w.curves)
		w.add(newExponentials(s, straight), s, nil)
	}
	n := len(w.curves)
	w.fitted, w.ok, w.found = make([]bool, n), make([]bool, n), make([]bool, n)
	w.rss, w.steps = make([]float64, n), make([]*steps, n)
	if v := w.curves[w.line]; v != nil {
		var d *stepsDesign
		for j, b := range w.bent {
			if b == nil || !isSeries(b.o.c) {
				continue
			}
			if d == nil {
				v.setData(s.K)
				if !v.fitSingle(w.warm[w.line]...) {
					break
				}
				v.frame()
				d = newStepsDesign(v)
			}
			w.steps[j] = newSteps(d, v.e, fits[j])
		}
	}
	return w
}

// add lays out a curve of exponentials; e is nil for another. f is its fit to the
// sample, nil for none.
func (w *kWork) add(e *exponentials, s *Sample, f *Result) {
	var v *varpro
	var warm [][2]float64
	if e != nil {
		v = newVarpro(e)
		v.dim = max(e.d, e.paths)
		if f != nil && f.P != nil {
			warm = append(warm, e.thetaOf(f.P))
			if f.Status == Converged {
				v.setData(s.K)
				v.setLead(warm[0])
			}
		}
	}
	w.curves, w.warm = append(w.curves, v), append(w.warm, warm)
}

// taken is the memory of one refit to entries taken counts times, of curve only or,
// where that is negative, of all.
func (w *kWork) taken(sub *Sample, counts []int, only int) *kWork {
	n := len(w.curves)
	out := &kWork{
		curves: make([]*varpro, n), warm: w.warm, line: w.line,
		bent: make([]*bentInK, len(w.bent)), steps: make([]*steps, n), from: w.from, rss: make([]float64, n),
		fitted: make([]bool, n), ok: make([]bool, n), found: make([]bool, n),
	}
	for j, v := range w.curves {
		if v != nil && (only < 0 || j == only || j == w.line) {
			out.curves[j] = newVarpro(v.e.taken(counts))
		}
	}
	for j, b := range w.bent {
		if b != nil && (only < 0 || j == only) {
			out.bent[j] = newBentInK(newObjective(sub, b.o.c))
		}
	}
	return out
}

// fit fits curve j to k, once; reset forgets. ok is false where it is left to Fit. Of a
// curve served by bent only an RSS below limit is of interest.
func (w *kWork) fit(j int, k []float64, limit float64) (ok bool) {
	v := w.curves[j]
	if w.fitted[j] {
		return w.ok[j]
	}
	if v == nil {
		w.fitted[j], w.ok[j] = true, w.fitBent(j, k, limit)
		return w.ok[j]
	}
	v.setData(k)
	w.fitted[j], w.found[j] = true, true
	warm := w.warm[j]
	if len(warm) == 1 {
		v.ahead[0] = v.led(warm[0])
		warm = v.ahead[:]
	}
	switch {
	case v.e.paths == 1:
		w.ok[j] = v.fitSingle(warm...)
	case w.fit(w.line, k, limit):
		w.frame()
		v.limit = limit / square(v.e.o.unit)
		w.found[j], w.ok[j] = v.addPath(w.curves[w.line], warm...)
	default:
		w.ok[j] = false
	}
	return w.ok[j]
}

// fitBent is fit by w.bent. Only an RSS below limit is of interest.
func (w *kWork) fitBent(j int, k []float64, limit float64) (ok bool) {
	if j >= len(w.bent) || w.bent[j] == nil || !w.fit(w.line, k, limit) {
		return false
	}
	b, line := w.bent[j], w.curves[w.line]
	unit := square(line.e.o.unit)
	if s := w.steps[j]; s != nil && limit < math.Inf(1) {
		w.frame()
		w.rss[j], w.found[j] = s.fit(line, limit/unit)
		w.rss[j] *= unit
		return true
	}
	b.short, b.long, b.limit = 50, 200, math.Inf(1)
	if limit < math.Inf(1) {
		b.short, b.long, b.limit = 12, 60, limit/square(b.o.unit)
	}
	for i, ki := range k {
		b.o.y[i] = ki / b.o.scale
	}
	line.e.params(&line.best, w.atLine[:])
	_, w.found[j] = b.fit(w.atLine[:], line.best.value()*unit/square(b.o.unit), w.from[j])
	w.rss[j] = b.rss * square(b.o.unit)
	return true
}

// clone is other memory on the same design.
func (w *kWork) clone() *kWork {
	n := len(w.curves)
	out := *w
	out.curves, out.bent, out.steps = make([]*varpro, n), make([]*bentInK, len(w.bent)), make([]*steps, n)
	out.rss = make([]float64, n)
	out.fitted, out.ok, out.found = make([]bool, n), make([]bool, n), make([]bool, n)
	for j, v := range w.curves {
		if v != nil {
			out.curves[j] = newVarpro(v.e)
			out.curves[j].dim, out.curves[j].lead = v.dim, v.lead
		}
	}
	for j, b := range w.bent {
		if b != nil {
			out.bent[j] = newBentInK(newObjective(b.o.s, b.o.c))
			if s := w.steps[j]; s != nil {
				out.steps[j] = s.clone()
			}
		}
	}
	return &out
}

func (w *kWork) reset() {
	clear(w.fitted)
	w.framed = false
}

// frame makes the frame of the line that was fitted, once.
func (w *kWork) frame() {
	if !w.framed {
		w.framed = true
		w.curves[w.line].frame()
	}
}

// Clone implements Refitter.
func (r *kRefitter) Clone() Refitter {
	c := *r
	c.work = r.work.clone()
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
		work = work.taken(sub, counts, only)
	}
	work.reset()
	out.How, out.First = HowLinear, -1
	best := math.Inf(1)
	for j, c := range r.curves {
		if only >= 0 && j != only {
			continue
		}
		if counts != nil && distinct <= len(c.Info().Params) {
			out.fail(j)
			continue
		}
		limit := math.Inf(1)
		if r.screens && only < 0 && r.params[j] == 0 {
			limit = r.limit(j, best)
		}
		if !work.fit(j, k, limit) {
			if sub == nil {
				sub = r.resample(y, nil)
			}
			r.cold(sub, j, out)
			best = math.Min(best, r.of(j, out.RSS[j]))
			continue
		}
		out.How = max(out.How, HowWarm)
		if !work.found[j] {
			if limit < math.Inf(1) {
				out.How = max(out.How, HowScreened)
			}
			out.RSS[j] = math.Inf(1)
			out.blank(j)
			continue
		}
		v := work.curves[j]
		if v == nil {
			out.RSS[j] = work.rss[j]
			copy(out.P[j], work.bent[j].p)
			best = math.Min(best, r.of(j, out.RSS[j]))
			continue
		}
		out.RSS[j] = v.best.value() * square(v.e.o.unit)
		best = math.Min(best, r.of(j, out.RSS[j]))
		if len(out.P[j]) > 0 {
			v.e.params(&v.best, out.P[j])
		}
	}
	if only < 0 {
		r.first(out)
	}
}
