package workbook

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"slices"
	"strconv"
	"strings"

	"onebarrier/models/dataset"
)

// Result is what one sheet gave: data sets, or problems.
type Result struct {
	Sheet    string
	Sets     []*dataset.Set
	Problems dataset.Problems
}

// noTable are the problems of sheets that hold no table of rate constants at all:
// notes, calibrations, charts.
var noTable = []string{"no-data", "no-heading", "no-temperature", "no-rate"}

// holdsTable reports whether a sheet with these problems holds a table of rate
// constants, be it with faults.
func holdsTable(ps dataset.Problems) bool {
	return !slices.ContainsFunc(ps, func(p dataset.Problem) bool { return slices.Contains(noTable, p.Code) })
}

// Read reads the data sets of one sheet, chosen by its name or its number from 1.
// Without a choice there must be one sheet that holds a table. name is the name of
// the file as the user gave it. Where the workbook cannot be used the error is a
// dataset.Problems.
func Read(name string, data []byte, choice string, opt dataset.Options) ([]*dataset.Set, error) {
	results, err := ReadAll(name, data, choice, opt)
	if err != nil {
		return nil, err
	}
	return One(name, results)
}

// One returns the data sets where one sheet holds a table.
func One(name string, results []Result) ([]*dataset.Set, error) {
	if len(results) > 1 {
		var names []string
		for _, r := range results {
			names = append(names, strconv.Quote(r.Sheet))
		}
		b := &book{name: name}
		return nil, dataset.Problems{b.problem(codeSeveral, "", 0, "%d sheets hold a table: %s", len(results), list(names))}
	}
	if ps := results[0].Problems; len(ps) > 0 {
		return nil, ps
	}
	return results[0].Sets, nil
}

// ReadAll reads every sheet that holds a table, or the one that was chosen. Where
// there is none the error, a dataset.Problems, says what each sheet lacks.
func ReadAll(name string, data []byte, choice string, opt dataset.Options) ([]Result, error) {
	sum := sha256.Sum256(data)
	b, err := open(name, hex.EncodeToString(sum[:]), data)
	if err != nil {
		return nil, err
	}
	infos := b.sheets
	if choice != "" {
		i, err := b.choose(choice)
		if err != nil {
			return nil, err
		}
		infos = infos[i : i+1]
	}
	var results []Result
	var others []string
	var lacking dataset.Problems
	for _, info := range infos {
		r := Result{Sheet: info.name}
		r.Sets, err = b.sets(info, opt)
		if err != nil && !errors.As(err, &r.Problems) {
			return nil, err
		}
		if choice == "" && !holdsTable(r.Problems) {
			others = append(others, strconv.Quote(info.name))
			lacking = append(lacking, r.Problems...)
			continue
		}
		results = append(results, r)
	}
	if len(results) == 0 {
		return nil, lacking
	}
	for _, r := range results {
		for _, s := range r.Sets {
			if len(others) > 0 {
				s.Notices = append(s.Notices, say(noteChosen, nil, "sheet %q was read; no table with a temperature and a rate constant is in %s", r.Sheet, list(others)))
			}
		}
	}
	return results, nil
}

// choose finds a sheet by its name, in any case, or by its number.
func (b *book) choose(choice string) (int, error) {
	for i, s := range b.sheets {
		if s.name == choice {
			return i, nil
		}
	}
	for i, s := range b.sheets {
		if strings.EqualFold(strings.TrimSpace(s.name), strings.TrimSpace(choice)) {
			return i, nil
		}
	}
	if n, err := strconv.Atoi(choice); err == nil && n >= 1 && n <= len(b.sheets) {
		return n - 1, nil
	}
	var names []string
	for _, s := range b.sheets {
		names = append(names, strconv.Quote(s.name))
	}
	return 0, dataset.Problems{b.problem(codeUnknown, "", 0, "there is no sheet %q; the workbook has %s", choice, list(names))}
}

// meaning gives the cells of one sheet their meaning by way of give, with what is to be
// said of the sheet and its dates.
func meaning[T any](b *book, info sheetInfo, opt dataset.Options, give func(*dataset.Table, dataset.Options) (T, error)) (v T, notices []dataset.Notice, dates map[int][]string, err error) {
	s, err := b.readSheet(info)
	if err != nil {
		return v, nil, nil, err
	}
	t, notices, err := b.table(s, opt.Decimal == "comma")
	if err != nil {
		return v, nil, nil, err
	}
	dates = s.dates()
	s.rows = nil // the table holds them
	v, err = give(t, opt)
	var ps dataset.Problems
	errors.As(err, &ps)
	if lacking := s.formulas.problem(b, s.name); lacking != nil && holdsTable(ps) {
		return v, nil, nil, lacking
	}
	if len(ps) > 0 {
		err = b.tellDates(ps, dates)
	}
	return v, notices, dates, err
}

// sets reads one sheet.
func (b *book) sets(info sheetInfo, opt dataset.Options) ([]*dataset.Set, error) {
	sets, notices, _, err := meaning(b, info, opt, (*dataset.Table).Sets)
	if err != nil {
		return nil, err
	}
	for _, set := range sets {
		for _, n := range notices {
			n.Rows = slices.Clone(n.Rows)
			set.Notices = append(set.Notices, n)
		}
	}
	return sets, nil
}

// dates lists the dates of a sheet by their rows.
func (s *sheet) dates() map[int][]string {
	m := map[int][]string{}
	for _, r := range s.rows {
		for _, c := range r.cells {
			if c.kind == isDate {
				m[r.line] = append(m[r.line], c.text)
			}
		}
	}
	return m
}

// tellDates says of cells that are not numbers which ones are dates.
func (b *book) tellDates(ps dataset.Problems, dates map[int][]string) dataset.Problems {
	for i, p := range ps {
		for _, d := range dates[p.Row] {
			if strings.Contains(p.Message, strconv.Quote(d)) {
				ps[i] = b.problem(codeDate, p.Sheet, p.Row, "the cell holds the date %s, not a number", d)
				ps[i].Column = p.Column
			}
		}
	}
	return ps
}

// list joins the first names.
func list(names []string) string {
	const most = 20
	if len(names) > most {
		return strings.Join(names[:most], ", ") + " and " + strconv.Itoa(len(names)-most) + " more"
	}
	return strings.Join(names, ", ")
}
