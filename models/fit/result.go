package fit

import (
	"math"

	"onebarrier/models"
)

// Status is how a fit ended. The zero value is a failure, so that a result is
// usable only where someone has said so.
type Status int

const (
	// Failed: no estimate.
	Failed Status = iota
	// Converged: estimates and covariance are good.
	Converged
	// NotIdentified: the data do not determine every parameter. RSS and fitted
	// values are good; single parameters are not printed as numbers.
	NotIdentified
	// Excluded: the curve cannot describe these data better than the straight
	// line does, because they bend the other way or not at all.
	Excluded
)

// String names the status.
func (s Status) String() string {
	return [...]string{"failed", "converged", "not identified", "excluded"}[s]
}

// Result is one curve fitted to one sample. Covariances are row-major.
type Result struct {
	Curve  models.Curve
	Model  ErrorModel
	Status Status
	Reason string // why, where Status is not Converged; starts lower case

	TRef float64
	P    []float64 // canonical parameters
	Cov  []float64 // their covariance: σ̂²(XᵀV⁻¹X)⁻¹, or with σ known; nil where not identified
	// RSS is Σ r²/V, in ln k, or in k where the model is InK. With limits it is what
	// gives a sample without them the same likelihood: N ln RSS, or RSS where σ is
	// known, is -2 ln L up to a constant of the sample.
	RSS float64
	// Sigma is σ̂ = sqrt(RSS/Nu); 1 where σ is known, NaN where Nu = 0. With limits it
	// is the σ of largest likelihood times sqrt(n/Nu), n counting measured entries.
	Sigma  float64
	N      int // points or means, limits included; Nu does not count them
	Spent  int // parameters of nuisance columns
	Nu     int // N - number of parameters - Spent
	LogLik float64

	// Beside are the coefficients of the sample's nuisance columns, and BesideCov their
	// covariance as Cov is that of P.
	Beside, BesideCov []float64
	// JointCov is the covariance of P and, after it, Beside; nil without nuisance columns.
	JointCov []float64

	Fitted    []float64 // ln k at the sample's temperatures, nuisance columns included
	Residuals []float64 // y - fitted, in ln k, or in k where InK
	Leverage  []float64
	Warnings  []string

	// Exact is the fit to the measured entries alone, and LimitMass the probability of
	// each limit at the estimates with Sigma; nil where there are no limits.
	Exact     *Result
	LimitMass []float64
}

// Usable reports whether RSS, likelihood and fitted values may be used.
func (r *Result) Usable() bool { return r.Status == Converged || r.Status == NotIdentified }

// Params is the number of structural parameters of the curve.
func (r *Result) Params() int { return len(r.Curve.Info().Params) }

// Open says which ends of an interval lie at infinity.
type Open string

// The open ends.
const (
	OpenNone  Open = ""
	OpenLower Open = "lower"
	OpenUpper Open = "upper"
	OpenBoth  Open = "both"
)

// Estimate is a number with its uncertainty. Unknown is NaN, never 0.
type Estimate struct {
	Value, StdError, Lower, Upper float64
	Open                          Open
}

// Unknown is an estimate of which nothing is known.
func Unknown() Estimate {
	nan := math.NaN()
	return Estimate{Value: nan, StdError: nan, Lower: nan, Upper: nan}
}
