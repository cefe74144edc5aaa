package diagnostics

import (
	"fmt"
	"slices"
	"strings"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// The messages of findings, one function a code. What a message does not say is
// in the catalogue.

// RankingFindings are the findings that a ranking of fits to s gives, its Adequate
// filled in.
func RankingFindings(ranking []Ranked, s *fit.Sample, by Criterion) []Finding {
	var fs []Finding
	add := func(code, message string) { fs = append(fs, newFinding(code, message, nil, nil)) }

	var unranked, fitted []string
	ranked, unchecked, inadequate, exact := 0, 0, 0, false
	members, best := map[string][]string{}, map[string]Real{}
	for _, r := range ranking {
		if r.Status == StatusExcluded {
			code := "curve-excluded"
			if r.failed {
				code = "curve-not-fitted"
			}
			add(code, r.Curve+": "+r.Reason)
			continue
		}
		fitted = append(fitted, r.Curve)
		exact = exact || (r.Points > r.Params && !s.Model.KnownSigma() && noScatter(s, float64(r.RSS)))
		if !r.identified() {
			add("curve-not-identified", r.Curve+": "+r.Reason)
		}
		if r.Adequate == nil {
			unchecked++
		} else if !*r.Adequate {
			inadequate++
		}
		if r.Status == StatusFitted {
			unranked = append(unranked, r.Curve)
			continue
		}
		ranked++
		if _, ok := best[r.Family]; !ok {
			best[r.Family] = r.Delta
		}
		if r.InSet && r.Delta-best[r.Family] < 2 { // of hopeless families nobody asks
			members[r.Family] = append(members[r.Family], r.Curve)
		}
	}
	if len(unranked) > 0 {
		add("aicc-undefined", fmt.Sprintf("%s is undefined for %s: fitted and shown, not ranked", by.Name(), list(unranked)))
	}
	for _, r := range ranking { // families in order of rank
		if m := members[r.Family]; len(m) > 1 && m[0] == r.Curve {
			add("family-not-told-apart", list(m)+" lie within Δ < 2 of each other: not told apart by these data")
		}
	}
	if slices.Contains(fitted, "power-prefactor") {
		add("forms-same-curve", "modified-arrhenius and eyring-heat-capacity are one curve: no data can choose between them")
	}
	if n := s.Len() + len(s.Limits); by == ByAICc && ranked > 1 {
		way := "more reluctant to prefer a curve than the 5 % test (N is below 11)"
		if n >= 11 {
			way = "more eager to prefer a curve than the 5 % test (N is 11 or more)"
		}
		add("ranking-and-test", fmt.Sprintf("with N = %d AICc is %s", n, way))
	}
	switch {
	case exact:
		add("perfect-data", "the residuals are rounding error: these numbers were computed, not measured")
	case len(fitted) > 0 && unchecked == len(fitted):
		f := newFinding("adequacy-unchecked", "without repeats or stated uncertainties the fit of a curve cannot be checked", nil, nil)
		if s.Model == fit.Scaled {
			f.Message = "the stated uncertainties are used up by the factor common to all, taken from the scatter: only repeats could check the fit of a curve"
			f.Cure = "repeat some temperatures"
		}
		fs = append(fs, f)
	case len(fitted) > 0 && inadequate == len(fitted):
		message := "none of the candidates fits: every one fails its adequacy test at 1 %"
		if slices.ContainsFunc(ranking[0].Adequacy, func(t Adequacy) bool { return t.Test == TestPureError }) {
			message += "; repeats agree better with each other than with any curve, as they do too where they share an error of the thermostat"
		}
		add("none-adequate", message)
	}
	return fs
}

// list joins names: a, b and c.
func list(names []string) string {
	if len(names) < 2 {
		return strings.Join(names, "")
	}
	last := len(names) - 1
	return strings.Join(names[:last], ", ") + " and " + names[last]
}

func rankingDiffers(curve, why string) Finding {
	if curve == "" {
		curve = "none of the candidates"
	}
	return newFinding("ranking-differs", fmt.Sprintf("recommended is %s: %s", curve, why), nil, nil)
}

// secondBarrierFound reports a second-barrier test with p < 0.05. Limits take no part in
// that test: where two paths are excluded with them, no second path is claimed. The ranking tells
// whether another curve describes the data better than two paths.
func secondBarrierFound(b *SecondBarrier, s *fit.Sample, ranking []Ranked, recommended string) []Finding {
	low, high := s.Range()
	where := ""
	if text := b.CrossoverText(low, high); text != "" {
		if where = " " + text; text[0] >= '0' && text[0] <= '9' {
			where = " at" + where
		}
	}
	approximate := ""
	if s.Model.InK() {
		approximate = " (approximate: linearised about the straight line)"
	}
	still := ""
	if better := betterThanTwoPaths(ranking, recommended); better != "" {
		still = " (the " + better + " curve describes them better still)"
	}
	rate := "7 to 8 %"
	if s.DistinctT() <= minTemperatures {
		rate = "9 %"
	}
	what := fmt.Sprintf("a second path that takes over%s describes the data better than one barrier%s", where, still)
	excluded := false
	if len(s.Limits) > 0 {
		excluded = slices.ContainsFunc(ranking, func(r Ranked) bool {
			return r.Curve == models.Parallel{}.Info().Name && r.otherWay
		})
		what = fmt.Sprintf("by the measured points alone, without the limits, a second path that takes over%s describes the data better than one barrier%s", where, still)
		if excluded {
			what = "the measured points alone, without the limits, bend as two paths would; with the limits the data bend the other way, and parallel is excluded"
		}
	}
	fs := []Finding{newFinding("second-barrier",
		fmt.Sprintf("%s, %s%s; verdict or this finding raises a false alarm in %s of straight sets", what, b.PText(), approximate, rate),
		nil, map[string]Real{"p_value": b.PValue, "crossover_low_k": b.Crossover[0], "crossover_high_k": b.Crossover[1]})}
	switch {
	case excluded:
		fs[0].Cure = "do not read a second path from it: check the limits, or measure where they are"
	case still != "":
		fs[0].Cure = "a smooth bend passes for two paths in this test: only temperatures around the crossover tell them apart"
	}
	end := func(p Real, t float64) {
		if p > 0.20 {
			if !excluded {
				fs[0].Cure = "settle the end of the range first: see second-barrier-rests-on-end"
			}
			fs = append(fs, newFinding("second-barrier-rests-on-end",
				fmt.Sprintf("without the point at %.6g K the second-barrier test has %s: the finding rests on the point at %.6g K", t, pIs(float64(p)), t),
				nil, map[string]Real{"t_k": Real(t), "p_value": p}))
		}
	}
	end(b.WithoutEnds.PWithoutTMax, high)
	end(b.WithoutEnds.PWithoutTMin, low)
	return fs
}

// betterThanTwoPaths is the curve that bends and is ranked before parallel: the recommended
// one, or power-prefactor; "" where there is none.
func betterThanTwoPaths(ranking []Ranked, recommended string) string {
	for _, curve := range []string{recommended, models.PowerPrefactor{}.Info().Name} {
		if curve != models.Straight().Info().Name && ranksAbove(ranking, curve, models.Parallel{}.Info().Name) {
			return curve
		}
	}
	return ""
}

// ranksAbove reports whether both curves are ranked, and a before b.
func ranksAbove(ranking []Ranked, a, b string) bool {
	at := func(curve string) int {
		return slices.IndexFunc(ranking, func(r Ranked) bool { return r.Curve == curve && r.Status == StatusRanked })
	}
	first, second := at(a), at(b)
	return first >= 0 && second > first
}

// leastP is the smallest p-value that is printed as it is: near the end of the range
// of doubles nothing is left of its digits.
const leastP = 1e-300

// pIs prints "p = " and a p-value with two figures, or what it lies below.
func pIs(p float64) string {
	if p < leastP {
		return "p < 10^-300"
	}
	return "p = " + pText(p)
}

// PText prints the p-value of the test; where no draw of the null reached the
// statistic, as the bound that it is.
func (b *SecondBarrier) PText() string {
	if b.AtFloor() {
		return "p ≤ " + pText(float64(b.PValue))
	}
	return pIs(float64(b.PValue))
}

// AtFloor reports whether no draw of the null reached the statistic: p can be no
// smaller with so many draws.
func (b *SecondBarrier) AtFloor() bool { return float64(b.PValue)*float64(b.Draws+1) < 1.5 }

// AtFloor reports whether p is the smallest that the draws of the test's null can give.
func (t Adequacy) AtFloor() bool {
	return t.Test == TestRuns && (t.PValue == 1./(runsDraws+1) || t.PValue == 1./(runsDrawsFew+1))
}

// CrossoverText says where a second path takes over, in measured temperatures from low
// to high, K: "354 to 600 K". An end of the bracket at an end of the range
// is that of the data, and is not given. "" where nothing is known.
func (b *SecondBarrier) CrossoverText(low, high float64) string {
	from, to := float64(b.Crossover[0]), float64(b.Crossover[1])
	if !b.Crossover[0].Known() || !b.Crossover[1].Known() {
		return ""
	}
	digits := 0
	if to-from < 10 {
		digits = 1
	}
	const slack = 1e-6 // the bracket is computed from reciprocals
	atLow, atHigh := from <= low*(1+slack), to >= high*(1-slack)
	switch {
	case atLow && atHigh:
		return "somewhere in the measured range"
	case atHigh:
		return "above " + number(from, digits) + " K"
	case atLow:
		return "below " + number(to, digits) + " K"
	}
	return number(from, digits) + " to " + number(to, digits) + " K"
}

// pText prints a p-value with two figures.
func pText(p float64) string {
	if p < 1e-4 {
		return significant(p, 1, "")
	}
	return fmt.Sprintf("%.2g", p)
}

// notAPrefactor names what to read instead of n: the change of E, and what the
// recommended curve has. ΔC_p‡ is that of power-prefactor, and means nothing where the
// data do not follow it.
func (in *VerdictInput) notAPrefactor(recommended string) Finding {
	n, change := in.Test.Exponent.Value, "read ΔE = "+in.signedEnergy(in.told.Value)
	f := newFinding("exponent-not-a-prefactor", fmt.Sprintf("n = %s is no prefactor", number(n, 1)), nil, map[string]Real{"n": Real(n)})
	switch test := (models.PowerPrefactor{}).Info().Name; {
	case in.toldBy != test:
		f.Message += ", and the data do not follow " + test + ", whose exponent it is"
		f.Cure = change + ", which is that of " + in.toldBy
	case in.loose != "": // ΔC_p‡ = (n − 1)R is that of a curve that they do not follow
		f.Message += ", and the data do not follow " + test + ", whose exponent it is"
		f.Cure = change + " for its sign; its size is rough, and " + in.loose + " leaves it open: measure more where E changes"
	case in.rough:
		f.Message += ", and the data do not follow " + test + ", whose exponent it is"
		f.Cure = change + " for its sign; its size is rough"
	case recommended == "":
		f.Cure = change
	case recommended == test:
		f.Cure = change + ", or ΔC_p‡ = (n − 1)R"
	default: // by it the change of E is another
		f.Cure = "read the parameters of " + recommended + ", which is recommended, and its E at both ends"
	}
	return f
}

// manyCandidates counts the candidates that are not fitted unless they are named.
func manyCandidates(curves []models.Curve) (f Finding, raised bool) {
	const many = 3
	more := 0
	for _, c := range curves {
		if !models.IsDefault(c) {
			more++
		}
	}
	return newFinding("many-candidates",
		fmt.Sprintf("%d candidates, %d of them beyond the default ones: a long list finds curvature in noise", len(curves), more),
		nil, map[string]Real{"candidates": Real(len(curves)), "beyond_default": Real(more)}), more >= many
}

func bandNarrow(band [2]float64) Finding {
	return newFinding("band-narrow-for-gas-phase",
		fmt.Sprintf("gas-phase elementary reactions often need an exponent of T from 0 to 3; the prefactor band is %g to %g, and is to be chosen before looking at n", band[0], band[1]), nil, nil)
}

func restsOnStated(p, scaleFree float64) Finding {
	return newFinding("rests-on-stated",
		fmt.Sprintf("%s with the stated uncertainties, %s by the scatter of the points alone", pIs(p), pText(scaleFree)),
		nil, map[string]Real{"p_value": Real(p), "p_scale_free": Real(scaleFree)})
}
