package workbook

import (
	"archive/zip"
	"bytes"
	"compress/flate"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"runtime"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"onebarrier/models/dataset"
)

// parts of the smallest workbook, without its cells.
var skeleton = map[string]string{
	"[Content_Types].xml":        `<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types"/>`,
	"_rels/.rels":                `<Relationships><Relationship Id="a" Type="http://x/officeDocument" Target="xl/workbook.xml"/></Relationships>`,
	"xl/workbook.xml":            `<workbook xmlns:r="r"><sheets><sheet name="Rates" r:id="b"/></sheets></workbook>`,
	"xl/_rels/workbook.xml.rels": `<Relationships><Relationship Id="b" Type="http://x/worksheet" Target="worksheets/sheet1.xml"/></Relationships>`,
}

// small makes a workbook of the skeleton and a sheet whose XML is written by fill.
func small(t testing.TB, fill func(io.Writer)) []byte {
	return packed(t, flate.BestSpeed, fill)
}

func packed(t testing.TB, level int, fill func(io.Writer)) []byte {
	t.Helper()
	var b bytes.Buffer
	w := zip.NewWriter(&b)
	w.RegisterCompressor(zip.Deflate, func(o io.Writer) (io.WriteCloser, error) { return flate.NewWriter(o, level) })
	for name, text := range skeleton {
		o, err := w.Create(name)
		must(t, err)
		_, err = io.WriteString(o, text)
		must(t, err)
	}
	o, err := w.Create("xl/worksheets/sheet1.xml")
	must(t, err)
	_, err = io.WriteString(o, "<worksheet>")
	must(t, err)
	fill(o)
	_, err = io.WriteString(o, "</worksheet>")
	must(t, err)
	must(t, w.Close())
	return b.Bytes()
}

// rates writes n rows of four columns below headings.
func rates(w io.Writer, n int) {
	fmt.Fprint(w, `<sheetData><row r="1"><c r="A1" t="inlineStr"><is><t>T/K</t></is></c><c r="B1" t="inlineStr"><is><t>k/s^-1</t></is></c>`+
		`<c r="C1" t="inlineStr"><is><t>u(k)/s^-1</t></is></c><c r="D1" t="inlineStr"><is><t>source</t></is></c></row>`)
	for i := range n {
		line := i + 2
		fmt.Fprintf(w, `<row r="%[1]d" spans="1:4"><c r="A%[1]d" s="1"><v>%.2[2]f</v></c><c r="B%[1]d" s="1"><v>%.15[3]g</v></c><c r="C%[1]d"><v>%.3[3]g</v></c><c r="D%[1]d" t="str"><v>Lab%[4]d</v></c></row>`,
			line, 280+0.01*float64(i%9000), 1e-5*float64(1+i%977)/7, i%3)
	}
	fmt.Fprint(w, `</sheetData>`)
}

// measured runs work and returns the most heap that was in use above the start, as
// seen every few milliseconds.
func measured(work func()) (peak uint64) {
	var m runtime.MemStats
	runtime.GC()
	runtime.ReadMemStats(&m)
	before := m.HeapAlloc
	done := make(chan bool)
	go func() { work(); close(done) }()
	for {
		select {
		case <-done:
			return peak
		case <-time.After(20 * time.Millisecond):
			runtime.ReadMemStats(&m)
			if m.HeapAlloc > before {
				peak = max(peak, m.HeapAlloc-before)
			}
		}
	}
}

func TestZipBombs(t *testing.T) {
	if testing.Short() || raceDetector {
		t.Skip("unfolds 64 MB several times; its bounds of memory are not for the race detector")
	}
	spaces := bytes.Repeat([]byte(" "), 1<<20)
	many := func(n int) func(io.Writer) {
		return func(w io.Writer) {
			for range n {
				_, err := w.Write(spaces)
				must(t, err)
			}
		}
	}
	nested := small(t, many(200))
	lying := bytes.Clone(small(t, many(200)))
	// The sizes in the directory are a claim: 200 MB that say they are 10 bytes.
	at := bytes.LastIndex(lying, []byte("xl/worksheets/sheet1.xml")) - 46 + 24
	binary.LittleEndian.PutUint32(lying[at:], 10)
	for _, c := range []struct {
		name string
		data []byte
		code string
	}{
		{"spaces between elements", nested, "workbook-too-large"},
		{"one long text", small(t, func(w io.Writer) {
			fmt.Fprint(w, `<sheetData><row r="1"><c r="A1" t="inlineStr"><is><t>`)
			many(200)(w)
			fmt.Fprint(w, `</t></is></c></row></sheetData>`)
		}), "workbook-too-large"},
		{"one long attribute", small(t, func(w io.Writer) {
			fmt.Fprint(w, `<sheetData a="`)
			many(200)(w)
			fmt.Fprint(w, `"/>`)
		}), "workbook-too-large"},
		{"a size that is a lie", lying, "workbook-damaged"},
		{"cells and no end", packed(t, flate.BestCompression, func(w io.Writer) {
			fmt.Fprint(w, `<sheetData>`)
			row := "<row>" + strings.Repeat(`<c><v>1</v></c>`, 2000) + "</row>"
			for range 3000 {
				_, err := io.WriteString(w, row)
				must(t, err)
			}
		}), "workbook-too-large"},
	} {
		var err error
		start := time.Now()
		peak := measured(func() { _, err = Read("bomb.xlsx", c.data, "", dataset.Options{}) })
		var ps dataset.Problems
		if !errors.As(err, &ps) || ps[0].Code != c.code || ps[0].Cure == "" {
			t.Errorf("%s: %v", c.name, err)
		}
		// 64 MB may be unfolded; a text that long doubles while it grows.
		if most := uint64(512 << 20); peak > most {
			t.Errorf("%s: %d MB of memory for a file of %d kB", c.name, peak>>20, len(c.data)>>10)
		}
		t.Logf("%s: %d kB, at most %d MB, %v", c.name, len(c.data)>>10, peak>>20, time.Since(start).Round(time.Millisecond))
	}
}

// Memory grows with the cells that are read, not with the size of the sheet around
// them.
func TestLargestSheets(t *testing.T) {
	if testing.Short() || raceDetector {
		t.Skip("reads a million rows; its bounds of memory are not for the race detector")
	}
	wide := func(w io.Writer) {
		fmt.Fprint(w, `<sheetData>`)
		for line := 1; line <= 6; line++ {
			fmt.Fprintf(w, `<row r="%d">`, line)
			for col := range dataset.MostColumns {
				name := columnName(col)
				switch {
				case line > 1:
					fmt.Fprintf(w, `<c r="%s%d"><v>%d</v></c>`, name, line, 280+10*line)
				case col == 0:
					fmt.Fprint(w, `<c r="A1" t="str"><v>T/K</v></c>`)
				case col == 1:
					fmt.Fprint(w, `<c r="B1" t="str"><v>k/s^-1</v></c>`)
				default:
					fmt.Fprintf(w, `<c r="%s1" t="str"><v>x%d</v></c>`, name, col)
				}
			}
			fmt.Fprint(w, `</row>`)
		}
		fmt.Fprint(w, `</sheetData>`)
	}
	for _, c := range []struct {
		name  string
		data  []byte
		used  int
		bytes uint64 // a cell
		cells int
	}{
		{"1048576 rows", small(t, func(w io.Writer) { rates(w, mostRows-1) }), mostRows - 1, 300, 4 * mostRows},
		{"16384 columns", small(t, wide), 5, 2000, 6 * dataset.MostColumns},
	} {
		var sets []*dataset.Set
		var err error
		start := time.Now()
		peak := measured(func() { sets, err = Read("large.xlsx", c.data, "", dataset.Options{}) })
		if err != nil || len(sets[0].UsedPoints()) != c.used {
			t.Fatalf("%s: %v", c.name, err)
		}
		if per := peak / uint64(c.cells); per > c.bytes {
			t.Errorf("%s: %d bytes a cell, at most %d", c.name, per, c.bytes)
		}
		t.Logf("%s: %d MB, at most %d MB of memory, %v", c.name, len(c.data)>>20, peak>>20, time.Since(start).Round(time.Millisecond))
	}
	// Rows and columns that are only formatted take nothing.
	empty := small(t, func(w io.Writer) {
		fmt.Fprint(w, `<cols><col min="1" max="16384" hidden="1"/></cols><sheetData>`)
		for line := 1; line <= mostRows; line++ {
			fmt.Fprintf(w, `<row r="%d" s="3" customFormat="1"><c s="3"/></row>`, line)
		}
		fmt.Fprint(w, `</sheetData>`)
	})
	var err error
	peak := measured(func() { _, err = Read("empty.xlsx", empty, "", dataset.Options{}) })
	if err == nil || !strings.Contains(err.Error(), "no rows") || peak > 64<<20 {
		t.Errorf("%d MB, %v", peak>>20, err)
	}
	// Merged cells that overlap a million times.
	overlapping := small(t, func(w io.Writer) {
		rates(w, 2000)
		fmt.Fprint(w, `<mergeCells>`, strings.Repeat(`<mergeCell ref="A2:A2001"/>`, 100_000), `</mergeCells>`)
	})
	if _, err := Read("merged.xlsx", overlapping, "", dataset.Options{}); err == nil || !strings.Contains(err.Error(), "overlap") {
		t.Error(err)
	}
}

// Bytes of any kind never panic, and what is refused has a code with a cure.
func FuzzWorkbook(f *testing.F) {
	f.Add(generated(f, func(x *excelize.File) { at(f, x, "A1", usual); at(f, x, "A2", five...) }))
	f.Add(small(f, func(w io.Writer) { rates(w, 3) }))
	f.Add([]byte("PK\x03\x04"))
	f.Add([]byte("\xD0\xCF\x11\xE0\xA1\xB1\x1A\xE1"))
	f.Fuzz(func(t *testing.T, data []byte) {
		check(t, data)
	})
}

// FuzzSheet reaches the cells, which the checksums of a zip file hide from a fuzzer.
func FuzzSheet(f *testing.F) {
	for _, s := range []string{
		`<sheetData><row r="1"><c r="A1" t="str"><v>T/K</v></c><c r="B1" t="str"><v>k/s^-1</v></c></row><row r="3" hidden="1"><c r="A3" s="1"><v>300</v></c><c r="B3"><f>1</f><v>1e-5</v></c></row></sheetData>`,
		`<cols><col min="1" max="2" hidden="1"/></cols><sheetData><row><c t="inlineStr"><is><r><rPr><vertAlign val="superscript"/></rPr><t>2</t></r><rPh><t>x</t></rPh></is></c><c t="b"><v>1</v></c><c t="e"><v>#N/A</v></c><c t="d"><v>2026-01-01</v></c></row></sheetData><mergeCells><mergeCell ref="A1:C4"/></mergeCells>`,
		`<sheetData><row><c t="str"><v># T/K</v></c><c t="str"><v>k/s^-1</v></c></row><row><c><v>300</v></c><c t="str"><v>1,5</v></c></row><row><c><v>310.5</v></c><c t="str"><v>_x0041_</v></c></row></sheetData>`,
	} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, sheet string) {
		check(t, packed(t, flate.NoCompression, func(w io.Writer) { _, _ = io.WriteString(w, sheet) }))
	})
}

func check(t *testing.T, data []byte) {
	before := bytes.Clone(data)
	known := dataset.Explanations()
	Is(data)
	_, err := Read("fuzz.xlsx", data, "", dataset.Options{})
	if !bytes.Equal(before, data) {
		t.Fatal("the bytes were changed")
	}
	if err == nil {
		return
	}
	var ps dataset.Problems
	if !errors.As(err, &ps) || len(ps) == 0 {
		t.Fatalf("%T: %v", err, err)
	}
	for _, p := range ps {
		if p.Cure == "" || p.Message == "" || known[p.Code].Code == "" {
			t.Fatalf("%+v", p)
		}
	}
}

func BenchmarkRead(b *testing.B) {
	const n = 50_000
	data := small(b, func(w io.Writer) { rates(w, n) })
	for b.Loop() {
		if _, err := Read("bench.xlsx", data, "", dataset.Options{}); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(n*float64(b.N)/b.Elapsed().Seconds(), "rows/s")
}

// The strings of excelize's iterator, kinds of cells and meaning left out.
func BenchmarkExcelizeRows(b *testing.B) {
	const n = 50_000
	data := generated(b, func(f *excelize.File) {
		w, err := f.NewStreamWriter("Sheet1")
		must(b, err)
		for i := range n {
			must(b, w.SetRow(fmt.Sprintf("A%d", i+1), []any{280.5, 1.5e-5 * float64(i), 1e-6, "Lab1"}))
		}
		must(b, w.Flush())
	})
	for b.Loop() {
		f, err := excelize.OpenReader(bytes.NewReader(data), excelize.Options{RawCellValue: true})
		must(b, err)
		rows, err := f.Rows("Sheet1")
		must(b, err)
		for rows.Next() {
			if _, err := rows.Columns(); err != nil {
				b.Fatal(err)
			}
		}
		must(b, rows.Close())
		must(b, f.Close())
	}
	b.ReportMetric(n*float64(b.N)/b.Elapsed().Seconds(), "rows/s")
}
