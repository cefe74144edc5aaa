package dataset

import (
	"slices"
	"testing"
)

// Lines of words that end a table are footnotes; others are rows that lack cells.
func TestFootnotes(t *testing.T) {
	const head, rows = "T/K,k/s^-1,note\n", "280,1,\n290,2,\n"
	for _, c := range []struct {
		text  string
		lines []int // of the footnotes
	}{
		{head + rows + "* mean of two titrations\n", []int{4}},
		{head + rows + "\"* mean, at 0,5 M\"\n† another flask,,\n", []int{4, 5}},
		{head + rows + "* mean of two, at 35.2 °C\n", []int{4}},
		{head + rows + "(the acid was not pure)\n* at all\n", []int{4, 5}},
		{head + rows + "the acid was not pure\nmean,3\n", nil},
		{"T/K k/s^-1\n280 1\n290 2\n* mean of 2 titrations\n", []int{4}},
		{"T/K k/s^-1\n280 1\n290 2\nthe acid was not pure\n", []int{4}},
	} {
		if c.lines == nil {
			problemsOf(t, c.text, Options{})
			continue
		}
		s := read(t, c.text, Options{})
		if n := noticed(t, s, noteAfter); !slices.Equal(n.Rows, c.lines) || len(s.Points) != 2 || n.Cure != "" {
			t.Errorf("%q: %+v, %d points", c.text, n, len(s.Points))
		}
		if s := read(t, c.text, Options{LeaveOut: c.lines}); len(s.Points) != 2 {
			t.Errorf("%q: a footnote that is left out too: %d points", c.text, len(s.Points))
		}
	}
	for _, text := range []string{ // nothing of these is silently dropped
		head + rows + "300\n",                       // lacks its k
		head + rows + "30O\n",                       // mistyped, and lacks its k
		head + rows + "310 K\n",                     // likewise
		head + "280,1,\nafter lunch\n290,2,\n",      // between the rows
		"T/K k/s^-1\n280 1\n290 2\n300 about\n",     // a cell that is no number
		"T/K k/s^-1\n280 1\n290 2\nroughly 300 2\n", // a cell too many
	} {
		problemsOf(t, text, Options{})
	}
}

// A file is not changed where footnotes are cut off.
func TestFootnotesLeaveTheTable(t *testing.T) {
	table, err := ParseTable("rates.csv", []byte("T/K,k/s^-1\n280,1\n290,2\n* mean of two\n"))
	if err != nil {
		t.Fatal(err)
	}
	for range 2 {
		if sets, err := table.Sets(Options{}); err != nil || len(sets[0].Points) != 2 || len(table.Rows) != 4 || len(table.Blank) != 4 {
			t.Errorf("%v, %d rows", err, len(table.Rows))
		}
	}
}

// What splits the cells is told by the lines that hold a tab.
func TestTabsBeforeBlanks(t *testing.T) {
	for _, c := range []struct {
		name, text string
		want       byte
	}{
		{"a", "t/°C\tk/s^-1\tnote\n10.5\t0.10\t\n20.5\t0.20\t\n", '\t'},
		{"a", "t/°C\tk/s^-1\tnote\n10.5\t0.10\t\n20.5\t0.20\tnew lamp here\n", '\t'},
		{"a", "a caption here\nT/K\tk/s^-1\tnote\n280\t1\tx\n290\t2\ty\n", '\t'},
		{"a", "T/K\tk/s^-1\tnote\n280\t1\tx\n290\t2\ty\n* a note\n", '\t'},
		{"a.tsv", "T/K\tk/s^-1\tnote\n280 1\n290\t2\ty\n", '\t'},
		// Six lines of captions, and what splits the table is seen below them.
		{"a.tsv", "Table 3\nrates in\nwater and in\nacid\nby A. Nobody\nof Nowhere at all\nT/K\tk/s^-1\n280\t1\n", '\t'},
		{"a", "Table 3\nrates in\nwater and in\nacid\nby A. Nobody\nof Nowhere at all\nT/K\tk/s^-1\n280\t1\n", ' '},
		{"a.tsv", "T/K k/s^-1\n280 1\n290 2\n", ' '},
		{"a.tsv", "T/K\tk/s^-1\n280 \t 1\n290\t\t2\n300  3\n", ' '},
		{"a", "T/K\t  k/s^-1\n280 \t 1\n290\t\t2\n300  3\n", ' '},
		{"a", "T/K;k/s^-1;note\n280;1;a\tb\n290;2;\n", ';'},
	} {
		if got := delimiter(c.name, c.text); got != c.want {
			t.Errorf("%q: split at %q, want %q", c.text, got, c.want)
		}
	}
}
