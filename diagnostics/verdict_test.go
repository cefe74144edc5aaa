package diagnostics

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// The table of METHODS: the first rule that holds. ΔE = 2 kJ/mol for n = 1,
// tolerance 1 kJ/mol, so that |n| <= 0.5 is within it.
func TestJudge(t *testing.T) {
	wide := [2]float64{-1, 3}
	inf := math.Inf(1)
	for _, c := range []struct {
		band      [2]float64
		low, high float64
		second    bool
		want      State
	}{
		{[2]float64{0, 1}, 1.2, 5, false, BeyondPrefactor},
		{[2]float64{0, 1}, 1, 5, false, CurvedOpen}, // touches the edge: not missed
		{[2]float64{0, 1}, -4, -0.1, false, BeyondPrefactor},
		{[2]float64{0, 1}, 0.2, 0.9, false, WithinPrefactor},
		{[2]float64{0, 1}, 0.1, 0.3, false, WithinPrefactor}, // before straight-within
		{[2]float64{0, 1}, 0.2, 1.5, false, CurvedOpen},
		{[2]float64{0, 1}, 0.2, inf, false, CurvedOpen},
		{[2]float64{0, 1}, -0.3, 0.4, false, StraightWithin},
		{[2]float64{0, 1}, -0.3, 0.4, true, Unresolved}, // a second barrier stands against it
		{[2]float64{0, 1}, -0.3, 0.6, false, Unresolved},
		{[2]float64{0, 1}, -0.6, 0.3, false, Unresolved},
		{[2]float64{0, 1}, -inf, inf, false, Unresolved},
		{[2]float64{0, 1}, 0, 3, false, Unresolved}, // 0 is not excluded
		{wide, 1.2, 2.5, false, WithinPrefactor},
		{wide, -0.9, -0.2, false, WithinPrefactor},
		{wide, -2, -0.2, false, CurvedOpen},
		{wide, -3, -1.1, false, BeyondPrefactor},
	} {
		r := Rule{Band: c.band, ToleranceKJ: 1, ChangePerUnit: 2}
		if got := r.Judge(c.low, c.high, c.second); got != c.want {
			t.Errorf("n in %g to %g, band %v, second %t: %s, want %s", c.low, c.high, c.band, c.second, got, c.want)
		}
	}
	r := Rule{Band: [2]float64{0, 1}, ToleranceKJ: 1, ChangePerUnit: 2}
	if n := testing.AllocsPerRun(100, func() { r.Judge(-0.3, 0.4, false) }); n != 0 {
		t.Errorf("Judge makes %g allocations", n)
	}
}

func TestMaterial(t *testing.T) {
	for _, c := range []struct {
		low, high float64
		open      fit.Open
		want      string
	}{
		{3, 5, "", "true"}, {-5, -3, "", "true"}, {-1, 1.9, "", "false"}, {1, 3, "", "nil"}, {-3, 3, "", "nil"},
		{3, math.NaN(), fit.OpenUpper, "true"}, {1, math.NaN(), fit.OpenUpper, "nil"}, {math.NaN(), math.NaN(), "", "nil"},
	} {
		got := "nil"
		if m := Material(fit.Estimate{Lower: c.low, Upper: c.high, Open: c.open}, 2); m != nil {
			got = map[bool]string{true: "true", false: "false"}[*m]
		}
		if got != c.want {
			t.Errorf("ΔE in %g to %g: %s, want %s", c.low, c.high, got, c.want)
		}
	}
}

func TestParseBandAndTolerance(t *testing.T) {
	if b, err := ParseBand(" 0 .. 3 "); err != nil || b != [2]float64{0, 3} {
		t.Errorf("%v, %v", b, err)
	}
	for _, bad := range []string{"", "1", "0.5..1", "-2..-1", "1..0", "a..b", "0..inf", "NaN..1"} {
		if b, err := ParseBand(bad); err == nil {
			t.Errorf("band %q was read as %v", bad, b)
		}
	}
	for _, c := range []struct {
		text    string
		e, want float64
	}{
		{"", 60, 3}, {"", -60, 3}, {"", 4, 0.5}, {"5%", 4, 0.2}, {"10 %", 60, 6}, {"0.5kJ/mol", 60, 0.5}, {"2 kJ/mol", 4, 2},
	} {
		tol, err := ParseTolerance(c.text)
		if got := tol.Apply(c.e); err != nil || !(math.Abs(got-c.want) < 1e-14) {
			t.Errorf("tolerance %q at E = %g: %g, %v, want %g", c.text, c.e, got, err, c.want)
		}
	}
	for _, bad := range []string{"5", "x%", "-1%", "0kJ/mol", "NaN%", "3 kcal", "infkJ/mol"} {
		if tol, err := ParseTolerance(bad); err == nil {
			t.Errorf("tolerance %q was read as %+v", bad, tol)
		}
	}
}

func TestTestable(t *testing.T) {
	s := sampleOf(t, fit.Relative, []float64{300, 300, 310, 320}, make([]float64, 4), nil)
	if ok, more, why := Testable(s, nil); ok || more != 1 || !strings.Contains(why, "3 distinct temperatures") {
		t.Errorf("%t, %d, %q", ok, more, why)
	}
	s = sampleOf(t, fit.Relative, span(280, 340, 4), []float64{1, 2, 3, 4.1}, nil)
	if ok, _, why := Testable(s, fitNamed(t, s, "power-prefactor")); !ok {
		t.Errorf("four temperatures can be tested: %s", why)
	}
	// Errors additive in k: six temperatures, but k stands out of the noise at two.
	k := []float64{0.2, -0.1, 0.1, 0.3, 5, 40}
	in, err := fit.NewSample(fit.StatedAbsolute, span(280, 340, 6), k, []float64{1, 1, 1, 1, 1, 1})
	if err != nil {
		t.Fatal(err)
	}
	if ok, more, why := Testable(in, fitNamed(t, in, "power-prefactor")); ok || more != 2 || !strings.Contains(why, "three times") {
		t.Errorf("%t, %d, %q", ok, more, why)
	}
}

// One rule says what one temperature is: settings read in two units, which differ in
// their last digits, count as one wherever temperatures are counted.
func TestOneRuleForOneTemperature(t *testing.T) {
	var temps, lnK []float64
	for i, c := range []float64{25, 35, 45} {
		celsius, fahrenheit := c+273.15, (c*1.8+32+459.67)/1.8
		temps = append(temps, celsius, fahrenheit*(1+1e-13))
		lnK = append(lnK, float64(i), float64(i)+0.1)
	}
	s := sampleOf(t, fit.Relative, temps, lnK, nil)
	if ok, more, _ := Testable(s, nil); ok || more != 1 || s.DistinctT() != 3 {
		t.Errorf("%d temperatures, testable %t with %d more", s.DistinctT(), ok, more)
	}
	if r := fit.Fit(s, models.Parallel{}); r.Usable() && r.Status != fit.NotIdentified {
		t.Errorf("four parameters from three temperatures: %v", r.Status)
	}
	if pe := NewPureError(s); pe.Temperatures != 3 || pe.DF != 3 {
		t.Errorf("pure error %+v", pe)
	}
	k := make([]float64, len(lnK))
	for i := range k {
		k[i] = math.Exp(lnK[i])
	}
	d, err := prepare(setOf(temps, k, nil), fit.Relative, ReplicatesMeans)
	if err != nil || d.means == nil || d.means.Len() != 3 {
		t.Fatalf("means %+v, %v", d, err)
	}
	// With errors additive in k the temperatures that stand out of the noise count.
	eight := sampleOf(t, fit.StatedAbsolute, append(temps, 328.15, 338.15), append(lnK, -9, -9), nil)
	above := *fit.Fit(eight, models.Straight())
	above.Sigma, above.Cov, above.Nu = 1, []float64{1}, 3
	above.Fitted = append(append([]float64(nil), 5, 5, 5, 5, 5, 5), -9, -9)
	if ok, more, why := Testable(eight, &above); ok || more != 1 || !strings.Contains(why, "3 temperatures") {
		t.Errorf("%t, %d, %q", ok, more, why)
	}
}

// decideOn runs the tests on a sample and decides.
func decideOn(t testing.TB, s *fit.Sample, tolerance string) (Verdict, []Finding, VerdictInput) {
	t.Helper()
	tol, err := ParseTolerance(tolerance)
	if err != nil {
		t.Fatal(err)
	}
	power, straight := fitNamed(t, s, "power-prefactor"), fitNamed(t, s, "straight")
	low, high := s.Range()
	in := VerdictInput{
		Sample:  s,
		Test:    TestExponent(s, power, nil, zeroToOne),
		Rule:    Rule{Band: zeroToOne.Band, ToleranceKJ: tol.Apply(straight.P[1] / 1000), ChangePerUnit: changePerUnit(low, high)},
		Ranking: rankNamed(t, s, ByAICc, "straight", "root-prefactor", "linear-prefactor", "power-prefactor", "parallel"),
	}
	if b := NewSecondBarrierTest(s, straight, nil); b != nil {
		in.SecondBarrier = b.Run()
	}
	v, fs := Decide(in)
	return v, fs, in
}

// curve makes ln k with E_loc(300 K) = 60 kJ/mol, an exponent and fixed scatter.
func curve(temps []float64, n, sd float64) []float64 {
	y := make([]float64, len(temps))
	models.PowerPrefactor{}.LnK(300, temps, []float64{1, 60e3, n}, y, nil)
	rng := rand.New(rand.NewPCG(1, 17))
	for i := range y {
		y[i] += sd * rng.NormFloat64()
	}
	return y
}

// Each verdict says what METHODS says it must.
func TestSentences(t *testing.T) {
	wide, narrow := span(250, 1000, 12), span(290, 320, 8)
	for _, c := range []struct {
		name  string
		temps []float64
		n, sd float64
		state State
		trend string
		says  []string
	}{
		{"beyond, rising", wide, 4, 0.02, BeyondPrefactor, "rises", []string{"Curved: more than one constant barrier", "E rises with T, by", "does not by itself prove a second barrier", "parallel path, tunnelling", "steps in series, inactivation or a diffusion limit cannot", "between 250 and 1000 K"}},
		{"beyond, falling", wide, -4, 0.02, BeyondPrefactor, "falls", []string{"E falls with T, by", "steps in series, inactivation, a diffusion limit", "a parallel path or tunnelling cannot"}},
		{"within", wide, 0.5, 0.01, WithinPrefactor, "rises", []string{"a T-dependent prefactor explains it", "prefactor band 0 to 1"}},
		{"open", wide, 1, 0.02, CurvedOpen, "rises", []string{"Curved: cause open", "n up to", "is not excluded"}},
		{"straight", wide, 0, 0.003, StraightWithin, "none", []string{"Straight within ± 3", "Smooth curvature that would matter is excluded inside this range"}},
		{"unresolved", narrow, 0, 0.03, Unresolved, "none", []string{"No curvature detected", "E may still change by −", " to +", "would have shown a change of", "80 % power"}},
	} {
		s := sampleOf(t, fit.Relative, c.temps, curve(c.temps, c.n, c.sd), nil)
		v, _, in := decideOn(t, s, "")
		t.Logf("%s: %s", c.name, v.Sentence)
		if v.State != c.state || v.ETrend != c.trend {
			t.Errorf("%s: %s, E %s, want %s, %s (n in %.3g to %.3g)", c.name, v.State, v.ETrend, c.state, c.trend, in.Test.Exponent.Lower, in.Test.Exponent.Upper)
		}
		for _, says := range c.says {
			if !strings.Contains(v.Sentence, says) {
				t.Errorf("%s: %q does not say %q", c.name, v.Sentence, says)
			}
		}
		if strings.Contains(v.Sentence, "NaN") || strings.Contains(v.Sentence, "Inf") {
			t.Errorf("%s: %q", c.name, v.Sentence)
		}
	}

	s := sampleOf(t, fit.Relative, span(280, 300, 3), make([]float64, 3), nil)
	v, _ := Decide(VerdictInput{Sample: s, Test: unknownExponentTest(), Untestable: true, More: 1, Why: "the data have 3 distinct temperatures"})
	if v.State != Untestable || v.Material != nil || !strings.Contains(v.Sentence, "at least 1 more temperature.") {
		t.Errorf("%+v", v)
	}
}

// Open ends of a profile are said in words.
func TestSentenceWithOpenEnds(t *testing.T) {
	s := sampleOf(t, fit.Relative, span(290, 320, 8), curve(span(290, 320, 8), 0, 0.03), nil)
	in := VerdictInput{Sample: s, Rule: Rule{Band: zeroToOne.Band, ToleranceKJ: 3, ChangePerUnit: 0.25}}
	nan := math.NaN()
	for open, says := range map[fit.Open]string{fit.OpenUpper: "anything above", fit.OpenLower: "anything below", fit.OpenBoth: "any amount"} {
		in.Test = unknownExponentTest()
		in.Test.Exponent = fit.Estimate{Value: 1, StdError: 1, Lower: -30, Upper: 30, Open: open}
		in.Test.Change = fit.Estimate{Value: 1, StdError: 1, Lower: -8, Upper: 8, Open: open}
		in.Test.PValue = nan
		if v, _ := Decide(in); v.State != Unresolved || !strings.Contains(v.Sentence, says) {
			t.Errorf("open %s: %s: %q", open, v.State, v.Sentence)
		}
	}
}

// When only the normal p-value is below 0.05 the sentence says so.
func TestRestsOnStated(t *testing.T) {
	s := sampleOf(t, fit.Relative, span(250, 1000, 8), curve(span(250, 1000, 8), 3, 0.02), nil)
	_, _, in := decideOn(t, s, "")
	for _, free := range []float64{0.2, 0.001, math.NaN()} {
		in.Test.PScaleFree = free
		v, fs := Decide(in)
		said := strings.Contains(v.Sentence, "This rests on the stated uncertainties.")
		found := false
		for _, f := range fs {
			found = found || f.Code == "rests-on-stated"
		}
		if want := free == 0.2; said != want || found != want {
			t.Errorf("scale-free p = %g: said %t, found %t", free, said, found)
		}
	}
}

func TestRecommend(t *testing.T) {
	yes, no := true, false
	row := func(curve string, params int, adequate *bool, reason string) Ranked {
		return Ranked{Curve: curve, Params: params, Status: StatusRanked, Adequate: adequate, Reason: reason}
	}
	ranking := []Ranked{
		row("parallel", 4, &yes, notIdentified+"E2 runs off"),
		row("power-prefactor", 3, &no, ""),
		row("linear-prefactor", 2, &no, ""),
		row("straight", 2, &no, ""),
	}
	series := append([]Ranked{}, ranking...)
	series = append(series, Ranked{Curve: "series", Params: 4, Status: StatusFitted})
	for _, c := range []struct {
		state   State
		ranking []Ranked
		want    string
		why     bool
	}{
		{Untestable, ranking, "straight", true},
		{StraightWithin, ranking, "straight", true},
		{Unresolved, ranking[3:], "straight", false},
		{WithinPrefactor, ranking, "power-prefactor", true},
		{CurvedOpen, ranking[2:], "linear-prefactor", false},
		{BeyondPrefactor, ranking, "", true}, // unidentified and inadequate: none
		{BeyondPrefactor, series, "series", true},
		{Unresolved, nil, "straight", false},
	} {
		curve, why := Recommend(c.state, c.ranking)
		if curve != c.want || (why != "") != c.why {
			t.Errorf("%s: %q (%s), want %q", c.state, curve, why, c.want)
		}
	}
}

// False alarms of the verdict on straight data: a curved state in 5 %; verdict or
// second-barrier finding in 7 to 8 %, as METHODS §4.3 and the finding say.
func TestVerdictFalseAlarms(t *testing.T) {
	const sets = 20000
	for _, n := range []int{5, 8, 12} {
		s := sampleOf(t, fit.Relative, span(280, 340, n), make([]float64, n), nil)
		b := NewSecondBarrierTest(s, nil, nil)
		scratch := make([]float64, b.ScratchLen())
		rule := Rule{Band: zeroToOne.Band, ToleranceKJ: 3, ChangePerUnit: changePerUnit(280, 340)}
		crit := criticalValue(0.95, n-3, false)
		rng := rand.New(rand.NewPCG(13, uint64(n)))
		curved, either := 0, 0
		for range sets {
			lineNoise(rng, s, 0.03, s.Y)
			f := fit.Fit(s, models.PowerPrefactor{})
			half := crit * math.Sqrt(f.Cov[8])
			found := b.Found(s.Y, scratch)
			c := rule.Judge(f.P[2]-half, f.P[2]+half, found).Curved()
			if c {
				curved++
			}
			if c || found {
				either++
			}
		}
		se := math.Sqrt(0.05 * 0.95 / sets)
		if rate := float64(curved) / sets; !(math.Abs(rate-0.05) <= 4*se) {
			t.Errorf("N = %d: curved in %.4f of straight sets, want 0.05 ± %.4f", n, rate, 4*se)
		}
		// Binomial error and that of the 19,999 draws of the null. Ten times the
		// sets and twenty times the draws gave 0.078 to 0.079 for N = 5 to 20, and
		// 0.088 for N = 4.
		se = math.Sqrt(0.08 * 0.92 * (1./sets + 1./secondBarrierDraws))
		if rate := float64(either) / sets; !(rate >= 0.07-4*se && rate <= 0.08+4*se) {
			t.Errorf("N = %d: verdict or finding in %.4f of straight sets, want 0.07 to 0.08", n, rate)
		}
	}
}

// Numbers are printed with a true minus sign, and a rounded zero has none.
func TestNumber(t *testing.T) {
	for _, c := range []struct {
		x    float64
		d    int
		want string
	}{{-8.6, 0, "−9"}, {13.7, 0, "+14"}, {-0.004, 1, "0.0"}, {0.004, 1, "0.0"}, {0.25, 2, "+0.25"}} {
		if got := signed(c.x, c.d); got != c.want {
			t.Errorf("signed(%g, %d) = %q, want %q", c.x, c.d, got, c.want)
		}
	}
}

// Why the ranking's first is not recommended: relatives of one family within Δ < 2 are not
// told apart; nothing else is excused by a small Δ.
func TestWhyNotTheFirst(t *testing.T) {
	straight := Ranked{Curve: "straight", Family: "fixed-exponent", Status: StatusRanked, Params: 2}
	linear := Ranked{Curve: "linear-prefactor", Family: "fixed-exponent", Status: StatusRanked, Params: 2}
	power := Ranked{Curve: "power-prefactor", Family: "power", Status: StatusRanked, Params: 3}
	for _, c := range []struct {
		first Ranked
		delta Real
		want  string
	}{
		{linear, 0.5, "linear-prefactor ranks first by Δ = 0.50, too little to tell the two apart"},
		{linear, 2.5, "no test finds curvature"},
		{power, 0.5, "no test finds curvature"},
	} {
		second := straight
		second.Delta = c.delta
		if curve, why := Recommend(Unresolved, []Ranked{c.first, second}); curve != "straight" || !strings.Contains(why, c.want) {
			t.Errorf("%s first, Δ = %g: %s is recommended, %s", c.first.Curve, c.delta, curve, why)
		}
	}
}
