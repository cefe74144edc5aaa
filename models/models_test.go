package models

import (
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/reference"
)

// The defining constants of the SI and R = k_B N_A: SI Brochure, 9th ed. (2019),
// table 1; CODATA 2018 gives R = 8.314 462 618 153 24 J mol^-1 K^-1 (exact).
func TestConstants(t *testing.T) {
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"k_B", Boltzmann, 1.380649e-23},
		{"h", Planck, 6.62607015e-34},
		{"N_A", Avogadro, 6.02214076e23},
		{"R", GasConstant, 8.31446261815324},
	} {
		if c.got != c.want {
			t.Errorf("%s = %.17g, want %.17g", c.name, c.got, c.want)
		}
	}
}

// z - ln(1+z) with z = tRef/T - 1, and ln(T/tRef), in 40-digit arithmetic (mpmath).
func TestBendAndLogRatio(t *testing.T) {
	for _, c := range []struct{ tRef, t, bend, log float64 }{
		{300, 300.0000001, 5.5555580514080118e-20, 3.3333340822741714e-10},
		{300, 299.5, 1.3919811059849701e-6, -0.00166805710069702},
		{300, 305, 0.00013585932825974425, 0.016529301951210564},
		{300, 351, 0.011704603510519452, 0.15700374880966475},
		{300, 250, 0.017678443206045374, -0.18232155679395463},
		{300, 251, 0.016889587981558922, -0.17832953552441717},
		{300, 361, 0.016120414424602298, 0.18509548367667986},
		{300, 375, 0.023143551314209756, 0.22314355131420976},
		{300, 376, 0.023679009159225371, 0.22580666873369346},
		{500, 20, 20.781124175131799, -3.2188758248682007},
		{300, 3000, 1.4025850929940457, 2.3025850929940457},
		{300, 1e12, 20.927238641572347, 21.927238641272347},
	} {
		if got := bend(c.tRef, c.t); !reference.Agrees(got, c.bend, 1e-14) {
			t.Errorf("bend(%g, %g) = %.17g, want %.17g", c.tRef, c.t, got, c.bend)
		}
		if got := logRatio(c.t, c.tRef); !reference.Agrees(got, c.log, 1e-14) {
			t.Errorf("logRatio(%g, %g) = %.17g, want %.17g", c.t, c.tRef, got, c.log)
		}
	}
	if bend(300, 300) != 0 || logRatio(300, 300) != 0 {
		t.Error("at T_ref both must be 0")
	}
}

// The logistic and its complement are both good to the last digits at either end;
// closed forms: e^s for s → -∞, e^-s for s → ∞.
func TestSoftplus(t *testing.T) {
	for _, s := range []float64{-800, -40, -1, 0, 1, 40, 800} {
		v, up, down := softplus(s)
		wantUp, wantDown := 1/(1+math.Exp(-s)), 1/(1+math.Exp(s))
		if !reference.Agrees(up, wantUp, 1e-15) || !reference.Agrees(down, wantDown, 1e-15) {
			t.Errorf("softplus(%g): slope %g and rest %g, want %g and %g", s, up, down, wantUp, wantDown)
		}
		if want := math.Max(s, 0) + math.Log1p(math.Exp(-math.Abs(s))); !reference.Agrees(v, want, 1e-15) {
			t.Errorf("softplus(%g) = %g, want %g", s, v, want)
		}
	}
}

func TestRegistryNamesAreUnique(t *testing.T) {
	names := Names()
	if !slices.IsSorted(names) {
		t.Error("Names is not sorted")
	}
	if u := slices.Compact(slices.Clone(names)); len(u) != len(names) {
		t.Errorf("a name occurs twice in %v", names)
	}
	for _, n := range names {
		c, err := Lookup(n)
		if err != nil {
			t.Errorf("Lookup(%q): %v", n, err)
			continue
		}
		isForm := func(f Form) bool { return f.Name == n }
		if c.Info().Name != n && !slices.ContainsFunc(c.Forms(), isForm) {
			t.Errorf("Lookup(%q) gives %q, which has no such name or form", n, c.Info().Name)
		}
	}
}

func curveNames(cs []Curve) string {
	var ns []string
	for _, c := range cs {
		ns = append(ns, c.Info().Name)
	}
	return strings.Join(ns, ",")
}

func TestSelect(t *testing.T) {
	// The default curves and their order: table of curves in the methods, and series.
	const six = "straight,root-prefactor,linear-prefactor,power-prefactor,parallel,series"
	for list, want := range map[string]string{
		"":                         six,
		"  ":                       six,
		"straight, parallel":       "straight,parallel",
		"parallel,straight":        "parallel,straight",
		"arrhenius,straight":       "straight",
		"eyring":                   "linear-prefactor",
		"+vogel":                   six + ",vogel",
		"+reversible-inactivation": six, // a form of series
		"+parallel":                six,
		"+eyring,+parallel":        six,
		"modified-arrhenius,":      "",
		"+":                        "",
		"straigth":                 "",
	} {
		got, err := Select(list)
		switch {
		case want == "" && err == nil:
			t.Errorf("Select(%q) is accepted: %s", list, curveNames(got))
		case want != "" && (err != nil || curveNames(got) != want):
			t.Errorf("Select(%q) = %q, %v; want %q", list, curveNames(got), err, want)
		}
	}
	all, err := Select("all")
	if err != nil || curveNames(all) != curveNames(All()) || len(all) < len(Default()) {
		t.Errorf("Select(all) = %s, %v", curveNames(all), err)
	}
	_, err = Select("straight,vogel-fulcher")
	if err == nil || !strings.Contains(err.Error(), `"vogel-fulcher"`) || !strings.Contains(err.Error(), "modified-arrhenius") {
		t.Errorf("the error must name what is unknown and what is known: %v", err)
	}
}

// Curves beyond the default are fitted only when named.
func TestDefault(t *testing.T) {
	for _, c := range All() {
		name := c.Info().Name
		isDefault := slices.ContainsFunc(Default(), func(d Curve) bool { return d.Info().Name == name })
		if IsDefault(c) != isDefault {
			t.Errorf("IsDefault says %v of %s", IsDefault(c), name)
		}
		want := curveNames(Default())
		if !isDefault {
			want += "," + name
		}
		for _, n := range append([]string{name}, formNames(c)...) {
			if got, err := Select("+" + n); err != nil || curveNames(got) != want {
				t.Errorf("Select(+%s) = %s, %v; want %s", n, curveNames(got), err, want)
			}
		}
	}
	if IsDefault(planted{}) {
		t.Error("a curve that is not registered is no default")
	}
}

func formNames(c Curve) []string {
	var ns []string
	for _, f := range c.Forms() {
		ns = append(ns, f.Name)
	}
	return ns
}

// planted is a curve that is not in the catalogue.
type planted struct{ Vogel }

func (planted) Info() Info {
	in := Vogel{}.Info()
	in.Name = "planted"
	return in
}

func (planted) Forms() []Form {
	fs := slices.Clone(Vogel{}.Forms())
	fs[0].Name = "planted-form"
	return fs
}

// One line more in the catalogue is found, listed and selected, by its own name and that
// of its form, and fitted only when named.
func TestOneLineRegisters(t *testing.T) {
	r := append(slices.Clone(catalogue), registry{{planted{}, false}}...)
	for _, n := range []string{"planted", "planted-form"} {
		if c, err := r.lookup(n); err != nil || c.Info().Name != "planted" {
			t.Errorf("lookup(%s): %v", n, err)
		}
		if got, err := r.selected("+" + n); err != nil || curveNames(got) != curveNames(Default())+",planted" {
			t.Errorf("+%s gives %s, %v", n, curveNames(got), err)
		}
		if !slices.Contains(r.names(), n) {
			t.Errorf("%s is not listed", n)
		}
		if _, err := Lookup(n); err == nil {
			t.Errorf("the catalogue itself has %s", n)
		}
	}
	if got := curveNames(r.all()); got != curveNames(All())+",planted" {
		t.Errorf("all: %s", got)
	}
	if got := curveNames(r.defaults()); got != curveNames(Default()) {
		t.Errorf("defaults: %s", got)
	}
}

// values evaluates a form at t: its parameters turned into the curve's, and ln k.
func values(t *testing.T, name string, fr Frame, q []float64, temps []float64) []float64 {
	t.Helper()
	c, err := Lookup(name)
	if err != nil {
		t.Fatal(err)
	}
	p := make([]float64, len(c.Info().Params))
	for _, f := range c.Forms() {
		if f.Name == name {
			f.ToCurve(fr, q, p)
		}
	}
	f := make([]float64, len(temps))
	c.LnK(fr.TRef, temps, p, f, nil)
	return f
}

var temps = []float64{200, 250, 298.15, 300, 400, 1000}

// Common practice: collision theory is the power prefactor with n = 1/2,
// transition-state theory the one with n = 1, a constant barrier the one with
// n = 0.
func TestFixedExponentsAreSpecialPowers(t *testing.T) {
	fr := Frame{TRef: 310, TForm: 298.15}
	for name, n := range map[string]float64{"arrhenius": 0, "collision": 0.5} {
		got := values(t, name, fr, []float64{25, 50}, temps)
		want := values(t, "modified-arrhenius", fr, []float64{25, n, 50}, temps)
		for i := range got {
			if !reference.Agrees(got[i], want[i], 1e-13) {
				t.Errorf("%s at %g K: ln k = %.15g, with n = %g %.15g", name, temps[i], got[i], n, want[i])
			}
		}
	}
	// Eyring with constant ΔH‡ and ΔS‡ is ΔC_p‡ = 0, so n = 1.
	got := values(t, "eyring", fr, []float64{80, -20}, temps)
	want := values(t, "eyring-heat-capacity", fr, []float64{80, -20, 0}, temps)
	for i := range got {
		if !reference.Agrees(got[i], want[i], 1e-13) {
			t.Errorf("eyring at %g K: ln k = %.15g, with ΔC_p‡ = 0 %.15g", temps[i], got[i], want[i])
		}
	}
}

// Common practice: without a barrier the rate does not change with T (Arrhenius),
// or goes as T^m (a prefactor T^m).
func TestZeroBarrier(t *testing.T) {
	fr := Frame{TRef: 310, TForm: 298.15}
	for name, m := range map[string]float64{"arrhenius": 0, "collision": 0.5} {
		got := values(t, name, fr, []float64{25, 0}, temps)
		for i, ti := range temps {
			if want := 25 + m*math.Log(ti/fr.TForm); !reference.Agrees(got[i], want, 1e-14) {
				t.Errorf("%s with E = 0 at %g K: ln k = %.15g, want %.15g", name, ti, got[i], want)
			}
		}
	}
	for i, v := range values(t, "parallel-barriers", fr, []float64{3, 0, 3, 0, math.NaN()}, temps) {
		if want := 3 + math.Ln2; !reference.Agrees(v, want, 1e-14) {
			t.Errorf("two equal paths without a barrier at %g K: ln k = %.15g, want %.15g", temps[i], v, want)
		}
	}
	// k = k_B T/h at ΔH‡ = ΔS‡ = 0: 6.212 × 10^12 s^-1 at 298.15 K (common practice).
	k := math.Exp(values(t, "eyring", fr, []float64{0, 0}, []float64{298.15})[0])
	if !reference.Agrees(k, 6.212e12, 1e-4) {
		t.Errorf("k_B T/h at 298.15 K = %g s^-1, want 6.212e12", k)
	}
}

// Per molecule and per mole, k differs by N_A alone: every canonical parameter but
// ln k stays, and ln k moves by ln N_A. E/k_B in K per molecule is E/R in K.
func TestPerMoleAndPerMolecule(t *testing.T) {
	lnNA := math.Log(6.02214076e23)
	temps := temps[1:] // claims hold from 250 K
	for _, c := range All() {
		claimed, ok := c.(Claimed)
		if !ok {
			t.Errorf("%s states no claims", c.Info().Name)
			continue
		}
		p := claimed.Claims().P[0]
		q := slices.Clone(p)
		for j, par := range c.Info().Params {
			if par.Unit == "k" {
				q[j] += lnNA
			}
		}
		f, g, e, h := make([]float64, len(temps)), make([]float64, len(temps)), make([]float64, len(temps)), make([]float64, len(temps))
		c.LnK(300, temps, p, f, nil)
		c.LnK(300, temps, q, g, nil)
		c.ELoc(300, temps, p, e, nil)
		c.ELoc(300, temps, q, h, nil)
		for i := range temps {
			if d := g[i] - f[i]; !reference.Agrees(d, lnNA, 1e-13) || !reference.Agrees(h[i], e[i], 1e-12) {
				t.Errorf("%s at %g K: ln k moves by %.15g, want ln N_A = %.15g; E_loc %g and %g", c.Info().Name, temps[i], d, lnNA, e[i], h[i])
			}
		}
	}
	if !reference.Agrees(GasConstant/Avogadro, 1.380649e-23, 1e-15) {
		t.Error("R/N_A is not k_B")
	}
}

// 1/min taken for 1/s shifts ΔS‡ by R ln 60 = 34.04 J/(mol K): METHODS section 2
// quotes 34.
func TestTimeUnitMovesEntropy(t *testing.T) {
	for _, name := range []string{"eyring", "eyring-heat-capacity"} {
		c, _ := Lookup(name)
		p := []float64{-5, 80e3, 2}[:len(c.Info().Params)]
		for _, f := range c.Forms() {
			if f.Name != name {
				continue
			}
			q, m := make([]float64, len(f.Params)), make([]float64, len(f.Params))
			f.FromCurve(Frame{TRef: 300, TForm: 298.15}, p, q, nil)
			f.FromCurve(Frame{TRef: 300, TForm: 298.15, LnPerSecond: -math.Log(60)}, p, m, nil)
			if d := q[1] - m[1]; !reference.Agrees(d, 8.31446261815324*math.Log(60), 1e-12) || m[0] != q[0] {
				t.Errorf("%s: ΔS‡ moves by %g J/(mol K)", name, d)
			}
		}
	}
}

// Where both barriers are equal, or where the lines do not cross at a positive
// temperature, there is no crossover, and none of its derivatives.
func TestNoCrossover(t *testing.T) {
	f := Parallel{}.Forms()[0]
	for _, p := range [][]float64{
		{0, 5e4, 0, 5e4}, {1, 5e4, 0, 5e4}, {0, 5e4, 1, 5e4},
		{0, 4e4, -40, 5e4}, // k1 > k2 at every T
	} {
		q, jac := make([]float64, 5), make([]float64, 20)
		f.FromCurve(Frame{TRef: 300, TForm: 300}, p, q, jac)
		if !math.IsNaN(q[4]) {
			t.Errorf("T_x of %v is %g, want NaN", p, q[4])
		}
		for j, v := range jac[16:] {
			if !math.IsNaN(v) {
				t.Errorf("derivative %d of T_x of %v is %g, want NaN", j, p, v)
			}
		}
	}
}

// Form parameters with the higher barrier first name the paths wrongly; the curve
// they describe is still the same, with its canonical parameters in order.
func TestParallelFormPutsLowerBarrierFirst(t *testing.T) {
	fr := Frame{TRef: 300, TForm: 300}
	f := Parallel{}.Forms()[0]
	p, s := make([]float64, 4), make([]float64, 4)
	f.ToCurve(fr, []float64{30, 80, 10, 20, math.NaN()}, p)
	f.ToCurve(fr, []float64{10, 20, 30, 80, math.NaN()}, s)
	if !slices.Equal(p, s) || !(p[1] < p[3]) {
		t.Errorf("canonical parameters %v and %v, want the same with E1 < E2", p, s)
	}
}

func TestTrendString(t *testing.T) {
	for tr, want := range map[Trend]string{TrendNone: "none", TrendRises: "rises", TrendFalls: "falls", TrendEither: "either"} {
		if tr.String() != want {
			t.Errorf("%d is %q, want %q", tr, tr, want)
		}
	}
}
