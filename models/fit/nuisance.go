package fit

import (
	"math"

	"onebarrier/models"

	"gonum.org/v1/gonum/floats"
)

// WithOffsets returns the sample with offset_i taken off every ln k_i and columns as
// nuisance columns: every curve is then fitted together with a coefficient for each of
// them, which is near 0 where offset was estimated well. offset and each of columns have
// the length of the sample; where it has limits, values for these follow. With errors
// in k a factor e^offset divides k_i and its standard deviation, so that residuals are
// those of the data as measured but for their unit. s is not modified.
func (s *Sample) WithOffsets(offset []float64, columns [][]float64) *Sample {
	n := s.Len()
	out := &Sample{
		T: s.T, Y: make([]float64, n), K: make([]float64, n), V: s.V,
		Model: s.Model, TRef: s.TRef, Shift: s.Shift,
	}
	if s.Model.InK() {
		out.V = make([]float64, n)
	}
	for i, o := range offset[:n] {
		out.Y[i], out.K[i] = s.Y[i]-o, s.K[i]*math.Exp(-o)
		if s.Model.InK() {
			out.V[i] = s.V[i] * math.Exp(-2*o)
		}
		out.Shift += o
	}
	for _, c := range columns {
		out.Nuisance = append(out.Nuisance, c[:n:n])
	}
	for i, l := range s.Limits {
		o := offset[n+i]
		if l.K *= math.Exp(-o); s.Model.InK() {
			l.V *= math.Exp(-2 * o)
		}
		l.Beside = nil
		for _, c := range columns {
			l.Beside = append(l.Beside, c[n+i])
		}
		out.Limits = append(out.Limits, l)
	}
	return out
}

// determinesOffsets reports whether the measured entries determine the coefficients of
// the nuisance columns beside a curve, or beside the straight line where it is not
// linear in its parameters.
func (s *Sample) determinesOffsets(c models.Curve) bool {
	basis, ok := c.(models.Basis)
	if !ok {
		basis = models.Straight()
	}
	n, p := s.Len(), len(basis.Info().Params)
	if n < p+s.Spent() {
		return false
	}
	off, x := make([]float64, n), make([]float64, n*p)
	basis.Columns(s.TRef, s.T, off, x)
	return Linear(s.widened(x, p), off, reciprocals(s.V)).Cov != nil
}

// Spent is the number of parameters that nuisance columns take.
func (s *Sample) Spent() int { return len(s.Nuisance) }

// widened appends the nuisance columns to a design x of p columns, row-major.
func (s *Sample) widened(x []float64, p int) []float64 {
	if s.Spent() == 0 {
		return x
	}
	wide := make([]float64, 0, len(x)+s.Len()*s.Spent())
	for i := range s.Len() {
		wide = append(wide, x[i*p:(i+1)*p]...)
		for _, c := range s.Nuisance {
			wide = append(wide, c[i])
		}
	}
	return wide
}

// split parts a covariance of the p parameters and the nuisance coefficients.
func (r *Result) split(p int) {
	if r.Spent == 0 || r.Cov == nil {
		return
	}
	m := p + r.Spent
	r.JointCov = r.Cov
	var own, beside []float64
	for i := range m {
		row := r.Cov[i*m : (i+1)*m]
		if i < p {
			own = append(own, row[:p]...)
		} else {
			beside = append(beside, row[p:]...)
		}
	}
	r.Cov, r.BesideCov = own, beside
}

// joint goes on from the fit f of a curve that left the nuisance columns alone, to the
// least squares of both. Where that leads nowhere f stands: its offsets are then held.
func joint(s *Sample, f *Result) *Result {
	if s.Spent() == 0 || !f.Usable() || f.P == nil {
		return f
	}
	f.Beside = make([]float64, s.Spent()) // held, unless a better answer is found
	o := newObjective(s, f.Curve)
	p, m := o.n, o.n+s.Spent()
	pr := Problem{M: s.Len(), N: m, Eval: o.withNuisance()}
	best := LeastSquares(pr, append(append(make([]float64, 0, m), f.P...), make([]float64, m-p)...), Options{})
	before := f.RSS / (o.unit * o.unit)
	if best.Status == Failed || !(best.RSS <= before*(1+1e-9)) || o.atBound(best.P[:p]) {
		return f
	}
	r := newResult(s, f.Curve)
	r.Status, r.Reason, r.Warnings = f.Status, f.Reason, f.Warnings
	cov := best.Cov
	if f.Status != Converged || best.Status != Converged {
		if r.Status, cov = NotIdentified, nil; r.Reason == "" {
			r.Reason = "the data do not determine the parameters beside the offsets: " + best.Reason
		}
	}
	r.P, r.Beside, r.RSS, r.Leverage = best.P[:p:p], best.P[p:], best.RSS, best.Leverage
	r.Fitted, r.Residuals = make([]float64, r.N), make([]float64, r.N)
	r.Curve.LnK(s.TRef, s.T, r.P, r.Fitted, nil)
	for i := range r.Fitted {
		for j, c := range s.Nuisance {
			r.Fitted[i] += best.P[p+j] * c[i]
		}
		if s.Model.InK() {
			r.Residuals[i] = s.K[i] - math.Exp(r.Fitted[i])
		} else {
			r.Residuals[i] = s.Y[i] - r.Fitted[i]
		}
	}
	r.settle(s, cov, o.unit)
	r.split(p)
	return r
}

// withNuisance evaluates the problem of curve and nuisance columns together.
func (o *objective) withNuisance() func(p, r, jac []float64) {
	s := o.s
	m := o.n + s.Spent()
	f, inner := make([]float64, s.Len()), make([]float64, s.Len()*o.n)
	return func(p, r, jac []float64) {
		var d []float64
		if jac != nil {
			d = inner
		}
		o.c.LnK(s.TRef, s.T, p[:o.n], f, d)
		if o.beyond(p[:o.n]) {
			f[0] = math.NaN()
		}
		for i := range f {
			for j, c := range s.Nuisance {
				f[i] += p[o.n+j] * c[i]
			}
			slope := o.root[i]
			if o.inK {
				f[i] = math.Exp(f[i] - o.lnScale)
				slope *= f[i]
			}
			r[i] = (f[i] - o.y[i]) * o.root[i]
			if jac == nil {
				continue
			}
			row := jac[i*m : (i+1)*m]
			for j := range o.n {
				row[j] = slope * d[i*o.n+j]
			}
			for j, c := range s.Nuisance {
				row[o.n+j] = slope * c[i]
			}
		}
	}
}

// offsetRefitter refits samples with nuisance columns. Of each resample it takes the
// offsets off that power-prefactor beside the columns asks for, and leaves the rest to
// another refitter. With errors in ln k the linear candidates are fitted together with
// the columns, in closed form; with errors in k the offsets are those of one
// Gauss–Newton step from the sample's own fit.
type offsetRefitter struct {
	inner Refitter
	s     *Sample
	criterion
	power  *offsetRows
	linear []*offsetRows // with errors in ln k

	y, e []float64 // scratch
}

// offsetRows give the estimates of one curve and its offsets from y - base.
type offsetRows struct {
	index  int
	base   []float64   // what the fit gives: ln k, or k
	p      []float64   // parameters there
	beside []float64   // coefficients of the nuisance columns there
	rows   [][]float64 // of the parameters
	offset [][]float64 // of the coefficients of the nuisance columns
	q      [][]float64 // orthonormal: what curve and columns span, whitened
	root   []float64
}

// newOffsetRefitter wraps inner; nil where the sample does not determine the offsets.
func newOffsetRefitter(inner Refitter, s *Sample, curves []models.Curve, fits []*Result, c criterion) *offsetRefitter {
	r := &offsetRefitter{inner: inner, s: s, criterion: c}
	power := models.PowerPrefactor{}
	for j, f := range fits {
		if curves[j].Info().Name == power.Info().Name {
			r.power = newOffsetRows(s, f, j)
		}
		if _, linear := curves[j].(models.Basis); linear && !s.Model.InK() {
			if rows := newOffsetRows(s, f, j); rows != nil {
				r.linear = append(r.linear, rows)
			}
		}
	}
	if r.power == nil {
		r.power = newOffsetRows(s, Fit(s, power), -1)
	}
	if r.power == nil {
		return nil
	}
	r.scratch()
	return r
}

func (r *offsetRefitter) scratch() {
	r.y, r.e = make([]float64, r.s.Len()), make([]float64, r.s.Len())
}

func newOffsetRows(s *Sample, f *Result, index int) *offsetRows {
	c, ok := f.Curve.(models.Basis)
	if !ok || f.Status != Converged {
		return nil
	}
	n, p := s.Len(), f.Params()
	off, x := make([]float64, n), make([]float64, n*p)
	c.Columns(s.TRef, s.T, off, x)
	x = s.widened(x, p)
	m := p + s.Spent()
	o := &offsetRows{index: index, p: f.P, beside: f.Beside, base: f.Fitted, root: make([]float64, n)}
	if s.Model.InK() {
		o.base = make([]float64, n)
	}
	for i, v := range s.V {
		o.root[i] = 1 / math.Sqrt(v)
		if s.Model.InK() {
			o.base[i] = math.Exp(f.Fitted[i])
			for j := range m {
				x[i*m+j] *= o.base[i]
			}
		}
	}
	// Columns one after the other: q_j, and the triangle that takes x into q.
	r := make([]float64, m*m)
	for j := range m {
		col := make([]float64, n)
		for i := range col {
			col[i] = x[i*m+j] * o.root[i]
		}
		before := floats.Norm(col, 2)
		for range 2 {
			for k, q := range o.q {
				d := floats.Dot(q, col)
				r[k*m+j] += d
				floats.AddScaled(col, -d, q)
			}
		}
		after := floats.Norm(col, 2)
		if !(after > 1e-10*before) {
			return nil
		}
		r[j*m+j] = after
		floats.Scale(1/after, col)
		o.q = append(o.q, col)
	}
	all := make([][]float64, m) // R⁻¹Qᵀ, from below
	for j := m - 1; j >= 0; j-- {
		row := append([]float64(nil), o.q[j]...)
		for k := j + 1; k < m; k++ {
			floats.AddScaled(row, -r[j*m+k], all[k])
		}
		floats.Scale(1/r[j*m+j], row)
		all[j] = row
	}
	o.rows, o.offset = all[:p], all[p:]
	return o
}

// residual fills e with the whitened y - base.
func (o *offsetRows) residual(y, e []float64) {
	for i, b := range o.base {
		e[i] = (y[i] - b) * o.root[i]
	}
}

// adjust fills r.y with y without its own offsets.
func (r *offsetRefitter) adjust(y []float64) {
	r.power.residual(y, r.e)
	copy(r.y, y)
	inK := r.s.Model.InK()
	for j, row := range r.power.offset {
		o := r.power.beside[j] + dot(row, r.e)
		for i, c := range r.s.Nuisance[j] {
			if inK {
				r.y[i] *= math.Exp(-o * c)
			} else {
				r.y[i] -= o * c
			}
		}
	}
}

// Refit implements Refitter.
func (r *offsetRefitter) Refit(y []float64, out *Refit) {
	r.adjust(y)
	r.inner.Refit(r.y, out)
	for _, l := range r.linear {
		l.residual(y, r.e)
		for j, row := range l.rows {
			out.P[l.index][j] = l.p[j] + dot(row, r.e)
		}
		rss := dot(r.e, r.e)
		for _, q := range l.q {
			d := dot(q, r.e)
			rss -= d * d
		}
		out.RSS[l.index] = math.Max(rss, 0)
	}
	if len(r.linear) > 0 {
		r.first(out)
	}
}

// RefitCounts implements Refitter. Entries cannot be drawn across offsets that are
// estimated from them: every candidate fails.
func (r *offsetRefitter) RefitCounts(y []float64, _ []int, out *Refit) {
	r.inner.Refit(y, out) // for the lengths of out
	for j := range out.RSS {
		out.fail(j)
	}
	out.First = -1
}

// RefitOne implements OneRefitter.
func (r *offsetRefitter) RefitOne(j int, y []float64, counts []int, out *Refit) {
	one, ok := r.inner.(OneRefitter)
	if !ok || counts != nil {
		r.Refit(y, out)
		return
	}
	r.adjust(y)
	one.RefitOne(j, r.y, nil, out)
}

// Clone implements Refitter.
func (r *offsetRefitter) Clone() Refitter {
	c := *r
	c.inner = r.inner.Clone()
	c.scratch()
	return &c
}
