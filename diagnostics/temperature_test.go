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

// Slopes, and roots found by R's uniroot over lm at shifted temperatures.
func TestTemperatureErrorAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_leaveout.csv")
	roots := 0
	for _, name := range []string{"s2_tn_curved", "s3_parallel", "s4_series", "s7_vft"} {
		a := mustAssess(t, publishedSet(t, name, false), quick())
		if a.Verdict.State != BeyondPrefactor || len(a.TemperatureError) != 3 {
			t.Fatalf("%s: %s, %d shapes", name, a.Verdict.State, len(a.TemperatureError))
		}
		for _, e := range a.TemperatureError {
			reference.Close(t, name+" "+e.Shape+" dn", float64(e.Slope), g.Of(t, name, "relative", e.Shape+":dn"), 1e-6)
			for what, got := range map[string]Real{"band": e.ToBand, "lost": e.Lost} {
				want := g.Of(t, name, "relative", e.Shape+":"+what)
				if math.IsNaN(want) {
					if got.Known() {
						t.Errorf("%s %s %s: %g, and R finds no root", name, e.Shape, what, float64(got))
					}
					continue
				}
				roots++
				reference.Close(t, name+" "+e.Shape+" "+what, float64(got), want, 1e-7)
			}
		}
	}
	if roots < 4 {
		t.Errorf("%d roots compared", roots)
	}
}

// bowed is one barrier read with a thermometer that is delta too high in the middle.
func bowed(delta, sd float64) *dataset.Set {
	s := lineSet(11, 290, 320, 90000, sd, 4)
	for i := range s.Points {
		s.Points[i].T += delta * shapeOf(shapeBow, 290, 320, s.Points[i].T)
	}
	return s
}

// The error that was put in takes n back to the band: on exact data, to 0 but for the
// change of the shape by the error itself.
func TestTemperatureErrorIsFound(t *testing.T) {
	for _, delta := range []float64{0.2, -0.3} {
		a := mustAssess(t, bowed(delta, 0), quick())
		e := a.TemperatureError[2]
		edge := 0.0 // nearest edge of the band, from which n is 0 away, or 1
		if a.Curvature.Exponent.Value > 0 {
			edge = 1
		}
		reference.Within(t, "delta", float64(e.ToBand)+edge/float64(e.Slope), delta, 0.01*math.Abs(delta))
	}
}

// Every error model, offsets and repeats: at δ the verdict is lost, short of it not.
func TestVerdictIsLostThere(t *testing.T) {
	set := bowed(0.2, 0.001)
	for i := range set.Points {
		set.Points[i].UK, set.Points[i].Level = 0.001*set.Points[i].K, dataset.LevelStandard
	}
	three := bowed(0.2, 0.001)
	for i := range three.Points {
		three.Points[i].Source = string(rune('A' + i%2))
	}
	for _, c := range []struct {
		set   *dataset.Set
		model fit.ErrorModel
	}{{set, fit.Relative}, {set, fit.Stated}, {set, fit.Scaled}, {set, fit.Absolute}, {set, fit.StatedAbsolute}, {three, fit.Relative}} {
		o := quick()
		o.ErrorModel = c.model
		a := mustAssess(t, c.set, o)
		e := a.TemperatureError[2]
		if !a.Verdict.State.Curved() || !e.Lost.Known() {
			t.Fatalf("%s: %s, lost at %g K", c.model, a.Verdict.State, float64(e.Lost))
		}
		for _, f := range []struct {
			share float64
			want  bool
		}{{0.999, true}, {1.001, false}} {
			moved := *c.set
			moved.Points = slices.Clone(c.set.Points)
			for i, p := range moved.Points {
				moved.Points[i].T -= f.share * float64(e.Lost) * shapeOf(shapeBow, 290, 320, p.T)
			}
			if s, err := Screen(&moved, o); err != nil || (s.Judged == a.Verdict.State) != f.want {
				t.Errorf("%s, %g of the error: %v %v", c.model, f.share, s.Judged, err)
			}
		}
	}
}

func TestTemperatureErrorExplains(t *testing.T) {
	set := bowed(0.09, 0.001)
	a := mustAssess(t, set, quick())
	if !a.finding("temperature-error-explains") || !a.TemperatureError[2].Explains || a.TemperatureError[0].Explains ||
		!strings.Contains(a.Verdict.Sentence, "A thermometer that reads 0.0") {
		t.Errorf("%+v\n%s", a.TemperatureError, a.Verdict.Sentence)
	}
	o := quick()
	o.ThermometerError = "bow=0.01K"
	if b := mustAssess(t, set, o); b.finding("temperature-error-explains") || strings.Contains(b.Verdict.Sentence, "A thermometer that reads") {
		t.Error("explained by more than the thermometer may be wrong by")
	}
	// u(T) of the data stands in for the default, where every point has one.
	for i := range set.Points {
		set.Points[i].UT = 0.01
	}
	if c := mustAssess(t, set, quick()); c.TemperatureError[0].Working != 0.01 || c.TemperatureError[2].Working != 0.01 || c.finding("temperature-error-explains") {
		t.Errorf("%+v", c.TemperatureError)
	}
	set.Points[3].UT = 0
	if c := mustAssess(t, set, quick()); c.TemperatureError[2].Working != 0.1 {
		t.Errorf("%+v", c.TemperatureError)
	}
}

func TestParseThermometerError(t *testing.T) {
	for s, want := range map[string]ThermometerError{
		"":                         DefaultThermometerError,
		"bow=0.02K":                {0.5, 0.5, 0.02},
		"gain = 1 K, offset=0K":    {0, 1, 0.1},
		"offset=2K,gain=3K,bow=4K": {2, 3, 4},
	} {
		if got, err := ParseThermometerError(s); err != nil || got != want {
			t.Errorf("%q: %v %v", s, got, err)
		}
	}
	for _, s := range []string{"0.5K", "bow", "bow=0.1", "bow=-1K", "tilt=1K", "bow=1K,bow=2K", "bow=NaNK", "bow=InfK", "bow=0.1K,", "bow=0.1mK"} {
		if _, err := ParseThermometerError(s); err == nil {
			t.Errorf("%q was read", s)
		}
	}
}

func TestRootNear(t *testing.T) {
	for _, c := range []struct{ guess, root float64 }{{2, 2}, {2.5, 2}, {0.5, 2}, {-1, -2}, {60, 49}, {math.Inf(1), 30}} {
		calls := 0
		f := func(x float64) float64 { calls++; return (x - c.root) * (1 + 0.01*x*x) }
		reference.Close(t, "root", rootNear(c.guess, f(0), f), c.root, 1e-8)
		if calls > 40 {
			t.Errorf("%d calls", calls)
		}
	}
	for _, guess := range []float64{3, -3, math.NaN(), math.Inf(-1)} {
		if x := rootNear(guess, 1, func(x float64) float64 { return 1 + x*x }); !math.IsNaN(x) {
			t.Errorf("a root at %g of what has none", x)
		}
	}
	if x := rootNear(3, 1, func(float64) float64 { return math.NaN() }); !math.IsNaN(x) {
		t.Errorf("%g", x)
	}
	if x := rootNear(3, 0, nil); x != 0 {
		t.Errorf("%g", x)
	}
}

// Where all scatter is that of T, and u(T) is right, at most one set in a hundred hears
// that u(T) is too large, also where the line is much more uncertain at one end; where
// u(T) is stated four times too large nearly every set of twelve does. With errors in k
// σ̂ is no scatter of ln k, and there is nothing to compare.
func TestScatterBelowThermometer(t *testing.T) {
	const sets = 2000
	count := func(n int, high, stated float64, repeats int, model fit.ErrorModel, sets int) (hits int) {
		o := lean()
		o.ErrorModel = model
		for i := range sets {
			rng := rand.New(rand.NewPCG(uint64(i), 17))
			var ts, ks []float64
			for j := range n * repeats {
				ti := 250 + (high-250)*float64(j/repeats)/float64(n-1)
				at := ti + 0.2*rng.NormFloat64()
				ts, ks = append(ts, ti), append(ks, 1e-3*math.Exp(-60e3/models.GasConstant*(1/at-1/300.0)))
			}
			set := setOf(ts, ks, nil)
			for j := range set.Points {
				set.Points[j].UT = 0.2 * stated
			}
			hits += len(screened(t, set, o, (*assessor).scatterBelowThermometer))
		}
		return hits
	}
	limit := sets*thermometerLevel + 4*math.Sqrt(sets*thermometerLevel)
	for _, c := range []struct {
		n, repeats int
		high       float64
	}{{4, 1, 310}, {6, 1, 1000}, {12, 1, 1000}, {5, 3, 310}} {
		if hits := count(c.n, c.high, 1, c.repeats, fit.Relative, sets); float64(hits) > limit {
			t.Errorf("N = %d up to %g K, %d repeats: %d of %d sets hear of a u(T) that is right", c.n, c.high, c.repeats, hits, sets)
		}
	}
	if hits := count(12, 310, 4, 1, fit.Relative, 100); hits < 90 {
		t.Errorf("four times too large: found in %d of 100", hits)
	}
	if hits := count(8, 310, 4, 1, fit.Absolute, 10); hits > 0 {
		t.Errorf("errors in k: found in %d of 10", hits)
	}
}

// What is told is the error that is enough to take the verdict away, and what the verdict
// is then: the assessment of the temperatures put right by a little more.
func TestThermometerTellsWhatIsReached(t *testing.T) {
	for what, k := range map[string]struct {
		delta   float64
		reached State
		text    string
	}{
		"rises": {0.4, CurvedOpen, "curved-open"},
		"falls": {-0.4, StraightWithin, "no longer significant"},
	} {
		o := quick()
		o.ThermometerError = "bow=5K"
		a := mustAssess(t, bowed(k.delta, 0.001), o)
		if a.Verdict.State != BeyondPrefactor {
			t.Fatalf("%s: %s", what, a.Verdict.State)
		}
		n := a.Curvature.Exponent.Value
		if got := a.Verdict.State.Lost(n, a.Settings.PrefactorBand); got != k.text {
			t.Errorf("%s: %q", what, got)
		}
		bow := a.TemperatureError[2]
		for _, says := range []string{"would be enough to take this verdict away; " + kelvins(bow.ToBand) + " would bring n itself into the prefactor band."} {
			if !strings.Contains(a.Verdict.Sentence, says) {
				t.Errorf("%s: %q does not say %q", what, a.Verdict.Sentence, says)
			}
		}
		put := bowed(k.delta, 0.001)
		low, high := put.Points[0].T, put.Points[len(put.Points)-1].T
		for i := range put.Points {
			p := &put.Points[i]
			p.T -= 1.001 * float64(bow.Lost) * shapeOf(shapeBow, low, high, p.T)
		}
		if got := mustAssess(t, put, o).Verdict.State; got != k.reached {
			t.Errorf("%s: with temperatures put right the verdict is %s", what, got)
		}
	}
	if got := WithinPrefactor.Lost(1, [2]float64{0, 3}); got != "no longer significant" {
		t.Errorf("within-prefactor: %q", got)
	}
}

// An error beyond half of the range is none of a thermometer.
func TestThermometerWithinHalfTheRange(t *testing.T) {
	a := mustAssess(t, lineSet(12, 290, 294, 60e3, 0.02, 3), quick())
	b := mustAssess(t, bowed(0.4, 0.001), quick())
	found := 0
	for _, s := range []*Assessment{a, b} {
		half := float64(s.Dataset.TMax-s.Dataset.TMin) / 2
		for _, e := range s.TemperatureError {
			for _, delta := range []Real{e.ToBand, e.Lost} {
				if delta.Known() {
					found++
				}
				if math.Abs(float64(delta)) > half {
					t.Errorf("%s: δ = %g K in a range of %g K", e.Shape, float64(delta), 2*half)
				}
			}
		}
	}
	if found == 0 {
		t.Error("no δ at all")
	}
}

// The line says the shape that needs the least, its sign, and both errors; what is
// granted is told where it is not the default.
func TestThermometerText(t *testing.T) {
	nan := Real(math.NaN())
	offset := TemperatureError{Shape: shapeOffset, Lost: nan, ToBand: nan, Working: 0.5}
	gain := TemperatureError{Shape: shapeGain, Lost: 3, ToBand: 5, Working: 0.5}
	bow := TemperatureError{Shape: shapeBow, Lost: -0.41, ToBand: -0.62, Working: 0.1}
	inBand := TemperatureError{Shape: shapeGain, Lost: 3, ToBand: nan}
	for _, c := range []struct {
		errors []TemperatureError
		want   string
	}{
		{[]TemperatureError{offset, gain, bow}, "0.41 K low in mid-range (bow): no longer significant; 0.62 K: n in the band"},
		{[]TemperatureError{offset, gain}, "3.0 K high at the hot end (gain): no longer significant; 5.0 K: n in the band"},
		{[]TemperatureError{inBand}, "3.0 K high at the hot end (gain): no longer significant"},
		{[]TemperatureError{offset}, "holds with any error up to 50 K and half of the range"},
		{nil, ""},
	} {
		if got := ThermometerText(c.errors, "no longer significant"); got != c.want {
			t.Errorf("%q, want %q", got, c.want)
		}
	}
	// A thermometer that reads 0.3 K high in mid-range.
	if s := ThermometerText(mustAssess(t, bowed(0.3, 0.001), quick()).TemperatureError, ""); !strings.Contains(s, "K high in mid-range (bow)") {
		t.Errorf("%q", s)
	}
	gain.Working, offset.Working = 0.5, 0.5
	usual := []TemperatureError{offset, gain, bow}
	if got := GrantedText(usual, defaultThermometerError); got != "" {
		t.Errorf("the default is told: %q", got)
	}
	if got, want := GrantedText(usual, "bow=0.1K"), "granted error of the thermometer: offset 0.50 K, gain 0.50 K, bow 0.10 K (asked for)"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
	usual[2].Working = 0.5
	if got, want := GrantedText(usual, defaultThermometerError), "granted error of the thermometer: offset 0.50 K, gain 0.50 K, bow 0.50 K (the largest u(T))"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
}
