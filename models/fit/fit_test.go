package fit

import (
	"math"
	"reflect"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// TestProfileExponentInK compares with the same profile in 40-digit arithmetic
// (mpmath: Levenberg–Marquardt on a, E, n and bracketed roots): n̂, S_min and both
// 95 % limits.
func TestProfileExponentInK(t *testing.T) {
	for _, c := range []struct {
		set                   string
		model                 ErrorModel
		n, rss, lower, higher float64
	}{
		{"s1_straight", Absolute, -28.0465688846977539, 0.0108858860550729871, -50.8162811213898238, -6.52586716233557426},
		{"s8_tiny6", Absolute, 31.6876275072552596, 0.000155383206009344642, 8.96900517313110686, 52.4449543683486495},
		{"s6_replicates", Absolute, 1.69390982460748826, 84.3169005984280134, -1.8443519033307782, 4.90813579889187614},
		{"s5_hetero", StatedAbsolute, -0.438042925503812328, 6.40734967822431693, -6.38273332327736557, 5.18330132941194918},
	} {
		s := synthetic(t, c.set, c.model)
		r := Fit(s, models.PowerPrefactor{})
		if r.Status != Converged {
			t.Fatalf("%s: %v: %s", c.set, r.Status, r.Reason)
		}
		e := ProfileExponent(s, r, 0.95)
		reference.Close(t, c.set+" n", e.Value, c.n, 1e-9)
		reference.Close(t, c.set+" RSS", r.RSS, c.rss, 1e-10)
		reference.Close(t, c.set+" lower", e.Lower, c.lower, 1e-9)
		reference.Close(t, c.set+" upper", e.Upper, c.higher, 1e-9)
		if e.Open != OpenNone {
			t.Errorf("%s: open %q", c.set, e.Open)
		}
	}
}

// TestProfileOfLinearFunction: ΔE = nR(T_max - T_min) has the limits of n times a
// constant, and E_loc at some temperature is a parameter of the same curve referred
// to that temperature, whose profile must agree whichever parameter is eliminated.
func TestProfileOfLinearFunction(t *testing.T) {
	s := synthetic(t, "s8_tiny6", Absolute)
	r := Fit(s, models.PowerPrefactor{})
	n := ProfileExponent(s, r, 0.95)
	low, high := s.Range()
	span := models.GasConstant * (high - low)
	e := Profile(s, r, []float64{0, 0, span}, 0.95)
	reference.Close(t, "lower change of E", e.Lower, span*n.Lower, 1e-9)
	reference.Close(t, "upper change of E", e.Upper, span*n.Upper, 1e-9)

	e = Profile(s, r, []float64{0, 1, models.GasConstant * (high - s.TRef)}, 0.95)
	moved := *s
	moved.TRef = high
	rm := Fit(&moved, models.PowerPrefactor{})
	em := Profile(&moved, rm, []float64{0, 1, 0}, 0.95)
	reference.Close(t, "E_loc", e.Value, em.Value, 1e-9)
	reference.Close(t, "lower E_loc", e.Lower, em.Lower, 1e-8)
	reference.Close(t, "upper E_loc", e.Upper, em.Upper, 1e-8)
}

// TestProfileIsExactInLnK: for a curve linear in its parameters the profile is the t
// interval, so the general machinery must reproduce Interval, which
// TestIntervalAgainstR checks against R.
func TestProfileIsExactInLnK(t *testing.T) {
	for _, m := range []ErrorModel{Scaled, Stated} {
		s := synthetic(t, "s5_hetero", m)
		r := Fit(s, models.PowerPrefactor{})
		c := []float64{0, 0, 1}
		exact := r.Interval(c, r.P[2], 0.9)
		r.Curve = opaque{r.Curve} // hides that the curve is a Basis
		e := Profile(s, r, c, 0.9)
		reference.Close(t, string(m)+" lower", e.Lower, exact.Lower, 1e-8)
		reference.Close(t, string(m)+" upper", e.Upper, exact.Upper, 1e-8)
	}
}

// opaque is a curve of which nothing is known but its values.
type opaque struct{ models.Curve }

// TestProfileFromAnyStep: the standard error only says how far to step first; a
// ten-thousandth or a million times it, where the curve overflows, find the same ends.
func TestProfileFromAnyStep(t *testing.T) {
	s := synthetic(t, "s1_straight", Absolute)
	r := Fit(s, models.PowerPrefactor{})
	e := ProfileExponent(s, r, 0.95)
	for _, factor := range []float64{1e-4, 1e6} {
		other := *r
		other.Cov = append([]float64(nil), r.Cov...)
		for i := range other.Cov {
			other.Cov[i] *= factor * factor
		}
		o := ProfileExponent(s, &other, 0.95)
		reference.Close(t, "lower", o.Lower, e.Lower, 1e-9)
		reference.Close(t, "upper", o.Upper, e.Upper, 1e-9)
	}
}

// TestProfileOpenEnd: one rate constant stands clear of the scatter, so that ever
// steeper curves fit as well.
func TestProfileOpenEnd(t *testing.T) {
	s := mustSample(t, StatedAbsolute, []float64{300, 310, 320, 330, 340}, []float64{0.1, -0.2, 0.15, 0.1, 8}, []float64{1, 1, 1, 1, 1})
	r := Fit(s, models.Straight())
	e := Profile(s, r, []float64{0, 1}, 0.95)
	if e.Open != OpenUpper || !math.IsInf(e.Upper, 1) || !(e.Lower > 0) {
		t.Errorf("%v (%s): E in %g to %g, open %q", r.Status, r.Reason, e.Lower, e.Upper, e.Open)
	}
}

func TestInKWithNonPositiveRates(t *testing.T) {
	temp := []float64{300, 310, 320, 330, 340, 350}
	s := mustSample(t, Absolute, temp, []float64{-0.02, 0.05, 0.11, 0.39, 0.80, 2.02}, ones(6))
	r := Fit(s, models.Straight())
	if r.Status != Converged || r.Nu != 4 || !finite(r.Residuals...) || !finite(r.LogLik) {
		t.Fatalf("%v: %s", r.Status, r.Reason)
	}
	// The gradient of Σ(k - exp f)² vanishes: the residuals are orthogonal to k·X.
	f, jac := make([]float64, 6), make([]float64, 12)
	r.Curve.LnK(r.TRef, temp, r.P, f, jac)
	for j := range 2 {
		var dot, a float64
		for i := range temp {
			g := math.Exp(f[i]) * jac[2*i+j]
			dot += g * r.Residuals[i]
			a += math.Abs(g * r.Residuals[i])
		}
		if !(math.Abs(dot) <= 1e-12*a) {
			t.Errorf("gradient %d: %g of %g", j, dot, a)
		}
	}
	s = mustSample(t, Absolute, temp, []float64{-1, -2, 0, -1, -1, -3}, ones(6))
	if r := Fit(s, models.Straight()); r.Status != Failed || !strings.Contains(r.Reason, "positive") {
		t.Errorf("%v: %s", r.Status, r.Reason)
	}
	s = mustSample(t, Absolute, temp, []float64{-1, -2, 0, -1, -1, 3}, ones(6))
	if r := Fit(s, models.PowerPrefactor{}); r.Status == Converged {
		t.Errorf("three parameters from one positive rate constant: %v", r.P)
	}
}

// TestInKFindsTheBetterValley: scatter at the cold end makes a second minimum, n =
// 171.6 with RSS 0.0132, to which every fit in ln k leads. The better one is from
// minpack.lm in R 4.2.2, started at n = -200.
func TestInKFindsTheBetterValley(t *testing.T) {
	temp := []float64{280, 290, 300, 310, 320, 330, 340, 350, 360, 370, 380}
	k := []float64{0.065, 0.006, 0.015, 0.006, 0.005, -0.022, 0.043, 0.02, 0.207, 0.481, 1.031}
	r := Fit(mustSample(t, Absolute, temp, k, ones(11)), models.PowerPrefactor{})
	reference.Close(t, "RSS", r.RSS, 0.00780635251070222, 1e-9)
	reference.Close(t, "n", r.P[2], -242.260969038288, 1e-6)
}

// TestLostPathIsNotIdentified: with errors of one size in k, s5 leaves the first path
// to cold points that lie within the scatter. RSS, and the standard error of E1 that
// its Jacobian gives, from SciPy 1.10.1 (nnls and Nelder–Mead): 1516 kJ/mol. With the
// stated errors the paths count as identified, though E2 is within 306 kJ/mol only.
func TestLostPathIsNotIdentified(t *testing.T) {
	s := synthetic(t, "s5_hetero", Absolute)
	r := Fit(s, models.Parallel{})
	reference.Close(t, "RSS", r.RSS, 1.3572400151151756, 1e-10)
	reference.Close(t, "E1", r.P[1], -25179.35, 1e-4)
	if r.Status != NotIdentified || r.Cov != nil || !strings.Contains(r.Reason, "standard error") {
		t.Errorf("%v: %s", r.Status, r.Reason)
	}
	for _, param := range []string{"E1", "E2", "ln_A1", "ln_A2"} {
		e := ProfileShaped(s, r, param, 0.95)
		if !math.IsNaN(e.Value) || !math.IsNaN(e.StdError) || e.Open == OpenNone {
			t.Errorf("%s: %+v", param, e)
		}
	}
	if r := Fit(synthetic(t, "s5_hetero", StatedAbsolute), models.Parallel{}); r.Status != Converged {
		t.Errorf("stated: %v: %s", r.Status, r.Reason)
	}
}

// TestParallelInKIsGlobal: scatter gives two paths several minima. RSS and barriers
// from SciPy 1.10.1: nnls on a grid of 37,000 pairs of barriers, its best ones taken
// to convergence by Nelder–Mead.
func TestParallelInKIsGlobal(t *testing.T) {
	k := []float64{0.0059, -0.1262, -1.0382, 0.3045, -0.0686, 0.1751, 0.1571, 0.4237, 0.2177, 1.1155, 1.2248, 1.573, 3.1065, 4.9374, 8.6962}
	r := Fit(mustSample(t, Absolute, from300(15), k, ones(15)), models.Parallel{})
	reference.Close(t, "RSS", r.RSS, 1.5435085543986269, 1e-10)
	reference.Close(t, "E1", r.P[1], 55560.4523, 1e-6)
	reference.Close(t, "E2", r.P[3], 155496.0477, 1e-6)
}

// from300 is n temperatures from 300 K in steps of 10 K.
func from300(n int) (t []float64) {
	for i := range n {
		t = append(t, 300+10*float64(i))
	}
	return t
}

// TestParallelWithoutGainInK: a line with scatter in which no second path helps.
func TestParallelWithoutGainInK(t *testing.T) {
	s := synthetic(t, "s1_straight", Absolute)
	line := Fit(s, models.Straight())
	k := make([]float64, s.Len())
	for i, f := range line.Fitted {
		k[i] = math.Exp(f)
	}
	k[len(k)-2] *= 1.02 // bends down before the hot end
	k[0] *= 0.9
	s = mustSample(t, Absolute, s.T, k, s.V)
	r := Fit(s, models.Parallel{})
	if r.Status != Excluded || !strings.Contains(r.Reason, "bend the other way, or not at all") || r.RSS != Fit(s, models.Straight()).RSS {
		t.Errorf("%v: %s, RSS %g", r.Status, r.Reason, r.RSS)
	}
}

// TestParallelProfileInK: 95 % ends of S(θ) under E1 <= E2, from SciPy 1.10.1: nnls
// for the amplitudes, bounded search or Nelder–Mead from a grid for the barriers, and
// brentq. Its searches end at 1e-9 for the ln A.
func TestParallelProfileInK(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		set          string
		model        ErrorModel
		param        string
		lower, upper float64
		open         Open
	}{
		{"s5_hetero", StatedAbsolute, "E1", -inf, 60983.55091678189, OpenLower},
		{"s5_hetero", StatedAbsolute, "E2", 59128.663337950245, inf, OpenUpper},
		{"s5_hetero", StatedAbsolute, "ln_A1", -inf, 20.79326581403374, OpenLower},
		{"s5_hetero", StatedAbsolute, "ln_A2", -inf, inf, OpenBoth},
		{"s5_hetero", Absolute, "E1", -inf, 61802.16314874242, OpenLower},
		{"s5_hetero", Absolute, "E2", 59351.63604153279, inf, OpenUpper},
		{"s5_hetero", Absolute, "ln_A1", -inf, 21.014032853089933, OpenLower},
		{"s3_parallel", Absolute, "E1", 17354.283631130977, 20929.380580595905, OpenNone},
		{"s3_parallel", Absolute, "E2", 85750.9267731227, 88366.8531729935, OpenNone},
		{"s3_parallel", Absolute, "ln_A1", 6.681836948564879, 7.86260156187516, OpenNone},
		{"s3_parallel", Absolute, "ln_A2", 26.997505584165374, 27.660578265739325, OpenNone},
	} {
		s := synthetic(t, c.set, c.model)
		e := ProfileShaped(s, Fit(s, models.Parallel{}), c.param, 0.95)
		name := c.set + " " + string(c.model) + " " + c.param
		if e.Open != c.open {
			t.Errorf("%s: open %q, want %q", name, e.Open, c.open)
		}
		for end, w := range map[*float64]float64{&e.Lower: c.lower, &e.Upper: c.upper} {
			if math.IsInf(w, 0) && *end != w {
				t.Errorf("%s: %g, want %g", name, *end, w)
			} else if !math.IsInf(w, 0) {
				reference.Close(t, name, *end, w, 2e-9)
			}
		}
	}
}

// TestEndlessValley: sets on which the search for two paths finds no end keep their
// sum of squares, and no parameter.
func TestEndlessValley(t *testing.T) {
	temp := []float64{280, 290, 300, 310, 320, 330, 340, 350}
	k := []float64{-0.005, 0.011, 0.022, 0.027, 0.086, 0.197, 0.467, 0.989}
	s := mustSample(t, Absolute, temp, k, ones(8))
	r := Fit(s, models.Parallel{})
	if r.Status != NotIdentified || r.Cov != nil || !finite(r.RSS, r.LogLik) {
		t.Errorf("%v (%s), RSS %g", r.Status, r.Reason, r.RSS)
	}
	if line := Fit(s, models.Straight()); !(r.RSS <= line.RSS) {
		t.Errorf("RSS %g, that of the line %g", r.RSS, line.RSS)
	}
}

// TestInKInvariance: the unit of k shifts ln k_ref and nothing else, over 300
// decades; known from the scaling k -> ck of the model.
func TestInKInvariance(t *testing.T) {
	base := synthetic(t, "s8_tiny6", Absolute)
	r0 := Fit(base, models.PowerPrefactor{})
	e0 := ProfileExponent(base, r0, 0.95)
	for _, exponent := range []float64{-290, -150, -12, 12, 150, 290} {
		c := math.Pow(10, exponent)
		k := make([]float64, base.Len())
		for i := range k {
			k[i] = base.K[i] * c
		}
		s := mustSample(t, Absolute, base.T, k, base.V)
		r := Fit(s, models.PowerPrefactor{})
		if r.Status != Converged {
			t.Fatalf("1e%g: %v: %s", exponent, r.Status, r.Reason)
		}
		reference.Close(t, "E", r.P[1], r0.P[1], 1e-10)
		reference.Close(t, "n", r.P[2], r0.P[2], 1e-9)
		reference.Close(t, "sigma", r.Sigma/c, r0.Sigma, 1e-9)
		reference.Close(t, "var n", r.Cov[8], r0.Cov[8], 1e-8)
		reference.Close(t, "logLik", r.LogLik, r0.LogLik-6*math.Log(c), 1e-9)
		e := ProfileExponent(s, r, 0.95)
		reference.Close(t, "lower n", e.Lower, e0.Lower, 1e-8)
		reference.Close(t, "upper n", e.Upper, e0.Upper, 1e-8)
	}
}

// TestInKOver300Decades: noise-free rate constants from 1e-150 to 1e150.
func TestInKOver300Decades(t *testing.T) {
	const e, tRef = 1.5e6, 300.
	var temp, k []float64
	for x := -2e-4; x <= 2.01e-4; x += 5e-5 { // (1/T - 1/T_ref)/R
		temp = append(temp, 1/(1/tRef+x*models.GasConstant))
		k = append(k, math.Exp(-e*x))
	}
	u := make([]float64, len(k))
	for i := range k {
		u[i] = math.Pow(0.01*k[i], 2)
	}
	for _, c := range []struct {
		m ErrorModel
		v []float64
	}{{Absolute, ones(len(k))}, {StatedAbsolute, u}} {
		s := mustSample(t, c.m, temp, k, c.v)
		r := Fit(s, models.Straight())
		if !r.Usable() || math.IsNaN(r.LogLik) {
			t.Errorf("%s: %v: %s", c.m, r.Status, r.Reason)
			continue
		}
		if c.m == StatedAbsolute {
			reference.Close(t, "E", r.P[1], e, 1e-9)
		}
	}
}

// TestParallelInK recovers OH + acetone, k = 1.33e-13 + 3.82e-11 exp(-2000/T) cm³
// molecule⁻¹ s⁻¹ (JPL evaluation), from its table with errors in k.
func TestParallelInK(t *testing.T) {
	d := reference.Table(t, "expressions/table_jpl_oh_acetone.csv", "T_K", "k")
	s := mustSample(t, Absolute, d[0], d[1], ones(len(d[0])))
	r := Fit(s, models.Parallel{})
	if r.Status != Converged {
		t.Fatalf("%v: %s", r.Status, r.Reason)
	}
	q := make([]float64, 5)
	r.Curve.Forms()[0].FromCurve(models.Frame{TRef: r.TRef, TForm: r.TRef}, r.P, q, nil)
	reference.Close(t, "ln A1", q[0], math.Log(1.33e-13), 1e-9)
	if !(math.Abs(q[1]) <= 1e-8) {
		t.Errorf("E1 = %g kJ/mol, want 0", q[1])
	}
	reference.Close(t, "ln A2", q[2], math.Log(3.82e-11), 1e-9)
	reference.Close(t, "E2", q[3], 2000*models.GasConstant/1000, 1e-9)

	// Data in which E falls only where k is large, exclude it though
	// fits in ln k do not: ln k rises by 0.64, 0.69, 0.55, 0.52.
	bent := mustSample(t, Absolute, []float64{280, 290, 300, 310, 320}, []float64{0.091, 0.172, 0.344, 0.597, 1}, ones(5))
	if r := Fit(bent, models.Parallel{}); r.Status != Excluded {
		t.Errorf("E falling at the hot end: %v: %s", r.Status, r.Reason)
	}

	// Data whose E falls exclude it.
	f := make([]float64, s.Len())
	models.PowerPrefactor{}.LnK(s.TRef, s.T, []float64{0, 60e3, -20}, f, nil)
	for i := range f {
		f[i] = math.Exp(f[i])
	}
	s = mustSample(t, Absolute, s.T, f, s.V)
	if r := Fit(s, models.Parallel{}); r.Status != Excluded {
		t.Errorf("falling E: %v: %s", r.Status, r.Reason)
	}
}

// TestFailuresAreStatuses: bad data give a status and a reason, not a panic.
func TestFailuresAreStatuses(t *testing.T) {
	temp := []float64{300, 310, 320, 330, 340, 350}
	k := []float64{1, 2.1, 3.9, 8.2, 15, 31}
	same := []float64{300, 300, 300, 300, 300, 300}
	two := []float64{300, 300, 300, 350, 350, 350}
	for _, m := range ErrorModels {
		for _, c := range []struct {
			name  string
			t, k  []float64
			curve models.Curve
			want  Status
		}{
			{"N < p", temp[:2], k[:2], models.PowerPrefactor{}, Failed},
			{"N < p", temp[:1], k[:1], models.Straight(), Failed},
			{"N < p", temp[:3], k[:3], models.Parallel{}, Failed},
			{"N = p", temp[:2], k[:2], models.Straight(), Converged},
			{"N = p", temp[:3], k[:3], models.PowerPrefactor{}, Converged},
			{"one temperature", same, k, models.Straight(), NotIdentified},
			{"two temperatures", two, k, models.PowerPrefactor{}, NotIdentified},
			{"two temperatures", two, k, models.Straight(), Converged},
			{"neither basis nor shape", temp, k, opaque{models.Straight()}, Failed},
		} {
			s := mustSample(t, m, c.t, c.k, ones(len(c.t)))
			r := Fit(s, c.curve)
			if r.Status != c.want {
				t.Errorf("%s, %s, %s: %v (%s), want %v", m, c.name, c.curve.Info().Name, r.Status, r.Reason, c.want)
			}
			if (r.Status == Converged) != (r.Reason == "") {
				t.Errorf("%s, %s: reason %q", m, c.name, r.Reason)
			}
			if r.Status == NotIdentified && !strings.Contains(r.Reason, "distinct temperatures, has ") {
				t.Errorf("%s, %s: the reason does not name the cure: %s", m, c.name, r.Reason)
			}
			if r.Status == NotIdentified && (r.Cov != nil || !finite(r.RSS, r.LogLik) || !finite(r.Fitted...)) {
				t.Errorf("%s, %s: covariance %v, RSS %g, log-likelihood %g", m, c.name, r.Cov, r.RSS, r.LogLik)
			}
			if c.name == "N = p" {
				known := m.KnownSigma()
				if (r.Cov != nil) != known || math.IsNaN(r.Sigma) == known || math.IsNaN(r.LogLik) == known || r.Nu != 0 {
					t.Errorf("%s, N = p: σ %g, covariance %v, log-likelihood %g", m, r.Sigma, r.Cov, r.LogLik)
				}
			}
			if c.want == Failed && (r.Usable() || !math.IsNaN(r.RSS)) {
				t.Errorf("%s, %s: RSS %g of a failed fit", m, c.name, r.RSS)
			}
			e := ProfileExponent(s, r, 0.95)
			if c.want == Failed && !math.IsNaN(e.Value) {
				t.Errorf("%s, %s: exponent %g of a failed fit", m, c.name, e.Value)
			}
		}
	}
}

// TestPerfectData: no scatter gives a finite likelihood that more parameters do not
// improve, zero-width intervals and no failure.
func TestPerfectData(t *testing.T) {
	temp := []float64{250, 280, 300, 320, 333, 350, 371, 400}
	f, k := make([]float64, 8), make([]float64, 8)
	models.Straight().LnK(310, temp, []float64{-3, 75e3}, f, nil)
	for i := range k {
		k[i] = math.Exp(f[i])
	}
	for _, m := range ErrorModels {
		s := mustSample(t, m, temp, k, ones(8))
		line, power := Fit(s, models.Straight()), Fit(s, models.PowerPrefactor{})
		for _, r := range []*Result{line, power} {
			if r.Status != Converged || !finite(r.LogLik, r.AICc(), r.Sigma) || !finite(r.Cov...) {
				t.Errorf("%s, %s: %v, log-likelihood %g, σ %g", m, r.Curve.Info().Name, r.Status, r.LogLik, r.Sigma)
			}
		}
		reference.Close(t, string(m)+" E", line.P[1], 75e3, 1e-10)
		if !(line.AICc() < power.AICc()) {
			t.Errorf("%s: AICc %g of the line, %g of the power curve", m, line.AICc(), power.AICc())
		}
		if e := ProfileExponent(s, power, 0.95); !(e.Lower <= e.Value && e.Value <= e.Upper) || e.Open != OpenNone {
			t.Errorf("%s: exponent %+v", m, e)
		}
	}
	s := mustSample(t, Relative, temp, ones(8), ones(8)) // ln k = 0: RSS is exactly 0
	if r := Fit(s, models.Straight()); r.Status != Converged || !finite(r.LogLik) || r.RSS != 0 {
		t.Errorf("constant k: %v, RSS %g, log-likelihood %g", r.Status, r.RSS, r.LogLik)
	}
}

// TestLogLikelihoodIsADensityOfK sums ln of the normal or log-normal density of each
// k, σ² at its maximum-likelihood value, from the definitions.
func TestLogLikelihoodIsADensityOfK(t *testing.T) {
	for _, m := range ErrorModels {
		s := synthetic(t, "s5_hetero", m)
		r := Fit(s, models.Straight())
		var l float64
		for i := range s.T {
			sd := math.Sqrt(s.V[i])
			if !m.KnownSigma() {
				sd *= math.Sqrt(r.RSS / float64(r.N))
			}
			z := r.Residuals[i] / sd
			density := math.Exp(-z*z/2) / (sd * math.Sqrt(2*math.Pi))
			if !m.InK() {
				density /= s.K[i]
			}
			l += math.Log(density)
		}
		reference.Close(t, string(m), r.LogLik, l, 1e-12)
		reference.Close(t, string(m), LogLikelihood(s, r.RSS), l, 1e-12)
	}
}

func TestCriteria(t *testing.T) {
	// -2 ln L = 20, p = 2: K = 3 with σ unknown. Hurvich & Tsai's term is 24/(N-4).
	r := &Result{Curve: models.Straight(), Model: Relative, N: 10, LogLik: -10}
	reference.Close(t, "AIC", r.AIC(), 26, 1e-15)
	reference.Close(t, "AICc", r.AICc(), 30, 1e-15)
	reference.Close(t, "BIC", r.BIC(), 20+3*math.Log(10), 1e-15)
	r.N = 4
	if !math.IsNaN(r.AICc()) {
		t.Errorf("AICc with N = K+1 is %g", r.AICc())
	}
	r.Model = StatedAbsolute
	reference.Close(t, "AICc with σ known", r.AICc(), 24, 1e-15)
}

func TestEffectiveVariance(t *testing.T) {
	// E = RT² per kelvin: u(T) = 0.1 K is 0.1 in ln k.
	e := models.GasConstant * 300 * 300
	v := EffectiveVariance([]float64{0.04}, []float64{300}, []float64{0.1}, e, nil)
	reference.Close(t, "variance of ln k", v[0], 0.05, 1e-14)
	v = EffectiveVariance([]float64{0.04}, []float64{300}, []float64{0.1}, e, []float64{2})
	reference.Close(t, "variance of k", v[0], 0.08, 1e-14)
}

func TestInputsAreNotModified(t *testing.T) {
	for _, m := range ErrorModels {
		s := synthetic(t, "s5_hetero", m)
		before := &Sample{
			T: append([]float64(nil), s.T...), Y: append([]float64(nil), s.Y...),
			K: append([]float64(nil), s.K...), V: append([]float64(nil), s.V...), Model: s.Model, TRef: s.TRef,
		}
		for _, c := range models.All() {
			r := Fit(s, c)
			p, cov := append([]float64(nil), r.P...), append([]float64(nil), r.Cov...)
			f := make([]float64, r.Params())
			f[0] = 1
			Profile(s, r, f, 0.95)
			if !reflect.DeepEqual(p, append([]float64(nil), r.P...)) || !reflect.DeepEqual(cov, append([]float64(nil), r.Cov...)) {
				t.Errorf("%s, %s: Profile changed the result", m, c.Info().Name)
			}
			// Results own their memory.
			for _, x := range [][]float64{r.P, r.Cov, r.Fitted, r.Residuals, r.Leverage} {
				clear(x)
			}
		}
		EffectiveVariance(s.V, s.T, s.T, 1, s.K)
		if !reflect.DeepEqual(s, before) {
			t.Errorf("%s: the sample was modified", m)
		}
	}
	x, y, w := []float64{1, 1, 1, 2, 1, 3}, []float64{1, 2, 4}, []float64{1, 2, 3}
	Linear(x, y, w)
	p0 := []float64{1, 1}
	LeastSquares(Problem{M: 3, N: 2, Eval: func(p, r, jac []float64) {
		for i := range r {
			r[i] = p[0]*x[2*i] + p[1]*x[2*i+1] - y[i]
		}
		copy(jac, x)
	}}, p0, Options{})
	if !reflect.DeepEqual(x, []float64{1, 1, 1, 2, 1, 3}) || !reflect.DeepEqual(y, []float64{1, 2, 4}) || !reflect.DeepEqual(w, []float64{1, 2, 3}) || !reflect.DeepEqual(p0, []float64{1, 1}) {
		t.Error("Linear or LeastSquares changed its arguments")
	}
}

// TestLinearRankDeficient: two equal columns leave the residuals of one.
func TestLinearRankDeficient(t *testing.T) {
	f := Linear([]float64{1, 1, 1, 1, 1, 1}, []float64{1, 2, 6}, nil)
	if f.Rank != 1 || f.Cov != nil {
		t.Errorf("rank %d, covariance %v", f.Rank, f.Cov)
	}
	reference.Close(t, "RSS about the mean", f.RSS, 14, 1e-14)
	reference.Close(t, "sum of coefficients", f.P[0]+f.P[1], 3, 1e-14)
	for _, h := range f.Leverage {
		reference.Close(t, "leverage", h, 1./3, 1e-14)
	}
	// A line with its constant twice: 1, 2, 6 lies 1/2, -1, 1/2 off.
	f = Linear([]float64{1, 1, 1, 1, 1, 2, 1, 1, 3}, []float64{1, 2, 6}, nil)
	if f.Rank != 2 || f.Cov != nil {
		t.Errorf("rank %d, covariance %v", f.Rank, f.Cov)
	}
	reference.Close(t, "RSS about the line", f.RSS, 1.5, 1e-14)
}

// TestIterationsDoNotAllocate: a workspace in use allocates only its answer, however
// many iterations that takes.
func TestIterationsDoNotAllocate(t *testing.T) {
	for _, s := range readStRD(t, "nonlinear") {
		if s.name != "MGH10" {
			continue
		}
		pr := s.problem(strdModels[s.name])
		engine := newSolver(pr.M, pr.N)
		run := func(p0 []float64) float64 {
			return testing.AllocsPerRun(5, func() { engine.solve(pr, p0, Options{}) })
		}
		far, near := run(s.start[0]), run(s.certified)
		if far != near || far > 10 {
			t.Errorf("%g allocations from afar, %g from the answer", far, near)
		}
	}
}

func BenchmarkFit(b *testing.B) {
	for _, m := range []ErrorModel{Relative, Absolute} {
		s := synthetic(b, "s1_straight", m)
		for _, c := range []models.Curve{models.Straight(), models.PowerPrefactor{}} {
			b.Run(string(m)+"/"+c.Info().Name, func(b *testing.B) {
				b.ReportAllocs()
				for b.Loop() {
					Fit(s, c)
				}
			})
		}
	}
}

func BenchmarkProfileExponent(b *testing.B) {
	s := synthetic(b, "s1_straight", Absolute)
	r := Fit(s, models.PowerPrefactor{})
	b.ReportAllocs()
	for b.Loop() {
		ProfileExponent(s, r, 0.95)
	}
}
