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

// farthestError is the largest error of temperature that is looked at, in K; what lies
// beyond farthestShare of the range is none of a thermometer either.
const farthestError, farthestShare = 50, 0.5

// slopeStep, in K, is that of the difference quotient that gives dn/dδ with limits: the
// curvature of n(δ) and the rounding of n enter by less than a part in a thousand.
const slopeStep = 0.01

// Shapes of an error of temperature.
const (
	shapeOffset = "offset" // the same at every temperature
	shapeGain   = "gain"   // 0 at T_min, largest at T_max
	shapeBow    = "bow"    // a parabola: largest in the middle, 0 at both ends
)

// ThermometerError is what a working thermometer may be wrong by, in K, by the shape
// of the error over the measured range.
type ThermometerError struct{ Offset, Gain, Bow float64 }

// DefaultThermometerError is what common practice grants an uncalibrated thermometer.
var DefaultThermometerError = ThermometerError{Offset: 0.5, Gain: 0.5, Bow: 0.1}

// defaultThermometerError is how the default is written down.
const defaultThermometerError = "u(T), or offset=0.5K,gain=0.5K,bow=0.1K"

// ParseThermometerError reads "offset=0.5K,gain=0.5K,bow=0.1K"; what is not named
// keeps its default.
func ParseThermometerError(s string) (ThermometerError, error) {
	e := DefaultThermometerError
	if strings.TrimSpace(s) == "" {
		return e, nil
	}
	seen := map[string]bool{}
	for _, part := range strings.Split(s, ",") {
		name, value, ok := strings.Cut(strings.ReplaceAll(part, " ", ""), "=")
		number, kelvin := strings.CutSuffix(value, "K")
		x, err := strconv.ParseFloat(number, 64)
		to := map[string]*float64{shapeOffset: &e.Offset, shapeGain: &e.Gain, shapeBow: &e.Bow}[name]
		_, notUnit := strconv.ParseFloat(value, 64)
		wrong := ""
		switch {
		case to == nil:
			wrong = fmt.Sprintf("%q is no shape of an error; the shapes are offset, gain and bow", name)
		case !ok || value == "":
			wrong = fmt.Sprintf("%s has no value; write %s=0.1K", name, name)
		case seen[name]:
			wrong = name + " is given twice; give it once"
		case !kelvin && notUnit == nil:
			wrong = fmt.Sprintf("%q has no unit; write %s=%sK", value, name, value)
		case !kelvin:
			wrong = fmt.Sprintf("%q is not in K; an error is a difference of temperatures: write %s=0.1K", value, name)
		case err != nil || math.IsInf(x, 0) || math.IsNaN(x):
			wrong = fmt.Sprintf("%q is no number of kelvins; write %s=0.1K", value, name)
		case x < 0:
			wrong = fmt.Sprintf("%q is negative; the error may have either sign: write %s=%gK", value, name, -x)
		}
		if wrong != "" {
			return e, fmt.Errorf("diagnostics: thermometer error: %s", wrong)
		}
		*to, seen[name] = x, true
	}
	return e, nil
}

// TemperatureError says what an error of the recorded temperatures of one shape would
// do: recorded T = true T + δ s(T). Numbers are unknown where no δ within
// 50 K and half of the range does it.
type TemperatureError struct {
	Shape string `json:"shape"` // offset, gain or bow
	// Slope is the exponent that an error of 1 K makes, Σ c_i (-E_loc(T_i) s_i/(R T_i²))
	// with n̂ = Σ c_i ln k_i; with limits that of their likelihood.
	Slope Real `json:"dn_per_k"`
	// ToBand is the δ that takes n̂ to the nearest edge of the prefactor band; unknown
	// too where it lies inside.
	ToBand Real `json:"delta_to_band_k"`
	// Lost is the δ at which the interval of n reaches the boundary of the verdict: the
	// edge of the band for beyond-prefactor, 0 for the other curved ones.
	Lost     Real `json:"delta_verdict_lost_k"`
	Working  Real `json:"working_error_k"` // what a working thermometer may be wrong by
	Explains bool `json:"explains"`        // it would make the verdict
}

// shapeOf gives s(T) of a shape over a range.
func shapeOf(shape string, low, high, t float64) float64 {
	u := (t - low) / (high - low)
	switch shape {
	case shapeGain:
		return u
	case shapeBow:
		return 4 * u * (1 - u)
	}
	return 1
}

// shifted repeats the exponent test with temperatures other than those recorded.
type shifted struct {
	a          *assessor
	s          *fit.Sample
	row        *exponentRow // of the temperatures tried last
	quantile   float64
	closed     bool
	t, scratch []float64
	limits     []float64 // s(T) of the limits
	edge       float64   // with which the interval is to be compared; NaN for none
}

// test gives n and its interval with T - δ s(T) in place of T, of limits too; NaN where
// that is no temperature or leaves n undetermined.
func (f *shifted) test(s []float64, delta float64) (n, low, high float64) {
	nan := math.NaN()
	for i, t := range f.s.T {
		if f.t[i] = t - delta*s[i]; !(f.t[i] > 0) {
			return nan, nan, nan
		}
	}
	if !f.closed {
		return f.refit(delta)
	}
	if !f.row.at(f.t) {
		return nan, nan, nan
	}
	n, rss := f.row.estimate(f.s.Y, f.scratch)
	half := f.quantile * exponentError(f.s, rss, f.row.unscaled, f.a.power.Nu)
	return n, n - half, n + half
}

// refit is test by a fit of its own.
func (f *shifted) refit(delta float64) (n, low, high float64) {
	nan := math.NaN()
	t := slices.Clone(f.t)
	if len(f.s.Limits) == 0 {
		if n, low, high, ok := f.nearby(t); ok {
			return n, low, high
		}
	}
	s, err := fit.NewSample(f.s.Model, t, f.s.K, f.s.V)
	if err != nil {
		return nan, nan, nan
	}
	s.Nuisance = f.s.Nuisance
	if limits := slices.Clone(f.s.Limits); len(limits) > 0 {
		for i := range limits {
			limits[i].T -= delta * f.limits[i]
		}
		if s, err = s.WithLimits(limits); err != nil {
			return nan, nan, nan
		}
	}
	power := fit.Fit(s, models.PowerPrefactor{})
	if power.Status != fit.Converged || power.Nu < 1 {
		return nan, nan, nan
	}
	if math.IsNaN(f.edge) {
		return power.P[2], nan, nan
	}
	x := f.a.testExponent(s, power)
	low, high = ends(x.Exponent)
	return x.Exponent.Value, low, high
}

// nearby is refit with errors in k from the fit at the recorded temperatures. The interval
// is that which reaches the edge where the profile does: n is as many standard errors from
// the edge as the signed root of the profile says.
func (f *shifted) nearby(t []float64) (n, low, high float64, ok bool) {
	s, power := *f.s, f.a.power
	s.T = t
	near := newNearPower(&s, power.TRef, power.P, power.Beside)
	if near == nil {
		return 0, 0, 0, false
	}
	free := make([]float64, near.p)
	rss, ok := near.search(free, false)
	if !ok {
		return 0, 0, 0, false
	}
	n = near.exponent(free)
	if math.IsNaN(f.edge) {
		return n, math.NaN(), math.NaN(), true
	}
	scale := 1.0
	if !s.Model.KnownSigma() {
		scale = rss / float64(power.Nu)
	}
	half := f.quantile * math.Sqrt(scale) * near.exponentError(free)
	held := slices.Clone(free)
	held[near.p-1] = near.coordinate(f.edge)
	at, ok := near.search(held, true)
	if root := math.Sqrt(math.Max(0, at-rss) / scale); root > 1e-3 {
		half = f.quantile * math.Abs(n-f.edge) / root
	}
	return n, n - half, n + half, ok
}

// temperatureErrors says what errors of the recorded temperatures would do to n and to
// the verdict.
func (a *assessor) temperatureErrors() {
	s := a.data.sample
	if a.untestable != "" || a.power.Status != fit.Converged {
		return
	}
	measured := a.power.Measured()
	root := roots(s, measured.Fitted)
	row, tried := newExponentRow(s, root), newExponentRow(s, root)
	if row == nil {
		return
	}
	working := a.workingErrors()
	f := &shifted{a: a, s: s, row: tried, t: make([]float64, s.Len()), scratch: make([]float64, s.Len()),
		quantile: criticalValue(a.opt.Confidence, a.power.Nu, s.Model.KnownSigma()),
		closed:   !s.Model.InK() && len(s.Limits) == 0, limits: make([]float64, len(s.Limits)), edge: math.NaN()}
	low, high := s.Range()
	slope, n := make([]float64, s.Len()), a.power.P[2]
	measured.Curve.ELoc(measured.TRef, s.T, measured.P, slope, nil)
	for i, t := range s.T {
		slope[i] /= models.GasConstant * t * t
	}
	shape := make([]float64, s.Len())
	for _, name := range []string{shapeOffset, shapeGain, shapeBow} {
		e := TemperatureError{Shape: name, ToBand: Real(math.NaN()), Lost: Real(math.NaN()), Working: Real(working[name])}
		var dn float64
		for i, t := range s.T {
			shape[i] = shapeOf(name, low, high, t)
			dn -= row.c[i] * slope[i] * shape[i]
		}
		for i, l := range s.Limits {
			f.limits[i] = shapeOf(name, low, high, l.T)
		}
		if len(s.Limits) > 0 { // of the likelihood that limits belong to
			above, _, _ := f.test(shape, slopeStep)
			below, _, _ := f.test(shape, -slopeStep)
			dn = (below - above) / (2 * slopeStep) // what is put right is taken off T
		}
		e.Slope = Real(dn)
		if band := a.rule.Band; n > band[1] || n < band[0] {
			edge := band[1]
			if n < band[0] {
				edge = band[0]
			}
			e.ToBand = Real(rootNear((n-edge)/dn, n-edge, func(delta float64) float64 {
				at, _, _ := f.test(shape, delta)
				return at - edge
			}))
		}
		if a.verdict.State.Curved() {
			e.Lost = Real(f.lost(shape, dn))
		}
		for _, delta := range []*Real{&e.ToBand, &e.Lost} {
			if math.Abs(float64(*delta)) > farthestShare*(high-low) {
				*delta = Real(math.NaN())
			}
		}
		e.Explains = e.Lost.Known() && math.Abs(float64(e.Lost)) < working[name]
		a.temperature = append(a.temperature, e)
	}
	a.findTemperatureErrors()
}

// lost is the δ of one shape at which the curved verdict is lost. dn is what 1 K of it
// does to n.
func (f *shifted) lost(shape []float64, dn float64) float64 {
	rule := f.a.rule
	low, high := ends(f.a.exponent.Exponent)
	edge := 0.0
	rises := low > 0
	if f.a.verdict.State == BeyondPrefactor {
		if edge = rule.Band[0]; rises {
			edge = rule.Band[1]
		}
	}
	f.edge = edge
	defer func() { f.edge = math.NaN() }()
	distance := func(low, high float64) float64 {
		if rises {
			return low - edge
		}
		return edge - high
	}
	way := 1.0
	if !rises {
		way = -1
	}
	return rootNear(way*distance(low, high)/dn, distance(low, high), func(delta float64) float64 {
		_, low, high := f.test(shape, delta)
		return distance(low, high)
	})
}

// rootNear finds a root of f within farthestError of 0, where f is f0, looking first
// towards guess, the root of its tangent; NaN where f keeps its sign.
func rootNear(guess, f0 float64, f func(float64) float64) float64 {
	if f0 == 0 {
		return 0
	}
	if math.IsNaN(guess) || math.IsNaN(f0) {
		return math.NaN()
	}
	way := math.Copysign(1, guess)
	a, fa := 0.0, f0
	for _, step := range []float64{1.05 * math.Abs(guess), 1.5 * math.Abs(guess), 3 * math.Abs(guess), farthestError} {
		b := way * math.Min(math.Max(step, 1e-12), farthestError)
		if math.Abs(b) <= math.Abs(a) {
			continue
		}
		fb := f(b)
		if math.IsNaN(fb) {
			return math.NaN()
		}
		if fb == 0 || fb > 0 != (f0 > 0) {
			return illinois(a, fa, b, fb, 1e-9*math.Abs(f0), f)
		}
		a, fa = b, fb
	}
	return math.NaN()
}

// illinois finds the root between a and b, where f has unlike signs, by false position
// with the weight of a lasting end halved (M. Dowell, P. Jarratt, BIT 11 (1971) 168),
// until |f| <= tol.
func illinois(a, fa, b, fb, tol float64, f func(float64) float64) float64 {
	side := 0
	for range 100 {
		c := (a*fb - b*fa) / (fb - fa)
		fc := f(c)
		if math.IsNaN(fc) {
			return math.NaN()
		}
		if math.Abs(fc) <= tol {
			return c
		}
		if fc > 0 == (fb > 0) {
			b, fb = c, fc
			if side == -1 {
				fa /= 2
			}
			side = -1
		} else {
			a, fa = c, fc
			if side == 1 {
				fb /= 2
			}
			side = 1
		}
	}
	return (a + b) / 2
}

// workingErrors are what the thermometer may be wrong by: as asked for, else the
// largest u(T) where every used point has one, else the default.
func (a *assessor) workingErrors() map[string]float64 {
	e, _ := ParseThermometerError(a.opt.ThermometerError) // checked with the options
	if a.opt.ThermometerError == "" {
		least, most := math.Inf(1), 0.0
		for _, p := range a.data.points {
			least, most = math.Min(least, p.UT), math.Max(most, p.UT)
		}
		if least > 0 {
			e = ThermometerError{most, most, most}
		}
	}
	return map[string]float64{shapeOffset: e.Offset, shapeGain: e.Gain, shapeBow: e.Bow}
}

// thermometerLevel is that of scatter-below-thermometer.
const thermometerLevel = 0.01

// scatterBelowThermometer warns where the points scatter less about the line, or where
// the verdict is curved about the curve that describes them, than u(T) alone makes them.
// Whatever else scatters only adds to χ² with the variances of u(T): its lower tail is
// that of the rarest false alarm. The variance of a mean is taken as if its points had
// independent errors of T, the least that it is.
func (a *assessor) scatterBelowThermometer() {
	s := a.data.sample
	if a.model != fit.Relative || a.data.temperatureShare == 0 { // under the others σ̂ is no scatter of ln k
		return
	}
	v := make([]float64, s.Len())
	for j, p := range a.data.points {
		if !(p.UT > 0) {
			return
		}
		g := j
		if a.data.basis == BasisMeans {
			g = a.data.group[j]
		}
		share := a.straight.P[1] * p.UT / (models.GasConstant * p.T * p.T) * s.V[g]
		v[g] += share * share
	}
	alone, err := fit.NewSample(fit.Stated, s.T, s.K, v)
	if err != nil {
		return
	}
	alone.Nuisance = s.Nuisance
	about := a.straight
	if a.verdict.State.Curved() {
		about = a.scatterFit()
	}
	curve := fit.Fit(alone, about.Curve)
	if !curve.Usable() || curve.Nu < 1 {
		return
	}
	if low := 1 - chi2Tail(curve.RSS, curve.Nu); low < thermometerLevel {
		a.find("scatter-below-thermometer", fmt.Sprintf("u(T) alone makes ln k uncertain by up to %.2g, more than the points scatter about %s (%.2g; lower tail of χ² %.2g)",
			a.data.temperatureShare, about.Curve.Info().Name, about.Sigma, low), nil,
			map[string]Real{"from_temperature": Real(a.data.temperatureShare), "scatter": Real(about.Sigma), "p_value": Real(low)})
	}
}

// kelvins prints the size of an error of temperature.
func kelvins(x Real) string { return significant(math.Abs(float64(x)), 2, "") + " K" }

// reading says what a thermometer with an error δ of the shape reads: recorded T less
// true T is δ s(T).
func (e TemperatureError) reading(delta Real) string {
	way := "high"
	if delta < 0 {
		way = "low"
	}
	where := map[string]string{
		shapeOffset: "at every temperature",
		shapeGain:   "at the hot end and right at the cold one",
		shapeBow:    "in mid-range and right at both ends",
	}
	return kelvins(delta) + " " + way + " " + where[e.Shape]
}

// ThermometerText says by how much the recorded temperatures would have to be wrong to
// take the significance from a curved verdict, in the shape that needs the least, and
// how much of it brings n itself to the band; "" where nothing was looked for. reached is
// what the verdict then becomes, see Lost.
func ThermometerText(errors []TemperatureError, reached string) string {
	if len(errors) == 0 {
		return ""
	}
	least := -1
	for i, e := range errors {
		if e.Lost.Known() && (least < 0 || math.Abs(float64(e.Lost)) < math.Abs(float64(errors[least].Lost))) {
			least = i
		}
	}
	if least < 0 {
		return fmt.Sprintf("holds with any error up to %d K and half of the range", farthestError)
	}
	e := errors[least]
	where, _, _ := strings.Cut(e.reading(e.Lost), " and ")
	text := where + " (" + e.Shape + "): " + reached
	if e.ToBand.Known() {
		text += "; " + kelvins(e.ToBand) + ": n in the band"
	}
	return text
}

// Lost says what a curved verdict becomes at the error of temperature that takes it away,
// from the exponent n and the prefactor band: the interval of n then reaches an edge of the
// band, where the cause is open, or 0, where nothing is significant.
func (s State) Lost(n Real, band [2]float64) string {
	if s == BeyondPrefactor && (n > 0 && band[1] > 0 || n < 0 && band[0] < 0) {
		return string(CurvedOpen)
	}
	return "no longer significant"
}

// GrantedText says what the thermometer may be wrong by, and who says so; "" where that
// is the default.
func GrantedText(errors []TemperatureError, asked string) string {
	if len(errors) == 0 {
		return ""
	}
	usual := map[string]float64{shapeOffset: DefaultThermometerError.Offset, shapeGain: DefaultThermometerError.Gain, shapeBow: DefaultThermometerError.Bow}
	var parts []string
	differs := false
	for _, e := range errors {
		parts = append(parts, e.Shape+" "+kelvins(e.Working))
		differs = differs || float64(e.Working) != usual[e.Shape]
	}
	who := "asked for"
	if asked == defaultThermometerError {
		if who = "the largest u(T)"; !differs {
			return ""
		}
	}
	return "granted error of the thermometer: " + strings.Join(parts, ", ") + " (" + who + ")"
}

// findTemperatureErrors says which shapes explain the verdict, in its sentence too.
func (a *assessor) findTemperatureErrors() {
	var parts []string
	values := map[string]Real{}
	for _, e := range a.temperature {
		if !e.Explains {
			continue
		}
		parts = append(parts, fmt.Sprintf("one that reads %s (%s), where a working thermometer may be wrong by %s", e.reading(e.Lost), e.Shape, kelvins(e.Working)))
		values["delta_"+e.Shape+"_k"] = e.Lost
		if len(parts) == 1 {
			text := fmt.Sprintf(" A thermometer that reads %s would be enough to take this verdict away", e.reading(e.Lost))
			if e.ToBand.Known() {
				text += fmt.Sprintf("; %s would bring n itself into the prefactor band", kelvins(e.ToBand))
			}
			a.verdict.Sentence += text + "."
		}
	}
	if len(parts) > 0 {
		a.find("temperature-error-explains", "a wrong thermometer would be enough to take this verdict away: "+strings.Join(parts, "; or ")+"; it is then "+a.verdict.State.Lost(Real(a.power.P[2]), a.rule.Band), nil, values)
	}
}
