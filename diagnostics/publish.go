package diagnostics

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/unit/constant"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// The styles of what to publish, one for each trade.
const (
	StyleMolar        = "molar"        // A, E_a, ΔH‡, ΔS‡, ΔG‡
	StyleKelvin       = "kelvin"       // A, E/R in K, k(T_ref)
	StyleEvaluated    = "evaluated"    // and f, g, Δlg k, Δ(E/R)
	StyleElectronvolt = "electronvolt" // D₀, lg D₀, E in eV
)

// styleOf is the style in which a quantity is usually published.
func styleOf(q dataset.Quantity) string {
	switch {
	case q.Diffusion:
		return StyleElectronvolt
	case q.PerMolecule:
		return StyleKelvin
	}
	return StyleMolar
}

// EnergyUnit is an energy unit as it is printed: how many of it one kJ/mol is, the
// unit of an entropy beside it with its size in J/(mol K), and what an energy must
// be divided by to have that unit.
type EnergyUnit struct {
	Name, Entropy      string
	PerKJ, EntropyPerJ float64
	Per                string
}

// The sizes follow from the defining constants of the SI; the thermochemical
// calorie is 4.184 J exactly.
var energyUnits = map[string]EnergyUnit{
	"kJ/mol":   {"kJ/mol", "J/(mol K)", 1, 1, ""},
	"kcal/mol": {"kcal/mol", "cal/(mol K)", 1 / 4.184, 1 / 4.184, ""},
	"eV":       {"eV", "meV/K", perElectronvolt, perElectronvolt, ""},
	"K":        {"K", "", 1000 / models.GasConstant, 1 / models.GasConstant, "/R"},
	"cm^-1":    {"cm^-1", "cm^-1/K", perWavenumber, perWavenumber / 1000, "/hc"},
}

const (
	perElectronvolt = 1000 / (models.Avogadro * float64(constant.ElementaryCharge))
	perWavenumber   = 1000 / (models.Avogadro * models.Planck * float64(constant.LightSpeedInVacuum) * 100)
)

// UnitOfEnergy looks an energy unit up; "" is kJ/mol.
func UnitOfEnergy(name string) EnergyUnit {
	if name == "" {
		name = "kJ/mol"
	}
	u, ok := energyUnits[name]
	if !ok {
		panic("diagnostics: unknown energy unit " + name)
	}
	return u
}

// withheld says why a form is not stated for a quantity, or "".
func withheld(f models.Form, q dataset.Quantity) string {
	switch {
	case !f.NeedsTimeUnit:
		return ""
	case q.Diffusion:
		return "withheld: a diffusion coefficient has no transition-state form"
	case !q.Known:
		return "withheld: ΔS‡ needs the time unit of k, and the unit of k was not understood"
	}
	return ""
}

// formEstimates reads a fit in every form of its curve. Standard errors follow from
// the covariance of the fit through the form's Jacobian; intervals are those of
// Student's t, or of the normal where σ is known. profiles, by symbol and in the
// form's units, replace them where a profile interval was computed. A logarithm of A
// has the unit of A, which is that of k in the file.
func formEstimates(r *fit.Result, fr models.Frame, confidence float64, q dataset.Quantity, profiles map[string]fit.Estimate) []FormEstimate {
	fr.TRef, fr.LnPerSecond = r.TRef, q.LnPerSecond
	var out []FormEstimate
	for _, f := range r.Curve.Forms() {
		fe := FormEstimate{Model: f.Name, TRef: Real(math.NaN()), Withheld: withheld(f, q)}
		if f.AtTForm {
			fe.TRef = Real(fr.TForm)
		}
		if fe.Withheld == "" && r.Status != fit.Converged {
			fe.Withheld = r.Status.String()
			if r.Reason != "" {
				fe.Withheld += ": " + r.Reason
			}
		}
		np := r.Params()
		values, jac := make([]float64, len(f.Params)), make([]float64, len(f.Params)*np)
		if r.P != nil {
			f.FromCurve(fr, r.P, values, jac)
		}
		for i, par := range f.Params {
			e := fit.Unknown()
			if fe.Withheld == "" {
				e = r.Interval(jac[i*np:(i+1)*np], values[i], confidence)
			}
			if p, ok := profiles[par.Symbol]; ok && withheld(f, q) == "" {
				e = p
			} else if par.Symbol == unfolding && openBarrier(profiles) {
				e = fit.Unknown() // the difference of two barriers is as little bounded
			}
			if par.Symbol == crossover || par.Symbol == half {
				if e = reciprocal(e); openBarrier(profiles) {
					e = fit.Unknown()
				}
			}
			unit := par.Unit
			if unit == "k" {
				unit = q.Unit
			}
			fe.Parameters = append(fe.Parameters, ParameterEstimate{par.Symbol, par.Name, unit, NewEstimate(e)})
		}
		if fe.Withheld == "" && r.Cov != nil {
			fe.Covariance = propagate(jac, r.Cov, len(f.Params), np)
			for i, p := range fe.Parameters {
				for j := range fe.Parameters {
					if !p.Value.Known() {
						fe.Covariance[i][j], fe.Covariance[j][i] = Real(math.NaN()), Real(math.NaN())
					}
				}
			}
		}
		out = append(out, fe)
	}
	return out
}

// crossover is the symbol of the temperature at which two paths are equally fast, half
// that of the same temperature of a catalyst half of which is inactive there.
const crossover, half = "T_x", "T_half"

// unfolding is the symbol of the enthalpy of inactivation, the difference of two barriers.
const unfolding = "dH_d"

// openBarrier reports whether the data leave a barrier without a bound. Where the
// paths cross is then not bounded either, whatever the covariance says.
func openBarrier(profiles map[string]fit.Estimate) bool {
	return profiles["E1"].Open != fit.OpenNone || profiles["E2"].Open != fit.OpenNone
}

// OpenBarriers names the barriers that have an open end, which leave the crossover
// without a bound: "E2", "E1 and E2", or "".
func (f FormEstimate) OpenBarriers() string {
	var names []string
	for _, p := range f.Parameters {
		if p.Open != nil && (p.Symbol == "E1" || p.Symbol == "E2") {
			names = append(names, p.Symbol)
		}
	}
	return strings.Join(names, " and ")
}

// reciprocal turns the delta-method interval of a temperature into that of its
// reciprocal, read backwards. 1/T_x is a ratio of functions linear in the
// parameters and much closer to normal than T_x; the interval never reaches 0 K,
// and is open where 1/T reaches 0.
func reciprocal(e fit.Estimate) fit.Estimate {
	x := 1 / e.Value
	half := (e.Upper - e.Value) * x * x
	e.Lower, e.Upper = 1/(x+half), 1/(x-half)
	if half >= x {
		e.Upper, e.Open = math.Inf(1), fit.OpenUpper
	}
	return e
}

// exponential is the estimate of e^x from that of x.
func exponential(ln fit.Estimate) fit.Estimate {
	v := math.Exp(ln.Value)
	e := fit.Estimate{Value: v, StdError: v * ln.StdError, Lower: math.Exp(ln.Lower), Upper: math.Exp(ln.Upper), Open: ln.Open}
	if ln.Open == fit.OpenLower || ln.Open == fit.OpenBoth {
		e.Lower = math.NaN() // unknown, and not the 0 that e^-∞ would give
	}
	return e
}

// propagate returns J C Jᵀ for J (m x n) and C (n x n).
func propagate(jac, cov []float64, m, n int) [][]Real {
	out := make([][]Real, m)
	for i := range out {
		out[i] = make([]Real, m)
		for j := range out[i] {
			var s float64
			for k := range n {
				for l := range n {
					s += jac[i*n+k] * cov[k*n+l] * jac[j*n+l]
				}
			}
			out[i][j] = Real(s)
		}
	}
	return out
}

// lnKAt is ln k at one temperature with its interval.
func lnKAt(r *fit.Result, t, confidence float64) fit.Estimate {
	if r.Status != fit.Converged {
		return fit.Unknown()
	}
	f, jac := make([]float64, 1), make([]float64, r.Params())
	r.Curve.LnK(r.TRef, []float64{t}, r.P, f, jac)
	return r.Interval(jac, f[0], confidence)
}

// LocalEnergy is the local activation energy E_loc(T) of a fit in kJ/mol with its
// interval by the delta method; t in K. Without a covariance only the value is known.
func LocalEnergy(r *fit.Result, t, confidence float64) fit.Estimate {
	if r.Status != fit.Converged {
		return fit.Unknown()
	}
	jac := make([]float64, r.Params())
	e := localEnergy(r, t)(r.P, jac)
	return scaled(r.Interval(jac, e, confidence), 1./1000)
}

// localEnergy is E_loc at t in J/mol.
func localEnergy(r *fit.Result, t float64) fit.Function {
	return func(p, grad []float64) float64 {
		f := []float64{0}
		r.Curve.ELoc(r.TRef, []float64{t}, p, f, grad)
		return f[0]
	}
}

// energyChange is E_loc at high less that at low, in J/mol.
func energyChange(r *fit.Result, low, high float64) fit.Function {
	return func(p, grad []float64) float64 {
		less := make([]float64, len(grad))
		change := localEnergy(r, high)(p, grad) - localEnergy(r, low)(p, less)
		floats.Sub(grad, less)
		return change
	}
}

// atReference states k at the reference temperature. Its interval is that of ln k;
// f = exp u(ln k). g is the smallest number >= 0 for which
// f(T) = f(T_ref) exp|g (1/T - 1/T_ref)| is nowhere in the measured range below
// exp u(ln k(T)). Without a fit all but the temperature is unknown.
//
// Where several sources were measured, scatter holds what lies between them.
func atReference(r *fit.Result, tRef, confidence, tMin, tMax float64, scatter *sourceScatter) AtReference {
	extrapolated := tRef < tMin || tRef > tMax
	if r == nil {
		nan := Real(math.NaN())
		return AtReference{T: Real(tRef), K: NewEstimate(fit.Unknown()), F: nan, G: nan, Extrapolated: extrapolated}
	}
	lnKAt := func(t float64) fit.Estimate { return scatter.widen(lnKAt(r, t, confidence), r, confidence) }
	ln := lnKAt(tRef)
	g := 0.0
	const steps = 256
	for i := range steps + 1 {
		// Even steps of 1/T: ln k is closest to a line there.
		t := 1 / (1/tMin + (1/tMax-1/tMin)*float64(i)/steps)
		d := math.Abs(1/t - 1/tRef)
		if rise := lnKAt(t).StdError - ln.StdError; d > 1e-9/tRef && !(rise/d <= g) {
			g = rise / d
		}
	}
	return AtReference{
		T: Real(tRef), K: NewEstimate(exponential(ln)),
		F: Real(math.Exp(ln.StdError)), G: Real(g),
		Extrapolated: extrapolated,
		Curve:        r.Curve.Info().Name,
	}
}

// toPublish is what publish needs to know.
type toPublish struct {
	// Fit is the recommended curve; nil where none of the candidates is.
	Fit *fit.Result
	// Power is the fit of power-prefactor, which tells how E changes where no
	// curve is recommended, and whether it passes its adequacy test.
	Power         *fit.Result
	PowerAdequate *bool
	// Exact says that the fit leaves no scatter.
	Exact bool
	// Eyring is the fit of linear-prefactor, whose ΔH‡ and ΔS‡ stand beside the
	// E_a of a straight line; nil if it was not fitted.
	Eyring     *fit.Result
	Quantity   dataset.Quantity
	State      State
	TMin, TMax float64 // measured range, K
	TEff       float64 // where the straight E is unbiased, K
	TRef       float64 // reference temperature, K
	Confidence float64
	Style      string // "" decides by the quantity
	EnergyUnit string // of the molar style; "" is kJ/mol
	// Curvature holds ΔE and E_a at the ends by power-prefactor, which are
	// published where the verdict is unresolved.
	Curvature Curvature
	Profiles  map[string]fit.Estimate // as in formEstimates
	Profile   *profiler               // of other quantities of the curve; nil for those of Student's t
	Scatter   *sourceScatter          // between sources; nil for one
}

// publish says what to publish, in the form of the trade. Numbers are rounded to
// the two digits of their uncertainty that the GUM asks for. So rounded, E and ln A,
// which are almost perfectly correlated, would not give k(T) back; the line k(T)
// therefore states the curve itself with as many digits as ln k needs.
func publish(in toPublish) Publish {
	if in.Style == "" {
		in.Style = styleOf(in.Quantity)
	}
	w := &publisher{in: in, energy: UnitOfEnergy(in.EnergyUnit)}
	w.symbol = in.Quantity.Symbol
	if w.symbol == "" {
		w.symbol = "k"
	}
	switch in.Style {
	case StyleKelvin, StyleEvaluated:
		w.energy = UnitOfEnergy("K")
	case StyleElectronvolt:
		w.energy = UnitOfEnergy("eV")
	}
	out := Publish{Style: in.Style}
	if in.Fit == nil {
		w.none()
	} else {
		out.Curve = in.Fit.Curve.Info().Name
		w.rounding = roundingOf(in.Fit, nil, in.Confidence)
		w.rounding.Exact = in.Exact
		w.fitted()
	}
	out.Lines, out.Notes = w.lines, w.notes
	if out.Lines == nil {
		out.Lines = []PublishLine{}
	}
	return out
}

// publisher writes the lines.
type publisher struct {
	in        toPublish
	energy    EnergyUnit
	symbol    string // of the rate constant
	rounding  Rounding
	intervals bool    // some estimate was printed with its interval
	known     bool    // σ is known
	factor    float64 // coverage factor of U
	lines     []PublishLine
	notes     []string
}

func (w *publisher) note(format string, args ...any) {
	w.notes = append(w.notes, fmt.Sprintf(format, args...))
}

// brackets is the note on the uncertainties of lines, whose coverage factor is that of r
// unless a line says otherwise.
func (w *publisher) brackets(r *fit.Result) {
	w.known = r.Model.KnownSigma()
	w.factor = 2
	if !w.known {
		w.factor = criticalValue(w.in.Confidence, r.Nu, false)
	}
	said := "U = 2u"
	if !w.known {
		said = fmt.Sprintf("U = %s u (%g %%)", significant(w.factor, 3, ""), 100*w.in.Confidence)
	}
	w.note("brackets hold the standard uncertainty of the last digits; %s", said)
}

// expanded is the expanded uncertainty U: 2u where σ is known; where it was estimated, half of the
// interval, whose coverage factor is the quantile of Student's t (JCGM 100:2008, 6.3.3 and
// G.3.2), as is that of what lies between few sources.
func (w *publisher) expanded(e fit.Estimate) float64 {
	half, twice := (e.Upper-e.Lower)/2, 2*e.StdError
	if math.IsNaN(half) || math.IsInf(half, 0) || w.known && half < twice {
		return twice
	}
	return half
}

// none says what can be published where no curve is recommended: how E changes by
// power-prefactor, which is fitted always, and no parameters of a rejected curve.
func (w *publisher) none() {
	w.note("none of the candidates is recommended: a pair of A and E would mislead")
	r := w.in.Power
	if r != nil && r.Status == fit.Converged {
		w.rounding = roundingOf(r, nil, w.in.Confidence)
		for _, t := range []float64{w.in.TMin, w.in.TMax} {
			w.energyLine("E_a", LocalEnergy(r, t, w.in.Confidence), fmt.Sprintf("at %s K by %s", fixed(t, 0, 0), r.Curve.Info().Name))
		}
		if r.Cov != nil {
			w.brackets(r)
		}
		if w.in.PowerAdequate != nil && !*w.in.PowerAdequate {
			w.note("%s fails its adequacy test as well: its E_a tell the trend, and their uncertainties are too small; k at the reference temperature is not stated", r.Curve.Info().Name)
		} else {
			w.note("k at the reference temperature, in the JSON, is by %s, which is not recommended", r.Curve.Info().Name)
		}
	}
	w.measuredRange()
}

// measuredRange adds the range in which all the rest holds.
func (w *publisher) measuredRange() {
	w.add(PublishLine{Symbol: "range", Unit: "K", Estimate: NewEstimate(fit.Unknown()),
		Text: fmt.Sprintf("%s to %s K", kelvinText(w.in.TMin), kelvinText(w.in.TMax))})
}

// readable is the form in which the parameters of a fit mean something and, where it is
// not the first, what they are.
func readable(r *fit.Result) (models.Form, string) {
	forms := r.Curve.Forms()
	if c, ok := r.Curve.(models.ReadAs); ok {
		i, meaning := c.ReadAs(r.P)
		return forms[i], meaning
	}
	return forms[0], ""
}

// fitted writes everything about the recommended curve.
func (w *publisher) fitted() {
	r := w.in.Fit
	if r.Status != fit.Converged {
		w.note("%s: %s; no parameters are stated", r.Status, r.Reason)
		return
	}
	switch {
	case w.in.Exact:
		w.note("no scatter: no uncertainty")
	case r.Cov == nil:
		w.note("uncertainties are unknown: the fit leaves no degrees of freedom")
	default:
		w.brackets(r)
	}
	if c, ok := r.Curve.(models.PowerLaw); ok {
		w.powerLawLines(c)
	} else {
		f, meaning := readable(r)
		w.form(f)
		if meaning != "" {
			w.note("%s is read as %s, %s: %s", r.Curve.Info().Name, f.Name, strings.ReplaceAll(f.Formula, "dH_d", "ΔH_d"), meaning)
		}
		w.eAt(w.in.TMin)
		if p := w.in.Profile; p != nil {
			if t := w.in.TRef; t > w.in.TMin && t < w.in.TMax {
				w.eAt(t)
			}
			w.eAt(w.in.TMax)
			w.energyLine("ΔE", scaled(p.interval(energyChange(r, w.in.TMin, w.in.TMax)), 1./1000), "change of E_a over the measured range")
			w.notes = append(w.notes, p.notes...)
		} else {
			w.eAt(w.in.TMax)
		}
	}
	if w.in.Style == StyleKelvin || w.in.Style == StyleEvaluated || w.in.Scatter != nil {
		w.rate()
	}
	if w.in.Scatter != nil {
		with := "only " + w.symbol + " has"
		if w.in.Style == StyleEvaluated {
			with = "only " + w.symbol + ", f, g and Δlg " + w.symbol + " have"
		}
		w.note("A and what follows from it are of the mean over the sources; %s their scatter in the uncertainty", with)
	}
	w.unresolved()
	w.recovery()
	w.measuredRange()
	if w.intervals {
		w.note("(a to b): %g %% interval, where it is far from symmetric", 100*w.in.Confidence)
	}
	if r.Curve.Info().Name != models.Straight().Info().Name {
		w.note("intervals take the curve %s as given, although these data chose it", r.Curve.Info().Name)
	}
}

// powerLawLines adds A, n, E and what else is published of a power of T beside a barrier:
// ΔH‡ and ΔS‡ in their place where n is the 1 of transition-state theory, beside them
// where it is 0 or fitted.
func (w *publisher) powerLawLines(c models.PowerLaw) {
	r := w.in.Fit
	molar := w.in.Style == StyleMolar
	n, fitted := c.Exponent(r.P)
	switch {
	case !fitted && n == 1 && molar:
		w.eAt(w.in.TEff)
		w.transitionState(r)
	case !fitted:
		w.powerLaw(n)
		if n == 0 && molar && w.in.Eyring != nil {
			w.transitionState(w.in.Eyring)
		}
	default:
		if math.Abs(n) > 5 {
			w.note("A, n and E are not published: n = %s is no prefactor; read the change of E, or ΔC_p‡", fixed(n, 0, 0))
		} else {
			w.powerLaw(math.NaN())
		}
		w.eAt(w.in.TMin)
		w.eAt(w.in.TMax)
		if molar {
			w.transitionState(r)
		}
	}
}

// fit is the estimate as package fit has it.
func (e Estimate) fit() fit.Estimate {
	out := fit.Estimate{Value: float64(e.Value), StdError: float64(e.StdError), Lower: float64(e.Lower), Upper: float64(e.Upper)}
	if e.Open != nil {
		out.Open = fit.Open(*e.Open)
	}
	return out
}

func (w *publisher) add(l PublishLine) { w.lines = append(w.lines, l) }

// value adds a line for an estimate in its unit. U stands beside brackets only.
func (w *publisher) value(symbol, unit string, e fit.Estimate, notes ...string) {
	est := NewEstimate(e)
	if w.rounding.lopsided(est) && !w.in.Exact {
		w.intervals = true
	} else if u := w.expanded(e); u > 0 && !w.in.Exact {
		said := "U = " + twoDigits(u) + withUnit(unit)
		if k := u / e.StdError; math.Abs(k/w.factor-1) > 0.01 {
			said += fmt.Sprintf(" (%s u)", significant(k, 3, ""))
		}
		notes = append(notes, said)
	}
	w.add(PublishLine{Symbol: symbol, Unit: unit, Estimate: est, Text: w.rounding.Text(est, unit), Note: joinNotes(notes...)})
}

func joinNotes(notes ...string) string {
	var out []string
	for _, n := range notes {
		if n != "" {
			out = append(out, n)
		}
	}
	return strings.Join(out, "; ")
}

func withUnit(unit string) string {
	if unit == "" || unit == "1" {
		return ""
	}
	return " " + unit
}

// twoDigits writes a positive number with two significant digits, whole numbers
// without a power of ten.
func twoDigits(x float64) string {
	if digits, exp := split(x, 2); exp >= 2 && exp < 6 {
		return digits + strings.Repeat("0", exp-1)
	}
	return significant(x, 2, "")
}

// kelvinText writes a temperature: 298.15, 308.
func kelvinText(t float64) string {
	return strings.TrimSuffix(strings.TrimRight(fixed(t, 0, 2), "0"), ".")
}

// energyLine adds an energy given in kJ/mol.
func (w *publisher) energyLine(symbol string, e fit.Estimate, notes ...string) {
	w.value(symbol+w.energy.Per, w.energy.Name, scaled(e, w.energy.PerKJ), notes...)
}

func (w *publisher) entropyLine(symbol string, e fit.Estimate, notes ...string) {
	w.value(symbol+w.energy.Per, w.energy.Entropy, scaled(e, w.energy.EntropyPerJ), notes...)
}

// eAt adds the local activation energy at a temperature.
func (w *publisher) eAt(t float64) {
	e := LocalEnergy(w.in.Fit, t, w.in.Confidence)
	if w.in.Profile != nil {
		e = scaled(w.in.Profile.interval(localEnergy(w.in.Fit, t)), 1./1000)
	}
	note := ""
	if e.Lower < 0 && e.Upper > 0 && openBarrier(w.in.Profiles) {
		e, note = fit.Unknown(), w.notBounded()
	}
	w.energyLine("E_a", e, fmt.Sprintf("at %s K", fixed(t, 0, 0)), note)
}

// prefactor adds A, which is log-normal: its uncertainty is a factor, and brackets
// are printed where that factor is close enough to 1 for them to be symmetric.
func (w *publisher) prefactor(symbol string, ln fit.Estimate, note string) {
	unit := w.in.Quantity.Unit
	e := exponential(ln)
	l := PublishLine{Symbol: symbol, Unit: unit, Estimate: NewEstimate(e), Note: note}
	const symmetric = 0.1
	lnEstimate := NewEstimate(ln)
	switch u, finite := ln.StdError, e.Value > 0 && !math.IsInf(e.Value, 0); {
	case w.in.Exact && finite:
		l.Text = w.rounding.Text(l.Estimate, unit)
	case w.rounding.lopsided(lnEstimate):
		low, high := ends(ln)
		end := func(x float64) string {
			if math.IsInf(x, 0) {
				return "open"
			}
			return powerOfTen(x, math.Abs(x-ln.Value)/2)
		}
		l.Text = fmt.Sprintf("%s%s (%s to %s)", powerOfTen(ln.Value, u), withUnit(unit), end(low), end(high))
	case u <= symmetric && finite:
		l.Text = GUM(e.Value, e.StdError) + withUnit(unit)
	default:
		l.Text = powerOfTen(ln.Value, u) + withUnit(unit)
		if !math.IsNaN(u) {
			l.Text += " ×/÷ " + significant(math.Exp(u), 3, "")
		}
	}
	w.add(l)
	w.value("lg("+symbol+OverUnit(unit)+")", "1", scaled(ln, 1/math.Ln10))
}

// powerOfTen writes e^ln with the digits that an uncertainty u of ln leaves, also
// where e^ln overflows.
func powerOfTen(ln, u float64) string {
	digits := 3
	if u > 1 {
		digits = 2
	}
	lg := ln / math.Ln10
	exp := math.Floor(lg)
	if exp >= -3 && exp < 6 {
		return significant(math.Exp(ln), digits, "")
	}
	mantissa := fixed(math.Pow(10, lg-exp), 0, digits-1)
	if strings.HasPrefix(mantissa, "10") {
		mantissa, exp = fixed(1, 0, digits-1), exp+1
	}
	return join(mantissa, int(exp))
}

// powerLaw adds A, n and E of k = A (T/T_ref)^n exp(-E/RT). The exponent m is
// fixed, or NaN where it was fitted.
func (w *publisher) powerLaw(m float64) {
	r := w.in.Fit
	u := 1 / (models.GasConstant * r.TRef)
	l := math.Log(r.TRef / w.in.TRef)
	n, jn := m, 0.0
	jA, jE := []float64{1, u}, []float64{0, 1. / 1000}
	lnA, energy := r.P[0]+r.P[1]*u, r.P[1]/1000
	if math.IsNaN(m) {
		// E_ref = E + nRT_ref, so that ln A = a + E_ref/RT_ref - n - n ln(T_ref/T_0).
		n, jn = r.P[2], -models.GasConstant*r.TRef/1000
		jA, jE = append(jA, -1-l), append(jE, jn)
		lnA -= n * (1 + l)
		energy += n * jn
	} else {
		lnA -= n * l
	}
	a, e := "A", "E"
	note := ""
	switch {
	case n != 0:
		note = fmt.Sprintf("of A (T/%s K)^n exp(−E/RT)", kelvinText(w.in.TRef))
	case w.in.Style == StyleMolar:
		e = "E_a"
	}
	if w.in.Style == StyleElectronvolt {
		a = w.symbol + "₀"
	}
	ln := r.Interval(jA, lnA, w.in.Confidence)
	en := r.Interval(jE, energy, w.in.Confidence)
	w.prefactor(a, ln, note)
	if n != 0 {
		if math.IsNaN(m) {
			w.value("n", "1", r.Interval([]float64{0, 0, 1}, n, w.in.Confidence))
		} else {
			w.add(PublishLine{Symbol: "n", Unit: "1", Text: fmt.Sprint(m), Note: "fixed",
				Estimate: Estimate{Real(m), Real(math.NaN()), Real(math.NaN()), Real(math.NaN()), nil}})
		}
		w.energyLine(e, en)
		if !math.IsNaN(m) {
			w.eAt(w.in.TEff)
		}
	} else {
		w.energyLine(e, en, fmt.Sprintf("at %s K", fixed(w.in.TEff, 0, 0)))
	}
	w.correlation("r(ln "+a+", "+e+")", ln, en, covariance(r, jA, jE))
}

// covariance of two linear functions of the parameters; NaN where unknown.
func covariance(r *fit.Result, a, b []float64) float64 {
	if r.Cov == nil {
		return math.NaN()
	}
	return float64(propagate(append(append([]float64{}, a...), b...), r.Cov, 2, len(a))[0][1])
}

// correlation adds a correlation coefficient with two digits of what it lacks to ±1.
func (w *publisher) correlation(symbol string, a, b fit.Estimate, cov float64) {
	r := cov / (a.StdError * b.StdError)
	if math.IsNaN(r) {
		return
	}
	decimals := 2
	if lack := 1 - math.Abs(r); lack > 0 {
		_, exp := split(lack, 2)
		decimals = min(max(2, 1-exp), mostDigits)
	}
	w.add(PublishLine{Symbol: symbol, Unit: "1", Text: fixed(r, 0, decimals),
		Estimate: Estimate{Real(r), Real(math.NaN()), Real(math.NaN()), Real(math.NaN()), nil}})
}

// transitionState adds ΔH‡, ΔS‡, ΔC_p‡ and ΔG‡(T_ref) by the curve's form that
// has them, or says why they are withheld.
func (w *publisher) transitionState(r *fit.Result) {
	if r.Status != fit.Converged {
		return
	}
	names := map[string]string{"dH": "ΔH‡", "dS": "ΔS‡", "dCp": "ΔC_p‡"}
	for _, f := range formEstimates(r, models.Frame{TForm: w.in.TRef}, w.in.Confidence, w.in.Quantity, nil) {
		if f.Parameters[0].Symbol != "dH" {
			continue
		}
		if f.Withheld != "" {
			w.note("ΔH‡, ΔS‡ and ΔG‡ are %s", f.Withheld)
			return
		}
		note := ""
		if f.TRef.Known() {
			note = fmt.Sprintf("at %s K", kelvinText(w.in.TRef))
		}
		for _, p := range f.Parameters {
			e := p.fit()
			if p.Symbol == "dH" {
				w.energyLine(names[p.Symbol], e, note)
			} else {
				w.entropyLine(names[p.Symbol], e, note)
			}
		}
	}
	// ΔG‡ = -RT ln(k h/(k_B T)): from ln k, not from ΔH‡ - TΔS‡, whose
	// uncertainties cancel.
	t := w.in.TRef
	ln := lnKAt(r, t, w.in.Confidence)
	rt := models.GasConstant * t / 1000
	g := rt * (math.Log(models.Boltzmann/models.Planck*t) - ln.Value - w.in.Quantity.LnPerSecond)
	where := fmt.Sprintf("at %s K", kelvinText(t))
	if t < w.in.TMin || t > w.in.TMax {
		where += ", extrapolated"
	}
	w.energyLine("ΔG‡", fit.Estimate{Value: g, StdError: rt * ln.StdError, Lower: g - rt*(ln.Upper-ln.Value), Upper: g + rt*(ln.Value-ln.Lower)}, where)
	if r != w.in.Fit {
		w.note("ΔH‡ and ΔS‡ are those of k = (k_B T/h) exp(ΔS‡/R − ΔH‡/RT)")
	}
	w.note("ΔS‡ and ΔG‡: time in s, standard concentration 1 mol/L, transmission coefficient 1")
}

// form adds the parameters of a form as they are, energies in the unit of the style.
func (w *publisher) form(f models.Form) {
	fr := models.Frame{TForm: w.in.TRef}
	for _, fe := range formEstimates(w.in.Fit, fr, w.in.Confidence, w.in.Quantity, w.in.Profiles) {
		if fe.Model != f.Name {
			continue
		}
		for _, p := range fe.Parameters {
			e := p.fit()
			switch a, isLog := strings.CutPrefix(p.Symbol, "ln_"); {
			case isLog:
				w.prefactor(a, e, "")
			case p.Unit == "kJ mol^-1":
				symbol, note := p.Symbol, ""
				if symbol == unfolding {
					symbol = "ΔH_d"
					if !p.Value.Known() {
						note = w.notBounded()
					}
				}
				w.energyLine(symbol, e, note)
			case p.Symbol == crossover && openBarrier(w.in.Profiles):
				w.value(p.Symbol, p.Unit, e, "not bounded: an end of "+fe.OpenBarriers()+" is open")
			case p.Symbol == half && openBarrier(w.in.Profiles):
				w.value(p.Symbol, p.Unit, e, w.notBounded())
			default:
				w.value(p.Symbol, p.Unit, e)
			}
		}
	}
}

// notBounded says why what follows from two barriers is not published.
func (w *publisher) notBounded() string {
	if !openBarrier(w.in.Profiles) {
		return ""
	}
	return "not bounded: an end of a barrier is open"
}

// rate adds k at the reference temperature and, for evaluated tables, what they
// give of its uncertainty.
func (w *publisher) rate() {
	r, t, c := w.in.Fit, w.in.TRef, w.in.Confidence
	at := fmt.Sprintf("(%s K)", kelvinText(t))
	ref := atReference(r, t, c, w.in.TMin, w.in.TMax, w.in.Scatter)
	note := w.in.Scatter.note()
	if ref.Extrapolated {
		note = joinNotes("extrapolated", note)
	}
	w.value(w.symbol+at, w.in.Quantity.Unit, ref.K.fit(), note)
	if w.in.Style != StyleEvaluated || w.in.Exact {
		return
	}
	ln, e := w.in.Scatter.widen(lnKAt(r, t, c), r, c), scaled(LocalEnergy(r, t, c), w.energy.PerKJ)
	single := func(symbol, unit string, v float64, text, note string) {
		if math.IsNaN(v) {
			text = unknownText
		}
		nan := Real(math.NaN())
		w.add(PublishLine{Symbol: symbol, Unit: unit, Estimate: Estimate{Real(v), nan, nan, nan, nil}, Text: text + withUnit(unit), Note: note})
	}
	_, exp := split(float64(ref.F)-1, 2)
	half, fNote := w.expanded(ln), "f = exp u(ln k)"
	lg, lgNote, eNote := half/math.Ln10, "2u", "2u"
	if !w.known {
		eNote = fmt.Sprintf("%g %% interval", 100*c)
	}
	if !w.known || w.in.Scatter != nil {
		lgNote = fmt.Sprintf("the %g %% interval of k, k f^±%s", 100*c, significant(half/ln.StdError, 3, ""))
	}
	if w.in.Scatter != nil {
		fNote += ", " + scatterIncluded
		lgNote += ", since u rests on few sources"
	}
	single("f"+at, "1", float64(ref.F), fixed(float64(ref.F), 0, min(max(1, 1-exp), mostDigits)), fNote)
	single("g", "K", float64(ref.G), twoDigits(float64(ref.G)),
		fmt.Sprintf("f(T) = f%s exp|g (1/T − 1/%s K)| covers u(ln k) in the measured range", at, kelvinText(t)))
	single("Δlg "+w.symbol+at, "1", lg, "±"+twoDigits(lg), lgNote)
	de := w.expanded(e)
	single("Δ(E/R)", "K", de, "±"+twoDigits(de), fmt.Sprintf("%s, at %s K", eNote, kelvinText(t)))
}

// unresolved adds by how much E may still change.
func (w *publisher) unresolved() {
	if w.in.State != Unresolved {
		return
	}
	c := w.in.Curvature
	if c.EChange.Lower.Known() && c.EChange.Upper.Known() {
		lower, upper := float64(c.EChange.Lower)*w.energy.PerKJ, float64(c.EChange.Upper)*w.energy.PerKJ
		_, exp := split((upper-lower)/2, 2)
		sign := func(x float64) string {
			s := fixed(x, 0, max(0, 1-exp))
			if x > 0 {
				s = "+" + s
			}
			return s
		}
		w.add(PublishLine{Symbol: "ΔE" + w.energy.Per, Unit: w.energy.Name, Estimate: NewEstimate(scaled(c.EChange.fit(), w.energy.PerKJ)),
			Text: sign(lower) + " to " + sign(upper) + withUnit(w.energy.Name),
			Note: fmt.Sprintf("%g %% interval of its change", 100*w.in.Confidence)})
	}
	if w.rounding = (Rounding{}); w.in.Power != nil {
		w.rounding = roundingOf(w.in.Power, nil, w.in.Confidence)
	}
	for _, end := range []struct {
		t float64
		e Estimate
	}{{w.in.TMin, c.ELocTMin}, {w.in.TMax, c.ELocTMax}} {
		if end.e.Value.Known() {
			w.energyLine("E_a", end.e.fit(),
				fmt.Sprintf("at %s K by %s", fixed(end.t, 0, 0), models.PowerPrefactor{}.Info().Name))
		}
	}
}

// recovery adds the curve itself, with as many digits as k(T) needs: rounding moves
// ln k in the measured range by at most a hundredth of its smallest standard
// uncertainty there, and by at most 0.0005.
func (w *publisher) recovery() {
	r := w.in.Fit
	tol := 5e-4
	if w.in.Exact {
		tol = 5e-6 // u is rounding error
	} else {
		for i := range 65 {
			t := w.in.TMin + (w.in.TMax-w.in.TMin)*float64(i)/64
			if u := lnKAt(r, t, w.in.Confidence).StdError; u/100 < tol {
				tol = math.Max(u/100, 1e-12)
			}
		}
	}
	c, ok := r.Curve.(models.Written)
	if !ok {
		w.note("to compute k(T), take the parameters of %s from the JSON", r.Curve.Info().Name)
		return
	}
	text := c.Write(models.Writer{
		TMin: w.in.TMin, TMax: w.in.TMax, T0: math.Round(100*w.in.TRef) / 100, // as kelvinText writes it
		Number: func(x, slope float64) string {
			return fixed(x, 0, max(0, int(math.Ceil(math.Log10(1.5*slope/tol)))))
		},
		Kelvin: kelvinText,
	}, r.TRef, r.P)
	w.add(PublishLine{Symbol: w.symbol + "(T)", Unit: w.in.Quantity.Unit, Estimate: NewEstimate(fit.Unknown()), Text: text + withUnit(w.in.Quantity.Unit)})
	w.note("%s(T) has the digits that computing needs", w.symbol)
}
