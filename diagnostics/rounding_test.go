package diagnostics

import (
	"encoding/json"
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

// Brackets stand for value ± Coverage·u: with Coverage 2 and u = 5 the arms of a
// symmetric interval are 10, and 12 and 8 are the longest and shortest arms that
// lie within 20 % of it. Digits by hand.
func TestRoundingText(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		e    fit.Estimate
		unit string
		r    Rounding
		text string
	}{
		{fit.Estimate{Value: 66, StdError: 5, Lower: 56, Upper: 76}, "kJ/mol", Rounding{Coverage: 2}, "66.0(5.0) kJ/mol"},
		{fit.Estimate{Value: 66, StdError: 5, Lower: 57.9, Upper: 77.9}, "kJ/mol", Rounding{Coverage: 2}, "66.0(5.0) kJ/mol"},
		{fit.Estimate{Value: 66, StdError: 5, Lower: 57, Upper: 79}, "kJ/mol", Rounding{Coverage: 2}, "66 kJ/mol (57 to 79)"},
		{fit.Estimate{Value: 66, StdError: 5, Lower: 59, Upper: 76}, "kJ/mol", Rounding{Coverage: 2}, "66 kJ/mol (59 to 76)"},
		{fit.Estimate{Value: 66, StdError: 5, Lower: 12, Upper: math.Inf(1), Open: fit.OpenUpper}, "kJ/mol", Rounding{Coverage: 2}, "66 kJ/mol (12 to open)"},
		{fit.Estimate{Value: 66, StdError: 5, Lower: nan, Upper: 71.3, Open: fit.OpenLower}, "kJ/mol", Rounding{}, "66.0 kJ/mol (open to 71.3)"},
		{fit.Estimate{Value: 66, StdError: 5, Lower: nan, Upper: nan, Open: fit.OpenBoth}, "kJ/mol", Rounding{Coverage: 2}, "66.0 kJ/mol (both ends open)"},
		// The narrow arm must not vanish: 66 (66 to 1100) says nothing of it.
		{fit.Estimate{Value: 66, StdError: 5, Lower: 65.8, Upper: 1100}, "", Rounding{Coverage: 2}, "66.0 (65.8 to 1100.0)"},
		{fit.Estimate{Value: 6.343e-15, StdError: 2e-15, Lower: 4.26e-15, Upper: 9.46e-15}, "s^-1", Rounding{Coverage: 2}, "6.3×10^-15 s^-1 (4.3×10^-15 to 9.5×10^-15)"},
		{fit.Estimate{Value: -2.4, StdError: nan, Lower: -9.1, Upper: 14.2}, "1", Rounding{}, "−2 (−9 to 14)"},
		{fit.Estimate{Value: 83.14462618, StdError: 1e-9, Lower: 83, Upper: 84}, "kJ/mol", Rounding{Coverage: 2, Exact: true}, "83.1446 kJ/mol"},
		{fit.Estimate{Value: 1e-12, StdError: 3e-12, Lower: -1e-11, Upper: 1e-11}, "1", Rounding{Coverage: 2, Exact: true}, "0"},
		{fit.Unknown(), "K", Rounding{Coverage: 2}, "–"},
		{fit.Unknown(), "K", Rounding{Exact: true}, "–"},
	} {
		if got := c.r.Text(NewEstimate(c.e), c.unit); got != c.text {
			t.Errorf("%+v: %q, want %q", c.e, got, c.text)
		}
	}
}

// Student's t and the normal quantile: R 4.2.2, qt(0.975, 7) = 2.364624251592785,
// qnorm(0.975) = 1.959963984540054.
func TestRoundingCoverage(t *testing.T) {
	s := synthetic(t, "s1_straight", fit.Relative)
	r := byHand(models.Straight(), 300, []float64{0.05, 200}, -5, 50e3)
	r.N, r.Nu, r.RSS = 9, 7, 1
	reference.Close(t, "σ known", roundingOf(r, s, 0.95).Coverage, 1.959963984540054, 1e-12)
	r.Model = fit.Relative
	reference.Close(t, "σ estimated", roundingOf(r, s, 0.95).Coverage, 2.364624251592785, 1e-12)
	if r.Nu = 0; roundingOf(r, s, 0.95) != (Rounding{}) {
		t.Error("without degrees of freedom there is no interval")
	}
}

// The crossover's interval is that of 1/T_x by the delta method, read backwards:
// R 4.2.2 from the same parameters and covariances. The first is nearly symmetric.
// Of the second, T_x ± t u(T_x) would begin at -103 K; 1/T_x - t u is below 0.
func TestCrossoverInterval(t *testing.T) {
	for _, c := range []struct {
		u, p         []float64
		tx, low, upp float64
	}{
		{[]float64{0.1, 3e3, 0.2, 8e3}, []float64{-8, 40e3, -7.5, 95e3}, 312.4427815916918, 305.7428773993024, 319.4429016072843},
		{[]float64{1, 3e3, 8, 20e3}, []float64{-8, 40e3, -15, 95e3}, 483.8407666867847, 218.6097623821149, math.Inf(1)},
	} {
		r := byHand(models.Parallel{}, 320, c.u, c.p...)
		e := parameter(t, formEstimates(r, models.Frame{TForm: 320}, 0.95, perSecond, nil), "parallel-barriers", "T_x")
		reference.Close(t, "T_x", float64(e.Value), c.tx, 1e-12)
		reference.Close(t, "lower", float64(e.Lower), c.low, 1e-10)
		if math.IsInf(c.upp, 1) {
			if e.Open == nil || *e.Open != "upper" || e.Upper.Known() {
				t.Errorf("upper end %v is not open", e.Upper)
			}
			continue
		}
		reference.Close(t, "upper", float64(e.Upper), c.upp, 1e-10)
		if e.Open != nil {
			t.Errorf("open: %s", *e.Open)
		}
	}
}

// However uncertain it is, a crossover never lies at or below 0 K.
func TestCrossoverStaysAboveZero(t *testing.T) {
	for _, u := range []float64{1e-3, 0.1, 1, 10, 1e3} {
		r := byHand(models.Parallel{}, 320, []float64{u, 3e3 * u, u, 20e3 * u}, -8, 40e3, -15, 95e3)
		e := parameter(t, formEstimates(r, models.Frame{TForm: 320}, 0.95, perSecond, nil), "parallel-barriers", "T_x")
		if !(e.Lower > 0) || !(e.Lower < e.Value) || e.Open == nil && !(e.Upper > e.Value) {
			t.Errorf("u = %g: %v to %v", u, e.Lower, e.Upper)
		}
	}
}

// Where a barrier is open the crossover is unknown, with a reason.
func TestCrossoverOfAnOpenBarrier(t *testing.T) {
	s := synthetic(t, "s3_parallel", fit.Relative)
	in := publishing(s, fitNamed(t, s, "parallel"))
	in.Profiles = map[string]fit.Estimate{"E2": {Value: 66, StdError: 10, Lower: 12, Upper: math.Inf(1), Open: fit.OpenUpper}}
	f := formEstimates(in.Fit, models.Frame{TForm: in.TRef}, 0.95, perSecond, in.Profiles)[0]
	x := len(f.Parameters) - 1
	if e := f.Parameters[x]; e.Symbol != "T_x" || e.Value.Known() || e.StdError.Known() || e.Lower.Known() || e.Upper.Known() {
		t.Errorf("%+v", e)
	}
	for i := range f.Parameters {
		if f.Covariance[i][x].Known() || f.Covariance[x][i].Known() || !f.Covariance[i%x][i%x].Known() {
			t.Errorf("covariance of an unknown T_x, row %d: %v", i, f.Covariance[i])
		}
	}
	p := publish(in)
	if l := line(t, p, "T_x", ""); l.Text != "–" || l.Note != "not bounded: an end of E2 is open" {
		t.Errorf("T_x = %q, %q", l.Text, l.Note)
	}
	if !slices.Contains(p.Notes, "(a to b): 95 % interval, where it is far from symmetric") {
		t.Errorf("%q", p.Notes)
	}
	if l := line(t, p, "E2", ""); l.Text != "66 kJ/mol (12 to open)" || l.Note != "" {
		t.Errorf("E2 = %q, %q", l.Text, l.Note)
	}
}

// A prefactor whose profile is lopsided is printed with its interval, as its lg is:
// ln A2 = 27.9 (24.3 to open), e^27.9 = 1.309e12, e^24.3 = 3.576e10;
// lg: 12.1 (10.6 to open).
func TestPrefactorOfAnOpenProfile(t *testing.T) {
	s := synthetic(t, "s3_parallel", fit.Relative)
	in := publishing(s, fitNamed(t, s, "parallel"))
	in.Profiles = map[string]fit.Estimate{"ln_A2": {Value: 27.9, StdError: 0.2, Lower: 24.3, Upper: math.Inf(1), Open: fit.OpenUpper}}
	p := publish(in)
	if got := line(t, p, "A2", "").Text; got != "1.31×10^12 s^-1 (3.6×10^10 to open)" {
		t.Errorf("A2 = %q", got)
	}
	if got := line(t, p, "lg(A2/s^-1)", "").Text; got != "12.1 (10.6 to open)" {
		t.Errorf("lg A2 = %q", got)
	}
	in.Profiles["ln_A2"] = fit.Estimate{Value: 27.9, StdError: 0.2, Lower: math.Inf(-1), Upper: 28.3, Open: fit.OpenLower}
	l := line(t, publish(in), "A2", "")
	if b, err := json.Marshal(l.Estimate); err != nil || !strings.Contains(string(b), `"lower":null`) || !strings.Contains(string(b), `"open":"lower"`) {
		t.Errorf("%s, %v", b, err)
	}
}

// bent has a step that no candidate follows, three repeats at each temperature that
// scatter far less.
func bent() *dataset.Set {
	var temps, ks []float64
	for i := range 8 {
		ti := 280 + 10*float64(i)
		ln := 20 - 7000/ti + 1.5*math.Sin(1.9*float64(i)) + 400*math.Pow(ti/315-1, 2)
		for _, e := range []float64{-0.003, 0.001, 0.002} {
			temps, ks = append(temps, ti), append(ks, math.Exp(ln+e))
		}
	}
	return setOf(temps, ks, nil)
}

// Where no curve is recommended no parameters of a rejected one are published: only
// E_a at both ends of the range by power-prefactor, which R's lm of the means on
// {1, 1/T, ln T} gives as -R d ln k/d(1/T).
func TestPublishWithoutRecommendation(t *testing.T) {
	a := mustAssess(t, bent(), quick())
	if a.Verdict.RecommendedCurve != "" {
		t.Fatalf("recommended is %q", a.Verdict.RecommendedCurve)
	}
	p := a.Publish
	if got := symbols(p); got != "E_a | E_a | range" || p.Curve != "" {
		t.Errorf("published are %s of %q", got, p.Curve)
	}
	// R 4.2.2: m <- lm(tapply(log(k), T, mean) ~ I(1/T) + log(T)), E = R(n T - b).
	reference.Close(t, "E_a(280 K)", float64(line(t, p, "E_a", "at 280 K by power-prefactor").Value), -181.255035355875, 1e-8)
	reference.Close(t, "E_a(350 K)", float64(line(t, p, "E_a", "at 350 K by power-prefactor").Value), 321.434903464934, 1e-8)
	notes := strings.Join(p.Notes, "\n")
	if !strings.Contains(notes, "a pair of A and E would mislead") || !strings.Contains(notes, "fails its adequacy test as well") {
		t.Errorf("%q", p.Notes)
	}
	if r := a.AtReference; r.K.Value.Known() || r.F.Known() || r.G.Known() || r.Curve != "" || r.T != 298.15 {
		t.Errorf("k of a rejected curve: %+v", r)
	}

	// A power-prefactor that fits gives k, but is still not recommended.
	s := synthetic(t, "s2_tn_curved", fit.Relative)
	in := publishing(s, nil)
	in.Power = fitNamed(t, s, "power-prefactor")
	p = publish(in)
	if notes := strings.Join(p.Notes, "\n"); !strings.Contains(notes, "by power-prefactor, which is not recommended") {
		t.Errorf("%q", p.Notes)
	}
	in.Power = nil
	if p = publish(in); symbols(p) != "range" {
		t.Errorf("published are %s", symbols(p))
	}
}

// The exponent 1 of a fixed prefactor is not written.
func TestPublishedExponents(t *testing.T) {
	s := synthetic(t, "s1_straight", fit.Relative)
	for curve, part := range map[string]string{
		"linear-prefactor": " + ln(T/298.15 K) − ", "root-prefactor": " + 0.5 ln(T/298.15 K) − ",
	} {
		if text := line(t, publish(publishing(s, fitNamed(t, s, curve))), "k(T)", "").Text; !strings.Contains(text, part) {
			t.Errorf("%s: %q", curve, text)
		}
	}
}

// Computed data: 21 - 10000 K/T gives A = e^21 = 1.31882e9 and
// E = 10000 K·R = 83.1446 kJ/mol.
func TestPublishWithoutScatter(t *testing.T) {
	var temps, ks []float64
	for i := range 6 {
		x := 3 + 0.1*float64(i)
		temps, ks = append(temps, 1000/x), append(ks, math.Exp(21-10*x))
	}
	for _, style := range PublishStyles {
		o := quick()
		o.PublishStyle = style
		a := mustAssess(t, setOf(temps, ks, nil), o)
		if !slices.Contains(a.Publish.Notes, "no scatter: no uncertainty") {
			t.Errorf("%s: %q", style, a.Publish.Notes)
		}
		for _, l := range a.Publish.Lines {
			digits := strings.Count(strings.Map(func(r rune) rune {
				if r >= '0' && r <= '9' {
					return '0'
				}
				return r
			}, l.Text), "0")
			if strings.Contains(l.Text, "(0)") || strings.Contains(l.Note, "U =") || l.Symbol != "k(T)" && digits > 10 {
				t.Errorf("%s: %s = %q, %q", style, l.Symbol, l.Text, l.Note)
			}
		}
		if k := line(t, a.Publish, "k(T)", "").Text; k != "exp(21.000000 − 10000.0000 K/T) s^-1" {
			t.Errorf("%s: k(T) = %q", style, k)
		}
		if style == StyleMolar {
			for symbol, text := range map[string]string{"A": "1.31882×10^9 s^-1", "E_a": "83.1446 kJ/mol"} {
				if got := line(t, a.Publish, symbol, "").Text; got != text {
					t.Errorf("%s = %q, want %q", symbol, got, text)
				}
			}
		}
	}
}

// Logarithms of A have the unit of k as the file has it.
func TestUnitOfLogarithm(t *testing.T) {
	s := synthetic(t, "s3_parallel", fit.Relative)
	for _, unit := range []string{"s^-1", "cm^3 molecule^-1 s^-1", "a.u."} {
		seen := 0
		for _, curve := range []string{"straight", "power-prefactor", "parallel"} {
			for _, f := range formEstimates(fitNamed(t, s, curve), models.Frame{TForm: 300}, 0.95, dataset.Quantity{Unit: unit}, nil) {
				for _, p := range f.Parameters {
					if strings.HasPrefix(p.Symbol, "ln_") {
						seen++
						if p.Unit != unit {
							t.Errorf("%s of %s in %q, want %q", p.Symbol, f.Model, p.Unit, unit)
						}
					}
				}
			}
		}
		if seen != 4 {
			t.Errorf("%d logarithms", seen)
		}
	}
	for unit, text := range map[string]string{"s^-1": "/s^-1", "cm^2 s^-1": "/(cm^2 s^-1)", "": "", "1": ""} {
		if got := OverUnit(unit); got != text {
			t.Errorf("%q: %q", unit, got)
		}
	}
}

// Ends of an interval a hundred times apart have their own digits: of 2.3e-4 (1.93e-5 to
// 2.8e-3) no end is written as 0.
func TestEndsFarApart(t *testing.T) {
	r := Rounding{Coverage: 2}
	for _, c := range []struct {
		e    Estimate
		want string
	}{
		{Estimate{2.3e-4, 2e-5, 1.93e-5, 2.8e-3, nil}, "2.3×10^-4 s^-1 (1.9×10^-5 to 2.8×10^-3)"},
		{Estimate{2.3, 0.2, 0.0193, 28, nil}, "2.3 s^-1 (0.019 to 28)"},
		{Estimate{2.3e-4, 2e-5, 1.93e-4, 5e-4, nil}, "2.3×10^-4 s^-1 (1.9×10^-4 to 5.0×10^-4)"},
	} {
		if got := r.Text(c.e, "s^-1"); got != c.want {
			t.Errorf("%s, not %s", got, c.want)
		}
	}
}
