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
