package dataset

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os"
	"slices"
	"strings"
	"testing"

	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"

	"onebarrier/models/reference"
)

func read(t *testing.T, text string, opt Options) *Set {
	t.Helper()
	sets, err := Read("rates.csv", strings.NewReader(text), opt)
	if err != nil {
		t.Fatalf("%q: %v", text, err)
	}
	if len(sets) != 1 {
		t.Fatalf("%q: %d sets", text, len(sets))
	}
	return sets[0]
}

func codes(s *Set) (out []string) {
	for _, n := range s.Notices {
		out = append(out, n.Code)
	}
	return out
}

func has(t *testing.T, s *Set, code string) {
	t.Helper()
	if !slices.Contains(codes(s), code) {
		t.Errorf("no notice %s among %v", code, codes(s))
	}
}

func TestPublishedFiles(t *testing.T) {
	// First and last rows as the files themselves print them; units from their
	// headings. What must be asked is named in the files' README.
	for _, c := range []struct {
		file   string
		opt    Options
		n      int
		first  [2]float64 // T/K and k as stored
		last   [2]float64
		unit   string
		symbol string
	}{
		{"handbook/ch3i_ethoxide.csv", Options{}, 6, [2]float64{273.15, 5.60e-5}, [2]float64{303.15, 2.08e-3}, "L mol^-1 s^-1", "k"},
		{"handbook/n2o5_daniels_johnston.csv", Options{}, 6, [2]float64{273, 7.87e-7}, [2]float64{338, 4.87e-3}, "s^-1", "k"},
		{"handbook/hi_bodenstein.csv", Options{Columns: map[string][]string{"k": {"k_dec_L_mol_s"}}}, 6, [2]float64{556, 3.52e-7}, [2]float64{781, 3.95e-2}, "L mol^-1 s^-1", "k_dec"},
		{"handbook/hi_bodenstein.csv", Options{Columns: map[string][]string{"k": {"k_form_L_mol_s"}}}, 6, [2]float64{556, 4.45e-5}, [2]float64{781, 1.34}, "L mol^-1 s^-1", "k_form"},
		{"handbook/nelson_class_h.csv", Options{}, 40, [2]float64{463.15, 1.0 / 7228}, [2]float64{533.15, 1.0 / 1896}, "h^-1", "k"},
		{"synthetic/s5_hetero.csv", Options{}, 15, [2]float64{300, 0.0220807}, [2]float64{440, 60.797}, "", "k"},
		{"opendata/mercury_pressure_R.csv", Options{Columns: map[string][]string{"k": {"p_mmHg"}}}, 19, [2]float64{273.15, 2e-4}, [2]float64{633.15, 806}, "mmHg", "p"},
		{"opendata/steam_MASS.csv", Options{Columns: map[string][]string{"k": {"p"}}}, 14, [2]float64{273.15, 4.14}, [2]float64{378.15, 920.01}, "", "p"},
	} {
		f, err := os.Open(reference.Path(c.file))
		if err != nil {
			t.Fatal(err)
		}
		sets, err := Read(c.file, f, c.opt)
		f.Close()
		if err != nil {
			t.Errorf("%s: %v", c.file, err)
			continue
		}
		s := sets[0]
		p, q := s.Points[0], s.Points[len(s.Points)-1]
		if len(s.UsedPoints()) != c.n || p.T != c.first[0] || p.K != c.first[1] || s.Quantity.Unit != c.unit || s.Quantity.Symbol != c.symbol {
			t.Errorf("%s: %d points, first %v %v, %+v; want %+v", c.file, len(s.UsedPoints()), p.T, p.K, s.Quantity, c)
		}
		if q.T != c.last[0] || q.K != c.last[1] {
			t.Errorf("%s: last %v %v, want %v", c.file, q.T, q.K, c.last)
		}
	}
	for file, code := range map[string]string{
		"handbook/hi_bodenstein.csv":   codeSeveralRates,
		"opendata/imotor_survival.csv": codeAmbiguousTemperature,
		"opendata/steam_MASS.csv":      codeNoRate,
	} {
		f, err := os.Open(reference.Path(file))
		if err != nil {
			t.Fatal(err)
		}
		_, err = Read(file, f, Options{})
		f.Close()
		var ps Problems
		if !errors.As(err, &ps) || ps[0].Code != code {
			t.Errorf("%s: got %v, want %s", file, err, code)
		}
	}
}

// The same four rows in many spellings give the same T and k. Values written by
// hand from T = t + 273.15, 1/T, ln and lg of k.
func TestSpellingsOfOneTable(t *testing.T) {
	for name, text := range map[string]string{
		"canonical":    "T/K,k/s^-1\n298.15,0.001\n308.15,0.004\n318.15,0.016\n",
		"celsius":      "t/°C,k/s^-1\n25,0.001\n35,0.004\n45,0.016\n",
		"fahrenheit":   "t/degF,k/s^-1\n77,0.001\n95,0.004\n113,0.016\n",
		"tsv":          "Temp / °C\tk (s-1)\n25.00\t1.0e-3\n35.00\t4.0e-3\n45.00\t1.6e-2\n",
		"semicolon":    "t/°C;k/s^-1\n25,0;0,001\n35,0;0,004\n45,0;0,016\n",
		"sep line":     "sep=;\nt/°C;k/s^-1\n25,0;0,001\n35,0;0,004\n45,0;0,016\n",
		"spaces":       "# old archive\n# more\nT/K      k/s^-1\n298.15   1e-3\n308.15   4e-3\n  318.15   16e-3\n",
		"wide heading": "T / K   k / s-1\n298.15  0.001\n308.15  0.004\n318.15 0.016\n",
		"comma spaces": "temperature, K   rate constant, s-1\n298.15  0.001\n308.15  0.004\n318.15 0.016\n",
		"dat comma":    "t/°C k/s^-1\n25,00 0,001\n35,00 0,004\n45,00 0,016\n",
		"unit row":     "T,k\nK,s-1\n298.15,0.001\n308.15,0.004\n318.15,0.016\n",
		"bracket row":  "T,k\n(°C),(1/s)\n25,0.001\n35,0.004\n45,0.016\n",
		"two headings": "Temperature,Rate\n(K),constant (s-1)\n298.15,0.001\n308.15,0.004\n318.15,0.016\n",
		"title":        "Rates of hydrolysis\nT/K,k/s^-1\n298.15,0.001\n308.15,0.004\n318.15,0.016\n",
		"crlf, blank":  "T/K,k/s^-1\r\n\r\n298.15,0.001\r\n308.15,0.004\r\n318.15,0.016\r\n\r\n",
		"cr":           "T/K,k/s^-1\r298.15,0.001\r308.15,0.004\r318.15,0.016",
		"bom":          "\ufeffT/K,k/s^-1\n298.15,0.001\n308.15,0.004\n318.15,0.016\n",
		"quotes":       "\"T/K\",\"k/s^-1\"\n\"298.15\",\"0.001\"\n\"308.15\", \"0.004\"\n318.15,\"0.016\"\n",
		"quoted comma": "t/°C,k/s^-1\n\"25,0\",\"0,001\"\n\"35,0\",\"0,004\"\n\"45,0\",\"0,016\"\n",
		"empty right":  "T/K,k/s^-1,,\n298.15,0.001,,\n308.15,0.004,,\n318.15,0.016,,\n",
		"factor":       "T/K,10^3 k/s^-1\n298.15,1\n308.15,4\n318.15,16\n",
		"factor unit":  "T/K,k/(10^-3 s^-1)\n298.15,1\n308.15,4\n318.15,16\n",
		"cell units":   "T,k\n25 °C,0.001 s^-1\n35 °C,0.004 s^-1\n45 °C,0.016 s^-1\n",
		"comment head": "# T/K k/s^-1\n298.15 0.001\n308.15 0.004\n318.15 0.016\n",
		"repeated":     "T/K,k/s^-1\n298.15,0.001\n308.15,0.004\n318.15,0.016\nmean,,\n",
		"below":        "T/K,k/s^-1\n298.15,0.001\n308.15,0.004\n318.15,0.016\n\nslope,-12.3\n1,2,3,4,5\n",
	} {
		s := read(t, text, Options{})
		ps := s.UsedPoints()
		if len(ps) != 3 {
			t.Errorf("%s: %d points: %+v", name, len(ps), s.Points)
			continue
		}
		for i, want := range [][2]float64{{298.15, 0.001}, {308.15, 0.004}, {318.15, 0.016}} {
			if !reference.Agrees(ps[i].T, want[0], 1e-15) || ps[i].K != want[1] {
				t.Errorf("%s: row %d: %v, %v", name, i, ps[i].T, ps[i].K)
			}
		}
		if s.Quantity.Unit != "s^-1" || !s.Quantity.Known {
			t.Errorf("%s: quantity %+v", name, s.Quantity)
		}
	}
	for name, c := range map[string]struct {
		text string
		tol  float64
	}{
		"reciprocal": {"10^3 K/T,ln(k/s^-1)\n3.3540164346805303,-6.907755278982137\n3.2451728054518907,-5.521460917862246\n3.1431714600031433,-4.135166556742356\n", 1e-14},
		"lg":         {"1000/T,lg(k/s^-1)\n3.3540164346805303,-3\n3.2451728054518907,-2.397940008672038\n3.1431714600031433,-1.7958800173440752\n", 1e-14},
		"half-life":  {"T/K,t_1/2/s\n298.15,693.1471805599453\n308.15,173.28679513998632\n318.15,43.32169878499658\n", 1e-15},
		"tau":        {"T/K,tau/s\n298.15,1000\n308.15,250\n318.15,62.5\n", 1e-15},
		// k_B = 8.617333262145179e-5 eV/K (SI 2019, 1.380649e-23/1.602176634e-19)
		"1/kT": {"1/kT (eV^-1),k/s^-1\n38.92174449622701,0.001\n37.65866662842798,0.004\n36.474990166745506,0.016\n", 1e-14},
		"1/RT": {"1/RT (mol/kJ),k/s^-1\n0.40339545545103,0.001\n0.39030457583231,0.004\n0.37803663379766,0.016\n", 1e-12},
	} {
		ps := read(t, c.text, Options{}).UsedPoints()
		for i, want := range [][2]float64{{298.15, 0.001}, {308.15, 0.004}, {318.15, 0.016}} {
			if !reference.Agrees(ps[i].T, want[0], c.tol) || !reference.Agrees(ps[i].K, want[1], 10*c.tol) {
				t.Errorf("%s: row %d: %v, %v", name, i, ps[i].T, ps[i].K)
			}
		}
	}
}

// The last cells of a row may be empty, and decimal commas then look like separators.
func TestSeparatorWithEmptyLastCells(t *testing.T) {
	for _, text := range []string{
		"T/K;k/s^-1;note\n300;1,5;a\n310;2,5;\n320;4,5;b\n330;8,5;\n",
		"T/K,k/s^-1,note\n300,1.5,\n310,2.5,\n320,4.5,\n330,8.5,b\n",
		"T/K\tk/s^-1\tnote\n300\t1.5\t\n310\t2.5\t\n320\t4.5\tb\n330\t8.5\t\n",
	} {
		sets, err := Read("rates.csv", strings.NewReader(text), Options{})
		if err != nil {
			t.Errorf("%q: %v", text, err)
			continue
		}
		for i, want := range [][2]float64{{300, 1.5}, {310, 2.5}, {320, 4.5}, {330, 8.5}} {
			if p := sets[0].Points[i]; p.T != want[0] || p.K != want[1] {
				t.Errorf("%q: row %d is %g K, %g", text, i, p.T, p.K)
			}
		}
	}
}

func TestEncodings(t *testing.T) {
	const text = "t/°C,k/s⁻¹,source\n25,0.001,Zürich\n35,0.004,Köln\n"
	const latin = "t/°C,k/s^-1,source\n25,0.001,Zürich\n35,0.004,Köln\n"
	w1252, err := charmap.Windows1252.NewEncoder().String(latin)
	if err != nil {
		t.Fatal(err)
	}
	little, _ := unicode.UTF16(unicode.LittleEndian, unicode.UseBOM).NewEncoder().String(text)
	big, _ := unicode.UTF16(unicode.BigEndian, unicode.UseBOM).NewEncoder().String(text)
	for name, in := range map[string]string{"utf-8": text, "bom": "\ufeff" + text, "windows-1252": w1252, "utf-16le": little, "utf-16be": big} {
		s := read(t, in, Options{})
		p := s.Points[0]
		if p.T != 298.15 || p.K != 0.001 || p.Source != "Zürich" || s.Columns[0].Heading != "t/°C" {
			t.Errorf("%s: %+v", name, p)
		}
		if said := slices.Contains(codes(s), noteEncoding); said != (name == "windows-1252") {
			t.Errorf("%s: said windows-1252: %v", name, said)
		}
	}
}

func TestUncertainties(t *testing.T) {
	// Expected u(k) from the GUM: u = U/k, s/sqrt(n), k·u(ln k), k·ln f. The t
	// quantile at p for 2 degrees of freedom is (2p - 1)/sqrt(2p(1 - p)), for 1
	// tan(π(p - 1/2)) (closed forms); normal ones to three decimals are common practice.
	t2 := func(p float64) float64 { return (2*p - 1) / math.Sqrt(2*p*(1-p)) }
	for _, c := range []struct {
		heading, cell string
		opt           Options
		u             float64
		level         Level
	}{
		{"u(k)/s^-1", "0.1", Options{}, 0.1, LevelStandard},
		{"u(k)/min^-1", "6", Options{}, 0.1, LevelStandard},
		{"u(k)", "0.1", Options{}, 0.1, LevelStandard},
		{"u_r(k)/%", "5", Options{}, 0.1, LevelStandard},
		{"u_r(k)/%", "5 %", Options{}, 0.1, LevelStandard},
		{"u_r(k)", "0.05", Options{}, 0.1, LevelStandard},
		{"u(k)", "5 %", Options{}, 0.1, LevelStandard},
		{"u(ln k)", "0.05", Options{}, 0.1, LevelStandard},
		{"u(lg k)", "0.05", Options{}, 0.1 * math.Ln10, LevelStandard},
		{"SE", "0.1", Options{}, 0.1, LevelStandard},
		{"1σ", "0.1", Options{}, 0.1, LevelStandard},
		{"2σ", "0.1", Options{}, 0.05, LevelStandard},
		{"U(k) (k=2)", "0.1", Options{}, 0.05, LevelStandard},
		{"U_95(k)", "0.1", Options{}, 0.1 / 1.96, LevelStandard},
		{"95 % CI", "0.1", Options{}, 0.1 / 1.96, LevelStandard},
		{"95 % CI,n", "0.1,3", Options{}, 0.1 / t2(0.975), LevelRepeats},
		{"95 % CI,n", "0.1,2", Options{}, 0.1 / math.Tan(math.Pi*0.475), LevelRepeats},
		{"99 % CI", "0.1", Options{}, 0.1 / 2.576, LevelStandard},
		{"90 % interval", "0.1", Options{}, 0.1 / 1.645, LevelStandard},
		{"99 % CI,n", "0.1,3", Options{}, 0.1 / t2(0.995), LevelRepeats},
		{"99 % CI", "0.1", Options{Assume: map[string]string{"n": "3"}}, 0.1 / t2(0.995), LevelRepeats},
		{"CI", "0.1", Options{}, 0, LevelNone},
		{"10^3 u(k)/s^-1", "100", Options{}, 0.1, LevelStandard},
		{"10^3 u(k)", "100", Options{}, 0.1, LevelStandard},
		{"U(k),coverage_factor", "0.1,2", Options{}, 0.05, LevelStandard},
		{"f(k)", "1.1", Options{}, 2 * math.Log(1.1), LevelStandard},
		{"f(k) (k=2)", "1.1", Options{}, math.Log(1.1), LevelStandard},
		{"s(k),n", "0.1,4", Options{}, 0.05, LevelRepeats},
		{"s(k),n", "0.1,100", Options{}, 0.01, LevelStandard},
		{"SEM,n", "0.1,3", Options{}, 0.1, LevelRepeats},
		{"RSD/%,N", "10,4", Options{}, 0.1, LevelRepeats},
		{"SD", "0.1", Options{Assume: map[string]string{"n": "4"}}, 0.05, LevelRepeats},
		{"SD", "0.1", Options{}, 0, LevelNone},
		{"error", "0.1", Options{}, 0, LevelNone},
		{"error", "0.1", Options{Assume: map[string]string{"error": "1"}}, 0.1, LevelStandard},
		{"±", "0.1", Options{Assume: map[string]string{"error": "2"}}, 0.05, LevelStandard},
		{"error", "0.1", Options{Assume: map[string]string{"error": "sd", "n": "4"}}, 0.05, LevelRepeats},
		{"error", "0.1", Options{Assume: map[string]string{"error": "sd,n=4"}}, 0.05, LevelRepeats},
		{"U(k)", "0.1", Options{}, 0, LevelNone},
		{"u(k)", "", Options{}, 0, LevelNone},
		{"q", "0.1", Options{Columns: map[string][]string{"u(k)": {"q"}}}, 0.1, LevelStandard},
		{"error (%)", "5", Options{Columns: map[string][]string{"u_r(k)": {"error (%)"}}}, 0.1, LevelStandard},
		{"error (%)", "5", Options{Columns: map[string][]string{"U(k) (k=2)": {"error (%)"}}}, 0.05, LevelStandard},
		{"q", "0.1", Options{Columns: map[string][]string{"U(k)": {"q"}}}, 0, LevelNone},
		{"u(k_cat)", "0.1", Options{}, 0, LevelNone}, // of another quantity
	} {
		s := read(t, "T/K,k/s^-1,"+c.heading+"\n300,2,"+c.cell+"\n310,2,"+c.cell+"\n", c.opt)
		p := s.Points[0]
		if !reference.Agrees(p.UK, c.u, 1e-14) || p.Level != c.level {
			t.Errorf("%s = %s (%v): got %v %q, want %v %q", c.heading, c.cell, c.opt.Assume, p.UK, p.Level, c.u, c.level)
		}
		if len(c.opt.Assume) > 0 && len(s.Assumed) == 0 {
			t.Errorf("%s: the assumption is not recorded", c.heading)
		}
	}
	for cell, want := range map[string]float64{"2.0(1)": 0.1, "2.0 (1)": 0, "2.0 ± 0.1": 0} {
		if p := read(t, "T/K,k/s^-1\n300,"+cell+"\n310,2\n", Options{}).Points[0]; p.K != 2 || !reference.Agrees(p.UK, want, 1e-15) {
			t.Errorf("%s: %v %v", cell, p.K, p.UK)
		}
	}
	s := read(t, "T/K,k/s^-1\n300,2.0 ± 0.1\n310,2\n", Options{Assume: map[string]string{"error": "2"}})
	if s.Points[0].UK != 0.05 || !slices.Contains(s.Assumed, "error=2") {
		t.Errorf("± with error=2: %v, %v", s.Points[0].UK, s.Assumed)
	}
	// The cures of what is ambiguous in a cell work, and what they assume is recorded.
	for _, c := range []struct {
		cell    string
		assume  map[string]string
		u       float64
		assumed []string
	}{
		{"2.0 (1)", map[string]string{"error": "1"}, 0.1, []string{"error=1"}},
		{"2.0 (1)", map[string]string{"error": "2"}, 0.05, []string{"error=2"}},
		{"2.0 (1)×10^-3", map[string]string{"error": "1"}, 0.0001, []string{"error=1"}},
		{"2.0 ± 0.1", map[string]string{"error": "sd", "n": "4"}, 0.05, []string{"error=sd", "n=4"}},
		{"2.0 ± 0.1", map[string]string{"error": "sd,n=4"}, 0.05, []string{"error=sd,n=4"}},
	} {
		s := read(t, "T/K,k/s^-1\n300,"+c.cell+"\n310,2\n", Options{Assume: c.assume})
		if !reference.Agrees(s.Points[0].UK, c.u, 1e-14) || !slices.Equal(s.Assumed, c.assumed) {
			t.Errorf("%s, %v: u %v, assumed %v", c.cell, c.assume, s.Points[0].UK, s.Assumed)
		}
		if slices.Contains(codes(s), noteUnneeded) {
			t.Errorf("%s, %v: not needed: %v", c.cell, c.assume, s.Notices)
		}
	}
	// Beside a temperature; u(T) = T u(x)/x of a reciprocal.
	for _, c := range []struct {
		heading, cell string
		assume        map[string]string
		u             float64
		said          string
	}{
		{"T/K", "300.0(1)", nil, 0.1, noteBrackets},
		{"t/°C", "25.0(1)", nil, 0.1, noteBrackets},
		{"1000/T", "4.00(2)", nil, 1.25, noteBrackets},
		{"T/K", "300.0 ± 0.1", nil, 0, noteLevel},
		{"T/K", "300.0 (1)", nil, 0, noteLevel},
		{"T/K", "300.0 ± 1 %", map[string]string{"error": "1"}, 0, noteLevel},
		{"T/K", "300.0 ± 0.1", map[string]string{"error": "2"}, 0.05, noteAssumption},
	} {
		s := read(t, c.heading+",k/s^-1\n"+c.cell+",1\n3,2\n", Options{Assume: c.assume})
		if !reference.Agrees(s.Points[0].UT, c.u, 1e-13) {
			t.Errorf("%s %s: u(T) %v, want %v", c.heading, c.cell, s.Points[0].UT, c.u)
		}
		has(t, s, c.said)
	}
	// A column of uncertainties goes before what the cell says, and that is said.
	s = read(t, "T/K,k/s^-1,u(k)/s^-1\n300,2.0(1),0.3\n310,2.0,0.3\n", Options{})
	if s.Points[0].UK != 0.3 {
		t.Errorf("u(k) beside a bracket: %v", s.Points[0].UK)
	}
	has(t, s, noteOtherU)
	// Bare headings belong to the quantity on their left.
	p := read(t, "T/K,SE,ln k,SD of k,n\n300,0.2,0,0.1,4\n310,0.2,1,0.1,4\n", Options{}).Points[0]
	if p.UT != 0.2 || !reference.Agrees(p.UK, 0.05, 1e-15) {
		t.Errorf("bare SE: u(T) %v, u(k) %v", p.UT, p.UK)
	}
	p = read(t, "T/K,ln k,SE\n300,1,0.1\n310,1,0.1\n", Options{}).Points[0]
	if !reference.Agrees(p.UK, 0.1*math.E, 1e-15) {
		t.Errorf("SE beside ln k: %v", p.UK)
	}
	// u(τ)/τ = u(k)/k; a factor stands over both columns.
	p = read(t, "T/K,tau/s,u(tau)/s\n300,4,0.4\n310,5,0.5\n", Options{}).Points[0]
	if p.K != 0.25 || !reference.Agrees(p.UK, 0.025, 1e-15) {
		t.Errorf("u(tau): %v %v", p.K, p.UK)
	}
	p = read(t, "T/K,10^3 k/s^-1,SE\n300,4,0.4\n310,5,0.5\n", Options{}).Points[0]
	if p.K != 0.004 || p.UK != 0.0004 {
		t.Errorf("10^3 k with SE: %v %v", p.K, p.UK)
	}
}

func TestRefusals(t *testing.T) {
	const good = "310,0.004\n320,0.016\n"
	for _, c := range []struct {
		name, text string
		opt        Options
		want       []string // code:row, in order
	}{
		{"empty", "", Options{}, []string{"no-data:0"}},
		{"comments only", "# nothing\n", Options{}, []string{"no-data:0"}},
		{"heading only", "T/K,k/s^-1\n", Options{}, []string{"no-data:0"}},
		{"one column", "T/K\n300\n", Options{}, []string{"no-data:1"}},
		{"nul", "T/K,k/s^-1\n300,\x001\n", Options{}, []string{"not-text:0"}},
		{"zip", "PK\x03\x04rest", Options{}, []string{"not-text:0"}},
		{"HTML", "\ufeff \n<HTML lang=\"en\"><table>\n<tr><td>T/K</td></tr>\n", Options{}, []string{"not-text:0"}},
		{"XML", "<?xml version=\"1.0\"?>\n<a, b>\n", Options{}, []string{"not-text:0"}},
		{"JSON", "[[\n {\"T/K\": 300, \"k/s^-1\": 1}]]\n", Options{}, []string{"not-text:0"}},
		{"too wide", "T/K,k/s^-1" + strings.Repeat(",", 20000) + "\n300,1\n", Options{}, []string{"too-many-columns:1"}},
		{"no heading", "300,0.001\n310,0.004\n", Options{}, []string{"no-heading:1"}},
		{"open quote", "T/K,k/s^-1\n300,\"1\n310,2\n", Options{}, []string{"unclosed-quote:2"}},
		{"duplicate heading", "T/K,k/s^-1,k / s-1,k/s^-1\n300,1,1,1\n" + "310,1,1,1\n", Options{}, []string{"duplicate-heading:1"}},
		{"three equal headings", "T/K,k/s^-1,k/s^-1,k/s^-1\n300,1,2,3\n310,1,2,3\n", Options{}, []string{"duplicate-heading:1"}},
		{"sign", "T/K,-ln k\n300,1\n310,2\n", Options{}, []string{"no-rate:1"}},
		{"forward and backward", "T/K,k_f/s^-1,k_b/s^-1\n300,1,2\n310,2,3\n", Options{}, []string{"several-rates:1"}},
		{"a and b", "T/K,k_a/s^-1,k_b/s^-1\n300,1,2\n310,2,3\n", Options{}, []string{"several-rates:1"}},
		{"T without unit by name", "foo,k/s^-1\n300,1\n310,2\n", Options{Columns: map[string][]string{"T": {"foo"}}}, []string{"ambiguous-temperature:1"}},
		{"log k by name", "T/K,y\n300,1\n310,2\n", Options{Columns: map[string][]string{"log k": {"y"}}}, []string{"ambiguous-rate:1"}},
		{"an ambiguous repeat by name", "T/K,a,log k\n300,1,2\n310,2,3\n", Options{Columns: map[string][]string{"k": {"a", "log k"}}}, []string{"ambiguous-rate:1"}},
		{"one column twice", "T/K,y\n300,1\n310,2\n", Options{Columns: map[string][]string{"k": {"y", "y"}}}, []string{"role-named-twice:1"}},
		{"one role twice", "T/K,k,a,b\n300,1,x,y\n310,2,x,y\n", Options{Columns: map[string][]string{"source": {"a", "b"}}}, []string{"role-named-twice:1"}},
		{"point beside --decimal comma", "T/K;k/s^-1\n300;0.5\n310;0,6\n", Options{Decimal: "comma"}, []string{"not-a-number:2"}},
		{"ragged", "T/K,k/s^-1\n300,1,2\n310\n320,1\n", Options{}, []string{"ragged-row:2", "ragged-row:3"}},
		{"ambiguous both", "T,log k\n300,1\n310,2\n", Options{}, []string{"ambiguous-temperature:1", "ambiguous-rate:1"}},
		{"ambiguous and ragged", "T,k\n300,1,1\n310,2\n", Options{}, []string{"ambiguous-temperature:1", "ragged-row:2"}},
		{"nothing known", "a,b\n300,1\n310,2\n", Options{}, []string{"no-temperature:1", "no-rate:1"}},
		{"rate", "T/K,rate\n300,1\n310,2\n", Options{}, []string{"ambiguous-rate:1"}},
		{"two rates", "T/K,k_1/s^-1,k_2/s^-1\n300,1,2\n310,2,3\n", Options{}, []string{"several-rates:1"}},
		{"text", "T/K,k/s^-1\n300,abc\nwarm,1\n" + good, Options{}, []string{"not-a-number:2", "not-a-number:3"}},
		{"words only", "T/K,k/s^-1\nx,y\n" + good, Options{}, []string{"not-a-number:2", "not-a-number:2"}},
		{"not finite", "T/K,k/s^-1\n300,NaN\n300,Inf\n300,1e999\n" + good, Options{}, []string{"not-finite:2", "not-finite:3", "not-finite:4"}},
		{"ln overflows", "T/K,ln k\n300,800\n310,1\n", Options{}, []string{"not-finite:2"}},
		{"T <= 0", "T/K,k/s^-1\n0,1\n-5,1\n" + good, Options{}, []string{"temperature-not-positive:2", "temperature-not-positive:3"}},
		{"t <= -273.15", "t/°C,k/s^-1\n-300,1\n25,1\n35,2\n", Options{}, []string{"temperature-not-positive:2"}},
		{"1/T zero", "1000/T,k/s^-1\n0,1\n3,1\n", Options{}, []string{"temperature-not-positive:2"}},
		{"k <= 0", "T/K,k/s^-1\n300,0\n305,-1\n" + good, Options{}, []string{"rate-not-positive:2", "rate-not-positive:3"}},
		{"negative u", "T/K,k/s^-1,u(k)\n300,1,-0.1\n310,1,0.1\n", Options{}, []string{"negative-uncertainty:2"}},
		{"factor", "T/K,k/s^-1,f(k)\n300,1,0.9\n310,1,1.1\n", Options{}, []string{"bad-uncertainty-factor:2"}},
		{"coverage", "T/K,k/s^-1,U(k),coverage_factor\n300,1,0.1,0\n310,1,0.1,2\n", Options{}, []string{"bad-coverage-factor:2"}},
		{"n", "T/K,k/s^-1,s(k),n\n300,1,0.1,0\n310,1,0.1,2.5\n", Options{}, []string{"bad-number-of-repeats:2", "bad-number-of-repeats:3"}},
		{"limit", "T/K,k/s^-1,limit\n300,1,about\n310,1,<\n", Options{}, []string{"bad-limit:2"}},
		{"unit of u", "T/K,k/s^-1,u(k)/K\n300,1,0.1\n310,1,0.1\n", Options{}, []string{"unit-conflict:1"}},
		{"unit in cell", "T/K,k/s^-1\n25 °C,1\n310,1 min^-1\n", Options{}, []string{"unit-conflict:2", "unit-conflict:3"}},
		{"mixed marks", "T/K;k/s^-1\n300,5;0.5\n310,5;0.6\n", Options{}, []string{"mixed-decimal-marks:2"}},
		{"thousands", "T/K,k/s^-1\n\"1,200\",5\n\"1,300\",6\n", Options{}, []string{"ambiguous-decimal-mark:2"}},
		{"disagree", "T/K,t/°C,k/s^-1\n300.00,26.85,1\n310.00,35.00,1\n", Options{}, []string{"columns-disagree:3"}},
		{"k and ln k", "T/K,k/s^-1,ln k\n300,2.718,1.000\n310,2.718,2.000\n", Options{}, []string{"columns-disagree:3"}},
		{"column", "T/K,k/s^-1\n300,1\n310,2\n", Options{Columns: map[string][]string{"k": {"kobs"}, "zeta": {"T/K"}}}, []string{"column-unknown:1", "role-unknown:0"}},
		{"dataset", "T/K,k/s^-1,dataset\n300,1,a\n310,2,b\n", Options{Dataset: "c"}, []string{"dataset-unknown:0"}},
		{"where", "T/K,k/s^-1\n300,1\n310,2\n", Options{Where: []string{"pH=7", "pH"}}, []string{"column-unknown:0", "where-not-understood:0"}},
		{"leave-out", "T/K,k/s^-1\n300,1\n310,2\n", Options{LeaveOut: []int{9}}, []string{"leave-out-unknown:9"}},
		{"decimal", "T/K,k/s^-1\n300,1\n310,2\n", Options{Decimal: "dot"}, []string{"decimal-unknown:0"}},
		{"assume", "T/K,k/s^-1\n300,1\n310,2\n", Options{Assume: map[string]string{"T": "warm", "x": "y", "n": "0"}}, []string{"assumption-not-understood:0", "assumption-not-understood:0", "assumption-not-understood:0"}},
		{"limit on T", "T/K,k/s^-1\n<300,1\n310,2\n", Options{}, []string{"not-a-number:2"}},
	} {
		sets, err := Read("rates.csv", strings.NewReader(c.text), c.opt)
		var ps Problems
		if !errors.As(err, &ps) {
			t.Errorf("%s: not refused: %v, %v", c.name, sets, err)
			continue
		}
		var got []string
		for _, p := range ps {
			got = append(got, fmt.Sprintf("%s:%d", p.Code, p.Row))
			if p.File != "rates.csv" || p.Message == "" || p.Cure == "" || strings.HasSuffix(p.Message, ".") {
				t.Errorf("%s: %+v", c.name, p)
			}
		}
		if !slices.Equal(got, c.want) {
			t.Errorf("%s: got %v, want %v\n%v", c.name, got, c.want, err)
		}
	}
}

func TestMessages(t *testing.T) {
	_, err := Read("rates.csv", strings.NewReader("T/K,k/s^-1\n300,1\n310,abc\n"), Options{})
	const want = `rates.csv:3: column "k/s^-1": "abc" is not a number; write a number, or leave the cell empty to leave the row out`
	if err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
	// An empty cell of these columns keeps the row: what the cure promises, it must do.
	for _, c := range []struct{ heading, cell, want string }{
		{"order", "second", `"second" is not a number`},
		{"n", "three", `"three" is not a number`},
		{"n", "5 %", `"5 %" is a percentage`},
		{"u(T)/K", "inf", `"inf" is not a finite number`},
		{"u(k)/s^-1", "small", `"small" is not a number`},
	} {
		table := func(cell string) *strings.Reader {
			return strings.NewReader("T/K,k/s^-1," + c.heading + "\n300,1,\n310,2," + cell + "\n")
		}
		_, err := Read("rates.csv", table(c.cell), Options{})
		want := `rates.csv:3: column "` + c.heading + `": ` + c.want + `; write a number, or leave the cell empty: the row is used all the same; or take the column for a note: --column 'note=` + c.heading + `'`
		if err == nil || err.Error() != want {
			t.Errorf("got  %v\nwant %s", err, want)
		}
		for _, cured := range []struct {
			cell string
			opt  Options
		}{{"", Options{}}, {c.cell, Options{Columns: map[string][]string{"note": {c.heading}}}}} {
			sets, err := Read("rates.csv", table(cured.cell), cured.opt)
			if err != nil || len(sets) != 1 || len(sets[0].UsedPoints()) != 2 {
				t.Errorf("%s: the cure does not work: %v", c.heading, err)
			}
		}
	}
	_, err = Read("rates.csv", strings.NewReader("T/K,k/s^-1,run\n300,1,1\n310,2,x\n"), Options{Columns: map[string][]string{"order": {"run"}}})
	if err == nil || !strings.HasSuffix(err.Error(), "the row is used all the same; or name another column") {
		t.Errorf("a column that was named: %v", err)
	}
	_, err = Read("rates.csv", strings.NewReader("T/K,k/s^-1\n"+strings.Repeat("x,1\n", 30)), Options{})
	if got := strings.Split(err.Error(), "\n"); len(got) != 21 || got[20] != "and 10 more" {
		t.Errorf("thirty problems print as %d lines, the last %q", len(got), got[len(got)-1])
	}
	for _, c := range []struct {
		text string
		opt  Options
		want string
	}{
		{"T/K;k/s^-1\n300;0.5\n310;0,6\n", Options{Decimal: "comma"}, `rates.csv:2: column "k/s^-1": "0.5" is not a number where the decimal mark is the comma, and '.' groups thousands; write it as 0,5`},
		{"T/K,t/°C,k/s^-1\n300.00,26.85,1\n310.00,35.00,1\n", Options{}, `rates.csv:3: column "t/°C": "35.00" is 308.150 K, and column "T/K" gives 310.000 K; correct the row, or choose a column: --column 'T=T/K' or --column 'T=t/°C'`},
		{"T/K,-ln k\n300,1\n310,2\n", Options{}, `rates.csv:1: column "-ln k": the sign of the rate constant, or of its logarithm, is turned round; turn the sign of the cells and write the heading as ln k`},
		{"T/K,k/s^-1,k/s^-1,k/s^-1\n300,1,2,3\n310,1,2,3\n", Options{}, `rates.csv:1: column "k/s^-1": the heading stands over columns 2, 3 and 4; give each column its own heading, or, if they are repeats of one measurement, say so: --assume k=repeats`},
		{"T/K,k1/s^-1,k2/s^-1\n300,1,2\n310,1,2\n", Options{}, `rates.csv:1: there are columns of different rate constants: "k1/s^-1", "k2/s^-1"; choose one: --column 'k=k1/s^-1' or --column 'k=k2/s^-1'; or, if they are repeats of one measurement, name each: --column 'k=k1/s^-1' --column 'k=k2/s^-1', or say so: --assume k=repeats`},
		{"T/K,k/s^-1\n300,1,2\n310\n320,2\n", Options{}, "rates.csv:2: the row has 3 cells, the headings 2; give every row as many cells as there are headings, empty ones included\nrates.csv:3: the row has 1 cell, the headings 2; give every row as many cells as there are headings, empty ones included"},
	} {
		if _, err := Read("rates.csv", strings.NewReader(c.text), c.opt); err == nil || err.Error() != c.want {
			t.Errorf("got  %v\nwant %s", err, c.want)
		}
	}
	_, err = Read("rates.csv", strings.NewReader("T,k/s^-1\n300,1\n"), Options{})
	for _, flag := range []string{"--assume T=K", "--assume T=degC", "--assume T=degF"} {
		if !strings.Contains(err.Error(), flag) {
			t.Errorf("%v does not name %s", err, flag)
		}
	}
}

func TestRowsLeftOut(t *testing.T) {
	s := read(t, "T/K,k/s^-1,source\n300,1,a\n301,n.d.,a\nNA,1,a\n302,<0.5,a\n303,<LOD,b\n304,,b\n305,2,b\nmean,1.5,\n\n310,9,x\n\nE,76,x\nand,anything,else,here\n", Options{})
	want := map[int]string{2: "", 3: "no rate constant", 4: "no temperature", 5: "only a limit", 6: "no rate constant", 7: "no rate constant", 8: "", 11: ""}
	if len(s.Points) != len(want) {
		t.Fatalf("%d points", len(s.Points))
	}
	for _, p := range s.Points {
		w := want[p.Row]
		if p.Used != (w == "") || !strings.HasPrefix(p.WhyNot, w) {
			t.Errorf("line %d: used %v, %q; want %q", p.Row, p.Used, p.WhyNot, w)
		}
	}
	if p := s.Points[3]; p.Limit != "<" || p.K != 0.5 {
		t.Errorf("limit: %+v", p)
	}
	for _, code := range []string{noteMissing, noteLimits, noteAfter, noteFew, noteNarrow} {
		has(t, s, code)
	}
	var below [][]int // behind a blank row, and labelled
	for _, n := range s.Notices {
		if n.Code == noteAfter {
			below = append(below, n.Rows)
		}
	}
	if len(below) != 2 || !slices.Equal(below[0], []int{13, 14}) || !slices.Equal(below[1], []int{9}) {
		t.Errorf("rows below the table: %v", below)
	}
	p := read(t, "T/K,k/s^-1,limit\n300,1,>\n310,1,\n", Options{}).Points[0]
	if p.Limit != ">" || p.Used {
		t.Errorf("limit column: %+v", p)
	}
	p = read(t, "T/K,tau/s\n300,<2\n310,1\n", Options{}).Points[0]
	if p.Limit != ">" || p.K != 0.5 {
		t.Errorf("a lifetime below 2 s is a rate constant above 0.5 s^-1: %+v", p)
	}
}

func TestSelection(t *testing.T) {
	const text = "T/K,k/s^-1,source,pH,p/Torr\n300,1,Lab1,7.0,1\n310,2,Lab2,7,10\n320,3,Lab1,8.0,100\n330,abc,Lab3,7.0,1000\n340,5,Lab1,7.0,1\n"
	for _, c := range []struct {
		opt  Options
		rows []int
	}{
		{Options{LeaveOut: []int{5}}, []int{2, 3, 4, 6}},
		{Options{Where: []string{"source!=Lab3"}}, []int{2, 3, 4, 6}},
		{Options{Where: []string{"pH=7.0", "source=Lab1"}}, []int{2, 6}},
		{Options{Where: []string{"p<100", "source!=Lab3"}}, []int{2, 3, 6}},
		{Options{Where: []string{"p/Torr>=10"}, LeaveOut: []int{5}}, []int{3, 4}},
		{Options{Where: []string{"temperature>=320"}, LeaveOut: []int{5}}, []int{4, 6}},
		{Options{TMin: 305, TMax: 325}, []int{3, 4}},
	} {
		s := read(t, text, c.opt)
		var rows []int
		for _, p := range s.Points {
			if p.Used {
				rows = append(rows, p.Row)
			} else if p.WhyNot == "" {
				t.Errorf("%+v: line %d has no reason", c.opt, p.Row)
			}
		}
		if !slices.Equal(rows, c.rows) || len(s.Points) != 5 {
			t.Errorf("%+v: rows %v of %d, want %v", c.opt, rows, len(s.Points), c.rows)
		}
		has(t, s, noteSelected)
	}

	if s := read(t, "T/K,k/s^-1\n300,1\n310\n320,2\n", Options{LeaveOut: []int{3}}); len(s.Points) != 3 || len(s.UsedPoints()) != 2 {
		t.Errorf("a ragged row is left out on request: %+v", s.Points)
	}

	const long = "dataset,T/K,k/s^-1\na,300,1\nb,300,2\na,310,3\nb,310,4\n"
	sets, err := Read("long.csv", strings.NewReader(long), Options{})
	if err != nil || len(sets) != 2 || sets[0].Name != "a" || sets[1].Name != "b" || len(sets[1].Points) != 2 {
		t.Errorf("two sets: %v, %v", sets, err)
	}
	s := read(t, long, Options{Dataset: "b"})
	if s.Name != "b" || s.Points[1].K != 4 {
		t.Errorf("--dataset b: %+v", s)
	}
	sets, err = Read("long.csv", strings.NewReader("pH,T/K,k/s^-1\n7,300,1\n8,300,2\n"), Options{DatasetBy: "pH"})
	if err != nil || len(sets) != 2 || sets[1].Name != "8" {
		t.Errorf("--dataset-by: %v, %v", sets, err)
	}
	if s := read(t, "T/K;k/s^-1\n1.200;0,5\n1.300;0,6\n", Options{Decimal: "comma"}); s.Points[0].T != 1200 || s.Points[0].K != 0.5 {
		t.Errorf("--decimal comma: %+v", s.Points[0])
	}
	if s := read(t, "T/K,k/s^-1\n300,0\n310,-1\n", Options{AllowNonPositiveK: true}); len(s.UsedPoints()) != 2 {
		t.Errorf("k <= 0 is allowed on request: %+v", s.Points)
	}
	if s := read(t, "T/K,y\n300,0\n310,1\n", Options{Columns: map[string][]string{"ln k": {"y"}}}); s.Points[1].K != math.E {
		t.Errorf("--column 'ln k=y': %+v", s.Points[1])
	}
}

func TestSeveralColumns(t *testing.T) {
	// t/°C has one decimal more than T/K and 1000/T here: the smaller rounding error.
	s := read(t, "T/K,t/°C,1000/T,k/s^-1,ln k\n298,25.0,3.35,1.2345e-3,-6.7\n308,35.0,3.25,4.0000e-3,-5.5\n", Options{})
	if s.Points[0].T != 298.15 || s.Points[0].K != 1.2345e-3 {
		t.Errorf("%+v", s.Points[0])
	}
	has(t, s, noteSeveral)
	// An exact kelvin column that is t + 273.
	s = read(t, "T/K,t/°C,k/s^-1\n298.00,25.0,1\n308.00,35.0,2\n", Options{})
	if s.Points[0].T != 298.15 {
		t.Errorf("%+v", s.Points[0])
	}
	has(t, s, noteGap)
	// An ambiguous column beside a certain one is not asked about.
	s = read(t, "T,T/K,k/s^-1,log k\n25,298.15,1,0\n35,308.15,2,0.3\n", Options{})
	if s.Points[1].T != 308.15 || s.Points[1].K != 2 {
		t.Errorf("%+v", s.Points[1])
	}
	// Units of two columns of one quantity differ.
	s = read(t, "T/K,k/s^-1,ln(k/min^-1)\n300,1.00,4.094\n310,2.00,4.787\n", Options{})
	if s.Points[0].K != 1 && !reference.Agrees(s.Points[0].K, 60, 1e-3) {
		t.Errorf("%+v", s.Points[0])
	}
}

func TestNotices(t *testing.T) {
	for _, c := range []struct{ text, code string }{
		{"T/K,k\n300,1\n310,2\n", noteUnit},
		{"T/K,k/widgets\n300,1\n310,2\n", noteUnit},
		{"T/K,k/(Torr^-1 s^-1)\n300,1\n310,2\n", noteUnitWithheld},
		{"T/K,life_h\n300,1\n310,2\n", noteTimeLike},
		{"103 K/T,k/s^-1\n3.3,1\n3.2,2\n", noteLost},
		{"T/K,k/s^-1,yield\n300,1,5\n310,2,6\n", noteKept},
		{"T/K,k/s^-1,pH\n300,1,7\n300,2,8\n", noteVaries},
		{"T/K,k/s^-1\n300,1\n300,1\n", noteDuplicate},
		{"t/°C,k/s^-1\n298,1\n308,2\n318,3\n", noteCLikeK},
		{"T/K,k/s^-1\n25,1\n35,2\n45,3\n", noteKLikeC},
		{"T/K,k/s^-1,u(k)\n300,1,0.4\n310,2,0.1\n", noteLargeU},
		{"T/K,k/s^-1,error\n300,1,0.4\n310,2,0.1\n", noteLevel},
		{"T/K,k/s^-1,SD\n300,1,0.4\n310,2,0.1\n", noteRepeats},
		{"T/K,k/s^-1,u(k),SE\n300,1,0.1,0.1\n310,2,0.1,0.1\n", noteOtherU},
		{"T/K,k/s^-1,u(k)\n300,1,0.1\n310,2,0.1\n", noteAssumedUnit},
		{"T/K,k/s^-1\n300,1.0(1)\n310,2.0(1)\n", noteBrackets},
		{"T/K,k/s^-1,s(k),n\n300,1,0.1,3\n310,2,0.1,3\n", noteFewRepeats},
		{"# T/K,k/s^-1\n300,1\n310,2\n", noteCommentHeading},
		{"Title\nT/K,k/s^-1\n300,1\n310,2\n", noteTitle},
		{"T,k\nK,1/s\n300,1\n310,2\n", noteJoined},
	} {
		has(t, read(t, c.text, Options{}), c.code)
	}
	s := read(t, "T,log k\n25,1\n35,2\n", Options{Assume: map[string]string{"T": "degC", "log": "lg", "k": "rate"}})
	if !slices.Equal(s.Assumed, []string{"T=degC", "log=lg"}) || s.Points[0].K != 10 || s.Points[0].T != 298.15 {
		t.Errorf("%v %+v", s.Assumed, s.Points[0])
	}
	has(t, s, noteAssumption)
	has(t, s, noteUnneeded)
	if s.Columns[0].Confidence != "by assumption" || s.Columns[0].Unit != "°C" || s.Columns[1].Role != "rate" {
		t.Errorf("%+v", s.Columns)
	}
	clean := read(t, "T/K,k/s^-1\n300,1\n310,2\n320,3\n330,5\n340,9\n", Options{})
	if len(clean.Notices) != 0 || len(clean.SHA256) != 64 || clean.Name != "rates" || len(clean.Columns[0].Examples) != 3 {
		t.Errorf("%+v", clean)
	}
}

func TestCodesAreExplained(t *testing.T) {
	all := Explanations()
	if len(all) != len(ProblemCodes)+len(NoticeCodes) {
		t.Error("a code stands twice")
	}
	for code, e := range all {
		if code != e.Code || e.Title == "" || e.Text == "" || strings.Trim(code, "abcdefghijklmnopqrstuvwxyz0123456789-") != "" {
			t.Errorf("%s: %+v", code, e)
		}
	}
	for _, code := range ProblemCodes {
		if all[code].Cure == "" {
			t.Errorf("%s has no cure", code)
		}
	}
}

func TestTidyIsReadBack(t *testing.T) {
	for _, text := range []string{
		"t/°C,10^3 k/s^-1,u_r(k)/%,source,note\n25.1,1.234,3.3,Zürich,\"a, \"\"b\"\"\"\n35.7,4.321,4.4,x,\n45.3,<9,,,\n",
		"1000/T,lg(k/(L mol^-1 s^-1)),u(T)/K\n3.3541,-3.217,0.1\n3.2452,-2.331,0.3\n",
		"T/K,k_obs/min^-1,s(k_obs)/min^-1,n,order,pH\n300,1.1,0.13,3,2,7\n310,2.7,0.17,4,1,8\n",
		"T/K,k/(cm^3 molecule^-1 s^-1),2σ\n300,1.1e-14,1e-15\n310,2.7e-14,1e-15\n",
		"T/K,k/s^-1,SEM,n\n300,1.1,0.1,3\n310,2.7,0.1,\n",
		"T/K,kcat/Km (M^-1 s^-1)\n300,1.1e5\n310,2.7e5\n",
		"T/K,D (cm2/s)\n300,1.1e-5\n310,2.7e-5\n",
		"T/K,half-life (d)\n300,3.1\n310,1.7\n",
		"T/K,k\n300,3.1\n310,1.7\n",
		"T/K,turnover number (s^-1)\n300,3.1\n310,1.7\n",
	} {
		s := read(t, text, Options{})
		var b bytes.Buffer
		if err := Tidy(&b, s); err != nil {
			t.Fatal(err)
		}
		again := read(t, b.String(), Options{})
		var want []Point
		for _, p := range s.Points {
			if p.Used || p.Limit != "" {
				want = append(want, p)
			}
		}
		if len(again.Points) != len(want) {
			t.Fatalf("%q -> %q: %d points", text, b.String(), len(again.Points))
		}
		for i, p := range want {
			q := again.Points[i]
			sameOrder := p.Order == q.Order || math.IsNaN(p.Order) && math.IsNaN(q.Order)
			if q.T != p.T || q.K != p.K || q.UK != p.UK || q.UT != p.UT || q.SD != p.SD || q.Level != p.Level || q.Repeats != p.Repeats || q.Limit != p.Limit ||
				q.Source != p.Source || q.Note != p.Note || q.Used != p.Used || !sameOrder || fmt.Sprint(q.Extra) != fmt.Sprint(p.Extra) {
				t.Errorf("%q\n-> %q\ngot  %+v\nwant %+v", text, b.String(), q, p)
			}
		}
		a, c := s.Quantity, again.Quantity
		a.TimeLike = false
		if a != c {
			t.Errorf("%q: quantity %+v became %+v", b.String(), s.Quantity, again.Quantity)
		}
	}
}

func TestInputIsNotModified(t *testing.T) {
	data := []byte("\ufeffT/K,k/s^-1\n300,1\n310,2\n")
	before := bytes.Clone(data)
	tab, err := ParseTable("x", data)
	if err != nil {
		t.Fatal(err)
	}
	opt := Options{Columns: map[string][]string{"k": {"k/s^-1"}}, Assume: map[string]string{"T": "K"}, LeaveOut: []int{2}}
	if _, err := tab.Sets(opt); err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(before, data) || len(opt.Columns) != 1 || len(opt.Assume) != 1 || opt.LeaveOut[0] != 2 {
		t.Error("the input was modified")
	}
}

// A range of exactly 20 K is not narrow, whatever unit rounds its ends.
func TestRangeOf20KInEveryUnit(t *testing.T) {
	for half := -80; half < 120; half++ {
		c := float64(half) / 2
		for _, file := range []string{
			fmt.Sprintf("T/K,k/s^-1\n%.2f,1\n%.2f,2\n", c+273.15, c+293.15),
			fmt.Sprintf("t/degC,k/s^-1\n%.1f,1\n%.1f,2\n", c, c+20),
			fmt.Sprintf("t/degF,k/s^-1\n%.1f,1\n%.1f,2\n", 1.8*c+32, 1.8*(c+20)+32),
		} {
			sets, err := Read("x.csv", strings.NewReader(file), Options{})
			if err != nil {
				t.Fatal(err)
			}
			for _, n := range sets[0].Notices {
				if n.Code == noteNarrow {
					t.Errorf("%q: %s", file, n.Message)
				}
			}
		}
	}
}

func FuzzRead(f *testing.F) {
	for _, s := range []string{
		"T/K,k/s^-1\n300,1\n310,2\n", "\ufeffT/K\tk/s^-1\r\n300\t1\r\n", "\xff\xfeT\x00/\x00K\x00", "t/\xb0C;k/s^-1\n25,0;1,5\n", "T/K k/s^-1\n300 1e999\n",
		"\"a\"\"b\",\"\n\n\"\n1,2\n", "T/K,k/s^-1\n300,1\n\n\nmean,2\n", "sep=;\n", "T,k,\n,,\n,,,,\n", "T/K,k,u(k),n,limit,source,dataset,order,note\n300,1,0.1,3,<,a,b,1,c\n",
		"#\n#N/A,1\n2,3\n", strings.Repeat(",", 2000), "T/K,k,ln k,lg k,tau/s\n1,1,0,0,1\n", "\u202eT/K,k/s^-1\n300,1\n",
		"\xfe\xff\x00T\x00/\x00K\x00", "\xff\xfe\x00\xd8T\x00", "T/K,k/s^-1\x00\n300,1\n", "\ufeff\ufeffT/K,k/s^-1\r300,1\r\r\n", "T/K;k/s^-1\n300,5;1.5\n", "T/K,k/s^-1\n300,\"1,234.5\"\n310,\"1.234,5\"\n",
		"T/K,k/s^-1,note\n300,4.9e-324,\"a\"\"\"\"b\"c\"\n310,1e-330,\"\"\"\"\n", "T/K,k/s^-1\n300,\"never closed\n310,2\n", "t/\xb0C,k/s^-1,note\n25,1,\x81\x96\n", "T/K,k/s^-1,dataset\n300,1.5(2),\u0639\n310,1 \u00b1 0.1,b\n",
		"10^3 K/T,u(T)/K,1/\u03c4\n3.3,0.1,2\n", "t/degF,t_1/2/min,f(k)\n77,5,1.2\n", "T/K,lg(k/s^-1),U(k)/s^-1 (k=2),s(k),n\n300,400,1,2,3\n", "T/K,k/s^-1\n" + strings.Repeat("300,1\n", 300), "T/K" + strings.Repeat(" ", 300) + ",k\n", "a\tb c;d,e\n1\t2 3;4,5\n",
		"T/K,k (run 1)/s^-1,ln k (run 2),u(k) (run 1)\n300,1,0.5,0.1\n310,,0.6(1),0.1\n", "T/K,k/s^-1,k/s^-1,n\n300,1,2,3\n310,<1,2,3\n", "T/K,k1/s^-1,k2/min^-1,mean k/s^-1,SD\n300,1,2,3,4\n",
		"T/K,k/s^-1,,\n,run 1,run 2,#3\n300,1,2,3\n310,n.d.,2 (1),3 \u00b1 1\n", "1000 / (T/K),k(1)/s^-1,99 % CI,n\n3.3(1),1,0.1,1\n3.2 \u00b1 0.1,2,0.1,2\n", "T/K,tau (run 1)/s,tau (run 2)/s\n300,1,<2\n",
	} {
		f.Add([]byte(s), "K", "comma")
		f.Add([]byte(s), "degC", "")
	}
	f.Fuzz(func(t *testing.T, data []byte, assume, decimal string) {
		for _, opt := range []Options{
			{},
			{Assume: map[string]string{"T": assume, "log": "lg", "k": "rate", "error": "sd,n=3"}, Decimal: decimal, AllowNonPositiveK: true},
			{Assume: map[string]string{"T": assume, "k": "repeats", "error": "2"}, Decimal: decimal},
			{Where: []string{"k>1"}, LeaveOut: []int{2}, TMin: 1, TMax: 1000, DatasetBy: "source"},
		} {
			sets, err := Read("-", bytes.NewReader(data), opt)
			if err != nil {
				var ps Problems
				if !errors.As(err, &ps) || len(ps) == 0 {
					t.Fatalf("%T %v", err, err)
				}
				_ = ps.Error()
				continue
			}
			for _, s := range sets {
				for _, p := range s.UsedPoints() {
					if !(p.T > 0) || math.IsInf(p.T, 0) || math.IsNaN(p.K) || math.IsInf(p.K, 0) || !(p.UK >= 0) || !(p.UT >= 0) || !opt.AllowNonPositiveK && !(p.K > 0) {
						t.Fatalf("%+v", p)
					}
				}
				var b bytes.Buffer
				if err := Tidy(&b, s); err != nil {
					t.Fatal(err)
				}
			}
		}
	})
}

func BenchmarkRead(b *testing.B) {
	var buf bytes.Buffer
	buf.WriteString("T/K,k/s^-1,u(k)/s^-1\n")
	const rows = 100000
	for i := range rows {
		fmt.Fprintf(&buf, "%.2f,%.6e,%.2e\n", 250+float64(i%2000)*0.1, float64(i+1)*1e-5, float64(i+1)*1e-7)
	}
	data := buf.Bytes()
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Read("x.csv", bytes.NewReader(data), Options{}); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds(), "rows/s")
}

// Settings read in two units are one temperature.
func TestOneTemperatureInTwoUnits(t *testing.T) {
	var b strings.Builder
	b.WriteString("T/K,k/s^-1\n")
	for i, c := range []float64{25, 35, 45, 55} {
		fmt.Fprintf(&b, "%.17g,%d\n%.17g,%d\n", c+273.15, i+1, (c+273.15)*(1+1e-13), i+1)
	}
	s := read(t, b.String(), Options{})
	found := map[string]string{}
	for _, n := range s.Notices {
		found[n.Code] = n.Message
	}
	if found[noteFew] != "4 distinct temperatures" || !strings.Contains(found[noteDuplicate], "same temperature") {
		t.Errorf("notices %v", found)
	}
}
