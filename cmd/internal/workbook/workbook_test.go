package workbook

import (
	"archive/zip"
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"onebarrier/models/dataset"
)

// generated makes a workbook, written by another program than the reader.
func generated(t testing.TB, fill func(f *excelize.File)) []byte {
	t.Helper()
	f := excelize.NewFile()
	fill(f)
	var b bytes.Buffer
	must(t, f.Write(&b))
	must(t, f.Close())
	return b.Bytes()
}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// at puts rows of cells into Sheet1, the first cell at a corner.
func at(t testing.TB, f *excelize.File, corner string, rows ...[]any) {
	t.Helper()
	on(t, f, "Sheet1", corner, rows...)
}

func on(t testing.TB, f *excelize.File, sheet, corner string, rows ...[]any) {
	t.Helper()
	col, line, err := excelize.CellNameToCoordinates(corner)
	must(t, err)
	for i, r := range rows {
		name, err := excelize.CoordinatesToCellName(col, line+i)
		must(t, err)
		must(t, f.SetSheetRow(sheet, name, &r))
	}
}

// shown gives cells a number format.
func shown(t testing.TB, f *excelize.File, format, from, to string) {
	t.Helper()
	id, err := f.NewStyle(&excelize.Style{CustomNumFmt: &format})
	must(t, err)
	must(t, f.SetCellStyle("Sheet1", from, to, id))
}

// patched replaces a text in a part of a workbook: what excelize cannot write.
func patched(t testing.TB, data []byte, part string, oldNew ...string) []byte {
	t.Helper()
	z, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	must(t, err)
	var out bytes.Buffer
	w := zip.NewWriter(&out)
	for _, p := range z.File {
		r, err := p.Open()
		must(t, err)
		b, err := io.ReadAll(r)
		must(t, err)
		if p.Name == part {
			for i := 0; i < len(oldNew); i += 2 {
				if !bytes.Contains(b, []byte(oldNew[i])) {
					t.Fatalf("%s holds no %s:\n%s", part, oldNew[i], b)
				}
			}
			b = []byte(strings.NewReplacer(oldNew...).Replace(string(b)))
		}
		o, err := w.Create(p.Name)
		must(t, err)
		_, err = o.Write(b)
		must(t, err)
	}
	must(t, w.Close())
	return out.Bytes()
}

// five are rows of invented rate constants: T/K, k/s^-1, u(k)/s^-1.
var five = [][]any{
	{293.15, 1.25e-5, 2e-7},
	{303.15, 3.5e-5, 4e-7},
	{313.15, 9.1e-5, 1e-6},
	{323.15, 2.24e-4, 3e-6},
	{333.15, 5.3e-4, 6e-6},
}

func head(cells ...any) []any { return cells }

var usual = head("T/K", "k/s^-1", "u(k)/s^-1")

// points writes T k u(k) of the points that are used.
func points(sets []*dataset.Set) string {
	var s []string
	for _, set := range sets {
		for _, p := range set.UsedPoints() {
			s = append(s, fmt.Sprintf("%.12g %.12g %.4g", p.T, p.K, p.UK))
		}
	}
	return strings.Join(s, "; ")
}

const fivePoints = "293.15 1.25e-05 2e-07; 303.15 3.5e-05 4e-07; 313.15 9.1e-05 1e-06; 323.15 0.000224 3e-06; 333.15 0.00053 6e-06"

// without drops the last number of each point: no uncertainty was stated.
func without(points string) string {
	var s []string
	for p := range strings.SplitSeq(points, "; ") {
		s = append(s, p[:strings.LastIndexByte(p, ' ')]+" 0")
	}
	return strings.Join(s, "; ")
}

// ugly are workbooks as they come, with what is expected of each: the points that
// are understood and a notice ("code: part of its message"), or the code of the
// problem, a part of its message and of its cure.
var ugly = []struct {
	name   string
	fill   func(t testing.TB, f *excelize.File)
	patch  []string // part of the file, then texts by turns old and new
	choice string
	opt    dataset.Options
	points string
	notice string
	code   string
	says   string
	cure   string
}{
	{name: "plain", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) }, points: fivePoints},
	{name: "begins at C5 below a title", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("Hydrolysis of an invented ester"))
		at(t, f, "C5", usual)
		at(t, f, "C6", five...)
	}, points: fivePoints, notice: "title-rows: line 1"},
	{name: "begins at C5, nothing else", fill: func(t testing.TB, f *excelize.File) { at(t, f, "C5", usual); at(t, f, "C6", five...) }, points: fivePoints},
	{name: "title merged over the columns", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("Kinetics of run 7"), usual)
		at(t, f, "A3", five...)
		must(t, f.MergeCell("Sheet1", "A1", "C1"))
	}, points: fivePoints, notice: "title-rows: line 1"},
	{name: "two heading rows, units below", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T", "k", "u(k)"), head("K", "s^-1", "s^-1"))
		at(t, f, "A3", five...)
	}, points: fivePoints, notice: "heading-rows-joined"},
	{name: "headings merged over two columns", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "Rate constant"), head(nil, "k/s^-1", "u(k)/s^-1"))
		must(t, f.MergeCell("Sheet1", "A1", "A2"))
		must(t, f.MergeCell("Sheet1", "B1", "C1"))
		at(t, f, "A3", five...)
	}, points: fivePoints, notice: "merged-cells: B1:C1"},
	{name: "temperature merged over repeats", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual, head(293.15, 1.25e-5, 2e-7), head(nil, 1.26e-5, 2e-7), head(303.15, 3.5e-5, 4e-7), head(nil, 3.6e-5, 4e-7))
		must(t, f.MergeCell("Sheet1", "A2", "A3"))
		must(t, f.MergeCell("Sheet1", "A4", "A5"))
	}, points: "293.15 1.25e-05 2e-07; 293.15 1.26e-05 2e-07; 303.15 3.5e-05 4e-07; 303.15 3.6e-05 4e-07", notice: "merged-cells: A2:A3, A4:A5"},
	{name: "shown with two decimals, in scientific form", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual, head(293.14999999999998, 1.2345678901e-5, 2.3456e-7), head(303.15678, 3.5e-5, 4e-7))
		shown(t, f, "0.00", "A2", "A3")
		shown(t, f, "0.0E+00", "B2", "C3")
	}, points: "293.15 1.2345678901e-05 2.346e-07; 303.15678 3.5e-05 4e-07"},
	{name: "uncertainty in per cent", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1", "u(k)"), head(300, 2e-5, 0.05), head(310, 4e-5, 0.025), head(320, 9e-5, 0.1))
		shown(t, f, "0%", "C2", "C4")
	}, points: "300 2e-05 1e-06; 310 4e-05 1e-06; 320 9e-05 9e-06", notice: "percent-cells: column C"},
	{name: "uncertainty in per cent, relative by its heading", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1", "u_r(k)/%"), head(300, 2e-5, 0.05), head(310, 4e-5, 0.025))
		shown(t, f, "0.0 %", "C2", "C3")
	}, points: "300 2e-05 1e-06; 310 4e-05 1e-06", notice: "percent-cells: column C"},
	{name: "rate constants in per cent", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1"), head(300, 0.05), head(310, 0.1))
		shown(t, f, "0%", "B2", "B3")
	}, code: "not-a-number", says: `"5%" is a percentage`},
	{name: "a rate that became a date", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1"), head(300, 2e-5), head(310, time.Date(2026, 2, 1, 0, 0, 0, 0, time.UTC)))
	}, code: "date-cell", says: "the date 2026-02-01, not a number", cure: "type the number anew"},
	{name: "a date as label", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1", "source"))
		for i, r := range five {
			at(t, f, "A"+strconv.Itoa(i+2), head(r[0], r[1], time.Date(2026, 3, 1+i, 0, 0, 0, 0, time.UTC)))
		}
	}, points: without(fivePoints)},
	{name: "numbers stored as text", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual, head("293.15", "1.25e-5", "2e-7"), head(303.15, "3.5×10^-5", "4E-7"))
	}, points: "293.15 1.25e-05 2e-07; 303.15 3.5e-05 4e-07"},
	{name: "decimal commas in cells of text", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual, head(293.125, "1,25e-5", 1.234e-7), head(303.15, "3,5e-5", "4,0e-7"))
	}, points: "293.125 1.25e-05 1.234e-07; 303.15 3.5e-05 4e-07"},
	{name: "--decimal comma and cells of numbers", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) },
		opt: dataset.Options{Decimal: "comma"}, points: fivePoints},
	{name: "points and commas in cells of text", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual, head(293.15, "1,25e-5", "2.5e-7"), head(303.15, "3,5e-5", "4.5e-7"))
	}, code: "mixed-decimal-marks", cure: "mend the 2 cells with a decimal comma"},
	{name: "formulas with stored results", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) },
		patch: []string{"xl/worksheets/sheet1.xml", `<c r="A2"><v>293.15</v></c>`, `<c r="A2"><f>20+273.15</f><v>293.14999999999998</v></c>`}, points: fivePoints},
	{name: "formula without its result", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual, head(nil, 1.25e-5, 2e-7), head(303.15, 3.5e-5, 4e-7), head(nil, 9.1e-5, 1e-6))
		must(t, f.SetCellFormula("Sheet1", "A2", "20+273.15"))
		must(t, f.SetCellFormula("Sheet1", "A4", "40+273.15"))
	}, code: "formula-without-value", says: "A2, A4", cure: "open the workbook in a spreadsheet program and save it"},
	{name: "formula without its result, an empty element", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) },
		patch: []string{"xl/worksheets/sheet1.xml", `<c r="A2"><v>293.15</v></c>`, `<c r="A2"><f>20+273.15</f><v></v></c>`}, code: "formula-without-value", says: "A2"},
	{name: "formula with an empty text", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", append(usual, "note")); at(t, f, "A2", five...) },
		patch:  []string{"xl/worksheets/sheet1.xml", `<c r="C2"><v>0.0000002</v></c>`, `<c r="C2"><v>0.0000002</v></c><c r="D2" t="str"><f>IF(A2&gt;1,"","x")</f><v></v></c>`},
		points: fivePoints},
	{name: "error cells, also such as text tables do not know", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) },
		patch: []string{"xl/worksheets/sheet1.xml", `<c r="B3"><v>0.000035</v></c>`, `<c r="B3" t="e"><f>1/0</f><v>#DIV/0!</v></c>`,
			`<c r="A4"><v>313.15</v></c>`, `<c r="A4" t="e"><v>#SPILL!</v></c>`},
		points: "293.15 1.25e-05 2e-07; 323.15 0.000224 3e-06; 333.15 0.00053 6e-06", notice: "rows-without-value: line 3: no rate constant"},
	{name: "booleans", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1", "dry"), head(300, 1e-5, true), head(310, 3e-5, false))
	}, opt: dataset.Options{Where: []string{"dry=TRUE"}}, points: "300 1e-05 0"},
	{name: "raised exponents in rich text", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", nil, nil))
		raised := &excelize.Font{VertAlign: "superscript"}
		must(t, f.SetCellRichText("Sheet1", "B1", []excelize.RichTextRun{{Text: "10"}, {Text: "5", Font: raised}, {Text: " k/s"}, {Text: "−1", Font: raised}}))
		at(t, f, "A2", head(300, 1.5), head(310, 4))
	}, points: "300 1.5e-05 0; 310 4e-05 0"},
	{name: "hidden rows and columns", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual)
		at(t, f, "A2", five...)
		must(t, f.SetRowVisible("Sheet1", 3, false))
		must(t, f.SetRowVisible("Sheet1", 5, false))
		must(t, f.SetColVisible("Sheet1", "C", false))
	}, points: fivePoints, notice: "hidden-cells: 2 hidden rows, 1 hidden column (column C)"},
	{name: "hidden sheet", fill: func(t testing.TB, f *excelize.File) {
		_, err := f.NewSheet("Rates")
		must(t, err)
		on(t, f, "Rates", "A1", usual)
		on(t, f, "Rates", "A2", five...)
		must(t, f.SetSheetVisible("Rates", false))
	}, points: fivePoints, notice: "hidden-cells: a hidden sheet"},
	{name: "comment rows, a blank row, a remark below", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("# measured by nobody", "in 2026"), usual)
		at(t, f, "A3", five...)
		at(t, f, "A9", head("# below"), head("checked", "twice"))
	}, points: fivePoints, notice: "rows-after-table: line 10"},
	{name: "headings in a comment row", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("# T/K", "k/s^-1", "u(k)/s^-1"))
		at(t, f, "A2", five...)
	}, points: fivePoints, notice: "heading-in-comment: line 1"},
	{name: "numbers of rows under #", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("#", "T/K", "k/s^-1"), head(1, 300, 1e-5), head(2, 310, 3e-5))
	}, points: "300 1e-05 0; 310 3e-05 0", notice: "heading-in-comment: line 1"},
	{name: "formulas without results in a sheet without a table", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual)
		at(t, f, "A2", five...)
		_, err := f.NewSheet("Summary")
		must(t, err)
		on(t, f, "Summary", "A1", head("slope", "intercept"), head(1, 2))
		must(t, f.SetCellFormula("Summary", "C2", "A2*8.314"))
	}, points: fivePoints, notice: "sheet-chosen"},
	{name: "notes, a chart and another sheet", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", usual)
		at(t, f, "A2", five...)
		must(t, f.AddComment("Sheet1", excelize.Comment{Cell: "A1", Author: "x", Paragraph: []excelize.RichTextRun{{Text: "checked"}}}))
		must(t, f.AddChart("Sheet1", "F1", &excelize.Chart{Type: excelize.Scatter, Series: []excelize.ChartSeries{{Categories: "Sheet1!$A$2:$A$6", Values: "Sheet1!$B$2:$B$6"}}}))
		must(t, f.AddChartSheet("Plot", &excelize.Chart{Type: excelize.Scatter, Series: []excelize.ChartSeries{{Categories: "Sheet1!$A$2:$A$6", Values: "Sheet1!$B$2:$B$6"}}}))
		_, err := f.NewSheet("Remarks")
		must(t, err)
		on(t, f, "Remarks", "A1", head("nothing", "here"), head("but", "words"))
	}, points: fivePoints, notice: `sheet-chosen: sheet "Sheet1" was read; no table with a temperature and a rate constant is in "Remarks"`},
	{name: "two sheets with tables", fill: twoSheets, code: "several-sheets", says: `"Sheet1", "Run 2"`, cure: "choose one: --sheet NAME"},
	{name: "sheet by name", fill: twoSheets, choice: "Run 2", points: "300 1e-05 0; 310 3e-05 0"},
	{name: "sheet by name in other case", fill: twoSheets, choice: "run 2", points: "300 1e-05 0; 310 3e-05 0"},
	{name: "sheet by number", fill: twoSheets, choice: "2", points: "300 1e-05 0; 310 3e-05 0"},
	{name: "unknown sheet", fill: twoSheets, choice: "Run 3", code: "sheet-unknown", says: `the workbook has "Sheet1", "Run 2"`, cure: "names listed"},
	{name: "sheet number 0", fill: twoSheets, choice: "0", code: "sheet-unknown"},
	{name: "nothing at all", fill: func(testing.TB, *excelize.File) {}, code: "no-data"},
	{name: "days from 1904", fill: func(t testing.TB, f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1"), head(300, 1e-5), head(310, 43862))
		shown(t, f, "yyyy\\-mm\\-dd", "B3", "B3")
		yes := true
		must(t, f.SetWorkbookProps(&excelize.WorkbookPropsOptions{Date1904: &yes}))
	}, code: "date-cell", says: "2024-02-02"}, // 1904-01-01 + 43862 d: date -d '1904-01-01 + 43862 days' (GNU)
	{name: "cells far apart", fill: func(t testing.TB, f *excelize.File) { at(t, f, "A1", usual) },
		patch: []string{"xl/worksheets/sheet1.xml", "</sheetData>", farApart(400) + "</sheetData>"},
		code:  "cells-scattered", says: "A to XFD", cure: "next to each other"},
}

// farApart are rows with a cell at both ends of the widest sheet.
func farApart(n int) string {
	var b strings.Builder
	for i := range n {
		fmt.Fprintf(&b, `<row r="%[1]d"><c r="A%[1]d"><v>300</v></c><c r="XFD%[1]d"><v>1</v></c></row>`, i+2)
	}
	return b.String()
}

func twoSheets(t testing.TB, f *excelize.File) {
	at(t, f, "A1", usual)
	at(t, f, "A2", five...)
	_, err := f.NewSheet("Run 2")
	must(t, err)
	on(t, f, "Run 2", "A1", head("T/K", "k/s^-1"), head(300, 1e-5), head(310, 3e-5))
}

func TestUglyWorkbooks(t *testing.T) {
	for _, c := range ugly {
		t.Run(c.name, func(t *testing.T) {
			data := generated(t, func(f *excelize.File) { c.fill(t, f) })
			if c.patch != nil {
				data = patched(t, data, c.patch[0], c.patch[1:]...)
			}
			if !Is(data) {
				t.Fatal("is no workbook")
			}
			sets, err := Read("book.xlsx", data, c.choice, c.opt)
			var ps dataset.Problems
			if err != nil && !errors.As(err, &ps) {
				t.Fatalf("%T: %v", err, err)
			}
			if got := points(sets); got != c.points {
				t.Errorf("points\n%s, want\n%s", got, c.points)
			}
			code := ""
			if len(ps) > 0 {
				code = ps[0].Code
				if ps[0].File != "book.xlsx" || ps[0].Cure == "" || !strings.Contains(ps[0].Message, c.says) || !strings.Contains(ps[0].Cure, c.cure) {
					t.Errorf("%+v, want it to say %q and to advise %q", ps[0], c.says, c.cure)
				}
			}
			if code != c.code {
				t.Errorf("problem %q, want %q: %v", code, c.code, err)
			}
			if c.notice == "" {
				return
			}
			want, says, _ := strings.Cut(c.notice, ": ")
			var all []string
			for _, s := range sets {
				for _, n := range s.Notices {
					all = append(all, n.Code+": "+n.Message)
					if n.Code == want && strings.Contains(n.Message, says) {
						return
					}
				}
			}
			t.Errorf("no notice %q among %q", c.notice, all)
		})
	}
}

// The sheet, the row and the column of a problem are told, and the file by its hash.
func TestWhereAProblemIs(t *testing.T) {
	data := generated(t, func(f *excelize.File) {
		at(t, f, "B3", head("T/K", "k/s^-1", "source"), head(300, 1e-5, "a"), head(310, "?", "b"))
	})
	_, err := Read("book.xlsx", data, "", dataset.Options{})
	if want := `book.xlsx[Sheet1]:5: column "k/s^-1": "?" is not a number; `; err == nil || !strings.HasPrefix(err.Error(), want) {
		t.Errorf("%v, want %s…", err, want)
	}
	sets, err := Read("book.xlsx", data, "", dataset.Options{LeaveOut: []int{5}})
	must(t, err)
	s := sets[0]
	// sha256sum of the same bytes is what crypto/sha256 gives; its length is checked.
	if s.Name != "book/Sheet1" || len(s.SHA256) != 64 || s.Points[0].Row != 4 || s.Files[0] != "book.xlsx" {
		t.Errorf("%+v", s)
	}
}

// Labels that are dates are written as ISO 8601.
func TestDateLabels(t *testing.T) {
	data := generated(t, func(f *excelize.File) {
		at(t, f, "A1", head("T/K", "k/s^-1", "source"),
			head(300, 1e-5, time.Date(2026, 3, 1, 0, 0, 0, 0, time.UTC)), head(310, 2e-5, time.Date(2026, 3, 2, 14, 30, 0, 0, time.UTC)), head(320, 3e-5, "Lab3"))
	})
	sets, err := Read("book.xlsx", data, "", dataset.Options{})
	must(t, err)
	var got []string
	for _, p := range sets[0].Points {
		got = append(got, p.Source)
	}
	if s := strings.Join(got, " "); s != "2026-03-01 2026-03-02T14:30:00 Lab3" {
		t.Error(s)
	}
}

// Serial numbers of days, from ECMA-376-1, 18.17.4.1 and the GNU command date
// (date -d '1899-12-30 + 45000 days').
func TestISODate(t *testing.T) {
	for _, c := range []struct {
		serial   float64
		from1904 bool
		want     string
	}{
		{1, false, "1900-01-01"}, {59, false, "1900-02-28"}, {61, false, "1900-03-01"},
		{45000, false, "2023-03-15"}, {2958465, false, "9999-12-31"}, {45000.5, false, "2023-03-15T12:00:00"},
		{0, true, "1904-01-01"}, {43862, true, "2024-02-02"}, {0.25, false, "06:00:00"},
	} {
		if got, ok := isoDate(c.serial, c.from1904); got != c.want || !ok {
			t.Errorf("%g: %s, want %s", c.serial, got, c.want)
		}
	}
	for _, x := range []float64{-1, 2958466, math.NaN(), math.Inf(1)} {
		if s, ok := isoDate(x, false); ok {
			t.Errorf("%g is %s", x, s)
		}
	}
}

func TestFormatOf(t *testing.T) {
	for code, want := range map[string]format{
		"General": plain, "0.00": plain, "0.00E+00": plain, "#,##0.0": plain, `0.0" s"`: plain, `0.0\ \d`: plain, "[Red]0.0": plain, "[$-409]0": plain,
		"0%": percent, "0.00 %;-0.00 %": percent, `0"%"`: plain,
		"yyyy-mm-dd": date, "d/m": date, "[h]:mm": date, "[$-409]mmm\\ d": date, "hh:mm:ss": date, "0;d": plain, `"`: plain, "[": plain, `\`: plain,
	} {
		if got := formatOf(code); got != want {
			t.Errorf("%s: %d, want %d", code, got, want)
		}
	}
}

// ECMA-376-1, 18.8.30: the formats that need no code.
func TestBuiltIn(t *testing.T) {
	for want, ids := range map[format][]int{
		plain:   {-1, 0, 1, 2, 3, 4, 11, 12, 13, 23, 37, 38, 39, 40, 48, 49, 164},
		percent: {9, 10},
		date:    {14, 15, 16, 17, 18, 19, 20, 21, 22, 27, 36, 45, 46, 47, 50, 58},
	} {
		for _, id := range ids {
			if got := builtIn(id); got != want {
				t.Errorf("%d: %d, want %d", id, got, want)
			}
		}
	}
}

// Runs are joined, raised exponents marked, phonetic runs left out.
func TestRichText(t *testing.T) {
	data := patched(t, generated(t, func(f *excelize.File) { at(t, f, "A1", head("heading")) }), "xl/sharedStrings.xml", "<t>heading</t>",
		`<r><t xml:space="preserve">k/(cm</t></r><r><rPr><vertAlign val="superscript"/></rPr><t>3</t></r><r><t xml:space="preserve"> s</t></r>`+
			`<r><rPr><vertAlign val="superscript"/></rPr><t>−1</t></r><r><t>) of </t></r><r><rPr><vertAlign val="superscript"/></rPr><t>note</t></r>`+
			`<rPh sb="0" eb="1"><t>phonetic</t></rPh>`)
	b, err := open("book.xlsx", "", data)
	must(t, err)
	s, err := b.readSheet(b.sheets[0])
	must(t, err)
	if got, want := s.rows[0].cells[0].text, "k/(cm^3 s^−1) of note"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
}

func TestNumeral(t *testing.T) {
	for _, c := range []struct {
		x        float64
		shift    int
		unmarked bool
		want     string
	}{
		{0.05, 2, false, "5"}, {0.0512, 2, false, "5.12"}, {0.000512, 2, false, "0.0512"}, {-0.05, 2, false, "-5"}, {3, 2, false, "300"}, {0, 2, false, "0"},
		{1e-30, 2, false, "1e-28"}, {298.15, 0, true, "29815e-2"}, {-1.25e-5, 0, true, "-125e-7"}, {300, 0, true, "3e2"}, {0.125, 2, true, "125e-1"},
	} {
		got := numeral(c.x, c.shift, c.unmarked)
		if got != c.want {
			t.Errorf("%g: %s, want %s", c.x, got, c.want)
		}
		for _, mark := range []byte{'.', ','} {
			if y := dataset.ParseCell(got, mark, -c.shift); (c.unmarked || mark == '.') && y.Value != c.x {
				t.Errorf("%s is read as %g, want %g", got, y.Value, c.x)
			}
		}
	}
}

func TestCellNames(t *testing.T) {
	for _, name := range []string{"A1", "Z9", "AA10", "AZ100", "XFD1048576"} {
		col, line, err := excelize.CellNameToCoordinates(name)
		must(t, err)
		c, l, ok := parseCell(name)
		if c != col-1 || l != line-1 || !ok || columnName(c)+strconv.Itoa(l+1) != name {
			t.Errorf("%s: %d %d %t, %s", name, c, l, ok, columnName(c))
		}
	}
	for _, name := range []string{"", "A", "1", "A0", "XFE1", "A1048577", "1A", "A1B", "A-1", "AAAAAAAAAAAAAAAAAAAAAAAA1", "A99999999999999999999"} {
		if _, _, ok := parseCell(name); ok {
			t.Errorf("%q is a name of a cell", name)
		}
	}
}

// Every text that a cell can hold comes out as excelize reads it.
func TestTexts(t *testing.T) {
	texts := []string{"a & b < c", "_x0041_ stays", "µ ° ± λ 中", " spaces ", "two\nlines", "tab\there", strings.Repeat("x", 32767), "'3", "=1"}
	data := generated(t, func(f *excelize.File) {
		for i, s := range texts {
			must(t, f.SetCellStr("Sheet1", "A"+strconv.Itoa(i+1), s))
		}
	})
	f, err := excelize.OpenReader(bytes.NewReader(data))
	must(t, err)
	b, err := open("book.xlsx", "", data)
	must(t, err)
	s, err := b.readSheet(b.sheets[0])
	must(t, err)
	if len(s.rows) != len(texts) {
		t.Fatalf("%d rows", len(s.rows))
	}
	for i := range texts {
		want, err := f.GetCellValue("Sheet1", "A"+strconv.Itoa(i+1))
		must(t, err)
		if want = strings.Join(strings.Fields(want), " "); s.rows[i].cells[0].text != want {
			t.Errorf("%q, want %q", s.rows[i].cells[0].text, want)
		}
	}
}

func TestOtherFiles(t *testing.T) {
	zipped := func(name, content string) []byte {
		var b bytes.Buffer
		w := zip.NewWriter(&b)
		o, err := w.CreateHeader(&zip.FileHeader{Name: name, Method: zip.Store})
		must(t, err)
		_, err = io.WriteString(o, content)
		must(t, err)
		must(t, w.Close())
		return b.Bytes()
	}
	ole := "\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1" + strings.Repeat("\x00", 504)
	encrypted := ole
	for _, r := range "EncryptedPackage" {
		encrypted += string(r) + "\x00"
	}
	good := generated(t, func(f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) })
	for _, c := range []struct {
		name, code, says string
		data             []byte
	}{
		{"xls", "workbook-format", ".xls", []byte(ole)},
		{"protected", "workbook-encrypted", "password", []byte(encrypted)},
		{"ods", "workbook-format", ".ods", zipped("mimetype", "application/vnd.oasis.opendocument.spreadsheet")},
		{"xlsb", "workbook-format", ".xlsb", zipped("xl/workbook.bin", "")},
		{"no workbook part", "workbook-damaged", "workbook.xml", zipped("xl/styles.xml", "<styleSheet/>")},
		{"cut short", "workbook-damaged", "parts", good[:len(good)/2]},
		{"no workbook, but a zip", "", "", zipped("readme.txt", "hello")},
		{"text", "", "", []byte("T/K,k/s^-1\n300,1\n")},
		{"nothing", "", "", nil},
	} {
		if Is(c.data) != (c.code != "") {
			t.Errorf("%s: is a workbook: %t", c.name, Is(c.data))
		}
		if c.code == "" {
			continue
		}
		_, err := Read("-", c.data, "", dataset.Options{})
		var ps dataset.Problems
		if !errors.As(err, &ps) || ps[0].Code != c.code || !strings.Contains(ps[0].Message, c.says) || ps[0].Cure == "" {
			t.Errorf("%s: %v", c.name, err)
		}
	}
	// A workbook that a real program protects is refused.
	f := excelize.NewFile()
	var b bytes.Buffer
	must(t, f.Write(&b, excelize.Options{Password: "secret"}))
	_, err := Read("-", b.Bytes(), "", dataset.Options{})
	if err == nil || !strings.Contains(err.Error(), "protected by a password; save it without a password") {
		t.Errorf("protected: %v", err)
	}
}

// Parts that contradict the format are refused, each by what is wrong.
func TestDamagedParts(t *testing.T) {
	good := generated(t, func(f *excelize.File) { at(t, f, "A1", usual); at(t, f, "A2", five...) })
	const sheet1 = "xl/worksheets/sheet1.xml"
	for _, c := range []struct {
		name, part, old, new, says string
	}{
		{"text not there", sheet1, `<c r="A1" t="s"><v>0</v>`, `<c r="A1" t="s"><v>9</v>`, "A1 refers to a text that is not there"},
		{"rows out of order", sheet1, `<row r="3">`, `<row r="1">`, `row "1" after row 2`},
		{"row beyond the last", sheet1, `<row r="6">`, `<row r="1048577">`, "row"},
		{"cells out of order", sheet1, `<c r="B2">`, `<c r="A2">`, `cell "A2"`},
		{"cell of another row", sheet1, `<c r="B2">`, `<c r="B3">`, `cell "B3"`},
		{"ends early", sheet1, `</sheetData>`, `</sheetData><x>`, "ends early"},
		{"no XML", sheet1, `<row r="2">`, `<row r="2`, "syntax error"},
		{"another encoding", sheet1, `encoding="UTF-8"`, `encoding="EBCDIC"`, "EBCDIC"},
		{"merged nonsense", sheet1, `</sheetData>`, `</sheetData><mergeCells><mergeCell ref="A0:B"/></mergeCells>`, "merged cells"},
		{"part not there", "xl/_rels/workbook.xml.rels", "worksheets/sheet1.xml", "worksheets/sheet7.xml", "no part"},
		{"no sheets", "xl/workbook.xml", "<sheets>", "<sheets/><!--", ""},
	} {
		data := good
		if c.name == "no sheets" {
			data = patched(t, good, c.part, c.old, c.new, "</sheets>", "-->")
		} else {
			data = patched(t, good, c.part, c.old, c.new)
		}
		_, err := Read("-", data, "", dataset.Options{})
		var ps dataset.Problems
		if !errors.As(err, &ps) || (ps[0].Code != codeDamaged && c.says != "") || !strings.Contains(ps[0].Message, c.says) {
			t.Errorf("%s: %v", c.name, err)
		}
	}
}

// A workbook whose stored bytes were changed is refused by its checksum: no row is
// lost unseen. Changes that do not matter are those in parts that are not read.
func TestFlippedBytes(t *testing.T) {
	good := generated(t, func(f *excelize.File) {
		at(t, f, "A1", usual)
		for i := range 200 {
			at(t, f, "A"+strconv.Itoa(i+2), head(280+0.25*float64(i), 1e-5*math.Exp(float64(i)/50), 1e-6))
		}
	})
	sets, err := Read("-", good, "", dataset.Options{})
	must(t, err)
	want := points(sets)
	read := 0
	for i := 0; i < len(good); i += 7 {
		bad := bytes.Clone(good)
		bad[i] ^= 0x55
		if !Is(bad) {
			continue
		}
		sets, err := Read("-", bad, "", dataset.Options{})
		if err != nil {
			continue
		}
		if read++; points(sets) != want {
			t.Errorf("byte %d: other points are read", i)
		}
	}
	t.Logf("%d of %d changes did not matter", read, len(good)/7)
}
