package fit

import (
	"math"

	"onebarrier/models"
)

// resampleDesign is what all resamples of one sample share: the plan, the columns
// of the linear curves, the warm starts and the screens of the shaped ones. It is
// read-only once made, and workers share it.
type resampleDesign struct {
	*plan
	criterion
	s      *Sample
	params []int // number of parameters given out for each candidate
	needs  []int // number of parameters of each candidate

	// base is the sample's own straight line, w·(base1 p1 + base2 p2) in whitened
	// form. It is taken off every resample first, which keeps the digits of what
	// is left.
	base         []float64
	base1, base2 float64

	atRef      float64 // u at the sample's T_ref
	group      []int   // number of the temperature of each entry
	directions [][]float64
	gram       []float64 // directions·directions
	linear     []linearCandidate
	shaped     []shapedCandidate
	columns    [][][4]float64 // directions and warm-start columns in groups of four
	coarse     cover
	fine       cover
}

// term is a whitened column of a linear curve: scale·direction + w·(a + b u).
type term struct {
	direction   int // -1: none
	scale, a, b float64
}

// linearCandidate is a curve a + b u + offset + Σ β_k column_k.
type linearCandidate struct {
	index  int
	offset term
	extra  []term // at most two
}

// shapedCandidate is a curve of the projected kernel.
type shapedCandidate struct {
	index int
	curve models.Shaped
	sign  float64
	warm  *warmStart // nil where the estimate cannot be trusted as a start
}

// newResampleDesign returns nil where some candidate is not served.
func newResampleDesign(s *Sample, curves []models.Curve, fits []*Result, crit criterion, shapedParams bool) *resampleDesign {
	if s.Model.InK() {
		return nil
	}
	d := &resampleDesign{plan: newPlan(s.T, s.V), s: s, criterion: crit}
	if d.width == 0 {
		return nil
	}
	d.atRef = d.shift(s.TRef)
	d.baseLine()
	for j, c := range curves {
		np := len(c.Info().Params)
		d.needs = append(d.needs, np)
		d.params = append(d.params, np)
		if b, ok := c.(models.Basis); ok {
			lc, ok := d.linearTerms(b)
			if !ok {
				return nil
			}
			lc.index = j
			d.linear = append(d.linear, lc)
			continue
		}
		sign, ok := softplusSign(c)
		if !ok {
			return nil
		}
		if !shapedParams {
			d.params[j] = 0
		}
		shaped := c.(models.Shaped)
		d.shaped = append(d.shaped, shapedCandidate{
			index: j, curve: shaped, sign: sign, warm: d.newWarmStart(shaped, sign, fits[j]),
		})
	}
	d.interleave()
	if len(d.shaped) > 0 {
		d.makeNodes()
		if crit.screens {
			d.coarse = d.newCover(coarseCos)
			d.fine = d.newCover(fineCos)
		}
	}
	return d
}

func (d *resampleDesign) baseLine() {
	d.base = make([]float64, len(d.rows))
	for i, r := range d.rows {
		v := r.w * d.s.Y[i]
		d.base1 += r.p1 * v
		d.base2 += r.p2 * v
	}
	a, b := d.lineAt(d.base1, d.base2)
	d.group = make([]int, len(d.rows))
	seen := map[float64]int{}
	for i, r := range d.rows {
		d.base[i] = a + b*r.u
		t := d.s.T[i]
		if _, ok := seen[t]; !ok {
			seen[t] = len(seen)
		}
		d.group[i] = seen[t]
	}
	// base is a line in u to rounding; its coordinates must be those of what is
	// taken off, not of what was meant.
	d.base1, d.base2 = 0, 0
	for i, r := range d.rows {
		d.base1 += r.p1 * r.w * d.base[i]
		d.base2 += r.p2 * r.w * d.base[i]
	}
}

// linearTerms reads the columns of a linear curve. Its first two must be 1 and U
// with U = (T - T_ref)/(R T T_ref), and no more than two others may follow.
func (d *resampleDesign) linearTerms(c models.Basis) (linearCandidate, bool) {
	np := len(c.Info().Params)
	n := len(d.rows)
	if np < 2 || np > 4 {
		return linearCandidate{}, false
	}
	offset, x := make([]float64, n), make([]float64, n*np)
	c.Columns(d.s.TRef, d.s.T, offset, x)
	u := make([]float64, n)
	models.CentredX(d.s.TRef, d.s.T, u)
	for i := range n {
		if x[i*np] != 1 || !(math.Abs(x[i*np+1]+u[i]) <= 1e-12*d.width) {
			return linearCandidate{}, false
		}
	}
	lc := linearCandidate{offset: d.term(offset)}
	col := make([]float64, n)
	for j := 2; j < np; j++ {
		for i := range n {
			col[i] = x[i*np+j]
		}
		t := d.term(col)
		if t.direction < 0 {
			return linearCandidate{}, false
		}
		lc.extra = append(lc.extra, t)
	}
	return lc, true
}

// term splits a column into its line and a multiple of a unit vector orthogonal to
// lines. Columns that differ by a line and a factor share the vector: ln T and the
// third column of power-prefactor do.
func (d *resampleDesign) term(col []float64) term {
	n := len(d.rows)
	v := make([]float64, n)
	var a1, a2, length float64
	for i, r := range d.rows {
		v[i] = r.w * col[i]
		length += v[i] * v[i]
		a1 += r.p1 * v[i]
		a2 += r.p2 * v[i]
	}
	t := term{direction: -1}
	t.a, t.b = d.lineAt(a1, a2)
	projectOut(d.rows, v)
	var rest float64
	for _, vi := range v {
		rest += vi * vi
	}
	if rest <= square(1e-13)*length {
		return t
	}
	t.scale = math.Sqrt(rest)
	for i := range v {
		v[i] /= t.scale
	}
	for k, e := range d.directions {
		if c := dot(e, v); 1-math.Abs(c) < 1e-12 {
			t.direction = k
			t.scale *= c
			return t
		}
	}
	t.direction = len(d.directions)
	d.directions = append(d.directions, v)
	return t
}

func dot(a, b []float64) float64 {
	b = b[:len(a)]
	var s float64
	for i, ai := range a {
		s += ai * b[i]
	}
	return s
}

// interleave fills gram and lays the columns whose products with a resample are
// wanted out in groups of four.
func (d *resampleDesign) interleave() {
	k := len(d.directions)
	d.gram = make([]float64, k*k)
	for i, a := range d.directions {
		for j, b := range d.directions {
			d.gram[i*k+j] = dot(a, b)
		}
	}
	all := append([][]float64(nil), d.directions...)
	for j := range d.shaped {
		if w := d.shaped[j].warm; w != nil {
			w.first = len(all)
			all = append(all, w.cols[:]...)
		}
	}
	for len(all)%4 != 0 {
		all = append(all, make([]float64, len(d.rows)))
	}
	d.columns = fours(all, len(d.rows))
}

// fours lays vectors of length n, a multiple of four of them, out in groups of four.
func fours(vectors [][]float64, n int) [][][4]float64 {
	var groups [][][4]float64
	for g := 0; g+4 <= len(vectors); g += 4 {
		rows := make([][4]float64, n)
		for i := range rows {
			for j := range 4 {
				rows[i][j] = vectors[g+j][i]
			}
		}
		groups = append(groups, rows)
	}
	return groups
}

func dot4(z []float64, cols [][4]float64) (a, b, c, d float64) {
	cols = cols[:len(z)]
	for i, zi := range z {
		r := &cols[i]
		a += zi * r[0]
		b += zi * r[1]
		c += zi * r[2]
		d += zi * r[3]
	}
	return
}

// warmStart predicts the estimate of a resample from that of the sample to second
// order. With f(q) the projected shape, ζ = z - f(q₀), J and F its first and second
// derivatives at q₀ = (c₀, d₀), the normal equations give
//
//	JᵀJ δ₁ = Jᵀζ,   JᵀJ δ₂ = (F δ₁)ᵀζ - (F δ₁)ᵀJδ₁ - ½ Jᵀ(F δ₁ δ₁).
type warmStart struct {
	c, d          float64
	cols          [5][]float64 // Jc, Jd, Fcc, Fcd, Fdd
	first         int          // place of cols among the interleaved columns
	zero          [5]float64   // cols·f(q₀)
	h00, h01, h11 float64      // (JᵀJ)⁻¹
	quad          [2][3]float64
}

// maxCurvature bounds σ·max‖F h h‖/‖J h‖², the curvature of Bates & Watts (1980,
// J. R. Stat. Soc. B 42, 1) in units of the scatter: below it a resample's minimum
// is the one that continues the sample's.
const maxCurvature = 1

// newWarmStart returns nil where the fit is not a trustworthy start.
func (d *resampleDesign) newWarmStart(c models.Shaped, sign float64, f *Result) *warmStart {
	if f == nil || f.Status != Converged || d.s.Len() <= len(f.P) {
		return nil
	}
	_, _, q := c.ToShape(f.P)
	w := &warmStart{d: q[1] * d.width}
	w.c = q[0] - w.d*d.atRef
	n := len(d.rows)
	shape := make([]float64, n)
	for j := range w.cols {
		w.cols[j] = make([]float64, n)
	}
	for i, r := range d.rows {
		v, s := d.tab.at(w.c + w.d*r.u)
		h := r.w * s * (1 - s)
		shape[i] = r.w * v
		w.cols[0][i], w.cols[1][i] = r.w*s, r.w*s*r.u
		w.cols[2][i], w.cols[3][i], w.cols[4][i] = h, h*r.u, h*r.u*r.u
	}
	projectOut(d.rows, shape)
	for j := range w.cols {
		projectOut(d.rows, w.cols[j])
		w.zero[j] = dot(w.cols[j], shape)
	}
	j0, j1 := w.cols[0], w.cols[1]
	m00, m01, m11 := dot(j0, j0), dot(j0, j1), dot(j1, j1)
	det := m00*m11 - m01*m01
	if !(det > 1e-9*m00*m11) {
		return nil
	}
	w.h00, w.h01, w.h11 = m11/det, -m01/det, m00/det
	fs := [2][2][]float64{{w.cols[2], w.cols[3]}, {w.cols[3], w.cols[4]}}
	for j := range 2 {
		coef := func(k, l int) float64 { return dot(fs[j][k], w.cols[l]) + 0.5*dot(w.cols[j], fs[k][l]) }
		w.quad[j] = [3]float64{coef(0, 0), coef(0, 1) + coef(1, 0), coef(1, 1)}
	}
	sigma := 1.0
	if !d.s.Model.KnownSigma() {
		sigma = math.Sqrt(f.RSS / float64(d.s.Len()-len(f.P)))
	}
	// Directions of unit length in the tangent plane: h = L⁻ᵀ(cos, sin), JᵀJ = LLᵀ.
	l00 := math.Sqrt(m00)
	l10 := m01 / l00
	l11 := math.Sqrt(m11 - l10*l10)
	for a := range 48 {
		sin, cos := math.Sincos(math.Pi * float64(a) / 48)
		h1 := sin / l11
		h0 := (cos - l10*h1) / l00
		var k2 float64
		for i := range n {
			k2 += square(w.cols[2][i]*h0*h0 + 2*w.cols[3][i]*h0*h1 + w.cols[4][i]*h1*h1)
		}
		if !(sigma*math.Sqrt(k2) < maxCurvature) {
			return nil
		}
	}
	return w
}

// predict returns the predicted estimate from the products of z with cols.
func (w *warmStart) predict(t *[5]float64) (c, d float64) {
	g0, g1 := t[0]-w.zero[0], t[1]-w.zero[1]
	f00, f01, f11 := t[2]-w.zero[2], t[3]-w.zero[3], t[4]-w.zero[4]
	c1, d1 := w.h00*g0+w.h01*g1, w.h01*g0+w.h11*g1
	cc, cd, dd := c1*c1, c1*d1, d1*d1
	r0 := f00*c1 + f01*d1 - w.quad[0][0]*cc - w.quad[0][1]*cd - w.quad[0][2]*dd
	r1 := f01*c1 + f11*d1 - w.quad[1][0]*cc - w.quad[1][1]*cd - w.quad[1][2]*dd
	return w.c + c1 + w.h00*r0 + w.h01*r1, w.d + d1 + w.h01*r0 + w.h11*r1
}

// cover is a set of unit shapes such that every shape of the kernel is within the
// angle slack of one of them. With ρ the straight line's RSS, no shape can bring it
// below ρ·sin²(max(0, angle to the nearest - slack)).
type cover struct {
	shapes   [][]float64
	fours    [][][4]float64
	cos, sin float64 // of the slack
}

// Cosines of the angles within which shapes are represented by one of a cover, and
// how much of each angle is kept for the gaps of the grid that is covered.
const (
	coarseCos = 0.98
	fineCos   = 0.998
	gridAngle = 0.02
)

// newCover covers a fine grid of shapes: d in steps of √2, crossovers every 0.35/d,
// at least twelve to a gap of the design, from 8/d below to 8/d above it, where what
// is left of the shape is an exponential.
func (d *resampleDesign) newCover(cos float64) cover {
	slack := math.Acos(cos)
	c := cover{cos: cos, sin: math.Sin(slack)}
	near := math.Cos(slack - gridAngle)
	n := len(d.rows)
	v := make([]float64, n)
	for _, nd := range d.grid() {
		for i, r := range d.rows {
			s, _ := d.tab.at(nd.c + nd.d*r.u)
			v[i] = r.w * s
		}
		whole := math.Sqrt(dot(v, v))
		projectOut(d.rows, v)
		length := math.Sqrt(dot(v, v))
		if !(length > 1e-10*whole) {
			continue
		}
		covered := false
		for _, s := range c.shapes {
			if dot(s, v) >= near*length {
				covered = true
				break
			}
		}
		if covered {
			continue
		}
		unit := make([]float64, n)
		for i := range v {
			unit[i] = v[i] / length
		}
		c.shapes = append(c.shapes, unit)
	}
	padded := append([][]float64(nil), c.shapes...)
	for len(padded)%4 != 0 {
		padded = append(padded, padded[0])
	}
	c.fours = fours(padded, n)
	return c
}

// grid is the fine grid of shapes of newCover.
func (d *resampleDesign) grid() []node {
	var g []node
	gap := d.gaps()
	for v := 0.25; ; v *= math.Sqrt2 {
		dd := math.Min(v, d.maxD)
		for x := d.low - 8/dd; x <= d.high+8/dd; {
			g = append(g, node{c: -dd * x, d: dd})
			x += math.Max(0.35/dd, gap(x)/12)
		}
		if v >= d.maxD || v > 512 {
			return g
		}
	}
}

// most is the largest product with a unit shape that still rules out that any shape
// leaves less than limit of a resample with z·z = zz. decided is true where no
// product matters: most is then +Inf if that is ruled out, -Inf if it is not.
func (c *cover) most(zz, limit float64) (most float64, decided bool) {
	need := (zz - limit) / zz
	if !(need > 0) {
		return math.Inf(-1), true
	}
	if need >= 1 {
		return math.Inf(1), true
	}
	// cos(angle - slack) <= √need for every shape.
	cn, sn := math.Sqrt(need), math.Sqrt(1-need)
	if cn <= c.sin { // some shape may be nearer than the slack from anywhere
		return math.Inf(-1), true
	}
	return (cn*c.cos - sn*c.sin) * math.Sqrt(zz), false
}

// excludes reports whether no shape can leave less than limit of the resample z·sign
// with z·z = zz.
func (c *cover) excludes(z []float64, sign, zz, limit float64) bool {
	most, decided := c.most(zz, limit)
	if decided {
		return math.IsInf(most, 1)
	}
	for _, g := range c.fours {
		a0, a1, a2, a3 := dot4(z, g)
		if sign*a0 > most || sign*a1 > most || sign*a2 > most || sign*a3 > most {
			return false
		}
	}
	return true
}
