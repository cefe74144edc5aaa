package survey

import (
	"archive/zip"
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// book writes a workbook of one sheet, with further parts. fill writes the sheet.
func book(t testing.TB, path string, parts map[string]string, fill func(io.Writer)) {
	t.Helper()
	var b bytes.Buffer
	z := zip.NewWriter(&b)
	all := map[string]string{
		"[Content_Types].xml":        `<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types"/>`,
		"_rels/.rels":                `<Relationships><Relationship Id="a" Type="http://x/officeDocument" Target="xl/workbook.xml"/></Relationships>`,
		"xl/workbook.xml":            `<workbook xmlns:r="r"><sheets><sheet name="Rates" r:id="b"/></sheets></workbook>`,
		"xl/_rels/workbook.xml.rels": `<Relationships><Relationship Id="b" Type="http://x/worksheet" Target="worksheets/sheet1.xml"/></Relationships>`,
	}
	for name, text := range parts {
		all[name] = text
	}
	// The list of types stands last, as many programs write it.
	names := append(slices.Sorted(maps.Keys(all))[1:], "[Content_Types].xml")
	for _, name := range names {
		text := all[name]
		w, err := z.Create(name)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := io.WriteString(w, text); err != nil {
			t.Fatal(err)
		}
	}
	w, err := z.Create("xl/worksheets/sheet1.xml")
	if err != nil {
		t.Fatal(err)
	}
	fmt.Fprint(w, "<worksheet>")
	fill(w)
	fmt.Fprint(w, "</worksheet>")
	if err := errors.Join(z.Close(), os.WriteFile(path, b.Bytes(), 0o666)); err != nil {
		t.Fatal(err)
	}
}

// linked are five rates whose cells refer to another workbook, with the values that the
// spreadsheet kept of them.
func linked(w io.Writer) {
	fmt.Fprint(w, `<sheetData><row r="1"><c r="A1" t="str"><v>T/K</v></c><c r="B1" t="str"><v>k/s^-1</v></c></row>`)
	for i, k := range []float64{1, 2.1, 4.2, 8, 14} {
		fmt.Fprintf(w, `<row r="%[1]d"><c r="A%[1]d"><f>[1]Raw!A%[1]d</f><v>%[2]d</v></c><c r="B%[1]d"><f>[1]Raw!B%[1]d</f><v>%[3]g</v></c></row>`, i+2, 300+10*i, k)
	}
	fmt.Fprint(w, `</sheetData>`)
}

// Files made to do harm, or with names that do, are rows among the others: the run goes
// on, and every form of the table holds what stands in the file, harmless on a terminal.
func TestRunHostile(t *testing.T) {
	t.Chdir(t.TempDir())
	long := strings.Repeat("0123456789", 1024)
	names := []string{"a/../../b", "line\nend \"quoted\"", long, "=1+1", `C:\x`, "\x1b[31mred", "\u202eright to left", "'"}
	var text bytes.Buffer
	w := csv.NewWriter(&text)
	if err := w.Write([]string{"dataset", "T/K", "k/s^-1"}); err != nil {
		t.Fatal(err)
	}
	for _, name := range names {
		for i, k := range []string{"1", "2.1", "4.2"} {
			if err := w.Write([]string{name, fmt.Sprint(300 + 10*i), k}); err != nil {
				t.Fatal(err)
			}
		}
	}
	w.Flush()
	writeFiles(t, ".", map[string]string{
		"names.csv": text.String(),
		"nul.csv":   "dataset,T/K,k/s^-1\na\x00b,300,1\na\x00b,310,2\n",
		"a/dup.csv": "dataset,T/K,k/s^-1\nsame,300,1\nsame,310,2.1\nsame,320,4.2\n",
		"b/dup.csv": "dataset,T/K,k/s^-1\nsame,300,1\nsame,310,2.2\nsame,320,4.4\n",
		"z.csv":     good,
	})
	external := `<Relationships><Relationship Id="b" Type="http://x/worksheet" Target="http://192.0.2.1/sheet1.xml" TargetMode="External"/></Relationships>`
	book(t, "linked.xlsx", map[string]string{
		"xl/externalLinks/externalLink1.xml":            `<externalLink><externalBook r:id="x"/></externalLink>`,
		"xl/externalLinks/_rels/externalLink1.xml.rels": `<Relationships><Relationship Id="x" Type="http://x/externalLinkPath" Target="file:///etc/passwd" TargetMode="External"/></Relationships>`,
	}, linked)
	book(t, "remote.xlsx", map[string]string{"xl/_rels/workbook.xml.rels": external}, linked)
	book(t, "entity.xlsx", map[string]string{
		"xl/workbook.xml": `<!DOCTYPE w [<!ENTITY x SYSTEM "file:///etc/passwd">]><workbook xmlns:r="r"><sheets><sheet name="&x;" r:id="b"/></sheets></workbook>`,
	}, linked)
	book(t, "bomb.xlsx", nil, func(w io.Writer) {
		spaces := bytes.Repeat([]byte(" "), 1<<20)
		for range 66 {
			if _, err := w.Write(spaces); err != nil {
				t.Fatal(err)
			}
		}
	})
	s, sum := runIn(t, "s.sqlite", quick("."))
	known := dataset.Explanations()
	var got, stored []string
	for _, r := range rowsOf(t, s) {
		what := r.State
		if r.ErrorCode != "" {
			what = r.ErrorCode
			if known[what].Code == "" {
				t.Errorf("%s: onebarrier explain does not know %q", r.SourceFile, what)
			}
			if !strings.Contains(r.Error, ";") {
				t.Errorf("%s: no cure: %s", r.SourceFile, r.Error)
			}
		}
		if r.SourceFile == "names.csv" {
			stored = append(stored, r.Dataset)
			continue
		}
		got = append(got, strings.TrimSpace(fmt.Sprintf("%s %q %s", r.SourceFile, r.Dataset, what)))
	}
	const want = `a/dup.csv "same" untestable
b/dup.csv "same" untestable
bomb.xlsx "" workbook-too-large
entity.xlsx "" workbook-damaged
linked.xlsx "linked/Rates" unresolved
nul.csv "" not-text
remote.xlsx "" workbook-damaged
z.csv "z" unresolved`
	if g := strings.Join(got, "\n"); g != want {
		t.Errorf("found\n%s\nwant\n%s", g, want)
	}
	if !slices.Equal(stored, names) {
		t.Errorf("names %.300q\nwant %.300q", stored, names)
	}
	if !sum.Complete || sum.Failed != 4 || sum.Sets != 8+len(names) {
		t.Errorf("%+v", sum)
	}
	if found, err := s.Find(context.Background(), "same"); err != nil || len(found) != 2 || found[0].SetID == found[1].SetID || found[0].StraightE == found[1].StraightE {
		t.Errorf("two of one name: %v, %v", found, err)
	}
	for _, name := range names {
		found, err := s.Find(context.Background(), name)
		if err != nil || len(found) != 1 {
			t.Errorf("%.40q: %d found, %v", name, len(found), err)
			continue
		}
		doc, err := s.Assessment(found[0].SetID)
		var a struct{ Dataset struct{ Name string } }
		if err := errors.Join(err, json.Unmarshal(doc, &a)); err != nil || a.Dataset.Name != name {
			t.Errorf("the assessment of %.40q is that of %.40q, %v", name, a.Dataset.Name, err)
		}
	}
	var out bytes.Buffer
	if err := s.WriteTable(context.Background(), &out, "jsonl", TableOptions{}, report.Text{}); err != nil {
		t.Fatal(err)
	}
	var inJSON []string
	for line := range strings.Lines(out.String()) {
		var row struct {
			Dataset string `json:"dataset"`
			File    string `json:"source_file"`
		}
		if err := json.Unmarshal([]byte(line), &row); err != nil {
			t.Fatal(err)
		}
		if row.File == "names.csv" {
			inJSON = append(inJSON, row.Dataset)
		}
	}
	if !slices.Equal(inJSON, names) {
		t.Errorf("in JSON Lines %.300q\nwant %.300q", inJSON, names)
	}
	out.Reset()
	if err := s.WriteTable(context.Background(), &out, "text", TableOptions{}, report.Text{}); err != nil {
		t.Fatal(err)
	}
	for i, line := range strings.Split(out.String(), "\n") {
		if strings.ContainsFunc(line, func(r rune) bool { return r < ' ' || r == 0x7f || r == '\u202e' }) || len(line) > 400 {
			t.Errorf("line %d of the text: %.100q", i+1, line)
		}
	}
}

// A file without the data set or sheet that is asked for is passed over and counted. One
// that is broken may hold it, and stays a row. Where no file has it, that is an error.
func TestRunAskedFor(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFiles(t, ".", map[string]string{
		"a.csv":         "dataset,T/K,k/s^-1\nx,300,1\nx,310,2.1\nx,320,4.2\ny,300,?\ny,310,2\n",
		"b.csv":         good,
		"c.csv":         "dataset,T/K,k/s^-1\nx,300,oops\n",
		"d.csv":         "x,k/s^-1\n1,2\n2,3\n",
		"e.csv":         "T/K,k_1/s^-1,k_2/s^-1\n300,1,2\n310,2,5\n",
		"f/p.csv":       "dataset,T/K,k_1/s^-1,k_2/s^-1\nx,300,1,2\nx,310,2,5\n",
		"f/nothing.csv": "dataset,T/K,k_1/s^-1,k_2/s^-1\nz,300,1,2\nz,310,2,5\n",
	})
	book(t, "book.xlsx", nil, linked)
	found := func(s *Store) string {
		var got []string
		for _, r := range rowsOf(t, s) {
			got = append(got, strings.TrimSpace(fmt.Sprintf("%s:%s %s", r.SourceFile, r.Dataset, r.ErrorCode)))
		}
		return strings.Join(got, ", ")
	}
	o := quick(".")
	o.Read.Dataset = "x"
	s, sum := runIn(t, "x.sqlite", o)
	if got, want := found(s), "a.csv:x, c.csv:x not-a-number, d.csv: no-temperature, f/p.csv:x/k_1/s^-1, f/p.csv:x/k_2/s^-1"; got != want {
		t.Errorf("found %s\nwant %s", got, want)
	}
	if sum.Skipped[skippedLacking] != 4 || sum.Files != 4 || sum.Sets != 5 || !sum.Complete {
		t.Errorf("%+v", sum)
	}
	o.Exclude = []string{"d.csv"}
	o.Read.Dataset = "nobody"
	var ps dataset.Problems
	if sum, err := Run(context.Background(), nil, o); !errors.As(err, &ps) || ps[0].Code != "dataset-unknown" || ps[0].Cure == "" || sum.Complete {
		t.Errorf("no file has the data set: %v", err)
	}
	o.Read.Dataset, o.Sheet = "", "Rates"
	if sum, err := Run(context.Background(), nil, o); err != nil || sum.Sets != 1 || sum.Skipped[skippedLacking] != 6 {
		t.Errorf("a sheet: %+v, %v", sum, err)
	}
	o.Sheet = "Notes"
	if _, err := Run(context.Background(), nil, o); !errors.As(err, &ps) || ps[0].Code != "sheet-unknown" {
		t.Errorf("no file has the sheet: %v", err)
	}
	// A heading that a file lacks may stand in it under another name: a row with cures.
	o = quick("a.csv", "b.csv", "e.csv")
	o.Read.Columns = map[string][]string{"k": {"k_2/s^-1"}}
	s, sum = runIn(t, "column.sqlite", o)
	if got, want := found(s), "a.csv: column-unknown, b.csv: column-unknown, e.csv:e"; got != want || sum.Failed != 2 {
		t.Errorf("found %s\nwant %s", got, want)
	}
	for _, cure := range []string{"copy the heading from the file as it stands", ColumnsFile, "--exclude"} {
		if r := rowsOf(t, s)[0]; !strings.Contains(r.Error, cure) {
			t.Errorf("%q does not say %q", r.Error, cure)
		}
	}
}

// Rows of a folder that could not be read, or of its columns file, go when it can be.
func TestRunMendedFolder(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFiles(t, ".", map[string]string{"a/x.csv": good, "a/" + ColumnsFile: "nonsense\n"})
	s, sum := runIn(t, "s.sqlite", quick("a"))
	if sum.Sets != 2 || sum.Failed != 1 {
		t.Errorf("%+v", sum)
	}
	if err := os.Remove(filepath.Join("a", ColumnsFile)); err != nil {
		t.Fatal(err)
	}
	if sum, err := Run(context.Background(), s, quick("a")); err != nil || sum.Removed != 1 || sum.Failed != 0 {
		t.Errorf("%+v, %v", sum, err)
	}
}

// Drawn in full, the nulls of a survey are those of a single assessment: with the seed
// of its document that gives the same document. By default there are fewer, and the
// document says so.
func TestRunNulls(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFiles(t, ".", map[string]string{"a.csv": good})
	nulls := func(o Options) (settings, draws string, doc []byte) {
		path := filepath.Join(t.TempDir(), "s.sqlite")
		s, _ := runIn(t, path, o)
		doc, err := s.Assessment(rowsOf(t, s)[0].SetID)
		var a struct {
			Settings struct {
				Seed  uint64
				Nulls string `json:"null_draws"`
			}
			Curvature struct {
				SecondBarrier struct{ Draws int } `json:"second_barrier"`
			}
		}
		if err := errors.Join(err, json.Unmarshal(doc, &a)); err != nil {
			t.Fatal(err)
		}
		return a.Settings.Nulls, fmt.Sprint(a.Curvature.SecondBarrier.Draws), doc
	}
	o := quick("a.csv")
	settings, few, _ := nulls(o)
	if settings != "sequential" {
		t.Errorf("by default null_draws is %q", settings)
	}
	o.FullNulls = true
	settings, all, doc := nulls(o)
	if settings != "full" || all != "19999" || few == all {
		t.Errorf("null_draws %q, %s draws, and %s by default", settings, all, few)
	}
	one, err := dataset.Read("a.csv", strings.NewReader(good), dataset.Options{})
	if err != nil {
		t.Fatal(err)
	}
	single := o.Assess
	single.Seed = seedOf(one[0], o.Assess.Seed)
	a, err := diagnostics.Assess(context.Background(), one[0], single)
	if err != nil {
		t.Fatal(err)
	}
	var want bytes.Buffer
	enc := json.NewEncoder(&want)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(a); err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(doc, want.Bytes()) {
		t.Errorf("the document of the survey\n%.3000s\nis not that of the assessment\n%.3000s", doc, want.String())
	}
}
