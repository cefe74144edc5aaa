package models

import "math"

// Param describes one parameter: its symbol as printed in JSON, its name and
// its unit. The unit "k" stands for "ln of the unit in which k was measured".
type Param struct {
	Symbol string `json:"symbol"`
	Name   string `json:"name"`
	Unit   string `json:"unit"`
}

// Trend says how the local activation energy of a curve can change with T.
type Trend int

const (
	// TrendNone: E_loc is constant up to the fixed exponent's mRT.
	TrendNone Trend = iota
	// TrendRises: E_loc can only rise with T, as for paths in parallel.
	TrendRises
	// TrendFalls: E_loc can only fall with T, as for barriers in series.
	TrendFalls
	// TrendEither: the sign is a result of the fit.
	TrendEither
)

// String returns "none", "rises", "falls" or "either".
func (t Trend) String() string {
	switch t {
	case TrendRises:
		return "rises"
	case TrendFalls:
		return "falls"
	case TrendEither:
		return "either"
	}
	return "none"
}

// Info is what the catalogue says of a curve.
type Info struct {
	Name    string // registry name, such as "power-prefactor"
	Family  string // curves of one family share a family weight
	Formula string // ln k(T) in one line
	Summary string // one sentence for the catalogue
	Source  string // where the formula comes from
	Trend   Trend
	Params  []Param // canonical parameters, in fitting order
}

// Curve is one distinct function ln k(T) with its canonical parameters.
//
// LnK and ELoc evaluate all temperatures in one call. t has length m and p has
// length len(Info().Params). f receives the m values; jac, if not nil, receives
// the m x p Jacobian in row-major order (jac[i*p+j] = df_i/dp_j). f may be nil
// when only the Jacobian is wanted. Wrong lengths are a caller's bug and panic.
type Curve interface {
	Info() Info
	// LnK gives ln k at t, with k in the unit of exp(p[0]).
	LnK(tRef float64, t, p, f, jac []float64)
	// ELoc gives the local activation energy E_loc = -R d ln k/d(1/T) in
	// J/mol (IUPAC Gold Book, "activation energy").
	ELoc(tRef float64, t, p, f, jac []float64)
	// Forms lists the physical parametrisations of the curve.
	Forms() []Form
}

// Basis is a curve that is linear in all its canonical parameters:
// ln k = offset(T) + Σ_j p_j X_j(T).
type Basis interface {
	Curve
	// Columns fills offset (length m) and the m x p design x, row-major.
	Columns(tRef float64, t, offset, x []float64)
}

// Shaped is a curve of the kind ln k = a - e x + g(x; q) with
// x = (1/T - 1/T_ref)/R and g a shape of one or two parameters q. The linear
// part {1, x} can be projected out once per design, and a problem in q alone is
// left.
type Shaped interface {
	Curve
	// ShapeDim is the number of shape parameters, 1 or 2.
	ShapeDim() int
	// Shape evaluates g at x. dg (m x d) and d2g (m x d(d+1)/2, upper triangle
	// by rows) may be nil.
	Shape(x, q, g, dg, d2g []float64)
	// FromShape turns (a, e, q) into canonical parameters, Invert back.
	FromShape(a, e float64, q, p []float64)
	ToShape(p []float64) (a, e float64, q []float64)
}

// Seeded is a curve that is neither: linear in its first two parameters, ln k(T_ref) and
// an energy, once the third, q, is given. q is bounded, and at one value of it the curve
// is a straight line in 1/T. LnK and ELoc may leave NaN beyond the bounds.
//
// Fitting looks at every seed, so that the best fit must lie next to the best of them.
type Seeded interface {
	Curve
	// Bounds gives the range of q, ends included, for data from tMin to tMax and the
	// reference temperature tRef, and its value for the straight line.
	Bounds(tRef, tMin, tMax float64) (low, straight, high float64)
	// Seeds gives values of q from the low bound to the high one, both included, in
	// ascending order and so close together that the curves through the same data
	// change little from one to the next.
	Seeds(tRef, tMin, tMax float64) []float64
}

// CentredX fills x with (1/T - 1/tRef)/R in mol/J, formed without subtracting
// two nearly equal reciprocals.
func CentredX(tRef float64, t, x []float64) {
	mustLen("x", len(x), len(t))
	for i, ti := range t {
		x[i] = (tRef - ti) / (GasConstant * ti * tRef)
	}
}

// logRatio returns ln(t/tRef), accurate near t = tRef and far from it.
func logRatio(t, tRef float64) float64 {
	if z := (t - tRef) / tRef; math.Abs(z) < 0.5 {
		return math.Log1p(z)
	}
	return math.Log(t / tRef)
}

func mustLen(what string, got, want int) {
	if got != want {
		panic("models: length of " + what + " does not match")
	}
}
