package survey

import (
	"context"
	"fmt"
	"slices"
	"strings"

	"onebarrier/cmd/internal/report"
)

// Standing is what a reader of q has to know of a store: whether all that was to be
// surveyed is in it, and whether measurements are in it more than once.
type Standing struct {
	// Missing says what is not there, "" where the survey is complete.
	Missing string
	// Copies counts the data sets whose content, as hashed, is that of one before them
	// in the order of the table; First is the first of these, and Of what it repeats.
	Copies    int
	First, Of Row
}

// Complete reports whether every part of the survey is there and done.
func (s Standing) Complete() bool { return s.Missing == "" }

// Standing reads it.
func (s *Store) Standing(ctx context.Context) (out Standing, err error) {
	shards, err := s.Shards()
	if err != nil {
		return out, err
	}
	out.Missing = missing(shards)
	return out, s.copies(ctx, &out)
}

// missing says what of a survey is not there. shards are in the order of N and K.
func missing(shards []Shard) string {
	var all []string
	for len(shards) > 0 {
		n, done := shards[0].N, 0
		inputs := map[string]bool{}
		end := slices.IndexFunc(shards, func(h Shard) bool { return h.N != n })
		if end < 0 {
			end = len(shards)
		}
		for _, h := range shards[:end] {
			if h.Done {
				done++
				inputs[h.Inputs] = true
			}
		}
		switch {
		case n == 1 && done == 0:
			all = append(all, "the run was not finished")
		case done < n:
			all = append(all, fmt.Sprintf("%d of %d parts are there and finished", done, n))
		case len(inputs) > 1:
			all = append(all, fmt.Sprintf("the %d parts are not of the same files", n))
		}
		shards = shards[end:]
	}
	return strings.Join(all, "; ")
}

// copies finds data sets of one content. A data set that could not be used is no copy:
// it counts nowhere.
func (s *Store) copies(ctx context.Context, out *Standing) error {
	const of = " FROM sets WHERE settings = ?1 AND error_code = ''"
	row := s.db.QueryRowContext(ctx, "SELECT count(*) - count(DISTINCT content)"+of, s.id)
	if err := row.Scan(&out.Copies); err != nil || out.Copies == 0 {
		return s.explain(err)
	}
	// Of the contents that are there twice, that whose second holder comes first.
	rows, err := s.db.QueryContext(ctx, "SELECT content, dataset, source_file, sheet"+of+
		" AND content IN (SELECT content"+of+" GROUP BY content HAVING count(*) > 1) ORDER BY "+order, s.id)
	if err != nil {
		return s.explain(err)
	}
	defer rows.Close()
	seen := map[Content]Row{}
	for rows.Next() {
		var content []byte
		var r Row
		if err := rows.Scan(&content, &r.Dataset, &r.SourceFile, &r.Sheet); err != nil {
			return s.explain(err)
		}
		if len(content) != len(Content{}) {
			return s.explain(errKeyLength)
		}
		if first, again := seen[Content(content)]; again {
			out.First, out.Of = r, first
			return nil
		}
		seen[Content(content)] = r
	}
	return s.explain(rows.Err())
}

// Sentences say it to a reader of q; none where there is nothing to say.
func (s Standing) Sentences() []string {
	var out []string
	if !s.Complete() {
		out = append(out, "NOT COMPLETE: "+s.Missing+". q is over what is there, and changes with the rest: give the same survey run or survey merge again.")
	}
	if s.Copies > 0 {
		have, each := "have", "each counts"
		if s.Copies == 1 {
			have, each = "has", "it counts"
		}
		out = append(out, fmt.Sprintf("%s %s the same data as another, the first %s as %s: %s by itself in q, so take copies out (--exclude).",
			report.Count(s.Copies, "data set"), have, s.First.place(), s.Of.place(), each))
	}
	return out
}

// place names a data set and where it is from.
func (r *Row) place() string {
	p := printable(r.SourceFile)
	if r.Sheet != "" {
		p += "[" + printable(r.Sheet) + "]"
	}
	if r.Dataset != "" {
		p = fmt.Sprintf("%q in %s", printable(r.Dataset), p)
	}
	return p
}

// sharedNames are the names that several data sets have.
func (s *Store) sharedNames(ctx context.Context) (map[string]bool, error) {
	rows, err := s.db.QueryContext(ctx, "SELECT dataset FROM sets WHERE settings = ? AND dataset <> '' GROUP BY dataset HAVING count(*) > 1", s.id)
	if err != nil {
		return nil, s.explain(err)
	}
	defer rows.Close()
	shared := map[string]bool{}
	for rows.Next() {
		var name string
		if err := rows.Scan(&name); err != nil {
			return nil, s.explain(err)
		}
		shared[name] = true
	}
	return shared, s.explain(rows.Err())
}
