package diagnostics

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// minTemperatures is the least number of distinct temperatures that leaves the
// exponent test a degree of freedom.
const minTemperatures = 4

// Title is how a verdict code is shown. That of StraightWithin needs the tolerance:
// see Verdict.Sentence.
func (s State) Title() string {
	switch s {
	case Untestable:
		return "too few temperatures to test"
	case BeyondPrefactor:
		return "curved: more than one constant barrier with a usual prefactor gives"
	case WithinPrefactor:
		return "curved: a T-dependent prefactor explains it"
	case CurvedOpen:
		return "curved: cause open"
	case StraightWithin:
		return "straight within the tolerance"
	}
	return "no curvature detected"
}

// ParseBand reads a prefactor band such as "0..1": the exponents of T that a usual
// prefactor gives. It must hold 0.
func ParseBand(s string) ([2]float64, error) {
	bad := fmt.Errorf("diagnostics: prefactor band %q is not of the kind 0..1, two exponents of T with 0 between them", s)
	a, b, ok := strings.Cut(s, "..")
	if !ok {
		return [2]float64{}, bad
	}
	low, err1 := strconv.ParseFloat(strings.TrimSpace(a), 64)
	high, err2 := strconv.ParseFloat(strings.TrimSpace(b), 64)
	if err1 != nil || err2 != nil || !(low <= 0 && 0 <= high) || math.IsInf(high-low, 0) {
		return [2]float64{}, bad
	}
	return [2]float64{low, high}, nil
}

// Tolerance is a |ΔE| too small to matter: the larger of a share of |E| and a fixed
// energy.
type Tolerance struct {
	Share float64 // of the straight fit's |E|
	KJ    float64 // kJ/mol
}

// defaultTolerance is how the default is written down.
const defaultTolerance = "5%, at least 0.5kJ/mol"

// ParseTolerance reads "5%" or "0.5kJ/mol". "" is the default: 5 % of |E|, at least
// 0.5 kJ/mol.
func ParseTolerance(s string) (Tolerance, error) {
	t := strings.ReplaceAll(s, " ", "")
	if t == "" {
		return Tolerance{Share: 0.05, KJ: 0.5}, nil
	}
	number, isShare := strings.CutSuffix(t, "%")
	if !isShare {
		var isEnergy bool
		if number, isEnergy = strings.CutSuffix(t, "kJ/mol"); !isEnergy {
			return Tolerance{}, fmt.Errorf("diagnostics: tolerance %q has no unit: write 5%% or 0.5kJ/mol", s)
		}
	}
	x, err := strconv.ParseFloat(number, 64)
	if err != nil || !(x > 0) || math.IsInf(x, 0) {
		return Tolerance{}, fmt.Errorf("diagnostics: tolerance %q is not a positive number: write 5%% or 0.5kJ/mol", s)
	}
	if isShare {
		return Tolerance{Share: x / 100}, nil
	}
	return Tolerance{KJ: x}, nil
}

// Apply gives the tolerance in kJ/mol for a straight fit's E in kJ/mol.
func (t Tolerance) Apply(e float64) float64 { return math.Max(t.Share*math.Abs(e), t.KJ) }

// Rule is what the state depends on besides the interval of n.
type Rule struct {
	Band          [2]float64
	ToleranceKJ   float64
	ChangePerUnit float64 // ΔE of n = 1, R(T_max - T_min), kJ/mol
}

// Judge gives the state of testable data from the interval of n (an open end is
// infinite) and whether the second-barrier test has p < 0.05: the first rule that
// holds. It is fast and allocates nothing.
func (r Rule) Judge(low, high float64, secondBarrier bool) State {
	switch {
	case low > r.Band[1] || high < r.Band[0]:
		return BeyondPrefactor
	case low > 0 || high < 0:
		if low >= r.Band[0] && high <= r.Band[1] {
			return WithinPrefactor
		}
		return CurvedOpen
	case low*r.ChangePerUnit >= -r.ToleranceKJ && high*r.ChangePerUnit <= r.ToleranceKJ && !secondBarrier:
		return StraightWithin
	}
	return Unresolved
}

// ends returns the ends of an interval, infinite where they are open.
func ends(e fit.Estimate) (low, high float64) {
	low, high = e.Lower, e.Upper
	if e.Open == fit.OpenLower || e.Open == fit.OpenBoth {
		low = math.Inf(-1)
	}
	if e.Open == fit.OpenUpper || e.Open == fit.OpenBoth {
		high = math.Inf(1)
	}
	return low, high
}

// Material compares ΔE with the tolerance: true where the whole interval of |ΔE|
// lies beyond it, false where it lies within, nil between.
func Material(change fit.Estimate, toleranceKJ float64) *bool {
	low, high := ends(change)
	var m bool
	switch {
	case low > toleranceKJ || high < -toleranceKJ:
		m = true
	case low >= -toleranceKJ && high <= toleranceKJ:
	default:
		return nil
	}
	return &m
}

// Testable says whether the exponent test can be run on a sample, and if not how
// many more temperatures it needs, and why. power is the power-prefactor fit, or
// nil: with errors additive in k only temperatures where the fitted k stands out
// of the noise (k > 3σ) count.
func Testable(s *fit.Sample, power *fit.Result) (ok bool, more int, why string) {
	d := s.DistinctT()
	if d < minTemperatures {
		why := fmt.Sprintf("the data have %s", count(d, "distinct temperature"))
		if len(s.Limits) > 0 {
			why += " with a measured k"
		}
		return false, minTemperatures - d, why
	}
	if power == nil {
		return true, 0, ""
	}
	if s.Model.InK() && power.Usable() && power.Nu > 0 {
		var above []float64
		for i, t := range s.T {
			if math.Exp(power.Fitted[i]) > 3*power.Sigma*math.Sqrt(s.V[i]) {
				above = append(above, t)
			}
		}
		if d := models.CountTemperatures(above); d < minTemperatures {
			return false, minTemperatures - d, fmt.Sprintf(
				"at only %s does the fitted k exceed three times its standard deviation", count(d, "temperature"))
		}
	}
	if power.Status != fit.Converged || power.Cov == nil {
		return false, 1, "the exponent of T is not identified: " + power.Reason
	}
	if power.Nu < 1 {
		return false, 1, "no degree of freedom is left"
	}
	return true, 0, ""
}

// count prints a number with its noun.
func count(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}

// VerdictInput is what the verdict, its sentence and its findings are made of.
type VerdictInput struct {
	Sample        *fit.Sample
	Test          ExponentTest
	SecondBarrier *SecondBarrier // nil where it was not run
	Rule          Rule
	Ranking       []Ranked // with Adequate filled in
	Untestable    bool
	More          int     // how many more temperatures it would take
	Why           string  // why they are needed
	PerMolecule   bool    // k is per molecule: a reaction in the gas phase
	EnergyUnit    string  // to print energies in; "" is kJ/mol
	PerKJ         float64 // that unit in one kJ/mol; 0 is 1
	// Ends gives E_loc in kJ/mol by a curve at both ends of the range; nil where the
	// sentence need not say.
	Ends func(curve string) (low, high float64)

	// FitOf gives the fit of a curve to Sample, nil where there is none; nil states the
	// change of E of the test whatever fits better.
	FitOf     func(curve string) *fit.Result
	ChangeOf  func(*fit.Result) fit.Estimate // the change of E over the range, kJ/mol
	Criterion Criterion                      // of the ranking

	told   fit.Estimate // the change of E that is stated
	toldBy string       // the curve that it is of
	rough  bool         // which does not describe the data
	loose  string       // the curve that does, where it leaves the change open; else ""
}

// Decide gives the verdict and the findings that belong to it.
func Decide(in VerdictInput) (Verdict, []Finding) {
	v := Verdict{State: Untestable, ETrend: models.TrendNone.String()}
	if !in.Untestable {
		low, high := ends(in.Test.Exponent)
		v.State = in.Rule.Judge(low, high, in.SecondBarrier.found())
	}
	var why string
	v.RecommendedCurve, why = Recommend(v.State, in.Ranking)
	in.tellChange(&v)
	if !in.Untestable {
		v.Material = Material(in.told, in.Rule.ToleranceKJ)
	}
	if v.State.Curved() {
		v.ETrend = models.TrendRises.String()
		if in.told.Value < 0 {
			v.ETrend = models.TrendFalls.String()
		}
	}
	v.Sentence = in.sentence(v.State, v.RecommendedCurve)

	var fs []Finding
	add := func(ok bool, f func() Finding) {
		if ok {
			fs = append(fs, f())
		}
	}
	t := in.Test
	add(v.State.Curved() && in.restsOnStated(), func() Finding { return restsOnStated(t.PValue, t.PScaleFree) })
	add(v.State.Curved() && math.Abs(t.Exponent.Value) > 5, func() Finding {
		return in.notAPrefactor(v.RecommendedCurve)
	})
	add(in.PerMolecule && !in.Untestable && in.Rule.Band[1] < 3, func() Finding { return bandNarrow(in.Rule.Band) })
	if b := in.SecondBarrier; b.found() {
		fs = append(fs, secondBarrierFound(b, in.Sample, in.Ranking, v.RecommendedCurve)...)
	}
	add(why != "", func() Finding { return rankingDiffers(v.RecommendedCurve, why) })
	add(v.State.Curved() && v.RecommendedCurve != "", func() Finding {
		return newFinding("conditional-on-choice", "intervals of the recommended curve take the choice of curve as given", nil, nil)
	})
	return v, fs
}

// found reports whether the second-barrier test, if it was run, has p < 0.05.
func (b *SecondBarrier) found() bool { return b != nil && b.PValue < secondBarrierLevel }

// restsOnStated reports whether only trust in the size of the stated uncertainties
// makes the exponent significant.
func (in *VerdictInput) restsOnStated() bool {
	return in.Test.PValue < 0.05 && in.Test.PScaleFree >= 0.05
}

// sentence says what was found, in words that a chemist reads.
func (in *VerdictInput) sentence(state State, recommended string) string {
	low, high := in.Sample.Range()
	between := fmt.Sprintf("between %s and %s K", kelvinText(low), kelvinText(high))
	n, change := in.Test.Exponent, in.Test.Change
	var s strings.Builder
	switch state {
	case Untestable:
		fmt.Fprintf(&s, "Too few temperatures to test: %s, and the test needs at least %s. Whether E changes with T cannot be told from these data.",
			in.Why, count(in.More, "more temperature"))
	case BeyondPrefactor:
		fmt.Fprintf(&s, "Curved: more than one constant barrier with a usual prefactor gives. %s. "+
			"This does not by itself prove a second barrier: %s", in.changed(recommended), causes(in.told.Value > 0))
	case WithinPrefactor:
		fmt.Fprintf(&s, "Curved: a T-dependent prefactor explains it. %s; the exponent n = %s lies inside the prefactor band %g to %g, so that one barrier is enough.",
			in.changed(recommended), interval(n, ""), in.Rule.Band[0], in.Rule.Band[1])
	case CurvedOpen:
		far, edge, way := n.Upper, in.Rule.Band[1], "up to"
		if n.Value < 0 {
			far, edge, way = n.Lower, in.Rule.Band[0], "down to"
		}
		fmt.Fprintf(&s, "Curved: cause open. %s. n %s %s is not excluded: a usual prefactor (n from %g to %g) may be the whole cause, or there may be more.",
			in.changed(recommended), way, beyondEdge(far, edge), in.Rule.Band[0], in.Rule.Band[1])
	case StraightWithin:
		fmt.Fprintf(&s, "Straight within ± %s: E changes by %s %s. Smooth curvature that would matter is excluded inside this range.",
			in.energy(in.Rule.ToleranceKJ), in.changeRange(change), between)
	case Unresolved:
		fmt.Fprintf(&s, "No curvature detected. E may still change by %s %s; %s.", in.changeRange(change), between, in.wouldShow())
		if in.SecondBarrier.found() {
			s.WriteString(" The second-barrier test does find a bend: see the findings.")
		}
	}
	if state.Curved() && in.restsOnStated() {
		s.WriteString(" This rests on the stated uncertainties.")
	}
	return s.String()
}

// byCurve says, behind the change of E, that it is the test's, and what it is by the
// recommended curve: where E changes near one end alone the two differ much.
func (in *VerdictInput) byCurve(curve string) string {
	test := models.PowerPrefactor{}.Info().Name
	if in.Ends == nil || curve == "" || curve == test {
		return ""
	}
	low, high := in.Ends(curve)
	if math.IsNaN(low) || math.IsNaN(high) {
		return ""
	}
	low, high = in.inUnit(fit.Estimate{Value: low}).Value, in.inUnit(fit.Estimate{Value: high}).Value
	d := decimals(math.Abs(high - low))
	return fmt.Sprintf(" by %s, from %s to %s %s by %s", test, number(low, d), number(high, d), in.unit(), curve)
}

// causes says what can and what cannot give E the sign that was found.
func causes(rises bool) string {
	if rises {
		return "a parallel path, tunnelling, a positive heat capacity of activation or an error of temperature can make E rise with T; steps in series, inactivation or a diffusion limit cannot."
	}
	return "steps in series, inactivation, a diffusion limit, a negative heat capacity of activation or an error of temperature can make E fall with T; a parallel path or tunnelling cannot."
}

// wouldShow says what change these data would have shown.
func (in *VerdictInput) wouldShow() string {
	d := in.inUnit(in.Test.Detectable)
	known := func(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
	switch {
	case known(d.Value) && d.Lower < d.Upper:
		return fmt.Sprintf("these data would have shown a change of %s with 80 %% power", interval(d, " "+in.unit()))
	case known(d.Value):
		return fmt.Sprintf("these data would have shown a change of %s with 80 %% power", in.energy(in.Test.Detectable.Value))
	case known(d.Lower) && known(d.Upper):
		dec := decimals(d.Upper - d.Lower)
		return fmt.Sprintf("the change that these data would have shown with 80 %% power lies between %s and %s %s",
			number(d.Lower, dec), number(d.Upper, dec), in.unit())
	}
	return "what change these data would have shown is not known"
}

// changeRange prints the interval of a change with its signs: -9 to +14 kJ/mol.
func (in *VerdictInput) changeRange(e fit.Estimate) string {
	low, high := ends(in.inUnit(e))
	switch {
	case math.IsInf(low, 0) && math.IsInf(high, 0):
		return "any amount"
	case math.IsInf(low, 0):
		return "+" + number(high, 2) + " " + in.unit() + " or anything below"
	case math.IsInf(high, 0):
		return number(low, 2) + " " + in.unit() + " or anything above"
	}
	d := decimals(high - low)
	return fmt.Sprintf("%s to %s %s", signed(low, d), signed(high, d), in.unit())
}

func (in *VerdictInput) unit() string {
	if in.EnergyUnit == "" {
		return "kJ/mol"
	}
	return in.EnergyUnit
}

// inUnit turns kJ/mol into the unit of printing.
func (in *VerdictInput) inUnit(e fit.Estimate) fit.Estimate {
	if in.PerKJ == 0 {
		return e
	}
	return scaled(e, in.PerKJ)
}

// energy prints one energy given in kJ/mol with two figures.
func (in *VerdictInput) energy(kj float64) string {
	x := in.inUnit(fit.Estimate{Value: kj}).Value
	return number(x, decimals(x)) + " " + in.unit()
}

// signedEnergy is energy with a sign before what is positive too.
func (in *VerdictInput) signedEnergy(kj float64) string {
	x := in.inUnit(fit.Estimate{Value: kj}).Value
	return signed(x, decimals(math.Abs(x))) + " " + in.unit()
}

// decimals is how many decimals show two figures of a width.
func decimals(width float64) int {
	if !(width > 0) || math.IsInf(width, 0) {
		return 2
	}
	return min(max(1-int(math.Floor(math.Log10(width))), 0), 4)
}

// number prints x with a true minus sign, and no minus before zero.
func number(x float64, decimals int) string {
	s := strconv.FormatFloat(x, 'f', decimals, 64)
	if t, ok := strings.CutPrefix(s, "-"); ok {
		if strings.Trim(t, "0.") == "" {
			return t
		}
		return "−" + t
	}
	return s
}

// signed is number with a plus sign before what is positive.
func signed(x float64, decimals int) string {
	s := number(x, decimals)
	if x > 0 && strings.Trim(s, "0.") != "" {
		return "+" + s
	}
	return s
}

// interval prints a value, its unit, and its interval in brackets.
func interval(e fit.Estimate, unit string) string {
	low, high := ends(e)
	width := high - low
	if math.IsInf(width, 0) {
		width = math.Abs(e.Value)
	}
	d := decimals(width)
	show := func(x float64) string {
		if math.IsInf(x, 0) {
			return "open"
		}
		return number(x, d)
	}
	return fmt.Sprintf("%s%s (%s to %s)", number(e.Value, d), unit, show(low), show(high))
}

// beyondEdge prints the end of an interval with figures enough to tell it from the
// edge of the band that it passes.
func beyondEdge(x, edge float64) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return "any value"
	}
	return number(x, max(decimals(math.Abs(x)), decimals(math.Abs(x-edge))-1))
}

// Recommend names the curve to publish for a verdict, "" where none of the
// candidates will do, and says why where the ranking puts another one first.
func Recommend(state State, ranking []Ranked) (curve, why string) {
	usable := func(r Ranked) bool { return r.Status == StatusRanked || r.Status == StatusFitted }
	switch state {
	case Untestable, StraightWithin, Unresolved:
		curve = "straight"
	case WithinPrefactor, CurvedOpen:
		curve = firstCurve(ranking, func(r Ranked) bool {
			return usable(r) && (r.Curve == "root-prefactor" || r.Curve == "linear-prefactor" || r.Curve == "power-prefactor")
		})
	case BeyondPrefactor:
		good := func(r Ranked) bool {
			return r.Params > 2 && r.identified() && (r.Adequate == nil || *r.Adequate)
		}
		curve = firstCurve(ranking, func(r Ranked) bool { return r.Status == StatusRanked && good(r) })
		if curve == "" { // the criterion is undefined for all: the fewest parameters
			least := math.MaxInt
			for _, r := range ranking {
				if r.Status == StatusFitted && good(r) && r.Params < least {
					curve, least = r.Curve, r.Params
				}
			}
		}
	}
	first := firstCurve(ranking, func(r Ranked) bool { return r.Status == StatusRanked })
	if first == "" || first == curve {
		return curve, ""
	}
	if d := deltaOfRelative(ranking, curve); d < 2 { // the convention of family-not-told-apart
		return curve, fmt.Sprintf("%s ranks first by Δ = %s, too little to tell the two apart: they differ in a fixed exponent of T, which theory chooses", first, number(d, 2))
	}
	switch state {
	case Untestable:
		why = fmt.Sprintf("%s ranks first, but these data cannot test for curvature; the simplest curve is recommended", first)
	case StraightWithin:
		why = fmt.Sprintf("%s ranks first, but the data are straight within the tolerance, and the lowest value of a criterion is not a test", first)
	case Unresolved:
		why = fmt.Sprintf("%s ranks first, but no test finds curvature, and the lowest value of a criterion is not a test", first)
	case WithinPrefactor, CurvedOpen:
		why = fmt.Sprintf("%s ranks first; the exponent test asks for a T-dependent prefactor, and does not ask for more than that", first)
	case BeyondPrefactor:
		r := ranking[0]
		switch {
		case r.Params <= 2:
			why = fmt.Sprintf("%s ranks first, but the exponent test excludes its exponent of T", first)
		case !r.identified():
			why = fmt.Sprintf("%s ranks first, but the data do not determine its parameters", first)
		default:
			why = fmt.Sprintf("%s ranks first, but it fails its adequacy test", first)
		}
	}
	return curve, why
}

// deltaOfRelative is the Δ of a curve of fixed exponent behind a first one of its own
// family; infinite where the two are no such relatives.
func deltaOfRelative(ranking []Ranked, curve string) float64 {
	i := slices.IndexFunc(ranking, func(r Ranked) bool { return r.Curve == curve && r.Status == StatusRanked })
	if i < 0 || ranking[i].Params > 2 || ranking[i].Family != ranking[0].Family {
		return math.Inf(1)
	}
	return float64(ranking[i].Delta - ranking[0].Delta)
}

func firstCurve(ranking []Ranked, ok func(Ranked) bool) string {
	for _, r := range ranking {
		if ok(r) {
			return r.Curve
		}
	}
	return ""
}
