package diagnostics

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"onebarrier/bootstrap"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Assess does the main job on one data set: it fits the candidate curves, ranks
// them, tests for curvature, decides, and resamples to see how firm all that is.
// It returns a dataset.Problems where the data cannot be assessed at all, and
// ctx.Err() where it was cancelled. set is not modified.
//
// The same set and options give the same assessment to the last byte, whatever the
// number of workers.
func Assess(ctx context.Context, set *dataset.Set, opt Options) (*Assessment, error) {
	a, err := newAssessor(set, opt)
	if err != nil {
		return nil, err
	}
	a.notices()
	if err := a.fit(); err != nil {
		return nil, err
	}
	a.limitFindings()
	a.rank()
	a.test()
	a.decide()
	a.beyondTheVerdict()
	if err := a.resample(ctx); err != nil {
		return nil, err
	}
	return a.assessment(), nil
}

// beyondTheVerdict asks what else could have made it, and how far it carries.
func (a *assessor) beyondTheVerdict() {
	a.predict()
	a.checkResiduals()
	a.compareSources()
	a.influences()
	a.temperatureErrors()
	a.scatterBelowThermometer()
	a.runOrder()
	a.rateMaximum()
}

// assessor carries one assessment from step to step.
type assessor struct {
	set       *dataset.Set
	opt       Options
	tolerance Tolerance

	model    fit.ErrorModel
	modelWhy string
	data     *prepared
	// fits holds the candidates and, after them, straight and power-prefactor
	// where those are not candidates: the test needs both.
	fits     []*fit.Result
	ranked   int // the first so many of fits are candidates
	straight *fit.Result
	power    *fit.Result

	ranking    []Ranked
	untestable string // why there is no exponent test, or ""
	more       int    // how many more temperatures it needs
	exponent   ExponentTest
	// pointwiseTest is the exponent test on single points where the verdict uses
	// means; pointwise is its place in the document.
	pointwiseTest *ExponentTest
	pointwise     *Pointwise
	second        *SecondBarrierTest
	secondRun     *SecondBarrier
	rule          Rule
	verdict       Verdict
	between       *BetweenSources
	influence     []Influence
	// influenceRange is nil where there is no test to repeat.
	influenceRange *InfluenceRange
	refits         int // fits of their own that leaving out took
	checks         int // fits of curves that are no candidates, for contradicted
	dearFits       int // fits under the other error model
	temperature    []TemperatureError
	order          *RunOrder
	tEff           float64

	prediction *Prediction
	residuals  *ResidualChecks

	resampling *Resampling
	changes    []float64
	findings   []Finding
}

// newAssessor checks the options and fills in what they leave open.
func newAssessor(set *dataset.Set, opt Options) (*assessor, error) {
	if err := opt.Check(); err != nil {
		return nil, fmt.Errorf("diagnostics: %w", err)
	}
	tolerance, err := ParseTolerance(opt.Tolerance)
	if err != nil {
		return nil, err
	}
	if opt.Models == nil {
		opt.Models = models.Default()
	}
	return &assessor{set: set, opt: opt, tolerance: tolerance}, nil
}

// find records a finding; severity and cure come from the catalogue.
func (a *assessor) find(code, message string, rows []int, values map[string]Real) {
	a.findings = append(a.findings, newFinding(code, message, rows, values))
}

// notices takes over what reading the file found.
func (a *assessor) notices() {
	if f, many := manyCandidates(a.opt.Models); many {
		a.findings = append(a.findings, f)
	}
	for _, n := range a.set.Notices {
		if n.Code == "limits-read" {
			continue // limitFindings says what became of them
		}
		f := newFinding(n.Code, n.Message, n.Rows, nil)
		if n.Cure != "" {
			f.Cure = n.Cure
		}
		a.findings = append(a.findings, f)
	}
}

// problem refuses the data set as a whole.
func (a *assessor) problem(code, message, cure string) error {
	file := a.set.Name
	if len(a.set.Files) > 0 {
		file = a.set.Files[0]
	}
	return dataset.Problems{{Code: code, File: file, Message: message, Cure: cure}}
}

// fit chooses the error model and fits every curve under it.
func (a *assessor) fit() error {
	points := a.set.UsedPoints()
	if len(points) == 0 {
		why := map[string]bool{}
		var reasons []string
		for _, p := range a.set.Points {
			if p.WhyNot != "" && !why[p.WhyNot] {
				why[p.WhyNot] = true
				reasons = append(reasons, p.WhyNot)
			}
		}
		message := "no row can be used"
		if len(reasons) > 0 && len(reasons) <= 3 {
			message += ": " + strings.Join(reasons, "; ")
		}
		return a.problem("no-usable-points", message, "see inspect for why each row was left out")
	}
	if err := a.chooseErrorModel(points); err != nil {
		return err
	}
	if err := a.fitUnder(a.model); err != nil {
		return err
	}
	if a.model == fit.Stated {
		if p, contradicted := a.contradicted(); contradicted {
			values := map[string]Real{"p_value": Real(p)}
			if a.opt.ErrorModel == fit.Stated {
				a.find("stated-contradicted", fmt.Sprintf("the scatter is larger than the stated uncertainties allow (χ² p = %s for the curve that fits best); they were kept because you asked for it", pText(p)), nil, values)
			} else {
				a.model = fit.Scaled
				a.modelWhy = "chosen because the data scatter more than their stated uncertainties allow"
				if err := a.fitUnder(fit.Scaled); err != nil {
					return err
				}
				values["factor"] = Real(a.power.Sigma)
				a.find("stated-contradicted", fmt.Sprintf("the scatter is larger than the stated uncertainties allow (χ² p = %s for the curve that fits best); one common factor is estimated instead%s", pText(p), factorText(a.power)), nil, values)
			}
		} else if low := 1 - chi2Tail(a.straight.Measured().RSS, a.straight.Nu); a.straight.Nu > 0 && low < 0.01 {
			a.find("scatter-too-small", fmt.Sprintf("the points scatter less about the straight line than their stated uncertainties allow (lower tail of χ² %.2g)", low), nil, map[string]Real{"p_value": Real(low)})
		} else if p < doubtful {
			a.find("chi2-low", fmt.Sprintf("the points scatter rather more than the stated uncertainties say (χ² p = %.2g), as one right data set in five does; u(k) may leave out scatter from run to run", p), nil, map[string]Real{"p_value": Real(p)})
		}
	}
	return nil
}

// factorText prints the factor of scaled uncertainties, where there is one.
func factorText(f *fit.Result) string {
	if !f.Usable() || f.Nu < 1 {
		return ""
	}
	return fmt.Sprintf(": %s about %s", significant(f.Sigma, 2, ""), f.Curve.Info().Name)
}

// chooseErrorModel applies METHODS §3: the stated uncertainties decide where every
// point has one at a known level that is not a small-sample standard deviation.
func (a *assessor) chooseErrorModel(points []dataset.Point) error {
	stated, repeats, some := true, false, false
	var missing, at []int
	for i, p := range a.set.Points {
		if !p.Used {
			continue
		}
		has := p.UK > 0 && p.Level == dataset.LevelStandard
		stated = stated && has
		some = some || p.UK > 0
		repeats = repeats || p.Level == dataset.LevelRepeats
		if !has {
			missing, at = append(missing, p.Row), append(at, i)
		}
	}
	switch m := a.opt.ErrorModel; {
	case m == "":
		a.model, a.modelWhy = fit.Relative, "chosen because not every point has a stated standard uncertainty"
		if stated {
			a.model, a.modelWhy = fit.Stated, "chosen because every point has a stated standard uncertainty"
		} else if repeats {
			a.modelWhy = "chosen because the stated standard deviations come from few repeats"
			a.find("repeats-not-known", "standard deviations of a few repeats are not known uncertainties: one common relative error is estimated from the scatter about the curve", nil, nil)
		} else if some {
			message := fmt.Sprintf("%d of %d points have no standard uncertainty: one common relative error is estimated from the scatter about the curve", len(missing), len(points))
			if a.set.SeveralFiles() { // the numbers of lines alone would not tell which
				message += " (" + a.set.Places(at) + ")"
			}
			a.find("stated-incomplete", message, missing, nil)
		}
	default:
		a.model, a.modelWhy = m, "asked for"
		if repeats && m.KnownSigma() {
			a.find("repeats-not-known", "standard deviations of a few repeats are taken as known because you asked for it: with triplicates 28 % of straight sets of eight then raise a false alarm", nil, nil)
		}
		needs := m == fit.Stated || m == fit.Scaled || m == fit.StatedAbsolute
		for _, p := range points {
			if needs && !(p.UK > 0) {
				return dataset.Problems{{Code: "uncertainty-missing", File: p.File, Row: p.Row,
					Message: fmt.Sprintf("error model %q needs an uncertainty for every used point, and this row has none", m),
					Cure:    "give a column u(k), or use --error-model relative"}}
			}
		}
	}
	return nil
}

// fitUnder prepares the data under one error model and fits every curve.
func (a *assessor) fitUnder(model fit.ErrorModel) error {
	data, err := prepare(a.sourcesTaken(), model, a.opt.Replicates)
	if err != nil {
		return a.problem("not-fittable", err.Error(), "correct the row, or leave it out with --leave-out")
	}
	a.data = data
	if err := a.tooMany(); err != nil {
		return err
	}
	if low, high := a.data.sample.Range(); models.SameTemperature(low, high) {
		return a.problem("one-temperature", fmt.Sprintf("all used points lie at %g K", low), "a barrier needs at least two temperatures, its test at least four")
	}
	curves := slices.Clone(a.opt.Models)
	a.ranked = len(curves)
	for _, c := range []models.Curve{models.Straight(), models.PowerPrefactor{}} {
		if !slices.ContainsFunc(curves, func(o models.Curve) bool { return o.Info().Name == c.Info().Name }) {
			curves = append(curves, c)
		}
	}
	a.fits = make([]*fit.Result, len(curves))
	for i, c := range curves {
		a.fits[i] = fit.Fit(data.sample, c)
	}
	a.straight, a.power = a.fitOf(models.Straight().Info().Name), a.fitOf(models.PowerPrefactor{}.Info().Name)
	if !a.straight.Usable() {
		return a.problem("not-fittable", "even the straight line cannot be fitted: "+a.straight.Reason, "see inspect for what was read")
	}
	return nil
}

// fitOf returns the fit of a curve, nil if it was not fitted.
func (a *assessor) fitOf(curve string) *fit.Result {
	for _, f := range a.fits {
		if f.Curve.Info().Name == curve {
			return f
		}
	}
	return nil
}

// doubtful is the χ² p below which the stated uncertainties may leave something out, and
// contradictedLevel that below which they do.
const (
	doubtful          = 0.2
	contradictedLevel = 0.05
)

// contradicted reports whether every flexible curve of the default candidates that could
// be fitted has a χ² p below 0.05. The largest p counts, so that real curvature is not
// taken for noise. The answer does not hang on which candidates were asked for: where
// those that were leave doubt, the others are fitted for it alone.
func (a *assessor) contradicted() (p float64, yes bool) {
	p = -1
	take := func(f *fit.Result) {
		if f.Usable() && f.Nu >= 1 {
			p = math.Max(p, chi2Tail(f.Measured().RSS, f.Nu))
		}
	}
	var missing []models.Curve
	for _, c := range models.Default() {
		if c.Info().Trend == models.TrendNone {
			continue
		}
		if f := a.fitOf(c.Info().Name); f != nil {
			take(f)
		} else {
			missing = append(missing, c)
		}
	}
	for _, c := range missing {
		if p < doubtful {
			a.checks++
			take(fit.Fit(a.data.sample, c))
		}
	}
	if p < 0 { // none is flexible: the line itself must do
		if a.straight.Nu < 1 {
			return 1, false
		}
		p = chi2Tail(a.straight.Measured().RSS, a.straight.Nu)
	}
	return p, p < contradictedLevel
}

// rank orders the candidates and checks whether each describes the data.
func (a *assessor) rank() {
	s := a.data.sample
	a.ranking = Rank(s, a.fits[:a.ranked], Criterion(a.opt.Criterion))
	pe, ofMeans := a.data.repeats()
	nulls := RunsNulls{few: a.opt.SequentialNull}
	for i := range a.ranking {
		r := &a.ranking[i]
		if f := a.fitOf(r.Curve).Measured(); f.Usable() {
			r.Adequacy, r.Adequate = CheckAdequacy(s, f, pe, ofMeans, &nulls)
		}
	}
	found := RankingFindings(a.ranking, s, Criterion(a.opt.Criterion))
	a.blameRepeats(found, pe, ofMeans)
	a.whyUnchecked(found)
	a.findings = append(a.findings, found...)
}

// test runs the exponent test and the second-barrier test.
func (a *assessor) test() {
	a.testExponents()
	if a.pointwiseTest != nil {
		t := a.pointwiseTest
		a.pointwise = &Pointwise{NewEstimate(t.Exponent), NewEstimate(t.Change), Real(t.PValue), Real(t.PBand)}
	}
	if a.data.basis == BasisMeans {
		n, points := a.data.sample.Len(), a.data.single.Len()
		a.find("temperature-means", fmt.Sprintf("the verdict uses the means at %d temperatures, not the %d single points, which share the errors of %d settings", n, points, n), nil, nil)
	}
	if a.second = a.opt.Designs.test(a.data.sample, a.straight.Measured(), a.data.sample.Nuisance); a.second != nil {
		a.second.sequential = a.opt.SequentialNull
		a.secondRun = a.second.Run()
	}
}

// testExponents runs the exponent test, on means and on single points where there
// are both, and sets what the verdict needs beside it.
func (a *assessor) testExponents() {
	s := a.data.sample
	low, high := s.Range()
	a.tEff = effectiveTemperatureOf(s, a.straight)
	a.rule = Rule{
		Band:          a.opt.PrefactorBand,
		ToleranceKJ:   a.tolerance.Apply(a.straight.P[1] / 1000),
		ChangePerUnit: changePerUnit(low, high),
	}
	if ok, more, why := Testable(s, a.power); !ok {
		a.more, a.untestable = more, why
	}
	a.exponent = a.testExponent(s, a.power)
	if a.data.basis == BasisMeans {
		if f := fit.Fit(a.data.single, models.PowerPrefactor{}); f.Usable() && f.Nu >= 1 {
			t := a.testExponent(a.data.single, f)
			a.pointwiseTest = &t
		}
	}
}

// testExponent runs the exponent test on one sample.
func (a *assessor) testExponent(s *fit.Sample, power *fit.Result) ExponentTest {
	set := ExponentSettings{Confidence: a.opt.Confidence, Band: a.opt.PrefactorBand}
	var profile *ExponentProfile
	if (s.Model.InK() || len(s.Limits) > 0) && power.Status == fit.Converged && power.Nu > 0 {
		profile = newExponentProfile(s, power, a.opt.Confidence)
	}
	return TestExponent(s, power, profile, set)
}

// decide makes the verdict.
func (a *assessor) decide() {
	var found []Finding
	a.verdict, found = Decide(VerdictInput{
		Sample: a.data.sample, Test: a.exponent, SecondBarrier: a.secondRun,
		Rule: a.rule, Ranking: a.ranking,
		Untestable: a.untestable != "", More: a.more, Why: a.untestable,
		EnergyUnit: a.opt.EnergyUnit, PerKJ: UnitOfEnergy(a.opt.EnergyUnit).PerKJ,
		PerMolecule: a.set.Quantity.PerMolecule, Ends: a.endsBy,
		FitOf: a.fitOf, ChangeOf: a.changeOf, Criterion: Criterion(a.opt.Criterion),
	})
	a.findings = append(a.findings, found...)
	a.quietRepeats()
}

// endsBy gives E_loc at both ends of the range by a curve, in kJ/mol.
func (a *assessor) endsBy(curve string) (low, high float64) {
	f := a.fitOf(curve)
	if f == nil {
		return math.NaN(), math.NaN()
	}
	cold, hot := a.data.sample.Range()
	return LocalEnergy(f, cold, a.opt.Confidence).Value, LocalEnergy(f, hot, a.opt.Confidence).Value
}

// resample runs the bootstrap.
func (a *assessor) resample(ctx context.Context) error {
	if a.opt.Resamples == 0 {
		return nil
	}
	if a.untestable != "" {
		f := newFinding("not-resampled", "no bootstrap: "+a.untestable, nil, nil)
		f.Cure = "measure at more temperatures"
		a.findings = append(a.findings, f)
		return nil
	}
	if a.limitResamples(); a.opt.Resamples == 0 {
		return nil
	}
	s := a.data.sample
	curves := make([]models.Curve, len(a.fits))
	for i, f := range a.fits {
		curves[i] = f.Curve
	}
	weights, penalties := a.weights(), a.penalties()
	in := bootstrap.Input{
		Sample: s, Fits: a.fits, Weights: weights,
		Refitter: fit.NewRefitter(s, curves, a.fits, fit.RefitOptions{Penalty: penalties}),
		States:   len(States),
		NewJudge: func() bootstrap.Judge { return newJudge(a).state },
		Targets:  bootstrap.DefaultTargets(s, a.fits),
	}
	if a.data.basis == BasisMeans {
		in.Points = a.data.behindMeans()
	}
	methods := make([]bootstrap.Method, len(a.opt.Intervals))
	for i, m := range a.opt.Intervals {
		methods[i] = bootstrap.Method(m)
	}
	out, err := bootstrap.Run(ctx, in, bootstrap.Options{
		Scheme: bootstrap.Scheme(a.opt.Scheme), Resamples: a.opt.Resamples,
		Seed: a.opt.Seed, Workers: a.opt.Workers, Confidence: a.opt.Confidence,
		Methods: methods, Progress: a.opt.Progress,
	})
	var refusal *bootstrap.Refusal
	switch {
	case errors.As(err, &refusal) && a.opt.Scheme != "":
		return a.problem(refusal.Code, refusal.Message, refusal.Cure)
	case errors.As(err, &refusal):
		a.find("not-resampled", "no bootstrap: "+refusal.Message, nil, nil)
		return nil
	case err != nil:
		return err
	}
	a.take(out)
	a.sharesFollow()
	return nil
}

// mostFailed is the percentage of failed resamples above which neither repeat shares nor
// intervals are given. Which resamples fail is not left to chance, so that shares of the
// others may be wrong by about as much, and quantiles of theirs with them.
const mostFailed = 5

// take turns the bootstrap's output into its place in the assessment.
func (a *assessor) take(out *bootstrap.Output) {
	r := &Resampling{Scheme: string(out.Scheme), Resamples: out.Resamples, Failed: out.Failed,
		RepeatShare: map[State]Real{}, Intervals: []ResampledInterval{}}
	shares := 100*out.Failed <= mostFailed*out.Resamples
	why := fmt.Sprintf("withheld: %d of %d resamples could not be fitted", out.Failed, out.Resamples)
	if good := out.Resamples - out.Failed; shares && good > 0 {
		for i, n := range out.States {
			r.RepeatShare[States[i]] = Real(float64(n) / float64(good))
		}
		for i := range a.ranking {
			if row := &a.ranking[i]; row.Status == StatusRanked {
				row.RepeatShare = Real(float64(out.FirstFamily[row.Family]) / float64(good))
			}
		}
	}
	for _, t := range out.Targets {
		curve := a.fits[t.Curve].Curve.Info().Name
		if t.Keep && shares {
			a.changes = t.Values
		}
		for _, iv := range t.Intervals {
			if !shares {
				iv.Lower, iv.Upper, iv.Note = math.NaN(), math.NaN(), why
			}
			r.Intervals = append(r.Intervals, ResampledInterval{
				Curve: curve, Parameter: t.Name, Unit: t.Unit, Method: string(iv.Method),
				Lower: Real(iv.Lower), Upper: Real(iv.Upper), Note: iv.Note,
			})
		}
	}
	if 100*out.Failed > out.Resamples {
		message := fmt.Sprintf("%d of %d resamples could not be fitted and are not in the shares", out.Failed, out.Resamples)
		if !shares {
			message = fmt.Sprintf("%d of %d resamples could not be fitted: neither repeat shares nor bootstrap intervals are given, because those of the rest need not hold where more than %d %% fail",
				out.Failed, out.Resamples, mostFailed)
		}
		f := newFinding("resamples-failed", message, nil, map[string]Real{"failed": Real(out.Failed), "resamples": Real(out.Resamples)})
		if out.Scheme != bootstrap.Parametric {
			f.Cure = "--scheme parametric, or " + f.Cure
		}
		a.findings = append(a.findings, f)
	}
	a.resampling = r
}

// sharesFollow tells where more than half of the resamples give another verdict than the
// data, and more than half were drawn about a curve that is not the recommended one: the
// shares then say what a repeat would show if that curve were true.
func (a *assessor) sharesFollow() {
	given := a.resampling.RepeatShare
	i := slices.IndexFunc(States, func(s State) bool { return given[s] > 0.5 })
	if i < 0 || States[i] == a.verdict.State {
		return
	}
	for j, w := range a.weights() {
		f := a.fits[j]
		if name := f.Curve.Info().Name; w > 0.5 && name != a.verdict.RecommendedCurve {
			what := ""
			if f.Status == fit.NotIdentified {
				what = ", whose parameters these data do not determine"
			}
			a.find("shares-of-another-curve", fmt.Sprintf("%.0f %% of repeats would say %s, not %s, since %.0f %% of the resamples are drawn about %s%s: the shares are those of that curve, and no evidence against the verdict",
				100*float64(given[States[i]]), States[i], a.verdict.State, 100*w, name, what), nil,
				map[string]Real{"share": given[States[i]], "weight": Real(w)})
		}
	}
}

// weights draw the generating curves of resamples: plain AIC by family. Curves
// that are not candidates generate nothing.
func (a *assessor) weights() []float64 {
	w := AICWeights(a.data.sample, a.fits[:a.ranked])
	return append(w, make([]float64, len(a.fits)-a.ranked)...)
}

// penalties make the criterion out of N ln RSS, or of RSS where σ is known. A curve
// that is not ranked can never be first.
func (a *assessor) penalties() []float64 {
	by := Criterion(a.opt.Criterion)
	pen := make([]float64, len(a.fits))
	for i, f := range a.fits {
		pen[i] = math.Inf(1)
		if v := criterionValue(a.data.sample, f, by); i < a.ranked && !math.IsNaN(v) {
			pen[i] = penalty(f, by)
		}
	}
	return pen
}
