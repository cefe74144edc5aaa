package dataset

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/reference"
)

// sameButPlace compares points without where they stand in the file.
func sameButPlace(a, b Point) bool {
	a.Row, a.Column, b.Row, b.Column = 0, "", 0, ""
	if math.IsNaN(a.Order) && math.IsNaN(b.Order) {
		a.Order, b.Order = 0, 0
	}
	return fmt.Sprintf("%#v", a) == fmt.Sprintf("%#v", b)
}

// Triplicates side by side and the same numbers one below the other are the same
// points.
func TestRepeatsSideBySideAreRowsAtOneTemperature(t *testing.T) {
	const long = "T/K,k/s^-1,source\n280,1e-4,a\n280,1.1e-4,a\n280,1.2e-4,a\n290,2e-4,b\n290,2.1e-4,b\n290,1.9e-4,b\n"
	const rows = "280,1e-4,1.1e-4,1.2e-4,a\n290,2e-4,2.1e-4,1.9e-4,b\n"
	want := read(t, long, Options{})
	named := Options{Columns: map[string][]string{"k": {"k_1/s^-1", "k_2/s^-1", "k_3/s^-1"}}}
	assumed := Options{Assume: map[string]string{"k": "repeats"}}
	for _, c := range []struct {
		name, text string
		opt        Options
	}{
		{"marked", "T/K,k (run 1)/s^-1,k (run 2)/s^-1,k (run 3)/s^-1,source\n" + rows, Options{}},
		{"marked otherwise", "T/K,k rep A (s-1),k rep B (s-1),k rep C (s-1),lab\n" + rows, Options{}},
		{"hashes", "T/K,k/s^-1 #1,k/s^-1 #2,k/s^-1 #3,source\n" + rows, Options{}},
		{"named", "T/K,k_1/s^-1,k_2/s^-1,k_3/s^-1,source\n" + rows, named},
		{"named, other words", "T/K,k_1/s^-1,k_2/s^-1,k_3/s^-1,n,source\n280,1e-4,1.1e-4,1.2e-4,3,a\n290,2e-4,2.1e-4,1.9e-4,3,b\n", named},
		{"assumed", "T/K,k_1/s^-1,k_2/s^-1,k_3/s^-1,source\n" + rows, assumed},
		{"equal headings", "T/K,k/s^-1,k/s^-1,k/s^-1,source\n" + rows, assumed},
		{"marks in a second row", "T/K,k/s^-1,,,source\n,run 1,run 2,run 3,\n" + rows, Options{}},
		{"beside their mean", "T/K,k (run 1)/s^-1,k (run 2)/s^-1,k (run 3)/s^-1,mean k/s^-1,SD,source\n280,1e-4,1.1e-4,1.2e-4,1.1e-4,1e-5,a\n290,2e-4,2.1e-4,1.9e-4,2e-4,1e-5,b\n", Options{}},
	} {
		s := read(t, c.text, c.opt)
		for i := range s.Points {
			s.Points[i].Extra = nil // n, mean and SD are kept
		}
		if len(s.Points) != len(want.Points) || s.Quantity != want.Quantity {
			t.Errorf("%s: %d points of %+v", c.name, len(s.Points), s.Quantity)
			continue
		}
		for i := range s.Points {
			if p := s.Points[i]; !sameButPlace(p, want.Points[i]) || p.Row != s.Points[0].Row+i/3 || p.Column == "" {
				t.Errorf("%s: point %d\ngot  %+v\nwant %+v", c.name, i, p, want.Points[i])
			}
		}
		has(t, s, noteSideBySide)
		if c.opt.Assume != nil && (!slices.Equal(s.Assumed, []string{"k=repeats"}) || s.Columns[1].Confidence != "by assumption") {
			t.Errorf("%s: assumed %v, %+v", c.name, s.Assumed, s.Columns[1])
		}
		if strings.Contains(c.text, "mean") || strings.Contains(c.text, ",n,") {
			has(t, s, noteSpareMean)
		}
		if a, b := fmt.Sprint(want.Assumed), fmt.Sprint(s.Assumed); c.opt.Assume == nil && a != b {
			t.Errorf("%s: assumed %s", c.name, b)
		}
	}
	s := read(t, "T/K,k (run 1)/s^-1,k (run 2)/s^-1\n280,1,2\n290,3,4\n", Options{})
	for i, at := range []string{"2 k (run 1)/s^-1", "2 k (run 2)/s^-1", "3 k (run 1)/s^-1", "3 k (run 2)/s^-1"} {
		if p := s.Points[i]; fmt.Sprint(p.Row, " ", p.Column) != at || p.K != float64(i+1) {
			t.Errorf("point %d stands at %d %s: %v", i, p.Row, p.Column, p.K)
		}
	}
}

// Each repeat in its own form and unit, with its own uncertainty; numbers by hand.
func TestRepeatsInSeveralForms(t *testing.T) {
	s := read(t, "T/K,k (run 1)/s^-1,ln(k/s^-1) (run 2),k (run 3)/min^-1,k (run 1)/min^-1\n300,1.00,0,120,60\n310,,1.0000,60,\n", Options{})
	var got []float64
	for _, p := range s.UsedPoints() {
		got = append(got, p.T, p.K)
	}
	for i, want := range []float64{300, 1, 300, 1, 300, 2, 310, math.E, 310, 1} {
		if i >= len(got) || !reference.Agrees(got[i], want, 1e-14) {
			t.Fatalf("%v", got)
		}
	}
	// The empty cell is listed, with its row.
	if p := s.Points[3]; len(s.Points) != 6 || p.Used || p.WhyNot != noRateConstant || p.Row != 3 || p.Column != "k (run 1)/s^-1" {
		t.Errorf("%+v", s.Points)
	}
	has(t, s, noteMissing)

	s = read(t, "T/K,k (run 1)/s^-1,u(k)/s^-1 (run 1),k (run 2)/s^-1,u_r(k)/% (run 2)\n300,1,0.1,2,10\n310,2,0.2,3,10\n", Options{})
	for i, want := range []float64{0.1, 0.2, 0.2, 0.3} {
		if p := s.Points[i]; !reference.Agrees(p.UK, want, 1e-14) || p.Level != LevelStandard {
			t.Errorf("u of point %d: %v", i, p.UK)
		}
	}
	s = read(t, "T/K,k1,k2,u(k1),u(k2)\n300,1,2,0.1,0.2\n310,2,3,0.3,0.4\n", Options{Assume: map[string]string{"k": "repeats"}})
	for i, want := range []float64{0.1, 0.2, 0.3, 0.4} {
		if p := s.Points[i]; p.UK != want {
			t.Errorf("u of point %d by symbol: %v", i, p.UK)
		}
	}
	s = read(t, "T/K,a,b,da,db\n300,1,2,0.1,0.2\n310,2,3,0.3,0.4\n", Options{Columns: map[string][]string{"k": {"a", "b"}, "u(k)": {"da", "db"}}})
	for i, want := range []float64{0.1, 0.2, 0.3, 0.4} {
		if p := s.Points[i]; p.UK != want {
			t.Errorf("u of point %d by name: %v", i, p.UK)
		}
	}
	// One whose repeat is not said is not used.
	for _, heading := range []string{"u(k)/s^-1", "u_r(k)/%", "2σ", "u(k) (run 3)"} {
		s = read(t, "T/K,k (run 1)/s^-1,k (run 2)/s^-1,"+heading+"\n300,1,2,0.1\n310,2,3,0.1\n", Options{})
		has(t, s, noteWhichRepeat)
		if s.Points[0].UK != 0 || s.Columns[3].Role != "kept" {
			t.Errorf("%s: %+v", heading, s.Points[0])
		}
	}
	// k and ln k of one repeat must agree.
	_, err := Read("rates.csv", strings.NewReader("T/K,k (run 1)/s^-1,k (run 2)/s^-1,ln k (run 2)\n300,1,2.72,2.00\n310,1,2.72,1.00\n"), Options{})
	var ps Problems
	if !errors.As(err, &ps) || len(ps) != 1 || ps[0].Code != codeDisagree || ps[0].Row != 2 {
		t.Errorf("%v", err)
	}
}

// What may be repeats and may be not is asked, not guessed.
func TestRepeatsAreNotGuessed(t *testing.T) {
	repeats := Options{Assume: map[string]string{"k": "repeats"}}
	for _, c := range []struct {
		heading string
		opt     Options
		code    string // "" if it is read
	}{
		{"k1/s^-1,k2/s^-1", Options{}, codeSeveralRates},
		{"k(1)/s^-1,k(2)/s^-1", Options{}, codeSeveralRates},
		{"k/s^-1 [1],k/s^-1 [2]", Options{}, codeSeveralRates},
		{"k/s^-1,k/s^-1", Options{}, codeDuplicateHeading},
		{"k/s^-1,mean k/s^-1", Options{}, codeSeveralRates},
		{"k/s^-1,k (run 2)/s^-1", Options{}, codeSeveralRates},
		{"k_a (run 1)/s^-1,k_b (run 1)/s^-1", Options{}, codeSeveralRates},
		{"k (run 1)/s^-1,tau (run 2)/s", Options{}, codeSeveralRates},
		{"k (run 1)/s^-1,k (run 2)/(M^-1 s^-1)", Options{}, codeUnitConflict},
		{"k1/s^-1,k2/(M^-1 s^-1)", repeats, codeUnitConflict},
		{"k1/s^-1,k2/widgets", repeats, codeUnitConflict},
		{"SE,SE", repeats, codeDuplicateHeading},
		{"k1/s^-1,k2/min^-1", repeats, ""},
		{"k1/s^-1,ln k2", repeats, ""},
		{"k (run 1)/s^-1,tau (run 2)/s", Options{Columns: map[string][]string{"k": {"k (run 1)/s^-1", "tau (run 2)/s"}}}, ""},
	} {
		_, err := Read("rates.csv", strings.NewReader("T/K,"+c.heading+"\n300,1,2\n310,2,3\n"), c.opt)
		var ps Problems
		switch errors.As(err, &ps); {
		case c.code == "" && err != nil, c.code != "" && (len(ps) == 0 || ps[0].Code != c.code):
			t.Errorf("%s: %v, want %q", c.heading, err, c.code)
		}
	}
	// --assume k=repeats is not needed where nothing is repeated; k beside ln k is one
	// measurement still.
	s := read(t, "T/K,k/s^-1,ln k\n300,1.00,0.00\n310,2.72,1.00\n", repeats)
	if len(s.Points) != 2 {
		t.Errorf("%+v", s.Points)
	}
	has(t, s, noteUnneeded)
	if s := read(t, "T/K,mean k/s^-1,SD,n\n300,1,0.1,4\n310,2,0.2,4\n", Options{}); s.Points[0].K != 1 || s.Points[0].UK != 0.05 {
		t.Errorf("a mean with its s.d.: %+v", s.Points[0])
	}
	// A bracket in a cell of a repeat belongs to it; a limit does, too.
	s = read(t, "T/K,k #1/s^-1,k #2/s^-1\n300,1.0(1),<2\n310,2,3\n", Options{})
	if s.Points[0].UK != 0.1 || s.Points[1].Limit != "<" || s.Points[1].Used || len(s.UsedPoints()) != 3 {
		t.Errorf("%+v", s.Points)
	}
}

// What each column's numbers were turned into is said with the divisor.
func TestConversionsAreSaid(t *testing.T) {
	n3, sd3 := map[string]string{"n": "3"}, map[string]string{"error": "sd", "n": "3"}
	for _, c := range []struct {
		table             string
		assume            map[string]string
		column            int
		level, conversion string
	}{
		{"T/K,k/s^-1\n300,1\n", nil, 0, "", ""},
		{"t/°C,k/s^-1\n30,1\n", nil, 0, "", ""},
		{"t/degF,k/s^-1\n30,1\n", nil, 0, "", ""},
		{"1000/T,k/s^-1\n3,1\n", nil, 0, "reciprocal", "T = 1/x"},
		{"1/RT (mol/kJ),k/s^-1\n0.4,1\n", nil, 0, "1/(k_B T)", "T = 1/(R x)"},
		{"T/K,lg k\n300,1\n", nil, 1, "lg", "k = 10^x"},
		{"T/K,ln k\n300,1\n", nil, 1, "ln", "k = e^x"},
		{"T/K,tau/s\n300,1\n", nil, 1, "reciprocal", "k = 1/tau"},
		{"T/K,t_1/2/s\n300,1\n", nil, 1, "half-life", "k = ln 2/t_1/2"},
		{"T/K,k/s^-1,u(k)/s^-1\n300,1,1\n", nil, 2, "standard", ""},
		{"T/K,k/s^-1,U(k)/s^-1 (k=2)\n300,1,1\n", nil, 2, "expanded, k = 2", "divided by 2"},
		{"T/K,k/s^-1,95 % CI\n300,1,1\n", nil, 2, "expanded, 95 %", "divided by 1.96 (normal quantile at 0.975)"},
		{"T/K,k/s^-1,99 % CI\n300,1,1\n", nil, 2, "expanded, 99 %", "divided by 2.576 (normal quantile at 0.995)"},
		{"T/K,k/s^-1,95 % CI,n\n300,1,1,3\n", nil, 2, "expanded, 95 %", "divided by t(n - 1; 0.975), or 1.96 where n is not given"},
		{"T/K,k/s^-1,95 % CI\n300,1,1\n", n3, 2, "expanded, 95 %", "divided by t(2; 0.975) = 4.303"},
		{"T/K,k/s^-1,U(k),coverage_factor\n300,1,1,2\n", nil, 2, `expanded, k from column "coverage_factor"`, `divided by column "coverage_factor"`},
		{"T/K,k/s^-1,f(k)\n300,1,1.1\n", nil, 2, "uncertainty factor", "u(ln k) = ln f"},
		{"T/K,k/s^-1,f(k) (k=2)\n300,1,1.1\n", nil, 2, "uncertainty factor, k = 2", "u(ln k) = ln f / 2"},
		{"T/K,k/s^-1,SD,n\n300,1,0.1,3\n", nil, 2, "s.d. of repeats", "divided by sqrt(n)"},
		{"T/K,k/s^-1,RSD/%\n300,1,5\n", n3, 2, "s.d. of repeats, relative", "divided by sqrt(n), n = 3; percent of k"},
		{"T/K,k/s^-1,u_r(k)\n300,1,0.1\n", nil, 2, "standard, relative", "times k"},
		{"T/K,k/s^-1,u(ln k)\n300,1,0.1\n", nil, 2, "standard", "u(k) = k u(ln k)"},
		{"T/K,k/s^-1,u(lg k)\n300,1,0.1\n", nil, 2, "standard", "u(k) = k ln 10 u(lg k)"},
		{"T/K,tau/s,u(tau)/s\n300,1,0.1\n", nil, 2, "standard", "u(k)/k = u(t)/t"},
		{"T/K,k/s^-1\n300,1.0(1)\n", nil, 1, "brackets in cells: standard", ""},
		{"T/K,k/s^-1\n300,1.0 (1)\n", nil, 1, "brackets after a space: not used", ""},
		{"T/K,k/s^-1\n300,1.0 ± 0.1\n", nil, 1, "± in cells: not used", ""},
		{"T/K,k/s^-1\n300,1.0 ± 0.1\n", map[string]string{"error": "2"}, 1, "± in cells: expanded, k = 2", "± in cells divided by 2"},
		{"T/K,ln k\n300,1.0 ± 0.1\n", sd3, 1, "ln; ± in cells: s.d. of repeats", "k = e^x; ± in cells divided by sqrt(n), n = 3"},
		{"t/°C,k/s^-1\n30.0(1),1.0\n", nil, 0, "brackets in cells: standard", ""},
	} {
		s := read(t, c.table, Options{Assume: c.assume})
		if got := s.Columns[c.column]; got.Level != c.level || got.Conversion != c.conversion {
			t.Errorf("%q: level %q, conversion %q; want %q, %q", c.table, got.Level, got.Conversion, c.level, c.conversion)
		}
	}
}

// Rows below a table that hold no measurement are known by their labels.
func TestLabelsBelowTheTable(t *testing.T) {
	for _, label := range []string{"mean", "Mean:", "Average", "Std. dev.", "St. Dev.", "s.d.", "Std. deviation:", "R²", "R2 =", "Slope (K)", "RSD (%)", "Std. error"} {
		s := read(t, "T/K,k/s^-1\n300,1\n310,2\n"+label+",1.5\n", Options{})
		has(t, s, noteAfter)
		if len(s.Points) != 2 {
			t.Errorf("%s: %+v", label, s.Points)
		}
	}
	for _, cell := range []string{"meaning", "dev.", "hot"} {
		if _, err := Read("rates.csv", strings.NewReader("T/K,k/s^-1\n300,1\n310,2\n"+cell+",1.5\n"), Options{}); err == nil {
			t.Errorf("%s below the table is no label", cell)
		}
	}
	// Of several columns for the source one is used, and the others are said.
	s := read(t, "T/K,k/s^-1,lab,method\n300,1,a,x\n310,2,b,y\n", Options{})
	if s.Points[1].Source != "b" || s.Points[1].Extra["method"] != "y" || s.Columns[3].Level != `not used: "lab" is the source` {
		t.Errorf("%+v", s)
	}
	has(t, s, noteKept)
	if s := read(t, "T/K,k/s^-1,lab,method\n300,1,a,x\n310,2,b,y\n", Options{Columns: map[string][]string{"source": {"method"}}}); s.Points[1].Source != "y" {
		t.Errorf("--column source=method: %+v", s.Points[1])
	}
}
