package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"sync"
	"testing"
	"time"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// resampling is a sample, its fits and a stream of parametric resamples.
type resampling struct {
	s       *Sample
	curves  []models.Curve
	fits    []*Result
	penalty []float64
	rng     *rand.Rand
	truth   []float64 // fitted values the resamples are drawn about
	sigma   float64
}

// newResampling is scattered with a scatter of 3 %.
func newResampling(t testing.TB, seed uint64, n int, straight bool) *resampling {
	t.Helper()
	return scattered(t, seed, n, straight, 0.03)
}

// scattered makes a two-path sample whose local E changes by about half, or a straight
// one, with scatter sigma, and draws resamples about the generator's curve.
func scattered(t testing.TB, seed uint64, n int, straight bool, sigma float64) *resampling {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 7))
	noise := func(int) float64 { return sigma * rng.NormFloat64() }
	r := &resampling{rng: rng, sigma: sigma}
	if straight {
		r.s = made(t, n, 280, 340, []float64{-5, 60e3}, models.Straight(), noise)
	} else {
		// Crossover within the middle half of the range, share of the faster
		// path changing by e^5 to e^8 over the range.
		width := (1/250. - 1/500.) / models.GasConstant
		d := 5 + 3*rng.Float64()
		c := d * (rng.Float64() - 0.5) / 2
		r.s = made(t, n, 250, 500, []float64{-5, 30e3, -5 + c, 30e3 + d/width}, models.Parallel{}, noise)
	}
	r.choose(models.Straight(), models.PowerPrefactor{}, models.Parallel{})
	r.truth = r.fits[len(r.fits)-1].Fitted
	if straight {
		r.truth = r.fits[0].Fitted
	}
	return r
}

// choose fits the candidates and sets the penalties of AICc, 2K + 2K(K+1)/(N-K-1)
// with K = p + 1 (Hurvich & Tsai 1989).
func (r *resampling) choose(curves ...models.Curve) {
	r.curves, r.fits, r.penalty = curves, nil, nil
	n := float64(r.s.Len())
	for _, c := range curves {
		r.fits = append(r.fits, Fit(r.s, c))
		k := float64(len(c.Info().Params) + 1)
		r.penalty = append(r.penalty, 2*k+2*k*(k+1)/(n-k-1))
	}
}

func (r *resampling) draw(y []float64) {
	for i, f := range r.truth {
		y[i] = f + r.sigma*r.rng.NormFloat64()
	}
}

// coldRSS is the RSS of a global fit made from nothing but the resample.
func coldRSS(s *Sample, y []float64, counts []int, c models.Curve) float64 {
	sub := &Sample{Model: s.Model, TRef: s.TRef}
	for i := range y {
		m := 1
		if counts != nil {
			m = counts[i]
		}
		for range m {
			sub.T, sub.V, sub.Y = append(sub.T, s.T[i]), append(sub.V, s.V[i]), append(sub.Y, y[i])
			sub.K = append(sub.K, math.Exp(y[i]))
		}
	}
	res := Fit(sub, c)
	if res.Status == Excluded {
		return math.Inf(1)
	}
	if !res.Usable() {
		return math.NaN()
	}
	return res.RSS
}

func relErr(got, want float64) float64 {
	if got == want {
		return 0
	}
	return math.Abs(got-want) / math.Abs(want)
}

// TestRefitAgreesWithColdFit: on identified two-path sets a resample's RSS agrees
// with that of a cold global fit to 1e-8 in at least 99.9 % of resamples.
func TestRefitAgreesWithColdFit(t *testing.T) {
	for _, pairs := range []bool{false, true} {
		how := map[How]int{}
		total, missed := 0, 0
		for set := range 20 {
			n := []int{8, 10, 12, 20}[set%4]
			if pairs {
				n = 20
			}
			r := newResampling(t, uint64(set), n, false)
			ref := NewRefitter(r.s, r.curves, r.fits, RefitOptions{})
			var out Refit
			y, counts := make([]float64, n), make([]int, n)
			for range 100 {
				var cs []int
				r.draw(y)
				if pairs {
					copy(y, r.s.Y)
					clear(counts)
					for range n {
						counts[r.rng.IntN(n)]++
					}
					cs = counts
					ref.RefitCounts(y, counts, &out)
				} else {
					ref.Refit(y, &out)
				}
				how[out.How]++
				total++
				for j, c := range r.curves {
					want := coldRSS(r.s, y, cs, c)
					tol := 1e-10
					if j == 2 {
						tol = 1e-8
					}
					if relErr(out.RSS[j], want) <= tol {
						continue // NaN is not within any tolerance
					}
					if j == 2 {
						missed++
						t.Logf("set %d (pairs %v, N = %d): %v RSS %.12g, cold %.12g", set, pairs, n, out.How, out.RSS[j], want)
					} else {
						t.Errorf("set %d (pairs %v): %s RSS %.12g, want %.12g", set, pairs, c.Info().Name, out.RSS[j], want)
					}
				}
			}
		}
		t.Logf("pairs %v: roads %v", pairs, how)
		if !(float64(missed) <= 1e-3*float64(total)) {
			t.Errorf("pairs %v: %d of %d differ from a cold fit", pairs, missed, total)
		}
	}
}

// weak makes a two-path set with so much scatter that its second path is weakly
// identified: the estimate is no start for a resample.
func weak(t testing.TB, seed uint64, n int) *resampling {
	t.Helper()
	for try := range uint64(1000) {
		r := scattered(t, 1000*seed+try, n, false, []float64{0.1, 0.2, 0.4}[seed%3])
		d := newResampleDesign(r.s, r.curves, r.fits, newCriterion(r.s, len(r.curves), r.penalty), false)
		if d.shaped[0].warm == nil {
			return r
		}
	}
	t.Fatal("no weakly identified set")
	return nil
}

// TestRefitFirstPlaces: on straight and on weakly identified sets, where most refits
// are screened or decided, no more than 0.1 % of first places are wrong.
func TestRefitFirstPlaces(t *testing.T) {
	for _, kind := range []string{"straight", "straight pairs", "weak", "weak pairs", "straight with series", "straight with series pairs"} {
		pairs := strings.HasSuffix(kind, "pairs")
		how := map[How]int{}
		total, wrong := 0, 0
		for set := range 24 {
			n := []int{8, 12, 20}[set%3]
			if pairs {
				n = max(n, 10) // fewer leave a resample too few temperatures
			}
			var r *resampling
			if strings.HasPrefix(kind, "weak") {
				r = weak(t, uint64(set), n)
			} else {
				r = scattered(t, uint64(100+set), n, true, []float64{0.03, 1e-5}[set%2])
			}
			if strings.Contains(kind, "series") {
				f := Fit(r.s, models.Series{})
				r.curves, r.fits = append(r.curves, models.Series{}), append(r.fits, f)
				r.penalty = append(r.penalty, r.penalty[len(r.penalty)-1]) // that of parallel
			}
			ref := NewRefitter(r.s, r.curves, r.fits, RefitOptions{Penalty: r.penalty})
			full := NewRefitter(r.s, r.curves, r.fits, RefitOptions{})
			var out, want Refit
			y, counts := make([]float64, n), make([]int, n)
			for range 200 {
				r.draw(y)
				if pairs {
					clear(counts)
					for range n {
						counts[r.rng.IntN(n)]++
					}
					copy(y, r.s.Y)
					ref.RefitCounts(y, counts, &out)
					full.RefitCounts(y, counts, &want)
				} else {
					ref.Refit(y, &out)
					full.Refit(y, &want)
				}
				best, first := math.Inf(1), -1
				for j, rss := range want.RSS {
					if v := float64(n)*math.Log(rss) + r.penalty[j]; v < best {
						best, first = v, j
					}
				}
				how[out.How]++
				total++
				if out.First != first {
					wrong++
					t.Logf("%s set %d (N = %d): %d first, want %d; %v, %v", kind, set, n, out.First, first, out.RSS, want.RSS)
				}
			}
		}
		t.Logf("%s: roads %v, wrong %d of %d", kind, how, wrong, total)
		if !(float64(wrong) <= 1e-3*float64(total)) {
			t.Errorf("%s: %d of %d first places are wrong", kind, wrong, total)
		}
	}
}

// TestRefitAboutAnotherCurve: resamples of an identified two-path set drawn about its
// straight line lie far from the estimate, where another minimum may be the lower one.
func TestRefitAboutAnotherCurve(t *testing.T) {
	wrong := 0
	for set := range 10 {
		r := newResampling(t, uint64(200+set), 12, false)
		r.truth = r.fits[0].Fitted
		ref := NewRefitter(r.s, r.curves, r.fits, RefitOptions{})
		var out Refit
		y := make([]float64, 12)
		for range 50 {
			r.draw(y)
			ref.Refit(y, &out)
			if !(relErr(out.RSS[2], coldRSS(r.s, y, nil, r.curves[2])) <= 1e-8) {
				wrong++
			}
		}
	}
	if wrong > 0 {
		t.Errorf("%d of 500 differ from a cold fit", wrong)
	}
}

// TestRefitMatchesFit: all five default curves under weights, known σ and repeated
// temperatures give the RSS and the parameters of Fit, with and without counts.
func TestRefitMatchesFit(t *testing.T) {
	for _, model := range []ErrorModel{Relative, Stated, Scaled} {
		r := newResampling(t, 11, 12, false)
		r.s.Model = model
		for i := range r.s.T {
			r.s.V[i] = 1e-4 * float64(1+i%3)
			if i%4 == 1 {
				r.s.T[i] = r.s.T[i-1]
			}
		}
		r.choose(models.Default()...)
		r.truth = r.fits[4].Fitted
		ref := NewRefitter(r.s, r.curves, r.fits, RefitOptions{ShapedParams: true})
		if _, fast := ref.(*fastRefitter); !fast {
			t.Fatal("the default curves went the slow road")
		}
		var out Refit
		y := make([]float64, 12)
		counts := []int{1, 2, 0, 1, 1, 3, 0, 1, 1, 0, 1, 2}
		for round := range 20 {
			r.draw(y)
			sub := *r.s
			sub.Y = y
			if round%2 == 0 {
				ref.Refit(y, &out)
			} else {
				ref.RefitCounts(y, counts, &out)
				sub.T, sub.V, sub.Y, sub.K = nil, nil, nil, nil
				for i, m := range counts {
					for range m {
						sub.T, sub.V = append(sub.T, r.s.T[i]), append(sub.V, r.s.V[i])
						sub.Y, sub.K = append(sub.Y, y[i]), append(sub.K, math.Exp(y[i]))
					}
				}
			}
			best, first := math.Inf(1), -1
			for j, c := range r.curves {
				f := Fit(&sub, c)
				label := fmt.Sprintf("%s round %d %s", model, round, c.Info().Name)
				if !f.Usable() {
					if !math.IsInf(out.RSS[j], 1) {
						t.Errorf("%s: RSS %g, but Fit says %v", label, out.RSS[j], f.Status)
					}
					continue
				}
				reference.Close(t, label+" RSS", out.RSS[j], f.RSS, 1e-9)
				if f.Status == Converged {
					for i, p := range f.P {
						reference.Close(t, label+" "+c.Info().Params[i].Symbol, out.P[j][i], p, 1e-6)
					}
				}
				if f.RSS < best {
					best, first = f.RSS, j
				}
			}
			if out.First != first {
				t.Errorf("%s round %d: curve %d first, want %d", model, round, out.First, first)
			}
		}
	}
}

// TestRefitAllocatesNothing: after the first call no road allocates.
func TestRefitAllocatesNothing(t *testing.T) {
	for _, straight := range []bool{false, true} {
		r := newResampling(t, 3, 20, straight)
		for _, o := range []RefitOptions{{}, {Penalty: r.penalty}, {Penalty: r.penalty, ShapedParams: true}} {
			ref := NewRefitter(r.s, r.curves, r.fits, o)
			var out Refit
			y, counts := make([]float64, 20), make([]int, 20)
			allocs := testing.AllocsPerRun(300, func() {
				r.draw(y)
				ref.Refit(y, &out)
				clear(counts)
				for range counts {
					counts[r.rng.IntN(20)]++
				}
				ref.RefitCounts(r.s.Y, counts, &out)
			})
			if allocs != 0 {
				t.Errorf("straight %v, %+v: %g allocations a resample", straight, o, allocs)
			}
		}
	}
}

// TestRefitClones: workers with clones of one refitter give what one worker gives.
func TestRefitClones(t *testing.T) {
	r := newResampling(t, 5, 10, true)
	ref := NewRefitter(r.s, r.curves, r.fits, RefitOptions{Penalty: r.penalty})
	ys := make([][]float64, 64)
	want := make([]Refit, len(ys))
	for i := range ys {
		ys[i] = make([]float64, 10)
		r.draw(ys[i])
	}
	got := make([]Refit, len(ys))
	var wg sync.WaitGroup
	for w := range 4 {
		clone := ref.Clone()
		wg.Go(func() {
			for i := w; i < len(ys); i += 4 {
				clone.Refit(ys[i], &got[i])
			}
		})
	}
	wg.Wait()
	for i, y := range ys {
		ref.Refit(y, &want[i])
		if !reflect.DeepEqual(got[i], want[i]) {
			t.Errorf("resample %d: %+v, one worker %+v", i, got[i], want[i])
		}
	}
}

// TestRefitFails: a curve with as many parameters as temperatures fails, and the
// others are fitted all the same.
func TestRefitFails(t *testing.T) {
	r := newResampling(t, 3, 10, false)
	slow := newSlowRefitter(r.s, r.curves, newCriterion(r.s, 3, nil), false)
	for _, ref := range []Refitter{
		NewRefitter(r.s, r.curves, r.fits, RefitOptions{}),
		&slow,
	} {
		var out Refit
		ref.RefitCounts(r.s.Y, []int{2, 0, 2, 0, 2, 0, 4, 0, 0, 0}, &out)
		if out.How != HowFailed || !math.IsNaN(out.RSS[2]) || !(out.RSS[1] > 0) || out.First != 1 {
			t.Errorf("%T: %+v", ref, out)
		}
	}
}

// TestRefitOfTooFewPoints: curves with more parameters than temperatures fail, and the
// rest are fitted.
func TestRefitOfTooFewPoints(t *testing.T) {
	for n := 1; n <= 4; n++ {
		s := mustSample(t, Relative, []float64{300, 310, 320, 330}[:n], []float64{1, 2, 3.8, 9}[:n], ones(n))
		curves := models.Default()
		var fits []*Result
		for _, c := range curves {
			fits = append(fits, Fit(s, c))
		}
		var out Refit
		NewRefitter(s, curves, fits, RefitOptions{}).Refit(s.Y, &out)
		for j, c := range curves {
			if p := len(c.Info().Params); math.IsNaN(out.RSS[j]) != (p > n) {
				t.Errorf("N = %d: RSS of %s is %g", n, c.Info().Name, out.RSS[j])
			}
		}
		if (out.How == HowFailed) != (n < 4) || (out.First < 0) != (n < 2) {
			t.Errorf("N = %d: %+v", n, out)
		}
	}
}

// TestSlowRefit: with errors in k a refit is Fit on the resample.
func TestSlowRefit(t *testing.T) {
	r := newResampling(t, 3, 10, false)
	s := mustSample(t, Absolute, r.s.T, r.s.K, ones(10))
	curves := []models.Curve{models.Straight(), models.PowerPrefactor{}}
	fits := []*Result{Fit(s, curves[0]), Fit(s, curves[1])}
	ref := NewRefitter(s, curves, fits, RefitOptions{})
	k := make([]float64, 10)
	for i, f := range fits[1].Fitted {
		k[i] = math.Exp(f) * (1 + 0.02*float64(i%3-1))
	}
	var out Refit
	ref.Refit(k, &out)
	sub := mustSample(t, Absolute, s.T, k, s.V)
	for j, c := range curves {
		f := Fit(sub, c)
		reference.Close(t, c.Info().Name+" RSS", out.RSS[j], f.RSS, 1e-9)
		reference.Close(t, c.Info().Name+" E", out.P[j][1], f.P[1], 1e-7)
	}
	// Every entry twice: the same estimates, twice the sum of squares.
	counts := make([]int, 10)
	for i := range counts {
		counts[i] = 2
	}
	once := out.RSS[1]
	ref.Clone().RefitCounts(k, counts, &out)
	reference.Close(t, "RSS of doubled entries", out.RSS[1], 2*once, 1e-9)
}

// floorTime is the time of exp and log1p at n points, in ns: what a shape costs at
// least where it is computed with the library's functions. The least of many short
// runs, since a benchmark beside it may be interrupted.
func floorTime(n int) float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = 6 * (float64(i)/float64(n-1) - 0.5)
	}
	var sum float64
	best := math.Inf(1)
	for range 500 {
		start := time.Now()
		for range 50 {
			for _, v := range x {
				sum += math.Log1p(math.Exp(v))
			}
		}
		best = math.Min(best, float64(time.Since(start).Nanoseconds())/50)
	}
	if sum < 0 {
		return math.NaN()
	}
	return best
}

// report adds the time as a multiple of floorTime.
func report(b *testing.B, n int) {
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/floorTime(n), "floors")
}

// BenchmarkRefit is one resample of straight + power-prefactor + parallel with the
// choice of the first place; for weakly identified sets the mean over twenty of them.
func BenchmarkRefit(b *testing.B) {
	for _, kind := range []string{"two-path", "straight", "weak"} {
		for _, n := range []int{8, 10, 12, 20} {
			sets := []*resampling{newResampling(b, 3, n, kind == "straight")}
			if kind == "weak" {
				sets = nil
				for seed := range uint64(20) {
					sets = append(sets, weak(b, seed, n))
				}
			}
			type resample struct {
				ref    Refitter
				data   []float64
				y      []float64
				counts []int
			}
			var all []resample
			for len(all) < 256 {
				for _, r := range sets {
					c := resample{ref: NewRefitter(r.s, r.curves, r.fits, RefitOptions{Penalty: r.penalty}), data: r.s.Y}
					for range 256 / len(sets) {
						c.y, c.counts = make([]float64, n), make([]int, n)
						r.draw(c.y)
						for range n {
							c.counts[r.rng.IntN(n)]++
						}
						all = append(all, c)
					}
				}
			}
			var out Refit
			run := func(scheme string, refit func(c *resample)) {
				b.Run(fmt.Sprintf("%s/%s/N=%d", kind, scheme, n), func(b *testing.B) {
					b.ReportAllocs()
					cold := 0
					for i := range b.N {
						refit(&all[i%len(all)])
						if out.How == HowCold {
							cold++
						}
					}
					report(b, n)
					b.ReportMetric(100*float64(cold)/float64(b.N), "%cold")
				})
			}
			run("parametric", func(c *resample) { c.ref.Refit(c.y, &out) })
			run("pairs", func(c *resample) { c.ref.RefitCounts(c.data, c.counts, &out) })
		}
	}
}

// BenchmarkParallel is a global fit on a plan that is made, a fit with its plan, and
// the four profile intervals of a fit.
func BenchmarkParallel(b *testing.B) {
	for _, n := range []int{8, 12, 20} {
		r := newResampling(b, 3, n, false)
		p := newPlan(r.s.T, r.s.V)
		p.makeNodes()
		k, s := p.kernel(), p.newSearch()
		b.Run(fmt.Sprintf("cold/N=%d", n), func(b *testing.B) {
			for range b.N {
				p.cold(k, s, k.setData(r.s.Y, 1), coldTol)
			}
			report(b, n)
		})
		b.Run(fmt.Sprintf("fit/N=%d", n), func(b *testing.B) {
			for range b.N {
				newPlan(r.s.T, r.s.V).fit(r.s, models.Parallel{})
			}
			report(b, n)
		})
		b.Run(fmt.Sprintf("profiles/N=%d", n), func(b *testing.B) {
			for range b.N {
				for _, param := range []string{"ln_A1", "E1", "ln_A2", "E2"} {
					ProfileShaped(r.s, r.fits[2], param, 0.95)
				}
			}
			report(b, n)
		})
	}
}
