package diagnostics

import (
	"math"
	"slices"

	"onebarrier/bootstrap"
	"onebarrier/models"
	"onebarrier/models/fit"
)

// judge reads the verdict off resamples: the same rule as for the data, from the
// refitted exponent and its interval. It belongs to one goroutine and allocates
// nothing when asked.
type judge struct {
	s               *fit.Sample
	rule            Rule
	tolerance       Tolerance
	second          *SecondBarrierTest
	scratch         []float64
	straight, power int // their indices among the candidates
	nu              float64
	quantile        float64 // of t, or of the normal distribution
	known           bool
	unscaled        float64 // variance of n̂ in units of σ²
	weights         []float64
	rows            [3][]float64 // scratch of exponentVariance
	fixed           []fixedRSS   // curves whose RSS is the profile of n at one point
	root            float64      // of their rise of RSS, over that with offsets estimated
}

// fixedRSS is a candidate that is the power-prefactor with n held.
type fixedRSS struct {
	index int
	n     float64
}

func newJudge(a *assessor) *judge {
	s := a.data.sample
	j := &judge{
		s: s, rule: a.rule, tolerance: a.tolerance, second: a.second,
		nu: float64(a.power.Nu), known: s.Model.KnownSigma(),
		weights: make([]float64, s.Len()),
	}
	for i, f := range a.fits {
		switch f.Curve.Info().Name {
		case models.Straight().Info().Name:
			j.straight = i
		case models.PowerPrefactor{}.Info().Name:
			j.power = i
		}
		if c, ok := f.Curve.(models.FixedExponent); ok {
			j.fixed = append(j.fixed, fixedRSS{i, c.M})
		}
	}
	if j.second != nil {
		j.scratch = make([]float64, j.second.ScratchLen())
	}
	j.quantile = criticalValue(a.opt.Confidence, a.power.Nu, j.known)
	for k := range j.rows {
		j.rows[k] = make([]float64, s.Len())
	}
	for i, v := range s.V {
		j.weights[i] = 1 / v
	}
	j.unscaled = exponentVariance(s, j.weights, nil, j.rows)
	j.root = 1
	if s.Spent() > 0 {
		j.besideOffsets(a)
	}
	return j
}

var _ bootstrap.Judge = (*judge)(nil).state

// state implements bootstrap.Judge.
func (j *judge) state(y []float64, counts []int, r *fit.Refit) int {
	low, high, ok := j.interval(counts, r)
	if !ok {
		return slices.Index(States, Untestable)
	}
	rule := j.rule
	rule.ToleranceKJ = j.tolerance.Apply(r.P[j.straight][1] / 1000)
	st := rule.Judge(low, high, false)
	// The second-barrier test is asked only where it can change the answer. On
	// resampled pairs its null would differ from resample to resample, and it is
	// left out.
	if st == StraightWithin && j.second != nil && counts == nil && j.second.Found(y[:j.s.Len()], j.scratch) {
		st = rule.Judge(low, high, true)
	}
	return slices.Index(States, st)
}

// interval is that of n in one resample.
func (j *judge) interval(counts []int, r *fit.Refit) (low, high float64, ok bool) {
	n := r.P[j.power][2]
	if j.s.Model.InK() || len(j.s.Limits) > 0 {
		return j.profileInterval(n, r)
	}
	unscaled := j.unscaled
	nu := j.nu
	if counts != nil {
		if unscaled = exponentVariance(j.s, j.weights, counts, j.rows); math.IsNaN(unscaled) {
			return 0, 0, false
		}
	}
	variance := unscaled
	if !j.known {
		variance *= r.RSS[j.power] / nu
	}
	h := j.quantile * math.Sqrt(variance)
	return n - h, n + h, true
}

// profileInterval stands in for the profile of n, which would cost several
// nonlinear fits a resample. The curves of fixed exponent give the signed root of
// the profile, ±sqrt((S(n) - S_min)/σ̂²), exactly at their own n; between and
// beyond them it is interpolated. With the default band its edges are such n, so
// that the verdict on them is that of the profile.
func (j *judge) profileInterval(n float64, r *fit.Refit) (low, high float64, ok bool) {
	scale := 1.0
	if !j.known {
		scale = r.RSS[j.power] / j.nu
	}
	slope := func(f fixedRSS) float64 { // root per unit of n
		return math.Sqrt(max(0, r.RSS[f.index]-r.RSS[j.power])/scale) / math.Abs(f.n-n) / j.root
	}
	low, high = math.NaN(), math.NaN()
	var below, above float64
	anySlope := 0.0 // stands in on a side where no exponent is fixed
	for _, f := range j.fixed {
		sl := slope(f)
		if math.IsNaN(sl) || math.IsInf(sl, 0) || sl == 0 {
			continue
		}
		anySlope = sl
		// The point nearest to where the root meets the quantile tells most.
		reach := j.quantile / sl
		if f.n < n && (math.IsNaN(low) || math.Abs(n-f.n-reach) < below) {
			low, below = n-reach, math.Abs(n-f.n-reach)
		}
		if f.n > n && (math.IsNaN(high) || math.Abs(f.n-n-reach) < above) {
			high, above = n+reach, math.Abs(f.n-n-reach)
		}
	}
	if anySlope == 0 {
		return 0, 0, false
	}
	if math.IsNaN(low) {
		low = n - j.quantile/anySlope
	}
	if math.IsNaN(high) {
		high = n + j.quantile/anySlope
	}
	return low, high, true
}
