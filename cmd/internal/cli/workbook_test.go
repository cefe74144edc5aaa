package cli

import (
	"encoding/csv"
	"encoding/json"
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"onebarrier/cmd/internal/report/schematest"
)

// writeWorkbooks writes demo tables as workbooks: book.xlsx with one table beside
// notes, two.xlsx with two, faulty.xlsx with a table that can be read and one that
// cannot.
func writeWorkbooks(dir string) error {
	write := func(name string, fill func(f *excelize.File) error) error {
		f := excelize.NewFile()
		return errors.Join(fill(f), f.SaveAs(filepath.Join(dir, name)), f.Close())
	}
	table := func(f *excelize.File, sheet, file string) error {
		if _, err := f.NewSheet(sheet); err != nil {
			return err
		}
		if err := f.SetCellStr(sheet, "B2", "Hydrolysis of an invented ester"); err != nil {
			return err
		}
		r, err := os.Open(filepath.Join(demo, file))
		if err != nil {
			return err
		}
		defer func() { _ = r.Close() }() // only read
		in := csv.NewReader(r)
		in.Comment = '#'
		rows, err := in.ReadAll()
		for i, row := range rows {
			cells := make([]any, len(row))
			for j, c := range row {
				if x, err := strconv.ParseFloat(c, 64); err == nil {
					cells[j] = x
				} else {
					cells[j] = c
				}
			}
			err = errors.Join(err, f.SetSheetRow(sheet, "B"+strconv.Itoa(4+i), &cells))
		}
		return err
	}
	return errors.Join(
		write("book.xlsx", func(f *excelize.File) error {
			return errors.Join(f.SetSheetName("Sheet1", "Notes"), f.SetCellStr("Notes", "A1", "made up for this test"),
				table(f, "Kinetics", "ester-two-paths.csv"), f.SetRowVisible("Kinetics", 6, false))
		}),
		write("two.xlsx", func(f *excelize.File) error {
			return errors.Join(table(f, "Run 1", "ester-straight.csv"), table(f, "Run 2", "ester-few.csv"), f.DeleteSheet("Sheet1"))
		}),
		write("faulty.xlsx", func(f *excelize.File) error {
			return errors.Join(table(f, "Run 1", "ester-few.csv"), table(f, "Run 2", "ester-few.csv"), f.DeleteSheet("Sheet1"),
				f.SetCellFormula("Run 2", "C9", "C8*2"), f.SetCellStr("Run 2", "C6", "broken"))
		}),
	)
}

// A workbook gives what the same table gives as text, to the last bit, and pictures.
func TestWorkbookIsItsTable(t *testing.T) {
	dir := t.TempDir()
	if err := writeWorkbooks(dir); err != nil {
		t.Fatal(err)
	}
	assess := func(stdin string, args ...string) map[string]any {
		t.Helper()
		code, out, errOut := run(t, stdin, append([]string{"assess", "--json", "--resamples", "499", "--quiet"}, args...)...)
		if code != exitDone {
			t.Fatalf("%q: exit code %d\n%s", args, code, errOut)
		}
		if err := schematest.Validate("assessment", []byte(out)); err != nil {
			t.Error(err)
		}
		var doc map[string]any
		if err := json.Unmarshal([]byte(out), &doc); err != nil {
			t.Fatal(err)
		}
		return doc
	}
	book := filepath.Join(dir, "book.xlsx")
	pictures := filepath.Join(dir, "pictures")
	text := assess("", filepath.Join(demo, "ester-two-paths.csv"))
	chosen := assess("", book, "--sheet", "Kinetics", "--figures", pictures)
	piped := assess(contents(t, book), "-")
	if got := chosen["settings"].(map[string]any)["selection"]; !reflect.DeepEqual(got, []any{"--sheet=Kinetics"}) {
		t.Errorf("the selection is recorded as %v", got)
	}
	if name := chosen["dataset"].(map[string]any)["name"]; name != "book/Kinetics" {
		t.Errorf("the data set is named %v", name)
	}
	for _, part := range []string{"verdict", "curvature", "ranking", "at_reference", "publish", "bootstrap"} {
		if text[part] == nil || !reflect.DeepEqual(text[part], chosen[part]) || !reflect.DeepEqual(text[part], piped[part]) {
			t.Errorf("%s is not that of the same table as text", part)
		}
	}
	svg, err := filepath.Glob(filepath.Join(pictures, "*.svg"))
	if err != nil || len(svg) == 0 {
		t.Errorf("pictures: %q, %v", svg, err)
	}
	// One that cannot be opened is a problem with its place and a cure.
	code, out, errOut := run(t, contents(t, book)[:4000], "assess", "-", "--json")
	if code != exitData || !strings.Contains(errOut, "onebarrier: -: the list of its parts cannot be read; open it in a spreadsheet program") {
		t.Errorf("exit code %d, %s", code, errOut)
	}
	if err := schematest.Validate("problems", []byte(out)); err != nil {
		t.Error(err)
	}
}
