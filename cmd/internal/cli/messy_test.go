package cli

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"unicode/utf8"

	"onebarrier/models/dataset"
)

// What another condition does to the data is said before the answer.
func TestVaryingColumnIsSeen(t *testing.T) {
	file := filepath.Join(sheets, "ph-varies.csv")
	if code, _, errOut := run(t, "", "assess", file, "--resamples", "99"); code != exitDone || !strings.Contains(errOut, "column-varies") || !strings.Contains(errOut, "--dataset-by 'pH'") {
		t.Errorf("exit code %d: %s", code, errOut)
	}
	if _, _, errOut := run(t, "", "assess", file, "--resamples", "99", "--json"); strings.Count(errOut, "column-varies") != 1 {
		t.Errorf("with --json: %s", errOut)
	}
}

func TestPlacesToWrite(t *testing.T) {
	file := filepath.Join(sheets, "plain.csv")
	taken := filepath.Join(t.TempDir(), "taken")
	if err := os.WriteFile(taken, nil, 0o666); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		args []string
		exit int
		says string
	}{
		{[]string{"inspect", file, "--tidy", filepath.Join(t.TempDir(), "no", "x.csv")}, exitUsage, "make the folder"},
		{[]string{"assess", file, "--figures", taken}, exitFailed, "is a file; name a folder"},
	} {
		if code, _, errOut := run(t, "", c.args...); code != c.exit || !strings.Contains(errOut, c.says) {
			t.Errorf("%q: exit code %d: %s", c.args, code, errOut)
		}
	}
}

func TestTemperatureWithoutDegree(t *testing.T) {
	for in, want := range map[string]float64{"30C": 303.15, "-10 C": 263.15, "50F": 283.15, "300K": 300} {
		if got, err := parseTemperature(in); err != nil || !near(got, want) {
			t.Errorf("%s: %v, %v", in, got, err)
		}
	}
}

// On a terminal no line is longer than it, and the cure begins a line.
func TestWrapError(t *testing.T) {
	long := strings.Repeat("much that is wrong ", 12)
	for _, err := range []error{
		dataset.Problems{{File: "rates.csv", Row: 3, Column: "k", Message: long, Cure: long}, {File: "rates.csv", Message: "short", Cure: "cured"}},
		usagef(long, "%s", long),
		os.ErrClosed,
	} {
		lines := wrapError(err, 80)
		for _, l := range lines {
			if utf8.RuneCountInString(l) > 80 {
				t.Errorf("%d wide: %q", utf8.RuneCountInString(l), l)
			}
		}
		if got := strings.Join(lines, "\n"); !strings.HasPrefix(got, "onebarrier: ") || strings.Contains(got, "cured") && !strings.Contains(got, "\n  → cured") {
			t.Errorf("%s", got)
		}
	}
}
