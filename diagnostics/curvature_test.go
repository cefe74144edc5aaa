package diagnostics

import (
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/fit"
	"onebarrier/models/reference"
)

var zeroToOne = ExponentSettings{Band: [2]float64{0, 1}}

// The exponent test is the F test of ln T added to the line: t² = F, the same p
// (R 4.2.2, anova of two lm fits).
func TestExponentAgainstR(t *testing.T) {
	g := golden(t)
	for _, c := range []struct {
		set   string
		model fit.ErrorModel
	}{
		{"s1_straight", fit.Relative}, {"s2_tn_curved", fit.Relative}, {"s3_parallel", fit.Relative},
		{"s4_series", fit.Relative}, {"s5_hetero", fit.Scaled}, {"s6_replicates", fit.Relative},
		{"s7_vft", fit.Relative}, {"s8_tiny6", fit.Relative},
	} {
		s := synthetic(t, c.set, c.model)
		x := TestExponent(s, fitNamed(t, s, "power-prefactor"), nil, zeroToOne)
		reference.Close(t, c.set+" n", x.Exponent.Value, g(c.set, "mod", "coef:lnT"), 1e-8)
		reference.Close(t, c.set+" u(n)", x.Exponent.StdError, g(c.set, "mod", "se:lnT"), 1e-8)
		reference.Close(t, c.set+" lower", x.Exponent.Lower, g(c.set, "mod", "ci95_lo:lnT"), 1e-7)
		reference.Close(t, c.set+" upper", x.Exponent.Upper, g(c.set, "mod", "ci95_hi:lnT"), 1e-7)
		ratio := x.Exponent.Value / x.Exponent.StdError
		reference.Close(t, c.set+" F", ratio*ratio, g(c.set, "F_arr_vs_mod", "F"), 1e-8)
		reference.Close(t, c.set+" p", x.PValue, g(c.set, "F_arr_vs_mod", "p"), 1e-7)
		if got, df := x.Nu, g(c.set, "F_arr_vs_mod", "df2"); float64(got) != df {
			t.Errorf("%s: ν = %d, want %g", c.set, got, df)
		}
		low, high := s.Range()
		reference.Close(t, c.set+" ΔE", x.Change.Value, x.Exponent.Value*8.31446261815324*(high-low)/1000, 1e-14)
	}

	// Known sigma: the likelihood-ratio p, and the scale-free p is that of Scaled.
	s := synthetic(t, "s5_hetero", fit.Stated)
	x := TestExponent(s, fitNamed(t, s, "power-prefactor"), nil, zeroToOne)
	reference.Close(t, "stated p", x.PValue, g("s5_hetero", "LR_arr_vs_mod_known", "p"), 1e-8)
	reference.Close(t, "stated u(n)", x.Exponent.StdError, g("s5_hetero", "mod", "se_known:lnT"), 1e-9)
	reference.Close(t, "scale-free p", x.PScaleFree, g("s5_hetero", "F_arr_vs_mod", "p"), 1e-8)
}

// p_band is the p-value of the nearest edge: that of n = 1 is the F test of ln T
// added to the line fitted to ln k - ln T, (RSS_eyring - RSS_mod)/(RSS_mod/ν) from
// the R fits.
func TestBandPValue(t *testing.T) {
	g := golden(t)
	// s2 has n > 1 significantly; s6 n > 1; s4 n < 0.
	for _, set := range []string{"s2_tn_curved", "s6_replicates"} {
		s := synthetic(t, set, fit.Relative)
		x := TestExponent(s, fitNamed(t, s, "power-prefactor"), nil, zeroToOne)
		rss, nu := g(set, "mod", "rss"), g(set, "mod", "df")
		f := (g(set, "eyring", "rss") - rss) / (rss / nu)
		reference.Close(t, set+" p_band", x.PBand, pF(f, 1, nu), 1e-6)
		if x.PBand < x.PValue {
			t.Errorf("%s: p_band %g is below p %g", set, x.PBand, x.PValue)
		}
	}
	s := synthetic(t, "s4_series", fit.Relative)
	if x := TestExponent(s, fitNamed(t, s, "power-prefactor"), nil, zeroToOne); x.PBand != x.PValue {
		t.Errorf("E falls: the nearest edge is 0, but p_band %g differs from p %g", x.PBand, x.PValue)
	}
	if x := exponentByStudent(0.4, 0.1, 5, false, math.NaN(), 1, zeroToOne); x.PBand != 1 {
		t.Errorf("inside the band p_band is %g, want 1", x.PBand)
	}
}

// R 4.2.2 qt(0.975, nu), pf(x, a, b, lower = FALSE).
func TestQuantilesAgainstR(t *testing.T) {
	for nu, q := range map[int]float64{
		1: 12.706204736174694, 2: 4.3026527297494619, 3: 3.1824463052837078, 5: 2.5705818356363137,
		9: 2.2621571627982049, 17: 2.1098155778333165, 47: 2.0117405137297655,
	} {
		reference.Close(t, "t quantile", criticalValue(0.95, nu, false), q, 1e-11)
	}
	reference.Close(t, "normal quantile", criticalValue(0.95, 3, true), 1.959963984540054, 1e-14) // qnorm(0.975)
}

// Power of the two-sided t test at 5 %, integrated in 25-digit arithmetic with
// mpmath 1.2.1; R's pt and SciPy's nct agree to the 11 digits that they have.
func TestStudentPower(t *testing.T) {
	for _, c := range []struct{ nu, d, power float64 }{
		{1, 1, 0.07298889446967}, {1, 6, 0.362183992965059}, {1, 20, 0.883394442933035}, {1, 50, 0.999912530428909},
		{2, 1, 0.0952017554978839}, {2, 6, 0.835738119822869}, {2, 20, 0.999999996771646},
		{3, 1, 0.111274915517009}, {3, 6, 0.967000639911497}, {3, 50, 1},
		{5, 1, 0.129963804752582}, {9, 1, 0.145949950253179}, {9, 6, 0.999553537621646},
		{17, 1, 0.156742510624324}, {97, 1, 0.167650933457265}, {97, 6, 0.999965510912373}, {97, 50, 1},
	} {
		crit := criticalValue(0.95, int(c.nu), false)
		reference.Close(t, "power", studentPower(crit, c.d, c.nu), c.power, 2e-12)
	}
	// The level itself, d = 0, for any ν.
	for _, nu := range []int{1, 2, 4, 30, 1000} {
		reference.Close(t, "level", studentPower(criticalValue(0.95, nu, false), 0, float64(nu)), 0.05, 1e-11)
	}
}

// The shift with 80 % power: mpmath as above; R's power.t.test(type = "one.sample",
// strict = TRUE) gives 4.25589868651 for ν = 3, 3.51390272917 for 5, 3.14963288645
// for 9. With known σ it is the root of Φ(d-1.96) + Φ(-d-1.96) = 0.8.
func TestDetectableShift(t *testing.T) {
	for nu, d := range map[int]float64{
		1: 16.334008869921, 2: 5.6534892661971, 3: 4.2558986865156, 5: 3.5139027291711,
		9: 3.1496328864506, 17: 2.9729137922548, 97: 2.8297020642363,
	} {
		reference.Close(t, "shift", detectableShift(nu, false), d, 1e-11)
	}
	reference.Close(t, "known sigma", detectableShift(7, true), 2.801581787013578, 1e-13) // R uniroot on pnorm
}

func TestDetectableInterval(t *testing.T) {
	// R: sqrt(5/qchisq(c(.975,.025), 5)) = 0.6242080022589825, 2.4526139885482974
	d := detectable(2, 5, false, 0.95)
	reference.Close(t, "value", d.Value, 2*3.5139027291711, 1e-11)
	reference.Close(t, "lower", d.Lower, d.Value*0.6242080022589825, 1e-10)
	reference.Close(t, "upper", d.Upper, d.Value*2.4526139885482974, 1e-10)
	for nu := 1; nu <= 2; nu++ {
		if d := detectable(2, nu, false, 0.95); !math.IsNaN(d.Value) || !(d.Lower < d.Upper) {
			t.Errorf("ν = %d: %+v, want the interval alone", nu, d)
		}
	}
}

// On straight Gaussian data the test rejects in 5 % of sets, exactly; under stated
// uncertainties that are right as well. And n = 1 is beyond the band in at most 5 %.
func TestExponentCalibration(t *testing.T) {
	const sets = 8000
	for _, c := range []struct {
		model fit.ErrorModel
		n     int
		low   float64
		high  float64
	}{
		{fit.Relative, 4, 280, 340}, {fit.Relative, 6, 250, 1000}, {fit.Scaled, 8, 280, 340},
		{fit.Relative, 12, 250, 1000}, {fit.Stated, 8, 280, 340},
	} {
		temps := span(c.low, c.high, c.n)
		v := make([]float64, c.n)
		for i := range v {
			v[i] = 9e-4 * (1 + float64(i%3))
		}
		s := sampleOf(t, c.model, temps, make([]float64, c.n), v)
		rng := rand.New(rand.NewPCG(11, uint64(c.n)))
		rejected, beyond := 0, 0
		for range sets {
			lineNoise(rng, s, 1, s.Y)
			x := TestExponent(s, fit.Fit(s, models.PowerPrefactor{}), nil, zeroToOne)
			if x.PValue < 0.05 {
				rejected++
			}
			if (x.Exponent.Lower > 0) != (x.PValue < 0.05 && x.Exponent.Value > 0) {
				t.Fatal("interval and p-value disagree")
			}
			for i, T := range s.T {
				s.Y[i] += math.Log(T) // n = 1
			}
			x = TestExponent(s, fit.Fit(s, models.PowerPrefactor{}), nil, zeroToOne)
			if (Rule{Band: zeroToOne.Band}).Judge(x.Exponent.Lower, x.Exponent.Upper, false) == BeyondPrefactor {
				beyond++
			}
		}
		se := math.Sqrt(0.05 * 0.95 / sets)
		if rate := float64(rejected) / sets; !(math.Abs(rate-0.05) <= 4*se) {
			t.Errorf("%s N=%d: rejects %.4f of straight sets, want 0.05 ± %.4f", c.model, c.n, rate, 4*se)
		}
		if rate := float64(beyond) / sets; !(rate <= 0.05+4*se) {
			t.Errorf("%s N=%d: beyond the band in %.4f of sets with n = 1, want at most 0.05", c.model, c.n, rate)
		}
	}
}

// roundedLine is ln k of one barrier, computed with a systematic error in the 13th
// decimal, as a table made with a program or a rounded constant of nature has.
func roundedLine(temps []float64) []float64 {
	y := make([]float64, len(temps))
	for i, T := range temps {
		d := float64(i) - float64(len(temps)-1)/2
		y[i] = 20 - 60e3/(models.GasConstant*T) + 3e-14*d*d
	}
	return y
}

// Numbers that were computed, not measured, must not be called curved for their
// rounding.
func TestExactStraightData(t *testing.T) {
	temps := span(280, 340, 9)
	s := sampleOf(t, fit.Relative, temps, roundedLine(temps), nil)
	x := TestExponent(s, fitNamed(t, s, "power-prefactor"), nil, zeroToOne)
	if !(x.Exponent.Lower < 0 && x.Exponent.Upper > 0 && x.PValue > 0.05) {
		t.Errorf("n = %g (%g to %g), p = %g: exact straight data are called curved", x.Exponent.Value, x.Exponent.Lower, x.Exponent.Upper, x.PValue)
	}
	if !(x.Exponent.Upper < 1e-6) {
		t.Errorf("the interval of n reaches %g on exact data", x.Exponent.Upper)
	}
}

// The profile of n under errors additive in k: at the ends of its own interval the
// p-value is 0.05.
func TestExponentProfileEnds(t *testing.T) {
	temps := span(280, 340, 8)
	rng := rand.New(rand.NewPCG(3, 3))
	k := make([]float64, len(temps))
	v := make([]float64, len(temps))
	for i, T := range temps {
		k[i] = math.Exp(60e3/models.GasConstant*(1./310-1/T)) + 0.05*rng.NormFloat64()
		v[i] = 1
	}
	s, err := fit.NewSample(fit.Absolute, temps, k, v)
	if err != nil {
		t.Fatal(err)
	}
	power := fitNamed(t, s, "power-prefactor")
	profile := newExponentProfile(s, power, 0.95)
	x := TestExponent(s, power, profile, zeroToOne)
	for _, end := range []float64{x.Exponent.Lower, x.Exponent.Upper} {
		f := (profile.RSS(end) - power.RSS) / (power.RSS / float64(power.Nu))
		reference.Close(t, "p at an end", pF(f, 1, float64(power.Nu)), 0.05, 1e-4)
	}
	if (x.PValue < 0.05) != (x.Exponent.Lower > 0 || x.Exponent.Upper < 0) {
		t.Errorf("p = %g and the interval %g to %g disagree", x.PValue, x.Exponent.Lower, x.Exponent.Upper)
	}
}
