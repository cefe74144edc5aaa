package diagnostics

import (
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
	State      State
	TEff       float64 // K

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
		Exponent: a.exponent, Pointwise: a.pointwiseTest, State: Untestable, TEff: a.tEff, a: a,
	}
	if a.untestable == "" {
		low, high := ends(a.exponent.Exponent)
		s.State = a.rule.Judge(low, high, false)
		if s.State == StraightWithin { // nothing else depends on a second barrier
			s.State = a.rule.Judge(low, high, s.SecondBarrierFound())
		}
	}
	return s, nil
}

// SecondBarrierFound reports whether the second-barrier test has p < 0.05; false
// where it cannot be run. It runs when first asked.
func (s *Screening) SecondBarrierFound() bool {
	if s.found == nil {
		b := s.a.opt.Designs.test(s.Sample, s.Straight, nil)
		found := b != nil && b.found()
		s.found = &found
	}
	return *s.found
}
