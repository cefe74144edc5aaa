package workbook

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"io"
	"slices"

	"onebarrier/models/dataset"
)

// Each calls fn with every data set of every sheet, or of the one that was chosen:
// what is wrong with one data set or sheet does not touch the others. Sheets that hold
// no table of rate constants are passed over; where there is none the error, a
// dataset.Problems, says what each lacks. It stops at the first error of fn and
// returns it.
func Each(name string, data []byte, choice string, opt dataset.Options, fn func(sheet string, f dataset.Found) error) error {
	sum := sha256.Sum256(data)
	b, err := open(name, hex.EncodeToString(sum[:]), data)
	if err != nil {
		return err
	}
	infos := b.sheets
	if choice != "" {
		i, err := b.choose(choice)
		if err != nil {
			return err
		}
		infos = infos[i : i+1]
	}
	var lacking dataset.Problems
	tables := 0
	for _, info := range infos {
		found, err := b.each(info, opt)
		var ps dataset.Problems
		switch {
		case errors.As(err, &ps) && choice == "" && !holdsTable(ps):
			lacking = append(lacking, ps...)
			continue
		case errors.As(err, &ps):
			found = []dataset.Found{{Problems: ps}}
		case err != nil:
			return err
		}
		tables++
		for _, f := range found {
			if err := fn(info.name, f); err != nil {
				return err
			}
		}
	}
	if tables == 0 {
		return lacking
	}
	return nil
}

// each reads the data sets of one sheet.
func (b *book) each(info sheetInfo, opt dataset.Options) ([]dataset.Found, error) {
	stream, notices, dates, err := meaning(b, info, opt, (*dataset.Table).Stream)
	if err != nil {
		return nil, err
	}
	var found []dataset.Found
	for {
		f, err := stream.Next()
		if err == io.EOF {
			return found, nil
		}
		if err != nil {
			return nil, err
		}
		f.Problems = b.tellDates(f.Problems, dates)
		if f.Set != nil {
			for _, n := range notices {
				if len(n.Rows) > 0 { // those of this data set, if it has any of them
					n.Rows = slices.DeleteFunc(slices.Clone(n.Rows), func(line int) bool {
						return !slices.ContainsFunc(f.Set.Points, func(p dataset.Point) bool { return p.Row == line })
					})
					if len(n.Rows) == 0 {
						continue
					}
				}
				f.Set.Notices = append(f.Set.Notices, n)
			}
		}
		found = append(found, f)
	}
}
