package bootstrap

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// Judge reads the verdict off a resample and returns an index below Input.States.
// y holds the new values of ln k, or of k where the error model is InK. counts is
// nil, except where entries themselves were resampled (Pairs without replicates):
// then entry i counts counts[i] times. r is the refit of every candidate.
type Judge func(y []float64, counts []int, r *fit.Refit) int

// Target is a linear functional of a curve's canonical parameters.
type Target struct {
	Curve int // index of the candidate, which must be a models.Basis
	Name  string
	Unit  string
	W     []float64 // the target is Σ W_j P_j
	Keep  bool      // return the resampled values
}

// Points are the single points behind temperature means, for Pairs.
type Points struct {
	Y      []float64 // ln k, or k where the error model is InK
	Weight []float64 // of each point in its mean; nil for equal weights
	Group  []int     // the entry of the sample that it belongs to
}

// Input is what is resampled. Nothing in it is modified.
type Input struct {
	Sample *fit.Sample
	// Fits holds every candidate, in the order in which Refitter knows them.
	Fits []*fit.Result
	// Refitter ranks the candidates by the penalties that it was made with. It
	// may be nil if NewJudge is nil and the error model is not InK.
	Refitter fit.Refitter
	// Weights are the plain-AIC weights of the candidates: the weight of the
	// family times the weight within it. Candidates that leave nothing to
	// resample from are passed over and the rest scaled up.
	Weights []float64
	// NewJudge makes one Judge for each worker. It must not allocate when called,
	// or the bootstrap is slow. nil: no repeat shares.
	NewJudge func() Judge
	States   int // number of states
	Targets  []Target
	Points   *Points // nil where the sample holds single points
}

// Options of a run. The zero value is ready to use.
type Options struct {
	Scheme     Scheme                // default DefaultScheme
	Resamples  int                   // default 9999
	Seed       uint64                // default 0
	Workers    int                   // default the number of CPUs
	Confidence float64               // default 0.95
	Methods    []Method              // default BootstrapT alone
	Progress   func(done, total int) // called from one goroutine at a time, done rising; nil: none
}

// Output is the result of a run.
type Output struct {
	Scheme    Scheme
	Resamples int
	// Failed counts the resamples in which some candidate could not be refitted,
	// or which lack the temperatures to fit them. They have no state and no first
	// place; shares are of the others.
	Failed int
	States []int // resamples that gave each state
	// FirstCurve counts the first places of each candidate; all are zero where no
	// penalty is finite. FirstFamily sums them over families.
	FirstCurve  []int
	FirstFamily map[string]int
	Targets     []TargetResult
}

// TargetResult is what resampling says of one target.
type TargetResult struct {
	Target
	Estimate float64 // NaN if the curve is not usable
	StdError float64 // of the fit, NaN where σ cannot be estimated
	// Failed counts the resamples that do not determine the curve, Flat those
	// without scatter about it, which bootstrap-t cannot use.
	Failed, Flat int
	Intervals    []Interval
	Values       []float64 // resampled values, sorted; nil unless Keep
	Note         string    // why there is no interval, or ""
}

// Interval is a bootstrap interval; NaN where it has no end.
type Interval struct {
	Method       Method
	Lower, Upper float64
	Note         string
}

// DefaultTargets are ln A and E of straight, and n and the change of E over the
// range of the sample of power-prefactor, whose values are kept. Curves that are
// not among the candidates or have no estimate are left out.
func DefaultTargets(s *fit.Sample, fits []*fit.Result) []Target {
	const kilo = 1000
	low, high := s.Range()
	var ts []Target
	for i, f := range fits {
		if f.Status != fit.Converged {
			continue
		}
		switch f.Curve.Info().Name {
		case models.Straight().Info().Name:
			ts = append(ts,
				Target{Curve: i, Name: "ln_A", Unit: "k", W: []float64{1, 1 / (models.GasConstant * s.TRef)}},
				Target{Curve: i, Name: "E", Unit: "kJ mol^-1", W: []float64{0, 1. / kilo}})
		case models.PowerPrefactor{}.Info().Name:
			ts = append(ts,
				Target{Curve: i, Name: "n", Unit: "1", W: []float64{0, 0, 1}},
				Target{Curve: i, Name: "change_of_E", Unit: "kJ mol^-1", Keep: true,
					W: []float64{0, 0, models.GasConstant * (high - low) / kilo}})
		}
	}
	return ts
}

// chunk is the number of resamples a worker takes at a time, and between two
// looks at the context.
const chunk = 128

// Run resamples. It returns a *Refusal where the data cannot bear the scheme, and
// ctx.Err() when it was cancelled. Inconsistent lengths in the input panic.
func Run(ctx context.Context, in Input, opt Options) (*Output, error) {
	p, err := newPlan(in, opt)
	if err != nil {
		return nil, err
	}
	var (
		next  atomic.Int64
		mu    sync.Mutex
		done  int
		wg    sync.WaitGroup
		total = p.opt.Resamples
	)
	work := func() {
		// Made here, what a refitter and a judge write to comes from the pool of the
		// worker's own processor.
		w := p.newWorker()
		for ctx.Err() == nil {
			hi := int(next.Add(chunk))
			lo := hi - chunk
			hi = min(hi, total)
			if lo >= hi {
				return
			}
			for b := lo; b < hi; b++ {
				w.resample(b)
			}
			mu.Lock()
			done += hi - lo
			if p.opt.Progress != nil {
				p.opt.Progress(done, total)
			}
			mu.Unlock()
		}
	}
	if n := min(p.opt.Workers, (total+chunk-1)/chunk); n == 1 {
		work() // here, so that a caller of many sets can catch what is wrong with one
	} else {
		for range n {
			wg.Go(work)
		}
	}
	wg.Wait()
	if done < total {
		return nil, ctx.Err()
	}
	return p.output(), nil
}

// plan is everything that the workers share: read-only but for the results, which
// are written by the number of the resample.
type plan struct {
	in      Input
	opt     Options
	all     *fit.Sample  // in.Sample with its limits as further entries
	y       []float64    // the data of all: ln k, or k
	gens    []*generator // generating curves
	cum     []float64    // their cumulative weights
	strata  [][]int      // Pairs: entries, or points, that are exchanged
	byPoint bool         // Pairs: strata hold points behind means
	kernels []*kernel
	refit   bool // the refitter is needed

	state []int16 // of each resample; -1 failed
	first []int16 // candidate; -1 none
	diff  [][]float64
	t     [][]float64
	notes []string // of each target: why it has no interval
}

func newPlan(in Input, opt Options) (*plan, error) {
	s := in.Sample
	all := s.All()
	n := all.Len()
	p := &plan{in: in, opt: opt, all: all, y: all.Y}
	if s.Model.InK() {
		p.y = all.K
	}
	if err := p.setOptions(); err != nil {
		return nil, err
	}
	share := in.NewJudge != nil
	p.refit = share || (s.Model.InK() || len(s.Limits) > 0) && len(in.Targets) > 0
	switch {
	case p.refit && in.Refitter == nil:
		panic("bootstrap: a refitter is needed")
	case share && len(in.Weights) != len(in.Fits):
		panic("bootstrap: weights must have the length of the fits")
	case share && (in.States < 1 || in.States > math.MaxInt16):
		panic("bootstrap: a judge needs states")
	}

	if err := p.checkLimits(); err != nil {
		return nil, err
	}
	if err := p.opt.Scheme.Check(n, p.stratify()); err != nil {
		return nil, err
	}
	if s.Spent() > 0 && p.opt.Scheme == Pairs && !p.byPoint {
		return nil, &Refusal{"pairs-across-sources",
			"resampling pairs would draw points across sources, whose offsets are estimated from them",
			"use the residual or the parametric scheme"}
	}
	for _, f := range in.Fits {
		if f.Usable() && f.Nu > 0 && !p.exactlyKnown() && !p.scatters(f) {
			return nil, &Refusal{"no-scatter",
				fmt.Sprintf("the residuals of %s are at the level of rounding: there is nothing to resample", f.Curve.Info().Name),
				"measured rate constants are needed, not calculated ones"}
		}
	}
	if share {
		if err := p.addGenerators(); err != nil {
			return nil, err
		}
	}
	if err := p.addTargets(); err != nil {
		return nil, err
	}
	return p, nil
}

func (p *plan) setOptions() error {
	o := &p.opt
	if o.Scheme == "" {
		o.Scheme = DefaultScheme(p.in.Sample.Model)
		if len(p.in.Sample.Limits) > 0 {
			o.Scheme = Parametric
		}
	}
	if o.Resamples == 0 {
		o.Resamples = 9999
	}
	if o.Workers <= 0 {
		o.Workers = runtime.NumCPU()
	}
	if o.Confidence == 0 {
		o.Confidence = 0.95
	}
	if len(o.Methods) == 0 {
		o.Methods = []Method{BootstrapT}
	}
	if o.Resamples < 0 {
		return fmt.Errorf("bootstrap: %d resamples; give a positive number", o.Resamples)
	}
	if !(o.Confidence > 0 && o.Confidence < 1) {
		return fmt.Errorf("bootstrap: confidence %g is not between 0 and 1", o.Confidence)
	}
	for _, m := range o.Methods {
		if !slices.Contains(Methods, m) {
			return fmt.Errorf("bootstrap: no interval method is named %q; use one of %v", string(m), Methods)
		}
	}
	return nil
}

// exactlyKnown: the errors are drawn from a known distribution, whatever the
// residuals.
func (p *plan) exactlyKnown() bool {
	return p.opt.Scheme == Parametric && p.in.Sample.Model.KnownSigma()
}

// scatters reports √(RSS/N) >= 10⁻¹² max |y|/√V, with |ln k| no less than 1.
func (p *plan) scatters(f *fit.Result) bool {
	least := 1.0 // ln k near 0 is rounded as k is, to parts of 1
	if p.in.Sample.Model.InK() {
		least = 0
	}
	var most float64
	for i, y := range p.y {
		most = math.Max(most, math.Max(math.Abs(y), least)/math.Sqrt(p.all.V[i]))
	}
	return math.Sqrt(f.RSS/float64(len(p.y))) >= 1e-12*most
}

// stratify groups what Pairs exchanges: the points of each mean, or the entries of
// each temperature, where every one has at least two; else all entries together.
func (p *plan) stratify() (replicated bool) {
	n := p.all.Len()
	groups, group := n, []int(nil)
	if pts := p.in.Points; pts != nil {
		group = pts.Group
		if len(pts.Y) != len(group) || pts.Weight != nil && len(pts.Weight) != len(group) {
			panic("bootstrap: points must have values, weights and groups of one length")
		}
		p.byPoint = true
	} else {
		groups, group = models.NumberTemperatures(p.all.T)
	}
	p.strata = make([][]int, groups)
	for i, g := range group {
		if g < 0 || g >= groups {
			panic("bootstrap: a point belongs to no entry of the sample")
		}
		p.strata[g] = append(p.strata[g], i)
	}
	for _, s := range p.strata {
		if len(s) < 2 {
			all := make([]int, n)
			for i := range all {
				all[i] = i
			}
			p.strata, p.byPoint = [][]int{all}, false
			return false
		}
	}
	return true
}

// newGenerator makes the errors around one fit; nil if it leaves none.
func (p *plan) newGenerator(f *fit.Result) *generator {
	n := p.in.Sample.Len()
	if len(p.in.Sample.Limits) > 0 && f.Usable() {
		return p.aboutLimits(f)
	}
	if !f.Usable() || len(f.Fitted) != n || len(f.Residuals) != n {
		return nil
	}
	lev := f.Leverage
	if len(lev) != n {
		lev = make([]float64, n)
		for i := range lev {
			lev[i] = math.NaN()
		}
	}
	return newGenerator(p.in.Sample, p.opt.Scheme, f.Fitted, f.Residuals, lev, f.Params()+f.Spent, f.Sigma)
}

func (p *plan) addGenerators() error {
	p.state = make([]int16, p.opt.Resamples)
	p.first = make([]int16, p.opt.Resamples)
	if p.opt.Scheme == Pairs {
		return nil // the data themselves are resampled
	}
	var sum float64
	for i, f := range p.in.Fits {
		w := p.in.Weights[i]
		if !(w > 0) {
			continue
		}
		if g := p.newGenerator(f); g != nil {
			sum += w
			p.gens = append(p.gens, g)
			p.cum = append(p.cum, sum)
		}
	}
	if !(sum > 0) || math.IsInf(sum, 0) {
		return &Refusal{"no-degrees-of-freedom",
			"no fitted curve leaves a degree of freedom to estimate the scatter from",
			"measure at more temperatures, or state the uncertainties"}
	}
	for i := range p.cum {
		p.cum[i] /= sum
	}
	return nil
}

func (p *plan) addTargets() error {
	ts := p.in.Targets
	p.diff, p.t = make([][]float64, len(ts)), make([][]float64, len(ts))
	p.notes = make([]string, len(ts))
	byCurve := map[int]*kernel{}
	for i, t := range ts {
		f := p.in.Fits[t.Curve]
		curve, ok := f.Curve.(models.Basis)
		if !ok {
			return fmt.Errorf("bootstrap: %s is not linear in its parameters: its intervals come from the profile likelihood", f.Curve.Info().Name)
		}
		if len(t.W) != f.Params() {
			panic("bootstrap: a target must have one weight for each parameter")
		}
		if f.Status != fit.Converged {
			p.notes[i] = fmt.Sprintf("%s has no estimate: %s", f.Curve.Info().Name, f.Status)
			continue
		}
		k := byCurve[t.Curve]
		if k == nil {
			k = newKernel(p.in.Sample, t.Curve, f, curve)
			if p.opt.Scheme != Pairs {
				k.gen = p.newGenerator(f)
			}
		}
		if f.Nu < 1 && !p.exactlyKnown() || p.opt.Scheme != Pairs && k.gen == nil || !k.addTarget(i, t.W) {
			p.notes[i] = fmt.Sprintf("%s leaves no degree of freedom to resample from", f.Curve.Info().Name)
			continue
		}
		if len(p.in.Sample.Limits) > 0 {
			k.errorWithLimits()
		}
		if byCurve[t.Curve] == nil {
			byCurve[t.Curve] = k
			p.kernels = append(p.kernels, k)
		}
		p.diff[i] = make([]float64, p.opt.Resamples)
		p.t[i] = make([]float64, p.opt.Resamples)
	}
	return nil
}

// worker is one goroutine's own memory. resample allocates nothing.
type worker struct {
	_       [64]byte // apart from the plan, which another worker reads
	p       *plan
	s       *stream
	refit   fit.Refitter
	one     fit.OneRefitter // refit, where it can fit one candidate alone
	out     fit.Refit
	fresh   bool // out belongs to y
	judge   Judge
	y, e    []float64
	ix      []int32
	counts  []int // Pairs of entries: how often each was drawn; else nil
	scratch []*scratch
	diff, t []float64
	_       [64]byte
}

// apart makes a slice that shares no cache line with another: what one worker writes
// beside what another reads, the plan included, slows both down. Lines are 64 bytes.
func apart[T int | int32 | float64](n int) []T {
	const slack = 16
	return make([]T, n+2*slack)[slack : slack+n : slack+n]
}

func (p *plan) newWorker() *worker {
	n := p.all.Len()
	w := &worker{
		p: p, s: newStream(),
		y: apart[float64](n), e: apart[float64](n),
		diff: apart[float64](len(p.in.Targets)), t: apart[float64](len(p.in.Targets)),
	}
	most := n
	for _, s := range p.strata {
		most = max(most, len(s))
	}
	w.ix = apart[int32](most)
	if p.opt.Scheme == Pairs && !p.byPoint {
		w.counts = apart[int](n)
	}
	if p.refit {
		w.refit = p.in.Refitter.Clone()
		w.one, _ = w.refit.(fit.OneRefitter)
		w.out.RSS = apart[float64](len(p.in.Fits))
		w.out.P = make([][]float64, len(p.in.Fits))
		for i, f := range p.in.Fits {
			w.out.P[i] = apart[float64](f.Params())
		}
	}
	if p.in.NewJudge != nil {
		w.judge = p.in.NewJudge()
	}
	for _, k := range p.kernels {
		w.scratch = append(w.scratch, k.newScratch())
	}
	return w
}

// resample makes resample b and stores what it gives. The repeat share draws
// before the intervals, so that asking for intervals does not change it.
func (w *worker) resample(b int) {
	p := w.p
	w.s.reset(p.opt.Seed, uint64(b))
	w.fresh = false
	if p.opt.Scheme == Pairs {
		w.drawPairs()
	}
	if w.judge != nil {
		if p.opt.Scheme != Pairs {
			g := p.gens[pick(p.cum, w.s.rng.Float64())]
			g.draw(w.s, p.opt.Scheme, w.e, w.ix)
			for i, m := range g.mean {
				w.y[i] = m + w.e[i]
			}
		}
		p.state[b], p.first[b] = -1, -1
		if w.refitAll() {
			p.first[b] = int16(w.out.First)
			p.state[b] = w.state()
		}
	}
	for i, k := range p.kernels {
		ok := w.evaluate(k, w.scratch[i])
		for j, which := range k.targets {
			p.diff[which][b], p.t[which][b] = w.diff[j], w.t[j]
			if !ok {
				p.diff[which][b], p.t[which][b] = math.NaN(), math.NaN()
			}
		}
	}
}

// pick returns the first entry whose cumulative weight exceeds u in [0, 1).
func pick(cum []float64, u float64) int {
	for i, c := range cum {
		if u < c {
			return i
		}
	}
	return len(cum) - 1
}

// drawPairs fills y and counts.
func (w *worker) drawPairs() {
	p := w.p
	copy(w.y, p.y)
	if p.byPoint {
		pts := p.in.Points
		for g, members := range p.strata {
			ix := w.ix[:len(members)]
			w.s.indices(ix, len(members))
			var sum, weight float64
			for _, k := range ix {
				i := members[k]
				u := 1.0
				if pts.Weight != nil {
					u = pts.Weight[i]
				}
				sum += u * pts.Y[i]
				weight += u
			}
			w.y[g] = sum / weight
		}
		return
	}
	clear(w.counts)
	for _, members := range p.strata {
		ix := w.ix[:len(members)]
		w.s.indices(ix, len(members))
		for _, k := range ix {
			w.counts[members[k]]++
		}
	}
}

// refitAll refits every candidate to y and reports whether all could be fitted.
func (w *worker) refitAll() bool {
	w.refitOnce()
	if w.out.How == fit.HowFailed {
		return false
	}
	for _, r := range w.out.RSS {
		if math.IsNaN(r) {
			return false
		}
	}
	return true
}

func (w *worker) refitOnce() {
	if w.fresh {
		return
	}
	w.fresh = true
	if w.counts != nil {
		w.refit.RefitCounts(w.y, w.counts, &w.out)
	} else {
		w.refit.Refit(w.y, &w.out)
	}
}

func (w *worker) state() int16 {
	s := w.judge(w.y, w.counts, &w.out)
	if s < 0 || s >= w.p.in.States {
		panic(fmt.Sprintf("bootstrap: the judge returned state %d of %d", s, w.p.in.States))
	}
	return int16(s)
}

// evaluate fills diff and t for the targets of one curve, resampled around that
// curve's own fit.
func (w *worker) evaluate(k *kernel, sc *scratch) bool {
	p := w.p
	inK := p.in.Sample.Model.InK() || len(p.in.Sample.Limits) > 0 // every resample is refitted
	if k.gen != nil {
		k.gen.draw(w.s, p.opt.Scheme, w.e, w.ix)
		if inK {
			for i, m := range k.gen.mean {
				w.y[i] = m + w.e[i]
			}
			w.fresh = false
		}
	}
	if inK {
		if w.one != nil && !w.fresh {
			w.one.RefitOne(k.index, w.y, w.counts, &w.out)
		} else {
			w.refitOnce()
		}
		if r, ok := w.refit.(fit.StdErrorRefitter); ok {
			return k.limits(r, w.out.P[k.index], w.out.RSS[k.index], w.diff, w.t)
		}
		return k.inK(sc, w.counts, w.out.P[k.index], w.out.RSS[k.index], w.diff, w.t)
	}
	if k.gen == nil {
		for i, f := range k.fit.Fitted {
			w.e[i] = w.y[i] - f
		}
	}
	if w.counts != nil {
		return k.pairs(sc, w.e, w.counts, w.diff, w.t)
	}
	k.fixed(w.e, w.diff, w.t)
	return true
}

func (p *plan) output() *Output {
	o := &Output{Scheme: p.opt.Scheme, Resamples: p.opt.Resamples}
	if p.state != nil {
		o.States = make([]int, p.in.States)
		o.FirstCurve = make([]int, len(p.in.Fits))
		o.FirstFamily = map[string]int{}
		for b, s := range p.state {
			if s < 0 {
				o.Failed++
				continue
			}
			o.States[s]++
			if c := p.first[b]; c >= 0 {
				o.FirstCurve[c]++
			}
		}
		for c, n := range o.FirstCurve {
			if n > 0 {
				o.FirstFamily[p.in.Fits[c].Curve.Info().Family] += n
			}
		}
	}
	for i, t := range p.in.Targets {
		o.Targets = append(o.Targets, TargetResult{Target: t, Estimate: math.NaN(), StdError: math.NaN(), Note: p.notes[i]})
	}
	// Each target has values of its own, so that they can be ordered side by side.
	work := make(chan func())
	var wg sync.WaitGroup
	for range p.opt.Workers {
		wg.Go(func() {
			for f := range work {
				f()
			}
		})
	}
	for _, k := range p.kernels {
		for j, which := range k.targets {
			work <- func() { p.summarise(k, j, &o.Targets[which], p.diff[which], p.t[which]) }
		}
	}
	close(work)
	wg.Wait()
	// Sorting takes as long as all other summaries together, so that each sort is
	// shared out in its turn.
	for i := range o.Targets {
		sortShared(o.Targets[i].Values, p.opt.Workers)
	}
	return o
}

// summarise turns the resampled values of one target into intervals. It reorders
// diff and t.
func (p *plan) summarise(k *kernel, j int, r *TargetResult, diff, t []float64) {
	r.Estimate = dot(k.fit.P, k.w[j])
	r.StdError = k.sd[j]
	if !p.in.Sample.Model.KnownSigma() {
		r.StdError *= k.fit.Sigma
	}
	all := len(diff)
	x := values{x: valid(diff)}
	r.Failed = all - len(x.x)
	ts := values{x: valid(t)}
	r.Flat = len(x.x) - len(ts.x)
	for i := range x.x {
		x.x[i] += r.Estimate
	}
	if r.Keep {
		r.Values = x.x // still to be sorted
	}
	lo, hi := (1-p.opt.Confidence)/2, (1+p.opt.Confidence)/2
	for _, m := range p.opt.Methods {
		iv := Interval{Method: m}
		switch m {
		case BootstrapT:
			iv.Lower = r.Estimate - r.StdError*ts.quantile(hi)
			iv.Upper = r.Estimate - r.StdError*ts.quantile(lo)
		case Percentile:
			iv.Lower, iv.Upper = x.quantile(lo), x.quantile(hi)
		case BCa:
			influence := make([]float64, k.n)
			for i, c := range k.c[j] {
				influence[i] = c * k.fit.Residuals[i]
			}
			a, b := bcaLevels(biasCorrection(x.x, r.Estimate, 1e-9*r.StdError), acceleration(influence), p.opt.Confidence)
			iv.Lower, iv.Upper = x.quantile(a), x.quantile(b)
		}
		switch {
		case math.IsNaN(iv.Lower) || math.IsNaN(iv.Upper):
			iv.Note = "the resampled values do not determine it"
		case m != BootstrapT && k.n < smallSample:
			iv.Note = fmt.Sprintf("too short below N = %d", smallSample)
		}
		r.Intervals = append(r.Intervals, iv)
	}
}
