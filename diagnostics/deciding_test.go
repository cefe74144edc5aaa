package diagnostics

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// publishedSet is one of the synthetic sets, its rows numbered from 2.
func publishedSet(t testing.TB, name string, stated bool) *dataset.Set {
	t.Helper()
	d := reference.Synthetic(t, name)
	if !stated {
		return setOf(d.T, d.K, nil)
	}
	return setOf(d.T, d.K, d.SigmaK)
}

// Every omission against R's lm of what is left (golden_leaveout.csv), one at a time.
func TestLeavingOutAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_leaveout.csv")
	for _, c := range []struct {
		set, fit   string
		model      fit.ErrorModel
		replicates string
		stated     bool
		labs       bool
		tol        float64
		least      int // comparisons
	}{
		{set: "s1_straight", fit: "relative", least: 12, tol: 1e-8},
		{set: "s2_tn_curved", fit: "relative", least: 16, tol: 1e-8},
		{set: "s5_hetero", fit: "stated", model: fit.Stated, stated: true, least: 15, tol: 1e-8},
		{set: "s5_hetero", fit: "scaled", model: fit.Scaled, stated: true, least: 15, tol: 1e-8},
		{set: "s5_hetero", fit: "absolute", model: fit.Absolute, least: 3, tol: 1e-6},
		{set: "s6_replicates", fit: "means", least: 31, tol: 1e-8},
		{set: "s6_replicates", fit: "points", replicates: ReplicatesIndependent, least: 31, tol: 1e-8},
		{set: "s6_replicates", fit: "sources", labs: true, replicates: ReplicatesIndependent, least: 31, tol: 1e-8},
	} {
		t.Run(c.set+" "+c.fit, func(t *testing.T) {
			set := publishedSet(t, c.set, c.stated)
			if c.labs {
				for i := range set.Points {
					set.Points[i].Source = string(rune('A' + i%3))
				}
			}
			o := quick()
			o.ErrorModel = c.model
			if c.replicates != "" {
				o.Replicates = c.replicates
			}
			a := mustAssess(t, set, o)
			compared := 0
			for _, f := range a.Influence {
				what := fmt.Sprintf("T%g", float64(f.T))
				if len(f.Rows) == 1 {
					what = fmt.Sprintf("row%d", f.Rows[0])
				}
				for q, got := range map[string]Real{"n": f.Exponent, "se": f.StdError, "p": f.PValue} {
					want, ok := g[reference.Key{Dataset: c.set, Fit: c.fit, Quantity: q + ":" + what}]
					if !ok {
						if c.fit != "absolute" {
							t.Fatalf("R has no %s of %s", q, what)
						}
						continue
					}
					compared++
					reference.Close(t, q+" without "+what, float64(got), want, c.tol)
				}
			}
			per := 3
			if c.fit == "absolute" {
				per = 2
			}
			if compared != per*c.least {
				t.Errorf("%d numbers compared, want %d", compared, per*c.least)
			}
		})
	}
}

// Leverage, Cook's distance and studentised residuals of the exponent test's curve
// against R's influence measures (golden_influence.csv), and Bonferroni by hand.
func TestInfluenceAgainstR(t *testing.T) {
	a := mustAssess(t, publishedSet(t, "s1_straight", false), quick())
	compared := 0
	for _, r := range reference.Records(t, "golden_influence.csv") {
		if r["dataset"] != "s1_straight" || r["fit"] != "mod" {
			continue
		}
		f := a.Influence[int(reference.Number(t, r["i"]))-1]
		reference.Close(t, "leverage", float64(f.Leverage), reference.Number(t, r["leverage"]), 1e-9)
		reference.Close(t, "studentised", float64(f.Studentised), reference.Number(t, r["rstudent"]), 1e-8)
		reference.Close(t, "Cook", float64(f.Cook), reference.Number(t, r["cooks"]), 1e-8)
		compared++
	}
	if compared != 12 {
		t.Errorf("%d points compared", compared)
	}
	// 2*pt(-6, 11) = 8.926129204069127e-05, 2*pnorm(-3) = 0.0026997960632601892 (R 4.2.2).
	reference.Close(t, "t", outlierP(-6, 10, 12, false), 8.926129204069127e-04, 1e-12)
	reference.Close(t, "normal", outlierP(3, 10, 1, true), 0.026997960632601892, 1e-12)
	if p := outlierP(0.1, 10, 12, false); p != 1 {
		t.Errorf("p = %g", p)
	}
	if p := outlierP(5, 10, 1, false); !math.IsNaN(p) {
		t.Errorf("without a degree of freedom for the others p = %g", p)
	}
}

// The state without a temperature is that of the data without its row.
func TestStateWithoutIsThatOfTheRest(t *testing.T) {
	designs := &DesignCache{}
	for _, name := range []string{"s1_straight", "s2_tn_curved", "s4_series", "s6_replicates", "s8_tiny6", "noisy"} {
		var set *dataset.Set
		if name == "noisy" { // E of the line, and with it the tolerance, moves by parts of ten
			set = lineSet(8, 290, 345, 60000, 0.2, 1)
		} else {
			set = publishedSet(t, name, false)
		}
		tolerances := []string{""}
		for kj := 0.5; kj < 12; kj *= 1.06 {
			tolerances = append(tolerances, fmt.Sprintf("%gkJ/mol", kj))
		}
		for share := 5.; share < 500 && name == "noisy"; share *= 1.02 { // of E, that of the rest
			tolerances = append(tolerances, fmt.Sprintf("%g%%", share))
		}
		for i, tolerance := range tolerances {
			o := lean()
			o.Tolerance = tolerance
			if o.Designs = designs; i == 0 && name == "s6_replicates" { // fits of their own
				o.ErrorModel = fit.Absolute
			}
			a := mustAssess(t, set, o)
			second := a.Curvature.SecondBarrier != nil && a.Curvature.SecondBarrier.PValue < secondBarrierLevel
			for _, f := range a.Influence {
				rest := *set
				rest.Points = slices.Clone(set.Points)
				for i := range rest.Points {
					if slices.Contains(f.Rows, rest.Points[i].Row) {
						rest.Points[i].Used = false
					}
				}
				s, err := Screen(&rest, o)
				if err != nil {
					t.Fatal(err)
				}
				want := s.Judged
				if want == StraightWithin && second { // held, not repeated
					want = Unresolved
				}
				if s.Judged != Untestable {
					reference.Close(t, "n", float64(f.Exponent), s.Exponent.Exponent.Value, 1e-7)
					reference.Close(t, "p", float64(f.PValue), s.Exponent.PValue, 1e-6)
				}
				if f.State != want {
					t.Errorf("%s, tolerance %q, without rows %v: %s, want %s", name, tolerance, f.Rows, f.State, want)
				}
			}
		}
	}
}

// bentAtTheEnd is a straight set whose hottest point is off by a factor.
func bentAtTheEnd(factor float64) *dataset.Set {
	s := lineSet(10, 290, 345, 60000, 0.004, 1)
	s.Points[9].K *= factor
	return s
}

func TestDecidingPoint(t *testing.T) {
	a := mustAssess(t, bentAtTheEnd(1.03), quick())
	if !a.Verdict.State.Curved() {
		t.Fatalf("%s", a.Verdict.Sentence)
	}
	var found []Finding
	for _, f := range a.Findings {
		if f.Code == "deciding-point" {
			found = append(found, f)
		}
	}
	if len(found) != 1 || !slices.Contains(found[0].Rows, 11) || !strings.Contains(found[0].Message, "line 11 at 345 K") {
		t.Errorf("%+v", found)
	}
	for _, f := range a.Influence {
		if f.Deciding && (f.State.Curved() || math.Abs(float64(f.Exponent)) >= math.Abs(float64(a.Curvature.Exponent.Value))/2 && f.Exponent*a.Curvature.Exponent.Value > 0) {
			t.Errorf("%+v", f)
		}
	}
}

// The rule, case by case.
func TestDecides(t *testing.T) {
	o := &omitter{a: &assessor{power: &fit.Result{P: []float64{0, 0, 10}}}, whole: BeyondPrefactor}
	for _, c := range []struct {
		x    omission
		want bool
	}{
		{omission{n: 4.9, state: Unresolved, testable: true}, true},
		{omission{n: 5.1, state: Unresolved, testable: true}, false}, // a mere flip
		{omission{n: -6, state: StraightWithin, testable: true}, true},
		{omission{n: 4.9, state: CurvedOpen, testable: true}, false},
		{omission{n: -11, state: BeyondPrefactor, testable: true}, false},
		{omission{n: 1, state: Untestable}, false},
	} {
		if got := o.decides(c.x); got != c.want {
			t.Errorf("%+v: %t", c.x, got)
		}
	}
	o.whole = Unresolved
	if o.decides(omission{n: 1, state: Unresolved, testable: true}) {
		t.Error("a verdict that is not curved cannot hang on a point")
	}
}

func TestOutlier(t *testing.T) {
	s := lineSet(12, 290, 345, 60000, 0.004, 3)
	s.Points[5].K *= 0.9
	a := mustAssess(t, s, quick())
	i := slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "outlier" })
	if i < 0 {
		t.Fatal("no outlier")
	}
	if f := a.Findings[i]; !slices.Equal(f.Rows, []int{7}) || !strings.Contains(f.Message, "line 7 at 315 K lies") || !strings.Contains(f.Message, "below") {
		t.Errorf("%+v", f)
	}
	for row, f := range map[int]float64{20: 1.001, 21: 0.999} { // a mean of three rows
		p := s.Points[5]
		p.Row, p.K = row, p.K*f
		s.Points = append(s.Points, p)
	}
	a = mustAssess(t, s, quick())
	if i = slices.IndexFunc(a.Findings, func(f Finding) bool { return f.Code == "outlier" }); i < 0 || !strings.Contains(a.Findings[i].Message, "21 at 315 K lie ") {
		t.Errorf("three rows: %+v", a.Findings)
	}
	quiet := mustAssess(t, lineSet(12, 290, 345, 60000, 0.004, 3), quick())
	for _, code := range []string{"outlier", "deciding-point"} {
		if quiet.finding(code) {
			t.Errorf("%s in quiet data", code)
		}
	}
}

// Borderline is said where p is near 0.05 and single temperatures turn the verdict.
func TestBorderline(t *testing.T) {
	said := 0
	for seed := range uint64(100) {
		n := 6 + 2*int(seed%3)
		a := mustAssess(t, lineSet(n, 290, 345, 60000, 0.01, seed), lean())
		flips := 0
		for _, f := range a.Influence {
			if f.State.Curved() != a.Verdict.State.Curved() {
				flips++
			}
		}
		p := a.Curvature.PValue
		want := p >= 0.01 && p <= 0.1 && flips > 0
		if a.finding("borderline") != want {
			t.Errorf("seed %d: p = %g, %d flips: borderline is %t", seed, float64(p), flips, !want)
		}
		for _, f := range a.Findings {
			if f.Code == "borderline" {
				said++
				if !strings.Contains(f.Message, fmt.Sprintf("for %d of the %d", flips, n)) {
					t.Errorf("seed %d: %d flips: %s", seed, flips, f.Message)
				}
			}
		}
	}
	if said == 0 {
		t.Error("the case is not met")
	}
	said = 0
	for seed := range uint64(40) { // nothing can be left out of four
		a := mustAssess(t, lineSet(4, 290, 330, 60000, 0.01, seed), lean())
		if p := a.Curvature.PValue; a.finding("borderline") != (p >= 0.01 && p <= 0.1) {
			t.Errorf("four temperatures, p = %g", float64(p))
		} else if a.finding("borderline") {
			said++
		}
	}
	if said == 0 {
		t.Error("the case of four temperatures is not met")
	}
}

// Nothing can be left out where there is no test, nothing is an outlier in exact data,
// and four temperatures leave nothing to test.
func TestLeavingOutWithoutATest(t *testing.T) {
	three := mustAssess(t, lineSet(3, 290, 330, 60000, 0.01, 1), quick())
	if len(three.Influence) != 0 || len(three.TemperatureError) != 0 {
		t.Errorf("%v %v", three.Influence, three.TemperatureError)
	}
	for _, f := range mustAssess(t, lineSet(4, 290, 330, 60000, 0.01, 1), quick()).Influence {
		if f.State != Untestable || f.Deciding || f.PValue.Known() || !f.Exponent.Known() {
			t.Errorf("%+v", f)
		}
	}
	exact := mustAssess(t, lineSet(9, 290, 330, 60000, 0, 1), quick())
	for _, code := range []string{"outlier", "deciding-point", "borderline", "temperature-error-explains"} {
		if exact.finding(code) {
			t.Errorf("%s in exact data", code)
		}
	}
}

// Of many entries only what is found is listed.
func TestManyAreNotListed(t *testing.T) {
	s := lineSet(mostListed+5, 290, 345, 60000, 0.004, 3)
	s.Points[500].K *= 2
	a := mustAssess(t, s, quick())
	if len(a.Influence) != 1 || !slices.Equal(a.Influence[0].Rows, []int{502}) || !a.finding("outlier") {
		t.Errorf("%d listed", len(a.Influence))
	}
}

func BenchmarkReferee(b *testing.B) {
	for _, n := range []int{10, 20} {
		s := bentAtTheEnd(1.03)
		if n == 20 {
			s = lineSet(20, 290, 345, 60000, 0.004, 3)
		}
		for i := range s.Points {
			s.Points[i].Order = float64(i * 7 % 11)
		}
		a, err := newAssessor(s, quick())
		if err != nil {
			b.Fatal(err)
		}
		if err := a.fit(); err != nil {
			b.Fatal(err)
		}
		a.rank()
		a.test()
		a.decide()
		sentence := a.verdict.Sentence
		for name, f := range map[string]func(){
			"influence": a.influences, "temperature": a.temperatureErrors, "order": a.runOrder, "maximum": a.rateMaximum,
		} {
			b.Run(fmt.Sprintf("%s/N=%d", name, n), func(b *testing.B) {
				b.ReportAllocs()
				for b.Loop() {
					a.findings, a.influence, a.temperature, a.verdict.Sentence = nil, nil, nil, sentence
					f()
				}
			})
		}
	}
}
