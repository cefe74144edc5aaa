package diagnostics

import (
	"slices"
	"testing"

	"onebarrier/models/dataset"
)

// Every code that reading a file can raise is explained, and only codes that
// exist are listed as asking for nothing.
func TestReadingCodesAreExplained(t *testing.T) {
	for _, code := range slices.Concat(dataset.ProblemCodes, dataset.NoticeCodes) {
		if e, err := Explain(code); err != nil || e.Title == "" || e.Explanation == "" {
			t.Errorf("%s: entry %+v, %v", code, e, err)
		}
	}
	for _, code := range onlyToKnow {
		if !slices.Contains(dataset.NoticeCodes, code) {
			t.Errorf("%s is no code of a notice", code)
		}
	}
	seen := map[string]bool{}
	for _, code := range Codes() {
		if seen[code] {
			t.Errorf("%s is explained twice", code)
		}
		seen[code] = true
	}
}
