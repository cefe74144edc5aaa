package survey

import (
	"bytes"
	"encoding/json"

	"onebarrier/cmd/internal/report"
	"onebarrier/models/dataset"
)

// problemsDocument is what the store keeps of a data set that could not be used, in
// place of an assessment: the row has the first problem alone.
func problemsDocument(ps dataset.Problems) []byte {
	doc := report.Problems{Schema: report.ProblemsSchema, Problems: report.DataProblems(ps)}
	var b bytes.Buffer
	if err := report.JSON(&b, doc); err != nil {
		return nil // the row says what is wrong
	}
	return b.Bytes()
}

// ProblemsOf reads the problems from what the store keeps of a data set, nil where it
// keeps none.
func ProblemsOf(document []byte) dataset.Problems {
	var doc report.Problems
	if document == nil || json.Unmarshal(document, &doc) != nil || doc.Schema != report.ProblemsSchema {
		return nil
	}
	var ps dataset.Problems
	for _, p := range doc.Problems {
		q := dataset.Problem{Code: p.Code, File: p.File, Sheet: p.Sheet, Column: p.Column, Message: p.Message, Cure: p.Cure}
		if p.Row != nil {
			q.Row = *p.Row
		}
		ps = append(ps, q)
	}
	return ps
}
