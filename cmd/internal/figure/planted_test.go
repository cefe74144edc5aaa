package figure_test

import (
	"bytes"
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"onebarrier/cmd/internal/figure"
	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/report/schematest"
	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
	"onebarrier/models/modeltest"
)

// parabola is a curve that no other file knows, as the guide for developers asks for one:
// ln k = a - E x + c z², z = T_ref/T - 1, x = z/(R T_ref). It is invented for this test.
type parabola struct{}

var (
	_ models.Basis   = parabola{}
	_ models.Written = parabola{}
	_ models.Claimed = parabola{}
)

func (parabola) Info() models.Info {
	return models.Info{
		Name: "planted-parabola", Family: "planted-parabola",
		Formula: "ln k = a - b/T + c/T^2",
		Summary: "a parabola in 1/T",
		Source:  "invented",
		Trend:   models.TrendEither,
		Params: []models.Param{
			{Symbol: "ln_k_ref", Name: "ln k at the reference temperature", Unit: "k"},
			{Symbol: "E_ref", Name: "local activation energy at the reference temperature", Unit: "J/mol"},
			{Symbol: "c", Name: "curvature in T_ref/T", Unit: "1"},
		},
	}
}

func must(ok bool) {
	if !ok {
		panic("length")
	}
}

func (parabola) Columns(tRef float64, t, offset, x []float64) {
	must(len(offset) == len(t) && len(x) == 3*len(t))
	clear(offset)
	for i, ti := range t {
		z := (tRef - ti) / ti
		x[3*i], x[3*i+1], x[3*i+2] = 1, -z/(models.GasConstant*tRef), z*z
	}
}

func (c parabola) LnK(tRef float64, t, p, f, jac []float64) {
	must(len(p) == 3 && (f == nil || len(f) == len(t)) && (jac == nil || len(jac) == 3*len(t)))
	x := make([]float64, 3*len(t))
	c.Columns(tRef, t, make([]float64, len(t)), x)
	copy(jac, x)
	for i := range f {
		f[i] = p[0] + p[1]*x[3*i+1] + p[2]*x[3*i+2]
	}
}

func (parabola) ELoc(tRef float64, t, p, f, jac []float64) {
	must(len(p) == 3 && (f == nil || len(f) == len(t)) && (jac == nil || len(jac) == 3*len(t)))
	for i, ti := range t {
		d := -2 * models.GasConstant * tRef * (tRef - ti) / ti
		if f != nil {
			f[i] = p[1] + p[2]*d
		}
		if jac != nil {
			jac[3*i], jac[3*i+1], jac[3*i+2] = 0, 1, d
		}
	}
}

func (parabola) Forms() []models.Form {
	return []models.Form{{
		Name: "planted-form", Formula: "k = A exp(-E/RT + c2/T^2)", Source: "invented",
		Params: []models.Param{
			{Symbol: "ln_A", Name: "ln k as T goes to infinity", Unit: "k"},
			{Symbol: "E", Name: "activation energy as T goes to infinity", Unit: "kJ mol^-1"},
			{Symbol: "c2", Name: "coefficient of 1/T^2", Unit: "K^2"},
		},
		FromCurve: func(fr models.Frame, p, q, jac []float64) {
			must(len(p) == 3 && len(q) == 3 && (jac == nil || len(jac) == 9))
			rt := models.GasConstant * fr.TRef
			q[0], q[1], q[2] = p[0]+p[1]/rt+p[2], (p[1]+2*rt*p[2])/1000, p[2]*fr.TRef*fr.TRef
			copy(jac, []float64{1, 1 / rt, 1, 0, 1. / 1000, 2 * rt / 1000, 0, 0, fr.TRef * fr.TRef})
		},
		ToCurve: func(fr models.Frame, q, p []float64) {
			must(len(p) == 3 && len(q) == 3)
			rt := models.GasConstant * fr.TRef
			p[2] = q[2] / (fr.TRef * fr.TRef)
			p[1] = 1000*q[1] - 2*rt*p[2]
			p[0] = q[0] - p[1]/rt - p[2]
		},
	}}
}

func (parabola) Write(w models.Writer, tRef float64, p []float64) string {
	rt := models.GasConstant * tRef
	sum := w.Number(p[0]+p[1]/rt+p[2], 1)
	for _, term := range []string{
		w.Number(-(p[1]/models.GasConstant+2*p[2]*tRef), 1/w.TMin) + " K/T",
		w.Number(p[2]*tRef*tRef, 1/(w.TMin*w.TMin)) + " (K/T)^2",
	} {
		if s, negative := strings.CutPrefix(term, "−"); negative {
			sum += " − " + s
		} else {
			sum += " + " + term
		}
	}
	return "exp(" + sum + ")"
}

func (parabola) Claims() models.Claims {
	return models.Claims{
		P:       [][]float64{{-3, 60e3, 2}, {-30, 12e3, -3}, {1, -5e3, 0}},
		Extreme: [][]float64{{-700, 1e6, 9}, {0, 0, 0}},
		Limit: func(tRef float64, p []float64) (lnA, m float64) {
			return p[0] + p[1]/(models.GasConstant*tRef) + p[2], 0
		},
		Physical: map[string]func(models.Frame, []float64, float64) float64{
			"planted-form": func(_ models.Frame, q []float64, t float64) float64 {
				return q[0] - 1000*q[1]/(models.GasConstant*t) + q[2]/t/t
			},
		},
	}
}

// A curve that is one file passes the conformance suite, is ranked, recommended,
// published, drawn and written as JSON, and nothing else knows its name.
func TestPlantedCurveFromEndToEnd(t *testing.T) {
	modeltest.Run(t, parabola{}, modeltest.CaseOf(parabola{}))
	name := parabola{}.Info().Name
	if _, err := models.Lookup(name); err == nil {
		t.Fatalf("%s is registered: this test would prove nothing", name)
	}

	set := &dataset.Set{Name: "invented", Files: []string{"invented.csv"}, SHA256: strings.Repeat("0a", 32),
		Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}}
	truth := []float64{-4, 50e3, 9}
	r := rand.New(rand.NewPCG(7, 1))
	for i := range 24 {
		temp := 250 + 15*float64(i)
		lnK := []float64{0}
		parabola{}.LnK(330, []float64{temp}, truth, lnK, nil)
		k := math.Exp(lnK[0] + 0.02*r.NormFloat64())
		set.Points = append(set.Points, dataset.Point{File: "invented.csv", Row: i + 2, T: temp, K: k, UK: 0.02 * k, Level: dataset.LevelStandard, Used: true, Order: math.NaN()})
	}
	for _, model := range []fit.ErrorModel{fit.Relative, fit.Absolute} {
		opt := diagnostics.DefaultOptions()
		opt.Models = append(models.Default(), parabola{})
		opt.ErrorModel, opt.Resamples = model, 199
		a, err := diagnostics.Assess(context.Background(), set, opt)
		if err != nil {
			t.Fatal(err)
		}
		i := slices.IndexFunc(a.Ranking, func(r diagnostics.Ranked) bool { return r.Curve == name })
		if i < 0 || a.Ranking[i].Status != diagnostics.StatusRanked || len(a.Ranking[i].Forms) != 1 || !a.Ranking[i].Forms[0].Parameters[2].Value.Known() {
			t.Fatalf("%s: not ranked with its form: %+v", model, a.Ranking)
		}

		var b bytes.Buffer
		if err := report.JSON(&b, a); err != nil {
			t.Fatal(err)
		}
		if err := schematest.Validate("assessment", b.Bytes()); err != nil {
			t.Errorf("%s: %v", model, err)
		}
		if !strings.Contains(b.String(), `"planted-form"`) {
			t.Errorf("%s: the form does not stand in the JSON", model)
		}
		b.Reset()
		if err := report.WriteAssessment(&b, a, nil, report.Text{}); err != nil {
			t.Fatal(err)
		}
		if !strings.Contains(b.String(), name) {
			t.Errorf("%s: not in the text:\n%s", model, b.String())
		}
		paths, err := figure.Write(t.TempDir(), a, figure.Options{})
		if err != nil || len(paths) == 0 {
			t.Fatalf("%s: %v, %v", model, paths, err)
		}
		if model == fit.Absolute {
			continue // k spans decades: the cold half tells nothing of a curve
		}
		if a.Publish.Curve != name {
			t.Fatalf("%s: %q is published, verdict %s", model, a.Publish.Curve, a.Verdict.State)
		}
		d, err := figure.NewArrhenius(a, figure.Options{})
		if err != nil || d.Lines[0].Curve != name || !d.Lines[0].Recommended || d.Lines[0].Lower == nil {
			t.Errorf("not drawn with its band: %v", err)
		}
		if e := figure.NewEnergy(a); !slices.ContainsFunc(e.Lines, func(l figure.Line) bool { return l.Curve == name }) {
			t.Error("its local activation energy is not drawn")
		}
		written := false
		for _, l := range a.Publish.Lines {
			if l.Symbol != "k(T)" {
				continue
			}
			written = true
			f := a.Fits[name]
			for i, temp := range a.Sample.T {
				k, err := modeltest.Evaluate(strings.TrimSuffix(l.Text, " s^-1"), temp)
				if d := math.Abs(math.Log(k) - f.Fitted[i]); err != nil || !(d <= 5e-4) {
					t.Errorf("%s gives ln k at %g K wrong by %g: %v", l.Text, temp, d, err)
				}
			}
		}
		if !written {
			t.Error("k(T) is not published")
		}
	}

	var b bytes.Buffer
	if err := report.JSON(&b, report.NewModels(append(models.All(), parabola{}))); err != nil {
		t.Fatal(err)
	}
	if err := schematest.Validate("models", b.Bytes()); err != nil {
		t.Error(err)
	}
}
