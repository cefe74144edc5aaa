package diagnostics

import (
	"encoding/json"
	"math"
	"strconv"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Schema names the layout of an Assessment in JSON. Fields may be added, never
// renamed.
const Schema = "onebarrier.assessment/1"

// Real is a number that may be unknown. NaN and infinities are null in JSON, and
// null is read back as NaN.
type Real float64

// MarshalJSON implements json.Marshaler.
func (x Real) MarshalJSON() ([]byte, error) { return x.AppendJSON(make([]byte, 0, 24)), nil }

// AppendJSON appends x as json.Marshal writes numbers, or null: a document holds hundreds.
func (x Real) AppendJSON(b []byte) []byte {
	f := float64(x)
	if math.IsNaN(f) || math.IsInf(f, 0) {
		return append(b, "null"...)
	}
	format := byte('f')
	if a := math.Abs(f); a != 0 && (a < 1e-6 || a >= 1e21) {
		format = 'e'
	}
	b = strconv.AppendFloat(b, f, format, -1, 64)
	if n := len(b); format == 'e' && b[n-4] == 'e' && b[n-2] == '0' { // e-09
		b[n-2] = b[n-1]
		b = b[:n-1]
	}
	return b
}

// UnmarshalJSON implements json.Unmarshaler.
func (x *Real) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*x = Real(math.NaN())
		return nil
	}
	return json.Unmarshal(b, (*float64)(x))
}

// Known reports whether the number is known.
func (x Real) Known() bool { return !math.IsNaN(float64(x)) && !math.IsInf(float64(x), 0) }

// Estimate is a number with its uncertainty in a result. Open tells which end
// lies at infinity, where the end itself is unknown.
type Estimate struct {
	Value    Real    `json:"estimate"`
	StdError Real    `json:"std_error"`
	Lower    Real    `json:"lower"`
	Upper    Real    `json:"upper"`
	Open     *string `json:"open"`
}

// NewEstimate takes over an estimate of package fit.
func NewEstimate(e fit.Estimate) Estimate {
	out := Estimate{Real(e.Value), Real(e.StdError), Real(e.Lower), Real(e.Upper), nil}
	if e.Open != fit.OpenNone {
		s := string(e.Open)
		out.Open = &s
	}
	return out
}

// Times gives the estimate in a unit of which by make one.
func (e Estimate) Times(by float64) Estimate {
	r := Real(by)
	return Estimate{r * e.Value, r * e.StdError, r * e.Lower, r * e.Upper, e.Open}
}

// State is a verdict code.
type State string

// The verdict codes, in their order of precedence.
const (
	Untestable      State = "untestable"
	BeyondPrefactor State = "beyond-prefactor"
	WithinPrefactor State = "within-prefactor"
	CurvedOpen      State = "curved-open"
	StraightWithin  State = "straight-within"
	Unresolved      State = "unresolved"
)

// States lists the verdict codes in order of precedence.
var States = []State{Untestable, BeyondPrefactor, WithinPrefactor, CurvedOpen, StraightWithin, Unresolved}

// Curved reports whether the state says that the data are curved.
func (s State) Curved() bool {
	return s == BeyondPrefactor || s == WithinPrefactor || s == CurvedOpen
}

// Severity of a finding.
type Severity string

// The severities.
const (
	Info    Severity = "info"
	Warning Severity = "warning"
	Alarm   Severity = "alarm"
)

// Finding is one thing the analysis found, as data: every output form carries its
// code, and Explain(code) tells the whole story.
type Finding struct {
	Code     string          `json:"code"`
	Severity Severity        `json:"severity"`
	Message  string          `json:"message"`
	Cure     string          `json:"cure"`
	Rows     []int           `json:"rows"`
	Values   map[string]Real `json:"values"`
}

// Assessment is the whole answer of the main job, and the document that
// assess --json prints.
type Assessment struct {
	Schema    string      `json:"schema"`
	Tool      Tool        `json:"tool"`
	Settings  Settings    `json:"settings"`
	Dataset   DatasetInfo `json:"dataset"`
	Columns   []Column    `json:"columns"`
	Data      []Datum     `json:"data"`
	Verdict   Verdict     `json:"verdict"`
	Curvature Curvature   `json:"curvature"`
	// BetweenSources compares the sources of the data; nil where there is one.
	BetweenSources *BetweenSources `json:"between_sources"`
	// Influence is what the verdict would be without each temperature and point.
	Influence        []Influence        `json:"influence"`
	InfluenceRange   *InfluenceRange    `json:"influence_range"` // nil where nothing is left out
	TemperatureError []TemperatureError `json:"temperature_error"`
	RunOrder         *RunOrder          `json:"run_order"` // nil without an order of runs
	Ranking          []Ranked           `json:"ranking"`   // best first
	AtReference      AtReference        `json:"at_reference"`
	Publish          Publish            `json:"publish"`
	Bootstrap        *Resampling        `json:"bootstrap"` // nil with --resamples 0
	Findings         []Finding          `json:"findings"`

	// LocalEnergies lie between neighbouring temperatures, coldest first.
	LocalEnergies []EnergyBetween `json:"local_energies"`
	// Prediction and ResidualChecks are nil where there are too few temperatures.
	Prediction     *Prediction     `json:"prediction"`
	ResidualChecks *ResidualChecks `json:"residual_checks"`

	// What figures need beyond the document.
	Sample    *fit.Sample            `json:"-"` // the points or means that the verdict used
	Fits      map[string]*fit.Result `json:"-"` // by curve name
	ChangeOfE []float64              `json:"-"` // bootstrap values of ΔE about power-prefactor, kJ/mol, sorted
	Rate      dataset.Quantity       `json:"-"` // how the rate constant was read
}

// Tool names the program that made the document.
type Tool struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// Settings is everything that decides the result.
type Settings struct {
	Seed                 uint64         `json:"seed"`
	Resamples            int            `json:"resamples"`
	Scheme               string         `json:"scheme"`
	Confidence           float64        `json:"confidence"`
	ErrorModel           fit.ErrorModel `json:"error_model"`
	ErrorModelWhy        string         `json:"error_model_why"` // "asked for", or the rule that chose it
	Replicates           string         `json:"replicates"`      // "means" or "independent"
	Sources              string         `json:"sources"`         // "offsets" or "as-one"
	Criterion            string         `json:"criterion"`
	PrefactorBand        [2]float64     `json:"prefactor_band"`
	ToleranceKJ          Real           `json:"tolerance_kj_per_mol"` // as applied
	Tolerance            string         `json:"tolerance"`            // as asked for
	ThermometerError     string         `json:"thermometer_error"`    // as asked for
	Models               []string       `json:"models"`
	ReferenceTemperature float64        `json:"reference_temperature_k"`
	EnergyUnit           string         `json:"energy_unit"`
	PublishStyle         string         `json:"publish_style"`
	Assumed              []string       `json:"assumed"`
	Selection            []string       `json:"selection"`  // flags that chose rows and columns
	Intervals            []string       `json:"intervals"`  // methods of the bootstrap
	NullDraws            string         `json:"null_draws"` // "full", or "sequential" of many data sets
}

// Quantity is what was measured.
type Quantity struct {
	Symbol         string `json:"symbol"`
	Unit           string `json:"unit"`
	DimensionKnown bool   `json:"dimension_known"`
}

// DatasetInfo describes the data of an assessment.
type DatasetInfo struct {
	Name         string   `json:"name"`
	Files        []string `json:"files"`
	SHA256       string   `json:"sha256"`
	Points       int      `json:"points"`
	Used         int      `json:"used"`
	Temperatures int      `json:"temperatures"`
	TMin         Real     `json:"t_min_k"`
	TMax         Real     `json:"t_max_k"`
	TEff         Real     `json:"t_eff_k"`
	Quantity     Quantity `json:"quantity"`
	Sources      []string `json:"sources"`
	Limits       int      `json:"limits"`
}

// Column says what one column of a file was taken for.
type Column struct {
	File    string `json:"file"`
	Heading string `json:"heading"`
	Role    string `json:"role"`
	Unit    string `json:"unit"`
	Factor  Real   `json:"factor"`
	Level   string `json:"level"`
}

// Datum is one row of the input. Residual is in ln k from the straight line, or
// unknown where the row was not used.
type Datum struct {
	File     string `json:"file"`
	Row      int    `json:"row"`
	T        Real   `json:"t_k"`
	K        Real   `json:"k"`
	UK       Real   `json:"u_k"`
	Limit    string `json:"limit"`
	Source   string `json:"source"`
	Used     bool   `json:"used"`
	WhyNot   string `json:"why_not"`
	Residual Real   `json:"residual"`
}

// Verdict is the answer. Material compares ΔE with the tolerance: true when the
// whole interval of |ΔE| lies beyond it, false when it lies within, nil between.
type Verdict struct {
	State            State  `json:"state"`
	ETrend           string `json:"e_trend"` // rises, falls or none
	Material         *bool  `json:"material"`
	Sentence         string `json:"sentence"`
	RecommendedCurve string `json:"recommended_curve"` // "" when none of the candidates fits
	// EChange is the change of E over the range that the sentence states, by EChangeCurve:
	// that of the test, or the recommended curve where that describes the data and
	// power-prefactor does not. Unknown and "" where there is no test.
	EChange      Estimate `json:"e_change_kj_per_mol"`
	EChangeCurve string   `json:"e_change_curve"`
}

// Curvature is the test behind the verdict.
type Curvature struct {
	Basis         string         `json:"basis"` // temperature-means or points
	Exponent      Estimate       `json:"exponent"`
	EChange       Estimate       `json:"e_change_kj_per_mol"`
	PValue        Real           `json:"p_value"`
	PBand         Real           `json:"p_band"`
	PScaleFree    Real           `json:"p_scale_free"` // t p-value beside the normal one under stated; else unknown
	Detectable    Estimate       `json:"detectable_kj_per_mol"`
	ToleranceKJ   Real           `json:"tolerance_kj_per_mol"`
	Nu            int            `json:"degrees_of_freedom"`
	Pointwise     *Pointwise     `json:"pointwise"`
	SecondBarrier *SecondBarrier `json:"second_barrier"`
	ELocTMin      Estimate       `json:"e_at_t_min_kj_per_mol"` // from power-prefactor
	ELocTMax      Estimate       `json:"e_at_t_max_kj_per_mol"`
}

// Pointwise is the exponent test on single points where the verdict used means.
type Pointwise struct {
	Exponent Estimate `json:"exponent"`
	EChange  Estimate `json:"e_change_kj_per_mol"`
	PValue   Real     `json:"p_value"`
	PBand    Real     `json:"p_band"`
}

// SecondBarrier is the second-barrier test.
type SecondBarrier struct {
	Statistic   Real        `json:"statistic"`
	PValue      Real        `json:"p_value"`
	Draws       int         `json:"draws"`
	Crossover   [2]Real     `json:"crossover_k"` // bracket
	WithoutEnds WithoutEnds `json:"without_ends"`
}

// WithoutEnds holds the second-barrier p-values without the hottest and without
// the coldest temperature.
type WithoutEnds struct {
	PWithoutTMax Real `json:"p_without_t_max"`
	PWithoutTMin Real `json:"p_without_t_min"`
}

// Adequacy is one test of whether a curve describes the data.
type Adequacy struct {
	Test      string `json:"test"` // pure-error F, chi-squared, runs
	Statistic Real   `json:"statistic"`
	PValue    Real   `json:"p_value"`
}

// Ranked is one candidate curve.
type Ranked struct {
	Family      string         `json:"family"`
	Curve       string         `json:"curve"`
	Status      string         `json:"status"` // ranked, fitted or excluded
	Reason      string         `json:"reason"`
	Params      int            `json:"structural_parameters"`
	Points      int            `json:"points"`
	LogLik      Real           `json:"log_likelihood"`
	RSS         Real           `json:"rss"`
	Chi2        Real           `json:"chi2"` // unknown unless uncertainties are stated
	Sigma       Real           `json:"sigma"`
	AIC         Real           `json:"aic"`
	AICc        Real           `json:"aicc"`
	BIC         Real           `json:"bic"`
	Delta       Real           `json:"delta"`
	FamWeight   Real           `json:"family_weight"`
	Weight      Real           `json:"weight"`
	InSet       bool           `json:"in_95_percent_set"`
	RepeatShare Real           `json:"repeat_share"`
	Adequacy    []Adequacy     `json:"adequacy"`
	Adequate    *bool          `json:"adequate"` // nil: cannot be checked
	Forms       []FormEstimate `json:"forms"`

	failed   bool // excluded because it could not be fitted
	otherWay bool // excluded because the data bend the other way, or not at all
}

// FormEstimate is one reading of a fitted curve.
type FormEstimate struct {
	Model      string              `json:"model"`
	TRef       Real                `json:"reference_temperature_k"`
	Withheld   string              `json:"withheld"` // why parameters are not stated; "" when they are
	Parameters []ParameterEstimate `json:"parameters"`
	Covariance [][]Real            `json:"covariance"`
	Note       string              `json:"note"` // on the intervals, "" where there is none
}

// ParameterEstimate is one parameter of a form with its uncertainty.
type ParameterEstimate struct {
	Symbol string `json:"symbol"`
	Name   string `json:"name"`
	Unit   string `json:"unit"`
	Estimate
}

// AtReference is the rate constant at the reference temperature, with the
// uncertainty factor f and the g of f(T) = f(T_0) exp|g (1/T - 1/T_0)|.
type AtReference struct {
	T            Real     `json:"t_k"`
	K            Estimate `json:"k"`
	F            Real     `json:"f"`
	G            Real     `json:"g"` // K
	Extrapolated bool     `json:"extrapolated"`
	Curve        string   `json:"curve"`
}

// Publish is what to publish, in the form of the trade.
type Publish struct {
	Style string        `json:"style"` // molar, kelvin, evaluated or electronvolt
	Curve string        `json:"curve"`
	Lines []PublishLine `json:"lines"`
	Notes []string      `json:"notes"`
}

// PublishLine is one quantity to publish: E_a = 52.34(18) kJ/mol.
type PublishLine struct {
	Symbol string `json:"symbol"`
	Unit   string `json:"unit"`
	Estimate
	Text string `json:"text"` // value with GUM brackets and unit, ready to print
	Note string `json:"note"` // "at 308 K"
}

// Resampling is what the bootstrap gave.
type Resampling struct {
	Scheme      string              `json:"scheme"`
	Resamples   int                 `json:"resamples"`
	Failed      int                 `json:"failed"`
	RepeatShare map[State]Real      `json:"repeat_share"`
	Intervals   []ResampledInterval `json:"intervals"`
}

// ResampledInterval is a bootstrap interval that checks a reported one.
type ResampledInterval struct {
	Curve     string `json:"curve"`
	Parameter string `json:"parameter"`
	Unit      string `json:"unit"`
	Method    string `json:"method"` // bootstrap-t, percentile or bca
	Lower     Real   `json:"lower"`
	Upper     Real   `json:"upper"`
	Note      string `json:"note"`
}
