package dataset

import (
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/reference"
)

// problemsOf reads a table that is refused.
func problemsOf(t *testing.T, text string, opt Options) Problems {
	t.Helper()
	_, err := Read("rates.csv", strings.NewReader(text), opt)
	var ps Problems
	if !errors.As(err, &ps) {
		t.Fatalf("%q is not refused: %v", text, err)
	}
	return ps
}

// noticed finds a notice by its code.
func noticed(t *testing.T, s *Set, code string) Notice {
	t.Helper()
	for _, n := range s.Notices {
		if n.Code == code {
			return n
		}
	}
	t.Fatalf("no notice %s among %v", code, codes(s))
	return Notice{}
}

func TestLostPowerIsRepeated(t *testing.T) {
	for heading, want := range map[string]string{"k/10-3 s-1": "10^-3", "10-12 k/s^-1": "10^-12", "105 k/s^-1": "10^5", "k/(10-3 s-1)": "10^-3"} {
		n := noticed(t, read(t, "T/K,"+heading+"\n280,1\n290,2\n", Options{}), noteLost)
		if n.Cure != "write "+want || !strings.Contains(n.Message, want) {
			t.Errorf("%s: %+v", heading, n)
		}
	}
}

// A power of ten that makes temperatures of no experiment is refused once, and the
// heading that would be right is named: 1000/3.5 = 285.7, 1/0.0035, 10000/35.
func TestWrongPowerOfTemperature(t *testing.T) {
	for _, c := range []struct{ heading, a, b, cure string }{
		{"10^-3 K/T", "3.5", "3.4", "write the heading as 10^3 K/T"},
		{"10-3 K/T", "3.5", "3.4", "write the heading as 10^3 K/T"},
		{"1/T (1/K)", "3.5", "3.4", "write the heading as 10^3 K/T"},
		{"1/T (1/K)", "35", "34", "write the heading as 10^4 K/T"},
		{"10^3/T", "0.0035", "0.0034", "write the heading as 1/T (1/K)"},
		{"10^3 T/K", "280", "290", "correct the power of ten"},
		{"T/K", "0.28", "0.29", "correct the power of ten"},
	} {
		ps := problemsOf(t, c.heading+",k/s^-1\n"+c.a+",1\n"+c.b+",2\n", Options{})
		if len(ps) != 1 || ps[0].Code != codeTFactor || ps[0].Column != c.heading || !strings.Contains(ps[0].Cure, c.cure) {
			t.Errorf("%s: %v", c.heading, ps)
		}
	}
	read(t, "T/mK,k/s^-1\n280,1\n290,2\n", Options{})
	read(t, "T/K,k/s^-1\n1.0,1\n2,2\n", Options{})
	read(t, "10^5 K/T,k/s^-1\n1.0,1\n2,2\n", Options{}) // 100 000 K
}

// A power of ten behind the unit, in the heading or in a row of units: the cell is k
// times the power, 3.1 = 10^5 k, or k counted in it, k = 3.1·10^5.
func TestPowerBehindTheUnit(t *testing.T) {
	for _, text := range []string{
		"T/K,k (s⁻¹ × 10⁵),SE (s⁻¹ × 10⁵)\n280,3.1,0.2\n290,4,0.2\n",
		"T,k,SE\n(K),(s⁻¹ × 10⁵),(s⁻¹ × 10⁵)\n280,3.1,0.2\n290,4,0.2\n",
		"T,k,SE\nK,s-1 x 10^5,s-1 x 10^5\n280,3.1,0.2\n290,4,0.2\n",
	} {
		ps := problemsOf(t, text, Options{})
		if ps[0].Code != codeAmbiguousRate || !strings.Contains(ps[0].Cure, "--assume factor=times") || !strings.Contains(ps[0].Cure, "--assume factor=unit") {
			t.Errorf("%q: %v", text, ps)
		}
		for value, want := range map[string][2]float64{"times": {3.1e-5, 0.2e-5}, "unit": {3.1e5, 0.2e5}} {
			p := read(t, text, Options{Assume: map[string]string{"factor": value}}).Points[0]
			if !reference.Agrees(p.K, want[0], 1e-14) || !reference.Agrees(p.UK, want[1], 1e-14) {
				t.Errorf("%q, factor=%s: k %v, u %v, want %v", text, value, p.K, p.UK, want)
			}
		}
	}
	ps := problemsOf(t, "T/K,k/s^-1,SE (s^-1 × 10^5)\n280,3.1,0.2\n290,4,0.2\n", Options{})
	if ps[0].Column != "SE (s^-1 × 10^5)" || !strings.Contains(ps[0].Cure, "--assume factor=times") {
		t.Error(ps)
	}
}

// A column that may be an uncertainty of k is never left unused without a word, and the
// flag that is named works as it stands.
func TestMaybeUncertain(t *testing.T) {
	for _, c := range []struct{ heading, flag string }{
		{"f", "f(k)=f"}, {"f (95%)", "f(k)=f (95%)"}, {"f(298 K)", "f(k)=f(298 K)"}, {"uncertainty factor", "f(k)=uncertainty factor"},
		{"Δlog k", "u(lg k)=Δlog k"}, {"dk", "u(k)=dk"},
	} {
		text := "T/K,k/s^-1," + c.heading + "\n280,1,1.1\n290,2,1.1\n"
		n := noticed(t, read(t, text, Options{}), noteLevel)
		if !strings.Contains(n.Cure, "--column '"+c.flag+"'") {
			t.Errorf("%s: %+v", c.heading, n)
		}
		role, _, _ := strings.Cut(c.flag, "=")
		if p := read(t, text, Options{Columns: map[string][]string{role: {c.heading}}}).Points[0]; !(p.UK > 0) {
			t.Errorf("%s: not used when named: %+v", c.flag, p)
		}
	}
	for _, heading := range []string{"rel. unc. (%)", "esd", "conf. int.", "delta k"} {
		n := noticed(t, read(t, "T/K,k/s^-1,"+heading+"\n280,1,0.1\n290,2,0.1\n", Options{}), noteLevel)
		if !strings.Contains(n.Cure, "--assume error=1") {
			t.Errorf("%s: %+v", heading, n)
		}
	}
	for _, heading := range []string{"pH", "flow", "frequency", "max", "min"} {
		s := read(t, "T/K,k/s^-1,"+heading+"\n280,1,0.1\n290,2,0.1\n", Options{})
		if slices.Contains(codes(s), noteLevel) {
			t.Errorf("%s is taken for an uncertainty: %v", heading, s.Notices)
		}
	}
}

// Bounds of k beside k are neither its repeats nor its rivals.
func TestBoundsBesideK(t *testing.T) {
	for _, headings := range []string{"k_lower/s^-1,k_upper/s^-1", "k_min,k_max", "k_low (s-1),k_high (s-1)", "k lower,k upper", "95% CI lower,95% CI upper"} {
		for _, assume := range []map[string]string{nil, {"k": "repeats"}} {
			s := read(t, "T/K,k/s^-1,"+headings+"\n280,1,0.9,1.1\n290,2,1.9,2.1\n", Options{Assume: assume})
			n := noticed(t, s, noteLevel)
			if len(s.Points) != 2 || s.Points[0].K != 1 || !strings.Contains(n.Cure, "U(k) (95 %)") {
				t.Errorf("%s: %+v, %+v", headings, s.Points, n)
			}
		}
	}
	if s := read(t, "T/K,k_max/s^-1\n280,1\n290,2\n", Options{}); s.Quantity.Symbol != "k_max" {
		t.Errorf("alone: %+v", s.Quantity)
	}
}

// f (95 %) is divided by 1.96: u(ln k) = ln 1.5/1.96.
func TestFactorAtALevel(t *testing.T) {
	p := read(t, "T/K,k/s^-1,f (95%)\n280,1,1.5\n290,2,1.5\n", Options{Columns: map[string][]string{"f(k)": {"f (95%)"}}}).Points[0]
	if want := math.Log(1.5) / 1.96; !reference.Agrees(p.UK, want, 1e-12) {
		t.Errorf("u %v, want %v", p.UK, want)
	}
}

// Ragged rows are told once, and blamed on what is wrong.
func TestRaggedRows(t *testing.T) {
	for _, c := range []struct {
		text string
		row  int
		says string
	}{
		{"T/K,k/s^-1\n280,15,0,0012\n290,15,0,0034\n", 2, "commas are both the delimiter and the decimal mark"},
		{"T/K,k/s^-1\n280,0,0012\n290,0,0034\n", 2, "save the table with semicolons"},
		{"T/K,k/s^-1,note\n280,0.1\n290,0.2\n", 1, "the row of headings has one cell more"},
		{"T/K,k/s^-1\n280,0.1,a\n290,0.2,b\n", 1, "the row of headings has one cell less"},
		{"T/K,k/s^-1\n280,0.1\n290,0.2,b\n300,1,c\n310,2,d\n", 3, "the row has 3 cells, the headings 2; so have 2 other rows"},
		{"T/K,k/s^-1\n280,0.1\n290,0.2,b\n", 3, "the row has 3 cells, the headings 2; give"},
	} {
		ps := problemsOf(t, c.text, Options{})
		if len(ps) != 1 || ps[0].Row != c.row || !strings.Contains(ps.Error(), c.says) {
			t.Errorf("%q: %v", c.text, ps)
		}
	}
}

// ± in the cells at the level that the heading states: 0.3/sqrt 3 for n = 3, 0.3/2.
func TestLevelBesideTheRate(t *testing.T) {
	for _, c := range []struct {
		text string
		u    float64
	}{
		{"T/K,k (s-1) ± SD,n\n280,1 ± 0.3,3\n290,2 ± 0.3,3\n", 0.3 / math.Sqrt(3)},
		{"T/K,k (s-1) ± 2σ\n280,1 ± 0.3\n290,2 ± 0.3\n", 0.15},
		{"T/K,k (s-1) ± SE\n280,1 ± 0.3\n290,2 ± 0.3\n", 0.3},
	} {
		if p := read(t, c.text, Options{}).Points[0]; p.K != 1 || !reference.Agrees(p.UK, c.u, 1e-14) {
			t.Errorf("%q: %+v", c.text, p)
		}
	}
	s := read(t, "T/K,k (s-1) ± SD\n280,1 ± 0.3\n290,2 ± 0.3\n", Options{})
	if n := noticed(t, s, noteRepeats); !strings.Contains(n.Cure, "--assume n=3") || s.Points[0].UK != 0 {
		t.Errorf("%+v, %+v", n, s.Points[0])
	}
}

// Cures name the headings of the file, ready to be typed.
func TestCuresNameHeadings(t *testing.T) {
	ps := problemsOf(t, "bath,slope 1,flask\n280,1,a\n290,2,b\n", Options{})
	if got := ps.Error(); !strings.Contains(got, "--column 'T=bath'") || strings.Contains(got, "'T=slope 1'") || strings.Contains(got, "'k=bath'") || !strings.Contains(got, "--column 'k=slope 1'") || strings.Contains(got, "HEADING") || strings.Contains(got, "=flask") {
		t.Error(got)
	}
	ps = problemsOf(t, "bath,flask\n280,a\n290,b\n", Options{})
	if got := ps.Error(); strings.Contains(got, "--column") || !strings.Contains(got, "cannot be both") {
		t.Error(got)
	}
	ps = problemsOf(t, "T/K,slope 1,slope 2\n280,1,2\n290,2,3\n", Options{})
	if got := ps.Error(); !strings.Contains(got, "--column 'k=slope 1' or --column 'k=slope 2'") {
		t.Error(got)
	}
	const runs = "T/K,run 1,run 2,run 3\n280,1,1.1,1.2\n290,2,2.1,2.2\n"
	ps = problemsOf(t, runs, Options{})
	if !strings.Contains(ps[0].Cure, "--column 'k=run 1' --column 'k=run 2' --column 'k=run 3'") || !strings.Contains(ps[0].Cure, "--assume k=repeats") {
		t.Error(ps)
	}
	for _, opt := range []Options{{Assume: map[string]string{"k": "repeats"}}, {Columns: map[string][]string{"k": {"run 1", "run 2", "run 3"}}}} {
		if s := read(t, runs, opt); len(s.Points) != 6 || s.Points[2].K != 1.2 {
			t.Errorf("%+v", s.Points)
		}
	}
}

func TestNamesOfSets(t *testing.T) {
	const text = "T/K,k/s^-1,pH\n280,1,5.0\n290,2,5.0\n280,3,7.0\n290,4,7.0\n"
	ps := problemsOf(t, text, Options{DatasetBy: "ph", Dataset: "5"})
	if len(ps) != 1 || ps[0].Cure != "did you mean --dataset-by 'pH'?" {
		t.Error(ps)
	}
	if s := read(t, text, Options{DatasetBy: "pH", Dataset: "5"}); s.Name != "5.0" || len(s.Points) != 2 {
		t.Errorf("%s, %+v", s.Name, s.Points)
	}
}
