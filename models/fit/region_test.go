package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"

	"gonum.org/v1/gonum/stat/distuv"
)

// quantities of a seeded curve by name: the parameters of its form; E_loc at the
// reference temperature and at T_min, and its change over the range, in kJ/mol.
func quantities(s *Sample, c models.Curve) map[string]Function {
	out := map[string]Function{}
	f := c.Forms()[0]
	for i, par := range f.Params {
		out[par.Symbol] = func(p, grad []float64) float64 {
			q, jac := make([]float64, 3), make([]float64, 9)
			f.FromCurve(models.Frame{TRef: s.TRef}, p, q, jac)
			copy(grad, jac[3*i:])
			return q[i]
		}
	}
	local := func(t float64) Function {
		return func(p, grad []float64) float64 {
			e := []float64{0}
			c.ELoc(s.TRef, []float64{t}, p, e, grad)
			for j := range grad {
				grad[j] /= 1000
			}
			return e[0] / 1000
		}
	}
	low, high := s.Range()
	out["E_ref"], out["E_min"] = local(s.TRef), local(low)
	out["dE"] = func(p, grad []float64) float64 {
		less := make([]float64, 3)
		e := local(high)(p, grad) - local(low)(p, less)
		for j := range grad {
			grad[j] -= less[j]
		}
		return e
	}
	return out
}

// mgh10 is MGH10 of the NIST StRD at temperatures moved by 400, as in TestVogelMGH10.
func mgh10(t testing.TB, model ErrorModel, v float64) *Sample {
	var temps, k, vs []float64
	for i, y := range []float64{34780, 28610, 23650, 19630, 16370, 13720, 11540, 9744, 8261, 7030, 6005, 5147, 4427, 3820, 3307, 2872} {
		temps, k, vs = append(temps, 450+5*float64(i)), append(k, y), append(vs, v)
	}
	return mustSample(t, model, temps, k, vs)
}

// inTurn gives every second entry an offset of its own.
func inTurn(s *Sample) *Sample {
	column := make([]float64, s.Len())
	for i := range column {
		column[i] = float64(i % 2)
	}
	return s.WithOffsets(make([]float64, s.Len()), [][]float64{column})
}

// TestRegionAgainstR compares with golden_shape_profiles.csv (R 4.2.2: a quantity held,
// the sum of squares least over a grid of shapes and optimize, ends by uniroot): every
// error model, weights, offsets, MGH10 of NIST, bounds that are met.
func TestRegionAgainstR(t *testing.T) {
	compared, open := 0, 0
	for _, row := range reference.Records(t, "golden_shape_profiles.csv") {
		set, model := row["dataset"], ErrorModel(row["model"])
		var s *Sample
		switch {
		case set == "MGH10" && model == StatedAbsolute:
			s = mgh10(t, model, 4)
		case set == "MGH10":
			s = mgh10(t, model, 1)
		case model == "offsets":
			s = inTurn(synthetic(t, set, Relative))
		default:
			s = synthetic(t, set, model)
		}
		c, err := models.Lookup(row["curve"])
		if err != nil {
			t.Fatal(err)
		}
		r := Fit(s, c)
		e := NewRegion(s, r, 0.95).Interval(quantities(s, c)[row["quantity"]])
		what := set + " " + row["curve"] + " " + row["model"] + " " + row["quantity"]
		reach := 1e-7 * (e.Upper - e.Lower)
		if math.IsInf(reach, 0) {
			reach = 0
		}
		end := func(side string, got float64, opens bool) {
			compared++
			if row[side] == "NA" {
				open++
				if !math.IsInf(got, 0) || !opens {
					t.Errorf("%s: %s end %g, want it open", what, side, got)
				}
				return
			}
			want := reference.Number(t, row[side])
			if opens {
				t.Errorf("%s: %s end is open, want %g", what, side, want)
			}
			reference.Within(t, what+" "+side, got, want, max(reach, 1e-7*math.Abs(want)))
		}
		end("lower", e.Lower, e.Open == OpenLower || e.Open == OpenBoth)
		end("upper", e.Upper, e.Open == OpenUpper || e.Open == OpenBoth)
		// A function that is linear goes the same way through Profile.
		if row["quantity"] == "E_ref" {
			p := Profile(s, r, []float64{0, 1e-3, 0}, 0.95)
			if p.Open != e.Open {
				t.Errorf("%s: by Profile %+v, by Region %+v", what, p, e)
			}
			if e.Open == OpenNone {
				reference.Close(t, what+" by Profile", p.Lower, e.Lower, 1e-12)
				reference.Close(t, what+" by Profile", p.Upper, e.Upper, 1e-12)
			}
		}
	}
	if compared < 180 || open < 10 {
		t.Errorf("compared %d ends, %d of them open", compared, open)
	}
}

// TestRegionHoldsItsPoints: no point whose sum of squares meets the criterion gives a
// quantity a value beyond its interval. Half of the points are drawn about the best line
// at a shape, by the covariance.
func TestRegionHoldsItsPoints(t *testing.T) {
	for name, truth := range seededTruths() {
		c, _ := models.Lookup(name)
		inside := 0
		for _, model := range ErrorModels {
			for seed := range uint64(6) {
				for _, noise := range []float64{1e-3, 0.02} {
					s := seededSample(t, c, truth, model, noise, seed)
					if seed%2 == 1 {
						s = inTurn(s)
					}
					f := Fit(s, c)
					if f.Cov == nil {
						continue
					}
					g := NewRegion(s, f, 0.95)
					intervals := map[string]Estimate{}
					for q, h := range quantities(s, c) {
						intervals[q] = g.Interval(h)
						if e := intervals[q]; !(e.Lower <= e.Value && e.Value <= e.Upper) && e.Open == OpenNone {
							t.Errorf("%s, %s, seed %d: %s %+v", name, model, seed, q, e)
						}
					}
					rng := rand.New(rand.NewPCG(seed, 7))
					grad, res := make([]float64, 3), make([]float64, s.Len())
					for range 400 {
						phi := (rng.Float64() - 0.5) * math.Pi
						p := append([]float64(nil), g.nodes[rng.IntN(len(g.nodes))].p...)
						p[shape] = g.shapeAt(phi)
						p[0] += rng.NormFloat64() * math.Sqrt(f.Cov[0])
						p[1] += rng.NormFloat64() * math.Sqrt(f.Cov[4])
						if g.eval(p, res, nil); !(dot(res, res) <= g.limit) {
							continue
						}
						inside++
						for q, h := range quantities(s, c) {
							e := intervals[q]
							if v := h(p[:3], grad); v < e.Lower-1e-9*math.Abs(v) || v > e.Upper+1e-9*math.Abs(v) {
								t.Fatalf("%s, %s, noise %g, seed %d: %s = %g in the region, %+v", name, model, noise, seed, q, v, e)
							}
						}
					}
				}
			}
		}
		if inside < 500 {
			t.Errorf("%s: %d points in the region", name, inside)
		}
	}
}

// Data on the curve leave a point, and three of them no interval; what bends the other way
// has no estimate.
func TestRegionWithoutScatter(t *testing.T) {
	for name, truth := range seededTruths() {
		c, _ := models.Lookup(name)
		s := seededSample(t, c, truth, Relative, 0, 1)
		r := Fit(s, c)
		for q, h := range quantities(s, c) {
			e := NewRegion(s, r, 0.95).Interval(h)
			if e.Lower != e.Value || e.Upper != e.Value || e.Open != OpenNone {
				t.Errorf("%s: %s %+v", name, q, e)
			}
		}
		few := mustSample(t, Relative, []float64{s.T[0], s.T[4], s.T[9]}, []float64{s.K[0], s.K[4], s.K[9]}, []float64{1, 1, 1})
		if e := Profile(few, Fit(few, c), []float64{0, 0, 1}, 0.95); !math.IsNaN(e.Lower) || !math.IsNaN(e.Upper) {
			t.Errorf("%s: an interval without a degree of freedom, %+v", name, e)
		}
	}
	s := synthetic(t, "s3_parallel", Relative)
	if e := Profile(s, Fit(s, models.Vogel{}), []float64{0, 0, 1}, 0.95); !math.IsNaN(e.Value) || !math.IsNaN(e.Lower) {
		t.Errorf("an excluded curve has an interval, %+v", e)
	}
}

// The intervals know whether they reach the straight line, and the bounds beyond it.
func TestRegionSays(t *testing.T) {
	for _, c := range []struct {
		set, curve   string
		model        ErrorModel
		line, bounds bool
	}{
		{"s1_straight", "vogel", Relative, true, false},
		{"s1_straight", "deformed", Relative, true, false},
		{"s7_vft", "vogel", Relative, false, false},
		{"s3_parallel", "tunnelling-bell", Relative, false, false},
		{"s3_parallel", "tunnelling-bell", Absolute, true, true}, // NA at both ends in R
	} {
		s := synthetic(t, c.set, c.model)
		curve, _ := models.Lookup(c.curve)
		g := NewRegion(s, Fit(s, curve), 0.95)
		if g.HoldsLine() != c.line || g.MeetsBound() != c.bounds {
			t.Errorf("%s, %s: holds the straight line %t, meets a bound %t", c.set, c.curve, g.HoldsLine(), g.MeetsBound())
		}
	}
}

// An end just inside a bound is found: the confidence is chosen so that T_0 of vogel ends at
// 0.1 mK, S by a straight line against 1/(T - T_0).
func TestRegionEndsBesideBound(t *testing.T) {
	const end = 1e-4
	s := synthetic(t, "s1_straight", Relative)
	r := Fit(s, models.Vogel{})
	n := s.Len()
	x, w := make([]float64, 2*n), make([]float64, n)
	for i, ti := range s.T {
		x[2*i], x[2*i+1], w[i] = 1, 1/(ti-end), 1
	}
	rise := Linear(x, s.Y, w).RSS/r.RSS - 1
	confidence := 2*distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(r.Nu)}.CDF(math.Sqrt(rise*float64(r.Nu))) - 1
	e := Profile(s, r, []float64{0, 0, 1}, confidence)
	if e.Open != OpenNone {
		t.Fatalf("confidence %g: %+v", confidence, e)
	}
	reference.Within(t, "T_0", e.Lower, end, 1e-7)
}

// TestRegionCoverage: where estimates are far from normal the profile holds the truth in
// 95 % of sets, and Student's t may not. 10 points between 250 and 400 K, seeds fixed.
func TestRegionCoverage(t *testing.T) {
	if testing.Short() {
		t.Skip("a simulation of one goroutine")
	}
	const sets = 600
	for _, study := range []struct {
		curve    string
		truth    []float64
		quantity string
		model    ErrorModel
		noise    float64
	}{
		{"vogel", []float64{-2, 40e3, 120}, "B", Relative, 0.15},
		{"vogel", []float64{-2, 40e3, 120}, "T0", Relative, 0.15},
		{"vogel", []float64{-2, 40e3, 120}, "B", Absolute, 0.02},
		{"vogel", []float64{-2, 40e3, 120}, "T0", Absolute, 0.02},
		{"deformed", []float64{-2, 60e3, 2000}, "E", Relative, 0.3},
		{"deformed", []float64{-2, 60e3, 2000}, "E", Absolute, 0.01},
		{"tunnelling-bell", []float64{-2, 60e3, 12}, "E", Relative, 0.15},
		{"tunnelling-bell", []float64{-2, 60e3, 12}, "nu", Relative, 0.15},
	} {
		c, _ := models.Lookup(study.curve)
		var profile, wald, used int
		for seed := range uint64(sets) {
			s := seededSample(t, c, study.truth, study.model, study.noise, seed)
			f := Fit(s, c)
			if !f.Usable() { // the straight line
				continue
			}
			used++
			grad := make([]float64, 3)
			made := *s // the parameters of the truth are those at another temperature
			made.TRef = 1 / ((1/250. + 1/400.) / 2)
			want := quantities(&made, c)[study.quantity](study.truth, grad)
			h := quantities(s, c)[study.quantity]
			if e := NewRegion(s, f, 0.95).Interval(h); e.Lower <= want && want <= e.Upper {
				profile++
			}
			if f.Status != Converged {
				continue
			}
			value := h(f.P, grad)
			if w := f.Interval(grad, value, 0.95); w.Lower <= want && want <= w.Upper {
				wald++
			}
		}
		p, w := float64(profile)/float64(used), float64(wald)/float64(used)
		t.Logf("%-16s %-4s %-8s profile %.3f, t %.3f of %d", study.curve, study.quantity, study.model, p, w, used)
		if !(p >= 0.93) {
			t.Errorf("%s, %s: %s holds the truth in %.3f of sets", study.curve, study.model, study.quantity, p)
		}
	}
}

// BenchmarkRegion times the region and one interval at 20 points; the floor is one exp and
// one log1p a point.
func BenchmarkRegion(b *testing.B) {
	for _, model := range []ErrorModel{Relative, Absolute} {
		for _, name := range []string{"vogel", "deformed"} {
			c, _ := models.Lookup(name)
			truth := seededTruths()[name]
			rng := rand.New(rand.NewPCG(1, 1))
			temps, k, v := make([]float64, 20), make([]float64, 20), make([]float64, 20)
			for i := range temps {
				temps[i], v[i] = 280+4*float64(i), 1
			}
			c.LnK(320, temps, truth, k, nil)
			for i := range k {
				k[i] = math.Exp(k[i] + 0.01*rng.NormFloat64())
			}
			s := mustSample(b, model, temps, k, v)
			r := Fit(s, c)
			region, all := NewRegion(s, r, 0.95), quantities(s, c)
			b.Run(string(model)+"/"+name+"/region", func(b *testing.B) {
				for range b.N {
					NewRegion(s, r, 0.95)
				}
			})
			for _, q := range []string{"ln_A", "dE"} {
				b.Run(string(model)+"/"+name+"/"+q, func(b *testing.B) {
					for range b.N {
						region.Interval(all[q])
					}
				})
			}
		}
	}
}
