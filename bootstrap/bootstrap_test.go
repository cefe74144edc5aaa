package bootstrap

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"
	"time"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// testSample makes a straight set with E = 60 kJ/mol at n temperatures, 280-340 K.
// sd is the relative scatter.
func testSample(t testing.TB, model fit.ErrorModel, n int, sd float64, seed uint64) *fit.Sample {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 1))
	temps, k, v := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range n {
		temps[i] = 280 + 60*float64(i)/float64(n-1)
		k[i] = math.Exp(20-60000/(models.GasConstant*temps[i])) * math.Exp(sd*rng.NormFloat64())
		v[i] = 1
		switch {
		case model == fit.StatedAbsolute:
			v[i] = sd * sd * k[i] * k[i]
		case model.KnownSigma():
			v[i] = sd * sd
		}
	}
	s, err := fit.NewSample(model, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func TestSameBytesForAnyNumberOfWorkers(t *testing.T) {
	s := testSample(t, fit.Relative, 9, 0.03, 1)
	for _, scheme := range Schemes {
		var first *Output
		for _, workers := range []int{1, 2, 7} {
			o, err := Run(context.Background(), linearInput(s),
				Options{Scheme: scheme, Resamples: 2999, Seed: 42, Workers: workers, Methods: Methods})
			if err != nil {
				t.Fatal(err)
			}
			if first == nil {
				first = o
			} else if !reflect.DeepEqual(o, first) {
				t.Errorf("%s: %d workers give another result than 1", scheme, workers)
			}
		}
		o := mustRun(t, linearInput(s), Options{Scheme: scheme, Resamples: 2999, Seed: 43, Methods: Methods})
		if reflect.DeepEqual(o, first) {
			t.Errorf("%s: another seed gives the same result", scheme)
		}
	}
}

// Asking for intervals does not change the repeat share.
func TestSharesDoNotDependOnTargets(t *testing.T) {
	s := testSample(t, fit.Relative, 9, 0.03, 1)
	in := linearInput(s)
	with := mustRun(t, in, Options{Resamples: 999})
	in.Targets = nil
	without := mustRun(t, in, Options{Resamples: 999})
	if !reflect.DeepEqual(with.States, without.States) || !reflect.DeepEqual(with.FirstCurve, without.FirstCurve) {
		t.Errorf("states %v and %v, first places %v and %v", with.States, without.States, with.FirstCurve, without.FirstCurve)
	}
}

func TestCancel(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	in := linearInput(testSample(t, fit.Relative, 9, 0.03, 1))
	last := 0
	opt := Options{Workers: 2, Progress: func(done, total int) {
		if done <= last || total != 9999 {
			t.Errorf("progress %d of %d after %d", done, total, last)
		}
		last = done
		if done >= 100 {
			cancel()
		}
	}}
	o, err := Run(ctx, in, opt)
	if !errors.Is(err, context.Canceled) || o != nil {
		t.Fatalf("got %v, %v", o, err)
	}
	if last > 300 {
		t.Errorf("went on to %d resamples after being cancelled at 100", last)
	}
}

func TestProgressReachesTotal(t *testing.T) {
	last := 0
	in := intervalsOnly(linearInput(testSample(t, fit.Relative, 9, 0.03, 1)))
	_, err := Run(context.Background(), in, Options{Progress: func(done, _ int) { last = done }})
	if err != nil || last != 9999 {
		t.Errorf("%d, %v", last, err)
	}
}

func TestRefusals(t *testing.T) {
	perfect := testSample(t, fit.Relative, 9, 0, 1)
	seven := testSample(t, fit.Relative, 7, 0.03, 1)
	two := testSample(t, fit.Relative, 2, 0.03, 1)
	for _, c := range []struct {
		s      *fit.Sample
		scheme Scheme
		code   string
	}{
		{seven, Pairs, "pairs-too-few"},
		{seven, Wild, "wild-too-few"},
		{seven, "jackknife", "scheme-unknown"},
		{perfect, Residual, "no-scatter"},
		{perfect, Parametric, "no-scatter"},
		{two, Residual, "no-degrees-of-freedom"},
		{seven, Residual, ""},
		{seven, Parametric, ""},
	} {
		in := Input{Sample: c.s, NewJudge: func() Judge { return func([]float64, []int, *fit.Refit) int { return 0 } }, States: 1,
			Fits: []*fit.Result{fit.Fit(c.s, models.Straight())}, Weights: []float64{1}, Refitter: constantRefitter{}}
		_, err := Run(context.Background(), in, Options{Scheme: c.scheme, Resamples: 9})
		var r *Refusal
		switch {
		case c.code == "" && err != nil:
			t.Errorf("%s: %v", c.scheme, err)
		case c.code != "" && (!errors.As(err, &r) || r.Code != c.code || r.Cure == ""):
			t.Errorf("%s: got %v, want %s with a cure", c.scheme, err, c.code)
		}
	}
	if DefaultScheme(fit.Stated) != Parametric || DefaultScheme(fit.StatedAbsolute) != Parametric || DefaultScheme(fit.Scaled) != Residual {
		t.Error("default scheme")
	}
}

// Perfect data with stated uncertainties can be resampled: the errors are known.
func TestPerfectDataStated(t *testing.T) {
	s := testSample(t, fit.Relative, 9, 0, 1)
	v := slices.Repeat([]float64{0.03 * 0.03}, 9)
	stated, err := fit.NewSample(fit.Stated, s.T, s.K, v)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Run(context.Background(), linearInput(stated), Options{Resamples: 99}); err != nil {
		t.Error(err)
	}
}

// constantRefitter always gives the same residual sums of squares: for counting
// and for timing the bootstrap alone.
type constantRefitter struct{ fail func(y []float64) bool }

func (c constantRefitter) Clone() fit.Refitter { return c }
func (c constantRefitter) Refit(y []float64, out *fit.Refit) {
	out.How, out.First = fit.HowWarm, 0
	for i := range out.RSS {
		out.RSS[i] = float64(i + 1)
	}
	if c.fail != nil && c.fail(y) {
		out.RSS[0] = math.NaN()
	}
}
func (c constantRefitter) RefitCounts(y []float64, _ []int, out *fit.Refit) { c.Refit(y, out) }

func TestFailedRefitsAreCounted(t *testing.T) {
	s := testSample(t, fit.Relative, 9, 0.03, 1)
	in := linearInput(s)
	// Under one generator, half of the resamples lie above the curve at one end.
	in.Weights = []float64{1, 0}
	in.Refitter = constantRefitter{func(y []float64) bool { return y[0] > in.Fits[0].Fitted[0] }}
	in.NewJudge = func() Judge { return func([]float64, []int, *fit.Refit) int { return 1 } }
	o := mustRun(t, in, Options{Scheme: Parametric})
	reference.Within(t, "failed", float64(o.Failed), 9999./2, 4*math.Sqrt(9999./4))
	if o.Failed+o.States[1] != 9999 || sum(o.FirstCurve)+o.Failed != 9999 {
		t.Errorf("failed %d, states %v, first %v of 9999", o.Failed, o.States, o.FirstCurve)
	}
}

// The generating curve follows the weights. The first point tells which one made
// a resample: there the two fits differ by more than power-prefactor's scatter.
func TestGeneratingWeights(t *testing.T) {
	s := synthetic(t, "s2_tn_curved")
	in := linearInput(s)
	in.Weights = []float64{0.3, 0.7}
	in.Targets = nil
	gap := in.Fits[0].Fitted[0] - in.Fits[1].Fitted[0]
	in.NewJudge = func() Judge {
		return func(y []float64, _ []int, _ *fit.Refit) int {
			if math.Abs(y[0]-in.Fits[1].Fitted[0]) > math.Abs(gap)/2 {
				return 0
			}
			return 1
		}
	}
	in.Refitter = constantRefitter{}
	o := mustRun(t, in, Options{Scheme: Wild})
	// Wild moves the straight fit's value by ± its residual, which may bring it
	// onto the other curve: so count those that cannot be straight by how often
	// straight alone gives state 1.
	in.Weights = []float64{1, 0}
	alone := mustRun(t, in, Options{Scheme: Wild})
	want := 0.7 + 0.3*float64(alone.States[1])/9999
	reference.Within(t, "share of power-prefactor", float64(o.States[1])/9999, want, 4*math.Sqrt(0.25/9999))
}

// The residual pool, point by point, where variances are unequal and one point
// determines its own fit: leverages of (1, x) with weights 1/V in closed form,
// h_i = w_i/Σw + w_i(x_i - x̄)²/Σw(x - x̄)².
func TestResidualPool(t *testing.T) {
	temps := []float64{300, 301, 302, 303, 304, 900}
	v := []float64{1, 4, 1, 9, 1, 1e-4}
	e := []float64{0.03, -0.05, 0.01, 0.08, -0.02, 0.01}
	k := make([]float64, len(temps))
	for i := range k {
		k[i] = math.Exp(20 - 60000/(models.GasConstant*temps[i]) + e[i])
	}
	s, err := fit.NewSample(fit.Scaled, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	var sw, sx, sxx float64
	for i := range temps {
		sw += 1 / v[i]
		sx += 1 / (v[i] * temps[i])
	}
	for i := range temps {
		d := 1/temps[i] - sx/sw
		sxx += d * d / v[i]
	}
	f := fit.Fit(s, models.Straight())
	var want []float64
	for i := range temps {
		d := 1/temps[i] - sx/sw
		h := (1/sw + d*d/sxx) / v[i]
		if h > 0.99 {
			continue
		}
		want = append(want, f.Residuals[i]/math.Sqrt(v[i]*(1-h)))
	}
	if len(want) != 5 {
		t.Fatalf("%d points below leverage 0.99, want all but the last", len(want))
	}
	mean := stat.Mean(want, nil)
	g := newGenerator(s, Residual, f.Fitted, f.Residuals, f.Leverage, 2, f.Sigma)
	if len(g.pool) != len(want) {
		t.Fatalf("pool of %d", len(g.pool))
	}
	for i := range want {
		reference.Within(t, "pool", g.pool[i], want[i]-mean, 1e-9)
	}
	st, draw, ix := newStream(), make([]float64, 6), make([]int32, 6)
	st.reset(1, 1)
	g.draw(st, Residual, draw, ix)
	for i := range draw {
		reference.Within(t, "drawn", draw[i], math.Sqrt(v[i])*(want[ix[i]]-mean), 1e-9)
	}

	// Wild: the same size at its own point, both signs equally often.
	g = newGenerator(s, Wild, f.Fitted, f.Residuals, f.Leverage, 2, f.Sigma)
	plus := make([]float64, 6)
	var changes float64
	for b := range 4000 {
		st.reset(2, uint64(b))
		g.draw(st, Wild, draw, ix)
		for i := range draw[:5] {
			reference.Within(t, "wild", math.Abs(draw[i]), math.Sqrt(v[i])*math.Abs(want[i]), 1e-9)
			if draw[i] > 0 {
				plus[i]++
			}
			if i > 0 && want[i]*want[i-1]*draw[i]*draw[i-1] < 0 {
				changes++
			}
		}
	}
	reference.Within(t, "changes of sign", changes, 8000, 4*math.Sqrt(4000))
	for _, c := range plus[:5] {
		reference.Within(t, "plus signs", c, 2000, 4*math.Sqrt(1000))
	}
}

// The ends of the intervals from known values. Bootstrap-t: the upper quantile of
// t makes the lower end (B. Efron and R. J. Tibshirani, An Introduction to the
// Bootstrap (1993), eq. 12.22).
func TestEnds(t *testing.T) {
	in := intervalsOnly(linearInput(testSample(t, fit.Relative, 9, 0.03, 1)))
	p, err := newPlan(in, Options{Methods: Methods, Resamples: 39})
	if err != nil {
		t.Fatal(err)
	}
	k := p.kernels[0]
	const j = 1 // E
	diff, tt := make([]float64, 41), make([]float64, 41)
	for i := range diff {
		diff[i], tt[i] = float64((i*7)%41), float64((i*11)%41) // 0..40, shuffled
	}
	// 39 values 1..39 are left of each: a failed resample and one without scatter.
	for i := range diff {
		if diff[i] == 0 || diff[i] == 40 {
			diff[i] = math.NaN()
		}
		if tt[i] == 0 || tt[i] == 40 {
			tt[i] = math.NaN()
		}
	}
	var r TargetResult
	p.summarise(k, j, &r, diff, tt)
	if r.Failed != 2 {
		t.Errorf("%d failed, want 2", r.Failed)
	}
	e, se := k.fit.P[1]/1000, math.Sqrt(k.fit.Cov[3])/1000
	reference.Within(t, "estimate", r.Estimate, e, 1e-9*e)
	// (39+1) 0.025 = 1 and (39+1) 0.975 = 39.
	reference.Within(t, "bootstrap-t lower", r.Intervals[0].Lower, e-39*se, 1e-8*e)
	reference.Within(t, "bootstrap-t upper", r.Intervals[0].Upper, e-1*se, 1e-8*e)
	reference.Within(t, "percentile lower", r.Intervals[1].Lower, e+1, 1e-9*e)
	reference.Within(t, "percentile upper", r.Intervals[1].Upper, e+39, 1e-9*e)
	// All values lie above the estimate: z0 is infinite, and BCa has no answer.
	if !math.IsNaN(r.Intervals[2].Lower) || r.Intervals[2].Note == "" {
		t.Errorf("BCa %+v", r.Intervals[2])
	}

	// BCa with an acceleration: levels worked out in full from c_i r_i.
	x := make([]float64, 9999)
	for i := range x {
		x[i] = (float64(i+1) - 4500) * se / 3000
	}
	var s2, s3 float64
	for i, temp := range in.Sample.T {
		// ∂E/∂y_i of a straight line, kJ/mol.
		var mean, sxx float64
		for _, u := range in.Sample.T {
			mean += 1 / u / 9
		}
		for _, u := range in.Sample.T {
			sxx += (1/u - mean) * (1/u - mean)
		}
		l := -models.GasConstant / 1000 * (1/temp - mean) / sxx * k.fit.Residuals[i]
		s2 += l * l
		s3 += l * l * l
	}
	a := s3 / 6 / math.Pow(s2, 1.5)
	z0 := distuv.UnitNormal.Quantile(4499.5 / 9999)
	end := func(z float64) float64 {
		level := distuv.UnitNormal.CDF(z0 + (z0+z)/(1-a*(z0+z)))
		return e + (level*10000-4500)*se/3000
	}
	if math.Abs(a) < 0.01 {
		t.Fatal("choose data with more acceleration")
	}
	want := [2]float64{end(distuv.UnitNormal.Quantile(0.025)), end(distuv.UnitNormal.Quantile(0.975))}
	r = TargetResult{}
	p.summarise(k, j, &r, x, slices.Clone(x))
	reference.Within(t, "BCa lower", r.Intervals[2].Lower, want[0], 1e-8*e)
	reference.Within(t, "BCa upper", r.Intervals[2].Upper, want[1], 1e-8*e)
}

// Influence values are the derivative of the estimate by each y, checked against
// refitting with y_i moved (exact, the estimate being linear in y).
func TestInfluence(t *testing.T) {
	s := synthetic(t, "s5_hetero")
	in := linearInput(s)
	p, err := newPlan(intervalsOnly(in), Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, k := range p.kernels {
		for j := range k.w {
			for i := range s.T {
				kk := slices.Clone(s.K)
				kk[i] *= math.E
				moved, err := fit.NewSample(s.Model, s.T, kk, s.V)
				if err != nil {
					t.Fatal(err)
				}
				want := dot(k.w[j], fit.Fit(moved, k.curve).P) - dot(k.w[j], k.fit.P)
				reference.Within(t, k.curve.Info().Name, k.c[j][i], want, 1e-8*k.sd[j])
			}
		}
	}
}

// Pairs against a fit of the drawn rows written out, by gonum's QR.
func TestPairsKernel(t *testing.T) {
	s := synthetic(t, "s5_hetero")
	in := linearInput(s)
	p, err := newPlan(in, Options{Scheme: Pairs, Resamples: 1})
	if err != nil {
		t.Fatal(err)
	}
	w := p.newWorker()
	for b := range 200 {
		w.s.reset(1, uint64(b))
		w.drawPairs()
		w.fresh = false
		w.refitOnce()
		for i, k := range p.kernels {
			e := make([]float64, k.n)
			for i := range e {
				e[i] = s.Y[i] - k.fit.Fitted[i]
			}
			if !k.pairs(w.scratch[i], e, w.counts, w.diff, w.t) {
				t.Fatal("rank")
			}
			for j := range k.w {
				want := dot(k.w[j], w.out.P[k.index]) - dot(k.w[j], k.fit.P)
				reference.Within(t, k.curve.Info().Name, w.diff[j], want, 1e-8*k.sd[j])
			}
		}
	}
}

// Two entries fix a straight line: it has an estimate and no scatter.
func TestPairsWithoutScatter(t *testing.T) {
	s := synthetic(t, "s1_straight")
	p, err := newPlan(intervalsOnly(linearInput(s)), Options{Scheme: Pairs, Resamples: 1})
	if err != nil {
		t.Fatal(err)
	}
	k := p.kernels[0]
	diff, tt := make([]float64, 2), make([]float64, 2)
	n := s.Len()
	for i := range n {
		for j := range i {
			counts := make([]int, n)
			counts[i], counts[j] = 5, n-5
			if !k.pairs(k.newScratch(), k.fit.Residuals, counts, diff, tt) {
				t.Fatal("two temperatures determine a line")
			}
			// The slope through both points, kJ/mol.
			e := -models.GasConstant / 1000 * (s.Y[i] - s.Y[j]) / (1/s.T[i] - 1/s.T[j])
			reference.Within(t, "E", diff[1], e-k.fit.P[1]/1000, 1e-9*e)
			if !math.IsNaN(tt[1]) {
				t.Errorf("t = %g", tt[1])
			}
		}
	}
}

// Points behind means: a resampled mean is one of the possible ones, its variance
// over resamples is that of m draws with replacement, s²(m-1)/m /m for equal weights,
// and the resampled points never leave their temperature.
func TestPairsWithinTemperatures(t *testing.T) {
	full := synthetic(t, "s6_replicates")
	var temps, k, v []float64
	pts := &Points{Y: full.Y}
	var groups [][]float64
	for i, temp := range full.T {
		if len(temps) == 0 || temps[len(temps)-1] != temp {
			temps = append(temps, temp)
			groups = append(groups, nil)
		}
		g := len(temps) - 1
		groups[g] = append(groups[g], full.Y[i])
		pts.Group = append(pts.Group, g)
	}
	for _, g := range groups {
		k = append(k, math.Exp(stat.Mean(g, nil)))
		v = append(v, 1/float64(len(g)))
	}
	s, err := fit.NewSample(fit.Relative, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	in := linearInput(s)
	in.Points = pts
	p, err := newPlan(in, Options{Scheme: Pairs, Resamples: 1}) // 7 temperatures: only allowed because replicated
	if err != nil {
		t.Fatal(err)
	}
	w := p.newWorker()
	const b = 20000
	draws := make([][]float64, len(groups))
	for i := range b {
		w.s.reset(9, uint64(i))
		w.drawPairs()
		if w.counts != nil {
			t.Fatal("the design must stay")
		}
		for g := range groups {
			draws[g] = append(draws[g], w.y[g])
		}
	}
	for g, x := range groups {
		sd := stat.PopStdDev(x, nil) / math.Sqrt(float64(len(x)))
		reference.Within(t, "mean", stat.Mean(draws[g], nil), stat.Mean(x, nil), 4*sd/math.Sqrt(b))
		reference.Within(t, "sd", stat.StdDev(draws[g], nil), sd, 4*sd*math.Sqrt(1./b))
	}
	o := mustRun(t, in, Options{Scheme: Pairs, Methods: Methods})
	if o.Failed != 0 || sum(o.States) != 9999 {
		t.Errorf("failed %d, states %v", o.Failed, o.States)
	}

	// Weights: of two points with weights 1 and 3 there are three possible means.
	two := testSample(t, fit.Relative, 4, 0.03, 1)
	in = linearInput(two)
	in.Points = &Points{}
	for g, y := range two.Y {
		in.Points.Y = append(in.Points.Y, y+0.3, y-0.1)
		in.Points.Weight = append(in.Points.Weight, 1, 3)
		in.Points.Group = append(in.Points.Group, g, g)
	}
	if p, err = newPlan(in, Options{Scheme: Pairs, Resamples: 1}); err != nil {
		t.Fatal(err)
	}
	w = p.newWorker()
	seen := [3]int{}
	for i := range 400 {
		w.s.reset(2, uint64(i))
		w.drawPairs()
		for g, y := range two.Y {
			for j, d := range []float64{0.3, 0, -0.1} {
				if math.Abs(w.y[g]-y-d) < 1e-12 {
					seen[j]++
				}
			}
		}
	}
	reference.Within(t, "first twice", float64(seen[0]), 400, 4*math.Sqrt(300))
	reference.Within(t, "one of each", float64(seen[1]), 800, 4*math.Sqrt(400))
	reference.Within(t, "second twice", float64(seen[2]), 400, 4*math.Sqrt(300))

	// The same points as independent entries: strata by temperature, at any N.
	ind := linearInput(full)
	q, err := newPlan(ind, Options{Scheme: Pairs, Resamples: 1})
	if err != nil {
		t.Fatal(err)
	}
	u := q.newWorker()
	for i := range 100 {
		u.s.reset(9, uint64(i))
		u.drawPairs()
		drawn := make([]int, len(temps))
		for j, c := range u.counts {
			drawn[pts.Group[j]] += c
		}
		for g, n := range drawn {
			if n != len(groups[g]) {
				t.Fatalf("%d points drawn at a temperature that has %d", n, len(groups[g]))
			}
		}
	}
}

// Few distinct temperatures: resamples without enough of them are counted.
func TestDegeneratePairs(t *testing.T) {
	// Eight entries on three temperatures, one of them single, so that all are
	// exchanged; the single one is missing from (7/8)⁸ of the resamples.
	temps := []float64{280, 280, 280, 280, 310, 340, 340, 340}
	rng := rand.New(rand.NewPCG(1, 1))
	k, v := make([]float64, 8), make([]float64, 8)
	for i := range k {
		k[i] = math.Exp(20 - 60000/(models.GasConstant*temps[i]) + 0.03*rng.NormFloat64())
		v[i] = 1
	}
	s, err := fit.NewSample(fit.Relative, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	o := mustRun(t, linearInput(s), Options{Scheme: Pairs})
	// Inclusion and exclusion over missing groups of 4, 1 and 3 of 8 entries.
	pow := func(m int) float64 { return math.Pow(float64(m)/8, 8) }
	three := 1 - pow(4) - pow(7) - pow(5) + pow(3) + pow(1) + pow(4)
	one := pow(4) + pow(1) + pow(3)
	mc := func(p float64) float64 { return 4*math.Sqrt(p*(1-p)*9999) + 1 }
	reference.Within(t, "failed", float64(o.Failed), (1-three)*9999, mc(three))
	reference.Within(t, "n failed", float64(o.target(t, "n").Failed), (1-three)*9999, mc(three))
	reference.Within(t, "E failed", float64(o.target(t, "E").Failed), one*9999, mc(one))
	if r := o.target(t, "E"); math.IsNaN(r.Intervals[0].Lower) {
		t.Error("the interval must come from the others")
	}
}

// Coverage over simulated sets of six temperatures: 95 % for bootstrap-t, and far
// less for percentiles. Bounds: the claimed 0.94..0.96 and 0.91, and four binomial
// standard errors.
func TestCoverage(t *testing.T) {
	const sets = 3000
	var tHits, pHits, bHits int
	trueE := 60.0
	for set := range sets {
		s := testSample(t, fit.Relative, 6, 0.03, uint64(set)+100)
		in := Input{Sample: s, Fits: []*fit.Result{fit.Fit(s, models.Straight())}}
		in.Targets = DefaultTargets(s, in.Fits)[1:]
		o := mustRun(t, in, Options{Resamples: 999, Seed: uint64(set), Methods: Methods})
		for _, iv := range o.target(t, "E").Intervals {
			hit := 0
			if iv.Lower <= trueE && trueE <= iv.Upper {
				hit = 1
			}
			switch iv.Method {
			case BootstrapT:
				tHits += hit
			case Percentile:
				pHits += hit
				if iv.Note != "too short below N = 20" {
					t.Fatal("note")
				}
			case BCa:
				bHits += hit
			}
		}
	}
	c, p, b := float64(tHits)/sets, float64(pHits)/sets, float64(bHits)/sets
	t.Logf("bootstrap-t %.4f, percentile %.4f, BCa %.4f", c, p, b)
	mc := 4 * math.Sqrt(0.05*0.95/sets)
	if !(c >= 0.94-mc && c <= 0.96+mc) {
		t.Errorf("bootstrap-t covers %.3f", c)
	}
	if !(p <= 0.91+mc && p > 0.7) || !(b <= 0.91+mc && b > 0.7) {
		t.Errorf("percentile covers %.3f, BCa %.3f: expected to be short", p, b)
	}
}

// In k, with small errors, the intervals are those in ln k with weights k², to
// first order in the errors.
func TestInK(t *testing.T) {
	inK := testSample(t, fit.StatedAbsolute, 9, 0.003, 5)
	inLn := testSample(t, fit.Stated, 9, 0.003, 5)
	opt := Options{Resamples: 499, Methods: Methods}
	a := linearInput(inLn)
	b := linearInput(inK)
	// The contract is what a fit in k would give: to first order the fit in ln k.
	for i, f := range b.Fits {
		*f = *a.Fits[i]
		f.Residuals = slices.Clone(f.Residuals)
		for j := range f.Residuals {
			f.Residuals[j] = inK.K[j] - math.Exp(f.Fitted[j])
		}
		b.Refitter.(*referenceRefitter).start[i] = f.P
	}
	b.Targets = DefaultTargets(inK, b.Fits)
	for i := range b.Targets { // reference temperatures differ with the weights
		b.Targets[i].W = a.Targets[i].W
	}
	inK.TRef = inLn.TRef
	for _, judged := range []bool{false, true} {
		if !judged {
			a.NewJudge, b.NewJudge = nil, nil
		} else {
			a.NewJudge, b.NewJudge = linearInput(inLn).NewJudge, linearInput(inLn).NewJudge
		}
		for _, scheme := range Schemes {
			opt.Scheme = scheme
			oa := mustRun(t, a, opt)
			ob := mustRun(t, b, opt)
			for i, ra := range oa.Targets {
				rb := ob.Targets[i]
				if rb.Failed != ra.Failed || rb.Flat != ra.Flat {
					t.Errorf("%s %s: failed %d and %d", scheme, ra.Name, ra.Failed, rb.Failed)
				}
				reference.Within(t, ra.Name+" se", rb.StdError, ra.StdError, 0.02*ra.StdError)
				for m, ia := range ra.Intervals {
					ib := rb.Intervals[m]
					tol := 0.1 * ra.StdError
					reference.Within(t, string(scheme)+" "+ra.Name+" "+string(ia.Method)+" lower", ib.Lower, ia.Lower, tol)
					reference.Within(t, string(scheme)+" "+ra.Name+" "+string(ia.Method)+" upper", ib.Upper, ia.Upper, tol)
				}
			}
		}
	}
}

func TestInputUnchanged(t *testing.T) {
	s := testSample(t, fit.Relative, 9, 0.03, 1)
	in := linearInput(s)
	in.Points = &Points{Y: slices.Concat(s.Y, s.Y), Weight: slices.Repeat([]float64{1, 2}, 9), Group: make([]int, 18)}
	for i := range in.Points.Group {
		in.Points.Group[i] = i % 9
	}
	data := [][]float64{s.T, s.Y, s.K, s.V, in.Weights, in.Points.Y, in.Points.Weight}
	for _, f := range in.Fits {
		data = append(data, f.P, f.Cov, f.Fitted, f.Residuals, f.Leverage)
	}
	for _, tg := range in.Targets {
		data = append(data, tg.W)
	}
	var before [][]float64
	for _, d := range data {
		before = append(before, slices.Clone(d))
	}
	for _, scheme := range Schemes {
		if _, err := Run(context.Background(), in, Options{Scheme: scheme, Resamples: 99, Methods: Methods}); err != nil {
			t.Fatal(err)
		}
	}
	if !reflect.DeepEqual(data, before) {
		t.Error("the input was modified")
	}
}

func TestTargetsThatHaveNoInterval(t *testing.T) {
	s := testSample(t, fit.Relative, 3, 0.03, 1)
	in := linearInput(s) // power-prefactor has ν = 0
	in.Targets = append(DefaultTargets(s, in.Fits[:1]), Target{Curve: 1, Name: "n", W: []float64{0, 0, 1}})
	o := mustRun(t, intervalsOnly(in), Options{})
	if r := o.target(t, "n"); r.Note == "" || r.Intervals != nil || !math.IsNaN(r.Estimate) {
		t.Errorf("%+v", r)
	}
	if r := o.target(t, "E"); r.Note != "" || math.IsNaN(r.Intervals[0].Lower) {
		t.Errorf("%+v", r)
	}
}

// Resamples with all residuals equal lie on a straight line exactly: they are
// counted, not divided by.
func TestFlatResamples(t *testing.T) {
	s := testSample(t, fit.Relative, 4, 0.03, 1)
	in := intervalsOnly(linearInput(s))
	in.Targets = in.Targets[1:2]
	o := mustRun(t, in, Options{Scheme: Residual})
	r := o.target(t, "E")
	p := 4 / math.Pow(4, 4)
	reference.Within(t, "flat", float64(r.Flat), 9999*p, 4*math.Sqrt(9999*p))
	if math.IsNaN(r.Intervals[0].Lower) || math.IsInf(r.Intervals[0].Lower, 0) {
		t.Errorf("%+v", r.Intervals[0])
	}
}

// No rounding error may pass for scatter.
func TestFlatKernel(t *testing.T) {
	for n := 4; n < 30; n++ {
		s := testSample(t, fit.Relative, n, 0.03, 1)
		in := intervalsOnly(linearInput(s))
		p, err := newPlan(in, Options{})
		if err != nil {
			t.Fatal(err)
		}
		for _, k := range p.kernels {
			for _, c := range []float64{0.037, -0.11, 3e-5} {
				e := slices.Repeat([]float64{c}, n)
				diff, tt := make([]float64, 2), make([]float64, 2)
				k.fixed(e, diff, tt)
				if !math.IsNaN(tt[0]) || !math.IsNaN(tt[1]) {
					t.Fatalf("N = %d: %v", n, tt)
				}
			}
		}
	}
}

func TestSelectNth(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	for range 300 {
		n := 1 + rng.IntN(60)
		x := make([]float64, n)
		for i := range x {
			x[i] = float64(rng.IntN(1 + rng.IntN(30))) // ties
		}
		want := slices.Sorted(slices.Values(x))
		v := values{x: x}
		for k := range n {
			if got := v.at(k + 1); got != want[k] {
				t.Fatalf("order statistic %d of %v: got %g", k+1, want, got)
			}
		}
	}
	v := values{x: []float64{4, 2, 1, 3}}
	// Type 6 of R: quantile(1:4, .3, type = 6) is 1.5; .1 and .9 are the ends.
	reference.Within(t, "0.3", v.quantile(0.3), 1.5, 1e-12)
	reference.Within(t, "0.1", v.quantile(0.1), 1, 0)
	reference.Within(t, "0.9", v.quantile(0.9), 4, 0)
}

func TestStream(t *testing.T) {
	// Words of neighbouring streams, bit by bit: each bit is set in half of them.
	s := newStream()
	const n = 4096
	var ones [64]int
	for i := range n {
		s.reset(0, uint64(i))
		u := s.pcg.Uint64()
		for b := range 64 {
			ones[b] += int(u >> b & 1)
		}
	}
	for b, c := range ones {
		reference.Within(t, "bit "+string(rune('0'+b)), float64(c), n/2, 5*math.Sqrt(n)/2)
	}
	// Seed and index do not stand in for each other.
	s.reset(0, 1)
	u := s.pcg.Uint64()
	s.reset(1, 0)
	if s.pcg.Uint64() == u {
		t.Error("resample 1 of seed 0 is resample 0 of seed 1")
	}
	// Indices are even over n.
	const m = 7
	var count [m]int
	ix := make([]int32, 9)
	for i := range n {
		s.reset(1, uint64(i))
		s.indices(ix, m)
		for _, k := range ix {
			count[k]++
		}
	}
	for _, c := range count {
		reference.Within(t, "index", float64(c), n*9./m, 4*math.Sqrt(n*9./m))
	}
}

func resampler(t testing.TB, model fit.ErrorModel, scheme Scheme, n int) *worker {
	s := testSample(t, model, n, 0.03, 1)
	curves := []models.Basis{models.Straight(), models.PowerPrefactor{}}
	in := Input{Sample: s, Weights: []float64{0.5, 0.5}, States: 1, Refitter: constantRefitter{}}
	ln := testSample(t, fit.Relative, n, 0.03, 1)
	for _, c := range curves {
		in.Fits = append(in.Fits, fit.Fit(ln, c))
	}
	in.NewJudge = func() Judge { return func([]float64, []int, *fit.Refit) int { return 0 } }
	in.Targets = DefaultTargets(s, in.Fits)
	p, err := newPlan(in, Options{Scheme: scheme, Resamples: 4096})
	if err != nil {
		t.Fatal(err)
	}
	return p.newWorker()
}

func TestResampleDoesNotAllocate(t *testing.T) {
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Stated, fit.Absolute} {
		for _, scheme := range Schemes {
			w := resampler(t, model, scheme, 12)
			b := 0
			if a := testing.AllocsPerRun(200, func() { w.resample(b); b++ }); a != 0 {
				t.Errorf("%s %s: %g allocations a resample", model, scheme, a)
			}
		}
	}
}

// One resample with four targets and shares, without the time of the refit.
func BenchmarkResample(b *testing.B) {
	for _, scheme := range Schemes {
		b.Run(string(scheme), func(b *testing.B) {
			w := resampler(b, fit.Relative, scheme, 20)
			b.ReportAllocs()
			i := 0
			for b.Loop() {
				w.resample(i & 4095)
				i++
			}
		})
	}
}

// Sorting by several goroutines is sorting, whatever their number and with ties.
func TestSortShared(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 5))
	for _, n := range []int{0, 1, 999, 1000, 1001, 20001} {
		for _, workers := range []int{0, 1, 2, 3, 7, 64} {
			x := make([]float64, n)
			for i := range x {
				x[i] = math.Round(float64(n) / 2 * rng.NormFloat64())
			}
			want := slices.Sorted(slices.Values(x))
			sortShared(x, workers)
			if !slices.Equal(x, want) {
				t.Errorf("%d values, %d workers: not sorted", n, workers)
			}
		}
	}
}

// How much faster whole runs are with two workers than with one, taken in turn: the
// median of the ratios. Another process on the second core spoils it.
func BenchmarkTwoWorkers(b *testing.B) {
	for _, n := range []int{10, 20} {
		in := defaultInput(testSample(b, fit.Relative, n, 0.03, 1))
		for _, targets := range [][]Target{in.Targets, nil} {
			for _, resamples := range []int{9999, 99999, 1999999} {
				b.Run(fmt.Sprintf("N=%d/targets=%d/B=%d", n, len(targets), resamples), func(b *testing.B) {
					in := in
					in.Targets = targets
					var ratios []float64
					for b.Loop() {
						var took [2]time.Duration
						for i := range took {
							start := time.Now()
							mustRun(b, in, Options{Resamples: resamples, Workers: i + 1})
							took[i] = time.Since(start)
						}
						ratios = append(ratios, float64(took[0])/float64(took[1]))
					}
					slices.Sort(ratios)
					b.ReportMetric(ratios[len(ratios)/2], "times-as-fast")
				})
			}
		}
	}
}

// Four quantiles of 9999 values by selection.
func BenchmarkQuantiles(b *testing.B) {
	rng := rand.New(rand.NewPCG(3, 3))
	x := make([]float64, 9999)
	y := make([]float64, len(x))
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	for b.Loop() {
		copy(y, x)
		v := values{x: y}
		for _, p := range []float64{0.025, 0.975, 0.031, 0.981} {
			v.quantile(p)
		}
	}
}
