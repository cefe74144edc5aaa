package diagnostics

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/modeltest"
	"onebarrier/models/reference"
)

var perSecond = dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}

// publishing is a complete input for a curve fitted to s.
func publishing(s *fit.Sample, r *fit.Result) toPublish {
	low, high := s.Range()
	w := make([]float64, s.Len())
	for i := range w {
		w[i] = 1 / s.V[i]
	}
	return toPublish{
		Fit: r, Quantity: perSecond, TMin: low, TMax: high, TEff: EffectiveTemperature(s.T, w),
		TRef: 298.15, Confidence: 0.95,
	}
}

// line finds the line of a symbol, and of a note where several have the symbol.
func line(t testing.TB, p Publish, symbol, note string) PublishLine {
	t.Helper()
	for _, l := range p.Lines {
		if l.Symbol == symbol && strings.Contains(l.Note, note) {
			return l
		}
	}
	t.Fatalf("no line %q with note %q in %s", symbol, note, symbols(p))
	return PublishLine{}
}

func symbols(p Publish) string {
	var s []string
	for _, l := range p.Lines {
		s = append(s, l.Symbol)
	}
	return strings.Join(s, " | ")
}

// tableSample reads a published table with columns of T and k.
func tableSample(t testing.TB, file, temp, k string) *fit.Sample {
	t.Helper()
	c := reference.Table(t, file, temp, k)
	s, err := fit.NewSample(fit.Relative, c[0], c[1], reference.Data{T: c[0]}.Ones())
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func parameter(t testing.TB, fs []FormEstimate, model, symbol string) Estimate {
	t.Helper()
	for _, f := range fs {
		for _, p := range f.Parameters {
			if f.Model == model && p.Symbol == symbol {
				return p.Estimate
			}
		}
	}
	t.Fatalf("no %s of %s", symbol, model)
	return Estimate{}
}

// Standard errors and values of every form against R 4.2.2 (golden_fits.csv), with
// R from the fits of {1, 1/T} to ln k - ln T and of {1, 1/T, ln T}.
func TestFormEstimatesAgainstR(t *testing.T) {
	g := golden(t)
	s := synthetic(t, "s1_straight", fit.Relative)
	fr := models.Frame{TForm: 298.15}

	e := formEstimates(fitNamed(t, s, "eyring"), fr, 0.95, perSecond, nil)
	for symbol, q := range map[string]struct {
		name string
		unit float64
	}{"dH": {"eyring_dH", 1000}, "dS": {"eyring_dS", 1}} {
		p := parameter(t, e, "eyring", symbol)
		reference.Close(t, symbol, float64(p.Value)*q.unit, g("s1_straight", "eyring", q.name), 1e-10)
		reference.Close(t, "u("+symbol+")", float64(p.StdError)*q.unit, g("s1_straight", "eyring", q.name+"_se"), 1e-9)
		// R: qt(0.975, 10) = 2.228138851964939
		reference.Close(t, "upper "+symbol, float64(p.Upper-p.Value), 2.228138851964939*float64(p.StdError), 1e-9)
		reference.Close(t, "lower "+symbol, float64(p.Value-p.Lower), 2.228138851964939*float64(p.StdError), 1e-9)
	}

	for _, set := range []string{"s1_straight", "s2_tn_curved"} {
		f := formEstimates(fitNamed(t, synthetic(t, set, fit.Relative), "power-prefactor"), fr, 0.95, perSecond, nil)
		reference.Close(t, "n", float64(parameter(t, f, "modified-arrhenius", "n").Value), g(set, "mod", "n_exp"), 1e-8)
		reference.Close(t, "u(n)", float64(parameter(t, f, "modified-arrhenius", "n").StdError), g(set, "mod", "n_exp_se"), 1e-8)
		reference.Close(t, "E", 1000*float64(parameter(t, f, "modified-arrhenius", "E").Value), g(set, "mod", "E_J_mol"), 1e-8)
		reference.Close(t, "ΔC_p", float64(parameter(t, f, "eyring-heat-capacity", "dCp").Value), g(set, "mod", "eyring_dCp"), 1e-8)
		reference.Close(t, "u(ΔC_p)", float64(parameter(t, f, "eyring-heat-capacity", "dCp").StdError), g(set, "mod", "eyring_dCp_se"), 1e-8)
		reference.Close(t, "ΔH(298)", 1000*float64(parameter(t, f, "eyring-heat-capacity", "dH").Value), g(set, "mod", "eyring_dH(298.15)"), 1e-8)
		reference.Close(t, "u(ΔH(298))", 1000*float64(parameter(t, f, "eyring-heat-capacity", "dH").StdError), g(set, "mod", "eyring_dH_se(298.15)"), 1e-8)
		reference.Close(t, "ΔS(298)", float64(parameter(t, f, "eyring-heat-capacity", "dS").Value), g(set, "mod", "eyring_dS(298.15)"), 1e-8)
		reference.Close(t, "u(ΔS(298))", float64(parameter(t, f, "eyring-heat-capacity", "dS").StdError), g(set, "mod", "eyring_dS_se(298.15)"), 1e-8)
	}
	if e[0].TRef.Known() {
		t.Error("ΔH‡ and ΔS‡ of the two-parameter form belong to no temperature")
	}
}

// N2O5 of Daniels and Johnston (1921): R 4.2.2 lm on ln k (golden_opendata.csv);
// published 103 kJ/mol (common handbook value).
func TestPublishN2O5(t *testing.T) {
	g := reference.Golden(t, "golden_opendata.csv").Fit("n2o5_daniels_johnston", "arr")
	s := tableSample(t, "handbook/n2o5_daniels_johnston.csv", "T_K", "k_1_s")
	r := fitNamed(t, s, "straight")
	in := publishing(s, r)
	in.Eyring = fitNamed(t, s, "linear-prefactor")
	p := publish(in)
	if p.Style != StyleMolar {
		t.Errorf("style %q, want molar for s^-1", p.Style)
	}
	e := line(t, p, "E_a", "")
	reference.Close(t, "E", 1000*float64(e.Value), g["E_J_mol"], 1e-9)
	reference.Close(t, "u(E)", 1000*float64(e.StdError), g["E_se"], 1e-9)
	// 102897.86 with 471.33 J/mol, rounded by hand; U = 2.776445 · 0.47133 = 1.3086, where
	// 2.776445 is R's qt(.975, 4).
	if e.Text != "102.90(47) kJ/mol" || !strings.HasPrefix(e.Note, "at 30") || !strings.HasSuffix(e.Note, "U = 1.3 kJ/mol") {
		t.Errorf("E_a = %q, %q", e.Text, e.Note)
	}
	a := line(t, p, "A", "")
	reference.Close(t, "A", float64(a.Value), g["A"], 1e-9)
	// 3.816e13; exp(0.18391797578837657) = 1.2019.
	if a.Text != "3.82×10^13 s^-1 ×/÷ 1.20" {
		t.Errorf("A = %q", a.Text)
	}
	lg := line(t, p, "lg(A/s^-1)", "")
	reference.Close(t, "lg A", float64(lg.Value), g["lnA"]/math.Ln10, 1e-10)
	// 31.272897/2.302585 = 13.58165, 0.183918/2.302585 = 0.07987.
	if lg.Text != "13.582(80)" {
		t.Errorf("lg A = %q", lg.Text)
	}
	corr := line(t, p, "r(ln A, E_a)", "")
	reference.Close(t, "r(ln A, E)", float64(corr.Value), g["corr_lnA_E"], 1e-9)
	if corr.Text != "0.9975" {
		t.Errorf("r = %q", corr.Text)
	}
	// R's coefficients 31.272897228895548 and -12375.767829116574, rounded.
	if k := line(t, p, "k(T)", "").Text; k != "exp(31.27290 − 12375.77 K/T) s^-1" {
		t.Errorf("k(T) = %q", k)
	}
	// ΔH‡ of the Eyring line is E_a - RT_eff exactly, by the definition of T_eff.
	dh := line(t, p, "ΔH‡", "")
	reference.Close(t, "ΔH‡", float64(dh.Value), float64(e.Value)-8.31446261815324e-3*in.TEff, 1e-10)
	// ΔG‡ = ΔH‡ - TΔS‡ at 298.15 K.
	reference.Close(t, "ΔG‡", float64(line(t, p, "ΔG‡", "298.15").Value), float64(dh.Value)-0.29815*float64(line(t, p, "ΔS‡", "").Value), 1e-10)
}

// recovers computes k from the line k(T) of what is published of r and compares it with
// the fit, in units of what the digits are chosen for: a hundredth of the least u(ln k),
// 0.0005 at most.
func recovers(t *testing.T, what string, in toPublish) {
	t.Helper()
	text := line(t, publish(in), "k(T)", "").Text
	formula, ok := strings.CutSuffix(text, " s^-1")
	if !ok {
		t.Errorf("%s: %q has no unit", what, text)
	}
	const steps = 64
	temps, tol := make([]float64, steps+1), 5e-4
	for i := range temps {
		temps[i] = in.TMin + (in.TMax-in.TMin)*float64(i)/steps
		tol = math.Min(tol, lnKAt(in.Fit, temps[i], 0.95).StdError/100)
	}
	if in.Exact {
		tol = 5e-6
	}
	for _, ti := range temps {
		k, err := modeltest.Evaluate(formula, ti)
		if err != nil {
			t.Fatalf("%s: %q: %v", what, text, err)
		}
		if d := math.Abs(math.Log(k) - lnKAt(in.Fit, ti, 0.95).Value); !(d <= 1.001*tol) {
			t.Errorf("%s: %q gives ln k at %g K wrong by %.2g, and may by %.2g", what, text, ti, d, tol)
			return
		}
	}
}

// The line k(T) must give the fitted curve back.
func TestPublishedCurveRecoversRates(t *testing.T) {
	for _, c := range []struct{ set, curve string }{
		{"s1_straight", "straight"}, {"s1_straight", "root-prefactor"}, {"s1_straight", "linear-prefactor"},
		{"s2_tn_curved", "power-prefactor"}, {"s3_parallel", "parallel"}, {"s8_tiny6", "straight"},
	} {
		s := synthetic(t, c.set, fit.Relative)
		recovers(t, c.curve+" of "+c.set, publishing(s, fitNamed(t, s, c.curve)))
	}
}

// So must it for every registered curve, in each form in which it is read, well or badly
// known, in every style and with any reference temperature.
func TestEveryCurveIsWrittenOut(t *testing.T) {
	for _, c := range models.All() {
		claimed, ok := c.(models.Claimed)
		if !ok {
			t.Errorf("%s states no claims", c.Info().Name)
			continue
		}
		read := map[string]bool{}
		for i, p := range claimed.Claims().P {
			for _, u := range []float64{1e-4, 0.02, 0.3} {
				r := byHand(c, 300, nil, p...)
				for j := range p { // all of ln k is uncertain by u, and nothing else
					for l := range p {
						if ps := c.Info().Params; ps[j].Unit == "k" && ps[l].Unit == "k" {
							r.Cov[j*len(p)+l] = u * u
						}
					}
				}
				in := toPublish{
					Fit: r, Quantity: perSecond,
					TMin: 250, TMax: 340, TEff: 300, TRef: 298.15, Confidence: 0.95,
				}
				form, _ := readable(in.Fit)
				read[form.Name] = true
				what := fmt.Sprintf("%s of parameters %d, u = %g", c.Info().Name, i, u)
				recovers(t, what, in)
				in.Exact = true
				recovers(t, what+", exact", in)
				in.Exact, in.TRef, in.Style = false, 320.12345, PublishStyles[i%len(PublishStyles)]
				recovers(t, what+", at 320.12345 K", in)
			}
		}
		if _, ok := c.(models.ReadAs); ok && len(read) != len(c.Forms()) {
			t.Errorf("%s was read as %v only", c.Info().Name, read)
		}
	}
}

// byHand is a fit made from published parameters, all with the same small
// covariance.
func byHand(curve models.Curve, tRef float64, u []float64, p ...float64) *fit.Result {
	r := &fit.Result{Curve: curve, Model: fit.Stated, Status: fit.Converged, TRef: tRef, P: p, Sigma: 1, N: 20, Nu: 20 - len(p)}
	r.Cov = make([]float64, len(p)*len(p))
	for i, ui := range u {
		r.Cov[i*len(p)+i] = ui * ui
	}
	return r
}

// OH + CH4, JPL evaluation (expressions/expressions.csv): k = 2.80e-14 T^0.667
// exp(-1575/T) beside 2.45e-12 exp(-1775/T): E/R at 298 K is 1575 + 0.667·298 =
// 1773.8 K where the two-parameter form has 1775 K, and k(298 K) is 6.3e-15 in both.
func TestPublishKelvin(t *testing.T) {
	q := dataset.Quantity{Symbol: "k", Unit: "cm^3 molecule^-1 s^-1", Known: true, PerMolecule: true}
	const tRef, r0 = 298., 8.31446261815324
	lnK := math.Log(2.80e-14) + 0.667*math.Log(tRef) - 1575/tRef
	three := byHand(models.PowerPrefactor{}, tRef, []float64{0.05, 200, 0.05}, lnK, (1575+0.667*tRef)*r0, 0.667)
	two := byHand(models.Straight(), tRef, []float64{0.05, 50 * r0}, math.Log(2.45e-12)-1775/tRef, 1775*r0)
	in := toPublish{Fit: three, Quantity: q, TMin: 195, TMax: 300, TEff: 240, TRef: 298, Confidence: 0.95}

	p := publish(in)
	if p.Style != StyleKelvin {
		t.Errorf("style %q, want kelvin for cm^3 molecule^-1 s^-1", p.Style)
	}
	reference.Close(t, "n", float64(line(t, p, "n", "").Value), 0.667, 1e-12)
	reference.Close(t, "B", float64(line(t, p, "E/R", "").Value), 1575, 1e-12)
	reference.Close(t, "A", float64(line(t, p, "A", "(T/298 K)^n").Value), 2.80e-14*math.Pow(298, 0.667), 1e-12)
	reference.Close(t, "k(298 K)", float64(line(t, p, "k(298 K)", "").Value), 6.3e-15, 0.01)
	reference.Close(t, "local E/R at 298 K", float64(LocalEnergy(three, 298, 0.95).Value)*1000/r0, 1775, 1e-3)
	if rng := line(t, p, "range", "").Text; rng != "195 to 300 K" {
		t.Errorf("range %q", rng)
	}

	in.Fit, in.Style = two, StyleEvaluated
	p = publish(in)
	e := line(t, p, "E/R", "")
	reference.Close(t, "E/R", float64(e.Value), 1775, 1e-12)
	if e.Text != "1775(50) K" {
		t.Errorf("E/R = %q", e.Text)
	}
	if k := line(t, p, "k(298 K)", "").Text; k != "6.34(32)×10^-15 cm^3 molecule^-1 s^-1" { // 2.45e-12 exp(-1775/298) = 6.3437e-15, 5 %
		t.Errorf("k(298 K) = %q", k)
	}
	// exp(0.05) = 1.0513; 2·0.05/ln 10 = 0.0434; 2·50 K.
	for symbol, text := range map[string]string{"f(298 K)": "1.051", "Δlg k(298 K)": "±0.043", "Δ(E/R)": "±100 K"} {
		if got := line(t, p, symbol, "").Text; got != text {
			t.Errorf("%s = %q, want %q", symbol, got, text)
		}
	}
	// In closed form u²(ln k) = 0.05² + (50 K (1/T - 1/298 K))²; its rise is steepest
	// at the far end, 195 K.
	d := 1/195. - 1/298.
	reference.Close(t, "g", float64(line(t, p, "g", "").Value), (math.Hypot(0.05, 50*d)-0.05)/d, 1e-6)
}

// f(T) made of f and g covers u(ln k(T)) everywhere in the range, and touches it.
func TestUncertaintyFactorCovers(t *testing.T) {
	for _, c := range []struct{ set, curve string }{{"s1_straight", "straight"}, {"s2_tn_curved", "power-prefactor"}, {"s3_parallel", "parallel"}} {
		s := synthetic(t, c.set, fit.Relative)
		r := fitNamed(t, s, c.curve)
		low, high := s.Range()
		for _, tRef := range []float64{low, 298.15, r.TRef, high, high + 100} {
			a := atReference(r, tRef, 0.95, low, high, nil)
			if want := tRef > high; a.Extrapolated != want {
				t.Errorf("%s at %g K: extrapolated is %v", c.curve, tRef, a.Extrapolated)
			}
			closest := math.Inf(1)
			for i := range 201 {
				ti := 1 / (1/low + (1/high-1/low)*float64(i)/200)
				x := math.Abs(1/ti - 1/tRef)
				gap := math.Log(float64(a.F)) + float64(a.G)*x - lnKAt(r, ti, 0.95).StdError
				if gap < -1e-5 {
					t.Errorf("%s, T_ref %g: f(T) is below exp u(ln k) at %g K by %.2g", c.curve, tRef, ti, -gap)
				}
				if x > 1e-9 {
					closest = math.Min(closest, gap)
				}
			}
			if a.G > 0 && !(closest < 1e-5) {
				t.Errorf("%s, T_ref %g: g = %g is larger than it must be", c.curve, tRef, a.G)
			}
		}
	}
}

// u(k) = k u(ln k), and the interval is that of ln k.
func TestAtReference(t *testing.T) {
	r := byHand(models.Straight(), 300, []float64{0.05, 200}, -5, 50e3)
	a := atReference(r, 300, 0.95, 280, 340, nil)
	reference.Close(t, "k", float64(a.K.Value), math.Exp(-5), 1e-14)
	reference.Close(t, "u(k)", float64(a.K.StdError), 0.05*math.Exp(-5), 1e-12)
	reference.Close(t, "f", float64(a.F), math.Exp(0.05), 1e-12)
	// sigma is known: the normal quantile, R: qnorm(0.975) = 1.959963984540054.
	reference.Close(t, "upper", float64(a.K.Upper), math.Exp(-5+1.959963984540054*0.05), 1e-12)
	reference.Close(t, "lower", float64(a.K.Lower), math.Exp(-5-1.959963984540054*0.05), 1e-12)
	if a.Curve != "straight" || a.Extrapolated {
		t.Errorf("%+v", a)
	}
}

// Sizes of the energy units: NIST CODATA 2018 energy equivalents (1 eV =
// 1.160451812e4 K = 8065.543937 cm^-1) and 1 eV = 96.48533212 kJ/mol from the
// Faraday constant; thermochemical calorie 4.184 J.
func TestEnergyUnits(t *testing.T) {
	for name, w := range map[string]float64{
		"kJ/mol": 1, "kcal/mol": 1 / 4.184, "eV": 1 / 96.48533212,
		"K": 1.160451812e4 / 96.48533212, "cm^-1": 8065.543937 / 96.48533212,
	} {
		reference.Close(t, name, UnitOfEnergy(name).PerKJ, w, 1e-9)
	}
	for _, name := range EnergyUnits {
		UnitOfEnergy(name) // every unit that can be asked for is known
	}
	r := byHand(models.Straight(), 300, []float64{0.05, 1000}, -5, 50e3)
	eyring := byHand(models.LinearPrefactor(), 300, []float64{0.05, 1000}, -5, 47.5e3)
	for unit, texts := range map[string]map[string]string{
		// 50 kJ/mol and 1 kJ/mol in each unit, by the sizes above; ΔS‡ from
		// R(ln k - ln(k_B T/h)) + ΔH‡/T = -128.214(3.359) J/(mol K) at 300 K.
		"":         {"E_a": "50.0(1.0) kJ/mol", "ΔS‡": "−128.2(3.4) J/(mol K)"},
		"kcal/mol": {"E_a": "11.95(24) kcal/mol", "ΔS‡": "−30.64(80) cal/(mol K)"},
		"eV":       {"E_a": "0.518(10) eV", "ΔS‡": "−1.329(35) meV/K"},
		"K":        {"E_a/R": "6.01(12)×10^3 K", "ΔS‡/R": "−15.42(40)"},
		"cm^-1":    {"E_a/hc": "4180(84) cm^-1", "ΔS‡/hc": "−10.72(28) cm^-1/K"},
	} {
		p := publish(toPublish{Fit: r, Eyring: eyring, Quantity: perSecond, TMin: 280, TMax: 340, TEff: 310, TRef: 300, Confidence: 0.95, EnergyUnit: unit})
		for symbol, text := range texts {
			if got := line(t, p, symbol, "").Text; got != text {
				t.Errorf("%q: %s = %q, want %q", unit, symbol, got, text)
			}
		}
	}
}

// Eyring's form is withheld where the unit of k was not understood, and from a
// diffusion coefficient.
func TestEyringIsWithheld(t *testing.T) {
	r := byHand(models.Straight(), 300, []float64{0.05, 200}, -5, 50e3)
	eyring := byHand(models.LinearPrefactor(), 300, []float64{0.05, 200}, -5, 47.5e3)
	for what, q := range map[string]dataset.Quantity{
		"unit":      {Symbol: "k", Unit: "a.u."},
		"diffusion": {Symbol: "D", Unit: "cm^2 s^-1", Known: true, Diffusion: true},
	} {
		for _, style := range PublishStyles {
			p := publish(toPublish{Fit: r, Eyring: eyring, Quantity: q, TMin: 280, TMax: 340, TEff: 310, TRef: 300, Confidence: 0.95, Style: style})
			if strings.Contains(symbols(p), "‡") {
				t.Errorf("%s, %s: %s", what, style, symbols(p))
			}
			if style == StyleMolar && !strings.Contains(strings.Join(p.Notes, "\n"), "withheld") {
				t.Errorf("%s: not said: %q", what, p.Notes)
			}
		}
		f := formEstimates(eyring, models.Frame{TForm: 300}, 0.95, q, nil)[0]
		if f.Withheld == "" || f.Parameters[0].Value.Known() || f.Parameters[1].Value.Known() || f.Covariance != nil {
			t.Errorf("%s: form %+v", what, f)
		}
	}
	q := dataset.Quantity{Symbol: "D", Unit: "cm^2 s^-1", Known: true, Diffusion: true}
	p := publish(toPublish{Fit: r, Quantity: q, TMin: 280, TMax: 340, TEff: 310, TRef: 300, Confidence: 0.95})
	if p.Style != StyleElectronvolt || !strings.HasPrefix(symbols(p), "D₀ | lg(D₀/(cm^2 s^-1)) | E | r(ln D₀, E)") {
		t.Errorf("%s: %s", p.Style, symbols(p))
	}
	// 50 kJ/mol = 0.51821 eV, 0.2 kJ/mol = 0.00207 eV.
	if e := line(t, p, "E", "").Text; e != "0.5182(21) eV" {
		t.Errorf("E = %q", e)
	}
}

// 1/min taken for 1/s would shift ΔS‡ by R ln 60 = 34.04 J/(mol K).
func TestTimeUnitEntersEntropy(t *testing.T) {
	eyring := byHand(models.LinearPrefactor(), 300, []float64{0.05, 200}, -5, 47.5e3)
	minutes := dataset.Quantity{Symbol: "k", Unit: "min^-1", Known: true, LnPerSecond: -math.Log(60)}
	fr := models.Frame{TForm: 300}
	s := parameter(t, formEstimates(eyring, fr, 0.95, perSecond, nil), "eyring", "dS")
	m := parameter(t, formEstimates(eyring, fr, 0.95, minutes, nil), "eyring", "dS")
	reference.Close(t, "shift of ΔS‡", float64(s.Value-m.Value), 8.31446261815324*math.Log(60), 1e-12)
	// ΔG‡ = ΔH‡ - TΔS‡ in any unit of time.
	p := publish(toPublish{Fit: eyring, Quantity: minutes, TMin: 280, TMax: 340, TEff: 310, TRef: 320, Confidence: 0.95})
	reference.Close(t, "ΔG‡", float64(line(t, p, "ΔG‡", "320 K").Value), 47.5-0.320*float64(m.Value), 1e-12)
}

// The lines A, n and E are the curve's own form, stated at the reference
// temperature, whatever the temperature of the canonical parameters.
func TestPublishedPowerLawIsTheForm(t *testing.T) {
	s := synthetic(t, "s2_tn_curved", fit.Relative)
	for curve, form := range map[string]string{"straight": "arrhenius", "root-prefactor": "collision", "power-prefactor": "modified-arrhenius"} {
		in := publishing(s, fitNamed(t, s, curve))
		f := formEstimates(in.Fit, models.Frame{TForm: in.TRef}, 0.95, perSecond, nil)
		p := publish(in)
		ln, lg := parameter(t, f, form, "ln_A"), line(t, p, "lg(A/s^-1)", "")
		reference.Close(t, curve+": lg A", float64(lg.Value), float64(ln.Value)/math.Ln10, 1e-12)
		reference.Close(t, curve+": u(lg A)", float64(lg.StdError), float64(ln.StdError)/math.Ln10, 1e-9)
		symbol := "E"
		if curve == "straight" {
			symbol = "E_a"
		}
		e, el := parameter(t, f, form, "E"), line(t, p, symbol, "")
		reference.Close(t, curve+": E", float64(el.Value), float64(e.Value), 1e-12)
		reference.Close(t, curve+": u(E)", float64(el.StdError), float64(e.StdError), 1e-9)
		if at := f[0].TRef; curve != "straight" && at != 298.15 || curve == "straight" && at.Known() {
			t.Errorf("%s: the form is stated at %g K", curve, at)
		}
	}
}

func TestUnresolvedSaysHowMuchEMayChange(t *testing.T) {
	s := synthetic(t, "s1_straight", fit.Relative)
	in := publishing(s, fitNamed(t, s, "straight"))
	in.Curvature = Curvature{
		EChange:  Estimate{Value: 2.5, StdError: 5.4, Lower: -9.1, Upper: 14.2},
		ELocTMin: Estimate{Value: 51.2, StdError: 2.1}, ELocTMax: Estimate{Value: 53.7, StdError: 3.3},
	}
	if p := publish(in); strings.Contains(symbols(p), "ΔE") {
		t.Errorf("ΔE is published though the verdict is not unresolved: %s", symbols(p))
	}
	in.State = Unresolved
	p := publish(in)
	if got := line(t, p, "ΔE", "").Text; got != "−9 to +14 kJ/mol" {
		t.Errorf("ΔE = %q", got)
	}
	if a, b := line(t, p, "E_a", fmt.Sprintf("%.0f K by power", in.TMin)).Text, line(t, p, "E_a", fmt.Sprintf("%.0f K by power", in.TMax)).Text; a != "51.2(2.1) kJ/mol" || b != "53.7(3.3) kJ/mol" {
		t.Errorf("E_a at the ends: %q, %q", a, b)
	}
}

// Parallel barriers: profile intervals take the place of symmetric ones, and open
// ends are shown.
func TestPublishParallel(t *testing.T) {
	s := synthetic(t, "s3_parallel", fit.Relative)
	in := publishing(s, fitNamed(t, s, "parallel"))
	p := publish(in)
	g := golden(t)
	reference.Close(t, "E1", 1000*float64(line(t, p, "E1", "").Value), g("s3_parallel", "par2", "coef:E1"), 1e-6)
	reference.Close(t, "u(E1)", 1000*float64(line(t, p, "E1", "").StdError), g("s3_parallel", "par2", "se:E1"), 1e-5)
	if got := symbols(p); !strings.HasPrefix(got, "A1 | lg(A1/s^-1) | E1 | A2 | lg(A2/s^-1) | E2 | T_x | E_a | E_a | k(T)") {
		t.Error(got)
	}
	nan := math.NaN()
	in.Profiles = map[string]fit.Estimate{
		"E1": {Value: 22.1, StdError: nan, Lower: 21.6, Upper: 22.4},
		"E2": {Value: 93.3, StdError: nan, Lower: 88.1, Upper: nan, Open: fit.OpenUpper},
	}
	p = publish(in)
	if a, b := line(t, p, "E1", "").Text, line(t, p, "E2", "").Text; a != "22.10 kJ/mol (21.60 to 22.40)" || b != "93.3 kJ/mol (88.1 to open)" {
		t.Errorf("E1 = %q, E2 = %q", a, b)
	}
	if open := line(t, p, "E2", "").Open; open == nil || *open != "upper" {
		t.Error("the open end is lost")
	}
}

// What is unknown is a dash with a reason, never 0 and never blank.
func TestPublishUnknown(t *testing.T) {
	r := byHand(models.Straight(), 300, nil, -5, 50e3)
	r.Model, r.Cov, r.N, r.Nu, r.Sigma = fit.Relative, nil, 2, 0, math.NaN()
	in := toPublish{Fit: r, Quantity: perSecond, TMin: 280, TMax: 340, TEff: 310, TRef: 300, Confidence: 0.95}
	for _, in.Style = range PublishStyles {
		p := publish(in)
		for _, l := range p.Lines {
			if l.Text == "" || strings.Contains(l.Text, "NaN") || l.StdError == 0 {
				t.Errorf("%s: %s = %q", in.Style, l.Symbol, l.Text)
			}
		}
		if !strings.Contains(strings.Join(p.Notes, "\n"), "degrees of freedom") {
			t.Errorf("no reason is given: %q", p.Notes)
		}
	}
	in.Style = StyleMolar
	if e := line(t, publish(in), "E_a", "").Text; e != "50.00(–) kJ/mol" {
		t.Errorf("E_a = %q", e)
	}
	r.Status, r.Reason = fit.NotIdentified, "E2 is not bounded"
	p := publish(in)
	if len(p.Lines) != 0 || !strings.Contains(p.Notes[0], "E2 is not bounded") {
		t.Errorf("%+v", p)
	}
	f := formEstimates(r, models.Frame{TForm: 300}, 0.95, perSecond, nil)[0]
	if f.Parameters[0].Value.Known() || f.Withheld != "not identified: E2 is not bounded" {
		t.Errorf("%+v", f)
	}
}

// A of 10^869 is printed though it overflows: k over 300 decades.
func TestPrefactorBeyondFloat(t *testing.T) {
	r := byHand(models.Straight(), 300, []float64{0.5, 2000}, 0, 5e6)
	p := publish(toPublish{Fit: r, Quantity: perSecond, TMin: 290, TMax: 310, TEff: 300, TRef: 300, Confidence: 0.95})
	// 5e6/(R·300)/ln 10 = 870.5603; 10^0.5603 = 3.634; u = hypot(0.5, 0.8018) = 0.9449, e^u = 2.573.
	if got := line(t, p, "A", "").Text; got != "3.63×10^870 s^-1 ×/÷ 2.57" {
		t.Errorf("A = %q", got)
	}
}

// Publishing reads its inputs only.
func TestPublishLeavesInputsAlone(t *testing.T) {
	s := synthetic(t, "s2_tn_curved", fit.Relative)
	r := fitNamed(t, s, "power-prefactor")
	p, cov := slices.Clone(r.P), slices.Clone(r.Cov)
	in := publishing(s, r)
	first := publish(in)
	for i, l := range publish(in).Lines {
		if l.Text != first.Lines[i].Text {
			t.Errorf("second call: %q, first %q", l.Text, first.Lines[i].Text)
		}
	}
	formEstimates(r, models.Frame{TForm: 300}, 0.95, perSecond, nil)
	atReference(r, 300, 0.95, in.TMin, in.TMax, nil)
	if !slices.Equal(p, r.P) || !slices.Equal(cov, r.Cov) {
		t.Error("the fit was modified")
	}
}

// An uncertainty that one degree of freedom gives needs k = tan(0.475 π) = 12.7062 for 95 %
// (Student's t with ν = 1 in closed form; JCGM 100:2008, table G.2: 12.71). One that is known
// has k = 2.
func TestExpandedUncertainty(t *testing.T) {
	temp, k := []float64{293.15, 313.15, 333.15}, []float64{1, 3.9, 13}
	for _, c := range []struct {
		model  fit.ErrorModel
		factor float64
		note   string
	}{{fit.Relative, math.Tan(0.475 * math.Pi), "U = 12.7 u (95 %)"}, {fit.Stated, 2, "U = 2u"}} {
		s, err := fit.NewSample(c.model, temp, k, []float64{1e-4, 1e-4, 1e-4})
		if err != nil {
			t.Fatal(err)
		}
		in := publishing(s, fitNamed(t, s, "straight"))
		in.Style = StyleEvaluated
		p := publish(in)
		e := line(t, p, "E/R", "")
		if want := "U = " + twoDigits(c.factor*float64(e.StdError)) + " K"; !strings.HasSuffix(e.Note, want) {
			t.Errorf("%s: note %q, want %q", c.model, e.Note, want)
		}
		reference.Close(t, "Δ(E/R)", float64(line(t, p, "Δ(E/R)", "").Value), c.factor*float64(e.StdError), 1e-9)
		if notes := strings.Join(p.Notes, " · "); !strings.Contains(notes, c.note) {
			t.Errorf("%s: notes %q", c.model, notes)
		}
	}
}

// With several sources Δlg k is the interval of k beside it, which holds the scatter
// between them; without, it is U = t u, with R's qt(.975, 10).
func TestEvaluatedAgreesWithK(t *testing.T) {
	s := synthetic(t, "s1_straight", fit.Relative)
	in := publishing(s, fitNamed(t, s, "straight"))
	in.Style = StyleEvaluated
	alone := publish(in)
	f := float64(line(t, alone, "f(298.15 K)", "").Value)
	reference.Close(t, "one source", float64(line(t, alone, "Δlg k(298.15 K)", "").Value), 2.22813885198627*math.Log10(f), 1e-12)

	in.Scatter = &sourceScatter{variance: 0.01, sources: 3}
	p := publish(in)
	k, lg := line(t, p, "k(298.15 K)", ""), line(t, p, "Δlg k(298.15 K)", "")
	reference.Close(t, "three sources", float64(lg.Value), math.Log10(float64(k.Upper/k.Lower))/2, 1e-12)
	for _, symbol := range []string{"k(298.15 K)", "f(298.15 K)"} {
		if l := line(t, p, symbol, ""); !strings.Contains(l.Note, "their scatter included") {
			t.Errorf("%s: note %q", symbol, l.Note)
		}
	}
	if notes := strings.Join(p.Notes, " · "); !strings.Contains(notes, "only k, f, g and Δlg k have their scatter") {
		t.Errorf("notes %q", notes)
	}
}
