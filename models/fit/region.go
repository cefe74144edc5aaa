package fit

import (
	"math"
	"slices"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// Function is a quantity that follows from the canonical parameters p. It fills its
// derivatives into grad, which has the length of p.
type Function func(p, grad []float64) float64

// linearFunction is c·p.
func linearFunction(c []float64) Function {
	return func(p, grad []float64) float64 {
		copy(grad, c)
		return dot(c, p)
	}
}

// Region is the likelihood region of a models.Seeded: all parameters, the shape within
// its bounds, whose sum of squares exceeds the least one by no more than the criterion
// of Profile. The values that a quantity takes there are its profile interval: a value g
// is taken just where the best fit that has it meets the criterion.
//
// At a given shape the curve is a line, and with errors in ln k that part of the region
// an ellipsoid. The largest value of a quantity there is found in closed form, with errors
// in k by a few such steps, and then the largest over the shape. Nuisance columns move
// with the line. It is a workspace of one goroutine.
type Region struct {
	r          *Result
	confidence float64
	limit      float64 // of the sum of squares
	exact      bool    // no scatter: the region is a point

	eval    func(p, r, jac []float64)
	n       int          // parameters, nuisance ones included
	nodes   []regionNode // by ascending shape; none where there is no region
	bounded [2]bool      // the shape's lowest and highest value are bounds
	line    [2]bool      // and the straight line
	holds   bool         // the straight line lies in the region
	ends    [2]float64   // the shape's lowest and highest value

	q                       *qr
	res, b, jac, reduced    []float64
	w, step, move, slope, p []float64
}

// regionNode is the line that fits best at the shape shapeAt(phi).
type regionNode struct {
	phi float64
	p   []float64
}

// shape is the number of the parameter that bends a models.Seeded.
const shape = 2

// nearEnd is a point so near to an end of the region, in φ, that nothing lies between.
const nearEnd = 1e-3

// NewRegion finds the shapes in the region of a fit of a models.Seeded (any other curve
// panics), as far as they hang together with the estimate: the intervals of all
// quantities are then found from them. With limits there is no region.
func NewRegion(s *Sample, r *Result, confidence float64) *Region {
	c := r.Curve.(models.Seeded)
	g := &Region{r: r, confidence: confidence}
	if !r.Usable() || r.P == nil || len(s.Limits) > 0 {
		return g
	}
	t := r.quantile(confidence)
	if math.IsNaN(t) {
		return g
	}
	hold := make([]float64, r.Params()+s.Spent())
	hold[shape] = 1
	f := newProfiler(s, r, hold)
	low, high := s.Range()
	var straight float64
	f.low, straight, f.high = c.Bounds(s.TRef, low, high)
	smin := f.start(append(slices.Clone(r.P), r.Beside...))
	criterion := t * t
	if !s.Model.KnownSigma() {
		criterion *= smin / float64(r.Nu)
	}
	// What looks like scatter here is rounding, in which no end can be found.
	if criterion == 0 || !s.Model.InK() && smin <= float64(s.Len())*square(1e-12*maxAbsWhitened(s)) {
		g.exact = true
		return g
	}
	e := r.Interval(hold[:r.Params()], r.P[shape], confidence)
	step := e.Upper - r.P[shape]
	if !(step > 0 && step < f.high-f.low) {
		step = (f.high - f.low) / 16
	}
	for i, step := range []float64{-step, step} {
		limit, ok := f.end(r.P[shape], step, smin, criterion)
		if !ok {
			limit = []float64{f.low, f.high}[i]
			g.bounded[i], g.line[i] = true, limit == straight
		}
		g.ends[i] = limit
	}
	g.limit = smin + criterion
	g.holds = g.ends[0] <= straight && straight <= g.ends[1]
	g.eval, g.n = f.inner.Eval, f.inner.N
	g.scratch(f.inner.M)
	const steps = 10
	phi := []float64{-math.Pi / 2, nearEnd - math.Pi/2}
	for i := range steps - 1 {
		phi = append(phi, math.Pi*(float64(i+1)/steps-0.5))
	}
	phi = append(phi, math.Pi/2-nearEnd, math.Pi/2)
	from := f.best
	for _, x := range phi {
		_, p := f.at(g.shapeAt(x), from)
		if p == nil {
			continue
		}
		from = p
		g.nodes = append(g.nodes, regionNode{x, p})
	}
	return g
}

func (g *Region) scratch(m int) {
	k := g.n - 1
	v := func(n int) []float64 { return make([]float64, n) }
	g.q = newQR(m, k)
	g.res, g.b, g.jac, g.reduced = v(m), v(m), v(m*g.n), v(m*k)
	g.w, g.step, g.move, g.slope, g.p = v(k), v(k), v(k), v(g.n), v(g.n)
}

// shapeAt is the shape at φ between -π/2 and π/2, the ends of its range. In φ what is
// left of the region grows from an end without a kink.
func (g *Region) shapeAt(phi float64) float64 {
	switch phi {
	case -math.Pi / 2:
		return g.ends[0]
	case math.Pi / 2:
		return g.ends[1]
	}
	return (g.ends[0]+g.ends[1])/2 + (g.ends[1]-g.ends[0])/2*math.Sin(phi)
}

// Interval is the profile interval of h. An end is open where the shape meets a bound
// before the criterion is: any bound but the straight line, and the straight line too
// for what measures the distance from it, such as the shape itself. Without a region,
// for lack of degrees of freedom or beside limits, it is that of Result.Interval.
func (g *Region) Interval(h Function) Estimate {
	if !g.r.Usable() || g.r.P == nil {
		return Unknown()
	}
	grad := make([]float64, g.r.Params())
	value := h(g.r.P, grad)
	e := g.r.Interval(grad, value, g.confidence)
	switch {
	case g.exact:
		e.Lower, e.Upper = value, value
	case len(g.nodes) > 0:
		lower, okLower := g.extreme(h, -1)
		upper, okUpper := g.extreme(h, 1)
		return e.between(lower, upper, okLower, okUpper)
	}
	return e
}

// HoldsLine reports whether the straight line lies in the region.
func (g *Region) HoldsLine() bool { return g.holds }

// MeetsBound reports whether the region reaches a bound of the shape that is not the
// straight line, so that intervals depend on it or are open.
func (g *Region) MeetsBound() bool {
	return g.bounded[0] && !g.line[0] || g.bounded[1] && !g.line[1]
}

// regionPoint is the extreme of a quantity at one shape.
type regionPoint struct {
	value, slope float64 // the slope in φ
	length       float64 // change of the quantity by a unit of residuals' change
}

// extreme is the largest (sign 1) or smallest (sign -1) value of h in the region; ok is
// false, and the value infinite, where it has none.
func (g *Region) extreme(h Function, sign float64) (value float64, ok bool) {
	var points [16]regionPoint
	best, most := -1, 0.0
	for j, nd := range g.nodes {
		points[j] = g.climb(h, sign, nd)
		most = math.Max(most, points[j].length)
		if v := points[j].value; !math.IsNaN(v) && (best < 0 || (v-points[best].value)*sign > 0) {
			best = j
		}
	}
	open := math.Copysign(math.Inf(1), sign)
	if best < 0 || math.IsInf(points[best].value, 0) {
		return open, false
	}
	at := points[best]
	next := best + 1
	if at.slope*sign < 0 {
		next = best - 1
	}
	last := len(g.nodes) - 1
	// Between an end and the node beside it lies nothing.
	if best == 0 || best == last || next == 0 || next == last {
		i, end := 0, 0
		if best > last/2 {
			i, end = 1, last
		}
		if g.bounded[i] && (!g.line[i] || !(points[end].length > 1e-3*most)) {
			return open, false
		}
		return at.value, true
	}
	if at.slope == 0 || !(points[next].slope*at.slope < 0) {
		return at.value, true
	}
	const flat = 1e-7
	nd := g.nodes[best]
	findRoot(func(phi float64) float64 {
		x := g.climb(h, sign, regionNode{phi, nd.p})
		if (x.value-at.value)*sign > 0 {
			at.value = x.value
		}
		if math.Abs(x.slope) <= flat*math.Abs(at.slope) {
			return 0 // what is still to gain goes with its square
		}
		return x.slope
	}, nd.phi, at.slope, g.nodes[next].phi, points[next].slope)
	return at.value, true
}

// climb finds the extreme of h at one shape from nd.p. About a point where the residuals
// are r and their derivatives in the line J = QR, the largest h on ‖r + J δ‖² <= limit is
// at R δ = -Qᵀr + w sqrt(limit - ‖r - QQᵀr‖²)/‖w‖ with w = R⁻ᵀ∇h; steps are repeated
// until the residuals stay.
func (g *Region) climb(h Function, sign float64, nd regionNode) regionPoint {
	const most, tolerance, rounding = 60, 1e-11, 1e-6
	p, k := g.p, g.n-1
	copy(p, nd.p)
	p[shape] = g.shapeAt(nd.phi)
	own := g.r.Params()
	unknown := regionPoint{math.NaN(), math.NaN(), 0}
	before := math.Inf(1)
	for range most {
		g.eval(p, g.res, g.jac)
		value := h(p[:own], g.slope[:own])
		for i := range g.res {
			row := g.jac[i*g.n : (i+1)*g.n]
			copy(g.reduced[i*k:], row[:shape])
			copy(g.reduced[i*k+shape:(i+1)*k], row[shape+1:])
		}
		if !finite(g.res...) || !finite(g.reduced...) {
			return unknown
		}
		g.q.load(g.reduced, nil)
		g.q.factor()
		copy(g.b, g.res)
		g.q.mulQT(g.b)
		slack := g.limit - dot(g.b[k:], g.b[k:])
		copy(g.move, g.slope[:shape])
		copy(g.move[shape:], g.slope[shape+1:])
		g.q.solveT(g.move, g.w)
		length := math.Sqrt(dot(g.w, g.w))
		reach := 0.0 // of h, over length
		if slack > 0 && length > 0 {
			reach = sign * math.Sqrt(slack) / length
		}
		var moved float64
		for i, w := range g.w {
			g.step[i] = reach*w - g.b[i]
			moved += square(g.step[i])
		}
		moved = math.Sqrt(moved)
		// Where little is left of the region, rounding is what moves.
		size := moved / math.Sqrt(g.limit)
		if size <= tolerance || size <= rounding && moved > before/2 {
			out := regionPoint{value: value, slope: g.slope[shape], length: length}
			if reach != 0 {
				var pull float64 // half the slope of the sum of squares
				for i, r := range g.res {
					pull += r * g.jac[i*g.n+shape]
				}
				out.slope -= pull / reach
			}
			out.slope *= (g.ends[1] - g.ends[0]) / 2 * math.Cos(nd.phi)
			return out
		}
		// Errors in k: where steps do not shrink, shorter ones do.
		if moved > 0.7*before {
			floats.Scale(0.5, g.step)
		}
		before = moved
		g.q.solve(g.step, g.move, k)
		for i, d := range g.move {
			if i >= shape {
				i++
			}
			p[i] += d
		}
		if math.Abs(p[1]) > farEnergy {
			return regionPoint{math.Copysign(math.Inf(1), sign), 0, length}
		}
	}
	return unknown
}

// farEnergy is an energy beyond which a quantity has no end.
const farEnergy = 1000 * maxBarrier
