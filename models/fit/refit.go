package fit

import (
	"onebarrier/models"
)

// How says by which road a refit reached its answer. Where several shaped curves
// are candidates it is the last road in this list that one of them took.
type How uint8

// The roads of a refit.
const (
	HowLinear   How = iota // no shaped candidate to fit
	HowWarm                // from the estimate of the original data, verified
	HowScreened            // a shaped curve was shown not to be able to rank first
	HowDecided             // a shaped curve was shown to rank before those ahead of it in the list
	HowCold                // global search
	HowFailed              // some candidate could not be fitted
)

// Refit is the outcome of fitting every candidate to one resample. A caller owns
// it and hands it back in, so that refitting allocates nothing after the first call.
type Refit struct {
	// RSS is Σ r²/V of each candidate in the order given to NewRefitter; +Inf
	// where a curve is excluded or screened out, NaN where its fit failed. By the
	// road HowDecided that of a shaped curve is good to about 1e-4, and may be that
	// of a minimum which is not the lowest.
	RSS []float64
	// P holds the canonical parameters of each Basis candidate; those of a
	// shaped one only if the refitter was asked for them, and NaN where it has no
	// RSS.
	P   [][]float64
	How How
	// First is the candidate with the best criterion, -1 where none was fitted.
	First int
}

// Refitter fits every candidate to resamples of one design. It is for one
// goroutine; Clone gives another worker its own.
type Refitter interface {
	// Refit fits y: new values of ln k, or of k where the error model is InK, at
	// the temperatures and variances of the sample. Limits have values after those of
	// the measured entries: one on its side of the bound is that limit again.
	Refit(y []float64, out *Refit)
	// RefitCounts does the same where entry i is taken counts[i] times, as in
	// resampling pairs. Entries taken zero times do not take part. A curve fails
	// where not more temperatures than parameters are left.
	RefitCounts(y []float64, counts []int, out *Refit)
	Clone() Refitter
}

// OneRefitter is a Refitter that can fit a single candidate. Of out it fills RSS[j],
// P[j] and How; First is -1. counts may be nil.
type OneRefitter interface {
	Refitter
	RefitOne(j int, y []float64, counts []int, out *Refit)
}

// RefitOptions are the settings of a Refitter.
type RefitOptions struct {
	// Penalty decides first places: the least of N ln RSS + Penalty, or of
	// RSS + Penalty where σ is known, such as 2K for AIC. A shaped curve that
	// cannot come first is then screened out instead of fitted where its warm
	// start cannot be trusted. nil: no screening, and First goes by RSS alone.
	Penalty []float64
	// ShapedParams asks for the parameters of shaped curves.
	ShapedParams bool
}

// NewRefitter returns a Refitter for the sample and its candidates, fits[j] being
// the fit of curves[j] to the sample.
func NewRefitter(s *Sample, curves []models.Curve, fits []*Result, o RefitOptions) Refitter {
	if len(fits) != len(curves) || (o.Penalty != nil && len(o.Penalty) != len(curves)) {
		panic("fit: one fit and one penalty are needed for each curve")
	}
	crit := newCriterion(s, len(curves), o.Penalty)
	if len(s.Limits) > 0 {
		return newLimitRefitter(s, curves, fits, crit, o.ShapedParams)
	}
	r := newPlainRefitter(s, curves, fits, crit, o)
	if s.Spent() > 0 {
		if beside := newOffsetRefitter(r, s, curves, fits, crit); beside != nil {
			return beside
		}
	}
	return r
}

// newPlainRefitter takes no notice of nuisance columns.
func newPlainRefitter(s *Sample, curves []models.Curve, fits []*Result, crit criterion, o RefitOptions) Refitter {
	if d := newResampleDesign(s, curves, fits, crit, o.ShapedParams); d != nil {
		return d.refitter()
	}
	slow := newSlowRefitter(s, curves, crit, o.ShapedParams)
	if s.Model.InK() {
		return &kRefitter{slowRefitter: slow, fits: fits, work: newKWork(s, curves, fits)}
	}
	return &slow
}
