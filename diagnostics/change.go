package diagnostics

import (
	"fmt"
	"math"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// farBehind is the difference of the criterion from which the curve of the test has
// less than 5 % of the weight that it and the recommended curve have together: it lies
// outside the 95 % set of the two.
var farBehind = 2 * math.Log(19)

// changeOf is E_loc(T_max) - E_loc(T_min) of a fit in kJ/mol, with the interval that is
// published beside it.
func (a *assessor) changeOf(r *fit.Result) fit.Estimate {
	if r.Status != fit.Converged {
		return fit.Unknown()
	}
	low, high := a.data.sample.Range()
	change := energyChange(r, low, high)
	if p := a.profiler(r); p != nil {
		return scaled(p.interval(change), 1./1000)
	}
	jac := make([]float64, r.Params())
	value := change(r.P, jac)
	return scaled(r.Interval(jac, value, a.opt.Confidence), 1./1000)
}

// outdone reports whether the recommended curve is none of power-prefactor, the curve of
// the test, with or without n held, and plainly describes the data better: power-prefactor fails
// its adequacy test and the recommended curve does not, or its criterion is far behind.
// The test is exact all the same for n = 0; its size of the change is then that of a
// curve which the data do not follow.
func outdone(s *fit.Sample, power, recommended *fit.Result, ranking []Ranked, by Criterion) bool {
	if power == nil || recommended == nil || recommended.Status != fit.Converged ||
		recommended.Params() < power.Params() || recommended.Curve.Info().Name == power.Curve.Info().Name {
		return false
	}
	if fails(ranking, power) {
		return !fails(ranking, recommended)
	}
	return criterionValue(s, power, by)-criterionValue(s, recommended, by) > farBehind
}

// fails reports whether a curve of the ranking fails its adequacy test.
func fails(ranking []Ranked, r *fit.Result) bool {
	name := r.Curve.Info().Name
	for _, row := range ranking {
		if row.Curve == name {
			return row.Adequate != nil && !*row.Adequate
		}
	}
	return false
}

// tells reports whether a curve's change of E can stand for that of the test: its
// interval is bounded and on the same side of 0, which the test has settled, and does not
// leave open whether the change matters where the test does not.
func tells(change, test fit.Estimate, toleranceKJ float64) bool {
	low, high := ends(change)
	if !(low > 0 && test.Value > 0 || high < 0 && test.Value < 0) || math.IsInf(high-low, 0) {
		return false
	}
	return Material(change, toleranceKJ) != nil || Material(test, toleranceKJ) == nil
}

// tellChange puts into the verdict the change of E that it states, and the curve that
// it is of: that of the test, or the recommended one where that describes the data
// and the curve of the test does not, and determines the change.
func (in *VerdictInput) tellChange(v *Verdict) {
	change := in.Test.Change
	in.told, in.toldBy = change, models.PowerPrefactor{}.Info().Name
	if in.FitOf != nil && v.State.Curved() {
		power, best := in.FitOf(in.toldBy), in.FitOf(v.RecommendedCurve)
		if outdone(in.Sample, power, best, in.Ranking, in.Criterion) {
			if of := in.ChangeOf(best); tells(of, change, in.Rule.ToleranceKJ) {
				in.told, in.toldBy = of, v.RecommendedCurve
			} else {
				in.rough, in.loose = true, v.RecommendedCurve
			}
		} else if power != nil && fails(in.Ranking, power) {
			in.rough = true
		}
	}
	if v.State == Untestable {
		in.told, in.toldBy = fit.Unknown(), ""
	}
	v.EChange, v.EChangeCurve = NewEstimate(in.told), in.toldBy
}

// changed says by how much E rises or falls over the range, and by which curve where
// that is not the one of the test.
func (in *VerdictInput) changed(recommended string) string {
	c := in.told
	way := "rises"
	if c.Value < 0 {
		way = "falls"
		c.Value, c.Lower, c.Upper = -c.Value, -c.Upper, -c.Lower
		switch c.Open {
		case fit.OpenLower:
			c.Open = fit.OpenUpper
		case fit.OpenUpper:
			c.Open = fit.OpenLower
		}
	}
	size := interval(in.inUnit(c), " "+in.unit())
	if math.IsNaN(c.StdError) && c.Open == fit.OpenNone && math.IsNaN(c.Lower) {
		size = in.energy(c.Value)
	}
	low, high := in.Sample.Range()
	text := fmt.Sprintf("E %s with T, by %s between %s and %s K", way, size, kelvinText(low), kelvinText(high))
	test := models.PowerPrefactor{}.Info().Name
	switch {
	case in.toldBy != test:
		text += fmt.Sprintf(" by the curve %s; %s, the curve of the test, does not describe the data", in.toldBy, test)
	case in.loose != "":
		text += fmt.Sprintf(" by %s, the curve of the test; the curve %s describes the data better, but leaves the change open, so that the size is rough", test, in.loose)
	case in.rough:
		text += fmt.Sprintf(" by %s, the curve of the test; it does not describe the data, so that the size is rough", test)
	default:
		text += in.byCurve(recommended)
	}
	return text
}
