package fit

import (
	"math"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// bentInK fits a curve of which the straight line is a limit to errors in k, from the
// line's own fit: two steps in series, or a seeded curve. A grid of bent curves is
// compared first, each with the line that suits it to first order about the straight
// fit. It is a workspace of one goroutine.
type bentInK struct {
	o      *objective
	pr     Problem
	box    *boxed // nil: the problem is in canonical parameters
	seeded *seededDesign
	engine *solver
	nodes  []bentNode
	x      []float64
	// steps of a short search, and most of the last one: a fit that wants more is on
	// its way along a valley, in which the sum of squares hardly changes.
	short, long int
	// limit is an Σ r² that is of interest: after the short searches a curve that is far
	// from it is given up, as if it were no better than the line.
	limit float64

	k, target, weight []float64 // scratch
	starts            [][]float64
	from, p           []float64
	rss               float64 // of p
}

// bentNode is ln k = off + a + e·phi.
type bentNode struct {
	q        [2]float64
	off, phi []float64
}

// newBentInK returns nil for curves of another kind.
func newBentInK(o *objective) *bentInK {
	s := o.s
	n := s.Len()
	w := &bentInK{o: o, engine: newSolver(n, o.n), x: make([]float64, n), short: 50, long: 200, limit: math.Inf(1)}
	w.k, w.target, w.weight = make([]float64, n), make([]float64, n), make([]float64, n)
	for range bentStarts + 2 {
		w.starts = append(w.starts, make([]float64, o.n))
	}
	w.from, w.p = make([]float64, o.n), make([]float64, o.n)
	models.CentredX(s.TRef, s.T, w.x)
	if c, ok := o.c.(models.Seeded); ok {
		w.seeded = newSeededDesign(c, s.TRef, s.T)
		w.box = o.boxed(w.seeded)
		w.pr = w.box.Problem
		for j, q := range w.seeded.seeds {
			if q == w.seeded.straight {
				continue
			}
			w.nodes = append(w.nodes, bentNode{[2]float64{q}, w.seeded.off[j*n : (j+1)*n], w.seeded.phi[j*n : (j+1)*n]})
		}
		return w
	}
	sign, ok := softplusSign(o.c)
	if !ok || sign > 0 {
		return nil
	}
	w.pr = o.problem()
	low, high := floats.Min(w.x), floats.Max(w.x)
	minus := make([]float64, n)
	floats.AddScaled(minus, -1, w.x)
	for _, d := range []float64{1, 3, 8, 20, 60} { // over the range
		d = math.Min(d/(high-low), 0.9*maxBarrier)
		for j := range 11 {
			q := [2]float64{0, d}
			q[0] = d * (low + (high-low)*float64(j-1)/8)
			off := make([]float64, n)
			o.c.(models.Shaped).Shape(w.x, q[:], off, nil, nil)
			w.nodes = append(w.nodes, bentNode{q, off, minus})
		}
	}
	return w
}

// point turns line and shape into a point of the problem.
func (w *bentInK) point(a, e float64, q []float64, out []float64) {
	if w.box != nil {
		out[0], out[1], out[2] = a, e, q[0]
		w.box.shrink(out)
		return
	}
	w.o.c.(models.Shaped).FromShape(a, e, q, out)
}

// bentStarts is the number of parts of the grid. The best curve of each is a start: of
// a quick search only the first two of these.
const bentStarts = 5

// fit fits the objective's data, line and rss being the straight line's parameters and
// its Σ r², and warm up to two more starts. found is false where nothing improves on the
// line. p is valid until the next call.
func (w *bentInK) fit(line []float64, rss float64, warm [][]float64) (p []float64, found bool) {
	var sw, mx float64
	for i, x := range w.x {
		k := math.Exp(line[0] - line[1]*x - w.o.lnScale)
		w.k[i] = k
		w.weight[i] = square(k * w.o.root[i])
		w.target[i] = line[0] - line[1]*x + (w.o.y[i]-k)/k
		sw += w.weight[i]
		mx += w.weight[i] * x
	}
	if !(sw > 0) || math.IsInf(sw, 0) {
		return nil, false
	}
	type start struct {
		rss, a, e float64
		q         []float64
	}
	var best [bentStarts]start
	for i := range best {
		best[i].rss = math.Inf(1)
	}
	bends, quick := false, w.limit < math.Inf(1)
	for j := range w.nodes {
		nd := &w.nodes[j]
		a, e, promise := w.line(nd)
		bends = bends || promise
		if !promise {
			continue
		}
		st := start{a: a, e: e, q: nd.q[:]}
		for i, off := range nd.off {
			st.rss += square((math.Exp(off+a+e*nd.phi[i]-w.o.lnScale) - w.o.y[i]) * w.o.root[i])
		}
		if part := &best[j*bentStarts/len(w.nodes)]; st.rss < part.rss {
			*part = st
		}
	}
	if !bends {
		return nil, false
	}
	n, most := 0, bentStarts
	if quick {
		most = 2
	}
	for i := range most { // the best first
		for j := i + 1; j < bentStarts; j++ {
			if best[j].rss < best[i].rss {
				best[i], best[j] = best[j], best[i]
			}
		}
	}
	for _, b := range best[:most] {
		if finite(b.rss, b.a, b.e) {
			w.point(b.a, b.e, b.q, w.starts[n])
			n++
		}
	}
	for _, p := range warm[:min(len(warm), 2)] {
		copy(w.starts[n], p)
		if w.box != nil {
			w.box.shrink(w.starts[n])
		}
		n++
	}
	least := math.Inf(1)
	for i := range n {
		start := w.starts[n-1-i]
		// Short first steps stay in the valley in which a start lies.
		_, _, _ = w.engine.trustRegion(w.pr, start, Options{Factor: 0.01, Tolerance: 1e-6, MaxIterations: w.short})
		if rss := floats.Dot(w.engine.r, w.engine.r); rss < least {
			least = rss
			copy(w.from, w.engine.p)
			if least < w.limit && quick {
				break
			}
		}
	}
	// Half of what was gained, on top, is more than further steps gain.
	if least-(rss-least)/2 > w.limit {
		return nil, false
	}
	// On the way to the line it would go on for ever.
	if !(least < rss*(1-improvement)) {
		return nil, false
	}
	if _, ok, _ := w.engine.trustRegion(w.pr, w.from, Options{MaxIterations: w.long}); ok {
		w.engine.polish(w.pr)
		w.pr.Eval(w.engine.p, w.engine.r, nil)
	}
	w.rss = floats.Dot(w.engine.r, w.engine.r)
	copy(w.p, w.engine.p)
	if w.box != nil {
		w.box.expand(w.p)
		copy(w.p, w.box.full)
	} else if w.p[3] < w.p[1] { // parameters in their canonical order
		w.p[0], w.p[1], w.p[2], w.p[3] = w.p[2], w.p[3], w.p[0], w.p[1]
	}
	return w.p, true
}

// line fits the line beside a node to the target, and tells whether bending towards the
// node goes the way the data do.
func (w *bentInK) line(nd *bentNode) (a, e float64, promise bool) {
	var sw, mx, my, mo, mp float64
	for i, wi := range w.weight {
		sw += wi
		mx += wi * w.x[i]
		my += wi * w.target[i]
		mo += wi * nd.off[i]
		mp += wi * nd.phi[i]
	}
	mx, my, mo, mp = mx/sw, my/sw, mo/sw, mp/sw
	var xx, xy, xo, xp, pp, py, po, yo, yp float64
	for i, wi := range w.weight {
		x, y, o, p := w.x[i]-mx, w.target[i]-my, nd.off[i]-mo, nd.phi[i]-mp
		xx += wi * x * x
		xy += wi * x * y
		xo += wi * x * o
		xp += wi * x * p
		pp += wi * p * p
		py += wi * p * y
		po += wi * p * o
		yo += wi * y * o
		yp += wi * y * p
	}
	e = (py - po) / pp
	a = my - mo - e*mp
	// What the data, less their line, have in common with the node, less its own.
	return a, e, yo-xy*xo/xx+e*(yp-xy*xp/xx) > 0
}
