package report

import (
	"bytes"
	"encoding/json"
	"io"

	"onebarrier/models/dataset"
)

// ProblemsSchema names the layout of the document that stands for an answer
// when there is none.
const ProblemsSchema = "onebarrier.problems/1"

// Problem is one reason why there is no answer. Row is nil where a problem is not
// about one row.
type Problem struct {
	Code    string `json:"code"`
	File    string `json:"file"`
	Sheet   string `json:"sheet"`
	Row     *int   `json:"row"`
	Column  string `json:"column"`
	Message string `json:"message"`
	Cure    string `json:"cure"`
}

// Problems is the document of a command that failed.
type Problems struct {
	Schema   string    `json:"schema"`
	Problems []Problem `json:"problems"`
}

// DataProblems are the entries of a document for what is wrong with data.
func DataProblems(data dataset.Problems) []Problem {
	ps := make([]Problem, len(data))
	for i, p := range data {
		ps[i] = Problem{Code: p.Code, File: p.File, Sheet: p.Sheet, Column: p.Column, Message: p.Message, Cure: p.Cure}
		if p.Row > 0 {
			ps[i].Row = &data[i].Row
		}
	}
	return ps
}

// JSON writes one document, indented, followed by a newline. Nothing is written
// if the document cannot be encoded.
func JSON(w io.Writer, doc any) error {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", "  ")
	if err := enc.Encode(doc); err != nil {
		return err
	}
	_, err := w.Write(b.Bytes())
	return err
}
