package report

import (
	"strings"
	"testing"
)

// A factor that is a power of ten reads as one, whatever log10 makes of it.
func TestPowersOfTenRead(t *testing.T) {
	for x, want := range map[float64]string{
		1e-4: "10⁻⁴", 1e-3: "10⁻³", 1e-12: "10⁻¹²", 1e-15: "10⁻¹⁵", 1e5: "10⁵", 1e15: "10¹⁵", 1e23: "10²³", 0.25: "0.2500 ×", 60: "60.00 ×",
	} {
		if got := factor(x); got != want {
			t.Errorf("%g: %q, want %q", x, got, want)
		}
	}
}

// The page cuts a heading that is a whole sentence, and keeps one of 60 characters.
func TestLongHeadingOnThePage(t *testing.T) {
	fits := strings.Repeat("k ä", 20)
	long := fits + "x"
	set := InspectedSet{Columns: []InspectedColumn{{File: "a.csv", Heading: long, Role: "rate", Factor: 1}, {File: "a.csv", Heading: fits, Role: "kept"}, {File: "a.csv", Heading: long, Role: "kept"}}}
	lines := strings.Join((Text{Width: 400}).newPage().columns(InspectedFile{Files: []string{"a.csv"}}, set), "\n")
	lines = strings.Join(strings.Fields(lines), " ")
	if strings.Contains(lines, long) || strings.Count(lines, "…") != 2 || !strings.Contains(lines, fits) {
		t.Error(lines)
	}
	if set.Columns[0].Heading != long {
		t.Error("the document has lost a heading")
	}
}
