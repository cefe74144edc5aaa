package diagnostics

import "onebarrier/models/fit"

// Signatures of what is being written in this package; each moves to its own
// file (curvature.go, verdict.go, adequacy.go, teff.go,
// catalogue.go) as it is finished.

// ---- curvature.go

// ExponentTest is the exponent test: is n of T^n zero, is it inside the band?
type ExponentTest struct {
	Exponent   fit.Estimate // n
	Change     fit.Estimate // ΔE = nR(T_max - T_min), kJ/mol
	PValue     float64      // of n = 0
	PBand      float64      // largest p over n in the band; 1 inside
	PScaleFree float64      // t p-value beside the normal one where sigma is known; else NaN
	Detectable fit.Estimate // smallest |ΔE| seen with 80 % power, kJ/mol
	Nu         int
}

// ExponentProfile is what the in-k error models need instead of a standard error.
type ExponentProfile struct {
	Interval fit.Estimate
	RSS      func(n float64) float64 // S(n): RSS minimised with n held
}

// ExponentSettings decide the exponent test. Confidence 0 is 0.95.
type ExponentSettings struct {
	Confidence float64
	Band       [2]float64
}

// TestExponent runs the exponent test on a power-prefactor fit; profile is nil
// unless s.Model.InK().
func TestExponent(s *fit.Sample, power *fit.Result, profile *ExponentProfile, set ExponentSettings) ExponentTest {
	panic("not written yet")
}

// ---- verdict.go

// Rule is what the verdict depends on besides the interval of n. Judge is fast
// and allocates nothing: use it in resamples.
type Rule struct {
	Band          [2]float64
	ToleranceKJ   float64
	ChangePerUnit float64 // R (T_max - T_min) in kJ/mol: ΔE of n = 1
}

// Judge gives the state of testable data from the interval of n.
func (r Rule) Judge(low, high float64, secondBarrier bool) State { panic("not written yet") }

// ParseBand reads "0..1".
func ParseBand(s string) ([2]float64, error) { panic("not written yet") }

// Tolerance is a |ΔE| too small to matter, as asked for.
type Tolerance struct{ Fraction, KJ float64 }

// ParseTolerance reads "5%" or "0.5kJ/mol"; "" is the default.
func ParseTolerance(s string) (Tolerance, error) { panic("not written yet") }

// Apply gives the tolerance in kJ/mol for a straight fit's E in kJ/mol.
func (t Tolerance) Apply(e float64) float64 { panic("not written yet") }

// Testable says whether the exponent test can be run; if not, how many more
// temperatures it needs and why. f is the power-prefactor or straight fit (may be
// nil); only in-k models look at it.
func Testable(s *fit.Sample, f *fit.Result) (ok bool, more int, why string) { panic("not written yet") }

// VerdictInput is all that the verdict and its sentence are made of.
type VerdictInput struct {
	Sample        *fit.Sample
	Test          ExponentTest   // zero where untestable
	Straight      *fit.Result    // for E; may be nil
	SecondBarrier *SecondBarrier // nil where not run
	Rule          Rule
	Ranking       []Ranked // with Adequate filled in
	Untestable    bool
	More          int
	Why           string
	EnergyUnit    string  // as printed; "" is kJ/mol
	PerKJ         float64 // EnergyUnit in one kJ/mol; 0 is 1
}

// Decide makes the verdict, its sentence, the recommended curve, and the findings
// that belong to them.
func Decide(in VerdictInput) (Verdict, []Finding) { panic("not written yet") }

// Recommend names the curve to publish and why the ranking's first is another.
func Recommend(state State, ranking []Ranked) (curve, why string) { panic("not written yet") }

// ---- adequacy.go

// PureError is the scatter of repeats about their temperature means.
type PureError struct {
	SS           float64 // Σ (y - mean)²/V
	DF           int     // points - temperatures
	Temperatures int
}

// NewPureError computes it from single points (not means); DF is 0 without repeats.
func NewPureError(points *fit.Sample) PureError { panic("not written yet") }

// CheckAdequacy tests one fit: the deciding test (pure-error F or chi-squared),
// then the runs test. onMeans says that f was fitted to temperature means.
func CheckAdequacy(s *fit.Sample, f *fit.Result, pe PureError, onMeans bool) (tests []Adequacy, adequate *bool) {
	panic("not written yet")
}

// ---- teff.go

// EffectiveTemperature is the temperature at which the straight fit's E is
// unbiased for E_loc; w are weights (1/V for ln k).
func EffectiveTemperature(t, w []float64) float64 { panic("not written yet") }

// ---- catalogue.go

// Entry explains one code.
type Entry struct {
	Code        string   `json:"code"`
	Title       string   `json:"title"`
	Severity    Severity `json:"severity"`
	Explanation string   `json:"explanation"`
	Cure        string   `json:"cure"`
	Reference   string   `json:"reference"`
}

// Explain finds a code; Codes lists them all, sorted.
func Explain(code string) (Entry, error) { panic("not written yet") }

// Codes lists every code, sorted.
func Codes() []string { panic("not written yet") }
