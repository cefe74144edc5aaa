package fit

import (
	"math"
	"slices"

	"onebarrier/models"
)

// ProfileShaped returns the profile-likelihood interval of one parameter of a
// softplus-shaped curve (parallel): all values θ for which the best fit with the
// parameter held at θ has
//
//	S(θ) <= S_min (1 + F(1, ν)/ν), or S(θ) <= S_min + χ²(1) with σ known
//
// (Bates & Watts 1988, section 6.1.2), under E1 <= E2. param is one of
//
//	E1, E2                 in J/mol
//	ln_A1, ln_A2           ln k of the path at 1/T = 0
//	ln_k1_ref, ln_k2_ref   ln k of the path at the sample's reference temperature
//
// and anything else panics, as does a curve of another kind. An end that S does not
// reach is open and infinite: for an energy within 1000 kJ/mol, for ln k within what
// such a barrier makes of it over the distance from 1/T = 0. Value and StdError are
// NaN where the fit is not identified, everything where it is not usable.
func ProfileShaped(s *Sample, r *Result, param string, confidence float64) Estimate {
	f := newShapedProfile(s, r, param)
	if !r.Usable() {
		return Unknown()
	}
	if s.Model.InK() || len(s.Limits) > 0 {
		return Profile(s, r, f.gradient[:], confidence)
	}
	e := Estimate{Value: math.NaN(), StdError: math.NaN(), Lower: math.NaN(), Upper: math.NaN()}
	wald := r.Interval(f.gradient[:], f.estimate, confidence)
	e.Value, e.StdError = wald.Value, wald.StdError
	t := r.quantile(confidence)
	if math.IsNaN(t) {
		return e
	}
	f.prepare(s, r)
	smin := math.Min(f.at(f.estimate, f.c, f.d), r.RSS)
	rise := t * t
	if !s.Model.KnownSigma() {
		rise *= smin / float64(r.Nu)
	}
	// What looks like scatter here is rounding, in which no end can be found.
	if smin <= float64(s.Len())*square(1e-12*maxAbsWhitened(s)) {
		e.Lower, e.Upper = f.estimate, f.estimate
		return e
	}
	step := wald.Upper - f.estimate
	if !(step > 0) || !(step < f.reach/4) {
		step = f.reach / 1024
	}
	lower, okLower := f.end(-step, smin, rise)
	upper, okUpper := f.end(step, smin, rise)
	return e.between(lower, upper, okLower, okUpper)
}

// shapedProfile fits ln k = line(θ) + shape with one path's line held to θ: the
// kernel with {1} projected out where its energy is held, {u - u₀} where its ln k at
// u₀ is.
type shapedProfile struct {
	plan     *plan
	k        *kernel
	search   *search
	path     int
	energy   bool
	pivot    float64 // u₀
	sign     float64
	estimate float64
	gradient [4]float64 // of the parameter in the canonical ones
	reach    float64    // how far from the estimate an end is looked for
	lo, hi   float64    // bounds of the parameter
	data     []float64  // projected data with θ at its estimate
	unit     []float64  // projected change of them per unit of θ
	c, d     float64    // the other path against this one, at the estimate
	cur      normal
	trial    normal
}

// newShapedProfile reads param.
func newShapedProfile(s *Sample, r *Result, param string) *shapedProfile {
	sign, ok := softplusSign(r.Curve)
	if !ok {
		panic("fit: " + r.Curve.Info().Name + " has no softplus shape")
	}
	f := &shapedProfile{sign: sign}
	full := planOf(s.T, s.V)
	f.plan = full
	far := 1 / (models.GasConstant * s.TRef)
	switch param {
	case "E1", "E2":
		f.energy = true
	case "ln_A1", "ln_A2":
		f.pivot = 1 / (models.GasConstant * full.tc * full.width)
	case "ln_k1_ref", "ln_k2_ref":
		f.pivot = full.shift(s.TRef)
	default:
		panic("fit: " + r.Curve.Info().Name + " has no parameter " + param)
	}
	switch param {
	case "E2", "ln_A2", "ln_k2_ref":
		f.path = 1
	}
	switch param {
	case "E1", "E2":
		f.gradient[2*f.path+1] = 1
	case "ln_A1", "ln_A2":
		f.gradient[2*f.path], f.gradient[2*f.path+1] = 1, far
	default:
		f.gradient[2*f.path] = 1
	}
	if r.Usable() {
		for j, g := range f.gradient {
			if g != 0 {
				f.estimate += g * r.P[j]
			}
		}
	}
	f.reach = 2 * maxBarrier * far
	f.lo, f.hi = math.Inf(-1), math.Inf(1)
	if f.energy {
		f.reach = 2 * maxBarrier
		f.lo, f.hi = -maxBarrier, maxBarrier
	}
	return f
}

// heldLine is what one path's line is held to: its slope, or its value at pivot. side is
// the sign of d.
type heldLine struct {
	energy      bool
	pivot, side float64
}

// mostHeld is how many a plan keeps: those of E, ln A and ln k(T_ref), on either side.
const mostHeld = 6

// hold is the plan with the other projector.
func (p *plan) hold(h heldLine) *plan {
	p.holding.Lock()
	defer p.holding.Unlock()
	if q := p.held[h]; q != nil {
		return q
	}
	p.makeNodes()
	q := &plan{
		tab: p.tab, tc: p.tc, width: p.width, low: p.low, high: p.high,
		maxD: p.maxD, distinct: p.distinct, rows: make([]basisRow, len(p.rows)),
		nodes: slices.Clone(p.nodes),
	}
	q.noded.Do(func() {})
	var length float64
	for i, b := range p.rows {
		phi := b.w
		if !h.energy {
			phi *= b.u - h.pivot
		}
		q.rows[i] = basisRow{u: b.u, w: b.w, p1: phi}
		length += phi * phi
	}
	length = math.Sqrt(length)
	for i := range q.rows {
		q.rows[i].p1 /= length
	}
	for j := range q.nodes {
		nd := &q.nodes[j]
		nd.c, nd.d = h.side*nd.c, h.side*nd.d
	}
	q.projectShapes()
	if p.held == nil || len(p.held) == mostHeld {
		p.held = map[heldLine]*plan{}
	}
	p.held[h] = q
	return q
}

// prepare turns the plan into the one with the other projector.
func (f *shapedProfile) prepare(s *Sample, r *Result) {
	full := f.plan
	n := len(full.rows)
	// The other path's line less this one's is sign·(c + d u).
	this, other := r.P[2*f.path:], r.P[2-2*f.path:]
	f.d = f.sign * (other[1] - this[1]) * full.width
	f.c = f.sign*(other[0]-this[0]) - f.d*full.shift(s.TRef)

	// E1 <= E2 makes d non-negative seen from the first of two paths side by side.
	side := f.sign
	if f.path == 1 {
		side = -side
	}
	line := heldLine{energy: f.energy, side: side}
	if !f.energy {
		line.pivot = f.pivot
	}
	p := full.hold(line)
	f.plan = p
	f.k = p.kernel()
	// Room for the other path where this one's barrier comes near its own bound.
	f.k.low, f.k.up = 4*f.k.low, 4*f.k.up
	if side > 0 {
		f.k.low = 0
	} else {
		f.k.up = 0
	}
	f.search = p.newSearch()
	f.search.most = profileStarts
	f.data, f.unit = make([]float64, n), make([]float64, n)
	// This path's line: θ U + const, or θ + const·(u - u₀).
	for i, b := range p.rows {
		line := f.estimate
		psi := 1.0
		if f.energy {
			psi = b.u * p.width
			line *= psi
		}
		f.data[i] = f.sign * b.w * (s.Y[i] - line)
		f.unit[i] = f.sign * b.w * psi
		f.k.floor = math.Max(f.k.floor, math.Abs(s.Y[i]*b.w))
	}
	f.k.floor = float64(n) * square(0x1p-53*f.k.floor)
	projectOutTwice(p.rows, f.data)
	projectOutTwice(p.rows, f.unit)
}

// load holds the parameter at theta and returns the sum of squares with no other path.
func (f *shapedProfile) load(theta float64) (alone float64) {
	shift := theta - f.estimate
	for i := range f.k.z {
		v := f.data[i] - shift*f.unit[i]
		f.k.z[i] = v
		alone += v * v
	}
	return alone
}

const (
	// profileTol is the relative accuracy of the profiled sum of squares.
	profileTol = 1e-13
	// profileStarts is the number of starts of the search that confirms an end.
	profileStarts = 5
)

// at returns S(θ) from a start, and leaves the point in f.cur.
func (f *shapedProfile) at(theta, c, d float64) float64 {
	alone := f.load(theta)
	f.k.at(c, d, &f.cur)
	f.k.converge(&f.cur, &f.trial, profileTol, 60)
	return math.Min(f.cur.rss, alone)
}

// global returns S(θ) from a global search, and leaves the point in f.cur.
func (f *shapedProfile) global(theta float64) float64 {
	alone := f.load(theta)
	best, _ := f.plan.cold(f.k, f.search, alone, profileTol)
	f.cur = *best
	return math.Min(best.rss, alone)
}

// end walks from the estimate in steps that double until S has risen by rise, finds
// where, and confirms by a global search that no other minimum lies lower there. ok
// is false where S never rises that far.
func (f *shapedProfile) end(step, smin, rise float64) (limit float64, ok bool) {
	// The square root is nearly linear in θ.
	distance := func(rss float64) float64 {
		return math.Sqrt(math.Max(0, rss-smin)) - math.Sqrt(rise)
	}
	limit = math.Max(f.lo, math.Min(f.hi, f.estimate+math.Copysign(f.reach, step)))
	c, d := f.c, f.d
	inside, dInside := f.estimate, -math.Sqrt(rise)
	for range 200 { // steps double: what is not found by then lies at the limit
		if (limit-inside)*step <= 0 {
			break
		}
		theta := inside + step
		if (theta-limit)*step > 0 {
			theta = limit
		}
		out := distance(f.at(theta, c, d))
		if out < 0 {
			inside, dInside, c, d = theta, out, f.cur.c, f.cur.d
			step *= 2
			continue
		}
		root := findRoot(func(x float64) float64 { return distance(f.at(x, c, d)) }, inside, dInside, theta, out)
		lower := distance(f.global(root))
		if !(lower < -1e-6*math.Sqrt(rise)) {
			return root, true
		}
		inside, dInside, c, d = root, lower, f.cur.c, f.cur.d
	}
	return math.Copysign(math.Inf(1), step), false
}
