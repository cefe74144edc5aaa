package calibration

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Found asks for the findings of a data set, and makes data that should or should not
// raise them.
type Found struct {
	// Asked runs the whole of Assess, without resamples, and counts its findings.
	Asked bool
	Runs  Runs
	// Drift of ln k from the first run to the last, in standard deviations.
	Drift float64
	// Off is how many standard deviations the middle point reads too high, beside its
	// own error.
	Off float64
	// Spread is the standard deviation at the cold end over that at the hot end, its
	// logarithm linear in 1/T; 0 is 1.
	Spread float64
	// Cold is the error in k as a share of k at the cold end, with Cell.Absolute; 0
	// is the usual one.
	Cold float64
	// Flat takes the barrier away.
	Flat bool
	// UT is u(T) in K: stated, and true.
	UT float64
}

// Runs is the order in which the temperatures are measured.
type Runs int

// The orders of runs.
const (
	Unrecorded Runs = iota
	Shuffled
	FromCold
)

// of gives the place of each temperature in the order of the runs, from 1.
func (r Runs) of(n int, rng *rand.Rand) []float64 {
	order := make([]float64, n)
	for i := range order {
		order[i] = math.NaN()
		if r != Unrecorded {
			order[i] = float64(i + 1)
		}
	}
	if r == Shuffled {
		rng.Shuffle(n, func(i, j int) { order[i], order[j] = order[j], order[i] })
	}
	return order
}

// thermometer draws the error of one temperature.
func (f Found) thermometer(rng *rand.Rand) float64 {
	if f.UT == 0 {
		return 0
	}
	return f.UT * rng.NormFloat64()
}

// bend is ln k of point i, measured at a place in the order of the runs, with what goes
// wrong there.
func (f Found) bend(c Cell, lnK float64, i int, order float64) float64 {
	if f.Flat {
		lnK = middleLnK
	}
	if f.Drift != 0 {
		lnK += f.Drift * relativeNoise * ((order-1)/float64(c.N-1) - 0.5)
	}
	if i == c.N/2 {
		lnK += f.Off * relativeNoise
	}
	return lnK
}

// spread is the factor of the standard deviation at one temperature: 1 at the end where
// it is smallest.
func (f Found) spread(r Range, t float64) float64 {
	if f.Spread == 0 {
		return 1
	}
	hot := inverse(r.High)
	at := math.Pow(f.Spread, (inverse(t)-hot)/(inverse(r.Low)-hot))
	return at / math.Min(1, f.Spread)
}

// noiseInK is the standard deviation of errors in k.
func (c Cell) noiseInK(middle float64) float64 {
	if c.Found.Cold > 0 {
		cold, _ := c.Truth.at(c.Range, c.Range.Low)
		return c.Found.Cold * math.Exp(cold)
	}
	return absoluteNoise * math.Exp(middle)
}

// foundEvent is a finding that is counted.
type foundEvent struct {
	event Event
	code  string
	// test says that the finding is one of those of which FoundAny counts any: on
	// straight data with the errors that were assumed it is false.
	test bool
	// tried says whether the data could have raised it; nil: all that can be tested.
	tried func(*diagnostics.Assessment) bool
}

var foundEvents = []foundEvent{
	{FoundOutlier, "outlier", true, func(a *diagnostics.Assessment) bool {
		return slices.ContainsFunc(a.Influence, func(f diagnostics.Influence) bool { return f.OutlierP.Known() })
	}},
	{FoundSpread, "scatter-not-even", true, checked},
	{FoundNotNormal, "residuals-not-normal", true, func(a *diagnostics.Assessment) bool {
		return checked(a) && a.ResidualChecks.Normality.PValue.Known()
	}},
	{FoundAbsolute, "absolute-fits-better", true, checked},
	{FoundRelative, "relative-fits-better", true, func(a *diagnostics.Assessment) bool {
		return checked(a) && a.ResidualChecks.AbsoluteGain.Known()
	}},
	{FoundDrift, "drift-with-order", true, func(a *diagnostics.Assessment) bool { return a.RunOrder != nil }},
	{FoundOrder, "order-follows-temperature", false, func(a *diagnostics.Assessment) bool { return a.RunOrder != nil }},
	{FoundMaximum, "rate-maximum", true, nil},
	{FoundExtrapolates, "first-extrapolates-worst", true, nil},
	{FoundDeciding, "deciding-point", false, nil},
	{FoundBorderline, "borderline", false, nil},
	{FoundTemperature, "temperature-error-explains", false, nil},
	{FoundSecondBarrier, "second-barrier", true, nil},
	{FoundRestsOnEnd, "second-barrier-rests-on-end", false, nil},
	{FoundContradicted, "stated-contradicted", true, nil},
	{FoundChi2Low, "chi2-low", false, nil},
	{FoundScatterSmall, "scatter-too-small", true, nil},
	{FoundRestsOnStated, "rests-on-stated", false, nil},
	{FoundInadequate, "none-adequate", true, nil},
	{FoundRepeatsShare, "repeats-share-error", true, nil},
	{FoundOffset, "between-source-offset", true, nil},
	{FoundOffsetsOpen, "offsets-leave-open", false, nil},
	{FoundOffsetsShow, "offsets-show-curvature", false, nil},
	{FoundLimit, "limit-contradicted", true, func(a *diagnostics.Assessment) bool { return len(a.Sample.Limits) > 0 }},
	{FoundBelowThermometer, "scatter-below-thermometer", true, nil},
}

func checked(a *diagnostics.Assessment) bool { return a.ResidualChecks != nil }

// finding is the finding that an event counts.
func finding(e Event) (foundEvent, bool) {
	i := slices.IndexFunc(foundEvents, func(f foundEvent) bool { return f.event == e })
	if i < 0 {
		return foundEvent{}, false
	}
	return foundEvents[i], true
}

// findings runs the whole of Assess and counts its findings.
func (c Cell) findings(ctx context.Context, set *dataset.Set, opt diagnostics.Options, n *Counts) error {
	opt.SequentialNull = true
	a, err := diagnostics.Assess(ctx, set, opt)
	var refused dataset.Problems
	if errors.As(err, &refused) {
		n.record(IsUntestable, true)
		return nil
	}
	if err != nil {
		return err
	}
	untestable := a.Verdict.State == diagnostics.Untestable
	n.record(IsUntestable, untestable)
	if untestable {
		return nil
	}
	any := a.Verdict.State.Curved()
	n.record(Curved, any)
	for _, f := range foundEvents {
		hit := slices.ContainsFunc(a.Findings, func(g diagnostics.Finding) bool { return g.Code == f.code })
		any = any || f.test && hit
		if hit || f.tried == nil || f.tried(a) {
			n.record(f.event, hit)
		}
	}
	n.record(FoundAny, any)
	return nil
}

// The levels that findings state: of 5 %, of 1 %, and of 20 %. Those of errors in k are
// approximate.
var (
	atFive    = &Target{0, 5.5}
	atFiveInK = &Target{0, 6}
	atOne     = &Target{0, 1.2}
	atTwenty  = &Target{0, 22}
)

// Sets of the section, as divisors of those of the study.
const (
	cheapFound = 5
	someFound  = 10
	fewFound   = 20
	dearFound  = 40
)

// found asks for the findings of a cell.
func found(c Cell, f Found) Cell {
	f.Asked = true
	c.Found = f
	return c
}

func (s *Study) findings() {
	s.section("False alarms of the findings",
		"One barrier and the errors that are assumed; share in per cent of data sets for which a finding is raised, among those where its rule can be asked. Targets where the rule states a level; the others describe what chance made, as a deciding point does of a curved verdict, or follow a rule without a level.")
	rows := func(what string, r Range, c Cell, share int, of map[Event]*Target) {
		for _, f := range foundEvents { // in their order
			if target, ok := of[f.event]; ok {
				s.row(fmt.Sprintf("%s, %s, %s", f.code, what, r), c, share, f.event, target)
				s.last().part = f.tried != nil
			}
		}
		if target, ok := of[FoundAny]; ok {
			s.row(fmt.Sprintf("curved verdict or any test among the findings, %s, %s", what, r), c, share, FoundAny, target)
		}
	}
	for _, r := range ranges {
		rows("relative", r, found(relative(r), Found{Runs: Shuffled}), cheapFound, map[Event]*Target{
			FoundOutlier: atFive, FoundSpread: atOne, FoundNotNormal: atOne, FoundAbsolute: nil, FoundDrift: atFive, FoundOrder: nil,
			FoundMaximum: atOne, FoundExtrapolates: nil, FoundDeciding: nil, FoundBorderline: nil, FoundTemperature: nil,
			FoundSecondBarrier: atFive, FoundRestsOnEnd: nil, FoundAny: nil,
		})
		rows("runs from cold to hot", r, found(lean(relative(r)), Found{Runs: FromCold}), cheapFound, map[Event]*Target{FoundDrift: atFive})
		rows("no barrier, relative", r, found(lean(relative(r)), Found{Flat: true}), cheapFound, map[Event]*Target{FoundMaximum: atOne})
		rows("scaled", r, found(scaled(r), Found{}), cheapFound, map[Event]*Target{
			FoundOutlier: atFive, FoundSpread: atOne, FoundNotNormal: atOne,
		})
		rows("stated, u right", r, found(stated(r), Found{}), someFound, map[Event]*Target{
			FoundOutlier: atFive, FoundSpread: atOne, FoundNotNormal: atOne, FoundContradicted: atFive, FoundChi2Low: atTwenty,
			FoundScatterSmall: atOne, FoundRestsOnStated: nil, FoundInadequate: atOne, FoundExtrapolates: nil, FoundAny: nil,
		})
		rows("absolute", r, found(absolute(r), Found{}), dearFound, map[Event]*Target{
			FoundOutlier: atFiveInK, FoundSpread: atOne, FoundNotNormal: atOne, FoundRelative: nil, FoundMaximum: atOne,
			FoundSecondBarrier: atFiveInK, FoundAny: nil,
		})
		for _, shared := range []bool{false, true} {
			name := "three repeats, errors independent"
			target := atOne
			if shared {
				name, target = "three repeats, shared thermostat error", nil
			}
			rows(name, r, found(Cell{Range: r, Repeats: Triplets, Thermostat: shared, Lean: true}, Found{}), cheapFound, map[Event]*Target{FoundInadequate: target, FoundRepeatsShare: target})
		}
		for _, v := range []struct {
			name string
			labs Laboratories
		}{{"overlapping", Overlap}, {"apart", Apart}} {
			rows("three laboratories without offsets, "+v.name, r, found(Cell{Range: r, Lean: true, Laboratories: v.labs}, Found{}), someFound,
				map[Event]*Target{FoundOffset: atFive, FoundOffsetsOpen: nil, FoundOffsetsShow: nil, FoundOutlier: atFive})
		}
		rows("a fifth of the range below a limit", r, found(Cell{Range: r, Limits: AsLimits, Lean: true}, Found{}), fewFound, map[Event]*Target{FoundLimit: nil})
		rows("u(T) of a fifth kelvin", r, found(lean(relative(r)), Found{UT: 0.2}), cheapFound, map[Event]*Target{FoundBelowThermometer: atOne})
	}

	s.section("Power of the findings",
		"Share in per cent of data sets for which a finding is raised that should be.")
	for _, r := range ranges {
		s.power("a point four standard deviations off in the middle, relative", r, found(relative(r), Found{Off: 4}), FoundOutlier)
		bad := found(relative(r), Found{})
		bad.Shape = BadHot
		s.power("the hottest point eight standard deviations off, relative", r, bad, FoundOutlier)
		s.power("a drift of four standard deviations in the course of the runs", r, found(relative(r), Found{Runs: Shuffled, Drift: 4}), FoundDrift)
		inK := found(Cell{Range: r, Absolute: true, Model: fit.Relative}, Found{Cold: 0.1})
		s.power("errors in k, 10 % of k at the cold end, taken as relative", r, inK, FoundAbsolute)
		s.power("errors in k, 10 % of k at the cold end, taken as relative", r, inK, FoundSpread)
		s.power("scatter threefold at the cold end", r, found(relative(r), Found{Spread: 3}), FoundSpread)
		s.power("scatter threefold at the hot end", r, found(relative(r), Found{Spread: 1.0 / 3}), FoundSpread)
		heavy := found(relative(r), Found{})
		heavy.Shape = Student3
		s.power("Student's t with 3 degrees of freedom", r, heavy, FoundNotNormal)
	}
}

// power adds a row of the power of a finding.
func (s *Study) power(what string, r Range, c Cell, e Event) {
	s.row(fmt.Sprintf("%s: %s, %s", what, e, r), lean(c), fewFound, e, nil)
	s.last().part = true
}

// lean leaves candidates out, on which the finding does not depend.
func lean(c Cell) Cell {
	c.Lean = true
	return c
}
