package fit

import (
	"math"
	"slices"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// stepsDesign is what searches for two steps in series with errors in k share on one
// design: curves
//
//	z_i = exp(w_i + a + θ C_i - ln(1 + e^t_i)) + error,  t = c + d C,
//
// with w and C those of the straight line, and a grid of bends. It is read-only once
// made.
type stepsDesign struct {
	bends []bend
	ratio []quad // of the bent curve to the line, less 1: n rows for each four
	kinds []bend // one of all that look alike, up to their strength
	looks []quad // ratio of these
	bound float64
}

// bend is a curve of the grid: (c, d), with the line a + θ C beside it that suits it to
// the sample's own.
type bend struct {
	c, d, a, theta float64
	level          int // of d
}

// newStepsDesign lays the grid over the design of line, which holds the sample's own
// fit, with its frame: levels of d and crossovers as in plan.layNodes.
func newStepsDesign(line *varpro) *stepsDesign {
	e := line.e
	s := &stepsDesign{bound: maxBarrier / e.scale[0]}
	col := append([]float64(nil), e.col[0]...)
	slices.Sort(col)
	col = slices.Compact(col)
	gap := func(x float64) float64 {
		i, _ := slices.BinarySearch(col, x)
		if i == 0 || i == len(col) {
			return 0
		}
		return col[i] - col[i-1]
	}
	var ratios, kinds, seen [][]float64
	level := 0
	for d := 0.5; ; d *= 2 {
		last := d >= s.bound || d >= 256
		d := math.Min(d, 0.99*s.bound)
		for x := -0.5 - 4/d; x <= 0.5+4/d; x += math.Max(1.5/d, gap(x)/3) {
			b := bend{c: -d * x, d: d, level: level}
			ratio := make([]float64, e.n)
			if !b.suit(line, ratio) {
				continue
			}
			look := make([]float64, e.n)
			for i, r := range ratio {
				look[i] = r * line.v[0][i]
			}
			for range 2 {
				for _, v := range line.v {
					floats.AddScaled(look, -dot(look, v), v)
				}
			}
			norm := floats.Norm(look, 2)
			if !(norm > 1e-7) {
				continue
			}
			floats.Scale(1/norm, look)
			s.bends, ratios = append(s.bends, b), append(ratios, ratio)
			if slices.ContainsFunc(seen, func(v []float64) bool { return dot(v, look) > bendCosine }) {
				continue
			}
			s.kinds, kinds, seen = append(s.kinds, b), append(kinds, ratio), append(seen, look)
		}
		level++
		if last {
			break
		}
	}
	s.ratio, s.looks = quads(ratios, e.n), quads(kinds, e.n)
	return s
}

// bendCosine is that of the angle below which two bends are one.
const bendCosine = 0.995

// suit finds the line beside a bend, by Gauss–Newton steps from its linear fit, and
// fills ratio; ok is false where there is none.
func (b *bend) suit(line *varpro, ratio []float64) (ok bool) {
	e, v := line.e, line.v[0]
	for step := range 8 {
		var s0, s1, s2, y0, y1 float64
		for i, x := range e.col[0] {
			t := b.c + b.d*x
			off := b.a + b.theta*x - math.Max(t, 0) - math.Log1p(math.Exp(-math.Abs(t)))
			h, y := math.Exp(off), -off
			if step > 0 {
				y = 1/h - 1 // in units of the slope
			} else {
				h = 1
			}
			w := square(v[i] * h)
			s0 += w
			s1 += w * x
			s2 += w * x * x
			if w > 0 {
				y0 += w * y
				y1 += w * x * y
			}
		}
		det := s0*s2 - s1*s1
		if !(det > 1e-14*s0*s2) {
			break
		}
		b.a += (s2*y0 - s1*y1) / det
		b.theta += (s0*y1 - s1*y0) / det
	}
	for i, x := range e.col[0] {
		t := b.c + b.d*x
		ratio[i] = math.Expm1(b.a + b.theta*x - math.Max(t, 0) - math.Log1p(math.Exp(-math.Abs(t))))
		if !finite(ratio[i]*v[i], b.a) {
			return false
		}
	}
	return true
}

// steps is the memory of one search for two steps in series. It looks for a sum of
// squares below a limit, and for no more than that.
type steps struct {
	*stepsDesign
	warm                 *[4]float64 // the sample's own fit: a, θ, c, d; nil for none
	along, slope, weight []float64
	saved                []float64 // by each bend
	start                [stepsStarts][4]float64
	cur, trial           stepsPoint
}

// stepsStarts is the number of starts from the grid.
const stepsStarts = 4

// stepsPoint is the sum of squares at (a, θ, c, d) with derivatives of its half.
type stepsPoint struct {
	p     [4]float64
	rss   float64 // +Inf out of bounds
	g     [4]float64
	h, gn [4][4]float64 // Hessian, and its part without the residuals: lower triangles
}

// newSteps returns the memory of a search beside fits of line. f is the fit of the
// curve to the sample.
func newSteps(d *stepsDesign, line *exponentials, f *Result) *steps {
	s := (&steps{stepsDesign: d, along: make([]float64, line.n)}).clone()
	if f.Usable() && f.P != nil {
		p, centre := f.P, line.centre[0]
		s.warm = &[4]float64{
			p[0] + p[1]*centre - line.o.lnScale, p[1] / line.scale[0],
			p[0] - p[2] + (p[1]-p[3])*centre, (p[1] - p[3]) / line.scale[0],
		}
	}
	return s
}

// clone is other memory for the same search.
func (s *steps) clone() *steps {
	n := len(s.along)
	v := func() []float64 { return make([]float64, n) }
	return &steps{stepsDesign: s.stepsDesign, warm: s.warm, along: v(), slope: v(), weight: v(), saved: make([]float64, len(s.bends))}
}

// fit looks for a curve whose Σ r² is below limit; line holds its best single
// exponential, with its frame. Where found it returns the sum at the minimum to which
// its way down leads.
func (s *steps) fit(line *varpro, limit float64) (rss float64, found bool) {
	starts := s.screen(line, line.best.value()-limit)
	if starts == 0 {
		return 0, false
	}
	if s.warm != nil {
		if rss, ok := s.descend(line, *s.warm, limit); ok {
			return rss, true
		}
	}
	for _, p := range s.start[:starts] {
		if rss, ok := s.descend(line, p, limit); ok {
			return rss, true
		}
	}
	return 0, false
}

// screen compares what the bends of the grid have in common with the residuals of the
// line, to first order about it, with what must be saved on its sum of squares, and
// fills start with the best. It returns 0 where none saves enough, with something
// added for what lies between the bends.
func (s *steps) screen(line *varpro, needed float64) (starts int) {
	// A bend adds v·ratio to the line, v its unit vector; line and slope take their part.
	v, e := line.v[0], line.e
	for i, x := range v {
		s.along[i], s.slope[i], s.weight[i] = line.r[i]*x, line.v[1][i]*x, x*x
	}
	between := betweenBends * math.Sqrt(line.best.rss/float64(e.n))
	amplitude := line.best.amplitude[0] * line.length
	at := [4]float64{math.Log(line.best.amplitude[0]) - line.best.ln[0], line.best.theta[0]}
	var most, best float64
	for j := 0; j < len(s.kinds); j += 4 {
		c, one, left := s.products(s.looks[j/4*e.n:])
		for a := range min(4, len(s.kinds)-j) {
			if !(c[a] > 0 && left[a] > 0) {
				continue // it bends the other way
			}
			most = max(most, c[a]/math.Sqrt(left[a])*(1+betweenBends/10)+between)
			// One that is far too strong for the data is made less.
			strength := c[a] / left[a] / amplitude
			if saved := c[a] * c[a] / left[a]; strength < 0.3 && saved > best && one[a] < 1 {
				best = saved
				b := s.kinds[j+a]
				b.c, b.d = shorten(b.c, b.d, strength, math.Abs(b.c) < b.d/2)
				s.start[0] = [4]float64{at[0] + b.a*strength, at[1] + b.theta*strength, b.c, b.d}
			}
		}
	}
	if most*most < needed {
		return 0
	}
	if best > 0 {
		starts = 1
	}
	// The best crossovers of each level, each with the amplitude that suits it.
	for j := 0; j < len(s.bends); j += 4 {
		c, one, left := s.products(s.ratio[j/4*e.n:])
		for a := range min(4, len(s.bends)-j) {
			// With the part of the slope taken out of the curve v (1 + ratio).
			length2 := 1 + 2*one[a] + square(one[a]) + left[a]
			s.saved[j+a] = 0
			if with := amplitude*(1+one[a]) + c[a]; c[a] > 0 && with > 0 {
				s.saved[j+a] = square(with)/length2 - square(amplitude)
			}
		}
	}
	first := starts
	var list [stepsStarts]float64
	for j, saved := range s.saved {
		b := s.bends[j]
		if !(saved > 0) || j > 0 && s.bends[j-1].level == b.level && s.saved[j-1] > saved ||
			j+1 < len(s.bends) && s.bends[j+1].level == b.level && s.saved[j+1] >= saved {
			continue
		}
		i := starts
		for i > first && list[i-1] < saved {
			i--
		}
		if i == stepsStarts {
			continue
		}
		starts = min(starts+1, stepsStarts)
		copy(list[i+1:starts], list[i:])
		copy(s.start[i+1:starts], s.start[i:])
		list[i], s.start[i] = saved, [4]float64{at[0] + b.a, at[1] + b.theta, b.c, b.d}
	}
	return starts
}

// products are those of four ratios with the residuals, the line and themselves, and
// the squared length of what line and slope leave; 0 where that is nothing.
func (s *steps) products(ratio []quad) (c, one, left quad) {
	c = dot4(s.along, ratio)
	if !(max(c[0], c[1], c[2], c[3]) > 0) {
		return c, one, left
	}
	one, own := dot4(s.weight, ratio), norms4(s.weight, ratio)
	two := dot4(s.slope, ratio)
	for a := range left {
		if v := own[a] - square(one[a]) - square(two[a]); v > 1e-10*own[a] {
			left[a] = v
		}
	}
	return c, one, left
}

// betweenBends is the part of a standard deviation that a curve between the bends may
// have more in common with the residuals.
const betweenBends = 0.1

// norms4 is the sum of the squares of four vectors, weighted.
func norms4(weight []float64, v []quad) (p quad) {
	v = v[:len(weight)]
	var p0, p1, p2, p3 float64
	for i, w := range weight {
		r := &v[i]
		p0 += w * r[0] * r[0]
		p1 += w * r[1] * r[1]
		p2 += w * r[2] * r[2]
		p3 += w * r[3] * r[3]
	}
	return quad{p0, p1, p2, p3}
}

// at evaluates a point.
func (s *steps) at(line *varpro, p [4]float64, out *stepsPoint) {
	out.p, out.rss = p, math.Inf(1)
	lnW, x, z := line.e.lnW, line.e.col[0], line.z
	lnW, x = lnW[:len(z)], x[:len(z)]
	var rss float64
	var n0, n1, n2 [3]float64 // Σ f² x^k times 1, s, s²; s is the share of step 2 in the time 1/k
	var b0, b1, b2 [3]float64 // Σ z f x^k likewise
	for i, zi := range z {
		xi := x[i]
		l, t := lnW[i]+p[0]+p[1]*xi, p[2]+p[3]*xi
		var f, share float64
		if t > 0 {
			u := math.Exp(-t)
			share = 1 / (1 + u)
			f = math.Exp(l-t) * share
		} else {
			u := math.Exp(t)
			f = math.Exp(l) / (1 + u)
			share = u / (1 + u)
		}
		rss += square(zi - f)
		xx := xi * xi
		zf, ff := zi*f, f*f
		z1, f1 := zf*share, ff*share
		z2, f2 := z1*share, f1*share
		b0[0] += zf
		b0[1] += zf * xi
		b0[2] += zf * xx
		b1[0] += z1
		b1[1] += z1 * xi
		b1[2] += z1 * xx
		b2[0] += z2
		b2[1] += z2 * xi
		b2[2] += z2 * xx
		n0[0] += ff
		n0[1] += ff * xi
		n0[2] += ff * xx
		n1[0] += f1
		n1[1] += f1 * xi
		n1[2] += f1 * xx
		n2[0] += f2
		n2[1] += f2 * xi
		n2[2] += f2 * xx
	}
	// The amplitude that suits the rest, without which a step along the bend ends far off.
	scale := b0[0] / n0[0]
	if math.Abs(scale-1) < 0.1 {
		rss -= square(b0[0]-n0[0]) / n0[0]
	} else { // where that would be a difference of large numbers
		rss = line.zz - square(b0[0])/n0[0]
	}
	if !(scale > 0) || !finite(rss, n0[0]) {
		return
	}
	out.rss = rss
	out.p[0] += math.Log(scale)
	// The gradient of ln f is (1, x, -s, -s x); of its second derivatives those of the
	// bend are -s(1 - s) {1, x, x²}. What is summed: r f, and f² - r f.
	for _, v := range [][2]*[3]float64{{&n0, &b0}, {&n1, &b1}, {&n2, &b2}} {
		for k := range 3 {
			ff, zf := square(scale)*v[0][k], scale*v[1][k]
			v[0][k], v[1][k] = ff, zf-ff
		}
	}
	out.g = [4]float64{-b0[0], -b0[1], b1[0], b1[1]}
	lower := func(a, b, c *[3]float64) [4][4]float64 {
		return [4][4]float64{
			{a[0]},
			{a[1], a[2]},
			{-b[0], -b[1], c[0]},
			{-b[1], -b[2], c[1], c[2]},
		}
	}
	out.gn = lower(&n0, &n1, &n2)
	for k := range 3 {
		bend := b1[k] - b2[k]
		b0[k], b1[k], b2[k] = n0[k]-b0[k], n1[k]-b1[k], n2[k]-b2[k]+bend
	}
	out.h = lower(&b0, &b1, &b2)
}

// descend goes down from p to a minimum below limit; ok is false where it gives up.
func (s *steps) descend(line *varpro, p [4]float64, limit float64) (rss float64, ok bool) {
	const enough, most, mostSlow = 1e-9, 40, 5
	cur := &s.cur
	if s.at(line, p, cur); !(cur.rss < math.Inf(1)) {
		return 0, false
	}
	var damping float64
	slow := 0
	for k := range most {
		s.hold(cur)
		step, decrement, definite := solve4(&cur.h, &cur.gn, &cur.g, 0)
		if definite && damping == 0 {
			if decrement <= enough*cur.rss {
				return cur.rss - decrement, cur.rss-decrement < limit
			}
			// Newton's step foretells what is left to gain, but for its curvature.
			if k > 0 && cur.rss-4*decrement > limit {
				return 0, false
			}
		}
		if !definite || damping > 0 {
			damping = max(damping, 1e-6)
			if step, _, definite = solve4(&cur.gn, &cur.gn, &cur.g, damping); !definite {
				break
			}
		}
		next := cur.p
		for j := range next {
			next[j] += step[j]
		}
		next[1] = max(-s.bound, min(s.bound, next[1]))
		next[3] = max(next[1]-s.bound, min(next[1]+s.bound, next[3]))
		s.at(line, next, &s.trial)
		gain := cur.rss - s.trial.rss
		// Steps that leave far more to go than they gain lead nowhere, and in a valley
		// the sum of squares hardly changes.
		if gain < math.Max((cur.rss-limit)/8, 1e-5*cur.rss) {
			if slow++; slow > mostSlow {
				if gain > 0 {
					*cur = s.trial
				}
				break
			}
		}
		if gain > 0 {
			*cur = s.trial
			if damping /= 10; damping < 1e-5 {
				damping = 0
			}
		} else if damping = max(1e-4, damping*30); damping > 1e6 {
			break
		}
	}
	return cur.rss, cur.rss < limit
}

// hold makes the matrices stiff where a barrier that lies at its bound would go beyond.
func (s *steps) hold(at *stepsPoint) {
	const near, stiff = 1 - 1e-9, 1e6
	first, second := at.p[1]/s.bound, (at.p[1]-at.p[3])/s.bound
	// The slope of the sum of squares with the second barrier is -g of d, with the
	// first, the second held, g of θ and d together.
	for _, h := range []*[4][4]float64{&at.h, &at.gn} {
		k := stiff * (math.Abs(h[1][1]) + math.Abs(h[3][3]))
		if math.Abs(first) >= near && first*(at.g[1]+at.g[3]) < 0 {
			h[1][1] += k
		}
		if math.Abs(second) >= near && second*at.g[3] > 0 {
			h[1][1] += k
			h[3][1] -= k
			h[3][3] += k
		}
	}
}

// solve4 solves (H + damping·diag D) step = -g by Cholesky's method, and gives -g·step;
// definite is false where the matrix is not positive definite.
func solve4(h, diag *[4][4]float64, g *[4]float64, damping float64) (step [4]float64, decrement float64, definite bool) {
	var l [4][4]float64
	for i := range 4 {
		for j := range i + 1 {
			v := h[i][j]
			if i == j {
				v += damping * diag[i][i]
			}
			whole := math.Abs(v)
			for k := range j {
				v -= l[i][k] * l[j][k]
			}
			if i > j {
				l[i][j] = v / l[j][j]
				continue
			}
			if !(v > 1e-13*whole) {
				return step, 0, false
			}
			l[i][i] = math.Sqrt(v)
		}
	}
	for i := range 4 {
		v := -g[i]
		for k := range i {
			v -= l[i][k] * step[k]
		}
		step[i] = v / l[i][i]
		decrement += step[i] * step[i]
	}
	for i := 3; i >= 0; i-- {
		for k := i + 1; k < 4; k++ {
			step[i] -= l[k][i] * step[k]
		}
		step[i] /= l[i][i]
	}
	return step, decrement, true
}

// isSeries reports whether the curve is two steps in series.
func isSeries(c models.Curve) bool {
	sign, ok := softplusSign(c)
	return ok && sign < 0
}
