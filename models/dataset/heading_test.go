package dataset

import (
	"strings"
	"testing"
)

// what a heading was read as, in one line: role, form, unit, shift, and for
// uncertainties kind, coverage; "?KEY" if ambiguous.
func (h Heading) brief() string {
	s := string(h.Role)
	if h.Of != "" && h.Role == RoleUncertainty {
		s += " of " + h.Symbol
	}
	if h.Role == RoleRate {
		s += " " + h.Symbol
	}
	if h.Form != "" && h.Form != FormUnknown {
		s += " " + string(h.Form)
	}
	if h.Unit != nil {
		s += " [" + h.Unit.Text + "]"
	} else if h.UnitText != "" {
		s += " {" + h.UnitText + "}"
	}
	if b := h.Beside; b != nil {
		s += " ±" + strings.TrimPrefix(Heading{Kind: b.Kind, Coverage: b.Coverage, Confidence: b.Confidence}.brief(), string(b.Role))
	}
	if h.Divisor != "" {
		s += " over " + string(h.Divisor)
	}
	if h.Shift != 0 {
		s += " e" + itoa(h.Shift)
	}
	if h.Kind != "" {
		s += " " + string(h.Kind)
	}
	if h.Coverage != 0 {
		s += " k" + strings.TrimSuffix(ftoa(h.Coverage), ".0")
	}
	if h.Confidence != 0 {
		s += " " + strings.TrimSuffix(ftoa(100*h.Confidence), ".0")
	}
	if h.Run != "" {
		s += " (" + h.Run + ")"
	}
	if h.Average {
		s += " average"
	}
	if h.Relative {
		s += " rel"
	}
	if h.Ambiguity != nil {
		s += " ?" + h.Ambiguity.Key
	}
	if h.Lost {
		s += " lost"
	}
	return s
}

func TestHeadings(t *testing.T) {
	// The expected readings are the table of roles of the interface and the
	// IUPAC Green Book's quantity/unit, written out by hand.
	for _, c := range []struct{ in, want string }{
		// temperatures
		{"T/K", "temperature [K]"},
		{"T / K", "temperature [K]"},
		{"T (K)", "temperature [K]"},
		{"T(K)", "temperature [K]"},
		{"T [K]", "temperature [K]"},
		{"T_K", "temperature [K]"},
		{"T_C", "temperature [°C]"},
		{"t/°C", "temperature [°C]"},
		{"t / ºC", "temperature [°C]"},
		{"t/℃", "temperature [°C]"},
		{"t/degF", "temperature [°F]"},
		{"T/degC", "temperature [°C]"},
		{"Temp / C", "temperature [°C]"},
		{"Temp. (deg C)", "temperature [°C]"},
		{"temperature, K", "temperature [K]"},
		{"Temperature in °C", "temperature [°C]"},
		{"TEMPERATURE (KELVIN)", "temperature [K]"},
		{"reaction temperature (°C)", "temperature [°C]"},
		{"temperature of the bath (K)", "temperature [K]"},
		{"Temperature_K", "temperature [K]"},
		{"θ/°C", "temperature [°C]"},
		{"10^-2 T/K", "temperature [K] e2"},
		{"absolute temperature", "temperature [K]"},
		{"T", "temperature ?T"},
		{"Temp", "temperature ?T"},
		{"temperature", "temperature ?T"},
		{"T (k)", "temperature ?T"},
		{"1000 / (T/K)", "temperature reciprocal [K^-1] e-3"},
		{"10^3/(T/K)", "temperature reciprocal [K^-1] e-3"},
		{"1/(T/K)", "temperature reciprocal [K^-1]"},
		{"1/T*1000", "temperature reciprocal [K^-1] e-3"},
		{"1/T × 10³ (K⁻¹)", "temperature reciprocal [K^-1] e-3"},
		{"1/T × 10^-3", "kept"}, // a product, or a unit
		{"1/T*1000 (10^-3 K^-1)", "kept"},
		{"t/s", "kept"},
		{"t/min", "kept"},
		{"t", "kept"},
		{"time", "kept"},
		{"Type", "kept"},
		{"T_g", "kept"},
		{"Tmin_K", "kept"},
		// levels that are certain, and those that are not
		{"2 s.d.", "uncertainty expanded k2"},
		{"2 s.d. (s-1)", "uncertainty [s^-1] expanded k2"},
		{"U95 (%)", "uncertainty {%} e-2 expanded 95 rel"},
		{"U (95%)", "uncertainty expanded 95"},
		{"U (95 %) / s^-1", "uncertainty [s^-1] expanded 95"},
		{"U (k=2)", "uncertainty expanded k2"},
		{"U", "kept"},
		{"rel. unc. (%)", "uncertainty {%} e-2 ambiguous rel ?error"},
		{"esd", "uncertainty ambiguous ?error"},
		{"conf. int.", "uncertainty expanded ?error"},
		{"delta k", "uncertainty of k ambiguous ?error"},
		{"uncertainty factor", "kept"},
		// how a ± in the cells is meant
		{"k (s-1) ± SD", "rate k [s^-1] ± s.d. of repeats"},
		{"k/s^-1 +/- SE", "rate k [s^-1] ± standard, of mean"},
		{"k ± 2σ (s-1)", "rate k [s^-1] ± expanded k2"},
		{"k_obs (s-1) ± 95 % CI", "rate k_obs [s^-1] ± expanded 95"},
		{"k (s-1) ± error", "kept"},
		// a power of ten behind the unit
		{"k (s⁻¹ × 10⁵)", "rate k [s^-1] e5 ?factor"},
		{"k/s^-1 × 10^5", "rate k [s^-1] e5 ?factor"},
		{"k (s^-1 x 105)", "rate k [s^-1] e5 ?factor lost"},
		{"k (m^2 s^-1 · 10^-9)", "rate k [m^2 s^-1] e-9 ?factor"},
		{"SE (s^-1 × 10^5)", "uncertainty [s^-1] e5 standard, of mean ?factor"},
		// k divided by T, by k_B T/h; never a unit "T"
		{"ln(k/T)", "rate k ln over T"},
		{"ln k/T", "rate k ln over T"},
		{"ln (k / T)", "rate k ln over T"},
		{"ln(k_obs/T)", "rate k_obs ln over T"},
		{"lg(k/T)", "rate k lg over T"},
		{"log(k/T)", "rate k over T ?log"},
		{"k/T", "rate k over T"},
		{"k/T (s-1 K-1)", "rate k [s^-1] over T"},
		{"10^5 k/T (s^-1 K^-1)", "rate k [s^-1] over T e-5"},
		{"ln(k/T) (M^-1 s^-1 K^-1)", "rate k ln [M^-1 s^-1] over T"},
		{"ln(k/T / (s^-1 K^-1))", "rate k ln [s^-1] over T"},
		{"ln[(k/T)/(s^-1 K^-1)]", "rate k ln [s^-1] over T"},
		{"ln((k/s^-1)/(T/K))", "rate k ln [s^-1] over T"},
		{"(k/s^-1)/(T/K)", "rate k [s^-1] over T"},
		{"k/T (s^-1)", "rate k {s^-1} over T"}, // no unit of k/T
		{"D/T (cm^2 s^-1 K^-1)", "rate D [cm^2 s^-1] over T"},
		{"ln(k h/k_B T)", "rate k ln over k_B T/h"},
		{"ln(kh/kBT)", "rate k ln over k_B T/h"},
		{"ln(k h/(k_B T))", "rate k ln over k_B T/h"},
		{"ln(hk/k_BT)", "rate k ln over k_B T/h"},
		{"lg[h k_obs/(k_B T)]", "rate k_obs lg over k_B T/h"},
		{"u(ln(k/T))", "uncertainty of k ln over T standard"},
		{"tau/T", "kept"},
		{"k/T^2", "kept"},
		{"k/RT", "kept"},
		{"k/V", "kept"},
		{"k/[A]", "kept"},
		{"k_B/T", "kept"},
		// reciprocal temperatures
		{"10^3 K/T", "temperature reciprocal [K^-1] e-3"},
		{"10³ K/T", "temperature reciprocal [K^-1] e-3"},
		{"103 K/T", "temperature reciprocal [K^-1] e-3 lost"},
		{"kK/T", "temperature reciprocal [K^-1] e-3"},
		{"10^3 (T/K)^-1", "temperature reciprocal [K^-1] e-3"},
		{"10³ (T/K)⁻¹", "temperature reciprocal [K^-1] e-3"},
		{"1000/T", "temperature reciprocal [K^-1] e-3"},
		{"1000/T (K)", "temperature reciprocal [K^-1] e-3"},
		{"1000/T (K^-1)", "temperature reciprocal [K^-1] e-3"},
		{"1000 K / T", "temperature reciprocal [K^-1] e-3"},
		{"10^4/T", "temperature reciprocal [K^-1] e-4"},
		{"1/T (1/K)", "temperature reciprocal [K^-1]"},
		{"1/T / K^-1", "temperature reciprocal [K^-1]"},
		{"1/T (10^-3 K^-1)", "temperature reciprocal [K^-1] e-3"},
		{"1/T (kK^-1)", "temperature reciprocal [kK^-1]"},
		{"1/kT (eV^-1)", "temperature 1/(k_B T) [eV^-1]"},
		{"1/k_BT (eV⁻¹)", "temperature 1/(k_B T) [eV^-1]"},
		{"1/(kT) / eV^-1", "temperature 1/(k_B T) [eV^-1]"},
		{"1/RT (mol/kJ)", "temperature 1/(k_B T) [mol kJ^-1]"},
		{"1/kT", "temperature 1/(k_B T) ?T"},
		{"1/RT", "temperature 1/(k_B T) ?T"},
		// rate constants
		{"k/s^-1", "rate k [s^-1]"},
		{"k / s⁻¹", "rate k [s^-1]"},
		{"k (s-1)", "rate k [s^-1]"},
		{"k(1/s)", "rate k [s^-1]"},
		{"k_obs/s^-1", "rate k_obs [s^-1]"},
		{"k_obs (min⁻¹)", "rate k_obs [min^-1]"},
		{"kobs", "rate kobs"},
		{"k", "rate k"},
		{"k1 (s-1)", "rate k1 [s^-1]"},
		{"k/(L mol^-1 s^-1)", "rate k [L mol^-1 s^-1]"},
		{"k/L mol^-1 s^-1", "rate k [L mol^-1 s^-1]"},
		{"k (M-1 s-1)", "rate k [M^-1 s^-1]"},
		{"k, dm3 mol-1 s-1", "rate k [dm^3 mol^-1 s^-1]"},
		{"k_cat/K_M (M^-1 s^-1)", "rate k_cat/K_M [M^-1 s^-1]"},
		{"kcat/Km (M^-1 s^-1)", "rate kcat/Km [M^-1 s^-1]"},
		{"kcat/Km/(M^-1 s^-1)", "rate kcat/Km [M^-1 s^-1]"},
		{"k_cat", "rate k_cat"},
		{"kcat (s-1)", "rate kcat [s^-1]"},
		{"k_1_s", "rate k [s^-1]"},
		{"k_L_mol_s", "rate k [L mol^-1 s^-1]"},
		{"k_dec_L_mol_s", "rate k_dec [L mol^-1 s^-1]"},
		{"k_form_L_mol_s", "rate k_form [L mol^-1 s^-1]"},
		{"k_1_s-1", "rate k_1 [s^-1]"},
		{"k_per_min", "rate k [min^-1]"},
		{"k_cm3_molecule_s", "rate k [cm^3 molecule^-1 s^-1]"},
		{"rate constant", "rate k"},
		{"Rate constant k (s-1)", "rate k [s^-1]"},
		{"rate coefficient / cm3 molecule-1 s-1", "rate k [cm^3 molecule^-1 s^-1]"},
		{"turnover number (s^-1)", "rate turnover number [s^-1]"},
		{"D/cm^2 s^-1", "rate D [cm^2 s^-1]"},
		{"D (cm2/s)", "rate D [cm^2 s^-1]"},
		{"lg D", "rate D lg"},
		{"diffusion coefficient (m²/s)", "rate D [m^2 s^-1]"},
		{"k(T)/s^-1", "rate k [s^-1]"},
		{"ln k(T)", "rate k ln"},
		{"Rate k/s^-1", "rate k [s^-1]"},
		{"Rate constant, k_obs (s^-1)", "rate k_obs [s^-1]"},
		{"v k/s^-1", "kept"},
		{"-ln k", "kept"},
		// Boltzmann's constant has its unit or its capital
		{"k_b/s^-1", "rate k_b [s^-1]"}, {"k_b", "rate k_b"}, {"k_B/s^-1", "rate k_B [s^-1]"}, {"k_B", "kept"}, {"k_b (J/K)", "kept"}, {"k_{B}/(J K^-1)", "kept"},
		// repeats say so; a bare index does not
		{"k/s^-1 (run 1)", "rate k [s^-1] (run 1)"},
		{"k (run 2)/s^-1", "rate k [s^-1] (run 2)"},
		{"k (Run 2, s^-1)", "rate k [s^-1] (run 2)"},
		{"k, run 2 (s-1)", "rate k [s^-1] (run 2)"},
		{"run 3 k/s^-1", "rate k [s^-1] (run 3)"},
		{"run 3: k/s^-1", "rate k [s^-1] (run 3)"},
		{"Run A k (s-1)", "rate k [s^-1] (run a)"},
		{"k rep 1", "rate k (rep 1)"},
		{"k (replicate 2)", "rate k (rep 2)"},
		{"k (Repeat no. 2) / s⁻¹", "rate k [s^-1] (rep 2)"},
		{"ln(k/s^-1) trial 2", "rate k ln [s^-1] (trial 2)"},
		{"k #1", "rate k (rep 1)"},
		{"k#1/s^-1", "rate k [s^-1] (rep 1)"},
		{"k_run1", "rate k (run 1)"},
		{"k_rep2_s-1", "rate k [s^-1] (rep 2)"},
		{"kcat/Km (run 1)/(M^-1 s^-1)", "rate kcat/Km [M^-1 s^-1] (run 1)"},
		{"t_1/2/min (run 2)", "rate t_1/2 half-life [min] (run 2)"},
		{"run 1, rep 2 k/s^-1", "rate k [s^-1] (run 1 rep 2)"},
		{"10^3 k (run 1)/s^-1", "rate k [s^-1] e-3 (run 1)"},
		{"u(k)/s^-1 (run 1)", "uncertainty of k [s^-1] standard (run 1)"},
		{"u(k (run 1))/s^-1", "uncertainty of k [s^-1] standard (run 1)"},
		{"SE (run 2)", "uncertainty standard, of mean (run 2)"},
		{"k_1/s^-1", "rate k_1 [s^-1]"}, {"k(1)/s^-1", "rate k(1) [s^-1]"}, {"k/s^-1 [1]", "rate k(1) [s^-1]"}, {"k (s^-1) (2)", "rate k(2) [s^-1]"},
		{"run", "kept"}, {"run 1", "kept"}, {"run k/s^-1", "kept"}, {"run order", "order"}, {"trial", "kept"}, {"k series 1", "kept"}, {"k_rep/s^-1", "rate k_rep [s^-1]"}, {"T (run 1)", "temperature ?T"},
		// means of repeats
		{"mean k/s^-1", "rate k [s^-1] average"},
		{"k mean", "rate k average"},
		{"average k (s-1)", "rate k [s^-1] average"},
		{"k (avg)/s^-1", "rate k [s^-1] average"},
		{"k_mean/s^-1", "rate k [s^-1] average"},
		{"mean temperature (K)", "temperature [K]"}, {"mean", "kept"}, {"mean pH", "kept"},
		{"ln(k/s^-1)", "rate k ln [s^-1]"},
		{"ln k", "rate k ln"},
		{"ln(k)", "rate k ln"},
		{"lnk", "rate k ln"},
		{"Ln k (s-1)", "rate k ln [s^-1]"},
		{"lg(k/s^-1)", "rate k lg [s^-1]"},
		{"log10 k", "rate k lg"},
		{"log₁₀(k / s⁻¹)", "rate k lg [s^-1]"},
		{"lg(k/(L mol^-1 s^-1))", "rate k lg [L mol^-1 s^-1]"},
		{"log k", "rate k ?log"},
		{"log(k/s^-1)", "rate k [s^-1] ?log"},
		{"rate", "rate rate ?k"},
		{"rate (s^-1)", "rate rate [s^-1] ?k"},
		{"v", "rate v ?k"},
		{"k/s", "rate k [s] ?k"},
		{"k/widgets", "rate k {widgets}"},
		// not rate constants
		{"K", "kept"}, {"Kw", "kept"}, {"pKw", "kept"}, {"kPa", "kept"}, {"kJ/mol", "kept"}, {"k_B (J/K)", "kept"}, {"kH/kD", "kept"},
		{"D (mm)", "kept"}, {"eta_Pa_s", "kept"}, {"p_mmHg", "kept"}, {"pH", "kept"}, {"dose", "kept"}, {"ln x", "kept"}, {"lot", "kept"},
		// powers of ten
		{"10^12 k/s^-1", "rate k [s^-1] e-12"},
		{"10¹² k / cm³ molecule⁻¹ s⁻¹", "rate k [cm^3 molecule^-1 s^-1] e-12"},
		{"105 k/s-1", "rate k [s^-1] e-5 lost"},
		{"k/(10^-12 cm^3 molecule^-1 s^-1)", "rate k [cm^3 molecule^-1 s^-1] e-12"},
		{"k (10^-12 cm3 s-1)", "rate k [cm^3 s^-1] e-12"},
		{"k (10-12 cm3 s-1)", "rate k [cm^3 s^-1] e-12 lost"},
		{"k × 10^12", "rate k e12 ?factor"},
		{"k x 10^5 (s-1)", "rate k [s^-1] e5 ?factor"},
		{"k (×10^-12 cm^3 s^-1)", "rate k [cm^3 s^-1] e-12 ?factor"},
		{"ln(10^5 k/s^-1)", "rate k ln [s^-1] e-5"},
		// times
		{"tau/s", "rate tau reciprocal [s]"},
		{"τ/ns", "rate τ reciprocal [ns]"},
		{"lifetime (ms)", "rate lifetime reciprocal [ms]"},
		{"life_h", "rate life reciprocal [h]"},
		{"t_1/2/min", "rate t_1/2 half-life [min]"},
		{"t½/min", "rate t1/2 half-life [min]"},
		{"t1/2 (h)", "rate t1/2 half-life [h]"},
		{"half-life (h)", "rate half-life half-life [h]"},
		{"half_life_h", "rate half_life half-life [h]"},
		{"t_half_s", "rate t_half half-life [s]"},
		// uncertainties
		{"u(k)/s^-1", "uncertainty of k [s^-1] standard"},
		{"u(k)", "uncertainty of k standard"},
		{"u_r(k)/%", "uncertainty of k {%} e-2 standard rel"},
		{"u_r(k)", "uncertainty of k standard rel"},
		{"u(ln k)", "uncertainty of k ln standard"},
		{"u(ln(k/s^-1))", "uncertainty of k ln standard"},
		{"u(lg k)", "uncertainty of k lg standard"},
		{"u(T)/K", "temperature-uncertainty [K] standard"},
		{"u_T/K", "temperature-uncertainty [K] standard"},
		{"u(k_obs) (s-1)", "uncertainty of k_obs [s^-1] standard"},
		{"SE", "uncertainty standard, of mean"},
		{"SEM", "uncertainty standard, of mean"},
		{"SE (s-1)", "uncertainty [s^-1] standard, of mean"},
		{"k SE", "uncertainty of k standard, of mean"},
		{"k_se", "uncertainty of k standard, of mean"},
		{"1σ", "uncertainty standard k1"},
		{"σ", "uncertainty standard"},
		{"sigma_k", "uncertainty of k standard"},
		{"σ(k)/s^-1", "uncertainty of k [s^-1] standard"},
		{"2σ", "uncertainty expanded k2"},
		{"2 sigma", "uncertainty expanded k2"},
		{"2σ(k)/s^-1", "uncertainty of k [s^-1] expanded k2"},
		{"k (2σ)", "uncertainty of k expanded k2"},
		{"U(k)/s^-1 (k=2)", "uncertainty of k [s^-1] expanded k2"},
		{"U(k)/s^-1 (k = 3)", "uncertainty of k [s^-1] expanded k3"},
		{"U(k)", "uncertainty of k expanded ?error"},
		{"U_95(k)", "uncertainty of k expanded 95"},
		{"95 % CI", "uncertainty expanded 95"},
		{"95% CI (s-1)", "uncertainty [s^-1] expanded 95"},
		{"CI (95 %)", "uncertainty expanded 95"},
		{"99 % CI", "uncertainty expanded 99"},
		{"90 % interval (s-1)", "uncertainty [s^-1] expanded 90"},
		{"CI (68.3 %)", "uncertainty expanded 68.3"},
		{"U_99(k)", "uncertainty of k expanded 99"},
		{"CI", "uncertainty expanded ?error"}, // of which level
		{"interval/s", "kept"}, {"confidence", "kept"}, {"97 % CI", "kept"}, {"99 % CI upper", "kept"},
		{"10^3 u(k)/s^-1", "uncertainty of k [s^-1] e-3 standard"},
		{"10³ SE", "uncertainty e-3 standard, of mean"},
		{"100 u_r(k)", "uncertainty of k e-2 standard rel"},
		{"10 % error", "kept"},
		{"f(k)", "uncertainty of k uncertainty factor"},
		{"f(k) (k=2)", "uncertainty of k uncertainty factor k2"},
		{"s(k)", "uncertainty of k s.d. of repeats"},
		{"sd(k)/s^-1", "uncertainty of k [s^-1] s.d. of repeats"},
		{"SD", "uncertainty s.d. of repeats"},
		{"stdev", "uncertainty s.d. of repeats"},
		{"standard deviation (s-1)", "uncertainty [s^-1] s.d. of repeats"},
		{"k_sd", "uncertainty of k s.d. of repeats"},
		{"RSD/%", "uncertainty {%} e-2 s.d. of repeats rel"},
		{"CV%", "uncertainty {%} e-2 s.d. of repeats rel"},
		{"%RSD", "uncertainty {%} e-2 s.d. of repeats rel"},
		{"error", "uncertainty ambiguous ?error"},
		{"±", "uncertainty ambiguous ?error"},
		{"error (%)", "uncertainty {%} e-2 ambiguous rel ?error"},
		{"k error", "uncertainty of k ambiguous ?error"},
		{"Δk/s^-1", "uncertainty of k [s^-1] ambiguous ?error"},
		{"uncertainty (k=2)", "uncertainty expanded k2"},
		{"error (2σ)", "uncertainty expanded k2"},
		{"T error", "temperature-uncertainty ambiguous ?error"},
		{"sigma_rounding_mmHg", "kept"}, {"95% CI lower", "kept"}, {"errors found", "kept"}, {"f(298)", "kept"},
		// others; symbols are case-sensitive, words are not
		{"n", "repeats"}, {"N", "repeats"}, {"Replicates", "repeats"}, {"coverage_factor", "coverage-factor"}, {"LIMIT", "limit"},
		{"Lab", "source"}, {"method", "source"}, {"dataset", "dataset"}, {"order", "order"}, {"Note", "note"}, {"comments", "note"}, {"", "kept"},
	} {
		if got := ParseHeading(c.in, nil).brief(); got != c.want {
			t.Errorf("%q: got %q, want %q", c.in, got, c.want)
		}
	}
}

func TestAssumptionsSettleHeadings(t *testing.T) {
	for _, c := range []struct{ in, key, value, want string }{
		{"T", "T", "K", "temperature [K]"},
		{"Temp", "T", "degC", "temperature [°C]"},
		{"T", "T", "1000/T", "temperature reciprocal [K^-1] e-3"},
		{"1/kT", "T", "eV^-1", "temperature 1/(k_B T) [eV^-1]"},
		{"1/RT", "T", "mol/kJ", "temperature 1/(k_B T) [mol kJ^-1]"},
		{"log k", "log", "lg", "rate k lg"},
		{"log k", "log", "ln", "rate k ln"},
		{"rate (s^-1)", "k", "rate", "rate rate [s^-1]"},
		{"k/s", "k", "rate", "rate k [s^-1]"},
		{"k × 10^12", "factor", "times", "rate k e-12"},
		{"k × 10^12", "factor", "unit", "rate k e12"},
		{"error", "error", "1", "uncertainty standard"},
		{"error", "error", "2", "uncertainty expanded k2"},
		{"error", "error", "sd", "uncertainty s.d. of repeats"},
		{"U(k)", "error", "2", "uncertainty of k expanded k2"},
	} {
		h := ParseHeading(c.in, map[string]string{c.key: c.value})
		if got := h.brief(); got != c.want {
			t.Errorf("%q with %s=%s: got %q, want %q", c.in, c.key, c.value, got, c.want)
		}
		if want := c.key + "=" + c.value; len(h.Assumed) != 1 || h.Assumed[0] != want {
			t.Errorf("%q: assumed %v, want %s", c.in, h.Assumed, want)
		}
	}
	for _, in := range []string{"T/K", "ln k", "k/s^-1", "u(k)"} {
		h := ParseHeading(in, map[string]string{"T": "degC", "log": "ln", "k": "rate", "error": "2"})
		if len(h.Assumed) != 0 {
			t.Errorf("%q is certain, and %v was assumed", in, h.Assumed)
		}
	}
}

func FuzzHeading(f *testing.F) {
	for _, s := range []string{"T/K", "10³ K/T", "1/kT (eV^-1)", "u(ln(k/s^-1))", "k × 10^12", "95 % CI", "t_1/2/min", "k_dec_L_mol_s", "((((", "10^", "k_{", "2σ(", "ln(", "\u202ek/s", "\ufeffT/K", "T\x00/K", "\"T/K\"", "\u0643/s^-1", "k/s\u207b\u00b9", "10^99999 k/s", "10^-999999999999 k/s", "1e999 K/T", "k/(10,5 s)", "\xb0C", "T /\u00b0\u00b0C", "U_95(lg(k))/%(k=2)", "u(u(u(k)))", "k/s/s/s/s", "\ufdfa/s", "((((((((((k))))))))))", "k\u0338/s", "\u212a", "10 10 10 k", "k (run 1)/s^-1", "run 1, rep 2 k/s", "k#1", "(run 1", "k/s^-1 [1]", "k_run1_s-1", "mean k/s", "k (mean)", "99.7 % CI", "1/T*1000", "1000 / (T/K)", "10^3 U_99(k(T))/%", "k_b", "-ln k"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		h := ParseHeading(s, nil)
		if h.Role == "" {
			t.Errorf("%q has no role", s)
		}
		if h.Role == RoleTemperature && h.Ambiguity == nil && h.Unit == nil {
			t.Errorf("%q: a temperature without unit is certain", s)
		}
		ParseHeading(s, map[string]string{"T": "degC", "log": "lg", "k": "rate", "error": "2", "factor": "unit"})
		for _, role := range []string{"T", "k", "u(k)", "u_r(k)", "1000/T", "log k"} {
			if _, err := parseAs(role, s, nil); err != nil {
				t.Errorf("%q as %s: %v", s, role, err)
			}
		}
	})
}

// A role given by --column brings no unit and no meaning that is not written.
func TestHeadingsGivenARole(t *testing.T) {
	degC := map[string]string{"T": "degC"}
	for _, c := range []struct {
		role, text string
		assume     map[string]string
		want       string
	}{
		{"T", "foo", nil, "temperature ?T"},
		{"T", "foo", degC, "temperature [°C]"},
		{"T", "foo/degC", nil, "temperature [°C]"},
		{"T", "foo (K)", degC, "temperature [K]"},
		{"T/K", "foo", nil, "temperature [K]"},
		{"T", "foo", map[string]string{"T": "1000/T"}, "temperature reciprocal [K^-1] e-3"},
		{"1000/T", "foo", nil, "temperature reciprocal [K^-1] e-3"},
		{"1/T", "foo/(10^-3 K^-1)", nil, "temperature reciprocal [K^-1] e-3"},
		{"1/kT", "foo", nil, "temperature 1/(k_B T) ?T"},
		{"1/kT", "foo/eV^-1", nil, "temperature 1/(k_B T) [eV^-1]"},
		{"k", "foo/s^-1", nil, "rate foo [s^-1]"},
		{"k", "foo (10^-3 s^-1)", nil, "rate foo [s^-1] e-3"},
		{"rate", "foo/s^-1", nil, "rate foo [s^-1]"},
		{"log k", "foo", nil, "rate foo ?log"},
		{"log k", "foo", map[string]string{"log": "lg"}, "rate foo lg"},
		{"u_r(k)", "error (%)", nil, "uncertainty of k {%} e-2 standard rel"},
		{"u_r(k)/%", "error (%)", nil, "uncertainty of k {%} e-2 standard rel"},
		{"u(k)", "q/s^-1", nil, "uncertainty of k [s^-1] standard"},
		{"U(k) (k=2)", "error (%)", nil, "uncertainty of k {%} e-2 expanded k2 rel"},
		{"U(k)", "q", nil, "uncertainty of k expanded ?error"},
		{"error", "q", nil, "uncertainty ambiguous ?error"},
	} {
		h, err := parseAs(c.role, c.text, c.assume)
		if err != nil || h.brief() != c.want {
			t.Errorf("--column %s=%s (%v): got %q, %v; want %q", c.role, c.text, c.assume, h.brief(), err, c.want)
		}
		if (len(h.Assumed) > 0) != (c.assume != nil && c.text == "foo") {
			t.Errorf("--column %s=%s (%v): assumed %v", c.role, c.text, c.assume, h.Assumed)
		}
	}
}
