package dataset

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

// named reads one data set of a file with a name.
func named(t *testing.T, name, text string, opt Options) *Set {
	t.Helper()
	sets, err := Read(name, strings.NewReader(text), opt)
	if err != nil {
		t.Fatal(err)
	}
	if len(sets) != 1 {
		t.Fatalf("%s: %d sets", name, len(sets))
	}
	return sets[0]
}

// messages are the notices of a set as code: message.
func messages(s *Set) string {
	var b strings.Builder
	for _, n := range s.Notices {
		fmt.Fprintf(&b, "%s: %s %v\n", n.Code, n.Message, n.Rows)
	}
	return b.String()
}

func TestPool(t *testing.T) {
	// 25 °C is 298.15 K and 77 °F (definitions of the scales); 60 min^-1 is 1 s^-1.
	a := named(t, "one/a.csv", "t/°C,k/s^-1,u(k)/s^-1,source\n25,1,0.1,Lab1\n35,2,0.2,\n", Options{})
	b := named(t, "one/b.csv", "T/K,k/min^-1,s(k)/min^-1,n,pH\n298.15,60,6,4,7\n308.15,n.d.,,,7\n318.15,<240,,,7\n", Options{})
	c := named(t, "two/c.csv", "t/degF,k/h^-1,u(k)/h^-1,pH\n77,3600,36,7\n77,3601,,8\n", Options{})
	before := fmt.Sprintf("%+v %+v %+v", a, b, c)
	p, err := Pool([]*Set{a, b, c})
	if err != nil {
		t.Fatal(err)
	}
	if now := fmt.Sprintf("%+v %+v %+v", a, b, c); now != before {
		t.Error("Pool changes what it joins")
	}
	type row struct {
		file   string
		row    int
		k, u   float64
		level  Level
		source string
		used   bool
	}
	want := []row{
		{"one/a.csv", 2, 1, 0.1, LevelStandard, "Lab1", true},
		{"one/a.csv", 3, 2, 0.2, LevelStandard, "a.csv", true},
		{"one/b.csv", 2, 1, 0.05, LevelRepeats, "b.csv", true}, // s/sqrt(4)
		{"one/b.csv", 3, math.NaN(), 0, LevelNone, "b.csv", false},
		{"one/b.csv", 4, 4, 0, LevelNone, "b.csv", false},
		{"two/c.csv", 2, 1, 0.01, LevelStandard, "c.csv", true},
		{"two/c.csv", 3, 3601.0 / 3600, 0, LevelNone, "c.csv", true},
	}
	if len(p.Points) != len(want) {
		t.Fatalf("%d points", len(p.Points))
	}
	for i, w := range want {
		q := p.Points[i]
		if got := (row{q.File, q.Row, q.K, q.UK, q.Level, q.Source, q.Used}); fmt.Sprint(got) != fmt.Sprint(w) {
			t.Errorf("point %d: %v, want %v", i, got, w)
		}
	}
	if why := p.Points[4].WhyNot; why != "only a limit is known: k < 4" {
		t.Errorf("a limit in the other unit: %q", why)
	}
	if p.Name != "a + b + c" || fmt.Sprint(p.Files) != "[one/a.csv one/b.csv two/c.csv]" || p.Quantity.Unit != "s^-1" || len(p.Columns) != 4+5+4 {
		t.Errorf("%s %v %s, %d columns", p.Name, p.Files, p.Quantity.Unit, len(p.Columns))
	}
	// sha256sum a b c | cut -c1-64 | sha256sum, with the three texts in files.
	if want := "091029299007863b3d02c2126e8deca5069e127e612ef376430c5499d398b59d"; p.SHA256 != want {
		t.Errorf("sum %s, want %s", p.SHA256, want)
	}
	got := messages(p)
	for _, m := range []string{
		`unit-converted: one/b.csv: k in min^-1 was converted to s^-1, the unit of one/a.csv: divided by 60`,
		`unit-converted: two/c.csv: k in h^-1 was converted to s^-1, the unit of one/a.csv: divided by 3600`,
		`column-not-used: one/b.csv: kept, not used: "pH"`,
		"rows-without-value: one/b.csv:3: no rate constant, left out [3]",
		"limits-read: one/b.csv:4: only a limit is known, and enters as a limit [4]",
		"mean-of-few-repeats: one/b.csv:2: the uncertainty comes from 30 repeats or fewer [2]",
		// 25 °C, 298.15 K and 77 °F are one temperature.
		"few-temperatures: 2 distinct temperatures",
		"duplicate-rows: one/b.csv:2, two/c.csv:2: same temperature",
		`column-varies: column "pH" takes 7 and 8 at 298.15 K, the latter in two/c.csv:3 [3]`,
	} {
		if strings.Count(got, m) != 1 {
			t.Errorf("%q is said %d times in\n%s", m, strings.Count(got, m), got)
		}
	}
	if strings.Count(got, "few-temperatures") != 1 {
		t.Errorf("the files are judged one by one:\n%s", got)
	}
}

func TestPoolUnits(t *testing.T) {
	// 1 L = 1 dm³ = 1000 cm³; 1 M = 1 mol/L; molecules count as 1 (SI Brochure 2019).
	for _, c := range []struct {
		first, second string
		k             float64 // of 1 in the second
	}{
		{"L mol^-1 s^-1", "dm^3 mol^-1 s^-1", 1},
		{"M^-1 s^-1", "L mol^-1 s^-1", 1},
		{"L mol^-1 s^-1", "cm^3 mol^-1 s^-1", 1e-3},
		{"cm^3 mol^-1 s^-1", "m^3 mol^-1 s^-1", 1e6},
		{"cm^3 molecule^-1 s^-1", "cm^3 s^-1", 1},
		{"s^-1", "ms^-1", 1000},
		{"min^-1", "h^-1", 1. / 60},
		{"µM^-1 min^-1", "M^-1 s^-1", 60e-6},
	} {
		table := func(name, unit string) *Set {
			return named(t, name, "T/K,k/("+unit+")\n300,1\n", Options{})
		}
		p, err := Pool([]*Set{table("a", c.first), table("b", c.second)})
		if err != nil {
			t.Errorf("%s and %s: %v", c.first, c.second, err)
			continue
		}
		if got := p.Points[1].K; math.Abs(got-c.k) > 2e-16*c.k {
			t.Errorf("1 %s is %.17g %s, want %.17g", c.second, got, c.first, c.k)
		}
	}
}

func TestPoolRefuses(t *testing.T) {
	a := named(t, "a.csv", "T/K,k/s^-1\n300,1\n", Options{})
	for name, text := range map[string]string{
		"pooled-quantities: b.csv: it holds D, and a.csv holds k":                                                             "T/K,D/(cm^2 s^-1)\n300,1\n",
		"pooled-units: b.csv: k has the unit L mol^-1 s^-1, and in a.csv the unit s^-1: one cannot be converted to the other": "T/K,k/(L mol^-1 s^-1)\n300,1\n",
		"pooled-units: b.csv: k has no unit, and in a.csv the unit s^-1: one cannot be converted to the other":                "T/K,k\n300,1\n",
		"pooled-units: b.csv: k has the unit furlong^-1, and in a.csv the unit s^-1: one cannot be converted to the other":    "T/K,k/furlong^-1\n300,1\n",
		"pooled-twice: b.csv: it holds the same bytes as a.csv":                                                               "T/K,k/s^-1\n300,1\n",
	} {
		b := named(t, "b.csv", text, Options{})
		_, err := Pool([]*Set{a, b})
		var ps Problems
		if !errors.As(err, &ps) || len(ps) != 1 || ps[0].Code+": "+ps[0].File+": "+ps[0].Message != name || ps[0].Cure == "" {
			t.Errorf("%v, want %s", err, name)
		}
	}
	if _, err := Pool(nil); err == nil {
		t.Error("nothing can be pooled")
	}
	if p, err := Pool([]*Set{a}); err != nil || p != a {
		t.Errorf("one set pooled is another: %v", err)
	}
}

// s(k) and n give u(k) back to the last bit in the other unit too: a tidy table
// writes them.
func TestPoolRepeats(t *testing.T) {
	a := named(t, "a", "T/K,k/s^-1\n300,1\n", Options{})
	b := named(t, "b", "T/K,k/min^-1,s(k)/min^-1,n\n300,1,0.1,3\n310,2,0.13,5\n320,3,0.17,7\n330,4,0.19,3\n340,5,0.23,6\n", Options{})
	p, err := Pool([]*Set{a, b})
	if err != nil {
		t.Fatal(err)
	}
	for _, q := range p.Points[1:] {
		if want := q.SD / math.Sqrt(float64(q.Repeats)); q.UK != want || q.UK == 0 {
			t.Errorf("u = %.17g, s/sqrt(n) = %.17g", q.UK, want)
		}
	}
}

// What is assumed of two files is said once.
func TestPoolAssumptions(t *testing.T) {
	opt := Options{Assume: map[string]string{"T": "degC", "log": "lg"}}
	a := named(t, "a.csv", "T,k/s^-1\n20,1\n", opt)
	b := named(t, "b.csv", "T,log k\n30,1\n", opt)
	c := named(t, "c.csv", "T,k/s^-1\n40,3\n", opt)
	p, err := Pool([]*Set{a, c})
	if err != nil || fmt.Sprint(p.Assumed) != "[T=degC]" || strings.Count(messages(p), "--assume log=lg was not needed") != 1 || strings.Count(messages(p), noteAssumption) != 1 {
		t.Errorf("%v %v\n%s", err, p.Assumed, messages(p))
	}
	b.Quantity = a.Quantity // log k has no unit of its own
	if p, err = Pool([]*Set{a, b, c}); err != nil || fmt.Sprint(p.Assumed) != "[T=degC log=lg]" || strings.Contains(messages(p), "was not needed") {
		t.Errorf("%v %v\n%s", err, p.Assumed, messages(p))
	}
}

// Uncertainties that s(k) and n do not give back are written as they are.
func TestTidyOfOtherUncertainties(t *testing.T) {
	s := named(t, "a.csv", "T/K,k/s^-1,s(k)/s^-1,n\n300,1,0.1,3\n310,2,0.2,3\n", Options{})
	s.Points[1].UK = 0.123
	checkTidy(t, s, false)
}

// asText is what a tidy table must give back: points, quantity, assumptions and
// what is said of the points.
func asText(s *Set) string {
	var b strings.Builder
	q := s.Quantity
	q.TimeLike = false // k itself is written
	fmt.Fprintf(&b, "%+v %v\n", q, s.Assumed)
	for _, p := range s.Points {
		p.SD = 0 // that of u(k) and n
		fmt.Fprintf(&b, "%+v\n", p)
	}
	for _, n := range s.Notices {
		if reviewCodes[n.Code] || n.Code == noteAssumption {
			fmt.Fprintf(&b, "%+v\n", n)
		}
	}
	return b.String()
}

func checkTidy(t *testing.T, s *Set, inK bool) {
	t.Helper()
	var b bytes.Buffer
	if err := Tidy(&b, s); err != nil {
		t.Fatal(err)
	}
	sets, err := Read("tidy.csv", bytes.NewReader(b.Bytes()), Options{AllowNonPositiveK: inK})
	if err != nil || len(sets) != 1 {
		t.Fatalf("%d sets, %v, from\n%s", len(sets), err, b.String())
	}
	if got, want := asText(sets[0]), asText(s); got != want {
		t.Errorf("%s\ngives\n%s\nwant\n%s", b.String(), got, want)
	}
}

func TestTidyKeepsEverything(t *testing.T) {
	for _, c := range []struct {
		text string
		opt  Options
	}{
		{"a title\n\nt/°C;k_obs/s^-1;u(k_obs)/s^-1;pH;note\n10;1,5e-4;0,1e-4;7,0;x\n20;3,1e-4;0,2e-4;7,5;\n30;n.d.;;7,0;\"flask; broke\"\n10;1,2e-3;0,9e-3;8,5;\n;2;;7;\n", Options{TMax: 350, Where: []string{"pH!=7,5"}}},
		{"T,k/s^-1,error\n25,1,0.1\n35,2,0.2\n45,<3,\n", Options{Assume: map[string]string{"T": "degC", "error": "2"}}},
		{"T/K,k/s^-1\n300,1.0(1)\n310,2.0 ± 0.1\n320,3\n", Options{Assume: map[string]string{"error": "sd", "n": "3"}}},
		{"T/K,k/s^-1,u(k)/s^-1,n\n300,1,0.1,3\n310,2,0.2,3\n", Options{}},
		{"T/K,k/s^-1,95 % CI,n\n300,1,0.1,3\n310,2,0.2,40\n320,3,0.1,\n", Options{}},
		{"T/K,k/s^-1,s(k)/s^-1,n\n300,1,0.1,3\n310,2,0.2,40\n320,3,,\n", Options{}},
		{"T/K,k/s^-1,RSD/%\n300,1.1,3\n310,2,7\n", Options{Assume: map[string]string{"n": "3"}}},
		{"T/K,k/s^-1,method,lab,T (K),row,left_over\n300,1,a,b,1,2,x\n310,2,c,d,,,\n", Options{Columns: map[string][]string{"T": {"T/K"}}}},
		{"T/K,k_a/s^-1,k_c/s^-1,dataset\n300,1,9,a\n310,2,8,a\n", Options{Columns: map[string][]string{"k": {"k_c/s^-1"}}, LeaveOut: []int{3}}},
		{"T/K,slope 1,k/s^-1\n300,1,\n310,2,\n", Options{Columns: map[string][]string{"k": {"slope 1"}}}},
		{"T/K,rate/s^-1\n300,1\n310,2\n", Options{Assume: map[string]string{"k": "rate"}}},
		{"T/K,p/Pa,u(p)/Pa\n300,1,0.1\n310,2,0.1\n", Options{Columns: map[string][]string{"k": {"p/Pa"}}}},
		{"T/K,half-life (d),u(T)/K\n300,3.1,0.1\n310,>1.7,0.1\n", Options{Where: []string{"T/K<305"}}},
		{"T/K,kcat/Km (M^-1 s^-1),source,limit\n300,1.1e5,\"a, \"\"b\"\"\",\n310,2.7e5,b,<\n", Options{Where: []string{"source!=b"}}},
		{"T/K,k/s^-1,source,order\n300,1,a,1\n310,2,b,2\n", Options{DatasetBy: "", LeaveOut: []int{2}}},
	} {
		s := read(t, c.text, c.opt)
		checkTidy(t, s, false)
		other := named(t, "other.csv", "T/K,"+s.Quantity.Symbol+tidyUnit(s.Quantity.Unit)+"\n350,1\n350,1\n351,nd\n", Options{Columns: map[string][]string{"k": {s.Quantity.Symbol + tidyUnit(s.Quantity.Unit)}}})
		if p, err := Pool([]*Set{s, other}); err != nil {
			t.Error(err)
		} else {
			checkTidy(t, p, false)
		}
	}
}

func TestTidyCells(t *testing.T) {
	const head = "T/K,k/s^-1,u(k)/s^-1,level,file,row,left_out\n"
	for text, want := range map[string]string{
		head + "300,1,0.1,standard,a.csv,x,\n":                                                `x:2: column "row": "x" is not the number of a line`,
		head + "300,1,0.1,often,a.csv,8,\n300,1,0.1,,a.csv,7,\n":                              `x:2: column "level": "often" is not a level`,
		head + "300,1,0.1,,a.csv,7,\n310,2,0.1,,a.csv,8,\n":                                   "",
		head + "300,1,0.1,,a.csv,7,\n310,2,0.1,,b.csv,9,\n":                                   "",
		head + "300,1,0.1,,a.csv,7,\n310,2,0.1,,b.csv,7,\n":                                   "x: --leave-out 7: several files have such a line",
		head + "300,1,0.1,,a.csv,8,\n310,2,0.1,,b.csv,9,\n":                                   "x:7: --leave-out names a line that holds no row of data",
		"T/K,k/s^-1,row,left_over\n300,1,a,\n310,2,b,\n310,2,b,\n310,2,b,\n,,,\nend,of,it,\n": "x:7: --leave-out names a line",
	} {
		_, err := Read("x", strings.NewReader(text), Options{LeaveOut: []int{7}})
		if (err == nil) != (want == "") || err != nil && !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%s\ngot  %v\nwant %s", text, err, want)
		}
	}
}

func FuzzTidy(f *testing.F) {
	for _, s := range []string{
		"T/K,k/s^-1\n300,1\n310,2\n", "t/\xb0C;k/s^-1;x\n25,0;1,5;7,5\n", "T/K,k,u(k),n,limit,source,dataset,order,note\n300,1,0.1,3,<,a,b,1,c\n",
		"t/degF,t_1/2/min,f(k)\n77,5,1.2\n", "10^3 K/T,u(T)/K,1/\u03c4\n3.3,0.1,2\n", "T/K,k/s^-1,row,left_out,T/K\n300,1.0(1),7,,x\n310,2 \u00b1 1,8,no,\n",
	} {
		f.Add([]byte(s), "degC", "k/s^-1")
	}
	f.Fuzz(func(t *testing.T, data []byte, assume, rate string) {
		for _, opt := range []Options{
			{AllowNonPositiveK: true},
			{Assume: map[string]string{"T": assume, "log": "lg", "k": "rate", "error": "sd,n=3"}, AllowNonPositiveK: true, TMin: 290},
			{Columns: map[string][]string{"k": {rate}}, LeaveOut: []int{2}, AllowNonPositiveK: true},
		} {
			sets, err := Read("-", bytes.NewReader(data), opt)
			if err != nil {
				continue
			}
			for _, s := range sets {
				checkTidy(t, s, true)
			}
		}
	})
}
