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

// R 4.2.2, on files of testdata/published/synthetic, fits of y = log(k) to
// y ~ I(1000/T_K) (straight) and y ~ I(1000/T_K) + log(T_K) (power-prefactor) by lm
// without each temperature, without the hottest third and without the coldest, and
// sqrt(mean((y - predict(m, left_out))^2)).
func TestPredictionAgainstR(t *testing.T) {
	for _, c := range []struct {
		set, curve                 string
		leftOut, hot, cold, either float64
		end                        int
	}{
		{"s1_straight", "straight", 0.0216925004301, 0.0278539448226, 0.0444174212924, 0.0370725609882, 4},
		{"s1_straight", "power-prefactor", 0.0200127699725, 0.0165347962135, 0.0252107962077, 0.0213188148269, 4},
		{"s2_tn_curved", "straight", 0.482494428593, 1.17847458249, 1.09647612484, 1.13821400315, 5},
		{"s2_tn_curved", "power-prefactor", 0.0224559843341, 0.0436577776009, 0.0340009169699, 0.0391284033654, 5},
		{"s7_vft", "straight", 0.573586737961, 1.16535973333, 1.60539067355, 1.40273706067, 5},
		{"s7_vft", "power-prefactor", 0.182877174432, 0.587391428543, 0.683034222991, 0.637010376722, 5},
	} {
		d := reference.Synthetic(t, c.set)
		a := mustAssess(t, setOf(d.T, d.K, nil), quick())
		p := a.Prediction.of(c.curve)
		reference.Close(t, c.set+" left out", float64(p.LeftOut), c.leftOut, 1e-9)
		reference.Close(t, c.set+" hot end", float64(p.HotEnd), c.hot, 1e-8)
		reference.Close(t, c.set+" cold end", float64(p.ColdEnd), c.cold, 1e-8)
		reference.Close(t, c.set+" ends", float64(p.Ends), c.either, 1e-8)
		if a.Prediction.EndTemperatures != c.end || p.Linearised {
			t.Errorf("%s: ends of %d temperatures; %+v", c.set, a.Prediction.EndTemperatures, p)
		}
	}
	// Repeats are left out together.
	d := reference.Synthetic(t, "s6_replicates")
	o := quick()
	o.Replicates = ReplicatesIndependent
	a := mustAssess(t, setOf(d.T, d.K, nil), o)
	reference.Close(t, "repeats, straight", float64(a.Prediction.of("straight").LeftOut), 0.0827248627529, 1e-9)
	reference.Close(t, "repeats, power-prefactor", float64(a.Prediction.of("power-prefactor").LeftOut), 0.0547896674776, 1e-9)
}

func (p *Prediction) of(curve string) CurvePrediction {
	if i := slices.IndexFunc(p.Curves, func(c CurvePrediction) bool { return c.Curve == curve }); i >= 0 {
		return p.Curves[i]
	}
	nan := Real(math.NaN())
	return CurvePrediction{LeftOut: nan, HotEnd: nan, ColdEnd: nan, Ends: nan}
}

// The closed form is that of fits without each temperature, with unequal variances and
// several entries at one temperature too.
func TestLeftOutInClosedForm(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	temps := []float64{280, 290, 290, 300, 310, 310, 310, 330, 350}
	k, v := make([]float64, len(temps)), make([]float64, len(temps))
	for i, ti := range temps {
		k[i], v[i] = math.Exp(20-50e3/(models.GasConstant*ti)+0.1*rng.NormFloat64()), 0.5+rng.Float64()
	}
	s, err := fit.NewSample(fit.Relative, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	groups := temperatureGroups(s)
	for _, c := range []models.Curve{models.Straight(), models.PowerPrefactor{}} {
		reference.Close(t, c.Info().Name, leftOut(s, fit.Fit(s, c), groups), leftOutAnew(s, c, groups), 1e-10)
	}
}

// The two-path curve is fitted anew without each temperature where it counts. Data of
// two paths with little noise: the curve that made them predicts them best, ends
// included, and nothing is reported.
func TestPredictionOfTwoPaths(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 8))
	var ts, ks []float64
	for i := range 16 {
		ti := 280 + 8*float64(i)
		f := math.Exp(10-30e3/(models.GasConstant*ti)) + math.Exp(32-90e3/(models.GasConstant*ti))
		ts, ks = append(ts, ti), append(ks, f*math.Exp(0.01*rng.NormFloat64()))
	}
	a := mustAssess(t, setOf(ts, ks, nil), quick())
	two := a.Prediction.of("parallel")
	if two.Linearised || !(two.LeftOut < a.Prediction.of("power-prefactor").LeftOut) || !two.Ends.Known() {
		t.Errorf("parallel: %+v", two)
	}
	groups := temperatureGroups(a.Sample)
	var sum float64
	for k := range groups {
		e := newEndOut(a.Sample, groups, k, k+1)
		r := fit.Fit(e.rest, models.Parallel{})
		f := []float64{0}
		r.Curve.LnK(r.TRef, []float64{a.Sample.T[k]}, r.P, f, nil)
		sum += (a.Sample.Y[k] - f[0]) * (a.Sample.Y[k] - f[0])
	}
	reference.Close(t, "left out", float64(two.LeftOut), math.Sqrt(sum/16), 1e-9)
}

// A line whose two hottest points rise from it: a curve that follows them ranks first,
// and without the ends it often predicts worst.
func TestFirstThatExtrapolatesWorst(t *testing.T) {
	o := quick()
	o.Designs = new(DesignCache)
	raised := 0
	for seed := range uint64(40) {
		rng := rand.New(rand.NewPCG(seed, 5))
		var ts, ks []float64
		for i := range 12 {
			ti := 280 + 6*float64(i)
			e := 0.02*rng.NormFloat64() + 0.2*math.Max(0, float64(i-9))
			ts, ks = append(ts, ti), append(ks, math.Exp(20-50e3/(models.GasConstant*ti)+e))
		}
		if a := mustAssess(t, setOf(ts, ks, nil), o); a.finding("first-extrapolates-worst") {
			raised++
			first, line := a.Prediction.of(a.Ranking[0].Curve), a.Prediction.of("straight")
			if a.Ranking[0].Curve == "straight" || !(first.Ends > 2*line.Ends) || a.Ranking[0].FamWeight < 0.5 {
				t.Errorf("raised for %s: %+v, %+v", a.Ranking[0].Curve, first, line)
			}
		}
	}
	t.Logf("raised in %d of 40", raised)
	if raised < 5 {
		t.Errorf("raised in %d of 40", raised)
	}
}

// On straight data it is rare, and where it is raised a curve ranks first.
func TestFirstExtrapolatesWorstOnStraightData(t *testing.T) {
	if testing.Short() {
		t.Skip("a simulation of one goroutine")
	}
	o := quick()
	o.Designs = new(DesignCache)
	raised := 0
	for seed := range uint64(300) {
		if mustAssess(t, lineSet(12, 280, 340, 60e3, 0.03, seed), o).finding("first-extrapolates-worst") {
			raised++
		}
	}
	t.Logf("raised in %d of 300 straight sets of 12", raised)
	if raised > 9 {
		t.Errorf("raised in %d of 300 straight sets", raised)
	}
}

func TestPredictionWithFewTemperatures(t *testing.T) {
	a := mustAssess(t, lineSet(5, 290, 350, 60e3, 0.03, 1), quick())
	if p := a.Prediction; p == nil || p.EndTemperatures != 0 || p.of("straight").Ends.Known() || !p.of("straight").LeftOut.Known() {
		t.Errorf("five temperatures: %+v", a.Prediction)
	}
	if a = mustAssess(t, lineSet(3, 290, 350, 60e3, 0.03, 1), quick()); a.Prediction != nil {
		t.Errorf("three temperatures: %+v", a.Prediction)
	}
}

func BenchmarkChecks(b *testing.B) {
	set := lineSet(10, 290, 350, 60e3, 0.03, 2)
	a, err := newAssessor(set, quick())
	if err != nil {
		b.Fatal(err)
	}
	if err := a.fit(); err != nil {
		b.Fatal(err)
	}
	a.rank()
	a.test()
	a.decide()
	for name, f := range map[string]func(){
		"energies":   func() { a.energiesBetween() },
		"prediction": a.predict,
		"residuals":  a.checkResiduals,
	} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				f()
				a.findings = nil
			}
		})
	}
}

// The rule by itself: first of the ranking with half of the weight, worst of all whose
// error is known, more than twice the straight line's.
func TestRuleOfFirstExtrapolatesWorst(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		what                     string
		first                    string
		weight                   Real
		power, parallel, another Real // errors at the ends; that of the straight line is 1
		want                     bool
	}{
		{"worst by far", "parallel", 0.9, 1, 2.1, 0.8, true},
		{"half of the weight is enough", "parallel", 0.5, 1, 2.1, 0.8, true},
		{"less than half of the weight", "parallel", 0.49, 1, 2.1, 0.8, false},
		{"twice the straight line's is not more", "parallel", 0.9, 1, 2, 0.8, false},
		{"another is worse", "parallel", 0.9, 5, 2.1, 0.8, false},
		{"not known of the first", "parallel", 0.9, 1, Real(nan), 0.8, false},
		{"not known of another", "parallel", 0.9, Real(nan), 2.1, 0.8, true},
		{"the straight line itself", "straight", 0.9, 0.1, 0.1, 0.1, false},
	} {
		a := &assessor{
			ranking: []Ranked{{Curve: c.first, Status: StatusRanked, FamWeight: c.weight}},
			prediction: &Prediction{Unit: "ln k", Curves: []CurvePrediction{
				{Curve: "power-prefactor", Ends: c.power}, {Curve: "parallel", Ends: c.parallel},
				{Curve: "straight", Ends: 1}, {Curve: "root-prefactor", Ends: c.another}}},
		}
		a.firstExtrapolates()
		if got := len(a.findings) == 1; got != c.want {
			t.Errorf("%s: reported %t", c.what, got)
		}
	}
}

// A miss beyond all measure is not printed in figures.
func TestAbsurdMiss(t *testing.T) {
	for _, c := range []struct {
		ends Real
		says string
	}{
		{20, "misses them by 20 on average"},
		{999, "misses them by 1.0×10^3 on average"},
		{1001, "misses them more than 1000 times as far as the straight line does"},
		{3e143, "misses them more than 1000 times as far as the straight line does"},
		{Real(math.Inf(1)), "misses them more than 1000 times as far as the straight line does"},
	} {
		a := &assessor{
			ranking: []Ranked{{Curve: "parallel", Status: StatusRanked, FamWeight: 1}},
			prediction: &Prediction{Unit: "ln k", Curves: []CurvePrediction{
				{Curve: "parallel", Ends: c.ends}, {Curve: "straight", Ends: 1}}},
		}
		a.firstExtrapolates()
		if len(a.findings) != 1 || !strings.Contains(a.findings[0].Message, c.says) {
			t.Errorf("%g: %+v, want %q", float64(c.ends), a.findings, c.says)
		}
	}
}

// bitten is a straight set of which limits at the cold end ask for less than the line.
func bitten() *dataset.Set {
	s := lineSet(8, 290, 340, 60e3, 0.03, 3)
	for i := range 4 {
		at := 270 + 5*float64(i)
		s.Points = append(s.Points, dataset.Point{File: s.Points[0].File, Row: 10 + i, T: at, Limit: "<",
			K: 0.85 * s.Points[0].K * math.Exp(-60e3/models.GasConstant*(1/at-1/290.)), Order: math.NaN()})
	}
	return s
}

// Limits stay in the fits without a temperature. R 4.2.2, -2 ln L of the line, and of the
// line with ln T, by optim and Newton's method on its gradient, without each measured
// temperature, without the two hottest and without the two coldest; the errors of what is
// left out.
func TestPredictionKeepsLimits(t *testing.T) {
	a := mustAssess(t, bitten(), quick())
	for _, c := range []struct {
		curve                      string
		leftOut, hot, cold, either float64
	}{
		{"straight", 0.0823027309691, 0.0971908388141, 0.1415912552115, 0.1214375203587},
		{"power-prefactor", 0.0623464430326, 0.2015268227663, 0.1187678445571, 0.1654068638162},
	} {
		p := a.Prediction.of(c.curve)
		reference.Close(t, c.curve+" left out", float64(p.LeftOut), c.leftOut, 1e-9)
		reference.Close(t, c.curve+" hot end", float64(p.HotEnd), c.hot, 1e-9)
		reference.Close(t, c.curve+" cold end", float64(p.ColdEnd), c.cold, 1e-9)
		reference.Close(t, c.curve+" ends", float64(p.Ends), c.either, 1e-9)
		if p.Linearised || p.Why != "" {
			t.Errorf("%+v", p)
		}
	}
	// Of more temperatures, and of curves that are no rivals, it is unknown with a reason.
	long := lineSet(refitted+1, 290, 340, 60e3, 0.03, 3)
	long.Points = append(long.Points, bitten().Points[8])
	for _, p := range mustAssess(t, long, quick()).Prediction.Curves {
		if p.LeftOut.Known() || !strings.Contains(p.Why, "not made for more than 30") {
			t.Errorf("%+v", p)
		}
	}
	for _, p := range a.Prediction.Curves {
		if p.LeftOut.Known() != (p.Why == "") {
			t.Errorf("%+v", p)
		}
	}
}
