package diagnostics

import (
	"fmt"
	"slices"
	"sync"
)

// Entry explains one code: a verdict, a finding, or a notice or refusal of the
// reader.
type Entry struct {
	Code        string   `json:"code"`
	Title       string   `json:"title"`
	Severity    Severity `json:"severity"`
	Explanation string   `json:"explanation"`
	Cure        string   `json:"cure"`      // "" where nothing needs one
	Reference   string   `json:"reference"` // "" where the text stands on its own
}

// byCode is the catalogue by code: findings look their entry up for every data set.
var byCode = sync.OnceValue(func() map[string]Entry {
	m := map[string]Entry{}
	for _, e := range Catalogue() {
		m[e.Code] = e
	}
	return m
})

// Explain tells the whole story of a code.
func Explain(code string) (Entry, error) {
	if e, ok := byCode()[code]; ok {
		return e, nil
	}
	return Entry{}, fmt.Errorf("diagnostics: no verdict or finding has the code %q; explain without a code lists them", code)
}

// Codes lists every code, sorted.
func Codes() []string {
	var codes []string
	for _, e := range Catalogue() {
		codes = append(codes, e.Code)
	}
	slices.Sort(codes)
	return codes
}

// Catalogue lists every entry: verdicts in order of precedence, then findings,
// then the refusals and notices of the reader.
func Catalogue() []Entry { return append(slices.Clone(catalogue), readingEntries()...) }

// newFinding makes a finding with the severity and cure of its entry.
func newFinding(code, message string, rows []int, values map[string]Real) Finding {
	e, err := Explain(code)
	if err != nil {
		panic(err) // a code that was never written down
	}
	if values == nil {
		values = map[string]Real{}
	}
	return Finding{Code: code, Severity: e.Severity, Message: message, Cure: e.Cure, Rows: append([]int{}, rows...), Values: values}
}

var catalogue = []Entry{
	// Verdicts, in order of precedence.
	{
		Code: string(Untestable), Title: "too few temperatures to test", Severity: Warning,
		Explanation: "The exponent test fits ln k = a + n ln T - b/T and needs at least four distinct temperatures to leave one degree of freedom. With errors additive in k only temperatures at which the fitted k exceeds three times its standard deviation count. A straight line is fitted and shown, but whether E changes with T cannot be told.",
		Cure:        "measure at further temperatures, spread evenly in 1/T; six or more give a test with some power",
	},
	{
		Code: string(BeyondPrefactor), Title: "curved: more than one constant barrier with a usual prefactor gives", Severity: Alarm,
		Explanation: "The 95 % interval of the exponent n of T misses the prefactor band (0 Arrhenius, 1/2 collision theory, 1 transition-state theory), so that no single constant barrier with a usual prefactor gives this curvature. One pair of E and A misleads: E depends on T. It does not by itself prove a second barrier. E that rises with T can come from a parallel path, tunnelling, a positive heat capacity of activation or an error of temperature, and cannot come from steps in series, inactivation or a diffusion limit. E that falls with T can come from steps in series, inactivation, a diffusion limit, a negative heat capacity of activation or an error of temperature, and cannot come from a parallel path or tunnelling. If n lies in the band this verdict is given in at most 5 % of experiments.",
		Cure:        "publish the recommended curve with its range of temperature, not one E; settle the cause by experiment",
		Reference:   "IUPAC Gold Book, activation energy",
	},
	{
		Code: string(WithinPrefactor), Title: "curved: a T-dependent prefactor explains it", Severity: Info,
		Explanation: "The 95 % interval of the exponent n excludes 0 and lies inside the prefactor band: a constant barrier with a prefactor that depends on T as theories of rates say is enough.",
		Cure:        "publish the three-parameter form, or the two-parameter form with the prefactor of your theory",
	},
	{
		Code: string(CurvedOpen), Title: "curved: cause open", Severity: Warning,
		Explanation: "The 95 % interval of the exponent n excludes 0 and crosses an edge of the prefactor band: the data are curved, and it cannot be told whether a T-dependent prefactor is enough.",
		Cure:        "measure more temperatures, above all at both ends of the range, to narrow the interval of n",
	},
	{
		Code: string(StraightWithin), Title: "straight within ± X kJ/mol", Severity: Info,
		Explanation: "The whole interval of the change of E over the measured range lies inside the tolerance, and the second-barrier test finds nothing (p ≥ 0.05). This is evidence of absence, not absence of evidence: smooth curvature that would matter is excluded inside the measured range. It says nothing about temperatures outside.",
	},
	{
		Code: string(Unresolved), Title: "no curvature detected", Severity: Info,
		Explanation: "The exponent test does not exclude n = 0, and the interval of the change of E is wider than the tolerance: the data neither show curvature nor exclude one that matters. Read the interval of the change of E first; the smallest change that would have been detected with 80 % power tells what the experiment could do.",
		Cure:        "measure over a wider range, or more temperatures at its ends",
		Reference:   "J. M. Hoenig, D. M. Heisey, Am. Stat. 55 (2001) 19",
	},

	// Ranking.
	{
		Code: "aicc-undefined", Title: "AICc undefined", Severity: Info,
		Explanation: "AICc = AIC + 2K(K+1)/(N-K-1) needs N > K + 1, K counting the estimated sigma. The curve is fitted and shown with its AIC, and takes no part in the ranking.",
		Cure:        "measure more temperatures, or rank by --criterion bic and mind that it prefers curves too readily for few points",
		Reference:   "C. M. Hurvich, C.-L. Tsai, Biometrika 76 (1989) 297",
	},
	{
		Code: "ranking-and-test", Title: "AICc and the 5 % test differ in eagerness", Severity: Info,
		Explanation: "AICc and the exponent test weigh a third parameter differently: below N = 11 AICc is more reluctant to prefer a curve than the 5 % test, from N = 11 it is more eager. The verdict follows the test, whose error rate is known.",
	},
	{
		Code: "family-not-told-apart", Title: "members of a family not told apart", Severity: Info,
		Explanation: "Curves that differ only in a fixed exponent of T lie within Δ < 2 of each other: these data cannot choose among them. Their E differ by about RT/2 a step, by definition and not by evidence.",
		Cure:        "choose the form by theory or by the custom of the field, and name it beside E",
	},
	{
		Code: "ranking-differs", Title: "the recommended curve is not the first of the ranking", Severity: Info,
		Explanation: "The ranking orders curves by how well they would predict; the lowest value of a criterion is not a test, and on straight data it often belongs to a curve. The recommendation follows the verdict.",
	},
	{
		Code: "conditional-on-choice", Title: "intervals are conditional on the choice of curve", Severity: Info,
		Explanation: "The intervals of the recommended curve's parameters take that curve as given. Had another been chosen they would be others; the choice itself adds uncertainty that they do not hold.",
		Reference:   "K. P. Burnham, D. R. Anderson, Model Selection and Multimodel Inference, 2nd ed. (2002), ch. 4",
	},
	{
		Code: "forms-same-curve", Title: "two forms of one curve", Severity: Info,
		Explanation: "Modified Arrhenius and Eyring with a constant heat capacity of activation are the same function of T: n = 1 + ΔC_p‡/R. They fit identically; no criterion and no data can choose between them, and they are ranked as one curve.",
		Cure:        "publish the form that your theory speaks",
	},
	{
		Code: "curve-excluded", Title: "the data bend the other way", Severity: Info,
		Explanation: "Two parallel paths make E rise with T, always, and so does tunnelling; steps in series make it fall. Where the data do not bend that way the best such curve is the straight line itself, and it is excluded instead of being fitted to nonsense.",
	},
	{
		Code: "many-candidates", Title: "many candidates", Severity: Warning,
		Explanation: "Every further candidate is one more chance to follow the noise: the curve that ranks first among many is a curved one more often than among the default candidates, also where one barrier made the data. The verdict does not depend on the candidates. The calibration study shows by how much the first places do.",
		Cure:        "name the curves for which there is a physical reason: --models +vogel",
	},
	{
		Code: "curve-not-fitted", Title: "a curve could not be fitted", Severity: Info,
		Explanation: "The curve needs more temperatures than there are, or no finite fit was found. It takes no part in the ranking.",
		Cure:        "measure more temperatures",
	},
	{
		Code: "curve-not-identified", Title: "parameters not identified", Severity: Info,
		Explanation: "The curve fits, but the data do not determine each of its parameters: one of them runs off to a value without meaning (a barrier above 1000 kJ/mol, say), or many pairs fit equally well. Its fitted values are good, its parameters are not stated.",
		Cure:        "measure more temperatures around the bend and on both sides of it",
	},

	// Curvature.
	{
		Code: "second-barrier", Title: "the second-barrier test finds a bend", Severity: Warning,
		Explanation: "Beside the exponent test, which looks for smooth curvature, the data are tested for the shape that a second, parallel path would give: nine crossovers and six differences of barrier are tried, and the largest studentised coefficient is compared with its exact distribution under one barrier. Only E rising with T counts. It never decides the verdict. One of the two, verdict or this finding, raises a false alarm in 7 to 8 % of straight data sets (9 % of those with four temperatures).",
		Cure:        "measure more temperatures around the crossover",
		Reference:   "R. B. Davies, Biometrika 74 (1987) 33",
	},
	{
		Code: "crossover-outside", Title: "the crossover lies outside the measured range", Severity: Warning,
		Explanation: "The two paths of the recommended curve would be equally fast at a temperature that was not measured: one of the paths was hardly seen, and its parameters rest on the bend alone.",
		Cure:        "measure up to the crossover and beyond; publish the change of E over the range instead of two barriers",
	},
	{
		Code: "second-barrier-rests-on-end", Title: "the second barrier rests on one temperature", Severity: Warning,
		Explanation: "Without its hottest or its coldest temperature the second-barrier test has p > 0.20: a single end point carries the finding.",
		Cure:        "measure there again, and beyond",
	},
	{
		Code: "borderline", Title: "borderline", Severity: Info,
		Explanation: "The p-value of the exponent test lies between 0.01 and 0.1, and the verdict changes when one temperature is left out, which one hardly matters. That is what chance does near p = 0.05: a repeat of the experiment may then well give another verdict; how often, the shares of repeats say (a repeat would say), which are drawn about the curves that describe the data and can be near 100 % where one of them bends more than the exponent test can follow. A point that the verdict truly hangs on is named as deciding.",
		Cure:        "repeat the measurement, or add temperatures at both ends of the range",
	},
	{
		Code: "deciding-point", Title: "the verdict hangs on one temperature or point", Severity: Warning,
		Explanation: "The verdict is curved, is not without this temperature or point, and without it the exponent n shrinks to less than half or turns its sign. Flips that leave n much as it was are noise and are not named. In straight data that came out curved by chance such a point is found in 1 to 26 % of sets; where a bad point at the hot end, off by eight standard deviations, bends straight data, in 74 to 95 % of sets of twelve temperatures or more, in 78 % of eight over a narrow range and 41 % over a wide one, and more seldom in fewer, which leave too little to tell (simulated). The second-barrier test is not repeated. Where rate-maximum is raised as well, the maximum is a test of its own, on all temperatures above it, and stands by itself.",
		Cure:        "measure there again; a verdict that one point makes is no finding about the reaction",
		Reference:   "R. D. Cook, S. Weisberg, Residuals and Influence in Regression (1982)",
	},
	{
		Code: "influence-not-examined", Title: "not every point was left out", Severity: Info,
		Explanation: "With errors in k, and with limits, the exponent test without a point takes a fit of its own. Where the data have more than 100 temperatures and points, those are left out one at a time that move n most in the fit linearised about its estimates: a deciding point is one of them, since it takes away half of n. Of the others leverage, Cook's distance and the studentised residual are known, and n without them is not.",
		Cure:        "use --leave-out to see the verdict without one of the others",
	},
	{
		Code: "outlier", Title: "a point far from the curve through the others", Severity: Warning,
		Explanation: "The studentised residual is larger than chance makes the largest of so many (p < 0.05 after Bonferroni). It is that from the power-prefactor curve, of which every straight line with a usual prefactor is one, or from the recommended curve where that bends more freely, with the scatter of the other points, or where u(k) is stated with that. Where a curve fails its adequacy test its outliers are named only if it passes without them: a curve that does not fit makes outliers of good points. For curves that are not linear in their parameters and with errors in k the test is approximate.",
		Cure:        "look the measurement up; leave it out with --leave-out only for a reason other than this number",
		Reference:   "R. D. Cook, S. Weisberg, Residuals and Influence in Regression (1982), section 2.2",
	},
	{
		Code: "outliers-not-told", Title: "outliers cannot be told from a curve that does not fit", Severity: Info,
		Explanation: "Some points lie far from the curve, but no candidate describes the data: each fails its adequacy test at 1 %, with any one of those points or without it. Points far from a curve that does not fit say something about the curve, not about the points.",
		Cure:        "find a curve that fits, or see what the uncertainties leave out; then look for outliers",
	},
	{
		Code: "temperature-error-explains", Title: "the error of a working thermometer could take this away", Severity: Warning,
		Explanation: "An error of the recorded temperatures smaller than what a working thermometer may be wrong by would be enough to take the verdict away: with it put right the interval of n reaches the edge of the prefactor band (beyond-prefactor) or 0 (the other curved verdicts). To make the whole of the curvature takes a larger error, which is given too. None is looked for beyond 50 K and half of the range. Three shapes are tried: an offset (the same everywhere), a gain (0 at the lowest, largest at the highest temperature) and a bow (0 at both ends, largest in the middle). Granted are 0.5 K, 0.5 K and 0.1 K, or the largest u(T) where every point has one. A bow is what most resembles curvature: over a narrow range a few tenths of a kelvin explain nearly every curve, an offset none.",
		Cure:        "calibrate the thermometer in the middle and at both ends of the range, and say with --thermometer-error what it may be wrong by then",
	},
	{
		Code: "order-follows-temperature", Title: "the order of the runs follows T", Severity: Warning,
		Explanation: "The temperatures were measured nearly in their order, up or down (rank correlation of 0.9 or more). Whatever drifts in an experiment, such as a catalyst, a lamp or a solution that ages, then drifts with T: it changes E, or bends the plot, and the residuals cannot show it. The order is that of a column headed order: 1, 2, 3 and so on, as the runs were made.",
		Cure:        "measure in random order, or come back to the first temperature at the end",
	},
	{
		Code: "drift-with-order", Title: "residuals drift with the order of the runs", Severity: Warning,
		Explanation: "The residuals from the power-prefactor curve rise or fall with the order in which the points were measured (Spearman's rank correlation, p < 0.05, exact up to nine points without ties if the order was random). Where the order follows T no drift is seen: what it does to ln k is taken for a slope or a bend. Something changed in the course of the experiment. The order is that of a column headed order: 1, 2, 3 and so on, as the runs were made.",
		Cure:        "look for what ages or warms up; measure in random order, so that a drift becomes scatter",
		Reference:   "C. Spearman, Am. J. Psychol. 15 (1904) 72",
	},
	{
		Code: "rate-maximum", Title: "k falls again above an optimum", Severity: Warning,
		Explanation: "The rate constant rises to a temperature inside the range and falls above it, both by more than the scatter (1 % each, allowing for the choice of the place). No barrier and no sum of barriers does that, nor does a usual prefactor (only a strongly falling one, T^n with n far below 0, has a maximum at all): something is lost or reversed at the hot end, such as an enzyme that unfolds, a catalyst that sinters, or an equilibrium before the slow step. One E for the whole range has no meaning. That of the cold part has, where k is below half of its largest value: closer to the maximum the loss has begun, and E_loc falls towards 0.",
		Cure:        "take a curve that has a maximum, series read as reversible-inactivation (--models +reversible-inactivation where it is no candidate); or assess the part that rises, up to half of the largest k, with --t-max",
		Reference:   "P. J. H. Sharpe, D. W. DeMichele, J. Theor. Biol. 64 (1977) 649",
	},
	{
		Code: "exponent-not-a-prefactor", Title: "n is no prefactor", Severity: Warning,
		Explanation: "For |n| above about 5 the exponent of T is no property of a prefactor but a measure of curvature.",
		Cure:        "read it as the change of E; as ΔC_p‡ = (n − 1)R only where power-prefactor describes the data and is recommended",
	},
	{
		Code: "band-narrow-for-gas-phase", Title: "prefactor band narrow for the gas phase", Severity: Warning,
		Explanation: "The unit is that of a gas-phase reaction. Elementary reactions in the gas phase often need an exponent of T between 0 and 3, beyond the default band of 0 to 1. The band says what counts as a usual prefactor, and belongs to the question: choose it before looking at n. A band that is widened until n fits makes the verdict worthless.",
		Cure:        "decide by theory or precedent which band the reaction asks for, before looking at n; where it is 0 to 3: --prefactor-band 0..3",
	},
	{
		Code: "rests-on-stated", Title: "rests on the stated uncertainties", Severity: Warning,
		Explanation: "The exponent is significant if the stated uncertainties are taken at their size, and not if only their ratios are trusted and the scatter of the points themselves is used.",
		Cure:        "check what the stated uncertainties hold; --error-model scaled trusts their ratios only",
	},
	{
		Code: "stated-contradicted", Title: "stated uncertainties contradicted", Severity: Warning,
		Explanation: "No flexible curve fits the data within the stated uncertainties (chi-squared p < 0.05 for each). They are taken as right up to one common factor, which is estimated: the error model is scaled.",
		Cure:        "look for scatter that the stated uncertainties leave out, such as that from run to run",
	},
	{
		Code: "chi2-low", Title: "the scatter is near the upper end of what the stated uncertainties allow", Severity: Info,
		Explanation: "The p-value of chi-squared is below 0.2, but not below 0.05, for the flexible curve that fits best: the points scatter rather more than u(k) says. One in five data sets with right uncertainties does so too. If u(k) does leave out scatter from run to run, the verdict raises more false alarms than it claims.",
		Cure:        "compare with --error-model scaled",
	},
	{
		Code: "scatter-too-small", Title: "stated uncertainties larger than the scatter", Severity: Warning,
		Explanation: "Chi-squared of the straight line lies in the lowest hundredth of its distribution: the points scatter less than their stated uncertainties say. Expanded uncertainties read as standard ones, or a systematic part common to all points, do that; the test then has less power than the data could give.",
		Cure:        "check whether u(k) is a standard uncertainty without systematic parts; compare with --error-model scaled",
	},
	{
		Code: "repeats-not-known", Title: "a spread of few repeats is no known uncertainty", Severity: Info,
		Explanation: "A standard deviation from 30 repeats or fewer is itself uncertain: taken as known, triplicates raise false alarms in 28 % of straight sets of eight. The rate constants are taken as means and the scatter about the curve as their uncertainty.",
		Cure:        "--error-model stated if the uncertainties are known otherwise",
	},
	{
		Code: "scatter-below-thermometer", Title: "scatter smaller than u(T) allows", Severity: Warning,
		Explanation: "Under error model relative the scatter of ln k holds what random errors of T do. About the straight line, or where the verdict is curved about the curve that describes the data, it is smaller than the stated uncertainties of T alone would cause, by more than chance allows: χ² of that curve with those variances lies in the lowest hundredth of its distribution. Asked where every point has u(T).",
		Cure:        "check whether u(T) holds a systematic part, which does not scatter",
	},
	{
		Code: "temperature-means", Title: "repeats share the thermostat's error", Severity: Info,
		Explanation: "Repeats at one temperature share the error of its setting. Taken as independent they raise false alarms in 18 to 24 % of straight sets with three repeats, where scatter between temperatures equals that within (simulated). The verdict uses temperature means; the pointwise result stands beside it.",
		Cure:        "--replicates independent where every point had a temperature setting of its own",
	},
	{
		Code: "perfect-data", Title: "no scatter", Severity: Warning,
		Explanation: "The residuals are rounding error: the numbers were computed, not measured. Uncertainties derived from them have no meaning for an experiment.",
		Cure:        "give measured rate constants, or their uncertainties",
	},

	// Sources.
	{
		Code: "sources-compared", Title: "several sources, one offset each", Severity: Info,
		Explanation: "The points come from several laboratories or methods. The verdict allows each source a factor of its own, the same at every temperature (ln k: an offset); the degrees of freedom are those of the points less three for the curve and one for each source beyond the first. Curves are fitted beside the offsets, and give the mean over the sources; k at the reference temperature is their mean there, and its uncertainty holds the scatter between them. Nothing that matters changes when the sources are taken as one.",
	},
	{
		Code: "between-source-offset", Title: "there may be an offset between sources", Severity: Warning,
		Explanation: "Offsets between the sources are significant (F test in the power-prefactor curve, χ² test where the uncertainties are known, p < 0.05), and with an offset for each source the exponent of T shrinks to less than half: what looked like curvature, or widened the scatter, when the sources were taken as one may largely be a difference between laboratories or methods. A curve of another shape can make offsets significant as well, above all where the sources cover different temperatures; with a variance inflation above 2 none is named as the cause of a bend, and offsets of single points, which fit any curve, are not tested. The verdict is that with offsets.",
		Cure:        "find out why the sources differ, or measure the whole range in one laboratory",
	},
	{
		Code: "offsets-leave-open", Title: "with offsets allowed these data can no longer tell", Severity: Warning,
		Explanation: "Taken as one the sources look curved; with an offset for each source the curvature is no longer found, but neither do the data show that it was an offset: the offsets are not significant, or belong to single points, or cannot be told well from curvature (variance inflation above 2). Where sources cover different temperatures, offsets hide much of the curvature that is there: where three laboratories measured four temperatures each, in a third of the range each, it was found in 47 instead of 71 % of sets over a narrow range and in 64 instead of 98 % over a wide one (simulated).",
		Cure:        "measure at temperatures that two sources share, or the whole range in one laboratory",
	},
	{
		Code: "offsets-show-curvature", Title: "offsets between sources hid curvature", Severity: Warning,
		Explanation: "With an offset for each source the points are curved; taken as one the sources do not show it, since the offsets between them bend the plot the other way or scatter it. The verdict is that with offsets.",
		Cure:        "look at each source by itself with --where source=NAME",
	},
	{
		Code: "sources-confounded-partly", Title: "offsets and curvature partly confounded", Severity: Warning,
		Explanation: "With an offset for each source the variance of the exponent of T is more than twice what it is when the sources are taken as one (variance inflation factor above 2, by the design alone): the sources cover different temperatures, and much of what could show curvature goes into the offsets.",
		Cure:        "measure at temperatures that two sources share",
	},
	{
		Code: "sources-confounded", Title: "offsets and curvature cannot be told apart", Severity: Warning,
		Explanation: "With an offset for each source no degree of freedom is left, or the temperatures of the sources do not determine the exponent of T beside the offsets. The verdict takes the sources as one: an offset between them may bend the plot or hide a bend.",
		Cure:        "measure at temperatures that two sources share, or the whole range in one laboratory",
	},
	{
		Code: "one-point-source", Title: "a source of one point", Severity: Info,
		Explanation: "A source with one point, or with one temperature where means are used, says nothing on curvature: its offset takes it up whole. It takes no part in the verdict and the curves, only in the mean over sources.",
		Cure:        "measure at further temperatures there, or leave the source out",
	},
	{
		Code: "sources-as-one", Title: "several sources taken as one", Severity: Info,
		Explanation: "With --sources as-one no offset is fitted between the sources, and points of all of them at one temperature are repeats. That is right where the sources share flask, thermometer and method, and are names alone. An offset that is there all the same makes curvature, or hides it: on simulated data of three laboratories with one barrier and offsets, taken as one, up to 79 % come out curved, where the verdict beside offsets keeps its 5 %.",
		Cure:        "compare with the verdict of --sources offsets, the default",
	},
	{
		Code: "pairs-across-sources", Title: "pairs are not drawn across sources", Severity: Alarm,
		Explanation: "Resampling pairs would draw points across sources, while the offsets are estimated from the points of each.",
		Cure:        "--scheme residual or --scheme parametric",
	},

	// Adequacy.
	{
		Code: "none-adequate", Title: "none of the candidates fits", Severity: Alarm,
		Explanation: "Every fitted curve fails its adequacy test at 1 %: the scatter about the curves is larger than repeats or stated uncertainties allow. Either the function is another, or repeats and uncertainties leave out scatter from one temperature to the next.",
		Cure:        "look at the residuals: a trend asks for another curve, none for larger uncertainties",
	},
	{
		Code: "repeats-share-error", Title: "repeats share an error that means do not", Severity: Warning,
		Explanation: "Repeats at one setting of a thermostat share its error: they agree with each other better than settings do. Measured by such repeats every curve fails its adequacy test at 1 %, the true one too. That is what the data show: the temperature means lie about a candidate without a trend (runs test, p ≥ 0.05, which up to six temperatures cannot be below), only further than the scatter of the repeats allows. The verdict takes the means, each temperature once, and the scatter among them, for this very reason; it does not rest on the repeats. Where it is beyond-prefactor no curve is recommended, since none passes the test.",
		Cure:        "set the temperature anew for every repeat, or state u(T); --replicates independent only where the settings were independent",
	},
	{
		Code: "adequacy-unchecked", Title: "adequacy cannot be checked", Severity: Info,
		Explanation: "Without repeats and without stated uncertainties nothing tells how large the scatter about the true curve should be. Standard deviations of n repeats do, where every point has one and n is the same for all: their pooled square over n is the pure error of the means, with n - 1 degrees of freedom a point. Under error model scaled the factor common to all stated uncertainties is taken from the scatter, which they then cannot check: only repeats could. The runs test is shown; it does not decide, since it cannot reach 5 % for N ≤ 6.",
		Cure:        "repeat some temperatures, or state u(k)",
	},

	// Residuals and prediction.
	{
		Code: "scatter-not-even", Title: "the scatter changes with temperature", Severity: Warning,
		Explanation: "The error model takes errors of ln k (or of k) to be as large at the cold end as at the hot one, or as stated. The residuals are larger at one end than that allows (score test of Breusch and Pagan for a variance that changes with 1/T; p is exact for normal errors). At 1 %, with temperatures evenly spaced in 1/T, it sees a standard deviation that is threefold from one end of the range to the other in 1 % of sets of 5, 3 % of 8, 7 % of 12, 17 % of 20 and 47 % of 40: silence means little for few points. Weights that are wrong by so much cost precision, and the verdict raises more or fewer false alarms than it claims.",
		Cure:        "state u(k) for every point, with all that belongs to it; where the errors are of one size in k, --error-model absolute, where they are a share of k, --error-model relative",
		Reference:   "T. S. Breusch, A. R. Pagan, Econometrica 47 (1979) 1287; J. P. Imhof, Biometrika 48 (1961) 419",
	},
	{
		Code: "residuals-not-normal", Title: "the residuals are not normal", Severity: Info,
		Explanation: "The ordered residuals follow normal scores less closely than in 99 % of sets with normal errors (test of Shapiro and Francia, its null that of residuals at these temperatures). A few large errors among small ones do that. At 1 % it sees errors of Student's t with three degrees of freedom in 1 % of sets of 5, 2 % of 8, 8 % of 12, 19 % of 20 and 43 % of 40. The 5 % of the verdict depends little on it; single points may matter much.",
		Cure:        "look for the row with the largest residual, and repeat it",
		Reference:   "S. S. Shapiro, R. S. Francia, J. Am. Stat. Assoc. 67 (1972) 215",
	},
	{
		Code: "absolute-fits-better", Title: "errors in k describe the scatter better", Severity: Warning,
		Explanation: "Under error model relative the scatter of ln k is the same at all temperatures; here it shrinks as k grows, and one common error of k itself describes it better: the AIC of one curve is lower by more than 4 under error model absolute, both being densities of k. Of sets of five to eight points whose errors are a share of k about 2 % hear of it, of larger ones fewer than 1 % (simulated). A detection limit, a baseline or a fixed reading error does that. Relative errors then give the small rate constants far too much weight.",
		Cure:        "compare with --error-model absolute",
	},
	{
		Code: "relative-fits-better", Title: "errors in per cent describe the scatter better", Severity: Warning,
		Explanation: "Under error model absolute every k is uncertain by the same amount; here an error that is the same share of every k describes the scatter better: the AIC of one curve is lower by more than 4 under error model relative, both being densities of k. Errors of one size then give the large rate constants nearly all of the weight: a verdict on a few hot points, which may take their scatter for curvature, and outliers that are none.",
		Cure:        "compare with --error-model relative",
	},
	{
		Code: "first-extrapolates-worst", Title: "the first of the ranking extrapolates worst", Severity: Warning,
		Explanation: "Each candidate is fitted without the hottest third of the temperatures, and without the coldest, and predicts them. The curve that ranks first, with half of the weight or more, does so worst of all candidates, and with more than twice the error of the straight line: what it gains inside the range it owes to the ends themselves. Its parameters rest on few points, and outside the range it misleads.",
		Cure:        "do not extrapolate with it; measure beyond the ends of the range",
		Reference:   "D. M. Allen, Technometrics 16 (1974) 125",
	},

	// Data and results.
	{
		Code: "stated-incomplete", Title: "some points have no standard uncertainty", Severity: Info,
		Explanation: "Stated uncertainties are used where every point has a standard uncertainty at a known level. Some have none, so that one common relative error is estimated from the scatter about the curve.",
		Cure:        "state u(k) for every point, or leave the others out with --leave-out",
	},
	{
		Code: "not-resampled", Title: "no bootstrap", Severity: Info,
		Explanation: "The resampling scheme needs more temperatures or points than there are, or scatter where there is none, so that no bootstrap was run. The reported intervals do not depend on it.",
		Cure:        "--scheme parametric, or more temperatures",
	},
	{
		Code: "fewer-resamples", Title: "fewer resamples than usual", Severity: Info,
		Explanation: "What a resample costs goes with the number of temperatures, and is far more with limits, with errors in k and with curves of a bounded shape. Where the usual number would take more than about 3 s of one core, by a formula of these counts, so many are drawn as take no longer unless --resamples says otherwise; above 10,000 temperatures none. The verdict and the reported intervals do not depend on them; the repeat shares are coarser or missing.",
		Cure:        "--resamples 9999 for all of them, however long it takes, or average neighbouring temperatures",
	},
	{
		Code: "limits-approximate", Title: "limits make the error rates approximate", Severity: Info,
		Explanation: "A row that states only a bound of k enters the likelihood of every curve as the probability of its side of the bound, with the errors of the error model; it has no residual, is not averaged with other rows and is an entry of its own in N of AICc and BIC. Beside other sources it shares the offset of its own, and with limits one measured point of a source takes part in the curvature; the offsets are tested by the likelihood ratio W, ν (exp(W/n) - 1)/(S - 1) being referred to F, and the variance inflation of n is that of offsets free over offsets held. The exponent, the change of E and their intervals are those of the profile likelihood, whose signed root is referred to Student's t with as many degrees of freedom as the measured points alone leave; σ̂ is that of largest likelihood times sqrt(n/ν), n counting measured points. Without limits all this is exact, with them approximate. A curve needs as many measured temperatures as without limits: a limit bounds k from one side only. Adequacy, the χ² test of stated uncertainties and the second-barrier test go by the measured points alone. Where uncertainties are stated, a limit without one takes that of the measured point nearest in temperature.",
		Cure:        "measure where the limits are, or leave them out with --leave-out and compare", Reference: "Tobin 1958, Econometrica 26, 24",
	},
	{
		Code: "limits-left-out", Title: "limits are not used", Severity: Warning,
		Explanation: "A limit takes no part where it bounds nothing (k above zero, with errors in ln k), and for a curve that the measured points leave without a degree of freedom, the exponent test too. Where several sources are told apart, each with an offset of its own, limits share the offset of their source; a source of which nothing was measured has limits alone, and these bound its offset from one side only: the likelihood is largest where the offset makes them say nothing.",
		Cure:        "measure where the limits are, or at more temperatures",
	},
	{
		Code: "limit-contradicted", Title: "a limit contradicts the measured points", Severity: Warning,
		Explanation: "By the power-prefactor fit of the measured points alone (the straight line where there are too few), a new measurement at the temperature of the limit would fall on its side with a probability below 1 %. Among many limits one such may be chance. A wrong sign (< for >), another unit, a detection limit that was not reached for another reason, or a curve that bends there all look like this.",
		Cure:        "check the sign, the unit and the temperature of the row; --leave-out shows what the limit does",
	},
	{
		Code: "limits-scheme", Title: "this bootstrap cannot take limits", Severity: Alarm,
		Explanation: "A limit has no residual to draw or to turn. The parametric scheme draws every entry anew about the fitted curve, limits too; one that falls on its side of the bound is that limit again, any other counts as measured. Pairs exchange entries as they are, limits among them, where no means are formed.",
		Cure:        "--scheme parametric",
	},
	{
		Code: "too-many-temperatures", Title: "too many temperatures", Severity: Alarm,
		Explanation: "A data set may have 50,000 temperatures, or as many points where points at one temperature count as independent; the number of repeats is not limited. More would take gigabytes of memory, and tell no more than their means over narrow intervals of temperature: over 1 K the bend of ln k against 1/T is far below any scatter.",
		Cure:        "average neighbouring temperatures, or select rows with --t-min, --t-max or --where",
	},
	{
		Code: "no-usable-points", Title: "no usable points", Severity: Alarm,
		Explanation: "Every row was left out, by the reader or by the selection: there is nothing to fit.",
		Cure:        "see inspect for why each row was left out",
	},
	{
		Code: "one-temperature", Title: "one temperature", Severity: Alarm,
		Explanation: "All used points lie at one temperature. A barrier needs at least two, its test at least four.",
		Cure:        "measure at other temperatures",
	},
	{
		Code: "not-fittable", Title: "cannot be fitted", Severity: Alarm,
		Explanation: "A value that the chosen error model cannot use, such as k ≤ 0 where errors are relative, or data so extreme that even a straight line has no finite fit.",
		Cure:        "correct the row, leave it out with --leave-out, or choose --error-model absolute",
	},
	{
		Code: "uncertainty-missing", Title: "uncertainty missing", Severity: Alarm,
		Explanation: "The chosen error model needs a standard uncertainty for every used point.",
		Cure:        "give a column u(k), or use --error-model relative",
	},
	{
		Code: "eyring-withheld", Title: "entropy of activation withheld", Severity: Info,
		Explanation: "ΔS‡ and ΔG‡ need the time unit and the standard state of k: reading min⁻¹ as s⁻¹ shifts ΔS‡ by 34 J mol⁻¹ K⁻¹. The unit of k was not understood, or k is no rate constant.",
		Cure:        "write the unit in the heading, such as k/s^-1",
	},
	{
		Code: "extrapolated", Title: "outside the measured range", Severity: Warning,
		Explanation: "The reference temperature lies outside the range that was measured. A curve that fits inside says little outside: no data can exclude a second path that begins just past the hot end. " + Caution,
		Cure:        "choose a --reference-temperature inside the range, or measure there",
	},
	{
		Code: "several-datasets", Title: "several data sets in one file", Severity: Alarm,
		Explanation: "A verdict is about one data set: one rate constant of one reaction under one set of conditions. The file holds several.",
		Cure:        "choose one with --dataset NAME",
	},
	{
		Code: "shares-of-another-curve", Title: "repeat shares follow a curve that is not recommended", Severity: Info,
		Explanation: "Each resample is drawn about a candidate, each candidate as often as its weight by plain AIC says. Where nearly all of the weight lies on a curve other than the recommended one, the shares tell what a repeat would say if that curve were true, its bend included, and may name another verdict than the one given, which rests on the exponent test of these data and needs no such curve. A curve of four parameters that follows single points, above all one that the data do not determine, does that.",
		Cure:        "compare with the shares under the recommended family: --models straight,power-prefactor",
	},
	{
		Code: "resamples-failed", Title: "some resamples could not be fitted", Severity: Warning,
		Explanation: "Some resamples of the bootstrap could not be fitted. They are counted and left out of its intervals and shares. Which of them fail is not left to chance: where more than 5 % do, neither repeat shares nor intervals of the bootstrap are given. The reported intervals do not depend on them. Resampling pairs may leave out temperatures that a curve needs; --scheme parametric keeps them all.",
		Cure:        "fewer candidates with --models; a few failures in a thousand do no harm",
	},
}
