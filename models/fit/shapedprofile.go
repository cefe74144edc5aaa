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
	smin := math.Min(f.least(), r.RSS)
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
	// line is a + b u without this path, which leaves straight.
	lineA, lineB, straight float64
	cur                    normal
	trial                  normal
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
	f.withoutThis(s)
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

// withoutThis fits the line of the other path alone.
func (f *shapedProfile) withoutThis(s *Sample) {
	rows := f.plan.rows
	z := make([]float64, len(rows))
	var a1, a2 float64
	for i, r := range rows {
		z[i] = r.w * s.Y[i]
		a1 += r.p1 * z[i]
		a2 += r.p2 * z[i]
	}
	f.lineA, f.lineB = f.plan.lineAt(a1, a2)
	projectOutTwice(rows, z)
	f.straight = dot(z, z)
}

// loses reports whether this path can be of no account with the parameter held at theta,
// so that S is no more than what the line of the other path leaves: whether some (c, d)
// within the bounds is that line and past the end of the softplus for all points. The
// theta of which that is true have no gaps.
func (f *shapedProfile) loses(theta float64) bool {
	if f.energy { // c is free, and d what the barriers differ by
		d := f.sign * (f.lineB - theta*f.plan.width)
		return d >= f.k.low && d <= f.k.up
	}
	most := math.Inf(-1) // of the least c + d u
	above := f.sign * (f.lineA + f.lineB*f.pivot - theta)
	for _, d := range []float64{f.k.low, 0, f.k.up} {
		most = math.Max(most, above+math.Min(d*(f.plan.low-f.pivot), d*(f.plan.high-f.pivot)))
	}
	return most >= softplusEnd
}

// load holds the parameter at theta. It returns the sum of squares with no other path,
// and that with no path of this one's.
func (f *shapedProfile) load(theta float64) (alone, lost float64) {
	shift := theta - f.estimate
	for i := range f.k.z {
		v := f.data[i] - shift*f.unit[i]
		f.k.z[i] = v
		alone += v * v
	}
	lost = math.Inf(1)
	if f.loses(theta) {
		lost = f.straight
	}
	return alone, lost
}

// least is S at the estimate.
func (f *shapedProfile) least() float64 {
	alone, lost := f.load(f.estimate)
	f.k.at(f.c, f.d, &f.cur)
	f.k.converge(&f.cur, &f.trial, profileTol, 60)
	return min(f.cur.rss, alone, lost)
}

const (
	// profileTol is the relative accuracy of the profiled sum of squares.
	profileTol = 1e-13
	// profileStep is the decrement, of RSS, at which a profile's steps stop: less the
	// decrement RSS is then good to profileTol, and its slope to √profileStep.
	profileStep = 1e-11
	// profileNear is how near to an end, of its distance from the estimate, the last
	// step goes without another look.
	profileNear = 1e-6
	// profileStarts is the number of starts of the search that confirms an end.
	profileStarts = 5
)

// heldAt is the fit with the parameter held at a distance x from the estimate: y is
// √(S - S_min) less what it is at an end, which is nearly linear in x, and the other
// path goes from (c, d) along (dc, dd) as x grows.
type heldAt struct{ x, y, slope, c, d, dc, dd float64 }

// at holds the parameter at x from the estimate in the direction dir and fits the rest,
// from where the fit q leads. The slope is that of S at fixed (c, d), since the fit is
// stationary in them; (dc, dd) keep it so.
func (f *shapedProfile) at(x, dir float64, q *heldAt, smin, top float64) heldAt {
	alone, lost := f.load(f.estimate + dir*x)
	k, cur := f.k, &f.cur
	dc, dd := q.dc*(x-q.x), q.dd*(x-q.x)
	k.at(q.c+dc, math.Max(k.low, math.Min(k.up, q.d+dd)), cur)
	stale := false                       // k.ws and k.slope are of another point
	if math.Abs(dc)+math.Abs(dd) > 0.3 { // a way that may bend
		if k.at(q.c, q.d, &f.trial); cur.rss <= f.trial.rss {
			stale = true
		} else {
			*cur, f.trial = f.trial, *cur
		}
	}
	s := cur.rss
	for range 60 {
		k.solve(cur)
		if s = cur.rss; s <= k.floor {
			break
		}
		if cur.newton && cur.decrement <= profileStep*s {
			s -= cur.decrement
			break
		}
		if stale = !k.step(cur, &f.trial); stale {
			break
		}
	}
	if stale {
		k.tab.shape(cur.c, cur.d, k.rows, k.ws, k.slope)
	}
	out := heldAt{x: x, c: cur.c, d: cur.d}
	var slope, t0, t1 float64
	for i := range k.rows {
		r := &k.rows[i]
		res := k.z[i]
		if s < alone {
			res -= k.ws[i]
		}
		slope -= res * f.unit[i]
		j := r.w * k.slope[i] * f.unit[i]
		t0 += j
		t1 += j * r.u
	}
	if s = math.Min(s, alone); s > smin && s < lost {
		out.slope = dir * slope / math.Sqrt(s-smin)
	}
	s = math.Min(s, lost)
	out.y = distance(s, smin, top)
	h00, h01, h11 := cur.m00-cur.k00, cur.m01-cur.k01, cur.m11-cur.k11
	if det := h00*h11 - h01*h01; cur.newton && !cur.bound && cur.decrement <= 1e-3*cur.rss {
		out.c, out.d = cur.c+cur.step0, cur.d+cur.step1
		out.dc, out.dd = -dir*(h11*t0-h01*t1)/det, -dir*(h00*t1-h01*t0)/det
	}
	return out
}

// distance is nearly linear in how far the parameter is held from its estimate.
func distance(s, smin, top float64) float64 { return math.Sqrt(math.Max(0, s-smin)) - top }

// towards returns where y is 0 by the cubic in y through two fits and their slopes,
// by the newer one's tangent where there is no such cubic, and NaN without a slope.
func (q *heldAt) towards(before *heldAt) float64 {
	if !(q.slope > 0) {
		return math.NaN()
	}
	h := q.y - before.y
	if !(before.slope > 0) || !(h*(q.x-before.x) > 0) {
		return q.x - q.y/q.slope
	}
	u := -before.y / h
	v := 1 - u
	return q.x - (1+2*u)*v*v*(q.x-before.x) + h*u*v*(v/before.slope-u/q.slope)
}

// end finds where S has risen by rise, from a first step that doubles for as long as
// that is not reached, and confirms by a global search that no other minimum lies lower
// there. ok is false where S never rises that far.
func (f *shapedProfile) end(step, smin, rise float64) (limit float64, ok bool) {
	top, dir, step := math.Sqrt(rise), math.Copysign(1, step), math.Abs(step)
	far := math.Min(f.reach, dir*(math.Max(f.lo, math.Min(f.hi, math.Copysign(math.Inf(1), dir)))-f.estimate))
	// Where the line alone is within, S stays so for as long as this path can be lost.
	within := f.straight < smin+rise*(1-2*profileNear) && f.loses(f.estimate+dir*far)
	if within && f.loses(f.estimate) {
		return math.Copysign(math.Inf(1), dir), false
	}
	inside := f.at(0, dir, &heldAt{c: f.c, d: f.d}, smin, top)
	inside.slope = 0 // √ has none here
	last, outside := inside, math.Inf(1)
	next := step
	for round := 1; round < 400 && inside.x < far; round++ {
		// From inside: what was found farther out may lie in another valley.
		from := &inside
		if math.Abs(last.y) < top/10 {
			from = &last
		}
		q := f.at(math.Min(next, far), dir, from, smin, top)
		guess := q.towards(&last)
		found := math.Abs(q.y) <= profileNear*top && math.Abs(guess-q.x) <= profileNear*q.x
		last = q
		switch {
		case q.y < 0:
			if inside = q; within && f.loses(f.estimate+dir*q.x) {
				return math.Copysign(math.Inf(1), dir), false
			}
		case q.y >= 0:
			outside = q.x
		default: // no number
			return math.Copysign(math.Inf(1), dir), false
		}
		if open := math.IsInf(outside, 1); !found && open {
			step *= 2
			next = q.x + step
			if guess > q.x && guess < next {
				next = guess
			}
			continue
		}
		root := q.x
		if found {
			root = guess
		} else if outside-inside.x > 1e-13*step+0x1p-52*math.Abs(f.estimate+dir*q.x) {
			next = guess
			if round%4 == 0 || !(guess > inside.x && guess < outside) {
				next = inside.x + (outside-inside.x)/2
			}
			continue
		}
		theta := f.estimate + dir*root
		if !f.undercut(theta, smin+rise*(1-2*profileNear)) {
			return theta, true
		}
		lower := distance(f.global(theta), smin, top)
		if !(lower < -profileNear*top) {
			return theta, true
		}
		inside = heldAt{x: root, y: lower, c: f.cur.c, d: f.cur.d}
		last, outside, next = inside, math.Inf(1), root+step
	}
	return math.Copysign(math.Inf(1), dir), false
}

// undercut reports whether a global search with the parameter held at theta may come
// to less than s: unless from every start the quadratic model shows that it will not.
func (f *shapedProfile) undercut(theta, s float64) bool {
	alone, lost := f.load(theta)
	if alone < s || lost < s {
		return true
	}
	f.plan.atNodes(f.k, f.search, alone)
	for i := range f.plan.starts(f.k, f.search, alone) {
		if cur := &f.search.start[i]; f.comesBelow(cur, s) {
			return true
		}
	}
	return false
}

// comesBelow takes steps from cur until it is plain whether they lead below s.
func (f *shapedProfile) comesBelow(cur *normal, s float64) bool {
	for range 2 * coldSteps {
		f.k.solve(cur)
		if cur.rss < s {
			return true
		}
		if cur.newton && !cur.bound && decideHope*cur.decrement < cur.rss-s || !f.k.step(cur, &f.trial) {
			return false
		}
	}
	return true
}

// global returns S(θ) from a global search, and leaves the point in f.cur.
func (f *shapedProfile) global(theta float64) float64 {
	alone, lost := f.load(theta)
	best, _ := f.plan.cold(f.k, f.search, alone, profileTol)
	f.cur = *best
	return min(best.rss, alone, lost)
}
