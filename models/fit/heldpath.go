package fit

import (
	"math"

	"onebarrier/models"
)

// heldPath profiles one path of two with errors in k: its barrier, or its ln k at
// one temperature, is held, and all else is fitted under E1 <= E2. Slot 0 of a
// projection is the path that is held, slot 1 the other one.
type heldPath struct {
	w       *varpro
	energy  bool
	side    float64 // +1: the other barrier is not lower; -1: not higher
	line    projection
	lnLine  float64    // ln k of the line at the pivot
	last    [2]float64 // where the last minimum of two paths was
	lastLn  float64    // with lnHeld
	reach   float64
	lo, hi  float64 // bounds of the parameter
	perUnit float64 // θ per J/mol
	column  float64 // canonical pivot
}

// onePath returns the profile of c·p where c belongs to one path of two; nil where it
// does not, or where the curve is of another kind.
func onePath(s *Sample, r *Result, c []float64) *heldPath {
	if sign, ok := softplusSign(r.Curve); !ok || sign < 0 || !s.Model.InK() {
		return nil
	}
	h := &heldPath{side: 1}
	this := c[:2]
	if c[0] == 0 && c[1] == 0 {
		h.side, this = -1, c[2:]
	} else if c[2] != 0 || c[3] != 0 {
		return nil
	}
	one, two := newExponentials(s, models.Straight()), newExponentials(s, r.Curve)
	if one == nil || two == nil {
		return nil
	}
	line := newVarpro(one)
	line.setData(s.K)
	if !line.fitSingle() {
		return nil
	}
	h.line = line.best
	h.w = newVarpro(two)
	h.w.setData(s.K)
	h.w.dim = 2
	h.perUnit = 1 / two.scale[0]
	h.energy = this[0] == 0
	h.lo, h.hi = math.Inf(-1), math.Inf(1)
	if h.energy {
		h.lo, h.hi = -maxBarrier*math.Abs(this[1]), maxBarrier*math.Abs(this[1])
		h.reach = 2 * h.hi
		h.perUnit /= this[1]
	} else {
		// ln k where the column is this[1]/this[0].
		h.column = this[1] / this[0]
		h.w.held = true
		h.w.order = h.side
		// Room for its barrier where ln k comes near what its own bound allows.
		h.w.low[0], h.w.high[0] = 4*h.w.low[0], 4*h.w.high[0]
		h.w.pivot = (h.column - two.centre[0]) * two.scale[0]
		h.perUnit = 1 / this[0]
		h.reach = 2 * maxBarrier / (models.GasConstant * s.TRef) * math.Abs(this[0])
		var p [2]float64
		one.params(&h.line, p[:])
		h.lnLine = p[0] + p[1]*h.column - two.o.lnScale
	}
	theta := two.thetaOf(r.P)
	if h.side < 0 {
		theta[0], theta[1] = theta[1], theta[0]
	}
	h.last = theta
	h.lastLn = (r.P[1-int(h.side)] + r.P[2-int(h.side)]*h.column) - two.o.lnScale
	return h
}

// at returns the least sum of squares with the parameter at g.
func (h *heldPath) at(g float64) float64 {
	w := h.w
	best := math.MaxFloat64
	var starts [][2]float64
	if h.energy {
		best = w.zz // both paths absent
		t := g * h.perUnit
		w.low, w.high = [2]float64{t, -w.e.bound}, [2]float64{t, w.e.bound}
		if h.side > 0 {
			w.low[1] = t
		} else {
			w.high[1] = t
		}
		// Alone, or not there at all.
		w.single([2]float64{t}, &w.trial)
		best = min(best, w.trial.rss)
		if (h.line.theta[0]-t)*h.side >= 0 {
			best = min(best, h.line.value())
		}
		starts = h.besides([][2]float64{{t, h.last[1]}}, t)
	} else {
		w.lnHeld = g*h.perUnit - w.e.o.lnScale
		// The line, of which this path is a part.
		if w.lnHeld <= h.lnLine {
			best = min(best, h.line.value())
		}
		best = min(best, h.alone())
		// Started where it adds as much at its end of the range as it did.
		start, end := h.last, math.Copysign(0.5, h.last[0])
		if math.Abs(end-w.pivot) > 0.1 {
			start[0] += (h.lastLn - w.lnHeld) / (end - w.pivot)
		}
		starts = h.besides([][2]float64{start}, h.exponents()...)
	}
	for _, start := range starts {
		if w.descend(start) && w.cur.value() < best {
			best, h.last, h.lastLn = w.cur.value(), w.cur.theta, w.lnHeld
		}
	}
	return best
}

// alone is the least sum of squares of the path itself, its ln k held.
func (h *heldPath) alone() float64 {
	w := h.w
	least := math.Inf(1)
	w.dim, w.noOther = 1, true
	for _, t := range h.exponents() {
		w.at([2]float64{t}, &w.trial)
		if w.trial.rss < least {
			least, w.best.theta = w.trial.rss, w.trial.theta
		}
	}
	for _, start := range [][2]float64{h.line.theta, w.best.theta} {
		if w.descend(start) {
			least = min(least, w.cur.value())
		}
	}
	w.dim, w.noOther = 2, false
	return least
}

// exponents are those of a grid for the path whose ln k is held: of all curves, or,
// where it is held far outside the range, of those that make up given shares of the
// line at the ends of the range and in the middle.
func (h *heldPath) exponents() (ts []float64) {
	w := h.w
	if math.Abs(w.pivot) <= 1 {
		for _, nd := range w.e.nodes {
			ts = append(ts, nd.theta[0])
		}
		return ts
	}
	for _, at := range []float64{-0.5, 0, 0.5} {
		lnLine := h.lnLine + h.line.theta[0]*(at-w.pivot)
		for _, share := range []float64{1e-3, 0.01, 0.03, 0.1, 0.2, 0.3, 0.5, 0.7, 0.9, 1, 1.1, 1.5} {
			if t := (math.Log(share) + lnLine - w.lnHeld) / (at - w.pivot); math.Abs(t) <= w.high[0] {
				ts = append(ts, t)
			}
		}
	}
	return ts
}

// besides adds to starts the nodes on the other path's side that are best among
// their neighbours, each beside the best of the exponents given for this path.
func (h *heldPath) besides(starts [][2]float64, ts ...float64) [][2]float64 {
	w := h.w
	nodes := w.e.nodes
	rss := make([]float64, len(nodes))
	with := make([]float64, len(nodes)) // this path's exponent
	for j := range nodes {
		rss[j] = math.Inf(1)
		for _, t := range ts {
			if (nodes[j].theta[0]-t)*h.side <= 0 {
				continue
			}
			w.pair([2]float64{t, nodes[j].theta[0]}, &w.trial)
			if w.trial.rss < rss[j] {
				rss[j], with[j] = w.trial.rss, t
			}
		}
	}
	for j, v := range rss {
		if v < math.Inf(1) && !(j > 0 && rss[j-1] < v) && !(j+1 < len(rss) && rss[j+1] <= v) {
			starts = append(starts, [2]float64{with[j], nodes[j].theta[0]})
		}
	}
	return starts
}

// end walks from the estimate in steps that double until the sum of squares has risen
// by rise, and finds where; ok is false, and the end infinite, where it never does.
func (h *heldPath) end(value, step, smin, rise float64) (limit float64, ok bool) {
	distance := func(g float64) float64 {
		return math.Sqrt(math.Max(0, h.at(g)-smin)) - math.Sqrt(rise)
	}
	limit = math.Max(h.lo, math.Min(h.hi, value+math.Copysign(h.reach, step)))
	inside, dInside := value, -math.Sqrt(rise)
	for (limit-inside)*step > 0 {
		g := inside + step
		if (g-limit)*step > 0 {
			g = limit
		}
		d := distance(g)
		if d >= 0 {
			return findRoot(distance, inside, dInside, g, d), true
		}
		inside, dInside = g, d
		step *= 2
	}
	return math.Copysign(math.Inf(1), step), false
}
