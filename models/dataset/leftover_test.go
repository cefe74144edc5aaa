package dataset

import (
	"slices"
	"strings"
	"testing"

	"onebarrier/models/reference"
)

// columnOf finds the column with a heading.
func columnOf(t *testing.T, s *Set, heading string) Column {
	t.Helper()
	for _, c := range s.Columns {
		if c.Heading == heading {
			return c
		}
	}
	t.Fatalf("no column %q", heading)
	return Column{}
}

// Each data set of a file shows its own first cells, and the column that splits the
// file takes part.
func TestFirstCellsOfEachSet(t *testing.T) {
	const rows = "280,1,5.0,a\n280,4,7.0,b\n290,2,5.0,c\n290,5,7.0,d\n300,3,5.0,e\n300,6,7.0,f\n310,9,5.0,g\n"
	for _, c := range []struct {
		by  string
		opt Options
	}{{"pH", Options{DatasetBy: "pH"}}, {"dataset", Options{}}} {
		sets, err := Read("rates.csv", strings.NewReader("T/K,k/s^-1,"+c.by+",vessel\n"+rows), c.opt)
		if err != nil || len(sets) != 2 {
			t.Fatalf("%s: %d sets, %v", c.by, len(sets), err)
		}
		for i, want := range []map[string][]string{
			{"T/K": {"280", "290", "300"}, "k/s^-1": {"1", "2", "3"}, c.by: {"5.0", "5.0", "5.0"}, "vessel": {"a", "c", "e"}},
			{"T/K": {"280", "290", "300"}, "k/s^-1": {"4", "5", "6"}, c.by: {"7.0", "7.0", "7.0"}, "vessel": {"b", "d", "f"}},
		} {
			for heading, cells := range want {
				if got := columnOf(t, sets[i], heading); !slices.Equal(got.Examples, cells) {
					t.Errorf("%s, set %s, %s: cells %q, want %q", c.by, sets[i].Name, heading, got.Examples, cells)
				}
			}
			if got := columnOf(t, sets[i], c.by); got.Role != string(RoleDataset) {
				t.Errorf("%s is taken for %s", c.by, got.Role)
			}
		}
	}
}

// The unit of an uncertainty in per cent says all: 6 under CV% is 6 %.
func TestUnitOfPercent(t *testing.T) {
	for _, heading := range []string{"CV%", "RSD (%)", "u(k)/%"} {
		s := read(t, "T/K,k/s^-1,"+heading+",n\n280,2,6,4\n290,3,6,4\n", Options{})
		if c := columnOf(t, s, heading); c.Unit != "%" || c.Factor != 1 {
			t.Errorf("%s: unit %q, factor %v", heading, c.Unit, c.Factor)
		}
		u := 0.12 // 6 % of 2, of the mean of 4 for a standard deviation
		if heading != "u(k)/%" {
			u /= 2
		}
		if p := s.Points[0]; !reference.Agrees(p.UK, u, 1e-14) {
			t.Errorf("%s: u(k) %v, want %v", heading, p.UK, u)
		}
	}
}

// A labelled row right below the data is no matter of blank rows.
func TestLabelledRowBelow(t *testing.T) {
	const table = "T/K,k/s^-1\n280,1\n290,2\n"
	n := noticed(t, read(t, table+"mean,1.5\n", Options{}), noteAfter)
	if strings.Contains(n.Cure, "blank") || !strings.Contains(n.Cure, "in place of the label") || !slices.Equal(n.Rows, []int{4}) {
		t.Errorf("%+v", n)
	}
	if n := noticed(t, read(t, table+"\nmean,1.5\n", Options{}), noteAfter); !strings.Contains(n.Cure, "blank row") {
		t.Errorf("%+v", n)
	}
}

// A cell that is no number is told beside the heading that is ambiguous, where it is
// sure to be read.
func TestCellBesideAmbiguousHeading(t *testing.T) {
	const open = "T/K,k (s^-1 × 10^5)\n"
	for _, c := range []struct {
		text string
		opt  Options
		rows []int // of cells
	}{
		{open + "280,1\n290,~810\n", Options{}, []int{3}},
		{open + "280,1\n~290,x\n", Options{}, []int{3, 3}},
		{"T,k/s^-1\n280,1\n290,~810\n", Options{}, []int{3}},
		{open + "280,1\n,~810\n", Options{}, nil},                                            // no temperature: not read
		{open + "280,1\nmean,~810\n", Options{}, nil},                                        // labelled
		{open + "280,1\n290,n.d.\n", Options{}, nil},                                         // missing
		{open + "280,1\n290,\"8,10\"\n", Options{}, nil},                                     // the decimal mark is not known yet
		{open + "280,1\n290,~810\n", Options{LeaveOut: []int{3}}, nil},                       // left out
		{open + "280,1\n290,~810\n", Options{TMax: 285}, nil},                                // may be
		{"T/K,rate (1/s),v (1/s)\n280,1,2\n290,~810,3\n", Options{}, nil},                    // which is meant is open
		{"T/K,k (s^-1 × 10^5)\n280,1\n290,~810\n", Options{Where: []string{"k!=~810"}}, nil}, // may be
	} {
		var rows []int
		ps := problemsOf(t, c.text, c.opt)
		for _, p := range ps {
			if p.Code == codeNotNumber {
				rows = append(rows, p.Row)
			}
		}
		if !slices.Equal(rows, c.rows) || len(ps) == len(rows) {
			t.Errorf("%q: cells of rows %v, want %v: %v", c.text, rows, c.rows, ps)
		}
	}
}

// A table on its side is told once, as such, and no table that can be read is.
func TestTableOnItsSide(t *testing.T) {
	for _, text := range []string{
		"T/K,280,290,300\nk/s^-1,1,2,4\n",
		"T,280,290\nk (s^-1),1,2\nu(k),0.1,0.2\n",
		"k/s^-1;1,5;2,5\nt/°C;10;10\nnote;a;b\n",
		"a title\nT/K,280,280,300\nrate (1/s),1,n.d.,4\n",
	} {
		ps := problemsOf(t, text, Options{})
		if len(ps) != 1 || ps[0].Code != codeOnItsSide || !strings.Contains(ps.Error(), "lies on its side") || !strings.Contains(ps[0].Cure, "transpose") {
			t.Errorf("%q: %v", text, ps)
		}
	}
	for _, text := range []string{"T/K,280\n290,1\n", "bath,280,290\nk/s^-1,1,2\n", "T/K,280,290\n300,1,2\n"} {
		if ps := problemsOf(t, text, Options{}); ps[0].Code == codeOnItsSide {
			t.Errorf("%q: %v", text, ps)
		}
	}
}

// A letter or a sign behind a number is asked about, unless it is a unit; what to write
// is said.
func TestFootnoteMarks(t *testing.T) {
	for cell, write := range map[string]string{
		"3e-4 a": "3e-4", "3e-4b": "3e-4", "0.0003ᵃ": "0.0003", "3e-4*": "3e-4", "3e-4 †": "3e-4", "3e-4 (c)": "3e-4", "1.2(3) b": "1.2(3)", "3·10^-4 [a]": "3·10^-4",
		"3e-4 h": "", "3e-4 ab": "", "a 3e-4": "", "~810 a": "", "3e": "3",
	} {
		ps := problemsOf(t, "T/K,k/s^-1\n280,1e-4\n290,"+cell+"\n300,4e-4\n", Options{})
		got := strings.Contains(ps.Error(), "; a footnote mark? write "+write+" alone, ")
		if len(ps) != 1 || ps[0].Row != 3 || ps[0].Column != "k/s^-1" || got != (write != "") {
			t.Errorf("%q: %v", cell, ps)
		}
	}
}

// A message cuts a long heading; the problem, and a flag to be typed, keep it whole.
func TestLongHeadingInMessages(t *testing.T) {
	long := "k/s^-1 (" + strings.Repeat("as measured on a Monday ", 4) + ")"
	ps := problemsOf(t, "T/K,k/s^-1,"+long+"\n280,1,x\n290,2,y\n", Options{Columns: map[string][]string{"k": {long}}})
	if ps[0].Column != long || strings.Contains(ps[0].String(), long) || !strings.Contains(ps[0].String(), `…"`) {
		t.Error(ps)
	}
	n := noticed(t, read(t, "T/K,k/s^-1,"+long+"\n280,1,x\n290,2,y\n", Options{}), noteKept)
	if strings.Contains(n.Message, long) || !strings.Contains(n.Cure, "'source="+long+"'") {
		t.Errorf("%+v", n)
	}
}

// One possible meaning is asked for as such.
func TestOnePossibleMeaning(t *testing.T) {
	for _, heading := range []string{"rate (1/s)", "v", "k/s"} {
		ps := problemsOf(t, "T/K,"+heading+"\n280,1\n290,2\n", Options{})
		if len(ps) != 1 || ps[0].Cure != "is it a rate constant? say so: --assume k=rate" || strings.Contains(ps[0].Message, "several") {
			t.Errorf("%s: %v", heading, ps)
		}
	}
}

// No sentence ends before its cure.
func TestNoStopBeforeTheCure(t *testing.T) {
	p := Problem{File: "a.csv", Message: "it failed.", Cure: "try again"}
	if got := p.String(); got != "a.csv: it failed; try again" {
		t.Error(got)
	}
}

// Flags that are printed stand as a shell takes them: 'k=k'\”/s^-1' is k=k'/s^-1.
func TestApostrophesInFlags(t *testing.T) {
	ps := problemsOf(t, "T/K,k'/s^-1,k''/s^-1\n280,1,2\n290,2,3\n", Options{})
	if !strings.Contains(ps[0].Cure, `choose one: --column 'k=k'\''/s^-1' or --column 'k=k'\'''\''/s^-1'`) {
		t.Error(ps)
	}
	s := read(t, "T/K,k/s^-1,Bob's pH\n280,1,5\n280,2,7\n", Options{})
	if n := noticed(t, s, noteVaries); !strings.Contains(n.Cure, `--where 'Bob'\''s pH=7', or split with --dataset-by 'Bob'\''s pH'`) {
		t.Errorf("%+v", n)
	}
}

// Per mol/L and per molecule in cm³ are N_A = 6.02214076e23 mol⁻¹ (exact, SI Brochure
// 2019) and 1000 cm³/L apart, and N_A² for third order.
func TestPoolPerMoleculeAndPerMole(t *testing.T) {
	for _, c := range []struct {
		to, from string
		factor   float64 // from the unit pooled to that of the first file
		divide   bool
	}{
		{"L mol^-1 s^-1", "cm^3 molecule^-1 s^-1", 6.02214076e20, false},
		{"cm^3 mol^-1 s^-1", "cm^3 s^-1", 6.02214076e23, false},
		{"M^-1 s^-1", "cm^3 s^-1", 6.02214076e20, false},
		{"cm^3 molecule^-1 s^-1", "L mol^-1 s^-1", 6.02214076e20, true},
		{"L mol^-1 min^-1", "cm^3 molecule^-1 s^-1", 3.613284456e22, false}, // times 60
	} {
		k := 7e-12
		if c.divide {
			k = 7e9
		}
		a := read(t, "T/K,k/("+c.to+"),u(k)/("+c.to+")\n280,5,1\n290,6,1\n", Options{})
		text := "T/K,k/(" + c.from + "),u(k)/(" + c.from + ")\n280,KK,KK\n290,KK,KK\n"
		sets, err := Read("b.csv", strings.NewReader(strings.ReplaceAll(text, "KK", map[bool]string{false: "7e-12", true: "7e9"}[c.divide])), Options{})
		if err != nil {
			t.Fatal(err)
		}
		pooled, err := Pool([]*Set{a, sets[0]})
		if err != nil {
			t.Errorf("%s to %s: %v", c.from, c.to, err)
			continue
		}
		want := k * c.factor
		if c.divide {
			want = k / c.factor
		}
		p := pooled.Points[2]
		if p.K != want || p.UK != want || pooled.Quantity.Unit != a.Quantity.Unit {
			t.Errorf("%s to %s: k %v, u(k) %v, want %v", c.from, c.to, p.K, p.UK, want)
		}
		noticed(t, pooled, noteConverted)
	}
	// Third order, to the digits of double precision: N_A²/1e6.
	u, _ := ParseUnit("cm^6 molecule^-2 s^-1")
	v, _ := ParseUnit("L^2 mol^-2 s^-1")
	if f, err := u.convertTo(v); err != nil || !reference.Agrees(f, 6.02214076e23*6.02214076e23/1e6, 1e-14) {
		t.Error(f, err)
	}
	// Other dimensions stay apart.
	for _, pair := range [][2]string{{"L mol^-1 s^-1", "s^-1"}, {"L mol^-1 s^-1", "m^2 s^-1"}, {"L mol^-1 s^-1", "cm^6 s^-1"}, {"mol L^-1 s^-1", "cm^3 s^-1"}} {
		u, err1 := ParseUnit(pair[0])
		v, err2 := ParseUnit(pair[1])
		if f, err := u.convertTo(v); err1 != nil || err2 != nil || err == nil {
			t.Errorf("%v: factor %v", pair, f)
		}
	}
}
