package diagnostics

import (
	"slices"

	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Screening is the verdict on a data set without the document around it: nothing
// in it explains, publishes or resamples. It is for many data sets at a time, as in
// simulations. Assess goes through the same steps.
type Screening struct {
	ErrorModel fit.ErrorModel // as used: scaled where the data contradict stated uncertainties
	Sample     *fit.Sample    // the points or means that the verdict uses
	Fits       []*fit.Result  // the candidates, in the order of Options.Models
	Straight   *fit.Result
	Power      *fit.Result
	Exponent   ExponentTest
	Pointwise  *ExponentTest // on single points, where the verdict uses means; else nil
	// Judged is the verdict if there is no second-barrier finding. State differs
	// from it only where that finding turns straight-within into unresolved.
	Judged State
	TEff   float64 // K

	a *assessor
	// found is nil until the second-barrier test was asked.
	found *bool
}

// Screen fits the candidates and decides as Assess does; it returns the errors that
// Assess returns. set is not modified.
func Screen(set *dataset.Set, opt Options) (*Screening, error) {
	a, err := newAssessor(set, opt)
	if err != nil {
		return nil, err
	}
	if err := a.fit(); err != nil {
		return nil, err
	}
	a.testExponents()
	s := &Screening{
		ErrorModel: a.model, Sample: a.data.sample, Fits: a.fits[:a.ranked],
		Straight: a.straight, Power: a.power,
		Exponent: a.exponent, Pointwise: a.pointwiseTest, Judged: Untestable, TEff: a.tEff, a: a,
	}
	if a.untestable == "" {
		low, high := ends(a.exponent.Exponent)
		s.Judged = a.rule.Judge(low, high, false)
	}
	return s, nil
}

// State is the verdict. It asks the second-barrier test where that can change the
// answer.
func (s *Screening) State() State {
	if s.Judged != StraightWithin {
		return s.Judged
	}
	low, high := ends(s.Exponent.Exponent)
	return s.a.rule.Judge(low, high, s.SecondBarrierFound())
}

// SecondBarrierFound reports whether the second-barrier test has p < 0.05; false
// where it cannot be run. It runs when first asked.
func (s *Screening) SecondBarrierFound() bool {
	if s.found == nil {
		b := s.a.opt.Designs.test(s.Sample, s.Straight.Measured(), s.Sample.Nuisance)
		found := b != nil && b.found()
		s.found = &found
	}
	return *s.found
}

// Deciding reports whether the verdict hangs on a single temperature or point.
func (s *Screening) Deciding() bool {
	return slices.ContainsFunc(s.a.leaveOneOut(s.Judged, false), func(f Influence) bool { return f.Deciding })
}
