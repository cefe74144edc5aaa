package diagnostics

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"onebarrier/models/fit"
)

// Criterion is what curves are ranked by.
type Criterion string

// The criteria. AICc is the default: plain AIC prefers a curved candidate to a
// straight one on straight data far too often when points are few.
const (
	ByAICc Criterion = "aicc"
	ByAIC  Criterion = "aic"
	ByBIC  Criterion = "bic"
)

// Name is the criterion as the trade prints it.
func (c Criterion) Name() string {
	switch c {
	case ByAIC:
		return "AIC"
	case ByBIC:
		return "BIC"
	}
	return "AICc"
}

// The values of Ranked.Status.
const (
	StatusRanked   = "ranked"
	StatusFitted   = "fitted"   // fitted, but the criterion is undefined
	StatusExcluded = "excluded" // not fitted to these data; Reason says why
)

// FamilyWeights turns values of a criterion into weights. A family's weight comes
// from its best member, w_F = exp(-Δ_F/2)/Σ exp(-Δ_F/2), and is then shared among
// its members by their own Δ: three near-equal lines would otherwise triple the
// weight of "one barrier". ofFamily[i] is the weight of the family of entry i,
// ofMember[i] that of the entry itself; entries whose criterion is NaN or +Inf
// take no part and get weight 0.
func FamilyWeights(family []string, ic []float64) (ofFamily, ofMember []float64) {
	if len(family) != len(ic) {
		panic("diagnostics: one family for each criterion value")
	}
	ofFamily, ofMember = make([]float64, len(ic)), make([]float64, len(ic))
	best := math.Inf(1)
	bestOf := map[string]float64{}
	for i, v := range ic {
		if math.IsNaN(v) || math.IsInf(v, 1) {
			continue
		}
		best = math.Min(best, v)
		if b, ok := bestOf[family[i]]; !ok || v < b {
			bestOf[family[i]] = v
		}
	}
	// Sums run in the order of the entries: the order of a map differs from run
	// to run, and so would the last bit.
	var total float64
	within := map[string]float64{}
	for i, v := range ic {
		if math.IsNaN(v) || math.IsInf(v, 1) {
			continue
		}
		f := family[i]
		if _, seen := within[f]; !seen {
			total += math.Exp(-(bestOf[f] - best) / 2)
		}
		within[f] += math.Exp(-(v - bestOf[f]) / 2)
	}
	for i, v := range ic {
		if math.IsNaN(v) || math.IsInf(v, 1) {
			continue
		}
		f := family[i]
		ofFamily[i] = math.Exp(-(bestOf[f]-best)/2) / total
		ofMember[i] = ofFamily[i] * math.Exp(-(v-bestOf[f])/2) / within[f]
	}
	return ofFamily, ofMember
}

// AICWeights gives each fit its weight by plain AIC and by family: what draws the
// generating curve of a resample, and what averages forecasts. A fit that is not
// usable gets 0.
func AICWeights(s *fit.Sample, fits []*fit.Result) []float64 {
	families, ic := make([]string, len(fits)), make([]float64, len(fits))
	for i, f := range fits {
		families[i] = f.Curve.Info().Family
		ic[i] = criterionValue(s, f, ByAIC)
	}
	_, w := FamilyWeights(families, ic)
	return w
}

// noScatter reports whether residuals are rounding error: sqrt(RSS/N) below
// 1e-12 of the largest |y|, with RSS = Σ r²/V. What looks like structure in them
// is arithmetic.
func noScatter(s *fit.Sample, rss float64) bool { return rss < rssFloor(s) }

// rssFloor is N (1e-12 max|y|)², with y in units of sqrt(V) as RSS is.
func rssFloor(s *fit.Sample) float64 {
	y, least := s.Y, 1.0 // ln k near 0 is rounded as k is, to parts of 1
	if s.Model.InK() {
		y, least = s.K, 0
	}
	var most float64
	for i, v := range y {
		most = math.Max(most, math.Max(v*v, least)/s.V[i])
	}
	return float64(len(y)) * 1e-24 * most
}

// criterionValue is the criterion that a fit is ranked by; NaN where undefined.
// Where sigma is estimated, RSS counts as no smaller than rounding error can make
// it, so that among exact fits the one with fewer parameters comes first.
func criterionValue(s *fit.Sample, f *fit.Result, by Criterion) float64 {
	if !f.Usable() {
		return math.NaN()
	}
	if floor := rssFloor(s); !s.Model.KnownSigma() && f.RSS < floor {
		atFloor := *f
		atFloor.LogLik = fit.LogLikelihood(s, floor)
		f = &atFloor
	}
	switch by {
	case ByAIC:
		return f.AIC()
	case ByBIC:
		return f.BIC()
	}
	return f.AICc()
}

// penalty is what a criterion adds to N ln RSS, or to RSS where sigma is known, up to
// a constant of the sample: enough to rank resamples. It is +Inf where the
// criterion is undefined.
func penalty(f *fit.Result, by Criterion) float64 {
	k, n := float64(f.K()), float64(f.N)
	switch {
	case by == ByBIC:
		return k * math.Log(n)
	case by == ByAIC || f.Model.KnownSigma():
		return 2 * k
	case n > k+1:
		return 2*k + 2*k*(k+1)/(n-k-1)
	}
	return math.Inf(1)
}

// Rank turns fits into the ranking, best first: ranked curves in order of the
// criterion, then curves for which it is undefined in order of AIC, then excluded
// ones. RepeatShare, Adequacy and Forms are left to the caller.
func Rank(s *fit.Sample, fits []*fit.Result, by Criterion) []Ranked {
	families, ic := make([]string, len(fits)), make([]float64, len(fits))
	for i, f := range fits {
		families[i] = f.Curve.Info().Family
		ic[i] = criterionValue(s, f, by)
	}
	wf, wm := FamilyWeights(families, ic)
	best := math.Inf(1)
	for _, v := range ic {
		if v < best {
			best = v
		}
	}

	nan := Real(math.NaN())
	out := make([]Ranked, len(fits))
	for i, f := range fits {
		info := f.Curve.Info()
		r := Ranked{
			Family: info.Family, Curve: info.Name, Status: StatusExcluded, Reason: f.Reason,
			Params: f.Params(), Points: f.N,
			LogLik: nan, RSS: nan, Chi2: nan, Sigma: nan, AIC: nan, AICc: nan, BIC: nan,
			Delta: nan, FamWeight: nan, Weight: nan, RepeatShare: nan,
			Adequacy: []Adequacy{}, Forms: []FormEstimate{}, failed: f.Status == fit.Failed, otherWay: f.Status == fit.Excluded,
		}
		if f.Usable() {
			r.LogLik, r.RSS, r.Sigma = Real(f.LogLik), Real(f.RSS), Real(f.Sigma)
			r.AIC, r.AICc, r.BIC = Real(f.AIC()), Real(f.AICc()), Real(f.BIC())
			if s.Model.KnownSigma() {
				r.Chi2, r.Sigma = r.RSS, nan
			}
			if f.Status == fit.NotIdentified {
				r.Reason = notIdentified + f.Reason
			}
			if math.IsNaN(ic[i]) {
				r.Status = StatusFitted
				r.Reason = joinReasons(undefined(f, by), r.Reason)
			} else {
				r.Status = StatusRanked
				r.Delta, r.FamWeight, r.Weight = Real(ic[i]-best), Real(wf[i]), Real(wm[i])
			}
		}
		out[i] = r
	}
	order := map[string]int{StatusRanked: 0, StatusFitted: 1, StatusExcluded: 2}
	slices.SortStableFunc(out, func(a, b Ranked) int {
		if a.Status != b.Status {
			return order[a.Status] - order[b.Status]
		}
		x, y := a.Delta, b.Delta
		if a.Status == StatusFitted {
			x, y = a.AIC, b.AIC
		}
		switch {
		case x < y:
			return -1
		case x > y:
			return 1
		}
		return a.Params - b.Params
	})
	mark95(out)
	return out
}

// notIdentified opens the reason of a curve whose parameters the data do not
// determine.
const notIdentified = "not identified: "

// identified reports whether the parameters of a fitted curve are determined.
func (r Ranked) identified() bool { return !strings.Contains(r.Reason, notIdentified) }

// undefined says why a fit has no value of the criterion.
func undefined(f *fit.Result, by Criterion) string {
	if by == ByAICc {
		return fmt.Sprintf("AICc undefined: needs N ≥ %d", f.K()+2)
	}
	return fmt.Sprintf("%s undefined: needs N ≥ %d", by.Name(), f.Params()+1)
}

func joinReasons(rs ...string) string {
	return strings.Join(slices.DeleteFunc(rs, func(r string) bool { return r == "" }), "; ")
}

// mark95 marks the curves of the smallest set of families whose weights reach
// 0.95.
func mark95(ranking []Ranked) {
	var sum Real
	in := map[string]bool{}
	for i := range ranking {
		r := &ranking[i]
		if r.Status != StatusRanked {
			return
		}
		if !in[r.Family] && sum < 0.95 {
			in[r.Family] = true
			sum += r.FamWeight
		}
		r.InSet = in[r.Family]
	}
}
