package modeltest_test

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/modeltest"
)

// recorder keeps what the suite reports.
type recorder struct{ failures []string }

func (r *recorder) Helper() {}

func (r *recorder) Errorf(format string, args ...any) {
	r.failures = append(r.failures, fmt.Sprintf(format, args...))
}

// bent is a linear curve with one function replaced, bentShape a shaped one. A nil
// function leaves the sound one in place.
type bent struct {
	models.Basis
	info    func(models.Info) models.Info
	lnK     func(tRef float64, t, p, f, jac []float64)
	eLoc    func(tRef float64, t, p, f, jac []float64)
	forms   func([]models.Form) []models.Form
	columns func(tRef float64, t, offset, x []float64)
}

func (b bent) Info() models.Info {
	if b.info != nil {
		return b.info(b.Basis.Info())
	}
	return b.Basis.Info()
}

func (b bent) LnK(tRef float64, t, p, f, jac []float64) {
	b.Basis.LnK(tRef, t, p, f, jac)
	if b.lnK != nil {
		b.lnK(tRef, t, p, f, jac)
	}
}

func (b bent) ELoc(tRef float64, t, p, f, jac []float64) {
	b.Basis.ELoc(tRef, t, p, f, jac)
	if b.eLoc != nil {
		b.eLoc(tRef, t, p, f, jac)
	}
}

func (b bent) Forms() []models.Form {
	if b.forms != nil {
		return b.forms(b.Basis.Forms())
	}
	return b.Basis.Forms()
}

func (b bent) Columns(tRef float64, t, offset, x []float64) {
	b.Basis.Columns(tRef, t, offset, x)
	if b.columns != nil {
		b.columns(tRef, t, offset, x)
	}
}

type bentShape struct {
	models.Parallel
	shape     func(x, q, g, dg, d2g []float64)
	fromShape func(a, e float64, q, p []float64)
	eLoc      func(t, p, f, jac []float64)
}

func (b bentShape) Shape(x, q, g, dg, d2g []float64) {
	b.Parallel.Shape(x, q, g, dg, d2g)
	if b.shape != nil {
		b.shape(x, q, g, dg, d2g)
	}
}

func (b bentShape) FromShape(a, e float64, q, p []float64) {
	b.Parallel.FromShape(a, e, q, p)
	if b.fromShape != nil {
		b.fromShape(a, e, q, p)
	}
}

func (b bentShape) ELoc(tRef float64, t, p, f, jac []float64) {
	b.Parallel.ELoc(tRef, t, p, f, jac)
	if b.eLoc != nil {
		b.eLoc(t, p, f, jac)
	}
}

// bentSeeded is a seeded curve with one function replaced.
type bentSeeded struct {
	models.Seeded
	info   func(models.Info) models.Info
	bounds func(low, straight, high float64) (float64, float64, float64)
	seeds  func(seeds []float64) []float64
	lnK    func(t, p, f []float64)
}

func (b bentSeeded) Info() models.Info {
	if b.info != nil {
		return b.info(b.Seeded.Info())
	}
	return b.Seeded.Info()
}

func (b bentSeeded) Bounds(tRef, tMin, tMax float64) (low, straight, high float64) {
	low, straight, high = b.Seeded.Bounds(tRef, tMin, tMax)
	if b.bounds != nil {
		return b.bounds(low, straight, high)
	}
	return low, straight, high
}

func (b bentSeeded) Seeds(tRef, tMin, tMax float64) []float64 {
	s := b.Seeded.Seeds(tRef, tMin, tMax)
	if b.seeds != nil {
		return b.seeds(s)
	}
	return s
}

func (b bentSeeded) LnK(tRef float64, t, p, f, jac []float64) {
	b.Seeded.LnK(tRef, t, p, f, jac)
	if b.lnK != nil && f != nil {
		b.lnK(t, p, f)
	}
}

// bare is a curve without its optional interface.
type bare struct{ models.Curve }

// patchForm returns forms with form i changed.
func patchForm(i int, change func(*models.Form)) func([]models.Form) []models.Form {
	return func(fs []models.Form) []models.Form {
		out := append([]models.Form(nil), fs...)
		change(&out[i])
		return out
	}
}

// fromCurve wraps FromCurve of a form.
func fromCurve(after func(fr models.Frame, p, q, jac []float64)) func(*models.Form) {
	return func(f *models.Form) {
		sound := f.FromCurve
		f.FromCurve = func(fr models.Frame, p, q, jac []float64) {
			sound(fr, p, q, jac)
			after(fr, p, q, jac)
		}
	}
}

// bent4 is two steps in series with the trend of two paths.
type bent4 struct{ models.Series }

func (b bent4) Info() models.Info {
	in := b.Series.Info()
	in.Trend = models.TrendRises
	return in
}

// bentSeries is two steps in series with one of the functions replaced that say how it is
// published.
type bentSeries struct {
	models.Series
	write    func(w models.Writer, tRef float64, p []float64) string
	profiled map[string]string
	readAs   func(p []float64) (int, string)
}

func (b bentSeries) Write(w models.Writer, tRef float64, p []float64) string {
	if b.write != nil {
		return b.write(w, tRef, p)
	}
	return b.Series.Write(w, tRef, p)
}

func (b bentSeries) Profiled() map[string]string {
	if b.profiled != nil {
		return b.profiled
	}
	return b.Series.Profiled()
}

func (b bentSeries) ReadAs(p []float64) (int, string) {
	if b.readAs != nil {
		return b.readAs(p)
	}
	return b.Series.ReadAs(p)
}

// fewer asks for fewer digits than it needs.
func fewer(w models.Writer, by float64) models.Writer {
	number := w.Number
	w.Number = func(x, slope float64) string { return number(x, slope/by) }
	return w
}

func TestPlantedFaultsFail(t *testing.T) {
	power := models.PowerPrefactor{}
	plants := []struct {
		fault string
		curve models.Curve
		check string // the check that must catch it
	}{
		{"one Jacobian entry off by 1e-6", bent{Basis: power, lnK: func(_ float64, _, _, _, jac []float64) {
			if jac != nil {
				jac[1] *= 1 + 1e-6
			}
		}}, "gradient of ln k"},
		{"Jacobian not filled", bent{Basis: power, lnK: func(_ float64, _, _, _, jac []float64) {
			if jac != nil {
				jac[4] = math.NaN()
			}
		}}, "gradient of ln k"},
		{"E_loc with the wrong sign", bent{Basis: power, eLoc: func(_ float64, t, _, f, _ []float64) {
			for i := range f {
				f[i] = -f[i]
			}
		}}, "E_loc = -R dlnk/d(1/T)"},
		{"E_loc without nRT", bent{Basis: power, eLoc: func(_ float64, t, p, f, jac []float64) {
			for i := range f {
				f[i] = p[1]
			}
		}}, "E_loc = -R dlnk/d(1/T)"},
		{"wrong Jacobian of E_loc", bent{Basis: power, eLoc: func(_ float64, t, p, f, jac []float64) {
			if jac != nil {
				jac[2] = 0
			}
		}}, "gradient of E_loc"},
		{"input modified", bent{Basis: power, lnK: func(_ float64, t, _, _, _ []float64) { t[0]++ }}, "calls"},
		{"nil Jacobian not allowed", bent{Basis: power, lnK: func(_ float64, _, _, _, jac []float64) { jac[0] = 1 }}, "calls"},
		{"nil values not allowed", bent{Basis: power, eLoc: func(_ float64, _, p, f, _ []float64) { f[0] = p[1] }}, "calls"},
		{"values added to what was there", bent{Basis: power, lnK: func(_ float64, _, _, f, _ []float64) {
			if len(f) > 1 {
				f[1] = math.NaN()
			}
		}}, "E_loc = -R dlnk/d(1/T)"},
		{"NaN where ln k is extreme", bent{Basis: power, lnK: func(_ float64, _, _, f, _ []float64) {
			for i := range f {
				f[i] = math.Log(math.Exp(f[i]))
			}
		}}, "extreme"},
		{"wrong sign of a column", bent{Basis: power, columns: func(_ float64, _, _, x []float64) { x[1] = -x[1] }}, "basis"},
		{"offset missing", bent{Basis: models.LinearPrefactor(), columns: func(_ float64, _, offset, _ []float64) { clear(offset) }}, "basis"},
		{"another curve under the name", bent{Basis: models.RootPrefactor(), info: func(in models.Info) models.Info {
			in.Name = "linear-prefactor"
			return in
		}}, "limit T → ∞"},
		{"no Basis", bare{power}, "case"},
		{"no Shaped", bare{models.Parallel{}}, "case"},
		{"empty source", bent{Basis: power, info: func(in models.Info) models.Info { in.Source = ""; return in }}, "catalogue"},
		{"family with capitals", bent{Basis: power, info: func(in models.Info) models.Info { in.Family = "Power law"; return in }}, "catalogue"},
		{"parameter without unit", bent{Basis: power, info: func(in models.Info) models.Info {
			in.Params = append([]models.Param(nil), in.Params...)
			in.Params[2].Unit = ""
			return in
		}}, "catalogue"},
		{"two forms of one name", bent{Basis: power, forms: patchForm(1, func(f *models.Form) { f.Name = "modified-arrhenius" })}, "catalogue"},
		{"trend not stated", bent{Basis: power, info: func(in models.Info) models.Info { in.Trend = models.TrendNone; return in }}, "trend"},
		{"wrong trend", bent{Basis: power, info: func(in models.Info) models.Info { in.Trend = models.TrendFalls; return in }}, "trend"},
		{"form that is not a physical one", bent{Basis: power, forms: func(fs []models.Form) []models.Form { return fs[:1] }}, "case"},
		{"broken round trip", bent{Basis: power, forms: patchForm(0, func(f *models.Form) {
			sound := f.ToCurve
			f.ToCurve = func(fr models.Frame, q, p []float64) {
				fr.TRef = 298.15
				sound(fr, q, p)
			}
		})}, "form round trip"},
		{"wrong Jacobian of a form", bent{Basis: power, forms: patchForm(1, fromCurve(func(_ models.Frame, _, _, jac []float64) {
			if jac != nil {
				jac[5] *= 1.001
			}
		}))}, "form Jacobian"},
		{"minutes taken for seconds", bent{Basis: models.LinearPrefactor(), forms: patchForm(0, func(f *models.Form) {
			from, to := f.FromCurve, f.ToCurve
			f.FromCurve = func(fr models.Frame, p, q, jac []float64) { fr.LnPerSecond = 0; from(fr, p, q, jac) }
			f.ToCurve = func(fr models.Frame, q, p []float64) { fr.LnPerSecond = 0; to(fr, q, p) }
		})}, "form formula"},
		{"time unit needed but not said", bent{Basis: power, forms: patchForm(1, func(f *models.Form) { f.NeedsTimeUnit = false })}, "form calls"},
		{"reference temperature not said", bent{Basis: models.RootPrefactor(), forms: patchForm(0, func(f *models.Form) { f.AtTForm = false })}, "form calls"},
		{"reference temperature said for nothing", bent{Basis: models.Straight(), forms: patchForm(0, func(f *models.Form) { f.AtTForm = true })}, "form calls"},
		{"n = ΔC_p‡/R", bent{Basis: power, forms: patchForm(1, fromCurve(func(_ models.Frame, p, q, _ []float64) {
			q[2] = models.GasConstant * p[2]
		}))}, "form relations"},
		{"crossover where there is none", bent{Basis: power, forms: patchForm(1, fromCurve(func(_ models.Frame, p, q, _ []float64) {
			if p[2] == 300 {
				q[0] = math.NaN()
			}
		}))}, "extreme"},
		{"lengths not checked", bent{Basis: power, forms: patchForm(0, func(f *models.Form) {
			sound := f.FromCurve
			f.FromCurve = func(fr models.Frame, p, q, jac []float64) {
				full := make([]float64, 9)
				sound(fr, p, q, full)
				copy(jac, full)
			}
		})}, "lengths"},

		{"E1 > E2", bentShape{fromShape: func(a, e float64, q, p []float64) {
			if p[1] < p[3] {
				p[0], p[1], p[2], p[3] = p[2], p[3], p[0], p[1]
			}
		}}, "order"},
		{"order lost for a turned shape", bentShape{fromShape: func(a, e float64, q, p []float64) {
			p[0], p[1], p[2], p[3] = a, e, a+q[0], e+q[1]
		}}, "order"},
		{"shape without its linear part", bentShape{shape: func(x, q, g, _, _ []float64) {
			for i := range g {
				g[i] -= q[0]
			}
		}}, "shape"},
		{"wrong sign in dg", bentShape{shape: func(x, _, _, dg, _ []float64) {
			for i := 1; i < len(dg); i += 2 {
				dg[i] = -dg[i]
			}
		}}, "shape"},
		{"d2g off by 1e-5", bentShape{shape: func(x, _, _, _, d2g []float64) {
			for i := 1; i < len(d2g); i += 3 {
				d2g[i] *= 1 + 1e-5
			}
		}}, "shape"},
		{"arithmetic mean of the barriers", bentShape{eLoc: func(t, p, f, jac []float64) {
			for i := range f {
				f[i] = (p[1] + p[3]) / 2
			}
		}}, "E_loc = -R dlnk/d(1/T)"},
	}
	vogel, bell, deformed := models.Vogel{}, models.TunnellingBell(), models.Deformed{}
	plants = append(plants, []struct {
		fault string
		curve models.Curve
		check string
	}{
		{"no Seeded", bare{vogel}, "case"},
		{"bounds that leave out a curve", bentSeeded{Seeded: vogel, bounds: func(l, s, h float64) (float64, float64, float64) { return l, s, h / 2 }}, "bounds"},
		{"bounds turned round", bentSeeded{Seeded: deformed, bounds: func(l, s, h float64) (float64, float64, float64) { return h, s, l }}, "bounds"},
		{"bounds past the pole", bentSeeded{Seeded: bell, bounds: func(l, s, h float64) (float64, float64, float64) { return l, s, 1.1 * h }}, "bounds"},
		{"a straight line that is not one", bentSeeded{Seeded: deformed, bounds: func(l, s, h float64) (float64, float64, float64) { return l, 1, h }}, "bounds"},
		{"a straight line outside", bentSeeded{Seeded: vogel, bounds: func(l, s, h float64) (float64, float64, float64) { return l + 1, s, h }}, "bounds"},
		{"infinite past the bounds", bentSeeded{Seeded: vogel, lnK: func(t, p, f []float64) {
			for i, v := range f {
				if math.IsNaN(v) {
					f[i] = math.Inf(-1)
				}
			}
		}}, "bounds"},
		{"not linear in E", bentSeeded{Seeded: vogel, lnK: func(t, p, f []float64) {
			for i := range f {
				f[i] += 1e-16 * p[1] * p[1]
			}
		}}, "bounds"},
		{"too few seeds", bentSeeded{Seeded: vogel, seeds: func(s []float64) []float64 { return []float64{s[0], s[len(s)-1]} }}, "seeds"},
		{"seeds that stop short", bentSeeded{Seeded: bell, seeds: func(s []float64) []float64 { return s[:len(s)-1] }}, "seeds"},
		{"seeds out of order", bentSeeded{Seeded: bell, seeds: func(s []float64) []float64 { s[2], s[3] = s[3], s[2]; return s }}, "seeds"},
		{"a seed twice", bentSeeded{Seeded: bell, seeds: func(s []float64) []float64 { s[2] = s[3]; return s }}, "seeds"},
		{"seeds that another curve needs", bentSeeded{Seeded: deformed, lnK: func(t, p, f []float64) {
			for i := range f { // periodic in the third parameter
				f[i] += 0.3 * math.Sin(p[2]/40) * math.Sin(t[i])
			}
		}}, "seeds"},
		{"Vogel said only to fall", bentSeeded{Seeded: vogel, info: func(in models.Info) models.Info { in.Trend = models.TrendFalls; return in }}, "trend"},
		{"Bell said to fall", bentSeeded{Seeded: bell, info: func(in models.Info) models.Info { in.Trend = models.TrendFalls; return in }}, "trend"},
		{"steps in series said to rise", bent4{models.Series{}}, "trend"},
		{"not written out", bare{vogel}, "written"},
		{"written at another temperature", bentSeries{write: func(w models.Writer, tRef float64, p []float64) string {
			return models.Series{}.Write(w, tRef+0.01, p)
		}}, "written"},
		{"written with too few digits", bentSeries{write: func(w models.Writer, tRef float64, p []float64) string {
			return models.Series{}.Write(fewer(w, 2), tRef, p)
		}}, "written"},
		{"written as what is no formula", bentSeries{write: func(models.Writer, float64, []float64) string { return "see the JSON" }}, "written"},
		{"the wrong barrier profiled", bentSeries{profiled: map[string]string{"E": "E1"}}, "profiled"},
		{"a crossover profiled", bentSeries{profiled: map[string]string{"T_x": "T_x"}}, "profiled"},
		{"a parameter profiled that no form has", bentSeries{profiled: map[string]string{"E3": "E2"}}, "profiled"},
		{"a form that is never read", bentSeries{readAs: func([]float64) (int, string) { return 0, "" }}, "read as"},
		{"a form without a meaning", bentSeries{readAs: func(p []float64) (int, string) { i, _ := models.Series{}.ReadAs(p); return i, "" }}, "read as"},
		{"a limit that does not exist", bent{Basis: models.DriftingHeatCapacity{}, eLoc: func(tRef float64, t, p, f, _ []float64) {
			for i := range f {
				f[i] -= p[3] * models.GasConstant * (t[i] - tRef) * (t[i] - tRef) / (2 * tRef)
			}
		}}, "limit T → ∞"},
	}...)
	for _, pl := range plants {
		t.Run(pl.fault, func(t *testing.T) {
			name := pl.curve.Info().Name
			var rec recorder
			sound, err := models.Lookup(name)
			if err != nil {
				t.Fatal(err)
			}
			modeltest.Run(&rec, pl.curve, modeltest.CaseOf(sound))
			prefix := name + ": " + pl.check + ": "
			for _, f := range rec.failures {
				if strings.HasPrefix(f, prefix) {
					return
				}
			}
			t.Errorf("%q is not caught by the check %q; reported: %q", pl.fault, pl.check, rec.failures)
		})
	}
}

// A case that lacks an entry must fail too, or the check would be left out.
func TestPoorCasesFail(t *testing.T) {
	var silent recorder
	if modeltest.Run(&silent, bare{models.Parallel{}}, modeltest.CaseOf(bare{models.Parallel{}})); len(silent.failures) == 0 {
		t.Error("a curve that claims nothing passes")
	}
	full := modeltest.CaseOf(models.Parallel{})
	for what, strip := range map[string]func(*modeltest.Case){
		"limit":      func(c *modeltest.Case) { c.Limit = nil },
		"formula":    func(c *modeltest.Case) { c.Physical = nil },
		"parameters": func(c *modeltest.Case) { c.P = nil },
		"extreme":    func(c *modeltest.Case) { c.Extreme = nil },
		"T":          func(c *modeltest.Case) { c.T = nil },
		"undefined":  func(c *modeltest.Case) { c.Undefined = nil },
	} {
		cs := full
		strip(&cs)
		var rec recorder
		modeltest.Run(&rec, models.Parallel{}, cs)
		if len(rec.failures) == 0 {
			t.Errorf("a case without %s passes", what)
		}
	}
}
