// Package modeltest holds the one conformance suite that every registered curve
// passes and that a planted bad curve fails.
//
// The suite knows a curve in two ways: by its code, and by its claims, which repeat
// in physical terms what the curve is meant to be. No check is left out because a
// curve lacks an interface or a case lacks an entry: either is itself a failure.
package modeltest

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"gonum.org/v1/gonum/diff/fd"

	"onebarrier/models"
)

// Reporter is what the suite reports to: a *testing.T, or a recorder by which a
// test shows that a bad curve fails.
type Reporter interface {
	Helper()
	Errorf(format string, args ...any)
}

// The checks of the suite, by the names that failures begin with.
var checks = []struct {
	name string
	run  func(*suite)
}{
	{"case", (*suite).caseComplete},
	{"catalogue", (*suite).catalogue},
	{"calls", (*suite).calls},
	{"lengths", (*suite).lengths},
	{"gradient of ln k", (*suite).gradientLnK},
	{"gradient of E_loc", (*suite).gradientELoc},
	{"E_loc = -R dlnk/d(1/T)", (*suite).localEnergy},
	{"limit T → ∞", (*suite).limit},
	{"trend", (*suite).trend},
	{"basis", (*suite).basis},
	{"shape", (*suite).shape},
	{"order", (*suite).order},
	{"bounds", (*suite).bounds},
	{"seeds", (*suite).seeds},
	{"form calls", (*suite).formCalls},
	{"form round trip", (*suite).formRoundTrip},
	{"form Jacobian", (*suite).formJacobian},
	{"form formula", (*suite).formFormula},
	{"form relations", (*suite).formRelations},
	{"written", (*suite).written},
	{"profiled", (*suite).profiled},
	{"read as", (*suite).readAs},
	{"extreme", (*suite).extreme},
}

// Run reports to r every way in which the curve breaks the contract of package
// models or contradicts its case.
func Run(r Reporter, c models.Curve, cs Case) {
	r.Helper()
	for _, ch := range checks {
		s := &suite{r: r, c: c, cs: cs, info: c.Info(), check: ch.name}
		s.np = len(s.info.Params)
		if pv := caught(func() { ch.run(s) }); pv != nil {
			s.errorf("panics: %v", pv)
		}
	}
}

type suite struct {
	r     Reporter
	c     models.Curve
	cs    Case
	info  models.Info
	np    int
	check string
}

func (s *suite) errorf(format string, args ...any) {
	s.r.Helper()
	s.r.Errorf("%s: %s: %s", s.info.Name, s.check, fmt.Sprintf(format, args...))
}

// caught runs f and returns what it panicked with, or nil.
func caught(f func()) (pv any) {
	defer func() { pv = recover() }()
	f()
	return nil
}

// near reports whether |got - want| <= tol. NaN is never near.
func near(got, want, tol float64) bool { return math.Abs(got-want) <= tol }

func (s *suite) near(what string, got, want, tol float64) {
	s.r.Helper()
	if !near(got, want, tol) {
		s.errorf("%s is %.15g, want %.15g ± %.2g", what, got, want, tol)
	}
}

// sixthOrder is the central difference with an error of order h⁶.
var sixthOrder = fd.Formula{
	Derivative: 1,
	Step:       1e-3,
	Stencil: []fd.Point{
		{Loc: -3, Coeff: -1. / 60}, {Loc: -2, Coeff: 9. / 60}, {Loc: -1, Coeff: -45. / 60},
		{Loc: 1, Coeff: 45. / 60}, {Loc: 2, Coeff: -9. / 60}, {Loc: 3, Coeff: 1. / 60},
	},
}

// derivative differentiates f at x by sixth-order differences with ever smaller
// steps from h down, and takes the estimate that changed least from one step to
// the next: there, truncation and rounding are in balance.
func derivative(f func(float64) float64, x, h float64) float64 {
	best, least := math.NaN(), math.Inf(1)
	last := math.NaN()
	for range 10 {
		d := fd.Derivative(f, x, &fd.Settings{Formula: sixthOrder, Step: h})
		if c := math.Abs(d - last); c < least {
			best, least = d, c
		}
		last = d
		h /= 2
	}
	return best
}

// step is a change of a parameter that ln k feels, from the parameter's unit.
func step(p models.Param, value float64) float64 {
	unit := map[string]float64{"J/mol": 1000, "kJ mol^-1": 1, "K": 1}[p.Unit]
	return math.Max(math.Max(unit, 0.5), 0.01*math.Abs(value))
}

func filled(n int, v float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = v
	}
	return x
}

func nans(n int) []float64 { return filled(n, math.NaN()) }

func maxAbs(x []float64) float64 {
	var m float64
	for _, v := range x {
		m = math.Max(m, math.Abs(v))
	}
	return m
}

func same(a, b []float64) bool {
	return slices.EqualFunc(a, b, func(x, y float64) bool {
		return math.Float64bits(x) == math.Float64bits(y) || math.IsNaN(x) && math.IsNaN(y)
	})
}

func (s *suite) lnK(p []float64, t ...float64) []float64 {
	f := nans(len(t))
	s.c.LnK(s.cs.TRef, t, p, f, nil)
	return f
}

func (s *suite) eLoc(p []float64, t ...float64) []float64 {
	f := nans(len(t))
	s.c.ELoc(s.cs.TRef, t, p, f, nil)
	return f
}

// frames are the frames in which forms are read.
func (s *suite) frames() []models.Frame {
	var frs []models.Frame
	for _, tForm := range []float64{s.cs.TRef, 298.15, 1000} {
		for _, ln := range []float64{0, -math.Log(60)} {
			frs = append(frs, models.Frame{TRef: s.cs.TRef, TForm: tForm, LnPerSecond: ln})
		}
	}
	return frs
}

// fromCurve reads the canonical parameters in a form, with Jacobian.
func fromCurve(f models.Form, fr models.Frame, p []float64) (q, jac []float64) {
	q, jac = nans(len(f.Params)), nans(len(f.Params)*len(p))
	f.FromCurve(fr, p, q, jac)
	return q, jac
}

func (s *suite) mayBeUndefined(symbol string) bool { return slices.Contains(s.cs.Undefined, symbol) }

// caseComplete makes sure that no other check passes for want of material.
func (s *suite) caseComplete() {
	cs := s.cs
	if len(cs.T) < 3 || len(cs.P) == 0 || len(cs.Extreme) == 0 || !(cs.TRef > 0) {
		s.errorf("needs T_ref, at least 3 temperatures, ordinary and extreme parameters")
	}
	for _, p := range slices.Concat(cs.P, cs.Extreme) {
		if len(p) != s.np {
			s.errorf("has %d parameters where the curve has %d", len(p), s.np)
		}
	}
	if cs.Limit == nil {
		s.errorf("does not state the limit T → ∞")
	}
	kinds := 0
	_, isBasis := s.c.(models.Basis)
	_, isShaped := s.c.(models.Shaped)
	_, isSeeded := s.c.(models.Seeded)
	for _, is := range []bool{isBasis, isShaped, isSeeded} {
		if is {
			kinds++
		}
	}
	if kinds != 1 {
		s.errorf("the curve implements %d of models.Basis, Shaped and Seeded; fitting needs one", kinds)
	}
	var forms []string
	for _, f := range s.c.Forms() {
		forms = append(forms, f.Name)
		if cs.Physical[f.Name] == nil {
			s.errorf("has no formula for the form %q", f.Name)
		}
	}
	for name := range cs.Physical {
		if !slices.Contains(forms, name) {
			s.errorf("the curve lacks the form %q", name)
		}
	}
}

var kebab = regexp.MustCompile(`^[a-z][a-z0-9]*(-[a-z0-9]+)*$`)

// catalogue checks names and that every field of the catalogue is filled.
func (s *suite) catalogue() {
	in := s.info
	seen := map[string]bool{}
	name := func(what, n string) {
		if !kebab.MatchString(n) {
			s.errorf("%s %q is not in kebab case", what, n)
		}
		if seen[n] {
			s.errorf("%s %q occurs twice", what, n)
		}
		seen[n] = true
	}
	fields := func(of string, vs ...string) {
		for _, v := range vs {
			if v == "" {
				s.errorf("%s: a field of the catalogue is empty", of)
			}
		}
	}
	params := func(of string, ps []models.Param) {
		if len(ps) == 0 {
			s.errorf("%s: has no parameters", of)
		}
		symbols := map[string]bool{}
		for _, p := range ps {
			fields(of, p.Symbol, p.Name, p.Unit)
			if symbols[p.Symbol] {
				s.errorf("%s: symbol %q occurs twice", of, p.Symbol)
			}
			symbols[p.Symbol] = true
		}
	}
	name("curve", in.Name)
	if !kebab.MatchString(in.Family) {
		s.errorf("family %q is not in kebab case", in.Family)
	}
	fields("curve", in.Formula, in.Summary, in.Source)
	params("curve", in.Params)
	if len(s.c.Forms()) == 0 {
		s.errorf("has no forms")
	}
	for _, f := range s.c.Forms() {
		name("form", f.Name)
		fields(f.Name, f.Formula, f.Source)
		params(f.Name, f.Params)
		if f.FromCurve == nil || f.ToCurve == nil {
			s.errorf("form %q cannot be converted both ways", f.Name)
		}
	}
}

// evaluations are the two functions of a curve.
func (s *suite) evaluations() map[string]func(tRef float64, t, p, f, jac []float64) {
	return map[string]func(tRef float64, t, p, f, jac []float64){"LnK": s.c.LnK, "ELoc": s.c.ELoc}
}

// calls checks that results do not depend on what else is asked for nor on what
// the slices held, and that inputs are left alone.
func (s *suite) calls() {
	m := len(s.cs.T)
	for name, eval := range s.evaluations() {
		for _, p0 := range s.cs.P {
			t, p := slices.Clone(s.cs.T), slices.Clone(p0)
			f, jac := nans(m), nans(m*s.np)
			eval(s.cs.TRef, t, p, f, jac)
			if !same(t, s.cs.T) || !same(p, p0) {
				s.errorf("%s modifies its inputs", name)
			}
			f2, jac2 := filled(m, 1), filled(m*s.np, 1)
			eval(s.cs.TRef, s.cs.T, p0, f2, nil)
			eval(s.cs.TRef, s.cs.T, p0, nil, jac2)
			if !same(f, f2) || !same(jac, jac2) {
				s.errorf("%s: values alone or Jacobian alone differ from both together, or keep what was there", name)
			}
			eval(s.cs.TRef, s.cs.T, p0, nil, nil)
			for i, ti := range s.cs.T {
				eval(s.cs.TRef, []float64{ti}, p0, f2[:1], nil)
				s.near(fmt.Sprintf("%s at %g K alone", name, ti), f2[0], f[i], 0)
			}
		}
	}
}

// lengths checks that every slice of a wrong length panics.
func (s *suite) lengths() {
	m, np := len(s.cs.T), s.np
	mustPanic := func(what string, f func()) {
		if caught(f) == nil {
			s.errorf("%s of a wrong length is accepted", what)
		}
	}
	for _, d := range []int{-1, 1} {
		p := make([]float64, np+d)
		copy(p, s.cs.P[0])
		good := s.cs.P[0]
		for name, eval := range s.evaluations() {
			mustPanic(name+": p", func() { eval(s.cs.TRef, s.cs.T, p, nans(m), nil) })
			mustPanic(name+": f", func() { eval(s.cs.TRef, s.cs.T, good, nans(m+d), nil) })
			mustPanic(name+": jac", func() { eval(s.cs.TRef, s.cs.T, good, nil, nans(m*np+d)) })
		}
		if b, ok := s.c.(models.Basis); ok {
			mustPanic("Columns: offset", func() { b.Columns(s.cs.TRef, s.cs.T, nans(m+d), nans(m*np)) })
			mustPanic("Columns: x", func() { b.Columns(s.cs.TRef, s.cs.T, nans(m), nans(m*np+d)) })
		}
		if sh, ok := s.c.(models.Shaped); ok {
			n := sh.ShapeDim()
			x := nans(m)
			models.CentredX(s.cs.TRef, s.cs.T, x)
			_, _, q := sh.ToShape(good)
			qd := make([]float64, n+d)
			copy(qd, q)
			mustPanic("Shape: q", func() { sh.Shape(x, qd, nans(m), nil, nil) })
			mustPanic("Shape: g", func() { sh.Shape(x, q, nans(m+d), nil, nil) })
			mustPanic("Shape: dg", func() { sh.Shape(x, q, nil, nans(m*n+d), nil) })
			mustPanic("Shape: d2g", func() { sh.Shape(x, q, nil, nil, nans(m*n*(n+1)/2+d)) })
			mustPanic("FromShape: q", func() { sh.FromShape(0, 1, qd, nans(np)) })
			mustPanic("FromShape: p", func() { sh.FromShape(0, 1, q, nans(np+d)) })
			mustPanic("ToShape: p", func() { sh.ToShape(p) })
		}
		for _, f := range s.c.Forms() {
			fr, nq := s.frames()[0], len(f.Params)
			q, _ := fromCurve(f, fr, good)
			qd := make([]float64, nq+d)
			copy(qd, q)
			mustPanic(f.Name+": p from", func() { f.FromCurve(fr, p, nans(nq), nil) })
			mustPanic(f.Name+": q from", func() { f.FromCurve(fr, good, nans(nq+d), nil) })
			mustPanic(f.Name+": jac", func() { f.FromCurve(fr, good, nans(nq), nans(nq*np+d)) })
			mustPanic(f.Name+": q to", func() { f.ToCurve(fr, qd, nans(np)) })
			mustPanic(f.Name+": p to", func() { f.ToCurve(fr, q, nans(np+d)) })
		}
	}
}

// gradient compares a Jacobian (m x len(p)) with differences of f, to 8 digits of
// each entry or to the rounding of f.
func (s *suite) gradient(of string, m int, p []float64, params []models.Param, jac []float64, f func(p []float64) []float64) {
	np := len(p)
	top := maxAbs(f(p))
	for j := range np {
		h := step(params[j], p[j])
		for i := range m {
			want := derivative(func(v float64) float64 {
				moved := slices.Clone(p)
				moved[j] = v
				return f(moved)[i]
			}, p[j], h)
			s.near(fmt.Sprintf("%sd/d%s at point %d of %v", of, params[j].Symbol, i, p), jac[i*np+j], want, 1e-8*math.Abs(want)+1e-12*top/h)
		}
	}
}

func (s *suite) gradientLnK() {
	m := len(s.cs.T)
	for _, p := range s.cs.P {
		jac := nans(m * s.np)
		s.c.LnK(s.cs.TRef, s.cs.T, p, nil, jac)
		s.gradient("", m, p, s.info.Params, jac, func(p []float64) []float64 { return s.lnK(p, s.cs.T...) })
	}
}

func (s *suite) gradientELoc() {
	m := len(s.cs.T)
	for _, p := range s.cs.P {
		jac := nans(m * s.np)
		s.c.ELoc(s.cs.TRef, s.cs.T, p, nil, jac)
		s.gradient("", m, p, s.info.Params, jac, func(p []float64) []float64 { return s.eLoc(p, s.cs.T...) })
	}
}

func (s *suite) localEnergy() {
	for _, p := range s.cs.P {
		e := s.eLoc(p, s.cs.T...)
		for i, ti := range s.cs.T {
			x := 1 / (models.GasConstant * ti)
			want := -derivative(func(x float64) float64 { return s.lnK(p, 1/(models.GasConstant*x))[0] }, x, 0.01*x)
			s.near(fmt.Sprintf("E_loc at %g K of %v", ti, p), e[i], want, 1e-8*maxAbs(e)+1e-12*maxAbs(s.lnK(p, s.cs.T...))/(0.01*x))
		}
	}
}

func (s *suite) limit() {
	const hot = 1e12
	some := false
	for _, p := range s.cs.P {
		lnA, m := s.cs.Limit(s.cs.TRef, p)
		if math.IsNaN(m) {
			if e := s.eLoc(p, hot)[0] / (models.GasConstant * hot); !(math.Abs(e) > 1e6) {
				s.errorf("E_loc/RT of %v is %g, but a limit is said not to exist", p, e)
			}
			continue
		}
		some = true
		got := s.lnK(p, hot)[0] - m*math.Log(hot/s.cs.TRef)
		s.near(fmt.Sprintf("ln A of %v", p), got, lnA, 1e-7*math.Max(1, math.Abs(lnA)))
		s.near(fmt.Sprintf("E_loc/RT of %v", p), s.eLoc(p, hot)[0]/(models.GasConstant*hot), m, 1e-6)
	}
	if !some {
		s.errorf("no parameters of the case have a limit")
	}
}

// trend checks what the catalogue says of E_loc, freed of the exponent's mRT for
// curves of which it says that nothing is left.
func (s *suite) trend() {
	low, high := slices.Min(s.cs.T)/2, slices.Max(s.cs.T)*2
	if _, ok := s.c.(models.Seeded); ok { // beyond the data its bounds do not hold
		low, high = slices.Min(s.cs.T), slices.Max(s.cs.T)
	}
	_, fixed := s.cs.Limit(s.cs.TRef, s.cs.P[0])
	var up, down bool
	for _, p := range s.cs.P {
		if _, m := s.cs.Limit(s.cs.TRef, p); s.info.Trend == models.TrendNone && m != fixed {
			s.errorf("E_loc is said to go %q, but the exponent of T is %g and %g", s.info.Trend, fixed, m)
		}
		last := math.NaN()
		for i := range 101 {
			t := low * math.Pow(high/low, float64(i)/100)
			e := s.eLoc(p, t)[0]
			if s.info.Trend == models.TrendNone {
				e -= fixed * models.GasConstant * t
			}
			slack := 1e-9 * math.Abs(e)
			up = up || e-last > slack
			down = down || last-e > slack
			last = e
		}
	}
	want := map[models.Trend][2]bool{
		models.TrendNone: {}, models.TrendRises: {true, false}, models.TrendFalls: {false, true}, models.TrendEither: {true, true},
	}[s.info.Trend]
	if got := [2]bool{up, down}; got != want {
		s.errorf("E_loc is said to go %q; it rises: %v, falls: %v", s.info.Trend, up, down)
	}
}

// basis checks offset + Xp = ln k. A curve that must be Basis and is not has
// failed the check of its case.
func (s *suite) basis() {
	b, ok := s.c.(models.Basis)
	if !ok {
		return
	}
	m := len(s.cs.T)
	t := slices.Clone(s.cs.T)
	offset, x := nans(m), nans(m*s.np)
	b.Columns(s.cs.TRef, t, offset, x)
	if !same(t, s.cs.T) {
		s.errorf("Columns modifies its input")
	}
	for _, p := range s.cs.P {
		for i, want := range s.lnK(p, s.cs.T...) {
			got := offset[i]
			for j := range p {
				got += x[i*s.np+j] * p[j]
			}
			s.near(fmt.Sprintf("offset + Xp at %g K of %v", s.cs.T[i], p), got, want, 1e-13*math.Max(1, maxAbs(p[:1])))
		}
	}
}

// shape checks a - ex + g = ln k, the derivatives of g, and that turning
// parameters into a shape and back changes nothing.
func (s *suite) shape() {
	sh, ok := s.c.(models.Shaped)
	if !ok {
		return
	}
	n := sh.ShapeDim()
	m := len(s.cs.T)
	x := nans(m)
	models.CentredX(s.cs.TRef, s.cs.T, x)
	for _, p0 := range s.cs.P {
		p := slices.Clone(p0)
		a, e, q := sh.ToShape(p)
		if len(q) != n {
			s.errorf("ToShape gives %d shape parameters, ShapeDim says %d", len(q), n)
			return
		}
		back := nans(s.np)
		q0 := slices.Clone(q)
		sh.FromShape(a, e, q, back)
		if !same(p, p0) || !same(q, q0) {
			s.errorf("ToShape or FromShape modifies its input")
		}
		for j := range p {
			s.near(fmt.Sprintf("%s after ToShape and FromShape of %v", s.info.Params[j].Symbol, p), back[j], p0[j], 1e-12*math.Max(1, math.Abs(p0[j])))
		}

		xc := slices.Clone(x)
		g, dg, d2g := nans(m), nans(m*n), nans(m*n*(n+1)/2)
		sh.Shape(xc, q, g, dg, d2g)
		if !same(xc, x) || !same(q, q0) {
			s.errorf("Shape modifies its input")
		}
		g2, dg2, d2g2 := filled(m, 1), filled(len(dg), 1), filled(len(d2g), 1)
		sh.Shape(x, q, g2, nil, nil)
		sh.Shape(x, q, nil, dg2, nil)
		sh.Shape(x, q, nil, nil, d2g2)
		if !same(g, g2) || !same(dg, dg2) || !same(d2g, d2g2) {
			s.errorf("Shape: one result alone differs from all together, or keeps what was there")
		}
		for i, want := range s.lnK(p, s.cs.T...) {
			s.near(fmt.Sprintf("a - ex + g at %g K of %v", s.cs.T[i], p), a-e*x[i]+g[i], want, 1e-12*math.Max(1, math.Abs(a)))
		}

		params := make([]models.Param, n)
		for j := range params {
			// A shape parameter is an energy where it is as large as one.
			params[j] = models.Param{Symbol: fmt.Sprintf("q%d", j+1), Unit: "1"}
			if math.Abs(q[j]) > 500 {
				params[j].Unit = "J/mol"
			}
		}
		s.gradient("dg: ", m, q, params, dg, func(q []float64) []float64 {
			g := nans(m)
			sh.Shape(x, q, g, nil, nil)
			return g
		})
		// Row j of the second derivatives is the gradient of column j of dg.
		full := make([]float64, m*n*n)
		for i := range m {
			for j := range n {
				for k := j; k < n; k++ {
					v := d2g[i*n*(n+1)/2+j*n-j*(j+1)/2+k]
					full[(i*n+j)*n+k], full[(i*n+k)*n+j] = v, v
				}
			}
		}
		for j := range n {
			rows := make([]float64, 0, m*n)
			for i := range m {
				rows = append(rows, full[(i*n+j)*n:(i*n+j+1)*n]...)
			}
			s.gradient(fmt.Sprintf("d2g: row %d: ", j+1), m, q, params, rows, func(q []float64) []float64 {
				dg := nans(m * n)
				sh.Shape(x, q, nil, dg, nil)
				col := make([]float64, m)
				for i := range col {
					col[i] = dg[i*n+j]
				}
				return col
			})
		}
	}
}

// order checks that parameters made from any shape are in order and describe
// that shape still.
func (s *suite) order() {
	sorted := func(what string, p []float64) {
		for _, ij := range s.cs.Ascending {
			if !(p[ij[0]] <= p[ij[1]]) {
				s.errorf("%s: %s > %s in %v", what, s.info.Params[ij[0]].Symbol, s.info.Params[ij[1]].Symbol, p)
			}
		}
	}
	sh, isShaped := s.c.(models.Shaped)
	m := len(s.cs.T)
	x := nans(m)
	models.CentredX(s.cs.TRef, s.cs.T, x)
	for _, p := range s.cs.P {
		sorted("case", p)
		if !isShaped {
			continue
		}
		a, e, q := sh.ToShape(p)
		for _, sign := range []float64{1, -1} {
			turned := slices.Clone(q)
			for j := range turned {
				turned[j] *= sign
			}
			g := nans(m)
			sh.Shape(x, turned, g, nil, nil)
			made := nans(s.np)
			sh.FromShape(a, e, turned, made)
			sorted("FromShape", made)
			for i, got := range s.lnK(made, s.cs.T...) {
				s.near(fmt.Sprintf("ln k at %g K of FromShape(%g, %g, %v)", s.cs.T[i], a, e, turned), got, a-e*x[i]+g[i], 1e-12*math.Max(1, math.Abs(a)+maxAbs(g)))
			}
		}
	}
}

// ends are the temperatures between which bounds and seeds are asked for.
func (s *suite) ends() (low, high float64) { return slices.Min(s.cs.T), slices.Max(s.cs.T) }

// bounds checks that the range of q holds the case's parameters and the straight line,
// that the curve is good throughout it and that its first two parameters are linear.
func (s *suite) bounds() {
	sd, ok := s.c.(models.Seeded)
	if !ok {
		return
	}
	if s.np != 3 {
		s.errorf("a seeded curve has three parameters, not %d", s.np)
		return
	}
	tMin, tMax := s.ends()
	low, straight, high := sd.Bounds(s.cs.TRef, tMin, tMax)
	if !(low < high && low <= straight && straight <= high) {
		s.errorf("%g, %g, %g are no bounds with a straight line between", low, straight, high)
		return
	}
	for _, p := range s.cs.P {
		if !(p[2] >= low && p[2] <= high) {
			s.errorf("%v lies outside %g to %g", p, low, high)
		}
	}
	n := len(s.cs.T)
	x := nans(n)
	models.CentredX(s.cs.TRef, s.cs.T, x)
	for i := range 33 {
		q := low + (high-low)*float64(i)/32
		for name, eval := range s.evaluations() {
			f, jac := nans(n), nans(3*n)
			eval(s.cs.TRef, s.cs.T, []float64{1, 5e4, q}, f, jac)
			for _, v := range slices.Concat(f, jac) {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					s.errorf("%s: %g at %s = %g, within the bounds", name, v, s.info.Params[2].Symbol, q)
					break
				}
			}
		}
		zero, one := s.lnK([]float64{0, 0, q}, s.cs.T...), s.lnK([]float64{0, 1e4, q}, s.cs.T...)
		for j, got := range s.lnK([]float64{2, 5e4, q}, s.cs.T...) {
			s.near("ln k by its first two parameters", got, zero[j]+2+5*(one[j]-zero[j]), 1e-11*math.Max(1, math.Abs(got)))
		}
	}
	for j, got := range s.lnK([]float64{2, 5e4, straight}, s.cs.T...) {
		s.near(fmt.Sprintf("ln k of the straight line at %g K", s.cs.T[j]), got, 2-5e4*x[j], 1e-11*math.Max(1, math.Abs(got)))
	}
	// What lies past the bounds must not pass for a better fit: no curve, or one that is
	// still as it should be.
	for _, q := range []float64{low - (high-low)/8, high + (high-low)/8} {
		for _, v := range s.lnK([]float64{1, 5e4, q}, s.cs.T...) {
			if math.IsInf(v, 0) {
				s.errorf("ln k is %g at %s = %g, past the bounds; NaN is refused, infinity is not", v, s.info.Params[2].Symbol, q)
			}
		}
	}
}

// seeds checks that they cover the bounds and that data on any curve of the case, and
// on curves midway between seeds, are fitted best by a seed next to them.
func (s *suite) seeds() {
	sd, ok := s.c.(models.Seeded)
	if !ok || s.np != 3 {
		return
	}
	tMin, tMax := s.ends()
	low, straight, high := sd.Bounds(s.cs.TRef, tMin, tMax)
	seeds := sd.Seeds(s.cs.TRef, tMin, tMax)
	if len(seeds) < 5 || seeds[0] != low || seeds[len(seeds)-1] != high || !slices.IsSorted(seeds) {
		s.errorf("%v do not go from %g to %g in order, in four steps or more", seeds, low, high)
		return
	}
	if len(slices.Compact(slices.Clone(seeds))) != len(seeds) {
		s.errorf("a value occurs twice in %v", seeds)
	}
	truths := slices.Clone(s.cs.P)
	for j := 1; j < len(seeds); j++ {
		truths = append(truths, []float64{-2, 6e4, (seeds[j-1] + seeds[j]) / 2})
	}
	for _, p := range truths {
		if p[2] == straight {
			continue
		}
		y := s.lnK(p, s.cs.T...)
		best, least := -1, math.Inf(1)
		minima := 0
		rss := make([]float64, len(seeds))
		for j, q := range seeds {
			rss[j] = s.lineRSS(q, y)
			if rss[j] < least {
				best, least = j, rss[j]
			}
		}
		for j, v := range rss {
			if !(j > 0 && rss[j-1] <= v) && !(j+1 < len(rss) && rss[j+1] < v) {
				minima++
			}
		}
		from, to := seeds[max(best-1, 0)], seeds[min(best+1, len(seeds)-1)]
		if best < 0 || !(from <= p[2] && p[2] <= to) {
			s.errorf("data on the curve of %v are fitted best by the seeds between %g and %g", p, from, to)
		}
		if minima != 1 {
			s.errorf("data on the curve of %v have %d minima among the seeds", p, minima)
		}
	}
}

// lineRSS is the least Σ(y - ln k)² over the first two parameters, the third being q.
func (s *suite) lineRSS(q float64, y []float64) float64 {
	zero, one := s.lnK([]float64{0, 0, q}, s.cs.T...), s.lnK([]float64{0, 1e4, q}, s.cs.T...)
	n := float64(len(y))
	var mx, my float64
	for i := range y {
		mx += (one[i] - zero[i]) / n
		my += (y[i] - zero[i]) / n
	}
	var xx, xy float64
	for i := range y {
		x := one[i] - zero[i] - mx
		xx += x * x
		xy += x * (y[i] - zero[i] - my)
	}
	var rss float64
	for i := range y {
		r := y[i] - zero[i] - my - xy/xx*(one[i]-zero[i]-mx)
		rss += r * r
	}
	return rss
}

// eachForm calls f for every form, frame and set of ordinary parameters.
func (s *suite) eachForm(f func(form models.Form, fr models.Frame, p []float64)) {
	for _, form := range s.c.Forms() {
		for _, fr := range s.frames() {
			for _, p := range s.cs.P {
				f(form, fr, p)
			}
		}
	}
}

func (s *suite) formCalls() {
	atTForm := map[string]bool{}
	s.eachForm(func(form models.Form, fr models.Frame, p0 []float64) {
		p := slices.Clone(p0)
		q, jac := fromCurve(form, fr, p)
		alone := filled(len(q), 1)
		form.FromCurve(fr, p, alone, nil)
		if !same(q, alone) {
			s.errorf("%s: values without Jacobian differ", form.Name)
		}
		q0 := slices.Clone(q)
		form.ToCurve(fr, q, nans(s.np))
		if !same(p, p0) || !same(q, q0) {
			s.errorf("%s: inputs are modified", form.Name)
		}
		other := fr
		other.LnPerSecond++
		shifted, _ := fromCurve(form, other, p)
		if moved := !same(q, shifted); moved != form.NeedsTimeUnit {
			s.errorf("%s: NeedsTimeUnit is %v, but a change of the time unit moves the parameters: %v", form.Name, form.NeedsTimeUnit, moved)
		}
		other = fr
		other.TForm += 10
		shifted, _ = fromCurve(form, other, p)
		// A form whose exponent is 0 at these parameters may stay where it is.
		moved := !same(q, shifted)
		atTForm[form.Name] = atTForm[form.Name] || moved
		if moved && !form.AtTForm {
			s.errorf("%s: AtTForm is false, but a change of T_form moves the parameters", form.Name)
		}
		for i, v := range slices.Concat(q, jac) {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				s.errorf("%s: entry %d of values and Jacobian is %g for %v", form.Name, i, v, p)
			}
		}
	})
	for _, form := range s.c.Forms() {
		if form.AtTForm && !atTForm[form.Name] {
			s.errorf("%s: AtTForm is true, but nothing depends on T_form", form.Name)
		}
	}
}

func (s *suite) formRoundTrip() {
	s.eachForm(func(form models.Form, fr models.Frame, p []float64) {
		q, _ := fromCurve(form, fr, p)
		back := nans(s.np)
		form.ToCurve(fr, q, back)
		for j := range p {
			s.near(fmt.Sprintf("%s: %s after there and back", form.Name, s.info.Params[j].Symbol), back[j], p[j], 1e-11*math.Max(1, math.Abs(p[j])))
		}
		again, _ := fromCurve(form, fr, back)
		for j := range q {
			s.near(fmt.Sprintf("%s: %s after back and there", form.Name, form.Params[j].Symbol), again[j], q[j], 1e-11*math.Max(1, maxAbs(q)))
		}
	})
}

func (s *suite) formJacobian() {
	s.eachForm(func(form models.Form, fr models.Frame, p []float64) {
		q, jac := fromCurve(form, fr, p)
		for i := range q {
			s.gradient(form.Name+": "+form.Params[i].Symbol+": ", 1, p, s.info.Params, jac[i*s.np:(i+1)*s.np], func(p []float64) []float64 {
				q, _ := fromCurve(form, fr, p)
				return q[i : i+1]
			})
		}
	})
}

func (s *suite) formFormula() {
	s.eachForm(func(form models.Form, fr models.Frame, p []float64) {
		q, _ := fromCurve(form, fr, p)
		want := s.lnK(p, s.cs.T...)
		for i, ti := range s.cs.T {
			got := s.cs.Physical[form.Name](fr, q, ti)
			s.near(fmt.Sprintf("%s: ln k at %g K from %v", form.Name, ti, q), got, want[i], 1e-11*math.Max(1, maxAbs(want)))
		}
	})
}

func (s *suite) formRelations() {
	for _, fr := range s.frames() {
		for _, p := range s.cs.P {
			form := func(name, symbol string) float64 {
				for _, f := range s.c.Forms() {
					q, _ := fromCurve(f, fr, p)
					for j, par := range f.Params {
						if f.Name == name && par.Symbol == symbol {
							return q[j]
						}
					}
				}
				return math.NaN()
			}
			for _, rel := range s.cs.Relations {
				left, right, scale := rel.Sides(fr, form, func(t float64) float64 { return s.eLoc(p, t)[0] })
				s.near(fmt.Sprintf("%s: left side for %v", rel.Name, p), left, right, 1e-12*scale)
			}
		}
	}
}

// written computes k from what is printed of the curve, and looks whether it is as good
// as the digits were chosen for: with each number at the edge of what rounding may do to
// it, in all directions, and with many digits.
func (s *suite) written() {
	c, ok := s.c.(models.Written)
	if !ok {
		s.errorf("the curve does not implement models.Written: k could not be computed from what is published")
		return
	}
	for _, tolerance := range []float64{1e-3, 1e-5} {
		for _, p := range slices.Concat(s.cs.P, s.flat()) {
			want := s.lnK(p, s.cs.T...)
			// Rounding of float64 enters most where 1 less a small number has a logarithm.
			const slack = 2e-7
			for seed := range uint64(8) {
				w := models.Writer{TMin: slices.Min(s.cs.T), TMax: slices.Max(s.cs.T), T0: 298.15}
				w.Kelvin = func(t float64) string { return fmt.Sprint(t) }
				number := uint64(0)
				w.Number = func(x, slope float64) string {
					if !(slope >= 0) || math.IsInf(slope, 0) || math.IsNaN(x) || math.IsInf(x, 0) {
						s.errorf("asks for the digits of %g with a slope of %g, for %v", x, slope, p)
					}
					if seed > 0 { // as far off as it may be
						off := math.Min(tolerance/(3*slope), 0.5)
						if number++; seed>>(number%3)&1 == 0 {
							off = -off
						}
						x += off
					}
					return strings.Replace(strconv.FormatFloat(x, 'f', 17, 64), "-", "−", 1)
				}
				text := c.Write(w, s.cs.TRef, p)
				for i, ti := range s.cs.T {
					k, err := Evaluate(text, ti)
					if err != nil {
						s.errorf("%v", err)
						break
					}
					allowed := slack
					if seed > 0 {
						allowed += 1.05 * tolerance // slopes are of first order
					}
					s.near(fmt.Sprintf("ln k at %g K by %s for %v", ti, text, p), math.Log(k), want[i], allowed)
				}
			}
		}
	}
}

// flat are parameters of a Seeded on its straight line and next to it.
func (s *suite) flat() [][]float64 {
	sd, ok := s.c.(models.Seeded)
	if !ok || s.np != 3 {
		return nil
	}
	low, straight, high := sd.Bounds(s.cs.TRef, slices.Min(s.cs.T), slices.Max(s.cs.T))
	ps := [][]float64{{-2, 5e4, straight}}
	for _, f := range []float64{1e-15, 1e-9, 1e-6, 1e-3} {
		if q := straight + f*(high-straight); q > straight {
			ps = append(ps, []float64{-2, 5e4, q})
		}
		if q := straight - f*(straight-low); q < straight {
			ps = append(ps, []float64{-2, 5e4, q})
		}
	}
	return ps
}

// profiled checks that every quantity to profile has the same gradient as what it is said
// to be in the first form, wherever it is taken.
func (s *suite) profiled() {
	c, ok := s.c.(models.Profiled)
	if !ok {
		return
	}
	if _, ok := s.c.(models.Seeded); ok {
		s.errorf("a seeded curve is always profiled")
	}
	if _, ok := s.c.(models.Basis); ok != (c.Profiled() == nil) {
		s.errorf("a curve is profiled as a whole if it is a Basis, else by its parameters")
	}
	row := func(f models.Form, symbol string, p []float64) []float64 {
		_, jac := fromCurve(f, s.frames()[0], p)
		for i, par := range f.Params {
			if par.Symbol == symbol {
				return jac[i*s.np : (i+1)*s.np]
			}
		}
		return nil
	}
	for symbol, name := range c.Profiled() {
		if !slices.Contains([]string{"ln_A1", "E1", "ln_A2", "E2"}, name) {
			s.errorf("%s is to be profiled as %s; package fit knows the parameters of two paths", symbol, name)
		}
		found := false
		var first []float64
		for _, p := range s.cs.P {
			want := row(s.c.Forms()[0], name, p)
			if first == nil {
				first = want
			}
			if want == nil || !same(want, first) {
				s.errorf("the first form has no %s that is linear in the canonical parameters", name)
				return
			}
			for _, f := range s.c.Forms() {
				if got := row(f, symbol, p); got != nil {
					found = true
					if !same(got, want) {
						s.errorf("%s of %s is not %s", symbol, f.Name, name)
					}
				}
			}
		}
		if !found {
			s.errorf("no form has a %s", symbol)
		}
	}
}

// readAs checks that every form is one in which the curve is read for some parameters, and
// that all but the first say what it means.
func (s *suite) readAs() {
	c, ok := s.c.(models.ReadAs)
	if !ok {
		return
	}
	n := len(s.c.Forms())
	seen := make([]bool, n)
	for _, p := range s.cs.P {
		i, meaning := c.ReadAs(p)
		if i < 0 || i >= n {
			s.errorf("is read in form %d of %d", i, n)
			return
		}
		seen[i] = true
		if (meaning == "") != (i == 0) {
			s.errorf("form %d of %v means %q", i, p, meaning)
		}
	}
	if slices.Contains(seen, false) {
		s.errorf("no parameters of the case are read in one of the forms")
	}
}

// extreme asks for finite results only.
func (s *suite) extreme() {
	t := []float64{10, 30, 100, 300, s.cs.TRef, 1000, 3000, 1e4, 1e5}
	m := len(t)
	finite := func(what string, p, vs []float64) {
		for i, v := range vs {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				s.errorf("%s: entry %d is %g for %v", what, i, v, p)
				return
			}
		}
	}
	for _, p := range s.cs.Extreme {
		for name, eval := range s.evaluations() {
			f, jac := nans(m), nans(m*s.np)
			eval(s.cs.TRef, t, p, f, jac)
			finite(name, p, f)
			finite(name+" Jacobian", p, jac)
		}
		if sh, ok := s.c.(models.Shaped); ok {
			n := sh.ShapeDim()
			x := nans(m)
			models.CentredX(s.cs.TRef, t, x)
			_, _, q := sh.ToShape(p)
			g, dg, d2g := nans(m), nans(m*n), nans(m*n*(n+1)/2)
			sh.Shape(x, q, g, dg, d2g)
			finite("shape", p, slices.Concat(g, dg, d2g))
		}
		for _, form := range s.c.Forms() {
			for _, fr := range s.frames() {
				q, jac := fromCurve(form, fr, p)
				for j, par := range form.Params {
					row := jac[j*s.np : (j+1)*s.np]
					if s.mayBeUndefined(par.Symbol) && math.IsNaN(q[j]) {
						if slices.ContainsFunc(row, func(v float64) bool { return !math.IsNaN(v) }) {
							s.errorf("%s: %s is not defined for %v, its derivatives are", form.Name, par.Symbol, p)
						}
						continue
					}
					finite(form.Name+": "+par.Symbol, p, append([]float64{q[j]}, row...))
				}
			}
		}
	}
}
