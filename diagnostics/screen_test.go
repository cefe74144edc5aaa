package diagnostics

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Screen must decide as Assess does, with and without kept designs: a study of its
// verdicts is then a study of those that people read.
func TestScreenDecidesAsAssess(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	opt := DefaultOptions()
	opt.Resamples = 0
	cached := opt
	cached.Designs = new(DesignCache)
	states := map[State]int{}
	agree := func(t *testing.T, set *dataset.Set, opt, cached Options) {
		t.Helper()
		doc, err := Assess(context.Background(), set, opt)
		if err != nil {
			t.Fatal(err)
		}
		again, err := Assess(context.Background(), set, cached)
		if err != nil {
			t.Fatal(err)
		}
		for _, o := range []Options{opt, cached} {
			s, err := Screen(set, o)
			if err != nil {
				t.Fatal(err)
			}
			if s.State() != doc.Verdict.State || s.ErrorModel != doc.Settings.ErrorModel || Real(s.TEff) != doc.Dataset.TEff {
				t.Errorf("%s under %s at %g K, want %s under %s at %g K",
					s.State(), s.ErrorModel, s.TEff, doc.Verdict.State, doc.Settings.ErrorModel, doc.Dataset.TEff)
			}
			if b := doc.Curvature.SecondBarrier; s.SecondBarrierFound() != (b != nil && b.PValue < 0.05) {
				t.Errorf("second barrier found: %v, but Assess has %+v", s.SecondBarrierFound(), b)
			}
		}
		a, b := doc.Curvature.SecondBarrier, again.Curvature.SecondBarrier
		if (a == nil) != (b == nil) || a != nil && (a.PValue != b.PValue || a.WithoutEnds != b.WithoutEnds && a.WithoutEnds.PWithoutTMax.Known()) {
			t.Errorf("with kept designs the second-barrier test gives %+v, without %+v", b, a)
		}
		states[doc.Verdict.State]++
	}
	for i := range 60 {
		n := []int{3, 4, 6, 9}[i%4]
		exponent := []float64{0, 0, 0.5, 4}[i/4%4]
		noise := []float64{0.03, 0.001}[i%2]
		stated := i%3 == 0
		set := &dataset.Set{Name: "simulated", Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}}
		for j, temp := range span(280, 340, n) {
			for range 1 + i%5/4 {
				p := dataset.Point{Row: len(set.Points) + 2, T: temp, Used: true}
				p.K = math.Exp(20 + exponent*math.Log(temp/300) - 60e3/(models.GasConstant*temp) + noise*(1+float64(j%2))*rng.NormFloat64())
				if stated {
					p.UK, p.Level = 0.8*noise*(1+float64(j%2))*p.K, dataset.LevelStandard
				}
				set.Points = append(set.Points, p)
			}
		}
		agree(t, set, opt, cached)
		if i%10 == 0 {
			abs, absCached := opt, cached
			abs.ErrorModel, absCached.ErrorModel = fit.Absolute, fit.Absolute
			agree(t, set, abs, absCached)
		}
	}
	for _, s := range []State{Untestable, BeyondPrefactor, StraightWithin, Unresolved} {
		if states[s] == 0 {
			t.Errorf("no set was %s: the test is too narrow", s)
		}
	}
}
