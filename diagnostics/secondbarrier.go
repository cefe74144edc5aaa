package diagnostics

import (
	"hash/fnv"
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"sync"

	"onebarrier/models"
	"onebarrier/models/fit"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// The shapes that the second-barrier test looks for, and its null.
const (
	secondBarrierCrossovers = 9
	// secondBarrierPairs of draws z and -z, and the data's own mirror image, make
	// 19,999 null draws.
	secondBarrierPairs = 9999
	secondBarrierDraws = 2*secondBarrierPairs + 1
	secondBarrierLevel = 0.05
	// Draws in sequence end once more than sequentialEnough reach the statistic, and
	// critical values then come from sequentialPairs.
	sequentialEnough = 50
	sequentialPairs  = 999
	// They end at so many pairs in any case: 9,999 draws with the data's mirror image.
	sequentialMost = 4999
	// Without an end of the range p is compared with 0.20 alone: in sequence so many
	// pairs tell it well enough.
	sequentialEndPairs = 499
)

// secondBarrierSteps are the barrier differences d·(x_max - x_min).
var secondBarrierSteps = [...]float64{1, 2, 4, 8, 16, 32}

// SecondBarrierTest is the second-barrier test of one design: temperatures,
// weights and nuisance columns.
//
// Under one barrier the second E is not identified, so that a likelihood ratio has
// no chi-squared null (Davies, Biometrika 74 (1987) 33). Instead, for a grid of
// crossovers c and barrier differences d, the shape
//
//	g(x) = ln(1 + e^{-d(x-c)}),  x = 1/(RT),
//
// is what a second path adds to a line. With 1, x and the nuisance columns
// projected out, the statistic is the largest studentised coefficient of a shape;
// it is one-sided, since a second path makes E rise only. In the space that is
// left it is monotone in the largest cosine between the data and a shape, whose
// null distribution under Gaussian errors depends on the design alone: it is drawn,
// and the p-value is exact for any N.
type SecondBarrierTest struct {
	s        *fit.Sample
	nuisance [][]float64
	fitted   []float64 // k of the straight line, where errors are additive in k; else nil
	cache    *DesignCache
	// sequential stops drawing once p is plainly not small.
	sequential bool
	*secondBarrierDesign
}

// secondBarrierDesign is what depends on temperatures, weights and nuisance columns
// alone.
type secondBarrierDesign struct {
	root  []float64   // 1/sqrt(V)
	basis [][]float64 // orthonormal: what is projected out
	span  [][]float64 // orthonormal: what the shapes span after that
	// coord[j] holds the coordinates along span[j] of the last len(coord[j]) of the
	// shapes; those of earlier ones are 0.
	coord  [][]float64
	shapes int
	dim    int // of the space that is left

	drawing  sync.Mutex
	next     func() (up, down float64) // the next pair of the null
	null     []float64                 // largest cosines of z and of -z, in pairs
	critical [2]struct {               // from all pairs, and from those of a sequence
		found sync.Once
		at    [2]float64
	}
}

// NewSecondBarrierTest prepares the test for a sample. nuisance holds further
// columns of length s.Len(), such as source offsets. With errors additive in k the
// problem is linearised about the fitted straight line, and the test is then
// approximate; other error models do not look at straight. It returns nil where
// the test cannot be run: no degree of freedom would be left (N - 3 < 1).
func NewSecondBarrierTest(s *fit.Sample, straight *fit.Result, nuisance [][]float64) *SecondBarrierTest {
	n := s.Len()
	b := &SecondBarrierTest{s: s, nuisance: nuisance, secondBarrierDesign: &secondBarrierDesign{root: make([]float64, n)}}
	for i, v := range s.V {
		b.root[i] = 1 / math.Sqrt(v)
	}
	if s.Model.InK() {
		if straight == nil || !straight.Usable() {
			return nil
		}
		b.fitted = make([]float64, n)
		for i, l := range straight.Fitted {
			b.fitted[i] = math.Exp(l)
			b.root[i] *= b.fitted[i]
		}
	}

	x := make([]float64, n)
	models.CentredX(s.TRef, s.T, x)
	one := make([]float64, n)
	for i := range one {
		one[i] = 1
	}
	columns := append([][]float64{one, x}, nuisance...)
	for _, c := range columns {
		if len(c) != n {
			panic("diagnostics: a nuisance column has the wrong length")
		}
		w := slices.Clone(c)
		floats.Mul(w, b.root)
		b.basis, _ = extend(b.basis, w, 1e-10)
	}
	b.dim = n - len(b.basis)
	if len(b.basis) < 2 || b.dim < 2 {
		return nil
	}
	var kept [][]float64
	b.eachShape(func(_ int, v []float64) {
		for _, o := range kept {
			if math.Abs(floats.Dot(o, v)) > 0.9999 {
				return
			}
		}
		kept = append(kept, slices.Clone(v))
		c := make([]float64, len(b.span))
		project(b.span, v, c)
		for j, x := range c {
			b.coord[j] = append(b.coord[j], x)
		}
		if norm := floats.Norm(v, 2); norm > 1e-6 {
			floats.Scale(1/norm, v)
			b.span = append(b.span, slices.Clone(v))
			b.coord = append(b.coord, []float64{norm})
		}
	})
	b.shapes = len(kept)
	if b.shapes == 0 {
		return nil
	}
	return b
}

// eachShape calls f with every shape that is not lost with the nuisance columns:
// weighted, projected, of unit length. crossover counts from 0 at T_max.
func (b *SecondBarrierTest) eachShape(f func(crossover int, v []float64)) {
	n := b.s.Len()
	u := make([]float64, n) // x from 0 at T_max to 1 at T_min
	models.CentredX(b.s.TRef, b.s.T, u)
	low, high := floats.Min(u), floats.Max(u)
	for i := range u {
		u[i] = (u[i] - low) / (high - low)
	}
	mean, _ := extend(nil, slices.Clone(b.root), 0)
	g, v, m := make([]float64, n), make([]float64, n), make([]float64, n)
	for _, d := range secondBarrierSteps {
		for j := range secondBarrierCrossovers {
			c := float64(j) / (secondBarrierCrossovers - 1)
			models.Parallel{}.Shape(u, []float64{d * c, d}, g, nil, nil)
			floats.MulTo(v, g, b.root)
			copy(m, v)
			project(mean, m, nil)
			project(b.basis, v, nil)
			norm := floats.Norm(v, 2)
			if !(norm >= 1e-6*floats.Norm(m, 2)) {
				continue
			}
			floats.Scale(1/norm, v)
			f(j, v)
		}
	}
}

// project takes the components along an orthonormal basis out of v, twice so that
// nothing of them is left to rounding, and adds them to c unless it is nil.
func project(basis [][]float64, v, c []float64) {
	for range 2 {
		for j, q := range basis {
			d := floats.Dot(q, v)
			floats.AddScaled(v, -d, q)
			if c != nil {
				c[j] += d
			}
		}
	}
}

// extend adds the direction of v to an orthonormal basis, unless what is new in it
// is shorter than tol times v. It overwrites v.
func extend(basis [][]float64, v []float64, tol float64) (_ [][]float64, added bool) {
	before := floats.Norm(v, 2)
	project(basis, v, nil)
	after := floats.Norm(v, 2)
	if !(after > tol*before) {
		return basis, false
	}
	floats.Scale(1/after, v)
	return append(basis, v), true
}

// ScratchLen is the length of the scratch slice of Found.
func (b *SecondBarrierTest) ScratchLen() int { return b.s.Len() + len(b.span) + b.shapes }

// cosines returns the largest cosine between y and a shape, that of -y, and the
// weighted RSS of the line. The first s.Len() of scratch are left holding what
// remains of y.
func (b *SecondBarrierTest) cosines(y, scratch []float64) (up, down, rss float64) {
	n := b.s.Len()
	r, a, along := scratch[:n], scratch[n:n+len(b.span)], scratch[n+len(b.span):]
	for i, v := range y {
		if b.fitted != nil {
			v = (v - b.fitted[i]) / b.fitted[i]
		}
		r[i] = v * b.root[i]
	}
	project(b.basis, r, nil)
	for j, q := range b.span {
		a[j] = floats.Dot(q, r)
	}
	rss = floats.Dot(r, r)
	most, least := b.extremes(a, along)
	norm := math.Sqrt(rss)
	return most / norm, -least / norm, rss
}

// extremes returns the largest and smallest component along a shape of the vector
// with coordinates a in span.
func (b *SecondBarrierTest) extremes(a, along []float64) (most, least float64) {
	clear(along)
	for j, c := range b.coord {
		floats.AddScaled(along[len(along)-len(c):], a[j], c)
	}
	most, least = along[0], along[0]
	for _, d := range along[1:] {
		if d > most {
			most = d
		} else if d < least {
			least = d
		}
	}
	return most, least
}

// seed keys the stream of draws by the design and its weights. Numbers enter with
// ten digits, so that k in another unit or T read in °C leaves the stream as it was.
func (b *SecondBarrierTest) seed() (uint64, uint64) {
	h := fnv.New64a()
	var buf []byte
	put := func(x float64) { buf = append(strconv.AppendFloat(buf, x, 'e', 9, 64), ' ') }
	for i, t := range b.s.T {
		put(t)
		put(b.root[i] / b.root[0])
		for _, c := range b.nuisance {
			put(c[i])
		}
	}
	h.Write(buf)
	return h.Sum64(), 0x73656362
}

// draws sees to it that the null holds so many pairs, or more: the largest cosines of standard
// normal z and of -z. Only the part of z along the shapes is drawn in full, of the rest
// its squared length, which is chi-squared: a draw costs the same for any N.
func (b *SecondBarrierTest) draws(pairs int) []float64 {
	b.drawing.Lock()
	defer b.drawing.Unlock()
	if b.next == nil {
		b.next = b.pairs()
	}
	for len(b.null) < 2*pairs {
		up, down := b.next()
		b.null = append(b.null, up, down)
	}
	return b.null
}

// pairs returns the stream of draws of the null.
func (b *SecondBarrierTest) pairs() func() (up, down float64) {
	rng := rand.New(rand.NewPCG(b.seed()))
	a, along := make([]float64, len(b.span)), make([]float64, b.shapes)
	rest := b.dim - len(b.span)
	chi2 := distuv.ChiSquared{K: float64(rest), Src: rng}
	return func() (up, down float64) {
		var ss float64
		for j := range a {
			z := rng.NormFloat64()
			a[j] = z
			ss += z * z
		}
		if rest > 16 {
			ss += chi2.Rand()
		} else {
			for range rest {
				z := rng.NormFloat64()
				ss += z * z
			}
		}
		most, least := b.extremes(a, along)
		norm := math.Sqrt(ss)
		return most / norm, -least / norm
	}
}

// criticals are the cosines above which p < 0.05: few enough draws reach them. The
// mirror image of the data counts as one more draw where it reaches them too.
func (b *SecondBarrierTest) criticals() *[2]float64 {
	c, pairs := &b.critical[0], secondBarrierPairs
	if b.sequential {
		c, pairs = &b.critical[1], sequentialPairs
	}
	c.found.Do(func() { c.at = b.findCritical(pairs) })
	return &c.at
}

func (b *SecondBarrierTest) findCritical(pairs int) [2]float64 {
	allowed := int(math.Ceil(secondBarrierLevel*float64(2*pairs+2))) - 2
	top := make([]float64, 0, allowed+2) // the largest, in order: the rest need no sorting
	for _, s := range b.draws(pairs)[:2*pairs] {
		if len(top) > allowed {
			if s <= top[0] {
				continue
			}
			top = slices.Delete(top, 0, 1)
		}
		at, _ := slices.BinarySearch(top, s)
		top = slices.Insert(top, at, s)
	}
	return [2]float64{top[0], top[1]}
}

// pValue is exact: under one barrier the data and their mirror image are one more
// pair like the drawn ones, and p = (1 + #{S* >= S})/(B + 1), ties against
// rejection, B counting the mirror image. draws is B.
//
// Drawn in sequence, p is exact too: where the draws that reach S first exceed h in pair
// m, p = h/2m, since among the 2m values of the data's pair and m - 1 drawn ones that of
// the data is one of the h largest with a chance of no more than that (Besag & Clifford
// 1991, Biometrika 78, 301, for draws that come one by one).
//
// most is the largest number of pairs.
func (b *SecondBarrierTest) pValue(up, down float64, most int) (p float64, draws int) {
	count := 1
	if down >= up {
		count++
	}
	if b.sequential {
		var null []float64
		for m := 1; m <= most; m++ {
			if len(null) < 2*m {
				null = b.draws(min(most, m+15)) // not one at a time
			}
			for _, s := range null[2*m-2 : 2*m] {
				if s >= up {
					count++
				}
			}
			if count > sequentialEnough {
				return sequentialEnough / float64(2*m), 2*m + 1
			}
		}
		return float64(count) / float64(2*most+2), 2*most + 1
	}
	for _, s := range b.draws(most)[:2*most] {
		if s >= up {
			count++
		}
	}
	return float64(count) / float64(2*most+2), 2*most + 1
}

// Found reports whether p < 0.05 for other values y at the same design, in ln k, or
// in k where errors are additive in k. It allocates nothing after the first call;
// scratch has length ScratchLen(). It may be called from several goroutines.
func (b *SecondBarrierTest) Found(y, scratch []float64) bool {
	critical := b.criticals()
	up, down, _ := b.cosines(y, scratch)
	if down >= up {
		return up > critical[1]
	}
	return up > critical[0]
}

// found reports whether the sample itself has p < 0.05; false where there is no
// scatter to test against.
func (b *SecondBarrierTest) found() bool {
	y, scratch := b.values(), make([]float64, b.ScratchLen())
	if _, _, rss := b.cosines(y, scratch); noScatter(b.s, rss) {
		return false
	}
	return b.Found(y, scratch)
}

// values are those of the sample: ln k, or k where errors are additive in k.
func (b *SecondBarrierTest) values() []float64 {
	if b.s.Model.InK() {
		return b.s.K
	}
	return b.s.Y
}

// Run tests the sample, and again without its hottest and its coldest temperature.
// It returns nil where there is no scatter to test against.
func (b *SecondBarrierTest) Run() *SecondBarrier {
	y := b.values()
	up, down, rss := b.cosines(y, make([]float64, b.ScratchLen()))
	if noScatter(b.s, rss) || math.IsNaN(up) {
		return nil
	}
	nu := float64(b.dim - 1)
	most := secondBarrierPairs
	if b.sequential {
		most = sequentialMost
	}
	p, draws := b.pValue(up, down, most)
	out := &SecondBarrier{
		Statistic:   Real(up * math.Sqrt(nu) / math.Sqrt((1-up)*(1+up))),
		PValue:      Real(p),
		Draws:       draws,
		Crossover:   b.crossover(y),
		WithoutEnds: WithoutEnds{Real(math.NaN()), Real(math.NaN())},
	}
	if b.sequential && p >= secondBarrierLevel {
		return out // nothing rests on an end where nothing was found
	}
	low, high := b.s.Range()
	out.WithoutEnds = WithoutEnds{
		PWithoutTMax: Real(b.without(high)),
		PWithoutTMin: Real(b.without(low)),
	}
	return out
}

// without is the p-value without the points at one temperature, NaN where the test
// cannot be run without them.
func (b *SecondBarrierTest) without(t float64) float64 {
	var keep []int
	for i, ti := range b.s.T {
		if !models.SameTemperature(ti, t) {
			keep = append(keep, i)
		}
	}
	pick := func(v []float64) []float64 {
		if v == nil {
			return nil
		}
		out := make([]float64, len(keep))
		for j, i := range keep {
			out[j] = v[i]
		}
		return out
	}
	s := *b.s
	s.T, s.Y, s.K, s.V = pick(s.T), pick(s.Y), pick(s.K), pick(s.V)
	nuisance := make([][]float64, len(b.nuisance))
	for j, c := range b.nuisance {
		nuisance[j] = pick(c)
	}
	var straight *fit.Result
	if b.fitted != nil { // linearised about the same line
		lnK := pick(b.fitted)
		for i := range lnK {
			lnK[i] = math.Log(lnK[i])
		}
		straight = &fit.Result{Status: fit.Converged, Fitted: lnK}
	}
	o := b.cache.test(&s, straight, nuisance)
	if o == nil {
		return math.NaN()
	}
	o.sequential = b.sequential
	y := s.Y
	if s.Model.InK() {
		y = s.K
	}
	up, down, rss := o.cosines(y, make([]float64, o.ScratchLen()))
	if noScatter(&s, rss) {
		return math.NaN()
	}
	most := secondBarrierPairs
	if o.sequential {
		most = sequentialEndPairs
	}
	p, _ := o.pValue(up, down, most)
	return p
}

// crossover brackets the crossover temperature: the crossovers of the grid whose
// best shape is not worse than the best of all by more than F_0.95(1, ν) allows,
// and one step of the grid beyond them, within the measured range.
func (b *SecondBarrierTest) crossover(y []float64) [2]Real {
	scratch := make([]float64, b.ScratchLen())
	_, _, rss := b.cosines(y, scratch)
	r := scratch[:b.s.Len()]
	best := make([]float64, secondBarrierCrossovers)
	b.eachShape(func(j int, v []float64) {
		best[j] = math.Max(best[j], floats.Dot(v, r))
	})
	top := floats.Max(best)
	nu := float64(b.dim - 1)
	limit := (rss - top*top) * (1 + distuv.F{D1: 1, D2: nu}.Quantile(0.95)/nu)
	first, last := -1, -1
	for j, v := range best {
		if v > 0 && rss-v*v <= limit {
			if first < 0 {
				first = j
			}
			last = j
		}
	}
	if first < 0 { // every shape bends the wrong way
		return [2]Real{Real(math.NaN()), Real(math.NaN())}
	}
	low, high := b.s.Range()
	at := func(j int) Real { // the grid is even in 1/T
		f := float64(min(max(j, 0), secondBarrierCrossovers-1)) / (secondBarrierCrossovers - 1)
		return Real(1 / ((1-f)/high + f/low))
	}
	return [2]Real{at(last + 1), at(first - 1)}
}
