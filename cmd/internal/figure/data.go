package figure

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// kilo turns J/mol into kJ/mol.
const kilo = 1000

// samples is the number of temperatures at which a curve is drawn.
const samples = 161

// mostLines is the number of curves of an Arrhenius plot: more cannot be told
// apart where they lie on the same points.
const mostLines = 3

// Point is one row of the data as plotted. Unknown numbers are NaN.
type Point struct {
	Row         int
	T           float64 // K
	X, Y        float64
	Low, High   float64 // ends of the error bar; Low is -Inf where u(k) reaches k
	Residual    float64 // ln k minus the straight line
	ResidualLow float64
	ResidualTop float64
	Source      int    // index in Sources
	Used        bool   // false: left out, drawn hollow
	Limit       string // "<", ">" or "": drawn hollow, with an arrow into what it allows
}

// measured reports whether the point took part with a measured k.
func (p Point) measured() bool { return p.Used && p.Limit == "" }

// Mean is one temperature mean where the verdict rests on means.
type Mean struct{ X, Y, Residual float64 }

// Line is one curve with its pointwise confidence band at temperatures that are
// evenly spaced in X. Lower and Upper are nil where the band is not known.
type Line struct {
	Curve        string
	Recommended  bool
	T            []float64 // K
	X            []float64
	Y            []float64
	Lower, Upper []float64
}

// Arrhenius is what an Arrhenius plot shows.
type Arrhenius struct {
	Points  []Point
	Means   []Mean
	Sources []string
	Lines   []Line // the recommended curve first
	// Differences holds the same curves as ln k minus the straight line, whatever
	// the logarithm of Lines. It is empty where there is no straight line.
	Differences []Line
	// Offsets says that the sources have an offset each, and that the curves are their
	// mean; OfRepeats that every row is itself the mean of n repeats.
	Offsets, OfRepeats bool
	// NotShown counts the rows that have no positive T and k.
	NotShown   int
	Confidence float64
}

// NewArrhenius collects the points, curves and residuals of an assessment. The
// error says why there is nothing to draw.
func NewArrhenius(a *diagnostics.Assessment, opt Options) (*Arrhenius, error) {
	x, y, err := opt.axes()
	if err != nil {
		return nil, err
	}
	if a == nil {
		return nil, fmt.Errorf("figure: there is no assessment to draw")
	}
	d := &Arrhenius{Confidence: confidence(a), Offsets: offsets(a), OfRepeats: ofRepeats(a)}
	straight := usable(a, straightLine)
	for _, row := range a.Data {
		if !(row.T > 0) || !(row.K > 0) || !row.T.Known() || !row.K.Known() {
			d.NotShown++
			continue
		}
		d.Points = append(d.Points, d.point(row, a.Settings.ErrorModel, straight, x, y))
	}
	if len(d.Points) == 0 {
		return nil, fmt.Errorf("figure: none of the %d rows has a positive T and k to draw", len(a.Data))
	}
	if s := a.Sample; s != nil && s.Len() < d.used() {
		for i, lnK := range s.Y {
			if !math.IsNaN(lnK) {
				d.Means = append(d.Means, Mean{x.scale / s.T[i], lnK / y.unit, residual(straight, s.T[i], lnK)})
			}
		}
	}
	if a.Sample == nil {
		return d, nil
	}
	t := grid(a.Sample)
	var base []float64
	if straight != nil {
		base = make([]float64, len(t))
		straight.Curve.LnK(straight.TRef, t, straight.P, base, nil)
	}
	for _, name := range chosen(a, mostLines) {
		lnK := newLine(a.Fits[name], t, d.Confidence, models.Curve.LnK)
		lnK.Recommended = name == a.Verdict.RecommendedCurve
		for i, ti := range t {
			lnK.X[i] = x.scale / ti
		}
		d.Lines = append(d.Lines, lnK.mapped(func(_ int, v float64) float64 { return v / y.unit }))
		if base != nil {
			d.Differences = append(d.Differences, lnK.mapped(func(i int, v float64) float64 { return v - base[i] }))
		}
	}
	return d, nil
}

// offsets reports whether the curves stand beside an offset for each source.
func offsets(a *diagnostics.Assessment) bool {
	return a.BetweenSources != nil && !a.BetweenSources.Confounded
}

// ofRepeats reports whether a number of repeats stands beside each rate constant.
func ofRepeats(a *diagnostics.Assessment) bool {
	return slices.ContainsFunc(a.Columns, func(c diagnostics.Column) bool { return c.Role == string(dataset.RoleRepeats) })
}

// used counts the points that took part with a measured k.
func (d *Arrhenius) used() (n int) {
	for _, p := range d.Points {
		if p.measured() {
			n++
		}
	}
	return n
}

// point turns a row with positive T and k into a point, and notes its source.
func (d *Arrhenius) point(row diagnostics.Datum, model fit.ErrorModel, straight *fit.Result, x xAxis, y yAxis) Point {
	t, k := float64(row.T), float64(row.K)
	lnK := math.Log(k)
	p := Point{
		Row: row.Row, T: t, X: x.scale / t, Y: lnK / y.unit,
		Low: math.NaN(), High: math.NaN(), ResidualLow: math.NaN(), ResidualTop: math.NaN(),
		Residual: residual(straight, t, lnK),
		Used:     row.Used, Limit: row.Limit,
	}
	if p.Source = slices.Index(d.Sources, row.Source); p.Source < 0 {
		p.Source = len(d.Sources)
		d.Sources = append(d.Sources, row.Source)
	}
	if u := float64(row.UK) / k; u > 0 && !math.IsInf(u, 0) && row.Limit == "" {
		// u(ln k) = u(k)/k is what the models of ln k use; where errors are
		// additive in k the bar is k ± u(k).
		low, high := -u, u
		if model.InK() {
			low, high = math.Inf(-1), math.Log1p(u)
			if u < 1 {
				low = math.Log1p(-u)
			}
		}
		p.Low, p.High = (lnK+low)/y.unit, (lnK+high)/y.unit
		p.ResidualLow, p.ResidualTop = p.Residual+low, p.Residual+high
	}
	return p
}

// residual is ln k minus the fitted straight line, NaN without one.
func residual(straight *fit.Result, t, lnK float64) float64 {
	if straight == nil {
		return math.NaN()
	}
	f := []float64{0}
	straight.Curve.LnK(straight.TRef, []float64{t}, straight.P, f, nil)
	return lnK - f[0]
}

// confidence is the level of the bands; 0.95 unless the assessment says otherwise.
func confidence(a *diagnostics.Assessment) float64 {
	if c := a.Settings.Confidence; c > 0 && c < 1 {
		return c
	}
	return 0.95
}

// usable returns the fit of a curve if its values can be drawn, else nil.
func usable(a *diagnostics.Assessment, curve string) *fit.Result {
	r := a.Fits[curve]
	if r == nil || !r.Usable() || len(r.P) != r.Params() {
		return nil
	}
	for _, p := range r.P {
		if math.IsNaN(p) || math.IsInf(p, 0) {
			return nil
		}
	}
	return r
}

// The two curves of the exponent test, of which figures show more than of others.
var (
	straightLine = models.Straight().Info().Name
	powerOfT     = models.PowerPrefactor{}.Info().Name
)

// chosen names the curves to draw: the recommended one first, then the straight
// line from which residuals are taken, then the best of each further family in
// order of rank. Members of one family lie on top of each other.
func chosen(a *diagnostics.Assessment, most int) []string {
	var names, families []string
	take := func(name string) {
		if r := usable(a, name); r != nil && len(names) < most && !slices.Contains(names, name) {
			names = append(names, name)
			families = append(families, r.Curve.Info().Family)
		}
	}
	take(a.Verdict.RecommendedCurve)
	take(straightLine)
	for _, r := range a.Ranking {
		if !slices.Contains(families, r.Family) {
			take(r.Curve)
		}
	}
	return names
}

// grid gives temperatures in K from the hottest to the coldest that took part,
// evenly spaced in 1/T.
func grid(s *fit.Sample) []float64 {
	low, high := s.Range()
	t := make([]float64, samples)
	for i := range t {
		f := float64(i) / (samples - 1)
		t[i] = 1 / ((1-f)/high + f/low)
	}
	return t
}

// newLine evaluates one of the functions of a curve, with the band
// f ± q·sqrt(jᵀ Cov j): q from Student's t with ν degrees of freedom, from the
// normal distribution where σ is known.
func newLine(r *fit.Result, t []float64, level float64, eval func(models.Curve, float64, []float64, []float64, []float64, []float64)) Line {
	m, p := len(t), r.Params()
	l := Line{Curve: r.Curve.Info().Name, T: t, X: make([]float64, m), Y: make([]float64, m)}
	jac := make([]float64, m*p)
	eval(r.Curve, r.TRef, t, r.P, l.Y, jac)
	q := quantile(r, level)
	if len(r.Cov) != p*p || math.IsNaN(q) {
		return l
	}
	cov := mat.NewDense(p, p, r.Cov)
	lower, upper := make([]float64, m), make([]float64, m)
	for i, f := range l.Y {
		j := mat.NewVecDense(p, jac[i*p:(i+1)*p])
		h := q * math.Sqrt(math.Max(0, mat.Inner(j, cov, j)))
		if math.IsNaN(h) || math.IsInf(h, 0) {
			return l
		}
		lower[i], upper[i] = f-h, f+h
	}
	l.Lower, l.Upper = lower, upper
	return l
}

// quantile is the two-sided quantile of a fit, NaN without degrees of freedom.
func quantile(r *fit.Result, level float64) float64 {
	p := (1 + level) / 2
	switch {
	case r.Model.KnownSigma():
		return distuv.UnitNormal.Quantile(p)
	case r.Nu > 0:
		return fit.StudentQuantile(p, r.Nu)
	}
	return math.NaN()
}

// mapped returns a line whose values and band went through f.
func (l Line) mapped(f func(i int, v float64) float64) Line {
	each := func(vs []float64) []float64 {
		if vs == nil {
			return nil
		}
		out := make([]float64, len(vs))
		for i, v := range vs {
			out[i] = f(i, v)
		}
		return out
	}
	l.Y, l.Lower, l.Upper = each(l.Y), each(l.Lower), each(l.Upper)
	return l
}

// scale is the unit in which energies are drawn: what a kJ/mol is in it, what the
// symbol E is divided by to have it, and how it is written.
type scale struct {
	perKJ           float64
	per, unit, axis string
}

// scaleOf is the energy unit of an assessment.
func scaleOf(a *diagnostics.Assessment) scale {
	u := diagnostics.UnitOfEnergy(a.Settings.EnergyUnit)
	axis := map[string]string{"kJ/mol": "(kJ mol^{−1})", "kcal/mol": "(kcal mol^{−1})", "cm^-1": "cm^{−1}"}[u.Name]
	if axis == "" {
		axis = u.Name
	}
	return scale{u.PerKJ, u.Per, u.Name, axis}
}

// label is an axis title such as E/(kJ mol⁻¹), or (E/R)/K.
func (s scale) label(symbol string) string {
	if s.per != "" {
		symbol = "(" + symbol + "/*" + strings.TrimPrefix(s.per, "/") + "*)"
	}
	return symbol + "/" + s.axis
}

// Energy is what the figure of the local activation energy shows: X in K, Y in the
// energy unit of the assessment.
type Energy struct {
	scale scale
	Lines []Line
	// TEff is the temperature whose E_loc the straight line estimates without
	// bias, and E the straight line's E; NaN where unknown.
	TEff, E float64
	// Between holds E between neighbouring temperatures with bars of one standard
	// uncertainty.
	Between []Point
	// OfMeans says that those are between means of several points, Offsets that they
	// and the curves stand beside an offset for each source.
	OfMeans, Offsets bool
	// Wedge is the region of an E_loc that is linear in T, passes through
	// (TEff, E) and changes by no more than Tolerance over the measured
	// range: its half-height at T is Tolerance |T - TEff|/(T_max - T_min). It is
	// nil unless the verdict is straight-within.
	Wedge      []Wedge
	Tolerance  float64
	Confidence float64
}

// Wedge is one end of the tolerance region.
type Wedge struct{ T, Lower, Upper float64 }

// NewEnergy collects E_loc(T) of the straight line and of the recommended curve,
// or of power-prefactor where the straight line is recommended. It is nil where
// neither can be drawn.
func NewEnergy(a *diagnostics.Assessment) *Energy {
	if a == nil || a.Sample == nil {
		return nil
	}
	second := a.Verdict.RecommendedCurve
	if second == "" || second == straightLine {
		second = powerOfT
	}
	sc := scaleOf(a)
	d := &Energy{scale: sc, TEff: float64(a.Dataset.TEff), E: math.NaN(), Tolerance: sc.perKJ * float64(a.Curvature.ToleranceKJ), Confidence: confidence(a)}
	t := grid(a.Sample)
	for _, name := range []string{straightLine, second} {
		r := usable(a, name)
		if r == nil {
			continue
		}
		l := newLine(r, t, d.Confidence, models.Curve.ELoc).mapped(func(_ int, v float64) float64 { return v / kilo * sc.perKJ })
		l.Recommended = name == a.Verdict.RecommendedCurve
		copy(l.X, t)
		d.Lines = append(d.Lines, l)
		if name == straightLine {
			d.E = l.Y[0]
		}
	}
	if len(d.Lines) == 0 {
		return nil
	}
	d.Between, d.OfMeans, d.Offsets = between(a, sc), ofMeans(a), offsets(a)
	low, high := a.Sample.Range()
	if a.Verdict.State == diagnostics.StraightWithin && d.Tolerance > 0 && d.TEff >= low && d.TEff <= high && !math.IsNaN(d.E) {
		for _, t := range []float64{low, d.TEff, high} {
			h := d.Tolerance * math.Abs(t-d.TEff) / (high - low)
			d.Wedge = append(d.Wedge, Wedge{t, d.E - h, d.E + h})
		}
	}
	return d
}

// Change is what the figure of the change of E shows, in the energy unit of the
// assessment.
type Change struct {
	scale scale
	// Edges holds one more edge than there are Counts.
	Edges  []float64
	Counts []int
	// Beyond counts the resamples outside the edges.
	Beyond    int
	Resamples int
	Scheme    string
	Generator string // the curve that generated the resamples
	// Told is the curve whose change the verdict states where that is another: the interval
	// here is that of the test; else "".
	Told string
	// Reported is the interval of the assessment; an open end is infinite.
	Estimate, Lower, Upper float64
	Tolerance              float64 // NaN if none
	Confidence             float64
}

// mostBins keeps a few wild resamples from making every bar invisible: where the
// rule asks for more bins the picture shows the central 99.8 %.
const mostBins = 120

// NewChange collects the bootstrap distribution of ΔE. It is nil without a
// bootstrap.
func NewChange(a *diagnostics.Assessment) *Change {
	if a == nil {
		return nil
	}
	sc := scaleOf(a)
	var vs []float64
	for _, v := range a.ChangeOfE {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			vs = append(vs, sc.perKJ*v)
		}
	}
	if len(vs) == 0 {
		return nil
	}
	slices.Sort(vs)
	e := a.Curvature.EChange.Times(sc.perKJ)
	d := &Change{
		scale:     sc,
		Resamples: len(a.ChangeOfE), Generator: powerOfT, Scheme: a.Settings.Scheme,
		Estimate: float64(e.Value), Lower: float64(e.Lower), Upper: float64(e.Upper),
		Tolerance: sc.perKJ * float64(a.Curvature.ToleranceKJ), Confidence: confidence(a),
	}
	if told := a.Verdict.EChangeCurve; told != "" && told != powerOfT {
		d.Told = told
	}
	if a.Bootstrap != nil && a.Bootstrap.Scheme != "" {
		d.Scheme = a.Bootstrap.Scheme
	}
	if e.Open != nil {
		if *e.Open == "lower" || *e.Open == "both" {
			d.Lower = math.Inf(-1)
		}
		if *e.Open == "upper" || *e.Open == "both" {
			d.Upper = math.Inf(1)
		}
	}
	d.Edges = binEdges(vs)
	d.Counts = make([]int, len(d.Edges)-1)
	last := len(d.Counts) - 1
	for _, v := range vs {
		// The last bin holds its upper edge.
		i, found := slices.BinarySearch(d.Edges, v)
		if !found {
			i--
		}
		if i == last+1 && v == d.Edges[i] {
			i = last
		}
		if i < 0 || i > last {
			continue
		}
		d.Counts[i]++
	}
	d.Beyond = d.Resamples
	for _, c := range d.Counts {
		d.Beyond -= c
	}
	return d
}

// binEdges gives the edges of a histogram of sorted values with bins of width
// 2 IQR n^(-1/3) (D. Freedman and P. Diaconis, Z. Wahrscheinlichkeitstheorie verw.
// Gebiete 57 (1981) 453). Quartiles are gonum's LinInterp.
func binEdges(sorted []float64) []float64 {
	at := func(p float64) float64 { return stat.Quantile(p, stat.LinInterp, sorted, nil) }
	low, high := sorted[0], sorted[len(sorted)-1]
	width := 2 * (at(0.75) - at(0.25)) / math.Cbrt(float64(len(sorted)))
	if width > 0 && (high-low)/width > mostBins {
		low, high = at(0.001), at(0.999)
	}
	bins := 1
	if width > 0 && high > low {
		bins = int(math.Min(mostBins, math.Ceil((high-low)/width)))
	}
	if !(high > low) {
		// All values are the same: one bar about them.
		half := math.Max(0.5, 1e-9*math.Abs(low))
		low, high = low-half, high+half
	}
	edges := make([]float64, bins+1)
	for i := range edges {
		f := float64(i) / float64(bins)
		edges[i] = (1-f)*low + f*high
	}
	return edges
}
