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
	seeded     []seededCandidate
	weight     []float64 // 1/V, for these
	columns    []quad    // directions and warm-start columns
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

// seededCandidate is a curve that is searched over its seeds, with its own line: the
// complement of {1, u} does not serve it.
type seededCandidate struct {
	index  int
	design *seededDesign
}

// newResampleDesign returns nil where some candidate is not served.
func newResampleDesign(s *Sample, curves []models.Curve, fits []*Result, crit criterion, shapedParams bool) *resampleDesign {
	if s.Model.InK() {
		return nil
	}
	d := &resampleDesign{plan: planOf(s.T, s.V), s: s, criterion: crit}
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
		if !shapedParams {
			d.params[j] = 0
		}
		if c, ok := c.(models.Seeded); ok {
			d.seeded = append(d.seeded, seededCandidate{j, newSeededDesign(c, s.TRef, s.T)})
			continue
		}
		sign, ok := softplusSign(c)
		if !ok {
			return nil
		}
		shaped := c.(models.Shaped)
		d.shaped = append(d.shaped, shapedCandidate{
			index: j, curve: shaped, sign: sign, warm: d.newWarmStart(shaped, sign, fits[j]),
		})
	}
	d.interleave()
	d.weight = reciprocals(s.V)
	if len(d.shaped) > 0 {
		d.makeNodes()
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
	_, d.group = models.NumberTemperatures(d.s.T)
	for i, r := range d.rows {
		d.base[i] = a + b*r.u
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
	projectOutTwice(d.rows, v)
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
	d.columns = quads(all, len(d.rows))
}

// warmStart predicts the estimate of a resample from that of the sample to second
// order. With f(q) the projected shape, ζ = z - f(q₀), J and F its first and second
// derivatives at q₀ = (c₀, d₀), the normal equations give
//
//	JᵀJ δ₁ = Jᵀζ,   JᵀJ δ₂ = (F δ₁)ᵀζ - (F δ₁)ᵀJδ₁ - ½ Jᵀ(F δ₁ δ₁).
type warmStart struct {
	c, d          float64
	cols          [5][]float64 // Jc, Jd, Fcc, Fcd, Fdd
	first         int          // place of cols among d.columns
	zero          [5]float64   // cols·f(q₀)
	h00, h01, h11 float64      // (JᵀJ)⁻¹
	quad          [2][3]float64
	m00, m01, m11 float64 // JᵀJ
	reach2        float64 // square of the farthest ‖J(q - q₀)‖ that is trusted
}

// maxCurvature bounds σ·κ, κ = max‖F h h‖/‖J h‖² the curvature of Bates & Watts
// (1980, J. R. Stat. Soc. B 42, 1): below it a resample's minimum is the one that
// continues the sample's. maxBend bounds κ‖J(q - q₀)‖ in the same way for a resample
// that was drawn about another curve.
const (
	maxCurvature = 1
	maxBend      = 3
)

// newWarmStart returns nil where the fit is not a trustworthy start.
func (d *resampleDesign) newWarmStart(c models.Shaped, sign float64, f *Result) *warmStart {
	if f == nil || f.Status != Converged || d.s.Len() <= len(f.P)+d.s.Spent() {
		return nil
	}
	_, _, q := c.ToShape(f.P)
	w := &warmStart{d: q[1] * d.width}
	w.c = q[0] - w.d*d.atRef
	n := len(d.rows)
	shape, slope := make([]float64, n), make([]float64, n)
	d.tab.shape(w.c, w.d, d.rows, shape, slope)
	for j := range w.cols {
		w.cols[j] = make([]float64, n)
	}
	for i, r := range d.rows {
		s := slope[i]
		h := r.w * s * (1 - s)
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
	w.m00, w.m01, w.m11 = m00, m01, m11
	w.h00, w.h01, w.h11 = m11/det, -m01/det, m00/det
	fs := [2][2][]float64{{w.cols[2], w.cols[3]}, {w.cols[3], w.cols[4]}}
	for j := range 2 {
		coef := func(k, l int) float64 { return dot(fs[j][k], w.cols[l]) + 0.5*dot(w.cols[j], fs[k][l]) }
		w.quad[j] = [3]float64{coef(0, 0), coef(0, 1) + coef(1, 0), coef(1, 1)}
	}
	sigma := 1.0
	if !d.s.Model.KnownSigma() {
		sigma = math.Sqrt(f.RSS / float64(d.s.Len()-len(f.P)-d.s.Spent()))
	}
	// Directions of unit length in the tangent plane: h = L⁻ᵀ(cos, sin), JᵀJ = LLᵀ.
	l00 := math.Sqrt(m00)
	l10 := m01 / l00
	l11 := math.Sqrt(m11 - l10*l10)
	var most float64
	for a := range 48 {
		sin, cos := math.Sincos(math.Pi * float64(a) / 48)
		h1 := sin / l11
		h0 := (cos - l10*h1) / l00
		var k2 float64
		for i := range n {
			k2 += square(w.cols[2][i]*h0*h0 + 2*w.cols[3][i]*h0*h1 + w.cols[4][i]*h1*h1)
		}
		most = math.Max(most, k2)
	}
	if !(sigma*math.Sqrt(most) < maxCurvature) {
		return nil
	}
	w.reach2 = maxBend * maxBend / most
	return w
}

// trusts reports whether an estimate is near enough to the sample's.
func (w *warmStart) trusts(e *normal) bool {
	c, d := e.c-w.c, e.d-w.d
	return w.m00*c*c+2*w.m01*c*d+w.m11*d*d <= w.reach2
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
// angle slack of one of them, with a length between its low and its high.
type cover struct {
	shapes    [][]float64
	low, high []float64
	quads     []quad
	cos, sin  float64    // of the slack
	near      float64    // least cosine at which a shape of the grid counts as covered
	last      int        // shape last used
	members   [][]member // of fine: shapes of the grid near each one
}

// nearest are the shapes of the fine cover nearest to each node of the cold search.
func (p *plan) nearest() []int {
	p.compared.Do(func() {
		_, fine := p.covers()
		n := len(p.rows)
		v := make([]float64, n)
		p.toFine = make([]int, len(p.nodes))
		for j := range p.nodes {
			for i := range v {
				v[i] = p.shapes[j/4*n+i][j%4]
			}
			most := math.Inf(-1)
			for k, s := range fine.shapes {
				if x := dot(s, v); x > most {
					most, p.toFine[j] = x, k
				}
			}
		}
	})
	return p.toFine
}

const (
	coarseSlack = 0.20
	fineSlack   = 0.08
	apart       = 0.99 // largest cosine between two starts of a decision
	gridStart   = 0.25 // lowest d of the grid; below it shapes only get shorter
	// gridAngle is what a slack keeps for the gaps of the grid that is covered, and
	// gridLength the factor kept for lengths.
	gridAngle  = 0.02
	gridLength = 1.5
)

// covers are made when first needed: most identified sets never ask for them.
func (p *plan) covers() (coarse, fine *cover) {
	p.makeNodes()
	p.covered.Do(func() { p.coarse, p.fine = p.newCovers() })
	return p.coarse, p.fine
}

// newCovers covers a fine grid of shapes, coarsely and finely: d in steps of √2,
// crossovers every 0.35/d, at least twelve to a gap of the design, from 8/d below to
// 8/d above it, where what is left of the shape is an exponential of any length.
func (p *plan) newCovers() (coarse, fine *cover) {
	coarse, fine = newCover(coarseSlack), newCover(fineSlack)
	n := len(p.rows)
	v, slope := make([]float64, n), make([]float64, n)
	grid := p.grid()
	all := make([]member, 0, len(grid)) // of fine: the starts of coarse are not asked for
	of := make([]int32, 0, len(grid))   // their shapes
	for _, nd := range grid {
		p.tab.shape(nd.c, nd.d, p.rows, v, slope)
		whole := math.Sqrt(dot(v, v))
		projectOut(p.rows, v)
		length := math.Sqrt(dot(v, v))
		if !(length > 1e-10*whole) {
			continue
		}
		x := -nd.c / nd.d
		faint := nd.d == gridStart || x < p.low-4/nd.d || x > p.high+4/nd.d
		coarse.include(v, length, faint)
		all, of = append(all, member{nd.c, nd.d, length}), append(of, int32(fine.include(v, length, faint)))
	}
	fine.share(all, of)
	for _, c := range []*cover{coarse, fine} {
		for j := range c.low {
			c.low[j] /= gridLength
			c.high[j] *= gridLength
		}
		c.quads = quads(c.shapes, n)
	}
	return coarse, fine
}

func newCover(slack float64) *cover {
	return &cover{cos: math.Cos(slack), sin: math.Sin(slack), near: math.Cos(slack - gridAngle)}
}

// member is a shape of the grid: its parameters and length.
type member struct{ c, d, length float64 }

// include sees to it that the shape v is covered, and with faint that it is with any
// smaller length too. It returns the shape near it.
func (c *cover) include(v []float64, length float64, faint bool) int {
	j := c.find(v, c.near*length)
	if j == len(c.shapes) {
		unit := make([]float64, len(v))
		for i := range v {
			unit[i] = v[i] / length
		}
		c.shapes = append(c.shapes, unit)
		c.low, c.high = append(c.low, length), append(c.high, length)
	}
	c.last = j
	if faint {
		c.low[j] = 0
	}
	c.low[j], c.high[j] = math.Min(c.low[j], length), math.Max(c.high[j], length)
	return j
}

// share gives each shape the members that are near it, in their order.
func (c *cover) share(all []member, of []int32) {
	count := make([]int, len(c.shapes))
	for _, j := range of {
		count[j]++
	}
	c.members = make([][]member, len(c.shapes))
	room := make([]member, len(all))
	for j, n := range count {
		c.members[j], room = room[:0:n], room[n:]
	}
	for i, j := range of {
		c.members[j] = append(c.members[j], all[i])
	}
}

// find returns a shape whose product with v is at least least, looked for outward
// from the last one used, or len(c.shapes): the grid's neighbours are alike.
func (c *cover) find(v []float64, least float64) int {
	n := len(c.shapes)
	for step := range n {
		if j := c.last - step; j >= 0 && dot(c.shapes[j], v) >= least {
			return j
		}
		if j := c.last + 1 + step; j < n && dot(c.shapes[j], v) >= least {
			return j
		}
	}
	return n
}

// grid is the fine grid of shapes of newCovers.
func (p *plan) grid() []node {
	g := make([]node, 0, 2048)
	gap := p.gaps()
	for v := gridStart; ; v *= math.Sqrt2 {
		dd := math.Min(v, p.maxD)
		for x := p.low - 8/dd; x <= p.high+8/dd; {
			g = append(g, node{c: -dd * x, d: dd})
			x += math.Max(0.35/dd, gap(x)/12)
		}
		if v >= p.maxD || v > 512 {
			return g
		}
	}
}

// bound says what the shapes near one of a cover can leave of a resample.
type bound struct {
	length   float64 // of the resample
	limit    float64
	most     float64 // largest product with a unit shape that needs no closer look
	cos, sin float64
}

// against prepares the question whether no shape leaves less than limit of a resample
// with z·z = zz. decided is true where that needs no products, and excluded is then
// the answer.
func (c *cover) against(zz, limit float64) (b bound, decided, excluded bool) {
	need := (zz - limit) / zz
	if !(need > 0) {
		return b, true, false
	}
	if need >= 1 {
		return b, true, true
	}
	// A shape at the angle φ, of the best length, leaves zz sin²φ: cos(φ - slack)
	// > √need is what is to be ruled out.
	cn, sn := math.Sqrt(need), math.Sqrt(1-need)
	b = bound{length: math.Sqrt(zz), limit: limit, cos: c.cos, sin: c.sin}
	b.most = (cn*c.cos - sn*c.sin) * b.length
	return b, false, false
}

// beaten reports whether a shape within the slack of a unit shape with the product p
// and with a length between low and high may leave less than the limit.
func (b *bound) beaten(p, low, high float64) bool {
	if p <= b.most {
		return false
	}
	cos := 1.0 // of the least angle
	if q := p / b.length; q < b.cos {
		cos = q*b.cos + math.Sqrt(1-q*q)*b.sin
	}
	best := b.length * cos
	length := math.Max(low, math.Min(high, best))
	return b.length*b.length-length*(2*best-length) < b.limit
}

// excludes reports whether no shape leaves less than limit of the resample z·sign
// with z·z = zz.
func (c *cover) excludes(z []float64, sign, zz, limit float64) bool {
	b, decided, excluded := c.against(zz, limit)
	if decided {
		return excluded
	}
	for k := 0; k < len(c.shapes); k += 4 {
		p := dot4(z, c.quads[k/4*len(z):])
		for j, pj := range p[:min(4, len(c.shapes)-k)] {
			if b.beaten(sign*pj, c.low[k+j], c.high[k+j]) {
				return false
			}
		}
	}
	return true
}

// lead is a shape of a cover near which some shape may leave less than the limit, with
// what it takes off z·z at the length that suits z best.
type lead struct {
	shape         int
	saved, length float64
}

// lead of shape k, whose unit vector has the product p with z and the length norm.
func (c *cover) lead(k int, p, norm float64) lead {
	p /= norm
	length := math.Max(c.low[k]*norm, math.Min(c.high[k]*norm, p))
	return lead{k, length * (2*p - length), length / norm}
}

// leads appends the shapes near which one may leave less than the limit.
func (c *cover) leads(z []float64, sign, zz, limit float64, to []lead) []lead {
	b, decided, excluded := c.against(zz, limit)
	if excluded {
		return to
	}
	for k := 0; k < len(c.shapes); k += 4 {
		p := dot4(z, c.quads[k/4*len(z):])
		for j, pj := range p[:min(4, len(c.shapes)-k)] {
			pj *= sign
			if decided || pj > b.most && b.beaten(pj, c.low[k+j], c.high[k+j]) {
				to = append(to, c.lead(k+j, pj, 1))
			}
		}
	}
	return to
}

// next returns the lead that takes off most, and the others that are not near it.
func (c *cover) next(leads []lead) (best lead, rest []lead) {
	best = leads[0]
	for _, l := range leads[1:] {
		if l.saved > best.saved {
			best = l
		}
	}
	rest = leads[:0]
	for _, l := range leads {
		if dot(c.shapes[l.shape], c.shapes[best.shape]) < apart {
			rest = append(rest, l)
		}
	}
	return best, rest
}

// start returns the (c, d) of the shape near a lead whose length is nearest to its.
func (c *cover) start(l lead) (float64, float64) {
	length := l.length
	var below, above *member // nearest in length
	for i := range c.members[l.shape] {
		switch m := &c.members[l.shape][i]; {
		case m.length >= length:
			if above == nil || m.length < above.length {
				above = m
			}
		case below == nil || m.length >= below.length:
			below = m
		}
	}
	at := above
	if above == nil || below != nil && length-below.length < above.length-length {
		at = below
	}
	if below == nil && length < at.length && c.low[l.shape] == 0 {
		return shorten(at.c, at.d, length/at.length, at.d == gridStart)
	}
	return at.c, at.d
}
