package fit

// How says by which road a refit reached its answer.
type How uint8

// The roads of a refit.
const (
	HowLinear   How = iota // no shaped candidate to fit
	HowWarm                // from the estimate of the original data, verified
	HowScreened            // a shaped curve was shown not to be able to rank first
	HowCold                // global search
	HowFailed              // some candidate could not be fitted
)

// Refit is the outcome of fitting every candidate to one resample. A caller owns
// it and hands it back in, so that refitting allocates nothing.
type Refit struct {
	// RSS is Σ r²/V of each candidate in the order given to NewRefitter; +Inf
	// where a curve is excluded or screened out, NaN where its fit failed.
	RSS []float64
	// P holds the canonical parameters of each Basis candidate; those of a
	// shaped one only if the refitter was asked for them.
	P   [][]float64
	How How
}

// Refitter fits every candidate to resamples of one design. It is for one
// goroutine; Clone gives another worker its own.
type Refitter interface {
	// Refit fits y: new values of ln k, or of k where the error model is InK, at
	// the temperatures and variances of the sample.
	Refit(y []float64, out *Refit)
	// RefitCounts does the same where entry i is taken counts[i] times, as in
	// resampling pairs. Entries taken zero times do not take part.
	RefitCounts(y []float64, counts []int, out *Refit)
	Clone() Refitter
}
