package report

import (
	"encoding/csv"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"onebarrier/models/dataset"
)

// WriteTidy writes the rows of data sets as understood: one table under canonical
// headings, T in K and k in one unit. Rows that are not used are left out, but
// for bounds, which have a column of their own. Columns that no row fills are
// not written. The sets must measure one quantity in one unit.
func WriteTidy(w io.Writer, sets []*dataset.Set) error {
	q := sets[0].Quantity
	number := func(x float64) string {
		if x == 0 || math.IsNaN(x) {
			return "" // not stated
		}
		return strconv.FormatFloat(x, 'g', -1, 64)
	}
	per := func(symbol string) string {
		switch {
		case q.Unit == "":
			return symbol
		case strings.ContainsAny(q.Unit, " /"):
			return symbol + "/(" + q.Unit + ")"
		}
		return symbol + "/" + q.Unit
	}
	standard := func(p dataset.Point) bool { return p.Level != dataset.LevelRepeats }
	type column struct {
		heading string
		cell    func(dataset.Point) string
	}
	columns := []column{
		{"dataset", func(p dataset.Point) string { return p.Dataset }},
		{"T/K", func(p dataset.Point) string { return number(p.T) }},
		{"u(T)/K", func(p dataset.Point) string { return number(p.UT) }},
		{per(q.Symbol), func(p dataset.Point) string { return strconv.FormatFloat(p.K, 'g', -1, 64) }},
		{per("u(" + q.Symbol + ")"), func(p dataset.Point) string {
			if !standard(p) {
				return ""
			}
			return number(p.UK)
		}},
		{per("s(" + q.Symbol + ")"), func(p dataset.Point) string {
			if standard(p) {
				return ""
			}
			return number(p.SD)
		}},
		{"n", func(p dataset.Point) string {
			if standard(p) {
				return ""
			}
			return strconv.Itoa(p.Repeats)
		}},
		{"limit", func(p dataset.Point) string { return p.Limit }},
		{"source", func(p dataset.Point) string { return p.Source }},
		{"order", func(p dataset.Point) string { return number(p.Order) }},
		{"note", func(p dataset.Point) string { return p.Note }},
	}
	var kept []string
	var points []dataset.Point
	for _, s := range sets {
		for _, c := range s.Columns {
			if c.Role == "kept" && !slices.Contains(kept, c.Heading) {
				kept = append(kept, c.Heading)
			}
		}
		for _, p := range s.Points {
			if p.Used || p.Limit != "" {
				points = append(points, p)
			}
		}
	}
	for _, h := range kept {
		columns = append(columns, column{h, func(p dataset.Point) string { return p.Extra[h] }})
	}
	columns = slices.DeleteFunc(columns, func(c column) bool {
		return !slices.ContainsFunc(points, func(p dataset.Point) bool { return c.cell(p) != "" })
	})

	out := csv.NewWriter(w)
	record := make([]string, len(columns))
	for i, c := range columns {
		record[i] = c.heading
	}
	out.Write(record)
	for _, p := range points {
		for i, c := range columns {
			record[i] = c.cell(p)
		}
		out.Write(record)
	}
	out.Flush()
	return out.Error()
}
