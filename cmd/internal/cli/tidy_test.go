package cli

import (
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// readingFindings say how headings and cells were read, which a tidy table leaves
// no question of.
var readingFindings = []string{
	"encoding-windows-1252", "title-rows", "heading-rows-joined", "heading-in-comment", "superscript-lost",
	"column-not-used", "unit-not-understood", "unit-without-standard-state", "time-like", "several-columns",
	"kelvin-gap", "repeats-side-by-side", "mean-beside-repeats", "uncertainty-of-which-repeat", "uncertainty-unit-assumed", "uncertainty-not-used", "repeats-missing", "uncertainty-spare",
	"brackets-standard", "rows-after-table", "blank-rows", "celsius-like-kelvin", "kelvin-like-celsius", "assumption-not-needed",
	"sheet-chosen", "hidden-cells", "percent-cells", "merged-cells", "unit-converted",
}

// withoutFile takes out of a document what cannot be the same of a table and of
// the tidy table made from it: the list in DEVELOPERS.md and in the help of inspect.
func withoutFile(t *testing.T, text string) string {
	t.Helper()
	var doc map[string]any
	if err := json.Unmarshal([]byte(text), &doc); err != nil {
		t.Fatalf("%v in %s", err, text)
	}
	set := doc["dataset"].(map[string]any)
	for _, f := range []string{"name", "files", "sha256"} {
		delete(set, f)
	}
	delete(doc, "columns")
	delete(doc["settings"].(map[string]any), "selection")
	doc["findings"] = slices.DeleteFunc(doc["findings"].([]any), func(f any) bool {
		return slices.Contains(readingFindings, f.(map[string]any)["code"].(string))
	})
	b, err := json.MarshalIndent(doc, "", " ")
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// A tidy table is assessed as the table that it was made from, to the last byte.
func TestTidyGivesTheSameAssessment(t *testing.T) {
	type table struct {
		files []string
		args  []string
	}
	var tables []table
	for _, pattern := range []string{"demo/*.csv", "published/handbook/*.csv", "published/synthetic/*.csv", "published/expressions/table_*.csv"} {
		files, err := filepath.Glob(filepath.Join("../../../testdata", pattern))
		if err != nil || len(files) == 0 {
			t.Fatalf("%s: %d files, %v", pattern, len(files), err)
		}
		for _, f := range files {
			c := table{files: []string{f}}
			if strings.HasSuffix(f, "hi_bodenstein.csv") { // two rate constants
				c.args = []string{"--column", "k=k_form_L_mol_s"}
			}
			tables = append(tables, c)
		}
	}
	for _, s := range readGallery(t) {
		if strings.HasPrefix(s.used, "refused") || strings.Contains(s.flags, "edit ") {
			continue
		}
		s.path = filepath.Join(sheets, s.file)
		s.prepare(t)
		tables = append(tables, table{[]string{s.path}, s.args})
	}
	straight, few := filepath.Join(demo, "ester-straight.csv"), filepath.Join(demo, "ester-few.csv")
	triplicates := filepath.Join(t.TempDir(), "triplicates.csv")
	if err := os.WriteFile(triplicates, []byte("T/K,k (run 1)/s^-1,k (run 2)/s^-1\n280,1e-4,1.1e-4\n290,3e-4,2.8e-4\n300,8e-4,n.d.\n310,2e-3,2.1e-3\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	tables = append(tables,
		table{[]string{triplicates}, nil},
		table{[]string{straight, few}, []string{"--pool"}},
		table{[]string{few, straight}, []string{"--pool", "--t-max", "330K", "--leave-out", "ester-few.csv:7"}})

	compared, left := 0, 0
	for _, c := range tables {
		name := strings.Join(append(slices.Clone(c.files), c.args...), " ")
		t.Run(name, func(t *testing.T) {
			tidy := filepath.Join(t.TempDir(), "tidy.csv")
			code, _, errOut := run(t, "", slices.Concat([]string{"inspect", "--tidy", tidy}, c.files, c.args)...)
			if code == exitUsage && strings.Contains(errOut, "one rate quantity") {
				t.Skip(errOut)
			}
			if code != exitDone {
				t.Fatalf("inspect: exit code %d: %s", code, errOut)
			}
			quick := []string{"--json", "--resamples", "99"}
			code1, want, _ := run(t, "", slices.Concat([]string{"assess"}, c.files, c.args, quick)...)
			code2, got, errOut := run(t, "", slices.Concat([]string{"assess", tidy}, quick)...)
			if code1 != code2 {
				t.Fatalf("exit code %d of the table, %d of the tidy table: %s", code1, code2, errOut)
			}
			if code1 == exitData { // several data sets, too few temperatures
				left++
				return
			}
			if code1 != exitDone {
				t.Fatalf("assess: exit code %d: %s", code1, want)
			}
			compared++
			if w, g := withoutFile(t, want), withoutFile(t, got); w != g {
				t.Errorf("the documents differ:\n%s", firstDifference(w, g))
			}
		})
	}
	t.Logf("%d compared, %d refused by assess in both forms", compared, left)
	if compared < 60 {
		t.Errorf("%d tables compared", compared)
	}
}

// firstDifference shows the first lines that differ.
func firstDifference(want, got string) string {
	w, g := strings.Split(want, "\n"), strings.Split(got, "\n")
	for i := range min(len(w), len(g)) {
		if w[i] != g[i] {
			from := max(0, i-8)
			return "want " + strings.Join(w[from:min(i+6, len(w))], "\n") + "\ngot " + strings.Join(g[from:min(i+6, len(g))], "\n")
		}
	}
	return "one is longer"
}
