package report

import (
	"bytes"
	"encoding/json"
	"io"
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
