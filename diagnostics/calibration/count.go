package calibration

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"

	"onebarrier/bootstrap"
	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Event is something that a data set shows or not.
type Event int

// The events. Those of a test or an interval are counted over the data sets that
// have it.
const (
	IsUntestable  Event = iota // verdict untestable, or the data were refused
	Curved                     // any curved verdict
	Beyond                     // verdict beyond-prefactor
	Rescaled                   // stated uncertainties were contradicted: scaled
	SecondBarrier              // the second-barrier test has p < 0.05
	Either                     // a curved verdict or the second-barrier finding
	Pointwise                  // p < 0.05 on single points, where the verdict uses means
	DecidingNear               // a deciding point is named, where the verdict is curved and p from 0.01
	Deciding                   // the same where a bad hot point alone made the verdict curved
	WaldCurved                 // n = 0 outside the Wald interval, where the profile is used

	BestAIC  // a curved family has the lowest AIC
	BestAICc // or AICc, where it is defined for some curve
	BestBIC  // or BIC

	CoverN        // the interval of n that the verdict uses holds the truth
	CoverChange   // that of ΔE
	CoverWaldN    // the Wald interval of n, where the profile is used
	CoverE        // E of the line, at T_eff
	CoverProfileE // the same by profile, where errors are additive in k
	CoverEMin     // E of the line, taken for E_loc(T_min)
	CoverEMax     // E of the line, taken for E_loc(T_max)
	CoverLocMin   // E_loc(T_min) of power-prefactor
	CoverLocMax   // E_loc(T_max) of power-prefactor

	TrueErrorModel // AICc prefers the error model of the data, relative or absolute

	// Bootstrap intervals of E, n and ΔE.
	BootstrapTE
	PercentileE
	BCaE
	BootstrapTN
	PercentileN
	BCaN
	BootstrapTChange
	PercentileChange
	BCaChange

	// Findings of assess, by code.
	FoundOutlier
	FoundSpread
	FoundNotNormal
	FoundAbsolute
	FoundRelative
	FoundDrift
	FoundOrder
	FoundMaximum
	FoundExtrapolates
	FoundDeciding
	FoundBorderline
	FoundTemperature
	FoundSecondBarrier
	FoundRestsOnEnd
	FoundContradicted
	FoundChi2Low
	FoundScatterSmall
	FoundRestsOnStated
	FoundInadequate
	FoundRepeatsShare
	FoundOffset
	FoundOffsetsOpen
	FoundOffsetsShow
	FoundLimit
	FoundBelowThermometer
	FoundAny // a curved verdict, or one of the findings that only false alarms raise

	events
)

var eventNames = [events]string{
	IsUntestable:     "untestable",
	Curved:           "curved",
	Beyond:           "beyond-prefactor",
	Rescaled:         "taken as scaled",
	SecondBarrier:    "second-barrier finding",
	Either:           "curved or second-barrier finding",
	Pointwise:        "curved on single points",
	DecidingNear:     "deciding point, of borderline curved verdicts",
	Deciding:         "deciding point, of those bent by one",
	WaldCurved:       "curved by the Wald interval",
	BestAIC:          "curved by AIC",
	BestAICc:         "curved by AICc",
	BestBIC:          "curved by BIC",
	CoverN:           "coverage of n",
	CoverChange:      "coverage of ΔE",
	CoverWaldN:       "coverage of n, Wald",
	CoverE:           "coverage of E at T_eff",
	CoverProfileE:    "coverage of E at T_eff, profile",
	CoverEMin:        "coverage of E at T_min",
	CoverEMax:        "coverage of E at T_max",
	CoverLocMin:      "coverage of E_loc(T_min)",
	CoverLocMax:      "coverage of E_loc(T_max)",
	TrueErrorModel:   "right error model",
	BootstrapTE:      "bootstrap-t of E",
	PercentileE:      "percentile of E",
	BCaE:             "BCa of E",
	BootstrapTN:      "bootstrap-t of n",
	PercentileN:      "percentile of n",
	BCaN:             "BCa of n",
	BootstrapTChange: "bootstrap-t of ΔE",
	PercentileChange: "percentile of ΔE",
	BCaChange:        "BCa of ΔE",
}

// String names the event.
func (e Event) String() string {
	if f, ok := finding(e); ok {
		return f.code
	}
	return eventNames[e]
}

// Counts is what the data sets of one cell showed.
type Counts struct {
	N      int // temperatures
	Sets   int
	Hits   [events]int
	Trials [events]int
	// Events are those to count; none: all.
	Events []Event
	// Ratio holds N ln(RSS_straight/RSS_parallel) of each set, 0 where parallel
	// gains nothing; NaN where it leaves no degree of freedom.
	Ratio []float64
	// Shares holds the repeat shares of each set, with Cell.Shares.
	Shares []Shares
}

// Shares are repeat shares of one data set; NaN where there is none: no bootstrap, too
// many failed resamples, or a curve that is not ranked.
type Shares struct{ Curved, Power, Parallel float64 }

// wants reports whether an event is to be counted.
func (c *Counts) wants(e Event) bool { return len(c.Events) == 0 || slices.Contains(c.Events, e) }

// measure counts an event if it is wanted: what nobody asks for costs nothing.
func (c *Counts) measure(e Event, shows func() bool) {
	if c.wants(e) {
		c.record(e, shows())
	}
}

func (c *Counts) record(e Event, hit bool) {
	c.Trials[e]++
	if hit {
		c.Hits[e]++
	}
}

// Rate is the share of the sets that show an event, with its binomial standard
// error; NaN where no set could.
func (c *Counts) Rate(e Event) Figure { return rate(c.Hits[e], c.Trials[e]) }

// Figure is a number of the study with its standard error.
type Figure struct {
	Value, SE float64
	Trials    int
}

func rate(hits, trials int) Figure {
	if trials == 0 {
		return Figure{math.NaN(), math.NaN(), 0}
	}
	p := float64(hits) / float64(trials)
	return Figure{p, math.Sqrt(p * (1 - p) / float64(trials)), trials}
}

// Settings of a run.
type Settings struct {
	Sets    int
	Seed    uint64
	Workers int // 0: one a processor
	// Events are those to count; none: all that the cell has.
	Events []Event
}

// chunk is the number of data sets a worker takes at a time.
const chunk = 32

// Run draws the data sets of a cell and counts. The counts are the same for any
// number of workers.
func (c Cell) Run(ctx context.Context, set Settings) (*Counts, error) {
	workers := set.Workers
	if workers <= 0 {
		workers = runtime.NumCPU()
	}
	total := &Counts{N: c.N, Sets: set.Sets, Events: set.Events, Ratio: make([]float64, set.Sets)}
	if c.Shares {
		total.Shares = make([]Shares, set.Sets)
	}
	var (
		designs diagnostics.DesignCache
		next    atomic.Int64
		mu      sync.Mutex
		wg      sync.WaitGroup
		failed  error
	)
	for range workers {
		wg.Go(func() {
			own := &Counts{Events: set.Events, Ratio: total.Ratio, Shares: total.Shares}
			err := func() error {
				for {
					hi := int(next.Add(chunk))
					lo := hi - chunk
					hi = min(hi, set.Sets)
					if lo >= hi {
						return nil
					}
					if err := ctx.Err(); err != nil {
						return err
					}
					for i := lo; i < hi; i++ {
						if err := c.one(ctx, set.Seed, i, &designs, own); err != nil {
							return err
						}
					}
				}
			}()
			mu.Lock()
			defer mu.Unlock()
			failed = errors.Join(failed, err)
			for e := range events {
				total.Hits[e] += own.Hits[e]
				total.Trials[e] += own.Trials[e]
			}
		})
	}
	wg.Wait()
	return total, failed
}

// one draws data set i and counts what it shows.
func (c Cell) one(ctx context.Context, seed uint64, i int, designs *diagnostics.DesignCache, n *Counts) error {
	set, opt := c.draw(c.stream(seed, i)), c.options(designs)
	switch {
	case c.Shares:
		return c.shares(ctx, set, opt, i, n)
	case c.Compare:
		return c.compare(set, opt, n)
	case c.Found.Asked:
		return c.findings(ctx, set, opt, n)
	}
	n.Ratio[i] = math.NaN()
	s, err := diagnostics.Screen(set, opt)
	var refused dataset.Problems
	switch {
	case errors.As(err, &refused):
		n.record(IsUntestable, true)
		return nil
	case err != nil:
		return err
	}
	untestable := s.Judged == diagnostics.Untestable
	n.record(IsUntestable, untestable)
	if untestable {
		return nil
	}
	curved := s.Judged.Curved()
	n.record(Curved, curved)
	n.record(Beyond, s.Judged == diagnostics.BeyondPrefactor)
	n.record(Rescaled, s.ErrorModel == fit.Scaled)
	if p := s.Exponent.PValue; curved && s.Power.Nu > 1 { // else nothing can be left out
		if p >= 0.01 && p <= 0.1 {
			n.measure(DecidingNear, s.Deciding)
		}
		if c.Shape == BadHot && n.wants(Deciding) {
			bent, err := c.bentByBadPoint(set, opt)
			if err != nil {
				return err
			}
			if bent {
				n.measure(Deciding, s.Deciding)
			}
		}
	}
	if s.Pointwise != nil {
		n.record(Pointwise, s.Pointwise.PValue < 0.05)
	}
	if !s.ErrorModel.InK() { // else every data set has a null of its own to draw
		n.measure(SecondBarrier, s.SecondBarrierFound)
		n.measure(Either, func() bool { return curved || s.SecondBarrierFound() })
	}
	n.Ratio[i] = ratio(s)
	c.first(s, n)
	c.cover(s, opt.Confidence, n)
	if c.Resamples > 0 {
		return c.resample(ctx, s, uint64(i), n)
	}
	return nil
}

// bentByBadPoint reports whether a curved data set is not curved without the error of
// its bad hot point.
func (c Cell) bentByBadPoint(set *dataset.Set, opt diagnostics.Options) (bool, error) {
	good := *set
	good.Points = slices.Clone(set.Points)
	good.Points[len(good.Points)-1].K *= math.Exp(-badHot * relativeNoise)
	s, err := diagnostics.Screen(&good, opt)
	return err == nil && !s.Judged.Curved(), err
}

// first counts what criteria alone would have preferred.
func (c Cell) first(s *diagnostics.Screening, n *Counts) {
	for _, v := range []struct {
		e  Event
		by diagnostics.Criterion
	}{{BestAIC, diagnostics.ByAIC}, {BestAICc, diagnostics.ByAICc}, {BestBIC, diagnostics.ByBIC}} {
		if !n.wants(v.e) {
			continue
		}
		best := diagnostics.Rank(s.Sample, s.Fits, v.by)[0]
		if best.Status == diagnostics.StatusRanked {
			n.record(v.e, best.Family != models.Straight().Info().Family)
		}
	}
}

// cover counts the intervals that hold the truth.
func (c Cell) cover(s *diagnostics.Screening, confidence float64, n *Counts) {
	holds := func(e fit.Estimate, truth float64) bool {
		low, high := e.Lower, e.Upper
		if e.Open == fit.OpenLower || e.Open == fit.OpenBoth {
			low = math.Inf(-1)
		}
		if e.Open == fit.OpenUpper || e.Open == fit.OpenBoth {
			high = math.Inf(1)
		}
		return low <= truth && truth <= high
	}
	low, high := s.Sample.Range()
	local := func(t float64) float64 {
		_, e := c.Truth.at(c.Range, t)
		return e
	}
	covers := func(e Event, f *fit.Result, estimateAt, truthAt float64) {
		n.measure(e, func() bool {
			return holds(diagnostics.LocalEnergy(f, estimateAt, confidence), local(truthAt))
		})
	}
	covers(CoverE, s.Straight, s.TEff, s.TEff)
	covers(CoverEMin, s.Straight, s.TEff, low)
	covers(CoverEMax, s.Straight, s.TEff, high)
	covers(CoverLocMin, s.Power, low, low)
	covers(CoverLocMax, s.Power, high, high)
	n.measure(CoverChange, func() bool { return holds(s.Exponent.Change, local(high)-local(low)) })
	if c.Truth.Step != 0 {
		return // there is no true n
	}
	n.measure(CoverN, func() bool { return holds(s.Exponent.Exponent, c.Truth.Exponent) })
	if !s.ErrorModel.InK() {
		return // the profile is the interval of t
	}
	wald := s.Power.Interval([]float64{0, 0, 1}, s.Power.P[2], confidence)
	n.measure(CoverWaldN, func() bool { return holds(wald, c.Truth.Exponent) })
	n.measure(WaldCurved, func() bool { return !holds(wald, 0) })
	n.measure(CoverProfileE, func() bool {
		return holds(fit.Profile(s.Sample, s.Straight, []float64{0, 1e-3}, confidence), local(s.TEff))
	})
}

// compare counts whether AICc prefers the error model that the data have. Both
// likelihoods are densities of k; without the Jacobian term -Σ ln k the answer would
// change with the unit of k.
func (c Cell) compare(set *dataset.Set, opt diagnostics.Options, n *Counts) error {
	var aicc [2]float64
	for i, m := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		opt.ErrorModel = m
		s, err := diagnostics.Screen(set, opt)
		if err != nil {
			return err
		}
		aicc[i] = s.Straight.AICc()
	}
	if !math.IsNaN(aicc[0]) { // AICc needs N > K+1
		n.record(TrueErrorModel, (aicc[1] < aicc[0]) == c.Absolute)
	}
	return nil
}

// ratio is the likelihood-ratio statistic of a second barrier.
func ratio(s *diagnostics.Screening) float64 {
	for _, f := range s.Fits {
		if f.Curve.Info().Name != (models.Parallel{}).Info().Name {
			continue
		}
		switch {
		case f.Nu < 1:
			return math.NaN()
		case !f.Usable():
			return 0
		}
		return float64(f.N) * math.Log(s.Straight.RSS/f.RSS)
	}
	return math.NaN()
}

// bootstrapEvents are the events of a target's intervals, in the order of
// bootstrap.Methods.
var bootstrapEvents = map[string][3]Event{
	"E":           {BootstrapTE, PercentileE, BCaE},
	"n":           {BootstrapTN, PercentileN, BCaN},
	"change_of_E": {BootstrapTChange, PercentileChange, BCaChange},
}

// resample counts the bootstrap intervals that hold the truth. Its targets belong
// to linear curves, whose resamples cost no refit of the others.
func (c Cell) resample(ctx context.Context, s *diagnostics.Screening, seed uint64, n *Counts) error {
	out, err := bootstrap.Run(ctx,
		bootstrap.Input{Sample: s.Sample, Fits: s.Fits, Targets: bootstrap.DefaultTargets(s.Sample, s.Fits)},
		bootstrap.Options{Resamples: c.Resamples, Seed: seed, Workers: 1, Methods: bootstrap.Methods})
	if err != nil {
		return err
	}
	low, high := s.Sample.Range()
	_, eLow := c.Truth.at(c.Range, low)
	_, eHigh := c.Truth.at(c.Range, high)
	_, eEff := c.Truth.at(c.Range, s.TEff)
	truth := map[string]float64{"E": eEff, "n": c.Truth.Exponent, "change_of_E": eHigh - eLow}
	for _, t := range out.Targets {
		of, ok := bootstrapEvents[t.Name]
		if !ok {
			continue
		}
		for i, iv := range t.Intervals {
			if iv.Method != bootstrap.Methods[i] {
				return fmt.Errorf("calibration: bootstrap gave %s where %s was expected", iv.Method, bootstrap.Methods[i])
			}
			n.record(of[i], iv.Lower <= truth[t.Name] && truth[t.Name] <= iv.Upper)
		}
	}
	return nil
}

// shareResamples is the number of resamples behind a repeat share.
const shareResamples = 999

// shares runs the whole of Assess and keeps its repeat shares.
func (c Cell) shares(ctx context.Context, set *dataset.Set, opt diagnostics.Options, i int, n *Counts) error {
	absent := math.NaN()
	n.Shares[i] = Shares{absent, absent, absent}
	opt.Resamples, opt.Seed, opt.Workers = shareResamples, uint64(i), 1
	a, err := diagnostics.Assess(ctx, set, opt)
	if err != nil {
		return err
	}
	n.record(IsUntestable, a.Bootstrap == nil)
	if a.Bootstrap == nil {
		return nil
	}
	n.record(Curved, a.Verdict.State.Curved())
	n.Shares[i] = sharesOf(a)
	return nil
}

// sharesOf takes the repeat shares out of an assessment.
func sharesOf(a *diagnostics.Assessment) Shares {
	sh := Shares{math.NaN(), math.NaN(), math.NaN()}
	if len(a.Bootstrap.RepeatShare) > 0 {
		sh.Curved = 0
		for _, state := range diagnostics.States { // not in the order of a map: the last bit would change
			if state.Curved() {
				sh.Curved += float64(a.Bootstrap.RepeatShare[state])
			}
		}
	}
	for _, r := range a.Ranking {
		if r.RepeatShare.Known() {
			switch r.Curve {
			case models.PowerPrefactor{}.Info().Name:
				sh.Power = float64(r.RepeatShare)
			case models.Parallel{}.Info().Name:
				sh.Parallel = float64(r.RepeatShare)
			}
		}
	}
	return sh
}
