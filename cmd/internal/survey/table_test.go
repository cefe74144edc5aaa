package survey

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"github.com/parquet-go/parquet-go"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/report/schematest"
	"onebarrier/models/reference"
)

// Expected: R 4.2.2, print(p.adjust(p, method = "BH"), digits = 17).
func TestFalseDiscoveryAgainstR(t *testing.T) {
	for _, c := range []struct{ p, want []float64 }{
		{
			[]float64{0.01, 0.013, 0.014, 0.19, 0.35, 0.5, 0.63, 0.67, 0.75, 0.81, 1, 0.014, 0, 2e-9, 0.049},
			[]float64{3.5000000000000003e-02, 3.5000000000000003e-02, 3.5000000000000003e-02, 3.5625000000000001e-01,
				5.8333333333333337e-01, 7.5000000000000000e-01, 8.3750000000000002e-01, 8.3750000000000002e-01,
				8.6538461538461531e-01, 8.6785714285714288e-01, 1, 3.5000000000000003e-02, 0, 1.5000000000000002e-08,
				1.0500000000000000e-01},
		},
		{[]float64{0.9, 0.02, 0.021}, []float64{0.9, 0.0315, 0.0315}},
		{[]float64{0.3}, []float64{0.3}},
	} {
		f := newFalseDiscovery(append([]float64(nil), c.p...))
		for i, p := range c.p {
			reference.Close(t, fmt.Sprintf("q of %g", p), f.of(p), c.want[i], 1e-14)
		}
	}
	if q := newFalseDiscovery(nil).of(0.5); !math.IsNaN(q) {
		t.Errorf("q among none is %g", q)
	}
	if q := newFalseDiscovery([]float64{0.1}).of(math.NaN()); !math.IsNaN(q) {
		t.Errorf("q of an unknown p is %g", q)
	}
}

// tableRows are invented: five sets that can be tested, one that cannot, two failed.
func tableRows() []Row {
	row := func(name string, points int, state string, change, lower, upper, p, band float64) Row {
		r := emptyRow()
		r.Dataset, r.SourceFile, r.Points, r.State = name, "archive.csv", points, state
		r.EChange, r.EChangeLower, r.EChangeUpper, r.PValue, r.PBand = change, lower, upper, p, band
		r.Temperatures, r.LeftOut, r.Sources, r.TMin, r.TMax = points, 0, 1, 280, 340
		return r
	}
	nan := math.NaN()
	failed := func(name, code, message string, line int) Row {
		r := emptyRow()
		r.Dataset, r.SourceFile, r.ErrorCode, r.Error, r.ErrorRow = name, "archive.csv", code, message, line
		return r
	}
	yes := true
	rows := []Row{
		row("=1+cmd", 12, "beyond-prefactor", 12.34, 8.1, 16.58, 0.01, 0.02),
		row("b", 8, "unresolved", -2.5, -9.04, 4.04, 0.3, 1),
		row("an archive with a long name, series 17", 10, "straight-within", 0.12, -0.31, 0.55, 0.6, 1),
		row("d", 5, "curved-open", -1234.5, -2345, -123.4, 0.02, 0.5),
		row("e", 20, "within-prefactor", 2.4, 0.2, 4.6, 0.02, 1),
		row("few", 3, "untestable", nan, nan, nan, nan, nan),
		failed("broken", "cell-not-a-number", `"12,3,4" is not a number; write 12.34, or n.d. where there is none`, 7),
		failed("", "file-unreadable", "permission denied", UnknownCount),
	}
	rows[0].Material = &yes
	rows[0].Warnings = "deciding-point narrow-range"
	return rows
}

func tableStore(t testing.TB, rows []Row) *Store {
	t.Helper()
	s := newStore(t, filepath.Join(t.TempDir(), "s.sqlite"), testSettings)
	var all []Entry
	for i := range rows {
		e := entry(i)
		id := e.Row.SetID
		e.Content = Content{byte(i)}
		e.Row = rows[i]
		e.Row.SetID = id
		all = append(all, e)
	}
	if err := s.Put(all); err != nil {
		t.Fatal(err)
	}
	return s
}

func written(t testing.TB, s *Store, format string, o TableOptions) string {
	t.Helper()
	var b bytes.Buffer
	if err := s.WriteTable(t.Context(), &b, format, o, report.Text{}); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// q is over the five testable sets, whatever is shown. Expected: R 4.2.2,
// p.adjust(c(0.01, 0.3, 0.6, 0.02, 0.02), "BH") and p.adjust(c(0.02, 1, 1, 0.5, 1), "BH").
func TestTableBeforeFilters(t *testing.T) {
	s := tableStore(t, tableRows())
	q := map[string][2]float64{
		"=1+cmd": {0.033333333333333333, 0.1}, "b": {0.375, 1}, "an archive with a long name, series 17": {0.6, 1},
		"d": {0.033333333333333333, 1}, "e": {0.033333333333333333, 1},
	}
	for _, c := range []struct {
		o    TableOptions
		want string
	}{
		{TableOptions{}, "=1+cmd,b,an archive with a long name, series 17,d,e,few,broken,"},
		{TableOptions{MaxQ: 0.05}, "=1+cmd,d,e"},
		{TableOptions{MaxQ: 1}, "=1+cmd,b,an archive with a long name, series 17,d,e"},
		{TableOptions{States: []string{"unresolved", "untestable"}}, "b,few"},
		{TableOptions{States: []string{Failed}}, "broken,"},
		{TableOptions{MinPoints: 10}, "=1+cmd,an archive with a long name, series 17,e"},
		{TableOptions{MinPoints: 8, MaxQ: 0.05, States: []string{"beyond-prefactor", "curved-open"}}, "=1+cmd"},
		{TableOptions{MaxQBand: 0.1}, "=1+cmd"},
		{TableOptions{MaxQBand: 1, MaxQ: 0.05}, "=1+cmd,d,e"},
		{TableOptions{Without: []string{"outlier", "narrow-range"}, MaxQ: 0.05}, "d,e"},
		{TableOptions{Sort: "N", MinPoints: 8}, "b,an archive with a long name, series 17,=1+cmd,e"},
		{TableOptions{Sort: "ΔE", MinPoints: 8}, "b,an archive with a long name, series 17,e,=1+cmd"},
		{TableOptions{Sort: "q", MaxQ: 1}, "=1+cmd,d,e,b,an archive with a long name, series 17"},
		{TableOptions{Sort: "points"}, "few,d,b,an archive with a long name, series 17,=1+cmd,e,broken,"},
		{TableOptions{Sort: "points", Descending: true}, "e,=1+cmd,an archive with a long name, series 17,b,d,few,broken,"},
		{TableOptions{Sort: "q_value", MaxQ: 1}, "=1+cmd,d,e,b,an archive with a long name, series 17"},
		{TableOptions{Sort: "q_value", Descending: true, MaxQ: 1}, "an archive with a long name, series 17,b,d,e,=1+cmd"},
		{TableOptions{Sort: "dataset", MinPoints: 8}, "=1+cmd,an archive with a long name, series 17,b,e"},
		{TableOptions{Sort: "error_code"}, "broken,,=1+cmd,b,an archive with a long name, series 17,d,e,few"},
	} {
		var names []string
		n, err := s.Table(t.Context(), c.o, func(r *Row) error {
			names = append(names, r.Dataset)
			want, testable := q[r.Dataset]
			if !testable {
				if !math.IsNaN(r.QValue) || !math.IsNaN(r.QBand) {
					t.Errorf("%q has q %g and %g", r.Dataset, r.QValue, r.QBand)
				}
				return nil
			}
			reference.Close(t, r.Dataset, r.QValue, want[0], 1e-14)
			reference.Close(t, r.Dataset, r.QBand, want[1], 1e-14)
			return nil
		})
		if got := strings.Join(names, ","); err != nil || got != c.want {
			t.Errorf("%+v: %s, %v, want %s", c.o, got, err, c.want)
		}
		found := 3 // q of 1/30, also at 0.05
		if c.o.MaxQ == 1 {
			found = 5
		}
		band := map[float64]int{0.1: 1, 1: 5}[c.o.MaxQBand]
		if want := (Tally{Sets: 8, Shown: len(names), Testable: 5, Found: found, FoundBand: band, Failed: 2}); n != want {
			t.Errorf("%+v: tally %+v, want %+v", c.o, n, want)
		}
	}
}

func TestTableRefuses(t *testing.T) {
	s := tableStore(t, nil)
	for _, c := range []struct {
		o    TableOptions
		want string
	}{
		{TableOptions{States: []string{"bent"}}, `"bent" is not a verdict; use untestable, `},
		{TableOptions{MaxQ: 1.1}, "largest q is 1.1"},
		{TableOptions{MaxQ: math.NaN()}, "largest q is NaN"},
		{TableOptions{MaxQBand: 2}, "largest q is 2"},
		{TableOptions{MinPoints: -1}, "is -1"},
		{TableOptions{Sort: "p_value; DROP TABLE sets"}, "is not a column; use one of set_id, "},
	} {
		if err := s.WriteTable(t.Context(), io.Discard, "csv", c.o, report.Text{}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v does not say %q", c.o, err, c.want)
		}
	}
	if err := s.WriteTable(t.Context(), io.Discard, "xml", TableOptions{}, report.Text{}); err == nil || !strings.Contains(err.Error(), "use text, csv, parquet, jsonl") {
		t.Errorf("%v", err)
	}
}

func TestCSV(t *testing.T) {
	got := written(t, tableStore(t, tableRows()), "csv", TableOptions{})
	records, err := csv.NewReader(strings.NewReader(got)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if head := strings.Join(records[0], ","); head != wantColumns || len(records) != 9 {
		t.Errorf("%d lines, head %s", len(records), head)
	}
	at := func(line int, column string) string { return records[line][index(t, column)] }
	for _, c := range []struct {
		line         int
		column, want string
	}{
		{1, "dataset", "'=1+cmd"}, {1, "exponent", "NA"}, {1, "e_change_kj_per_mol", "12.34"}, {1, "material", "true"},
		{2, "material", "NA"}, {2, "e_change_kj_per_mol", "-2.5"}, {2, "error_code", ""}, {2, "error_row", "NA"},
		{7, "points", "NA"}, {7, "error_row", "7"}, {7, "error", `"12,3,4" is not a number; write 12.34, or n.d. where there is none`},
		{8, "dataset", ""}, {8, "q_value", "NA"}, {1, "warnings", "deciding-point narrow-range"},
	} {
		if got := at(c.line, c.column); got != c.want {
			t.Errorf("line %d, %s: %q, want %q", c.line, c.column, got, c.want)
		}
	}
}

func index(t testing.TB, column string) int {
	t.Helper()
	for i, name := range columns {
		if name == column {
			return i
		}
	}
	t.Fatalf("no column %s", column)
	return -1
}

// hostile names, and what CSV makes of them.
var hostile = map[string]string{
	"=1+1": "'=1+1", "+1": "'+1", "-2+3": "'-2+3", "@SUM(A1)": "'@SUM(A1)", "\t=1": "'\t=1", "\r=1": "'\r=1", "\n=1": "'\n=1",
	" =1": "' =1", "＝1": "'＝1", "\u00a0@a": "'\u00a0@a",
	"a=1": "a=1", "'=1": "'=1", "": "", "ß": "ß", "a\"b,c\nd": "a\"b,c\nd", "−1": "−1",
}

// Names that a spreadsheet would compute are harmless in CSV and as they were in JSON
// Lines and Parquet.
func TestHostileNames(t *testing.T) {
	var rows []Row
	var names []string
	for name := range hostile {
		r := emptyRow()
		r.Dataset, r.SourceFile, r.Sheet, r.Quantity, r.Error = name, name, name, name, name
		rows, names = append(rows, r), append(names, name)
	}
	s := tableStore(t, rows)
	stored := rowsOf(t, s)
	records, err := csv.NewReader(strings.NewReader(written(t, s, "csv", TableOptions{}))).ReadAll()
	if err != nil || len(records) != len(names)+1 {
		t.Fatalf("%d lines, %v", len(records), err)
	}
	lines := strings.Split(strings.TrimSuffix(written(t, s, "jsonl", TableOptions{}), "\n"), "\n")
	table := readParquet(t, written(t, s, "parquet", TableOptions{}))
	if len(lines) != len(names) || len(table) != len(names) {
		t.Fatalf("%d lines, %d rows of Parquet", len(lines), len(table))
	}
	for i := range stored {
		name := stored[i].Dataset
		var line map[string]any
		if err := json.Unmarshal([]byte(lines[i]), &line); err != nil {
			t.Fatal(err)
		}
		for _, column := range []string{"dataset", "source_file", "sheet", "quantity", "error"} {
			if got := records[i+1][index(t, column)]; got != hostile[name] {
				t.Errorf("CSV, %s: %q is %q, want %q", column, name, got, hostile[name])
			}
			if line[column] != name {
				t.Errorf("JSON, %s: %q is %q", column, name, line[column])
			}
			if got := table[i][index(t, column)]; got != name {
				t.Errorf("Parquet, %s: %q is %q", column, name, got)
			}
		}
	}
}

// JSON Lines and Parquet hold every value of every row, unknown ones as null.
func TestWholeTable(t *testing.T) {
	rows := tableRows()
	full := reflect.ValueOf(&rows[0]).Elem() // a row in which everything is known
	for i, kind := range kinds {
		switch f := full.Field(i); kind {
		case reflect.Int:
			f.SetInt(int64(1000 + i))
		case reflect.Float64:
			if columns[i] != "p_value" && columns[i] != "p_band" {
				f.SetFloat(math.Pi / float64(i+1))
			}
		case reflect.String:
			if columns[i] != "error_code" {
				f.SetString(columns[i])
			}
		}
	}
	s := tableStore(t, rows)
	var want [][]any
	if _, err := s.Table(t.Context(), TableOptions{}, func(r *Row) error { want = append(want, r.Values()); return nil }); err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSuffix(written(t, s, "jsonl", TableOptions{}), "\n"), "\n")
	table := readParquet(t, written(t, s, "parquet", TableOptions{}))
	if len(lines) != len(want) || len(table) != len(want) {
		t.Fatalf("%d lines, %d rows of Parquet, want %d", len(lines), len(table), len(want))
	}
	for i, values := range want {
		if err := schematest.Validate("survey-row", []byte(lines[i])); err != nil {
			t.Errorf("line %d: %v", i, err)
		}
		var line map[string]any
		if err := json.Unmarshal([]byte(lines[i]), &line); err != nil {
			t.Fatal(err)
		}
		for j, v := range values {
			if table[i][j] != v {
				t.Errorf("Parquet, row %d, %s: %v, want %v", i, columns[j], table[i][j], v)
			}
			if n, ok := v.(int64); ok {
				v = float64(n) // JSON has one kind of number
			}
			if line[columns[j]] != v {
				t.Errorf("JSON, row %d, %s: %v, want %v", i, columns[j], line[columns[j]], v)
			}
		}
	}
	// The order of the columns is part of the table.
	at := 0
	for _, name := range columns {
		next := strings.Index(lines[0], `"`+name+`":`)
		if next <= at {
			t.Errorf("%s stands in another place", name)
		}
		at = next
	}
}

// readParquet gives the values of each row as Row.Values does.
func readParquet(t testing.TB, file string) (table [][]any) {
	t.Helper()
	f, err := parquet.OpenFile(strings.NewReader(file), int64(len(file)))
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, field := range f.Schema().Fields() {
		names = append(names, field.Name())
	}
	if got := strings.Join(names, ","); got != wantColumns {
		t.Errorf("columns of Parquet %s", got)
	}
	for _, group := range f.RowGroups() {
		rows := group.Rows()
		buffer := make([]parquet.Row, 3)
		for {
			n, err := rows.ReadRows(buffer)
			for _, r := range buffer[:n] {
				values := make([]any, len(columns))
				for _, v := range r {
					switch {
					case v.IsNull():
					case v.Kind() == parquet.ByteArray:
						values[v.Column()] = v.String()
					case v.Kind() == parquet.Int64:
						values[v.Column()] = v.Int64()
					case v.Kind() == parquet.Double:
						values[v.Column()] = v.Double()
					case v.Kind() == parquet.Boolean:
						values[v.Column()] = v.Boolean()
					}
				}
				table = append(table, values)
			}
			if err == io.EOF {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
		}
		rows.Close()
	}
	return table
}

// Text that is not UTF-8 does not make a file that others refuse.
func TestParquetIsUTF8(t *testing.T) {
	r := emptyRow()
	r.Dataset = "a\xffb"
	table := readParquet(t, written(t, tableStore(t, []Row{r}), "parquet", TableOptions{}))
	if got := table[0][index(t, "dataset")]; got != "a\ufffdb" {
		t.Errorf("%q", got)
	}
}

// An empty table is one, in every form.
func TestEmptyTable(t *testing.T) {
	s := tableStore(t, nil)
	if got := written(t, s, "csv", TableOptions{}); got != wantColumns+"\n" {
		t.Errorf("CSV %q", got)
	}
	if got := written(t, s, "jsonl", TableOptions{}); got != "" {
		t.Errorf("JSON %q", got)
	}
	if got := readParquet(t, written(t, s, "parquet", TableOptions{})); len(got) != 0 {
		t.Errorf("Parquet %v", got)
	}
	if got := written(t, s, "text", TableOptions{}); got != "The store holds no data set; survey run puts them there.\n" {
		t.Errorf("text %q", got)
	}
}

// failing refuses every byte.
type failing struct{}

var errDisk = errors.New("no room")

func (failing) Write([]byte) (int, error) { return 0, errDisk }

func TestWriteErrors(t *testing.T) {
	s := tableStore(t, tableRows())
	for _, format := range TableFormats {
		if err := s.WriteTable(t.Context(), failing{}, format, TableOptions{}, report.Text{}); !errors.Is(err, errDisk) {
			t.Errorf("%s: %v", format, err)
		}
	}
}

// Expected: the invented rows of tableRows, q as in TestTableBeforeFilters, each ΔE to
// the decimals that two digits of the width of its interval need.
func TestTextTable(t *testing.T) {
	s := tableStore(t, tableRows())
	for _, c := range []struct {
		o    TableOptions
		want string
	}{
		{TableOptions{}, `data set              N  verdict                  ΔE     95 % interval         q
=1+cmd               12  beyond-prefactor !    +12.3     +8.1 to +16.6     0.033
b                     8  unresolved               −2          −9 to +4      0.38
an archi…eries 17    10  straight-within       +0.12    −0.31 to +0.55      0.60
d                     5  curved-open           −1234     −2345 to −123     0.033
e                    20  within-prefactor       +2.4      +0.2 to +4.6     0.033
few                   3  untestable                –                 –         –
broken                –  cell-not-a-number, line 7: "12,3,4" is not a number; w…
archive.csv           –  file-unreadable: permission denied

8 data sets. 5 can be tested; q is the false discovery share (Benjamini and
Hochberg 1995) over these, whatever is shown: q_value for the test that E does
not change, at most 0.05 for 3; q_band for the test that it changes by no more
than a usual prefactor explains, at most 0.05 for 0. Verdicts are at 5 % for
each data set by itself. 2 could not be used: survey status counts the reasons,
--state failed prints them. ! marks warnings: survey show tells them. ΔE is the
change of E over the measured range in kJ/mol. onebarrier survey show NAME
prints one assessment; --format csv has every column.
`},
		// The numbers of the footer are those asked for, and q is that of the question.
		{TableOptions{MaxQBand: 0.1, MinPoints: 8}, `data set              N  verdict                  ΔE     95 % interval    q_band
=1+cmd               12  beyond-prefactor !    +12.3     +8.1 to +16.6      0.10

1 of 8 data sets shown. 5 can be tested; q is the false discovery share
(Benjamini and Hochberg 1995) over these, whatever is shown: q_value for the
test that E does not change, at most 0.05 for 3; q_band for the test that it
changes by no more than a usual prefactor explains, at most 0.1 for 1. Verdicts
are at 5 % for each data set by itself. 2 could not be used: survey status
counts the reasons, --state failed prints them. ! marks warnings: survey show
tells them. ΔE is the change of E over the measured range in kJ/mol. onebarrier
survey show NAME prints one assessment; --format csv has every column.
`},
		{TableOptions{States: []string{Failed}}, `"broken" in archive.csv, line 7
    cell-not-a-number: "12,3,4" is not a number; write 12.34, or n.d. where
    there is none
archive.csv
    file-unreadable: permission denied

2 of 8 data sets shown. onebarrier survey show FILE prints every problem of one.
`},
		{TableOptions{MinPoints: 100}, `None of the 8 data sets passes the filters. 5 can be tested; q is the false
discovery share (Benjamini and Hochberg 1995) over these, whatever is shown:
q_value for the test that E does not change, at most 0.05 for 3; q_band for the
test that it changes by no more than a usual prefactor explains, at most 0.05
for 0. Verdicts are at 5 % for each data set by itself. 2 could not be used:
survey status counts the reasons, --state failed prints them.
`},
	} {
		if got := written(t, s, "text", c.o); got != c.want {
			t.Errorf("%+v:\n%s\nwant\n%s", c.o, got, c.want)
		}
	}
}

// Names and numbers of any size stay within 80 columns, and move no cursor.
func TestTextTableIsNarrow(t *testing.T) {
	var rows []Row
	for i, name := range []string{strings.Repeat("long ", 2000), "a\x1b[31m\nb\x00\u202e", "ü\u00a0ü", "x"} {
		r := emptyRow()
		r.Dataset, r.State, r.Points, r.PValue = name, "beyond-prefactor", 1000*i, 1e-300
		scale := math.Pow(10, float64(2*i+1))
		r.EChange, r.EChangeLower, r.EChangeUpper = -1.23456789*scale, -9.87654321*scale, 8.7654321*scale
		rows = append(rows, r)
		r.ErrorCode, r.Error, r.ErrorRow = "cell-not-a-number", name, 1_000_000
		rows = append(rows, r)
	}
	for _, line := range strings.Split(written(t, tableStore(t, rows), "text", TableOptions{}), "\n") {
		if n := len([]rune(line)); n > 80 {
			t.Errorf("%d columns: %s", n, line)
		}
		for _, r := range line {
			if r < ' ' || r == '\u202e' || r == '\u00a0' {
				t.Errorf("%q is in %q", r, line)
			}
		}
	}
}
