package survey

import (
	"encoding/csv"
	"io"
	"strconv"
	"strings"
	"unicode/utf8"
)

// unknownCell stands in CSV for a number that is not known: R, pandas and DuckDB take
// it for a missing value, and nobody takes it for 0.
const unknownCell = "NA"

// csvTable writes comma-separated values (RFC 4180, lines end with LF).
type csvTable struct {
	w      *csv.Writer
	values []any
	cells  []string
}

func newCSVTable(w io.Writer) tableWriter { return &csvTable{w: csv.NewWriter(w)} }

func (t *csvTable) begin() error { return t.w.Write(columns) }

func (t *csvTable) row(r *Row) error {
	t.values, t.cells = r.appendValues(t.values[:0]), t.cells[:0]
	for _, v := range t.values {
		t.cells = append(t.cells, csvCell(v))
	}
	return t.w.Write(t.cells)
}

func (t *csvTable) end(Tally) error {
	t.w.Flush()
	return t.w.Error()
}

func csvCell(v any) string {
	switch v := v.(type) {
	case string:
		return harmless(v)
	case int64:
		return strconv.FormatInt(v, 10)
	case float64:
		return strconv.FormatFloat(v, 'g', -1, 64)
	case bool:
		return strconv.FormatBool(v)
	}
	return unknownCell
}

// harmless keeps a spreadsheet from taking a text for a formula: an apostrophe in
// front. Some spreadsheets also drop blanks in front, or take the wide forms of the
// signs for the signs.
func harmless(s string) string {
	first, _ := utf8.DecodeRuneInString(strings.TrimLeft(s, " \u00a0\ufeff"))
	if strings.ContainsRune("=+-@＝＋－＠\t\r\n", first) {
		return "'" + s
	}
	return s
}
