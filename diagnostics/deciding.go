package diagnostics

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"onebarrier/models"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
)

// Levels of leaving one out (METHODS §5).
const (
	decidingShrinks = 0.5  // |n| without the entry over |n| with it
	outlierLevel    = 0.05 // of the largest studentised residual, after Bonferroni
	// mostRefits is the most fits of their own, which leaving out takes with errors in k
	// and with limits. Of more entries, those are left out that move n most.
	mostRefits = 100
	// mostListed is the most entries that the document lists; of more, those alone
	// that decide or are outliers.
	mostListed = 1000
)

// What is left out.
const (
	leftTemperature = "temperature" // all that was measured at one temperature
	leftMean        = "mean"        // the points of one source at a temperature of several
	leftPoint       = "point"
)

// Influence says how much one temperature or point bears on the verdict. Leverage,
// Cook's distance and the studentised residual are those in Curve: power-prefactor,
// which holds every straight line with a usual prefactor, or the recommended curve where
// that bends more freely. They are unknown for what is no entry of that fit by itself.
type Influence struct {
	LeftOut     string `json:"left_out"` // temperature, mean or point
	Curve       string `json:"curve"`
	Rows        []int  `json:"rows"`
	T           Real   `json:"t_k"`
	Leverage    Real   `json:"leverage"`
	Cook        Real   `json:"cook"`
	Studentised Real   `json:"studentised"`
	OutlierP    Real   `json:"outlier_p"` // of the studentised residual, times the number of entries
	Exponent    Real   `json:"exponent_without"`
	StdError    Real   `json:"exponent_without_std_error"`
	PValue      Real   `json:"p_without"` // of n = 0
	// State is the verdict of the exponent test alone; the second-barrier test is not
	// repeated, and stands as it is for all the data.
	State    State `json:"state_without"`
	Deciding bool  `json:"deciding"`
	// PredictionError is what was measured less what power-prefactor, the curve of the
	// exponent test, predicts without it, in
	// ln k, or in k where errors are in k; of single entries.
	PredictionError Real   `json:"prediction_error"`
	Why             string `json:"why_not"` // why n without it is unknown, "" where it is known

	points   []int   // of the prepared data
	residual float64 // from the curve
	fits     bool    // the curve passes its adequacy test, with this entry or without
}

// InfluenceRange is what n and its p-value become, at least and at most, without one
// temperature or point; unknown where nothing can be left out.
type InfluenceRange struct {
	Examined     int  `json:"examined"`     // temperatures and points left out, one at a time
	NotExamined  int  `json:"not_examined"` // of which n is not known without them
	ExponentLow  Real `json:"exponent_low"`
	ExponentHigh Real `json:"exponent_high"`
	PLow         Real `json:"p_low"`
	PHigh        Real `json:"p_high"`
}

// omission is the exponent test without something.
type omission struct {
	n, se, p  float64
	predicted float64 // prediction error of the entry left out
	state     State
	testable  bool
	why       string
}

// Why n is not known without something.
const (
	whyNotExamined  = "not examined: others move n more"
	whyUndetermined = "the rest do not determine n"
)

// exponentRow is how n̂ of power-prefactor is made of the entries of a sample, beside
// its nuisance columns: n̂ = Σ c_i y_i, each entry counting with its own residual.
// With errors in k it is that of the fit linearised about its estimates.
type exponentRow struct {
	s        *fit.Sample
	root     []float64 // square roots of the weights of ln k
	c        []float64
	leverage []float64
	unscaled float64     // variance of n̂ in units of σ²
	columns  [][]float64 // orthonormal: what the curve and the nuisance columns span

	offset, x []float64
	store     [][]float64
}

// newExponentRow gives the row of n̂ for the weights root_i² of ln k, nil where the
// sample does not determine n̂.
func newExponentRow(s *fit.Sample, root []float64) *exponentRow {
	n := s.Len()
	e := &exponentRow{s: s, root: root, c: make([]float64, n), leverage: make([]float64, n),
		offset: make([]float64, n), x: make([]float64, 3*n)}
	for range 3 + len(s.Nuisance) {
		e.store = append(e.store, make([]float64, n))
	}
	if !e.at(s.T) {
		return nil
	}
	return e
}

// at makes it the row of n̂ for other temperatures t of the same entries, in K. It
// reports whether they determine n̂.
func (e *exponentRow) at(t []float64) bool {
	models.PowerPrefactor{}.Columns(e.s.TRef, t, e.offset, e.x)
	e.columns = e.columns[:0]
	add := func(at func(i int) float64, tol float64) (added bool) {
		v := e.store[len(e.columns)]
		for i := range v {
			v[i] = e.root[i] * at(i)
		}
		e.columns, added = extend(e.columns, v, tol)
		return added
	}
	ok := add(func(int) float64 { return 1 }, 0) && add(func(i int) float64 { return e.x[3*i+1] }, 1e-10)
	for _, z := range e.s.Nuisance {
		ok = ok && add(func(i int) float64 { return z[i] }, 1e-10)
	}
	if !ok {
		return false
	}
	bend := e.store[len(e.columns)]
	for i := range bend {
		bend[i] = e.root[i] * e.x[3*i+2]
	}
	before := floats.Norm(bend, 2)
	project(e.columns, bend, nil)
	length := floats.Norm(bend, 2)
	if !(length > 1e-10*before) {
		return false
	}
	floats.Scale(1/length, bend)
	e.columns = append(e.columns, bend)
	e.unscaled = 1 / (length * length)
	for i, v := range bend {
		e.c[i], e.leverage[i] = e.root[i]*v/length, 0
	}
	for _, q := range e.columns {
		for i, v := range q {
			e.leverage[i] += v * v
		}
	}
	return true
}

// estimate gives n̂ and the weighted RSS of y in ln k. scratch has the length of y.
func (e *exponentRow) estimate(y, scratch []float64) (n, rss float64) {
	// From the mean on, so that a large ln k does not take digits.
	var mean float64
	for _, v := range y {
		mean += v / float64(len(y))
	}
	for i, v := range y {
		scratch[i] = e.root[i] * (v - mean)
		n += e.c[i] * (v - mean)
	}
	project(e.columns, scratch, nil)
	return n, floats.Dot(scratch, scratch)
}

// roots are the square roots of the weights of ln k: 1/V, or k²/V with the fitted k
// where errors are in k.
func roots(s *fit.Sample, fitted []float64) []float64 {
	out := make([]float64, s.Len())
	for i, v := range s.V {
		if out[i] = 1 / math.Sqrt(v); s.Model.InK() {
			out[i] *= math.Exp(fitted[i])
		}
	}
	return out
}

// exponentError is the standard error of n̂ from RSS, ν and its unscaled variance; no
// smaller than rounding error makes it.
func exponentError(s *fit.Sample, rss, unscaled float64, nu int) float64 {
	if s.Model.KnownSigma() {
		return math.Sqrt(unscaled)
	}
	if noScatter(s, rss) {
		rss = math.Max(rss, rssFloor(s)*float64(nu)/float64(s.Len()))
	}
	return math.Sqrt(unscaled * rss / float64(nu))
}

// leaving is what is left out: entries of the sample, or single points of one.
type leaving struct {
	kind    string
	entries []int // the sample's
	point   int   // of the data; -1 unless it is one of several behind an entry
}

// leavings goes through what can be left out: each entry, each temperature of several
// entries, and each of several points behind one entry. What it yields is good until
// the next: of a million repeats no list is made.
func (p *prepared) leavings(yield func(leaving) bool) {
	s := p.sample
	_, at := models.NumberTemperatures(s.T)
	entries := make([]int, s.Len())
	for i := range entries {
		entries[i] = i
	}
	for i := 0; i < s.Len(); {
		j := i + 1
		for j < s.Len() && at[j] == at[i] {
			j++
		}
		kind := leftTemperature
		if j-i > 1 {
			if kind = leftMean; p.basis == BasisPoints {
				kind = leftPoint
			}
		}
		for e := i; e < j; e++ {
			if !yield(leaving{kind, entries[e : e+1], -1}) {
				return
			}
		}
		if j-i > 1 && !yield(leaving{leftTemperature, entries[i:j], -1}) {
			return
		}
		i = j
	}
	if p.basis != BasisMeans {
		return
	}
	for j, g := range p.group {
		alone := (j == 0 || p.group[j-1] != g) && (j == len(p.group)-1 || p.group[j+1] != g)
		if !alone && !yield(leaving{leftPoint, entries[g : g+1], j}) {
			return
		}
	}
}

// pointsOf are the points that leaving l out takes away. Those behind one entry lie
// side by side.
func (p *prepared) pointsOf(l leaving) []int {
	switch {
	case l.point >= 0:
		return []int{l.point}
	case p.basis == BasisPoints:
		return l.entries
	}
	var out []int
	for _, e := range l.entries {
		for j, _ := slices.BinarySearch(p.group, e); j < len(p.group) && p.group[j] == e; j++ {
			out = append(out, j)
		}
	}
	return out
}

// omitter repeats the exponent test without one temperature or point: in ln k in
// closed form, see remove; with errors in k and with limits by a fit of the rest.
type omitter struct {
	a        *assessor
	s        *fit.Sample
	measured *fit.Result // power-prefactor on the measured entries
	row      *exponentRow
	line     lineRow
	near     *nearPower // with errors in k and no limits
	whole    State      // the verdict on all
	second   bool       // the second-barrier test finds something: it is not repeated
	closed   bool       // all is left out in closed form

	temps               int
	low, high           float64 // range of T, K
	aboveLow, belowHigh float64 // the same without its ends

	gram, z []float64 // scratch of remove
	fits    int       // of their own, that leaving out took
}

// lineRow is how E of the straight line is made of the entries: orthonormal columns, the
// last of them what is left of -1/(RT), of this length before.
type lineRow struct {
	columns [][]float64
	length  float64
}

// newOmitter prepares leaving out; nil where there is no exponent test.
func newOmitter(a *assessor, state State, second bool) *omitter {
	s := a.data.sample
	if a.untestable != "" || a.power.Status != fit.Converged {
		return nil
	}
	o := &omitter{a: a, s: s, second: second, whole: state, measured: a.power.Measured()}
	root := roots(s, o.measured.Fitted)
	if o.row = newExponentRow(s, root); o.row == nil {
		return nil
	}
	p := len(o.row.columns)
	o.gram, o.z = make([]float64, p*p), make([]float64, p)
	o.closed = !s.Model.InK() && len(s.Limits) == 0
	switch {
	case o.closed:
		o.line = newLineRow(s, root)
	case len(s.Limits) == 0:
		o.near = newNearPower(s, a.power.TRef, a.power.P, a.power.Beside)
	}
	o.measureRange()
	return o
}

// measureRange finds the range of T and what it becomes without its ends.
func (o *omitter) measureRange() {
	t := slices.Sorted(slices.Values(o.s.T))
	_, at := models.NumberTemperatures(t)
	o.low, o.high = t[0], t[len(t)-1]
	o.temps = at[len(t)-1] + 1
	first := slices.IndexFunc(at, func(g int) bool { return g > 0 })
	last := slices.Index(at, o.temps-1) - 1
	if first > 0 && last >= 0 {
		o.aboveLow, o.belowHigh = t[first], t[last]
	}
}

// newLineRow is newExponentRow for E of the straight line, in J/mol.
func newLineRow(s *fit.Sample, root []float64) lineRow {
	basis, _ := extend(nil, slices.Clone(root), 0)
	for _, z := range s.Nuisance {
		v := slices.Clone(root)
		floats.Mul(v, z)
		basis, _ = extend(basis, v, 1e-10)
	}
	x := make([]float64, s.Len())
	for i, t := range s.T {
		x[i] = root[i] * (t - s.TRef) / (models.GasConstant * t * s.TRef)
	}
	project(basis, x, nil)
	length := floats.Norm(x, 2)
	floats.Scale(1/length, x)
	return lineRow{append(basis, x), length}
}

// removal is what leaving entries out does to a linear fit.
type removal struct {
	shift  float64 // what the coefficient along the last column loses
	growth float64 // of its variance, but for σ²
	saved  float64 // what RSS loses
}

// remove leaves l out of a fit r that is linear in its parameters, or linearised, with
// weighted orthonormal columns q. With the rows Q of what goes, weighted residuals e,
// G = 1 - QᵀQ = LLᵀ and z = L⁻¹Qᵀe,
//
//	shift = z_p/L_pp,  growth = 1/L_pp²,  saved = e·e + z·z
//
// (J. Sherman, W. J. Morrison, Ann. Math. Stat. 21 (1950) 124, for several rows at once;
// R. D. Cook, S. Weisberg, Residuals and Influence in Regression (1982), section 2.2).
// One of the points behind a mean is a row like the mean, of its own weight and residual.
// ok is false where the rest do not determine the coefficients.
func (o *omitter) remove(l leaving, q [][]float64, r *fit.Result) (out removal, ok bool) {
	p := len(q)
	gram, z := o.gram[:p*p], o.z[:p]
	clear(gram)
	clear(z)
	for _, i := range l.entries {
		size, e := 1.0, r.Residuals[i]/math.Sqrt(o.s.V[i])
		if l.point >= 0 {
			v := o.a.data.single.V[l.point]
			size, e = math.Sqrt(o.s.V[i]/v), (r.Residuals[i]+o.fromMean(l))/math.Sqrt(v)
		}
		out.saved += e * e
		for j, qj := range q {
			x := size * qj[i]
			z[j] += x * e
			for k := range j + 1 {
				gram[j*p+k] -= x * size * q[k][i]
			}
		}
	}
	for j := range p { // Cholesky, and L⁻¹ along with it
		for k := range j {
			v := gram[j*p+k]
			for m := range k {
				v -= gram[j*p+m] * gram[k*p+m]
			}
			v /= gram[k*p+k]
			gram[j*p+k] = v
			z[j] -= v * z[k]
		}
		d := 1 + gram[j*p+j]
		for k := range j {
			d -= gram[j*p+k] * gram[j*p+k]
		}
		if !(d > 1e-10) {
			return removal{}, false
		}
		gram[j*p+j] = math.Sqrt(d)
		z[j] /= gram[j*p+j]
	}
	last := gram[p*p-1]
	out.shift, out.growth = z[p-1]/last, 1/(last*last)
	out.saved += floats.Dot(z, z)
	return out, true
}

// fromMean is the deviation of the single point of l from its mean, in ln k, or in k where
// the model is InK.
func (o *omitter) fromMean(l leaving) float64 {
	p, g := o.a.data.single, l.entries[0]
	if o.s.Model.InK() {
		return p.K[l.point] - o.s.K[g]
	}
	return p.Y[l.point] - o.s.Y[g]
}

// move is by how much n changes without l, in the fit linearised about its estimates, in
// units that all l share; infinite where that fit does not determine n without l.
func (o *omitter) move(l leaving) float64 {
	x, ok := o.remove(l, o.row.columns, o.measured)
	if !ok {
		return math.Inf(1)
	}
	return math.Abs(x.shift)
}

// examines chooses, where each needs a fit of its own and there are more than most, what
// is left out: what moves n most. The function that it returns tells by the number of a
// leaving.
func (o *omitter) examines(many, most int) func(i int) bool {
	if o.closed || many <= most {
		return func(int) bool { return true }
	}
	moves := make([]float64, 0, many)
	for l := range o.a.data.leavings {
		moves = append(moves, o.move(l))
	}
	order := make([]int, many)
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(i, j int) int { return cmp.Compare(moves[j], moves[i]) })
	chosen := make([]bool, many)
	for _, i := range order[:most] {
		chosen[i] = true
	}
	return func(i int) bool { return chosen[i] }
}

// without repeats the exponent test without l.
func (o *omitter) without(l leaving) omission {
	if o.closed {
		return o.downdate(l)
	}
	if o.near != nil {
		// A search from nearby can miss the lowest minimum: what would be reported is
		// searched for anew.
		if out, ok := o.refitNear(l); ok && !o.decides(out) {
			return out
		}
	}
	return o.refit(l)
}

func unknownOmission(why string) omission {
	nan := math.NaN()
	return omission{n: nan, se: nan, p: nan, predicted: nan, state: Untestable, why: why}
}

// left is what l leaves: degrees of freedom, and whether they and the temperatures are
// enough to test. rule is changed to the range of the rest.
func (o *omitter) left(l leaving, rule *Rule) (nu int, enough bool) {
	nu = o.a.power.Nu
	if l.point < 0 {
		nu -= len(l.entries)
	}
	temps, low, high := o.temps, o.low, o.high
	if t := o.s.T[l.entries[0]]; l.kind == leftTemperature {
		temps--
		if models.SameTemperature(t, low) {
			low = o.aboveLow
		} else if models.SameTemperature(t, high) {
			high = o.belowHigh
		}
	}
	rule.ChangePerUnit = changePerUnit(low, high)
	return nu, nu >= 1 && temps >= minTemperatures
}

// downdate is without in closed form.
func (o *omitter) downdate(l leaving) omission {
	s, power := o.s, o.a.power
	gone, ok := o.remove(l, o.row.columns, power)
	if !ok {
		return unknownOmission(whyUndetermined)
	}
	out := unknownOmission("")
	out.n = power.P[2] - gone.shift*math.Sqrt(o.row.unscaled)
	if first := l.entries[0]; l.point < 0 && len(l.entries) == 1 {
		out.predicted = power.Residuals[first] / (1 - o.row.leverage[first])
	}
	rule := o.a.rule
	nu, enough := o.left(l, &rule)
	if !enough {
		return out
	}
	rss := power.RSS - gone.saved
	if l.point >= 0 { // the scatter within the mean shrinks by w(y-m)²W/(W-w)
		d := o.fromMean(l)
		rss += d * d / (o.a.data.single.V[l.point] - s.V[l.entries[0]])
	}
	out.se = exponentError(s, math.Max(0, rss), o.row.unscaled*gone.growth, nu)
	known := s.Model.KnownSigma()
	if t := out.n / out.se; known {
		out.p = pNormal(t)
	} else {
		out.p = pStudent(t, float64(nu))
	}
	half := criticalValue(o.a.opt.Confidence, nu, known) * out.se
	line, ok := o.remove(l, o.line.columns, o.a.straight)
	if !ok {
		return out
	}
	rule.ToleranceKJ = o.a.tolerance.Apply((o.a.straight.P[1] - line.shift/o.line.length) / 1000)
	out.judge(rule, out.n-half, out.n+half, o.second)
	return out
}

// judge fills in the state.
func (out *omission) judge(rule Rule, low, high float64, second bool) {
	out.testable = true
	out.state = rule.Judge(low, high, second)
}

// refit is without by a fit of the rest.
func (o *omitter) refit(l leaving) omission {
	out := unknownOmission(whyUndetermined)
	s, err := o.rest(l)
	if err != nil {
		return out
	}
	o.fits++
	power, line := fit.Fit(s, models.PowerPrefactor{}), fit.Fit(s, models.Straight())
	if !power.Usable() || !line.Usable() {
		return out
	}
	if power.Status == fit.Converged {
		out.n, out.why = power.P[2], ""
		out.predicted = o.missOf(l, power)
	}
	if ok, _, _ := Testable(s, power); !ok {
		return out
	}
	t := o.a.testExponent(s, power)
	out.n, out.se, out.p = t.Exponent.Value, t.Exponent.StdError, t.PValue
	rule := o.a.rule
	low, high := s.Range()
	rule.ChangePerUnit = changePerUnit(low, high)
	rule.ToleranceKJ = o.a.tolerance.Apply(line.P[1] / 1000)
	low, high = ends(t.Exponent)
	out.judge(rule, low, high, o.second)
	return out
}

// missOf is the prediction error of the entry l by the fit r of the rest; unknown of
// anything else.
func (o *omitter) missOf(l leaving, r *fit.Result) float64 {
	s, i := o.s, l.entries[0]
	if l.point >= 0 || len(l.entries) > 1 || len(r.Beside) != len(s.Nuisance) {
		return math.NaN()
	}
	f := []float64{0}
	r.Curve.LnK(r.TRef, s.T[i:i+1], r.P, f, nil)
	for j, z := range s.Nuisance {
		f[0] += r.Beside[j] * z[i]
	}
	if s.Model.InK() {
		return s.K[i] - math.Exp(f[0])
	}
	return s.Y[i] - f[0]
}

// rest is the sample without l.
func (o *omitter) rest(l leaving) (*fit.Sample, error) {
	s := o.s
	if l.point >= 0 {
		return o.thinner(l)
	}
	var t, k, v []float64
	for i := range s.T {
		if slices.Contains(l.entries, i) {
			continue
		}
		t, k, v = append(t, s.T[i]), append(k, s.K[i]), append(v, s.V[i])
	}
	nuisance, limits := o.a.data.besideRest(l.entries)
	return o.complete(t, k, v, nuisance, limits)
}

// thinner is the sample with one point taken from a mean.
func (o *omitter) thinner(l leaving) (*fit.Sample, error) {
	s, p, g := o.s, o.a.data.single, l.entries[0]
	k, v := slices.Clone(s.K), slices.Clone(s.V)
	whole, w := 1/s.V[g], 1/p.V[l.point]
	v[g] = 1 / (whole - w)
	if s.Model.InK() {
		k[g] = (whole*s.K[g] - w*p.K[l.point]) * v[g]
	} else {
		k[g] = math.Exp((whole*s.Y[g] - w*p.Y[l.point]) * v[g])
	}
	return o.complete(s.T, k, v, s.Nuisance, s.Limits)
}

func (o *omitter) complete(t, k, v []float64, nuisance [][]float64, limits []fit.Limit) (*fit.Sample, error) {
	s, err := fit.NewSample(o.s.Model, t, k, v)
	if err != nil {
		return nil, err
	}
	s.Nuisance = nuisance
	if len(limits) > 0 {
		return s.WithLimits(limits)
	}
	return s, nil
}

// decides reports whether x, the test without something, makes that deciding: the
// verdict is curved, is not without it, and n shrinks to less than half or turns its
// sign. A mere flip near p = 0.05 is noise. Where too little is left to test nothing
// decides.
func (o *omitter) decides(x omission) bool {
	n := o.a.power.P[2]
	return o.whole.Curved() && x.testable && !x.state.Curved() &&
		(math.Abs(x.n) < decidingShrinks*math.Abs(n) || x.n*n < 0)
}

// leaveOneOut repeats the exponent test without each temperature and point; nil where
// there is no test to repeat.
func (a *assessor) leaveOneOut(state State, second bool) []Influence {
	o := newOmitter(a, state, second)
	if o == nil {
		return nil
	}
	s := a.data.sample
	many := 0
	for range a.data.leavings {
		many++
	}
	about := a.scatterFit()
	measured, curve := about.Measured(), about.Curve.Info().Name
	entries := fit.Influence(measured, s.Measured())
	examined := o.examines(many, mostRefits)
	a.influenceRange = newInfluenceRange()
	nan := Real(math.NaN())
	adequate := !fails(a.ranking, about)
	var pe PureError
	ofMeans := false
	if !adequate {
		pe, ofMeans = a.data.repeats()
	}
	var out []Influence
	at := 0
	for l := range a.data.leavings {
		x := unknownOmission(whyNotExamined)
		if examined(at) {
			x = o.without(l)
		}
		at++
		a.influenceRange.add(x)
		f := Influence{
			LeftOut: l.kind, Curve: curve, fits: adequate, T: Real(s.T[l.entries[0]]), Leverage: nan, Cook: nan, Studentised: nan, OutlierP: nan,
			Exponent: Real(x.n), StdError: Real(x.se), PValue: Real(x.p), State: x.state, Deciding: o.decides(x),
			PredictionError: Real(x.predicted), Why: x.why,
		}
		if l.point < 0 && len(l.entries) == 1 && entries != nil {
			e := entries[l.entries[0]]
			f.Leverage, f.Cook, f.Studentised = Real(e.Leverage), Real(e.Cook), Real(e.Studentised)
			f.OutlierP = Real(outlierP(e.Studentised, s.Len(), measured.Nu, s.Model.KnownSigma()))
			f.fits = adequate || a.fitsWithout(measured, e, pe, ofMeans)
		}
		if many > mostListed && !f.Deciding && !(f.OutlierP < outlierLevel) {
			continue
		}
		f.points = a.data.pointsOf(l)
		for _, j := range f.points {
			f.Rows = append(f.Rows, a.data.points[j].Row)
		}
		slices.Sort(f.Rows)
		f.Rows = slices.Compact(f.Rows)
		if len(l.entries) == 1 {
			f.residual = measured.Residuals[l.entries[0]]
		}
		out = append(out, f)
	}
	a.refits += o.fits
	return out
}

// fitsWithout reports whether a curve that fails its adequacy test passes it without
// one entry: RSS then falls by the square of the standardised residual, in units of σ̂².
func (a *assessor) fitsWithout(r *fit.Result, e fit.PointInfluence, pe PureError, ofMeans bool) bool {
	left := r.RSS - e.Standardised*e.Standardised*r.Sigma*r.Sigma
	df, p := pe.Temperatures-1-r.Params()-r.Spent, math.NaN()
	switch {
	case pe.DF > 0 && ofMeans && df > 0:
		p = pF(math.Max(0, left)/float64(df)/(pe.SS/float64(pe.DF)), float64(df), float64(pe.DF))
	case pe.DF == 0 && r.Model.KnownSigma() && r.Nu > 1:
		p = chi2Tail(math.Max(0, left), r.Nu-1)
	}
	return p >= adequacyLevel
}

func newInfluenceRange() *InfluenceRange {
	nan := Real(math.NaN())
	return &InfluenceRange{ExponentLow: nan, ExponentHigh: nan, PLow: nan, PHigh: nan}
}

// add widens the range by the test without something.
func (r *InfluenceRange) add(x omission) {
	if r.Examined++; x.why == whyNotExamined {
		r.Examined--
		r.NotExamined++
	}
	widen := func(low, high *Real, x float64) {
		if v := Real(x); v.Known() {
			if !(*low <= v) {
				*low = v
			}
			if !(*high >= v) {
				*high = v
			}
		}
	}
	widen(&r.ExponentLow, &r.ExponentHigh, x.n)
	widen(&r.PLow, &r.PHigh, x.p)
}

// outlierP is the p-value of a studentised residual, with σ̂ from the others, after
// Bonferroni for so many entries.
func outlierP(z float64, entries, nu int, known bool) float64 {
	p := math.NaN()
	switch {
	case known:
		p = pNormal(z)
	case nu > 1:
		p = pStudent(z, float64(nu-1))
	}
	return math.Min(1, float64(entries)*p)
}

// influences finds deciding points, outliers and borderline verdicts.
func (a *assessor) influences() {
	a.influence = a.leaveOneOut(a.verdict.State, a.secondRun.found())
	if r := a.influenceRange; r != nil && r.NotExamined > 0 {
		a.find("influence-not-examined", fmt.Sprintf("to leave something out takes a fit of its own here: of %d temperatures and points it was done for the %d that move n most, by the fit linearised about its estimates; n without each of the other %d is not known",
			r.Examined+r.NotExamined, r.Examined, r.NotExamined), nil, map[string]Real{"examined": Real(r.Examined), "not_examined": Real(r.NotExamined)})
	}
	a.findDeciding()
	a.findOutliers()
	a.findBorderline()
}

// place names what is left out: its lines in the file and temperature.
func (a *assessor) place(f Influence) string {
	where := fmt.Sprintf("at %s K", kelvinText(float64(f.T)))
	if len(f.points) > 3 {
		return fmt.Sprintf("%s %s", count(len(f.points), "point"), where)
	}
	if a.set.SeveralFiles() {
		var in []string
		for _, j := range f.points {
			p := a.data.points[j]
			in = append(in, fmt.Sprintf("%s:%d", p.File, p.Row))
		}
		return fmt.Sprintf("%s %s", strings.Join(in, ", "), where)
	}
	var rows []string
	for _, r := range f.Rows {
		rows = append(rows, fmt.Sprint(r))
	}
	noun := "line "
	if len(rows) > 1 {
		noun = "lines "
	}
	return noun + list(rows) + " " + where
}

// findDeciding names what the verdict hangs on, what moves n most first.
func (a *assessor) findDeciding() {
	var found []Influence
	for _, f := range a.influence {
		if f.Deciding {
			found = append(found, f)
		}
	}
	if len(found) == 0 {
		return
	}
	n := Real(a.power.P[2])
	slices.SortStableFunc(found, func(x, y Influence) int {
		return -cmpReal(Real(math.Abs(float64(x.Exponent-n))), Real(math.Abs(float64(y.Exponent-n))))
	})
	digits := max(1, decimals(2*float64(a.exponent.Exponent.StdError)))
	const most = 3
	var parts []string
	var rows []int
	for i, f := range found {
		rows = append(rows, f.Rows...)
		if i >= most {
			continue
		}
		instead := ""
		if i == 0 {
			instead = fmt.Sprintf(" instead of %s", number(float64(n), digits))
		}
		parts = append(parts, fmt.Sprintf("without %s n is %s%s (%s) and the verdict %s",
			a.place(f), number(float64(f.Exponent), digits), instead, pIs(float64(f.PValue)), f.State))
	}
	message := "the verdict hangs on little: " + strings.Join(parts, "; ")
	if more := len(found) - most; more > 0 {
		message += fmt.Sprintf("; and so without each of %d more", more)
	}
	slices.Sort(rows)
	first := found[0]
	a.verdict.Sentence += fmt.Sprintf(" The verdict hangs on %s: without that it is %s (p = %s).", a.place(first), first.State, pText(float64(first.PValue)))
	a.find("deciding-point", message, slices.Compact(rows), map[string]Real{
		"n": n, "n_without": first.Exponent, "p_without": first.PValue, "t_k": first.T, "deciding": Real(len(found)),
	})
}

func cmpReal(x, y Real) int {
	switch {
	case x < y:
		return -1
	case x > y:
		return 1
	}
	return 0
}

// findOutliers names entries that lie too far from the curve through the others. Where
// no curve describes the data, an entry is an outlier only if without it one does.
func (a *assessor) findOutliers() {
	if !a.data.sample.Model.KnownSigma() && noScatter(a.data.sample, a.power.RSS) {
		return
	}
	far := 0
	for _, f := range a.influence {
		if !(f.OutlierP < outlierLevel) {
			continue
		}
		if !f.fits {
			far++
			continue
		}
		way, verb := "above", "lies"
		if len(f.points) > 1 {
			verb = "lie"
		}
		if f.residual < 0 {
			way = "below"
		}
		a.find("outlier", fmt.Sprintf("%s %s %s standard deviations %s the %s curve, %s after Bonferroni for %d entries",
			a.place(f), verb, number(math.Abs(float64(f.Studentised)), 1), way, f.Curve, pIs(float64(f.OutlierP)), a.data.sample.Len()), f.Rows,
			map[string]Real{"studentised": f.Studentised, "p_value": f.OutlierP, "t_k": f.T})
	}
	if far > 0 {
		a.find("outliers-not-told", fmt.Sprintf("%s far from the %s curve, but so they would from any curve that does not describe the data, and none does: no outlier is named",
			lies(far), a.influence[0].Curve), nil, map[string]Real{"entries": Real(far)})
	}
}

// lies is "1 entry lies", or "3 entries lie".
func lies(n int) string {
	if n == 1 {
		return "1 entry lies"
	}
	return fmt.Sprintf("%d entries lie", n)
}

// findBorderline says once that the verdict hangs on chance, where p is near 0.05 and
// leaving out single temperatures turns it.
func (a *assessor) findBorderline() {
	p := a.exponent.PValue
	if a.untestable != "" || !(p >= 0.01 && p <= 0.1) {
		return
	}
	tested, flips := 0, 0
	for _, f := range a.influence {
		if f.LeftOut != leftTemperature || f.State == Untestable {
			continue
		}
		tested++
		if f.State.Curved() != a.verdict.State.Curved() {
			flips++
		}
	}
	values := map[string]Real{"p_value": Real(p), "tested": Real(tested), "flips": Real(flips)}
	near := fmt.Sprintf("p = %s is near 0.05: ", pText(p))
	switch {
	case tested == 0: // too few temperatures to leave one out
		a.find("borderline", near+"a point more or less can change the verdict", nil, values)
	case flips > 0:
		a.find("borderline", fmt.Sprintf("%sleaving out one temperature changes the verdict for %d of the %d", near, flips, tested), nil, values)
	}
}
