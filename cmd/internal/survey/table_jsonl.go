package survey

import (
	"bufio"
	"bytes"
	"encoding/json"
	"io"
	"strconv"
)

// RowSchema names what a line of JSON Lines is.
const RowSchema = "onebarrier.survey-row/1"

// jsonLines writes one JSON object a row, its members in the order of the columns.
// Unknown is null. The last member says whether the survey was complete: q is over what
// there was.
type jsonLines struct {
	w      *bufio.Writer
	values []any
	cell   bytes.Buffer
	encode *json.Encoder // into cell
	last   string
}

func newJSONLines(w io.Writer, complete bool) tableWriter {
	t := &jsonLines{w: bufio.NewWriter(w), last: `,"complete":` + strconv.FormatBool(complete) + "}\n"}
	t.encode = json.NewEncoder(&t.cell)
	t.encode.SetEscapeHTML(false) // messages hold < and >
	return t
}

func (t *jsonLines) begin() error { return nil }

func (t *jsonLines) row(r *Row) error {
	t.values = r.appendValues(t.values[:0])
	t.w.WriteString(`{"schema":"` + RowSchema + `"`) // the first error of w is kept and returned below
	for i, v := range t.values {
		t.cell.Reset()
		if err := t.encode.Encode(v); err != nil {
			return err
		}
		t.w.WriteString(`,"` + columns[i] + `":`)
		t.w.Write(bytes.TrimSuffix(t.cell.Bytes(), []byte("\n")))
	}
	_, err := t.w.WriteString(t.last)
	return err
}

func (t *jsonLines) end(Tally) error { return t.w.Flush() }
