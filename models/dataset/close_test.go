package dataset

import (
	"slices"
	"strings"
	"testing"
)

func hasNotice(s *Set, code string) bool {
	return slices.ContainsFunc(s.Notices, func(n Notice) bool { return n.Code == code })
}

// Settings far closer than the others are told, with the rows of both.
func TestSettingsClose(t *testing.T) {
	for _, c := range []struct {
		what, text string
		rows       []int // nil: nothing is said
	}{
		{"34.95 beside 34.9", "t/°C,k/s^-1\n15,1\n25,2\n34.9,3\n45,4\n34.95,3.1\n55,5\n34.9,3\n", []int{4, 6, 8}},
		{"273 for 273.15", "T/K,k/s^-1\n288.15,1\n298.15,2\n298,2\n308.15,3\n318.15,4\n", []int{3, 4}},
		{"equal but for the last bits", "T/K,k/s^-1\n288.15,1\n298.15,2\n298.15000000001,2\n308.15,3\n318.15,4\n", nil},
		{"not used", "T/K,k/s^-1\n288.15,1\n298.15,2\n298,\n308.15,3\n318.15,4\n", nil},
		{"measured anew for each run", "t/°C,k/s^-1\n15.02,1\n15.07,1\n25.01,2\n25.04,2\n35.03,3\n35.05,3\n", nil},
		{"a narrow range, five times closer", "t/°C,k/s^-1\n25,1\n26,1.1\n26.19,1.1\n27,1.2\n28,1.3\n", nil},
		{"0.3 K apart", "t/°C,k/s^-1\n15,1\n25,2\n25.3,2\n35,3\n45,4\n", nil},
		{"three settings in all", "t/°C,k/s^-1\n15,1\n25,2\n25.05,2\n", nil},
	} {
		s := read(t, c.text, Options{})
		if c.rows == nil {
			if hasNotice(s, noteClose) {
				t.Errorf("%s: %+v", c.what, s.Notices)
			}
			continue
		}
		n := noticed(t, s, noteClose)
		slices.Sort(n.Rows)
		if !slices.Equal(n.Rows, c.rows) || !strings.Contains(n.Message, "count as two temperatures") || n.Cure == "" {
			t.Errorf("%s: %+v", c.what, n)
		}
	}
	a := read(t, "T/K,k/s^-1\n288.15,1\n298.15,2\n308.15,3\n", Options{})
	b := read(t, "T/K,k/s^-1\n298,2\n318.15,4\n", Options{})
	a.Files, b.Files = []string{"a.csv"}, []string{"b.csv"}
	for i := range a.Points {
		a.Points[i].File = "a.csv"
	}
	for i := range b.Points {
		b.Points[i].File = "b.csv"
	}
	both, err := Pool([]*Set{a, b})
	if err != nil || !strings.Contains(noticed(t, both, noteClose).Message, "b.csv:2, a.csv:3") {
		t.Errorf("%v, %+v", err, both)
	}
}

// A condition that no row meets is refused with what the column holds.
func TestWhereThatNoRowMeets(t *testing.T) {
	const text = "T/K,k/s^-1,lab,pH\n280,1,D,7\n290,2,E,7\n300,3,,8\n"
	for _, c := range []struct{ where, cure string }{
		{"lab=F", `column "lab" holds "D", "E" and empty cells`},
		{"lab=d", `did you mean --where 'lab=D'?`},
		{"pH>9", `column "pH" holds "7", "8"`},
	} {
		ps := problemsOf(t, text, Options{Where: []string{c.where}, WhereMet: true})
		if len(ps) != 1 || ps[0].Code != codeWhere || !strings.Contains(ps[0].Cure, c.cure) {
			t.Errorf("%s: %v", c.where, ps)
		}
		read(t, text, Options{Where: []string{c.where}}) // another table may meet it
	}
	for _, where := range []string{"lab=D", "lab!=F", "pH=8.0"} {
		read(t, text, Options{Where: []string{where}, WhereMet: true})
	}
	// Each is met by some row, and both by none: the rows say so themselves.
	s := read(t, text, Options{Where: []string{"lab=D", "pH=8"}, WhereMet: true})
	if len(s.UsedPoints()) != 0 {
		t.Error(s.Points)
	}
}
