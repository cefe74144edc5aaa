package diagnostics

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// kSet is an invented set with errors in k of one size, of one or two laboratories, with
// repeats at some temperatures.
func kSet(n, labs int, bend float64, seed uint64) *dataset.Set {
	rng := rand.New(rand.NewPCG(seed, 77))
	var t, k []float64
	var source []string
	for lab := range labs {
		for i := range n {
			at := 280 + 60*float64(i)/float64(n-1)
			if i == 1 {
				at = 280 // measured twice
			}
			f := -60e3/8.314*(1/at-1/320.) + bend*(math.Log(at/310)+310/at-1)
			t, k = append(t, at), append(k, 1e-3*(1+0.4*float64(lab))*math.Exp(f)+2e-5*rng.NormFloat64())
			source = append(source, string(rune('A'+lab)))
		}
	}
	s := setOf(t, k, nil)
	for i := range s.Points {
		if labs > 1 {
			s.Points[i].Source = source[i]
		}
	}
	return s
}

// A search from nearby gives what a fit of the rest from nothing gives.
func TestNearIsWhatAFitFromNothingGives(t *testing.T) {
	compared := 0
	for seed := range uint64(12) {
		for _, c := range []struct {
			labs       int
			replicates string
			model      fit.ErrorModel
		}{{1, ReplicatesMeans, fit.Absolute}, {1, ReplicatesIndependent, fit.Absolute}, {2, ReplicatesMeans, fit.Absolute}, {1, ReplicatesMeans, fit.StatedAbsolute}} {
			set := kSet(10, c.labs, 30*float64(seed%4), seed)
			for i := range set.Points {
				set.Points[i].UK, set.Points[i].Level = 2e-5, dataset.LevelStandard
			}
			opt := quick()
			opt.ErrorModel, opt.Replicates = c.model, c.replicates
			a := assessorOf(t, set, opt)
			o := newOmitter(a, a.verdict.State, false)
			if o == nil || o.near == nil {
				t.Fatal("nothing to compare")
			}
			// With n held at 0 the curve is the straight line, and so is its E.
			u := make([]float64, o.near.p)
			u[o.near.p-1] = o.near.coordinate(0)
			if _, ok := o.near.search(u, true); !ok {
				t.Fatal("no line")
			}
			reference.Close(t, "E of the line", o.near.energy(u), a.straight.P[1], 1e-7)
			for l := range a.data.leavings {
				near, ok := o.refitNear(l)
				if !ok {
					t.Logf("seed %d %+v %+v: no answer from nearby", seed, c, l)
					continue
				}
				cold := o.refit(l)
				compared++
				if near.state != cold.state || near.testable != cold.testable {
					t.Errorf("seed %d %+v %+v: %s, want %s", seed, c, l, near.state, cold.state)
				}
				if !cold.testable {
					continue
				}
				reference.Close(t, "n", near.n, cold.n, 1e-6)
				reference.Close(t, "se", near.se, cold.se, 1e-5)
				reference.Close(t, "p", near.p, cold.p, 1e-5)
				if !math.IsNaN(cold.predicted) {
					reference.Close(t, "prediction error", near.predicted, cold.predicted, 1e-5)
				}
			}
		}
	}
	t.Logf("%d compared", compared)
	if compared < 500 {
		t.Errorf("%d compared", compared)
	}
}

// assessorOf goes as far as the verdict.
func assessorOf(t testing.TB, set *dataset.Set, opt Options) *assessor {
	t.Helper()
	a, err := newAssessor(set, opt)
	if err != nil {
		t.Fatal(err)
	}
	if err := a.fit(); err != nil {
		t.Fatal(err)
	}
	a.rank()
	a.test()
	a.decide()
	return a
}

// Of more entries than are fitted anew, what decides is found, and what was not examined is
// said: with one harmless limit, and with errors in k.
func TestDecidingPointOfMany(t *testing.T) {
	limited := lineSet(mostRefits+10, 290, 345, 60e3, 0.03, 1)
	limited.Points = append(limited.Points,
		dataset.Point{File: limited.Points[0].File, Row: 200, T: 360, K: 1.45 * math.Exp(25-60e3/(models.GasConstant*360)), Used: true, Order: math.NaN()},
		dataset.Point{File: limited.Points[0].File, Row: 201, T: 280, K: 100 * limited.Points[0].K, Limit: "<", Order: math.NaN()})
	inK := lineSet(130, 280, 330, 60e3, 0, 1)
	rng := rand.New(rand.NewPCG(2, 2))
	for i := range inK.Points {
		inK.Points[i].K += 0.005 * rng.NormFloat64() * inK.Points[60].K
	}
	inK.Points = append(inK.Points, dataset.Point{File: inK.Points[0].File, Row: 200, T: 345, K: 1.15 * math.Exp(25-60e3/(models.GasConstant*345)), Used: true, Order: math.NaN()})
	absolute := quick()
	absolute.ErrorModel = fit.Absolute
	for _, c := range []struct {
		name string
		set  *dataset.Set
		opt  Options
	}{{"a limit", limited, quick()}, {"errors in k", inK, absolute}} {
		a := mustAssess(t, c.set, c.opt)
		r := a.InfluenceRange
		if !a.finding("deciding-point") || !a.finding("influence-not-examined") || r.Examined != mostRefits || r.NotExamined != len(a.Influence)-mostRefits {
			t.Errorf("%s: %s: %+v", c.name, a.Verdict.Sentence, r)
		}
		for _, f := range a.Influence {
			if f.Deciding != (len(f.Rows) == 1 && f.Rows[0] == 200) || f.Exponent.Known() == (f.Why != "") {
				t.Errorf("%s: %+v", c.name, f)
			}
		}
		if !strings.Contains(a.Verdict.Sentence, "line 200 at") || !strings.Contains(a.Verdict.Sentence, "(p = 0.") {
			t.Errorf("%s: %s", c.name, a.Verdict.Sentence)
		}
	}
}

// Fits of their own are what findings could cost much by, without any clock: none is made
// in ln k, shared temperatures and repeats included, and no more than are allowed elsewhere.
func TestFitsOfFindings(t *testing.T) {
	count := func(set *dataset.Set, model fit.ErrorModel) (refits, dear int) {
		opt := quick()
		opt.ErrorModel = model
		a := assessorOf(t, set, opt)
		a.beyondTheVerdict()
		return a.refits, a.dearFits
	}
	four := kSet(20, 4, 0, 1)
	for i := range four.Points { // k > 0, errors in per cent
		rng := rand.New(rand.NewPCG(uint64(i), 3))
		four.Points[i].K = 1e-3 * math.Exp(-60e3/8.314*(1/four.Points[i].T-1/320.)+0.03*rng.NormFloat64())
	}
	if n, dear := count(four, fit.Relative); n != 0 || dear != 0 {
		t.Errorf("four sources: %d fits of the rest, %d in k from nothing", n, dear)
	}
	if n, dear := count(lineSet(200, 290, 340, 60e3, 0.03, 1), fit.Relative); n != 0 || dear != 0 {
		t.Errorf("200 points: %d fits of the rest, %d in k from nothing", n, dear)
	}
	if n, _ := count(lineSet(200, 290, 340, 60e3, 0.03, 1), fit.Absolute); n > 3 {
		t.Errorf("200 points with errors in k: %d fits of the rest from nothing", n)
	}
	s := lineSet(200, 290, 340, 60e3, 0.03, 1)
	s.Points = append(s.Points, bitten().Points[8])
	if n, _ := count(s, fit.Relative); n != mostRefits {
		t.Errorf("200 points and a limit: %d fits of the rest", n)
	}
}

// The range of what leaving out does is that of the list.
func TestInfluenceRange(t *testing.T) {
	a := mustAssess(t, kSet(10, 2, 20, 1), quick())
	low, high, pLow, pHigh := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	for _, f := range a.Influence {
		low, high = math.Min(low, float64(f.Exponent)), math.Max(high, float64(f.Exponent))
		pLow, pHigh = math.Min(pLow, float64(f.PValue)), math.Max(pHigh, float64(f.PValue))
	}
	r := a.InfluenceRange
	if float64(r.ExponentLow) != low || float64(r.ExponentHigh) != high || float64(r.PLow) != pLow || float64(r.PHigh) != pHigh || r.Examined != len(a.Influence) || r.NotExamined != 0 {
		t.Errorf("%+v, want %g to %g, %g to %g of %d", r, low, high, pLow, pHigh, len(a.Influence))
	}
	if r := mustAssess(t, lineSet(3, 290, 340, 60e3, 0.03, 1), quick()).InfluenceRange; r != nil {
		t.Errorf("three temperatures: %+v", r)
	}
	if r := mustAssess(t, lineSet(mostListed+5, 290, 340, 60e3, 0.03, 1), quick()).InfluenceRange; r.Examined != mostListed+5 || !r.PLow.Known() {
		t.Errorf("many: %+v", r)
	}
}

// With limits an error of the thermometer moves their temperatures too: the verdict on data
// whose every temperature is put right by the δ that is printed is at its boundary, and dn/dδ
// is that of such data.
func TestTemperatureErrorsMoveLimits(t *testing.T) {
	set := limitedBow()
	a := mustAssess(t, set, quick())
	if a.Verdict.State != BeyondPrefactor || len(a.Sample.Limits) != 4 {
		t.Fatalf("%s", a.Verdict.Sentence)
	}
	low, high := a.Sample.Range()
	righted := func(shape string, delta float64) ExponentTest {
		s := *set
		s.Points = slices.Clone(set.Points)
		for i := range s.Points {
			s.Points[i].T -= delta * shapeOf(shape, low, high, s.Points[i].T)
		}
		return assessorOf(t, &s, quick()).exponent
	}
	known := 0
	for _, e := range a.TemperatureError {
		const h = 0.02
		reference.Close(t, e.Shape+": dn/dδ", float64(e.Slope), (righted(e.Shape, -h).Exponent.Value-righted(e.Shape, h).Exponent.Value)/(2*h), 1e-3)
		if e.Lost.Known() {
			known++
			if _, up := ends(righted(e.Shape, float64(e.Lost)).Exponent); !(math.Abs(up) < 1e-5) {
				t.Errorf("%s: with %g K put right the interval of n ends at %g, not at 0", e.Shape, float64(e.Lost), up)
			}
		}
		if e.ToBand.Known() {
			if n := righted(e.Shape, float64(e.ToBand)).Exponent.Value; !(math.Abs(n) < 1e-5) {
				t.Errorf("%s: with %g K put right n = %g, not 0", e.Shape, float64(e.ToBand), n)
			}
		}
	}
	if known != 3 {
		t.Errorf("%d of 3 shapes lose the verdict", known)
	}
}

// limitedBow is a line of which the thermometer bows, with limits that bite at the cold end.
func limitedBow() *dataset.Set {
	rng := rand.New(rand.NewPCG(4, 4))
	line := func(at float64) float64 { return 1e-3 * math.Exp(-60e3/models.GasConstant*(1/at-1/320.)) }
	s := lineSet(9, 290, 340, 60e3, 0, 1)
	for i := range s.Points {
		x := (s.Points[i].T - 315) / 25
		s.Points[i].K = line(s.Points[i].T+0.08*(1-x*x)) * math.Exp(0.002*rng.NormFloat64())
	}
	for i := range 4 {
		at := 270 + 5*float64(i)
		s.Points = append(s.Points, dataset.Point{File: s.Points[0].File, Row: 12 + i, T: at, K: line(at), Limit: "<", Order: math.NaN()})
	}
	return s
}
