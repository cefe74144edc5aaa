package dataset

import (
	"bufio"
	"encoding/csv"
	"io"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"
)

// Tidy writes a data set as CSV under canonical headings: the rows that take part
// and the limits. Read gives back the same T, k and uncertainties to the last bit.
func Tidy(w io.Writer, s *Set) error {
	q := s.Quantity
	var ps []*Point
	var hasUT, hasUK, hasSD, hasN, hasLimit, hasSource, hasDataset, hasOrder, hasNote bool
	extra := map[string]bool{}
	for i := range s.Points {
		p := &s.Points[i]
		if !p.Used && p.Limit == "" || math.IsNaN(p.T) || math.IsNaN(p.K) {
			continue
		}
		ps = append(ps, p)
		hasUT = hasUT || p.UT != 0
		hasSD = hasSD || p.SD != 0
		hasUK = hasUK || p.UK != 0 && p.SD == 0
		hasN = hasN || p.Repeats != 0
		hasLimit = hasLimit || p.Limit != ""
		hasSource = hasSource || p.Source != ""
		hasDataset = hasDataset || p.Dataset != ""
		hasOrder = hasOrder || !math.IsNaN(p.Order)
		hasNote = hasNote || p.Note != ""
		for h := range p.Extra {
			extra[h] = true
		}
	}

	unit := ""
	switch {
	case q.Unit == "":
	case strings.ContainsAny(q.Unit, " /()"):
		unit = "/(" + q.Unit + ")"
	default:
		unit = "/" + q.Unit
	}
	type output struct {
		heading string
		cell    func(*Point) string
	}
	number := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	positive := func(x float64) string {
		if x == 0 {
			return ""
		}
		return number(x)
	}
	cols := []output{
		{"T/K", func(p *Point) string { return number(p.T) }},
		{q.Symbol + unit, func(p *Point) string { return number(p.K) }},
	}
	add := func(has bool, heading string, cell func(*Point) string) {
		if has {
			cols = append(cols, output{heading, cell})
		}
	}
	// The standard deviation of repeats gives u(k) back; where some rows have
	// another kind of uncertainty, u(k) of every row is written.
	if hasSD && hasUK {
		hasSD = false
		hasUK = true
	}
	mean := "u"
	if hasUK && hasN {
		mean = "SE" // keeps the level of means of few repeats
	}
	add(hasUK, mean+"("+q.Symbol+")"+unit, func(p *Point) string { return positive(p.UK) })
	add(hasSD, "s("+q.Symbol+")"+unit, func(p *Point) string { return positive(p.SD) })
	add(hasN, "n", func(p *Point) string {
		if p.Repeats == 0 {
			return ""
		}
		return strconv.Itoa(p.Repeats)
	})
	add(hasUT, "u(T)/K", func(p *Point) string { return positive(p.UT) })
	add(hasLimit, "limit", func(p *Point) string { return p.Limit })
	add(hasSource, "source", func(p *Point) string { return p.Source })
	add(hasDataset, "dataset", func(p *Point) string { return p.Dataset })
	add(hasOrder, "order", func(p *Point) string {
		if math.IsNaN(p.Order) {
			return ""
		}
		return number(p.Order)
	})
	add(hasNote, "note", func(p *Point) string { return p.Note })
	for _, h := range slices.Sorted(maps.Keys(extra)) {
		if ParseHeading(h, nil).Role == RoleKept {
			add(true, h, func(p *Point) string { return p.Extra[h] })
		}
	}

	b := bufio.NewWriter(w)
	out := csv.NewWriter(b)
	row := make([]string, len(cols))
	for i, c := range cols {
		row[i] = c.heading
	}
	if err := out.Write(row); err != nil {
		return err
	}
	for _, p := range ps {
		for i, c := range cols {
			row[i] = c.cell(p)
		}
		if err := out.Write(row); err != nil {
			return err
		}
	}
	out.Flush()
	if err := out.Error(); err != nil {
		return err
	}
	return b.Flush()
}
