package fit

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// Reference fits of other programs; see testdata/published/README.md. Those of R
// 4.2.2 are golden_fits.csv, golden_extra.csv, golden_opendata.csv and
// golden_expressions.csv, those in 50-digit arithmetic golden_fits_mp.csv.

func ones(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = 1
	}
	return v
}

func mustSample(t testing.TB, m ErrorModel, temp, k, v []float64) *Sample {
	t.Helper()
	s, err := NewSample(m, temp, k, v)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// coefficient is one coefficient of a reference fit as a linear function of our
// canonical parameters: value = constant + jac·p.
type coefficient struct {
	name     string
	constant float64
	jac      []float64
}

func (c coefficient) of(p []float64) float64 {
	v := c.constant
	for j, g := range c.jac {
		v += g * p[j]
	}
	return v
}

// referenceForm gives the curve and the coefficients of a reference fit: ln k on
// {1, 1/T}, {1, 1/T, ln T}, the same centred at T_ref, and ln k - ln T on {1, 1/T}.
// With x = (1/T - 1/T_r)/R and z = T_r/T - 1 our power-prefactor reads
// a - E x + n (z - ln(1+z)) = a + (nT_r - E/R)(1/T - 1/T_r) + n ln(T/T_r).
func referenceForm(form string, tr float64) (models.Curve, []coefficient) {
	const r = models.GasConstant
	switch form {
	case "arr":
		return models.Straight(), []coefficient{
			{"(Intercept)", 0, []float64{1, 1 / (r * tr)}}, {"invT", 0, []float64{0, -1 / r}}}
	case "arrc":
		return models.Straight(), []coefficient{
			{"(Intercept)", 0, []float64{1, 0}}, {"cinvT", 0, []float64{0, -1 / r}}}
	case "eyring":
		return models.LinearPrefactor(), []coefficient{
			{"(Intercept)", -math.Log(tr), []float64{1, 1 / (r * tr)}}, {"invT", 0, []float64{0, -1 / r}}}
	case "mod":
		return models.PowerPrefactor{}, []coefficient{
			{"(Intercept)", 0, []float64{1, 1 / (r * tr), -1 - math.Log(tr)}},
			{"invT", 0, []float64{0, -1 / r, tr}}, {"lnT", 0, []float64{0, 0, 1}}}
	case "modc":
		return models.PowerPrefactor{}, []coefficient{
			{"(Intercept)", 0, []float64{1, 0, 0}},
			{"cinvT", 0, []float64{0, -1 / r, tr}}, {"clnT", 0, []float64{0, 0, 1}}}
	}
	return nil, nil
}

func quadratic(a, m, b []float64) float64 {
	n := len(a)
	var s float64
	for i := range a {
		for j := range b {
			s += a[i] * m[i*n+j] * b[j]
		}
	}
	return s
}

// checkReference compares everything that g holds of a fit. The criteria of the
// reference are those of a density of ln k: ours carry -Σ ln k besides.
func checkReference(t *testing.T, label string, s *Sample, form string, g map[string]float64, known bool, tol float64) (compared int) {
	t.Helper()
	curve, coefs := referenceForm(form, s.TRef)
	r := Fit(s, curve)
	if r.Status != Converged {
		t.Errorf("%s: %v: %s", label, r.Status, r.Reason)
		return 0
	}
	check := func(quantity string, got float64) {
		t.Helper()
		w, ok := g[quantity]
		if !ok {
			return
		}
		compared++
		if math.IsInf(w, 1) { // R's AICc where N = K+1: undefined
			if !math.IsNaN(got) {
				t.Errorf("%s %s: got %g, want NaN", label, quantity, got)
			}
			return
		}
		reference.Close(t, label+" "+quantity, got, w, tol)
	}
	suffix := ""
	if known {
		suffix = "_known"
	}
	for i, c := range coefs {
		check("coef:"+c.name, c.of(r.P))
		e := r.Interval(c.jac, c.of(r.P), 0.95)
		check("se"+suffix+":"+c.name, e.StdError)
		if !known {
			check("ci95_lo:"+c.name, e.Lower)
			check("ci95_hi:"+c.name, e.Upper)
		}
		for _, d := range coefs[i:] {
			cov, sd := quadratic(c.jac, r.Cov, d.jac), math.Sqrt(quadratic(c.jac, r.Cov, c.jac)*quadratic(d.jac, r.Cov, d.jac))
			if w, ok := g[fmt.Sprintf("cov%s[%s,%s]", suffix, c.name, d.name)]; ok {
				compared++
				// Against the product of the standard errors: a centred
				// covariance is zero but for rounding.
				if !(math.Abs(cov-w) <= tol*sd) {
					t.Errorf("%s cov[%s,%s]: got %.15g, want %.15g", label, c.name, d.name, cov, w)
				}
			}
		}
	}
	var sumLnK float64
	for _, y := range s.Y {
		sumLnK += y
	}
	check("rss", r.RSS)
	if known {
		check("logLik_known", r.LogLik+sumLnK)
		check("AIC_known", r.AIC()-2*sumLnK)
		if chi2, ok := g["BIC_chi2"]; ok { // χ² + p ln N, without the constants
			compared++
			reference.Close(t, label+" BIC", r.BIC()-2*sumLnK, chi2+g["AIC_known"]-g["chi2_plus_2p"], tol)
		}
		if r.AICc() != r.AIC() {
			t.Errorf("%s: AICc differs from AIC with σ known", label)
		}
		return compared
	}
	check("sigma", r.Sigma)
	check("birge_ratio", r.Sigma)
	check("logLik", r.LogLik+sumLnK)
	check("AIC", r.AIC()-2*sumLnK)
	check("AICc", r.AICc()-2*sumLnK)
	check("BIC", r.BIC()-2*sumLnK)
	return compared
}

// synthetic is one of the synthetic sets, with its stated uncertainties where it has
// any and the error model uses them.
func synthetic(t testing.TB, set string, m ErrorModel) *Sample {
	t.Helper()
	d := reference.Synthetic(t, set)
	if m == Relative || m == Absolute {
		return mustSample(t, m, d.T, d.K, d.Ones())
	}
	return mustSample(t, m, d.T, d.K, d.Stated(m.InK()))
}

// TestAgainstHighPrecision compares with fits in 50-digit arithmetic, to 10 digits.
func TestAgainstHighPrecision(t *testing.T) {
	g := reference.Golden(t, "golden_fits_mp.csv")
	compared := 0
	for _, set := range reference.SyntheticSets {
		for _, form := range []string{"arr", "mod", "arrc", "modc", "eyring"} {
			s := synthetic(t, set, Relative)
			if set == "s5_hetero" {
				// The reference centres both at the weighted T_ref.
				scaled := synthetic(t, set, Scaled)
				s.TRef = scaled.TRef
				compared += checkReference(t, set+" "+form+" unweighted", s, form, g.Fit(set, form+"_unweighted"), false, 1e-10)
				s = scaled
			}
			compared += checkReference(t, set+" "+form, s, form, g.Fit(set, form), false, 1e-10)
		}
	}
	if compared < 600 {
		t.Errorf("compared only %d numbers", compared)
	}
	t.Logf("%d numbers agree to 10 digits", compared)
}

// TestAgainstR compares with R 4.2.2, whose lm loses some digits of raw columns, to
// 8 digits: intervals, AICc, BIC, Birge ratio and the forms with known σ.
func TestAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_fits.csv")
	compared := 0
	for _, set := range reference.SyntheticSets {
		for _, form := range []string{"arr", "mod", "arrc", "modc", "eyring"} {
			s := synthetic(t, set, Relative)
			if set == "s5_hetero" {
				s = synthetic(t, set, Scaled)
				compared += checkReference(t, set+" "+form+" known", synthetic(t, set, Stated), form, g.Fit(set, form), true, 1e-8)
			}
			compared += checkReference(t, set+" "+form, s, form, g.Fit(set, form), false, 1e-8)
		}
	}
	if compared < 800 {
		t.Errorf("compared only %d numbers", compared)
	}
	t.Logf("%d numbers agree to 8 digits", compared)
}

// sampleIn reads points of a published file, of which T plus shift lies between low
// and high, in K.
func sampleIn(t testing.TB, file, temp, k string, shift, low, high float64) *Sample {
	t.Helper()
	d := reference.Table(t, file, temp, k)
	var ts, ks []float64
	for i, x := range d[0] {
		if x+shift >= low && x+shift <= high {
			ts, ks = append(ts, x+shift), append(ks, d[1][i])
		}
	}
	return mustSample(t, Relative, ts, ks, ones(len(ts)))
}

// TestPublishedSets compares fits of handbook, open and tabulated data with R.
func TestPublishedSets(t *testing.T) {
	const zeroC = 273.15
	for _, c := range []struct {
		set, file, temp, k, golden, prefix string
		shift                              float64
	}{
		{"n2o5_daniels_johnston", "handbook/n2o5_daniels_johnston.csv", "T_K", "k_1_s", "golden_opendata.csv", "", 0},
		{"hi_bodenstein_dec", "handbook/hi_bodenstein.csv", "T_K", "k_dec_L_mol_s", "golden_opendata.csv", "", 0},
		{"hi_bodenstein_form", "handbook/hi_bodenstein.csv", "T_K", "k_form_L_mol_s", "golden_opendata.csv", "", 0},
		{"ch3i_ethoxide", "handbook/ch3i_ethoxide.csv", "T_C", "k_L_mol_s", "golden_opendata.csv", "", zeroC},
		{"ch3nc", "handbook/ch3nc.csv", "T_C", "k_1_s", "golden_opendata.csv", "", zeroC},
		{"mercury_all", "opendata/mercury_pressure_R.csv", "T_C", "p_mmHg", "golden_opendata.csv", "", zeroC},
		{"ice_psub_iapws", "opendata/ice_psub_iapws.csv", "T_K", "p_Pa", "golden_opendata.csv", "", 0},
		{"water_kw_iapws", "opendata/water_kw_iapws.csv", "T_K", "Kw", "golden_opendata.csv", "", 0},
		{"water_viscosity_iapws", "opendata/water_viscosity_iapws.csv", "T_K", "fluidity_1_Pa_s", "golden_opendata.csv", "", 0},
		{"steam", "opendata/steam_MASS.csv", "T_C", "p", "golden_opendata.csv", "", zeroC},
		{"jpl_oh_acetone", "expressions/table_jpl_oh_acetone.csv", "T_K", "k", "golden_expressions.csv", "table:", 0},
		{"wollenhaupt_oh_acetone", "expressions/table_wollenhaupt_oh_acetone.csv", "T_K", "k", "golden_expressions.csv", "table:", 0},
		{"gierczak_oh_acetone", "expressions/table_gierczak_oh_acetone.csv", "T_K", "k", "golden_expressions.csv", "table:", 0},
		{"baulch_o_h2_2", "expressions/table_baulch_o_h2_2.csv", "T_K", "k", "golden_expressions.csv", "table:", 0},
	} {
		s := sampleIn(t, c.file, c.temp, c.k, c.shift, 0, math.Inf(1))
		g := reference.Golden(t, c.golden)
		for _, form := range []string{"arr", "mod", "eyring"} {
			ref := g.Fit(c.set, c.prefix+form)
			if len(ref) == 0 {
				continue // ch3nc has too few points, tables have no Eyring form
			}
			if n := checkReference(t, c.set+" "+form, s, form, ref, false, 1e-8); n < 14 {
				t.Errorf("%s %s: compared only %d numbers", c.set, form, n)
			}
		}
	}
}

// TestNoiseFreeTable: OH + CH4 as 2.80e-14 T^0.667 exp(-1575/T) (JPL evaluation)
// comes back from its own table, whose residuals are rounding alone.
func TestNoiseFreeTable(t *testing.T) {
	d := reference.Table(t, "expressions/table_jpl_oh_ch4_3.csv", "T_K", "k")
	s := mustSample(t, Relative, d[0], d[1], ones(len(d[0])))
	r := Fit(s, models.PowerPrefactor{})
	_, coefs := referenceForm("mod", s.TRef)
	reference.Close(t, "ln A", coefs[0].of(r.P), math.Log(2.80e-14), 1e-11)
	reference.Close(t, "-B", coefs[1].of(r.P), -1575, 1e-11)
	reference.Close(t, "n", coefs[2].of(r.P), 0.667, 1e-11)
	if !finite(r.LogLik, r.AICc()) || r.Status != Converged {
		t.Errorf("status %v, log-likelihood %g", r.Status, r.LogLik)
	}
}

// TestInKAgainstR compares fits with errors in k with R's nls on the k scale.
func TestInKAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_extra.csv")
	for _, c := range []struct {
		set, fit string
		model    ErrorModel
	}{
		{"s1_straight", "kspace_arr_unweighted", Absolute},
		{"s8_tiny6", "kspace_arr_unweighted", Absolute},
		{"s5_hetero", "kspace_arr_weighted", StatedAbsolute},
	} {
		ref := g.Fit(c.set, c.fit)
		s := synthetic(t, c.set, c.model)
		s.TRef = ref["Tref"]
		r := Fit(s, models.Straight())
		if r.Status != Converged {
			t.Fatalf("%s: %v: %s", c.set, r.Status, r.Reason)
		}
		const tol = 1e-8
		reference.Close(t, c.set+" ln k_ref", r.P[0], ref["lnkref"], tol)
		reference.Close(t, c.set+" E", r.P[1], ref["E"], tol)
		reference.Close(t, c.set+" RSS", r.RSS, ref["rss"], tol)
		sdA, sdE := math.Sqrt(r.Cov[0]), math.Sqrt(r.Cov[3])
		if c.model.KnownSigma() {
			reference.Close(t, c.set+" se ln k_ref", sdA, ref["se_known_lnkref"], tol)
			reference.Close(t, c.set+" se E", sdE, ref["se_known_E"], tol)
			reference.Close(t, c.set+" logLik", r.LogLik, ref["logLik_known"], tol)
			reference.Close(t, c.set+" AIC", r.AIC(), ref["AIC_known"], tol)
			continue
		}
		reference.Close(t, c.set+" se ln k_ref", sdA, ref["se_lnkref"], tol)
		reference.Close(t, c.set+" se E", sdE, ref["se_E"], tol)
		reference.Close(t, c.set+" logLik", r.LogLik, ref["logLik"], tol)
		reference.Close(t, c.set+" AIC", r.AIC(), ref["AIC"], tol)
		reference.Close(t, c.set+" AICc", r.AICc(), ref["AICc"], tol)
		reference.Close(t, c.set+" BIC", r.BIC(), ref["BIC"], tol)
	}
	for _, set := range []string{"s1_straight", "s8_tiny6"} {
		r := Fit(synthetic(t, set, Relative), models.Straight())
		reference.Close(t, set+" AIC on the k scale", r.AIC(), g.Of(t, set, "lnspace_arr_on_k_scale", "AIC_k_scale"), 1e-10)
	}
}

// TestIntervalAgainstR compares confidence limits of ln k(T) with R's predict.
func TestIntervalAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_extra.csv")
	compared := 0
	for _, set := range reference.SyntheticSets {
		if set == "s5_hetero" {
			continue
		}
		for _, form := range []string{"arr", "mod"} {
			ref := g.Fit(set, "predict_"+form)
			s := synthetic(t, set, Relative)
			curve, _ := referenceForm(form, s.TRef)
			r := Fit(s, curve)
			for q, w := range ref {
				temp, ok := strings.CutPrefix(q, "conf_lo(")
				if !ok {
					continue
				}
				temp = strings.TrimSuffix(temp, ")")
				f, jac := make([]float64, 1), make([]float64, r.Params())
				curve.LnK(r.TRef, []float64{reference.Number(t, temp)}, r.P, f, jac)
				e := r.Interval(jac, f[0], 0.95)
				reference.Close(t, set+" "+q, e.Lower, w, 1e-8)
				reference.Close(t, set+" conf_hi("+temp, e.Upper, ref["conf_hi("+temp+")"], 1e-8)
				reference.Close(t, set+" se("+temp, e.StdError, ref["se("+temp+")"], 1e-7)
				compared++
			}
		}
	}
	if compared < 18 {
		t.Errorf("compared only %d limits", compared)
	}
}
