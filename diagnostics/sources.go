package diagnostics

import (
	"fmt"
	"math"
	"slices"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
)

// Levels of the comparison of sources (METHODS §5).
const (
	offsetLevel   = 0.05 // of the F test of the offsets
	offsetShrinks = 0.5  // |n| with offsets over |n| pooled
	partlyVIF     = 2
)

// The ways to take several sources.
const (
	SourcesOffsets = "offsets" // a constant offset in ln k for each
	SourcesAsOne   = "as-one"  // no difference between them, on the user's word
)

// sourcesTaken is the set as it is fitted: without its sources where they are to be
// taken as one.
func (a *assessor) sourcesTaken() *dataset.Set {
	if a.opt.Sources != SourcesAsOne {
		return a.set
	}
	set := *a.set
	set.Points = slices.Clone(set.Points)
	for i := range set.Points {
		set.Points[i].Source = ""
	}
	return &set
}

// findAsOne records that several sources were taken as one on request.
func (a *assessor) findAsOne() {
	if names := sources(a.set.Points); a.opt.Sources == SourcesAsOne && len(names) > 1 {
		a.find("sources-as-one", fmt.Sprintf("%d sources are taken as one on request: what lies between them counts as scatter, or as curvature", len(names)), nil,
			map[string]Real{"sources": Real(len(names))})
	}
}

// BetweenSources compares the sources of a data set, each with a constant offset in
// ln k of its own, with the same data taken as one.
type BetweenSources struct {
	Sources []SourceOffset  `json:"sources"`
	Pooled  ExponentSources `json:"pooled"`
	Offset  ExponentSources `json:"with_offsets"`
	// FTest is that of the offsets of the sources that take part in the curvature, in
	// power-prefactor; nil where they are not tested, and WhyUntested says why. Where
	// limits take part it is the likelihood-ratio test: see offsetTest.
	FTest       *FTest `json:"f_test"`
	WhyUntested string `json:"why_untested"`
	// VIF is the variance of n with offsets over that of n pooled, by the design
	// alone; with limits, over that of n with the offsets held.
	VIF        Real   `json:"vif"`
	Confounded bool   `json:"confounded"` // the verdict is the pooled one
	Why        string `json:"why_confounded"`
	// Scatter is the standard deviation of the offsets of the sources, in ln k.
	Scatter Real   `json:"scatter_ln_k"`
	Said    string `json:"said"` // code of the finding that says what changed
}

// SourceOffset is one source. Offset is in ln k, from the mean over the sources.
type SourceOffset struct {
	Name         string   `json:"name"` // "" for points without one
	Points       int      `json:"points"`
	Temperatures int      `json:"temperatures"`
	Offset       Estimate `json:"offset_ln_k"`
	InCurvature  bool     `json:"in_curvature"` // false for a source of one point without limits
}

// ExponentSources is the exponent test one way. The change of E is that over the
// range of the verdict.
type ExponentSources struct {
	State    State    `json:"state"`
	Exponent Estimate `json:"exponent"`
	EChange  Estimate `json:"e_change_kj_per_mol"`
	PValue   Real     `json:"p_value"`
	PBand    Real     `json:"p_band"`
	Nu       int      `json:"degrees_of_freedom"`
}

// FTest is an F test; DF2 is unknown where σ is known, and statistic·df1 is then
// chi-squared.
type FTest struct {
	Statistic Real `json:"statistic"`
	DF1       int  `json:"df1"`
	DF2       Real `json:"df2"`
	PValue    Real `json:"p_value"`
}

// sourceSplit is what is known of several sources before the verdict.
type sourceSplit struct {
	names        []string // in order of appearance; "" for points without one
	points       []int    // of each source
	temperatures []int
	entries      []int // of the sample that the verdict uses
	limits       []int
	onePoint     []int // sources of one entry and no limit
	aside        []dataset.Point

	pooled      *fit.Sample // all entries, taken as one
	pooledPower *fit.Result
	beside      *fit.Result // power-prefactor beside an offset for each source
	shared      *fit.Result // the same with one offset for all sources of more than one point
	offsets     []fit.Estimate
	vif         float64
	confounded  string // why there are no offsets, or ""
}

// bySource numbers the sources of the points in order of appearance in the set and
// puts points of one source together within each temperature. With fewer than two
// named sources there is nothing to compare. Points without a source are one of
// their own beside them.
func (p *prepared) bySource(set *dataset.Set) {
	if len(sources(set.Points)) < 2 {
		return
	}
	split := &sourceSplit{}
	number := map[string]int{}
	for _, pt := range set.Points {
		if _, seen := number[pt.Source]; pt.Used && !seen {
			number[pt.Source] = len(split.names)
			split.names = append(split.names, pt.Source)
		}
	}
	t := make([]float64, len(p.points))
	for i, pt := range p.points {
		t[i] = pt.T
	}
	_, group := models.NumberTemperatures(t)
	for i := 0; i < len(t); {
		j := i
		for j < len(t) && group[j] == group[i] {
			j++
		}
		slices.SortStableFunc(p.points[i:j], func(a, b dataset.Point) int { return number[a.Source] - number[b.Source] })
		i = j
	}
	p.sources, p.source = split, make([]int, len(p.points))
	for i, pt := range p.points {
		p.source[i] = number[pt.Source]
	}
}

// sameSource reports whether two points come from one source.
func (p *prepared) sameSource(i, j int) bool {
	return p.source == nil || p.source[i] == p.source[j]
}

// used is the number of points that take part, those of one-point sources included.
func (p *prepared) used() int {
	if p.sources == nil {
		return len(p.points)
	}
	return len(p.points) + len(p.sources.aside)
}

// pureError is the scatter of repeats of one source at one temperature.
func (p *prepared) pureError() PureError {
	if p.source == nil {
		return NewPureError(p.single)
	}
	return pureErrorOf(p.single, func(i, j int) bool { return p.group[i] == p.group[j] })
}

// entrySources are the sources of the entries of the sample that the verdict uses.
func (p *prepared) entrySources() []int {
	if p.basis == BasisPoints {
		return p.source
	}
	out := make([]int, p.means.Len())
	for i, g := range p.group {
		out[g] = p.source[i]
	}
	return out
}

// contrasts are columns for the offsets of the sources that occur: one for each but
// the last, in which it counts 1 and the last -1, so that the offsets add up to 0 and
// a curve is the mean over the sources.
func contrasts(source []int) [][]float64 {
	occurs := slices.Clone(source)
	slices.Sort(occurs)
	occurs = slices.Compact(occurs)
	last := len(occurs) - 1
	columns := make([][]float64, last)
	for j := range columns {
		columns[j] = make([]float64, len(source))
		for i, s := range source {
			switch s {
			case occurs[j]:
				columns[j][i] = 1
			case occurs[last]:
				columns[j][i] = -1
			}
		}
	}
	return columns
}

// splitSources fits power-prefactor with the sources taken as one and with an offset
// for each. If offsets and curvature can be told apart, sources of one entry are set
// aside, the offsets taken off the others, and what remains of them fitted beside
// every curve. Limits count as entries of their source: of one that has a single measured
// point, they bound the curve from there.
func (p *prepared) splitSources(replicates string) error {
	split := p.sources
	if split == nil {
		return nil
	}
	s, entry := p.sample, p.entrySources()
	split.count(p.points, p.source, entry, p.bounded)
	split.pooled = s
	split.pooledPower = fit.Fit(s, models.PowerPrefactor{})
	all := p.withBounded(entry)
	split.beside = fit.Fit(s.WithOffsets(make([]float64, len(all)), contrasts(all)), models.PowerPrefactor{})
	split.shared = split.pooledPower
	if len(split.onePoint) > 0 {
		one := split.together(all)
		split.shared = fit.Fit(s.WithOffsets(make([]float64, len(one)), contrasts(one)), models.PowerPrefactor{})
	}
	split.estimateOffsets()
	if split.confounded = split.cannot(s, entry, all); split.confounded != "" {
		return nil
	}

	var keep []int
	for i, src := range p.source {
		if split.takesPart(src) {
			keep = append(keep, i)
		} else {
			split.aside = append(split.aside, p.points[i])
		}
	}
	if len(keep) < len(p.points) {
		if err := p.keep(keep, replicates); err != nil {
			return err
		}
	}
	entry = p.entrySources()
	onMeans := p.basis == BasisMeans
	all = p.withBounded(p.source)
	p.single = p.single.WithOffsets(split.offsetsOf(all), contrasts(all))
	if p.means != nil {
		var means []int // source of each mean
		if onMeans {
			means = entry
		} else {
			means = make([]int, p.means.Len())
			for i, g := range p.group {
				means[g] = p.source[i]
			}
		}
		all = p.withBounded(means)
		p.means = p.means.WithOffsets(split.offsetsOf(all), contrasts(all))
	}
	if p.sample = p.single; onMeans {
		p.sample = p.means
	}
	return nil
}

// withBounded are the sources of entries and, after them, of the limits.
func (p *prepared) withBounded(source []int) []int {
	return slices.Concat(source, p.bounded)
}

// takesPart reports whether a source bears on the curvature: a single point leaves
// nothing once its offset is fitted, unless limits go with it.
func (split *sourceSplit) takesPart(src int) bool {
	return split.entries[src] > 1 || split.limits[src] > 0
}

// together are the sources of entries, with all that take part in the curvature as one. What
// is left is what offsets are tested against: that of a one-point source fits its point
// whatever the curve, so that it cannot be told from curvature.
func (split *sourceSplit) together(source []int) []int {
	out := slices.Clone(source)
	for i, src := range out {
		if split.takesPart(src) {
			out[i] = len(split.names)
		}
	}
	return out
}

// offsetsOf are the offsets of entries of these sources, in ln k.
func (split *sourceSplit) offsetsOf(source []int) []float64 {
	out := make([]float64, len(source))
	for i, src := range source {
		out[i] = split.offsets[src].Value
	}
	return out
}

// besideRest are the nuisance columns and the limits that the sample has without some of
// its entries. Of a source that has no measured entry left, the limits go too.
func (p *prepared) besideRest(without []int) (columns [][]float64, limits []fit.Limit) {
	s := p.sample
	gone := func(i int) bool { return slices.Contains(without, i) }
	if len(s.Limits) > 0 && s.Spent() > 0 {
		var source []int
		for i, src := range p.entrySources() {
			if !gone(i) {
				source = append(source, src)
			}
		}
		n := len(source)
		for i, src := range p.bounded {
			if slices.Contains(source[:n], src) {
				source, limits = append(source, src), append(limits, s.Limits[i])
			}
		}
		columns = contrasts(source)
		for i := range limits {
			limits[i].Beside = nil
			for _, c := range columns {
				limits[i].Beside = append(limits[i].Beside, c[n+i])
			}
		}
		for j := range columns {
			columns[j] = columns[j][:n:n]
		}
		return columns, limits
	}
	for _, z := range s.Nuisance {
		var column []float64
		for i, v := range z {
			if !gone(i) {
				column = append(column, v)
			}
		}
		columns = append(columns, column)
	}
	return columns, s.Limits
}

// count fills in what each source holds.
func (split *sourceSplit) count(points []dataset.Point, source, entry, bounded []int) {
	n := len(split.names)
	split.points, split.temperatures, split.entries, split.limits = make([]int, n), make([]int, n), make([]int, n), make([]int, n)
	for _, src := range bounded {
		split.limits[src]++
	}
	at := make([][]float64, n)
	for i, src := range source {
		split.points[src]++
		at[src] = append(at[src], points[i].T)
	}
	for _, src := range entry {
		split.entries[src]++
	}
	for src := range n {
		split.temperatures[src] = models.CountTemperatures(at[src])
		if split.entries[src] == 1 && !split.takesPart(src) {
			split.onePoint = append(split.onePoint, src)
		}
	}
}

// keep leaves only some of the points.
func (p *prepared) keep(keep []int, replicates string) error {
	pick := func(v []float64) []float64 {
		out := make([]float64, len(keep))
		for j, i := range keep {
			out[j] = v[i]
		}
		return out
	}
	points, source := make([]dataset.Point, len(keep)), make([]int, len(keep))
	for j, i := range keep {
		points[j], source[j] = p.points[i], p.source[i]
	}
	s := p.single
	var err error
	if p.single, err = fit.NewSample(s.Model, pick(s.T), pick(s.K), pick(s.V)); err != nil {
		return err
	}
	p.points, p.source = points, source
	return p.choose(replicates)
}

// cannot says why curvature and offsets cannot be told apart, "" where they can. entry
// are the sources of the entries, all those of the limits too.
func (split *sourceSplit) cannot(s *fit.Sample, entry, all []int) string {
	split.vif = math.NaN()
	f := split.beside
	switch {
	case f.Nu < 1:
		return "no degree of freedom is left beside the offsets"
	case f.Status != fit.Converged || f.Cov == nil:
		return "the temperatures of the sources do not determine the exponent of T beside the offsets"
	}
	var t []float64
	for i, src := range entry {
		if split.entries[src] > 1 {
			t = append(t, s.T[i])
		}
	}
	if d := models.CountTemperatures(t); d < minTemperatures && s.DistinctT() >= minTemperatures {
		return fmt.Sprintf("sources of more than one point have %s", count(d, "distinct temperature"))
	}
	if len(s.Limits) > 0 {
		// What limits tell of n hangs on where they lie: offsets free and held are compared
		// at the same curve and σ.
		held := fit.Fit(s.WithOffsets(split.offsetsOf(all), nil), models.PowerPrefactor{})
		if held.Status == fit.Converged && held.Cov != nil {
			ratio := held.Sigma / f.Sigma // their degrees of freedom differ
			split.vif = f.Cov[8] / held.Cov[8] * ratio * ratio
		}
		return ""
	}
	w, fitted := make([]float64, s.Len()), split.beside.Fitted
	weigh := func(fitted []float64) []float64 {
		for i, v := range s.V {
			if w[i] = 1 / v; s.Model.InK() {
				w[i] *= math.Exp(2 * fitted[i])
			}
		}
		return w
	}
	with := exponentVarianceBeside(s.WithOffsets(make([]float64, len(all)), contrasts(all)), weigh(fitted))
	if math.IsNaN(with) {
		return "the temperatures of the sources do not determine the exponent of T beside the offsets"
	}
	if s.Model.InK() && split.pooledPower.Usable() {
		weigh(split.pooledPower.Fitted)
	}
	split.vif = with / exponentVarianceBeside(s, w)
	return ""
}

// estimateOffsets reads the offsets off the fit beside them; unknown where it has
// none.
func (split *sourceSplit) estimateOffsets() {
	f, n := split.beside, len(split.names)
	split.offsets = make([]fit.Estimate, n)
	for i := range split.offsets {
		split.offsets[i] = fit.Unknown()
	}
	if f.Status != fit.Converged || f.BesideCov == nil {
		return
	}
	m := n - 1
	for i := range n {
		var value, variance float64
		if i < m {
			value, variance = f.Beside[i], f.BesideCov[i*m+i]
		} else { // they add up to 0
			value, variance = -floats.Sum(f.Beside), floats.Sum(f.BesideCov)
		}
		se := math.Sqrt(variance)
		split.offsets[i] = fit.Estimate{Value: value, StdError: se, Lower: math.NaN(), Upper: math.NaN()}
	}
}

// exponentVarianceBeside is exponentVariance with the nuisance columns of the sample
// projected out too.
func exponentVarianceBeside(s *fit.Sample, w []float64) float64 {
	n := s.Len()
	one, x, l := make([]float64, n), make([]float64, n), make([]float64, n)
	for i, t := range s.T {
		root, z := math.Sqrt(w[i]), (s.TRef-t)/t
		one[i], x[i], l[i] = root, root*z, root*(z-math.Log1p(z))
	}
	basis, _ := extend(nil, one, 0)
	basis, _ = extend(basis, x, 1e-10)
	project(basis, l, nil)
	before := floats.Dot(l, l)
	for _, c := range s.Nuisance {
		column := slices.Clone(c)
		for i := range column {
			column[i] *= math.Sqrt(w[i])
		}
		basis, _ = extend(basis, column, 1e-10)
	}
	project(basis, l, nil)
	left := floats.Dot(l, l)
	if !(left > 1e-16*before) {
		return math.NaN()
	}
	return 1 / left
}

// effectiveWithin is the effective temperature where offsets are fitted beside the
// line: minus the slope of ln T against 1/T within the sources.
func effectiveWithin(s *fit.Sample, w []float64) float64 {
	n := s.Len()
	x, l := make([]float64, n), make([]float64, n)
	var basis [][]float64
	for _, c := range append([][]float64{nil}, s.Nuisance...) {
		column := make([]float64, n)
		for i := range column {
			if column[i] = math.Sqrt(w[i]); c != nil {
				column[i] *= c[i]
			}
		}
		basis, _ = extend(basis, column, 1e-10)
	}
	for i, t := range s.T {
		d := (t - s.TRef) / s.TRef
		x[i], l[i] = -d/t*math.Sqrt(w[i]), math.Log1p(d)*math.Sqrt(w[i])
	}
	project(basis, x, nil)
	project(basis, l, nil)
	return -floats.Dot(x, l) / floats.Dot(x, x)
}

// besideOffsets makes the judge allow for offsets that are estimated anew in every
// resample.
func (j *judge) besideOffsets(a *assessor) {
	if len(j.s.Limits) > 0 {
		return // every refit has offsets of its own, and its RSS tells all
	}
	w := slices.Clone(j.weights)
	if j.s.Model.InK() {
		for i, l := range a.power.Fitted {
			w[i] *= math.Exp(2 * l)
		}
	}
	held := exponentVariance(j.s, w, nil, j.rows)
	j.unscaled = exponentVarianceBeside(j.s, w)
	// Refits in k hold the offsets of power-prefactor: S(n) then rises too fast.
	j.root = math.Sqrt(j.unscaled / held)
}

// sourceScatter is what lies between the sources: the variance of their offsets, of
// which there are so many.
type sourceScatter struct {
	variance float64
	sources  int
}

// sourceScatter is nil where there is one source, or the sources are taken as one.
func (p *prepared) sourceScatter() *sourceScatter {
	if p.sources == nil || p.sources.confounded != "" {
		return nil
	}
	sc := &sourceScatter{sources: len(p.sources.offsets)}
	for _, o := range p.sources.offsets { // their mean is 0
		sc.variance += o.Value * o.Value / float64(sc.sources-1)
	}
	return sc
}

// widen adds to ln k, a mean over S sources, what lies between them:
// u² = s²/S + u_within². s holds the scatter within sources as well, which errs to
// the safe side. The interval is that of Student's t with the degrees of freedom of
// Welch and Satterthwaite (JCGM 100:2008, G.4). A nil receiver adds nothing.
func (sc *sourceScatter) widen(ln fit.Estimate, r *fit.Result, confidence float64) fit.Estimate {
	if sc == nil || math.IsNaN(ln.StdError) {
		return ln
	}
	between, within := sc.variance/float64(sc.sources), ln.StdError*ln.StdError
	u2 := between + within
	ratio := between * between / float64(sc.sources-1)
	if !r.Model.KnownSigma() {
		ratio += within * within / float64(r.Nu)
	}
	h := math.Sqrt(u2)
	ln.StdError = h
	if nu := u2 * u2 / ratio; nu < 1e6 {
		h *= criticalValue(confidence, max(1, int(nu)), false)
	} else {
		h *= criticalValue(confidence, 0, true)
	}
	ln.Lower, ln.Upper = ln.Value-h, ln.Value+h
	return ln
}

// scatterIncluded is said of uncertainties that hold what lies between the sources.
const scatterIncluded = "their scatter included"

// note is said beside k at the reference temperature.
func (sc *sourceScatter) note() string {
	if sc == nil {
		return ""
	}
	return fmt.Sprintf("mean over %d sources, %s", sc.sources, scatterIncluded)
}

// compareSources says what offsets between the sources change.
func (a *assessor) compareSources() {
	split := a.data.sources
	if split == nil {
		a.findAsOne()
		return
	}
	b := &BetweenSources{Confounded: split.confounded != "", Why: split.confounded,
		VIF: Real(split.vif), Scatter: Real(math.NaN())}
	a.between = b
	pooled := a.pooledSources()
	b.Pooled = pooled
	b.Offset = a.sourceTest(a.exponent, a.verdict.State)
	crit := math.NaN()
	if split.beside.Nu > 0 {
		crit = criticalValue(a.opt.Confidence, split.beside.Nu, a.model.KnownSigma())
	}
	for i, name := range split.names {
		o := split.offsets[i]
		if b.Confounded {
			o = fit.Unknown()
		}
		o.Lower, o.Upper = o.Value-crit*o.StdError, o.Value+crit*o.StdError
		b.Sources = append(b.Sources, SourceOffset{name, split.points[i], split.temperatures[i], NewEstimate(o),
			b.Confounded || split.takesPart(i)})
	}
	b.WhyUntested = split.confounded
	many := count(len(split.names), "source")
	if b.Confounded {
		nan := math.NaN()
		b.Offset = ExponentSources{Untestable, NewEstimate(fit.Unknown()), NewEstimate(fit.Unknown()), Real(nan), Real(nan), 0}
		b.Said = "sources-confounded"
		a.find(b.Said, fmt.Sprintf("%s are taken as one: %s", many, split.confounded), nil, nil)
		a.verdict.Sentence += " The sources are taken as one: offsets between them cannot be told from curvature here."
		return
	}
	b.Scatter = Real(math.Sqrt(a.data.sourceScatter().variance))
	b.FTest, b.WhyUntested = a.offsetTest()
	b.Said = a.whatOffsetsChange(b, many)
	if b.VIF > partlyVIF {
		a.find("sources-confounded-partly", fmt.Sprintf("with offsets the variance of n is %.3g times what it is without", split.vif), nil,
			map[string]Real{"vif": b.VIF})
	}
	for _, src := range split.onePoint {
		var rows []int
		for _, p := range split.aside {
			if p.Source == split.names[src] {
				rows = append(rows, p.Row)
			}
		}
		a.find("one-point-source", fmt.Sprintf("%s has %s at one temperature, and takes no part in the curvature",
			sourceName(split.names[src]), count(split.points[src], "point")), rows, nil)
	}
}

func sourceName(name string) string {
	if name == "" {
		return "the source without a name"
	}
	return name
}

// sourceTest is one way of testing for the document.
func (a *assessor) sourceTest(t ExponentTest, state State) ExponentSources {
	return ExponentSources{state, NewEstimate(t.Exponent), NewEstimate(scaled(t.Exponent, a.rule.ChangePerUnit)),
		Real(t.PValue), Real(t.PBand), t.Nu}
}

// pooledSources is the exponent test of the sources taken as one.
func (a *assessor) pooledSources() ExponentSources {
	split := a.data.sources
	t := a.testExponent(split.pooled, split.pooledPower)
	state := Untestable
	if ok, _, _ := Testable(split.pooled, split.pooledPower); ok {
		rule := a.rule
		if line := fit.Fit(split.pooled, models.Straight()); line.Usable() {
			rule.ToleranceKJ = a.tolerance.Apply(line.P[1] / 1000)
		}
		low, high := ends(t.Exponent)
		state = rule.Judge(low, high, a.secondRun.found())
	}
	return a.sourceTest(t, state)
}

// TestName names the test of the offsets; limits tells whether limits take part.
func (b *BetweenSources) TestName(limits bool) string {
	switch {
	case limits:
		return "likelihood-ratio test"
	case b.FTest != nil && !b.FTest.DF2.Known():
		return "χ² test" // σ is known
	}
	return "F test"
}

// offsetTest is the F test of the offsets in the power-prefactor curve. With limits RSS
// is what stands for the likelihood, so that the statistic is that of the likelihood
// ratio W, ν (e^{W/n} - 1)/(S - 1) with n measured entries, or W/(S - 1) where σ is
// known: exactly F without limits, approximately with them. Offsets of one-point
// sources take no part: see together. Where there is no test, why says so.
func (a *assessor) offsetTest() (f *FTest, why string) {
	split := a.data.sources
	without, with := split.shared, split.beside
	f = &FTest{DF1: len(split.names) - len(split.onePoint) - 1, DF2: Real(math.NaN())}
	switch {
	case f.DF1 < 1:
		return nil, "an offset of one point fits it to any curve"
	case !without.Usable():
		return nil, "power-prefactor could not be fitted without the offsets"
	}
	d1, d2 := float64(f.DF1), float64(with.Nu)
	saved := math.Max(0, without.RSS-with.RSS) / d1
	if a.model.KnownSigma() {
		f.Statistic, f.PValue = Real(saved), Real(chi2Tail(saved*d1, f.DF1))
		return f, ""
	}
	if noScatter(split.pooled, with.RSS) {
		return nil, "with the offsets no scatter is left to test them against"
	}
	f.DF2 = Real(d2)
	f.Statistic = Real(saved / (with.RSS / d2))
	f.PValue = Real(pF(float64(f.Statistic), d1, d2))
	return f, ""
}

// shrinks reports whether the exponent n with offsets is less than half of that without
// those that are tested.
func (split *sourceSplit) shrinks(n float64) bool {
	return split.shared.P != nil && math.Abs(n) < offsetShrinks*math.Abs(split.shared.P[2])
}

// whatOffsetsChange raises the finding that compares both ways, adds to the verdict's
// sentence what changed, and returns the finding's code.
func (a *assessor) whatOffsetsChange(b *BetweenSources, many string) string {
	pooled, offset := b.Pooled, b.Offset
	facts := fmt.Sprintf("%s as one, %s with an offset for each", pooled.State, offset.State)
	p := math.NaN()
	if b.FTest != nil {
		p = float64(b.FTest.PValue)
	}
	if !math.IsNaN(p) {
		facts += fmt.Sprintf("; %s of the offsets %s", b.TestName(len(a.data.sample.Limits) > 0), pIs(p))
	}
	values := map[string]Real{"n_pooled": pooled.Exponent.Value, "n_offsets": offset.Exponent.Value, "f_p_value": Real(p)}
	shrinks := a.data.sources.shrinks(float64(offset.Exponent.Value))
	code, says := "sources-compared", ""
	switch {
	// Partly confounded, offsets may stand for curvature of another shape than that of n.
	case p < offsetLevel && shrinks && !(pooled.State.Curved() && b.VIF > partlyVIF):
		code, says = "between-source-offset", "look curved: that may be an offset between them."
		switch {
		case !pooled.State.Curved():
			says = "scatter more: there may be an offset between them."
		case offset.State.Curved():
			says = "look more curved: the rest may be an offset between them."
		}
	case pooled.State.Curved() && !offset.State.Curved():
		code, says = "offsets-leave-open", "look curved; with offsets allowed these data can no longer tell."
	case offset.State.Curved() && !pooled.State.Curved() && pooled.State != Untestable:
		code, says = "offsets-show-curvature", "do not show it."
	case offset.State != pooled.State && pooled.State != Untestable:
		says = fmt.Sprintf("give the verdict %s.", pooled.State)
	}
	a.find(code, many+": "+facts, nil, values)
	if says != "" {
		a.verdict.Sentence += fmt.Sprintf(" Taken as one, the %s %s", many, says)
	}
	return code
}
