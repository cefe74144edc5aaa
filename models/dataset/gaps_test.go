package dataset

import (
	"maps"
	"slices"
	"strings"
	"testing"
)

// A blank row in the middle of a table does not end it; what is below the table is
// counted where it is numbers.
func TestBlankRowsInATable(t *testing.T) {
	const table = "T/K,k/s^-1\n280,1\n290,2\n" // lines 1 to 3
	for _, c := range []struct {
		name, text    string
		used, notRead []int // lines
		after         []int
		goesOn        bool
	}{
		{name: "a blank row", text: table + "\n300,3\n310,4\n", used: []int{2, 3, 5, 6}, goesOn: true},
		{name: "a row of empty cells", text: table + ",\n300,3\n310,4\n", used: []int{2, 3, 5, 6}, goesOn: true},
		{name: "between all rows", text: "T/K,k/s^-1\n\n280,1\n\n\n290,2\n , \n300,3\n", used: []int{3, 6, 8}, goesOn: true},
		{name: "a limit and a missing k", text: table + "\n300,<3\n\n310,n.d.\n\n320,5\n", used: []int{2, 3, 9}, goesOn: true},
		{name: "decimal commas", text: "T/K;k/s^-1\n280,5;1,5\n;\n290,5;2,5\n", used: []int{2, 4}, goesOn: true},
		{name: "footnotes of either block", text: table + "* of two titrations\n\n300,3\n* of three titrations\n", used: []int{2, 3, 6}, after: []int{4, 7}, goesOn: true},
		{name: "results", text: table + "\nE (kJ/mol),77\nA,2.7e10\n", used: []int{2, 3}, after: []int{5, 6}},
		{name: "a slope is no temperature", text: table + "\n-9270,25.3\n55.2,0.18\n", used: []int{2, 3}, notRead: []int{5, 6}},
		{name: "another table", text: table + "\nT/K,D/m^2 s^-1\n280,1e-9\n290,2e-9\n", used: []int{2, 3}, after: []int{5}, notRead: []int{6, 7}},
		{name: "another table, wider", text: table + "\nsample,T/K,k/s^-1\na,280,1\nmean,280,1\n", used: []int{2, 3}, after: []int{5, 7}, notRead: []int{6}},
		{name: "behind a remark", text: table + "\nsecond run\n300,3\n\n310,4\n", used: []int{2, 3}, after: []int{5}, notRead: []int{6, 8}},
	} {
		s := read(t, c.text, Options{})
		var used, notRead, after []int
		for _, p := range s.Points {
			switch {
			case p.Used:
				used = append(used, p.Row)
			case p.WhyNot == "stands below the table, not read":
				notRead = append(notRead, p.Row)
			}
		}
		told := map[string]bool{}
		for _, n := range s.Notices {
			told[n.Code] = true
			if n.Code == noteAfter {
				after = append(after, n.Rows...)
			}
		}
		if !slices.Equal(used, c.used) || !slices.Equal(notRead, c.notRead) || !slices.Equal(after, c.after) {
			t.Errorf("%s: used %v, not read %v, after the table %v; want %v, %v, %v", c.name, used, notRead, after, c.used, c.notRead, c.after)
		}
		if told[noteGoesOn] != c.goesOn || told[noteNotRead] != (len(c.notRead) > 0) {
			t.Errorf("%s: told %v", c.name, slices.Sorted(maps.Keys(told)))
		}
	}
}

// Numbers below the table are left out on request without a word more.
func TestNumbersBelowLeftOut(t *testing.T) {
	s := read(t, "T/K,k/s^-1\n280,1\n290,2\n\n-9270,25.3\n", Options{LeaveOut: []int{5}})
	if p := s.Points[2]; p.Used || p.Row != 5 || !strings.Contains(p.WhyNot, "--leave-out") {
		t.Errorf("%+v", p)
	}
	for _, n := range s.Notices {
		if n.Code == noteNotRead {
			t.Errorf("%+v", n)
		}
	}
}

// Numbers below a long table belong to the set that they name.
func TestNumbersBelowInSets(t *testing.T) {
	table, err := ParseTable("x.csv", []byte("dataset,T/K,k/s^-1\na,280,1\na,290,2\nb,280,3\n\nrun 2,,\na,300,4\nc,300,5\n"))
	if err != nil {
		t.Fatal(err)
	}
	sets, err := table.Sets(Options{})
	if err != nil || len(sets) != 2 || len(sets[0].Points) != 3 || len(sets[1].Points) != 2 || sets[0].Points[2].Row != 7 || sets[1].Points[1].Row != 8 {
		t.Errorf("%v %v", sets, err)
	}
	if !slices.Equal(table.Blank, []bool{false, false, false, false, true, false, false}) {
		t.Errorf("the table was changed: %v", table.Blank)
	}
}
