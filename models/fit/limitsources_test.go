package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/reference"
)

// limitsBeside is the set of limits_sources.csv: four sources, one of them of one point
// and a limit. columns are contrasts that add up to 0, of measured entries and, after
// them, limits; beside makes them nuisance columns.
func limitsBeside(t testing.TB, model ErrorModel, beside bool) (s *Sample, columns [][]float64) {
	t.Helper()
	var tt, k, v []float64
	var limits []Limit
	var measured, limited []string
	for _, row := range reference.Records(t, "limits_sources.csv") {
		temp, value, u := reference.Number(t, row["T_K"]), reference.Number(t, row["k"]), reference.Number(t, row["u_k"])
		variance := 1.0
		switch model {
		case Stated, Scaled:
			variance = square(u / value)
		case StatedAbsolute:
			variance = u * u
		}
		if row["limit"] != "" {
			limits = append(limits, Limit{T: temp, K: value, Below: row["limit"] == "<", V: variance})
			limited = append(limited, row["source"])
			continue
		}
		tt, k, v = append(tt, temp), append(k, value), append(v, variance)
		measured = append(measured, row["source"])
	}
	s, err := NewSample(model, tt, k, v)
	if err != nil {
		t.Fatal(err)
	}
	if s, err = s.WithLimits(limits); err != nil {
		t.Fatal(err)
	}
	all := slices.Concat(measured, limited)
	for _, name := range []string{"A", "B", "C"} {
		c := make([]float64, len(all))
		for i, source := range all {
			switch source {
			case name:
				c[i] = 1
			case "D":
				c[i] = -1
			}
		}
		columns = append(columns, c)
	}
	if beside {
		s = s.WithOffsets(make([]float64, len(all)), columns)
	}
	return s, columns
}

// R's survreg with a factor for the source, by golden_limits.R, and the likelihood of
// every error model by its definition in 60 digits, by golden_limits.py.
func TestLimitsBesideOffsetsAgainstReference(t *testing.T) {
	r, mp := reference.Golden(t, "golden_limits_r.csv"), reference.Golden(t, "golden_limits_mp.csv")
	for _, model := range ErrorModels {
		for _, curve := range []models.Curve{models.Straight(), models.PowerPrefactor{}} {
			for _, beside := range []bool{true, false} {
				s, _ := limitsBeside(t, model, beside)
				f := Fit(s, curve)
				name, set := curve.Info().Name, string(model)
				if !beside {
					set += "-pooled"
				}
				what := set + ", " + name + ": "
				if f.Status != Converged || f.N != 18 || f.Nu != 14-f.Params()-3*btoi(beside) || f.Spent != 3*btoi(beside) {
					t.Errorf("%s%s %s, N = %d, ν = %d", what, f.Status, f.Reason, f.N, f.Nu)
					continue
				}
				stretch := 1.0
				if !model.KnownSigma() {
					stretch = math.Sqrt(14 / float64(f.Nu)) // σ̂ of no limits is √(RSS/ν), not √(RSS/n)
					reference.Close(t, what+"sigma", f.Sigma/stretch, mp.Of(t, set, name, "sigma"), 1e-8)
				}
				last, unit, inR := "n", 1.0, "l"
				if f.Params() == 2 {
					last, unit, inR = "slope", -1000*models.GasConstant, "x" // per 1000/T
				}
				slope, sd := f.P[f.Params()-1]/unit, math.Sqrt(f.Cov[len(f.Cov)-1])/stretch/math.Abs(unit)
				reference.Close(t, what+last, slope, mp.Of(t, set, name, last), 1e-8)
				reference.Close(t, what+"its standard deviation", sd, mp.Of(t, set, name, "sd"), 1e-6)
				reference.Close(t, what+"logLik", f.LogLik, mp.Of(t, set, name, "logLik"), 1e-11)
				if model == Relative {
					reference.Close(t, what+last+" of R", slope, r.Of(t, set, name, inR), 1e-8)
					reference.Close(t, what+"its standard deviation of R", sd, r.Of(t, set, name, "sd:"+inR), 1e-6)
					reference.Close(t, what+"logLik of R", f.LogLik, r.Of(t, set, name, "logLik"), 1e-11)
				}
				for j, b := range f.Beside {
					q := fmt.Sprintf("offset%d", j+1)
					reference.Close(t, what+q, b, mp.Of(t, set, name, q), 1e-6)
					reference.Close(t, what+"u of "+q, math.Sqrt(f.BesideCov[4*j])/stretch, mp.Of(t, set, name, "sd:"+q), 1e-6)
				}
			}
		}
	}
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// The ends of the profile of n with the offsets free: R's survreg with n held and
// uniroot, and for errors in k the likelihood in 60 digits and SciPy's brentq.
func TestProfileWithLimitsBesideOffsets(t *testing.T) {
	r, mp := reference.Golden(t, "golden_limits_r.csv"), reference.Golden(t, "golden_limits_mp.csv")
	for _, c := range []struct {
		model ErrorModel
		from  reference.Values
	}{{Relative, r}, {Absolute, mp}} {
		s, _ := limitsBeside(t, c.model, true)
		e := ProfileExponent(s, Fit(s, models.PowerPrefactor{}), 0.95)
		reference.Close(t, string(c.model)+": lower end", e.Lower, c.from.Of(t, string(c.model), "power-prefactor", "lower"), 1e-7)
		reference.Close(t, string(c.model)+": upper end", e.Upper, c.from.Of(t, string(c.model), "power-prefactor", "upper"), 1e-7)
	}
	// One known σ for all: R's scale = 0.05.
	s, columns := limitsBeside(t, Stated, false)
	for i := range s.V {
		s.V[i] = 0.0025
	}
	for i := range s.Limits {
		s.Limits[i].V = 0.0025
	}
	s = s.WithOffsets(make([]float64, 18), columns)
	f := Fit(s, models.PowerPrefactor{})
	e := ProfileExponent(s, f, 0.95)
	of := func(q string) float64 { return r.Of(t, "stated", "power-prefactor", q) }
	reference.Close(t, "stated: n", f.P[2], of("l"), 1e-8)
	reference.Close(t, "stated: u(n)", math.Sqrt(f.Cov[8]), of("sd:l"), 1e-6)
	reference.Close(t, "stated: logLik", f.LogLik, of("logLik"), 1e-11)
	reference.Close(t, "stated: lower end", e.Lower, of("lower"), 1e-8)
	reference.Close(t, "stated: upper end", e.Upper, of("upper"), 1e-8)
}

// Offsets that were taken off before are found to be 0, limits with them, and nothing
// else moves.
func TestOffsetsTakenOffLimits(t *testing.T) {
	for _, model := range ErrorModels {
		s, columns := limitsBeside(t, model, true)
		for _, c := range models.Default() {
			f := Fit(s, c)
			if f.Status != Converged {
				continue
			}
			off := make([]float64, 18)
			for i := range off {
				off[i] = 0.3
				for j, b := range f.Beside {
					off[i] += b * columns[j][i]
				}
			}
			plain, _ := limitsBeside(t, model, false)
			g := Fit(plain.WithOffsets(off, columns), c)
			name := string(model) + ", " + c.Info().Name
			reference.Close(t, name+": likelihood", g.LogLik, f.LogLik, 1e-9)
			if g.Status != Converged {
				t.Errorf("%s: %s %s", name, g.Status, g.Reason)
				continue
			}
			for _, b := range g.Beside {
				reference.Within(t, name+": offset that is left", b, 0, 1e-5)
			}
			last := len(f.P) - 1
			u := math.Sqrt(f.Cov[len(f.Cov)-1])
			reference.Within(t, name+": last parameter", g.P[last], f.P[last], 1e-3*u)
			reference.Close(t, name+": its u", math.Sqrt(g.Cov[len(g.Cov)-1]), u, 1e-3)
		}
	}
}

// Limits far on their side change nothing, and those of a sample that does not determine
// the offsets are not used.
func TestUselessLimitsBesideOffsets(t *testing.T) {
	for _, model := range []ErrorModel{Relative, Stated, Scaled, Absolute} {
		with, columns := limitsBeside(t, model, false)
		for i := range with.Limits {
			if l := &with.Limits[i]; l.Below {
				l.K *= 1e6
			} else {
				l.K /= 1e6
				if model == Absolute {
					l.K = -1
				}
			}
		}
		zero := make([]float64, 18)
		far := with.WithOffsets(zero, columns)
		none := far.Measured()
		for _, c := range []models.Curve{models.Straight(), models.PowerPrefactor{}} {
			a, b := Fit(none, c), Fit(far, c)
			name := string(model) + ", " + c.Info().Name
			if a.Status != Converged || b.Status != Converged || a.Nu != b.Nu || b.N != a.N+4 {
				t.Errorf("%s: %s and %s (%s)", name, a.Status, b.Status, b.Reason)
				continue
			}
			reference.Close(t, name+": logLik", b.LogLik, a.LogLik, 1e-9)
			for j := range a.Beside {
				reference.Within(t, name+": offset", b.Beside[j], a.Beside[j], 1e-4*math.Sqrt(a.BesideCov[4*j]))
				if model != Absolute {
					reference.Close(t, name+": u of an offset", math.Sqrt(b.BesideCov[4*j]), math.Sqrt(a.BesideCov[4*j]), 1e-6)
				}
			}
		}
	}
	// A fifth source of limits only: columns of measured entries that are all 0.
	s, columns := limitsBeside(t, Relative, false)
	only := make([]float64, 18)
	only[17] = 1
	s = s.WithOffsets(make([]float64, 18), append(columns, only))
	if f := Fit(s, models.PowerPrefactor{}); f.LimitMass != nil || len(f.Warnings) == 0 {
		t.Errorf("limits of a source without a measured point are used: %v, %v", f.LimitMass, f.Warnings)
	}
	if _, err := s.WithLimits([]Limit{{T: 300, K: 1, V: 1}}); err == nil {
		t.Error("a limit without values of the nuisance columns is taken")
	}
}

// A refit of the data gives the fit back, its standard error too, and a resample what Fit
// gives to a sample of it.
func TestLimitRefitterBesideOffsets(t *testing.T) {
	for _, model := range ErrorModels {
		s, _ := limitsBeside(t, model, true)
		curves := models.Default()
		var fits []*Result
		for _, c := range curves {
			fits = append(fits, Fit(s, c))
		}
		r := NewRefitter(s, curves, fits, RefitOptions{}).Clone().(StdErrorRefitter)
		all := s.All()
		y := slices.Clone(all.Y)
		if model.InK() {
			y = slices.Clone(all.K)
		}
		var out Refit
		r.Refit(y, &out)
		for j, f := range fits {
			name := string(model) + ", " + curves[j].Info().Name
			if _, basis := curves[j].(models.Basis); !basis || f.Status != Converged {
				continue
			}
			reference.Close(t, name+": RSS of the data", out.RSS[j], f.RSS, 1e-6)
			p := len(out.P[j])
			if p != f.Params() {
				t.Fatalf("%s: %d parameters", name, p)
			}
			w := make([]float64, p)
			w[p-1] = 1
			reference.Close(t, name+": standard error", r.StdError(j, w), math.Sqrt(f.Cov[p*p-1]), 1e-4)
		}
		rng := rand.New(rand.NewPCG(7, 8))
		power := fits[slices.IndexFunc(curves, func(c models.Curve) bool { return c.Info().Name == "power-prefactor" })]
		lnK := make([]float64, all.Len())
		power.Curve.LnK(s.TRef, all.T, power.P, lnK, nil)
		for range 8 {
			sub := &Sample{Model: model, TRef: s.TRef, Nuisance: make([][]float64, 3)}
			take := func(temp, y, v float64, beside func(j int) float64) {
				k := y
				if !model.InK() {
					k = math.Exp(y)
				}
				sub.add(temp, k, v)
				for j := range sub.Nuisance {
					sub.Nuisance[j] = append(sub.Nuisance[j], beside(j))
				}
			}
			for i := range y {
				beside := func(j int) float64 { return s.Nuisance[j][i] }
				if i >= s.Len() {
					beside = func(j int) float64 { return s.Limits[i-s.Len()].Beside[j] }
				}
				mean := lnK[i]
				for j, b := range power.Beside {
					mean += b * beside(j)
				}
				if model.InK() {
					mean = math.Exp(mean)
				}
				y[i] = mean + power.Sigma*math.Sqrt(all.V[i])*rng.NormFloat64()
				if i >= s.Len() {
					l := s.Limits[i-s.Len()]
					bound := l.K
					if !model.InK() {
						bound = math.Log(bound)
					}
					if (y[i] < bound) == l.Below {
						sub.Limits = append(sub.Limits, l)
						continue
					}
				}
				take(all.T[i], y[i], all.V[i], beside)
			}
			r.Refit(y, &out)
			for j, c := range curves {
				if _, basis := c.(models.Basis); !basis {
					continue
				}
				f := Fit(sub, c)
				if f.Status != Converged {
					continue
				}
				name := string(model) + ", " + c.Info().Name
				last := len(f.P) - 1
				u := math.Sqrt(f.Cov[len(f.Cov)-1])
				reference.Within(t, name+": last parameter of a resample", out.P[j][last], f.P[last], 1e-3*u)
			}
		}
		r.RefitCounts(y, slices.Repeat([]int{1}, len(y)), &out)
		if out.How != HowFailed || !math.IsNaN(out.RSS[0]) {
			t.Errorf("%s: pairs across offsets are refitted", model)
		}
	}
}

// heldSeed is a seeded curve with its third parameter held: linear in the other two.
type heldSeed struct {
	models.Curve // for ELoc, which is not asked for
	c            models.Seeded
	q            float64
}

func (h heldSeed) Info() models.Info { return models.Straight().Info() }

func (h heldSeed) LnK(tRef float64, t, p, f, jac []float64) {
	whole := make([]float64, 3*len(t))
	h.c.LnK(tRef, t, []float64{p[0], p[1], h.q}, f, whole)
	for i := range t {
		if jac != nil {
			copy(jac[2*i:2*i+2], whole[3*i:])
		}
	}
}

func (h heldSeed) Columns(tRef float64, t, off, x []float64) {
	h.LnK(tRef, t, []float64{0, 0}, off, x)
}

// The third parameter of a seeded curve stays within its bounds where limits draw it
// out of them, and the fit is then the best one on the bounds: that of the best of many
// held values, each of which is a problem with one minimum.
func TestSeededBoundsWithLimits(t *testing.T) {
	reached := map[string]bool{}
	for _, model := range []ErrorModel{Relative, Stated, Absolute} {
		for _, seeded := range []models.Seeded{models.Vogel{}, models.TunnellingBell(), models.TunnellingWigner(), models.Deformed{}} {
			for _, pull := range []float64{-4, -1.5, 0, 1.5} { // of the limit, in ln k
				name := fmt.Sprintf("%s, %s, limit %+g", model, seeded.Info().Name, pull)
				bend := -1.0 // of ln k at 35 K from the middle
				if strings.HasPrefix(seeded.Info().Name, "tunnelling") || seeded.Info().Name == "deformed" && pull > 0 {
					bend = 1
				}
				at := func(temp float64) float64 {
					return math.Exp(-6.8 - 10000*(1/temp-1/310.) + 0.15*bend*square((temp-310)/35))
				}
				var temps, k, v []float64
				rng := rand.New(rand.NewPCG(9, 10))
				for temp := 280.0; temp <= 340; temp += 6 {
					temps, k = append(temps, temp), append(k, at(temp)*math.Exp(0.05*rng.NormFloat64()))
					switch {
					case model.InK() && model.KnownSigma():
						v = append(v, square(0.05*at(temp)))
					case model.KnownSigma():
						v = append(v, 25e-4)
					default:
						v = append(v, 1)
					}
				}
				s, err := NewSample(model, temps, k, v)
				if err != nil {
					t.Fatal(err)
				}
				cold := Limit{T: 270, K: at(270) * math.Exp(pull), Below: pull <= 0, V: v[0]}
				s = limited(t, s, cold, Limit{T: 274, K: at(274) * math.Exp(pull/2), Below: pull <= 0, V: v[0]})
				low, _, high := seeded.Bounds(s.TRef, 270, temps[len(temps)-1])
				f := Fit(s, seeded)
				least := math.Inf(1)
				for i := range 81 {
					h := Fit(s, heldSeed{c: seeded, q: low + (high-low)*float64(i)/80})
					if h.Usable() {
						least = math.Min(least, h.RSS)
					}
				}
				if f.Status == Excluded {
					if line := Fit(s, models.Straight()).RSS; least < line*(1-1e-3) {
						t.Errorf("%s: excluded, but RSS %g of a value within the bounds against %g of the line", name, least, line)
					}
					continue
				}
				if !f.Usable() {
					t.Errorf("%s: %s %s", name, f.Status, f.Reason)
					continue
				}
				if !(f.P[2] >= low && f.P[2] <= high) {
					t.Errorf("%s: %g out of the bounds %g to %g", name, f.P[2], low, high)
				}
				edge := f.P[2]-low < 1e-6*(high-low) || high-f.P[2] < 1e-6*(high-low)
				if edge {
					reached[seeded.Info().Name] = true
					if f.Status != NotIdentified || f.Cov != nil || !strings.Contains(f.Reason, "the best fit lies at") {
						t.Errorf("%s: at a bound, %s, %q", name, f.Status, f.Reason)
					}
				}
				if !(f.RSS <= least*(1+1e-6)) {
					t.Errorf("%s: RSS %g at %g of %g to %g, but %g is within the bounds", name, f.RSS, f.P[2], low, high, least)
				}
				// So do the refits.
				curves := []models.Curve{models.Straight(), models.PowerPrefactor{}, seeded}
				fits := []*Result{Fit(s, curves[0]), Fit(s, curves[1]), f}
				r := NewRefitter(s, curves, fits, RefitOptions{ShapedParams: true})
				y := slices.Clone(s.All().Y)
				if model.InK() {
					y = slices.Clone(s.All().K)
				}
				var out Refit
				r.Refit(y, &out)
				if q := out.P[2][2]; !math.IsInf(out.RSS[2], 1) && !(q >= low && q <= high) {
					t.Errorf("%s: refitted at %g, out of the bounds %g to %g", name, q, low, high)
				}
			}
		}
	}
	for _, c := range []string{"tunnelling-bell", "tunnelling-wigner", "deformed"} {
		if !reached[c] {
			t.Errorf("no fit of %s lies at a bound: nothing is tested", c)
		}
	}
}

// A curve that nests the straight line is compared with the line through the same
// resample, whatever was refitted before, and wherever the line stands among the
// candidates.
func TestRefitOneComparesWithItsOwnLine(t *testing.T) {
	s := limitSample(t, Relative, equal(1))
	for _, curves := range [][]models.Curve{
		{models.Straight(), models.PowerPrefactor{}, models.Parallel{}},
		{models.Parallel{}, models.PowerPrefactor{}, models.Straight()},
	} {
		j := slices.IndexFunc(curves, func(c models.Curve) bool { return c.Info().Name == "parallel" })
		var fits []*Result
		for _, c := range curves {
			fits = append(fits, Fit(s, c))
		}
		rng := rand.New(rand.NewPCG(11, 12))
		draw := func(bend, sd float64) []float64 {
			var y []float64
			for i, temp := range s.All().T {
				y = append(y, s.All().Y[i]+bend*square((temp-310)/35)+sd*rng.NormFloat64())
			}
			return y
		}
		excluded := 0
		for range 20 {
			y := draw(0, 0.05)
			fresh := NewRefitter(s, curves, fits, RefitOptions{}).(OneRefitter)
			var want Refit
			fresh.Refit(y, &want)
			if math.IsInf(want.RSS[j], 1) {
				excluded++
			}
			// After a resample that the line fits far better, and one that it fits far worse.
			for _, before := range [][]float64{draw(0, 1e-3), draw(2, 0.5)} {
				used := fresh.Clone().(OneRefitter)
				var got Refit
				used.Refit(before, &got)
				used.RefitOne(j, y, nil, &got)
				if math.IsInf(got.RSS[j], 1) != math.IsInf(want.RSS[j], 1) || !math.IsInf(want.RSS[j], 1) && !reference.Agrees(got.RSS[j], want.RSS[j], 1e-3) {
					t.Errorf("parallel as candidate %d: RSS %g, after another resample %g", j, want.RSS[j], got.RSS[j])
				}
				used.Refit(before, &got)
				used.Refit(y, &got)
				if math.IsInf(got.RSS[j], 1) != math.IsInf(want.RSS[j], 1) {
					t.Errorf("parallel as candidate %d: RSS %g, refitted with all after another resample %g", j, want.RSS[j], got.RSS[j])
				}
			}
		}
		if excluded == 0 || excluded == 20 {
			t.Errorf("parallel is excluded in %d of 20 resamples: nothing is tested", excluded)
		}
	}
}

// A search that comes upon a bound on its way leaves it again: it ends on a bound only
// where the likelihood, with the parameter held a little inside, is smaller.
func TestSearchLeavesBounds(t *testing.T) {
	inside := 0
	for _, seeded := range []models.Seeded{models.Vogel{}, models.TunnellingBell(), models.TunnellingWigner(), models.Deformed{}} {
		for _, bend := range []float64{-0.3, -0.05, 0.05, 0.3} { // of ln k at 35 K from the middle
			var temps, k, v []float64
			rng := rand.New(rand.NewPCG(13, 14))
			at := func(temp float64) float64 { return -6.8 - 10000*(1/temp-1/310.) + bend*square((temp-310)/35) }
			for temp := 280.0; temp <= 340; temp += 6 {
				temps, k, v = append(temps, temp), append(k, math.Exp(at(temp)+0.02*rng.NormFloat64())), append(v, 1)
			}
			s, err := NewSample(Relative, temps, k, v)
			if err != nil {
				t.Fatal(err)
			}
			s = limited(t, s, Limit{T: 274, K: math.Exp(at(274) + 0.02), Below: true, V: 1})
			e := newCensored(s, seeded)
			low, high := e.seeded.low, e.seeded.high
			held := func(q float64) *Result { return Fit(s, heldSeed{c: seeded, q: q}) }
			for i := range 21 {
				q := low + (high-low)*float64(i)/20
				from := held(q)
				if !from.Usable() || !e.start(append(slices.Clone(from.P), q)) {
					continue
				}
				e.scatter()
				value, ok := e.minimise(limitTolerance)
				if !ok {
					continue
				}
				rss, step := e.rss(value), 1e-4*(high-low)
				switch {
				case e.par[2] == low:
					step = low + step
				case e.par[2] == high:
					step = high - step
				default:
					inside++
					continue
				}
				if r := held(step).RSS; r < rss*(1-1e-7) {
					t.Errorf("%s, bend %g, from %g: RSS %g on the bound %g, but %g inside", seeded.Info().Name, bend, q, rss, e.par[2], r)
				}
			}
		}
	}
	if inside == 0 {
		t.Error("no search ends inside the bounds")
	}
}
