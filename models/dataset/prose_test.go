package dataset

import (
	"strings"
	"testing"
)

// A text that is no table is told so, and what is no rate constant is not offered as one.
func TestNoTable(t *testing.T) {
	for _, c := range []struct{ name, text, has, lacks string }{
		{"readme.txt", "These are the data of the thesis.\nAsk the group before use.\n", "looks like no table", "own heading"},
		{"fake.xlsx", "not a zip\n", "no workbook", "heading"},
		{"fake.xlsx", "hello\n", "no workbook", "heading"},
		{"x.csv", "bath,flask\n280,a\n290,b\n", "no heading was understood", "no table"},
		{"x.csv", "T/K,p/bar\n300,1\n310,2\n", "write the heading as k/s^-1", "--column"},
		{"x.csv", "T/K,slope 1,c (mol/L),pH\n300,1,2,7\n310,2,3,7\n", "--column 'k=slope 1'", "k=c"},
		{"x.csv", "T/K,slope 1,pH\n300,1,7\n310,2,7\n", "--column 'k=slope 1'", "k=pH"},
	} {
		_, err := Read(c.name, strings.NewReader(c.text), Options{})
		if err == nil || !strings.Contains(err.Error(), c.has) || strings.Contains(err.Error(), c.lacks) {
			t.Errorf("%q: %v", c.text, err)
		}
	}
}

// A flag cures mixed decimal marks only where the other mark groups thousands.
func TestCureOfMixedMarks(t *testing.T) {
	for _, c := range []struct{ text, has, lacks string }{
		{"T/K;k/s^-1\n288,15;1\n298.15;2\n308.15;3\n", "mend the 1 cell with a decimal comma (line 2)", "--decimal"},
		{"T/K;k/s^-1\n288,15;1\n298.15;2\n308,15;3\n", "mend the 1 cell with a decimal point (line 3)", "--decimal"},
		{"T/K;k/s^-1\n288;1.150\n298;2,5\n", "--decimal comma", "--decimal point"},
		{"T/K;k/s^-1\n288;1,150\n298;2.5\n", "--decimal point", "--decimal comma"},
	} {
		if got := problemsOf(t, c.text, Options{}).Error(); !strings.Contains(got, c.has) || strings.Contains(got, c.lacks) {
			t.Errorf("%q: %s", c.text, got)
		}
	}
}
