package diagnostics

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/reference"
)

// Classic measurements from table to verdict, against R 4.2.2 (golden_opendata.csv)
// and the activation energies that are published of them.
func TestAssessClassicMeasurements(t *testing.T) {
	g := reference.Golden(t, "golden_opendata.csv")
	const zeroC = 273.15
	for _, c := range []struct {
		set, file, temp, k string
		shift              float64
		e, u               float64 // kJ/mol, to the digits of testdata/published
		low, high          float64 // published, kJ/mol
		p                  float64 // where golden_opendata.csv has none
	}{
		{"n2o5_daniels_johnston", "n2o5_daniels_johnston", "T_K", "k_1_s", 0, 102.9, 0.5, 103, 103, 0},
		{"hi_bodenstein_dec", "hi_bodenstein", "T_K", "k_dec_L_mol_s", 0, 186.0, 2.4, 184, 186, 0},
		{"hi_bodenstein_form", "hi_bodenstein", "T_K", "k_form_L_mol_s", 0, 165.6, 1.3, 165, 171, 0},
		{"ch3i_ethoxide", "ch3i_ethoxide", "T_C", "k_L_mol_s", zeroC, 82.5, 1.1, 81.6, 81.6, 0},
		// p by lm and anova of R 4.2.2.
		{"ch3nc", "ch3nc", "T_C", "k_1_s", zeroC, 158.4, 2.6, 160, 160, 0.0270372740714},
	} {
		t.Run(c.set, func(t *testing.T) {
			d := reference.Table(t, "handbook/"+c.file+".csv", c.temp, c.k)
			for i := range d[0] {
				d[0][i] += c.shift
			}
			a := mustAssess(t, setOf(d[0], d[1], nil), quick())
			f := a.Fits["straight"]
			e, u := f.P[1], math.Sqrt(f.Cov[3])
			reference.Close(t, "E", e, g.Of(t, c.set, "arr", "E_J_mol"), 1e-9)
			reference.Close(t, "u(E)", u, g.Of(t, c.set, "arr", "E_se"), 1e-9)
			reference.Within(t, "E", e/1000, c.e, 0.05)
			reference.Within(t, "u(E)", u/1000, c.u, 0.051)
			// Published and fitted E agree within one standard uncertainty.
			if !(e+u >= c.low*1000 && e-u <= c.high*1000) {
				t.Errorf("E = %.1f ± %.1f kJ/mol, published %g to %g", e/1000, u/1000, c.low, c.high)
			}

			x := a.Curvature
			p := c.p
			if p == 0 {
				p = g.Of(t, c.set, "F_arr_vs_mod", "p")
				reference.Close(t, "n", float64(x.Exponent.Value), g.Of(t, c.set, "mod", "n_exp"), 1e-8)
				reference.Close(t, "u(n)", float64(x.Exponent.StdError), g.Of(t, c.set, "mod", "n_exp_se"), 1e-8)
				reference.Close(t, "lower end of n", float64(x.Exponent.Lower), g.Of(t, c.set, "mod", "ci95_lo:lnT"), 1e-8)
				reference.Close(t, "upper end of n", float64(x.Exponent.Upper), g.Of(t, c.set, "mod", "ci95_hi:lnT"), 1e-8)
			}
			reference.Close(t, "p", float64(x.PValue), p, 1e-7)
			// The verdict says what R's p says at 5 %. All of these bend upwards, and
			// none by so little as a prefactor would: the lower ends of n are above 1.
			if a.Verdict.State.Curved() != (p < 0.05) {
				t.Errorf("%s with p = %g", a.Verdict.State, p)
			}
			if p < 0.05 && (a.Verdict.State != BeyondPrefactor || a.Verdict.ETrend != "rises" || a.Verdict.RecommendedCurve == "straight") {
				t.Errorf("%s, E %s, recommended %s", a.Verdict.State, a.Verdict.ETrend, a.Verdict.RecommendedCurve)
			}
			if p >= 0.05 && a.Verdict.RecommendedCurve != "straight" {
				t.Errorf("recommended %s", a.Verdict.RecommendedCurve)
			}
		})
	}
}

// Nelson's insulation lives, ten at each of four temperatures, all the way from the
// file: a life in hours is read as k = 1/τ. Nelson gives lg(life/h) = -3.16328 +
// 3.27284·1000/T, with 273.16 for 0 °C, of 40 independent points; R 4.2.2 more digits
// (golden_opendata.csv).
func TestNelsonLives(t *testing.T) {
	g := reference.Golden(t, "golden_opendata.csv")
	const set, tol = "nelson_class_h", 1e-9
	opt := quick()
	opt.Replicates = ReplicatesIndependent
	read := func(name string, b []byte) *dataset.Set {
		sets, err := dataset.Read(name, bytes.NewReader(b), dataset.Options{})
		if err != nil || len(sets) != 1 || !sets[0].Quantity.TimeLike || len(sets[0].UsedPoints()) != 40 {
			t.Fatalf("read %d sets: %v", len(sets), err)
		}
		return sets[0]
	}
	// lg(life) = -ln A/ln 10 + E/(R ln 10)/T, with A per hour.
	asNelson := func(a *Assessment) (intercept, slope float64) {
		f := a.Fits["straight"]
		slope = f.P[1] / (models.GasConstant * math.Ln10)
		return -f.P[0]/math.Ln10 - slope/f.TRef, slope / 1000
	}

	b, err := os.ReadFile(reference.Path("handbook/nelson_class_h.csv"))
	if err != nil {
		t.Fatal(err)
	}
	celsius := read("nelson_class_h.csv", b)
	a := mustAssess(t, celsius, opt)
	reference.Close(t, "E", a.Fits["straight"].P[1], g.Of(t, set, "arr", "E_J_mol"), tol)
	reference.Close(t, "u(E)", math.Sqrt(a.Fits["straight"].Cov[3]), g.Of(t, set, "arr", "E_se"), tol)
	reference.Close(t, "n", float64(a.Curvature.Exponent.Value), g.Of(t, set, "mod", "n_exp"), 1e-8)
	reference.Close(t, "p", float64(a.Curvature.PValue), g.Of(t, set, "F_arr_vs_mod", "p"), 1e-7)
	for _, c := range []struct{ curve, fit string }{{"straight", "LOF_arr"}, {"power-prefactor", "LOF_mod"}} {
		lack := testNamed(t, a.row(t, c.curve).Adequacy, TestPureError)
		reference.Close(t, c.curve+" lack of fit F", float64(lack.Statistic), g.Of(t, set, c.fit, "F"), 1e-7)
		reference.Close(t, c.curve+" lack of fit p", float64(lack.PValue), g.Of(t, set, c.fit, "p"), 1e-7)
	}

	// The ten items of a temperature shared its setting: taken as independent they
	// claim a curve. On the four means p = 0.0894300746341 (lm, anova of R 4.2.2).
	if a.Verdict.State != BeyondPrefactor {
		t.Errorf("40 points: %s", a.Verdict.State)
	}
	means := mustAssess(t, celsius, quick())
	reference.Close(t, "p on means", float64(means.Curvature.PValue), 0.0894300746341, 1e-7)
	if means.Verdict.State.Curved() {
		t.Errorf("four means: %s", means.Verdict.State)
	}

	kelvin := bytes.NewBufferString("T/K,life_h\n")
	d := reference.Table(t, "handbook/nelson_class_h.csv", "T_C", "life_h")
	for i, c := range d[0] {
		fmt.Fprintf(kelvin, "%.2f,%g\n", c+273.16, d[1][i])
	}
	intercept, slope := asNelson(mustAssess(t, read("kelvin.csv", kelvin.Bytes()), opt))
	const fit = "log10_life_vs_1000/(C+273.16)"
	reference.Close(t, "intercept", intercept, g.Of(t, set, fit, "intercept"), tol)
	reference.Close(t, "slope", slope, g.Of(t, set, fit, "slope"), tol)
	reference.Within(t, "published intercept", intercept, -3.16328, 5e-6)
	reference.Within(t, "published slope", slope, 3.27284, 5e-6)
}
