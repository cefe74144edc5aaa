package survey

import (
	"io"
	"reflect"
	"strconv"
	"strings"

	"github.com/parquet-go/parquet-go"
)

// rowGroup is the number of rows of a row group, which is held in memory until it is
// written.
const rowGroup = 1 << 15

// parquetSchema has the columns of Row in their order: texts required, numbers and
// material optional. It is made from Row, so that they cannot drift apart.
var parquetSchema = func() *parquet.Schema {
	row := reflect.TypeFor[Row]()
	var fields []reflect.StructField
	for i, kind := range kinds {
		f := reflect.StructField{Name: row.Field(i).Name, Type: row.Field(i).Type}
		tag := columns[i]
		switch kind {
		case reflect.String:
		case reflect.Int:
			f.Type, tag = reflect.TypeFor[int64](), tag+",optional"
		case reflect.Float64:
			tag += ",optional"
		default:
			f.Type, tag = reflect.TypeFor[bool](), tag+",optional"
		}
		f.Tag = reflect.StructTag(`parquet:"` + tag + `"`)
		fields = append(fields, f)
	}
	return parquet.SchemaOf(reflect.New(reflect.StructOf(fields)).Interface())
}()

// parquetTable writes Apache Parquet, compressed with Snappy. Its metadata say under
// "complete" whether the survey was.
type parquetTable struct {
	w      *parquet.GenericWriter[any]
	values []any
	row1   []parquet.Row
}

func newParquetTable(w io.Writer, complete bool) tableWriter {
	return &parquetTable{
		w: parquet.NewGenericWriter[any](w, parquetSchema, parquet.Compression(&parquet.Snappy),
			parquet.MaxRowsPerRowGroup(rowGroup), parquet.KeyValueMetadata("complete", strconv.FormatBool(complete)), parquet.CreatedBy("onebarrier", "", "")),
		row1: []parquet.Row{nil},
	}
}

func (t *parquetTable) begin() error { return nil }

func (t *parquetTable) row(r *Row) error {
	t.values = r.appendValues(t.values[:0])
	row := t.row1[0][:0]
	for i, v := range t.values {
		switch text, isText := v.(string); {
		case isText:
			// The type of the column promises UTF-8, and readers refuse others.
			row = append(row, parquet.ByteArrayValue([]byte(strings.ToValidUTF8(text, "\ufffd"))).Level(0, 0, i))
		case v == nil:
			row = append(row, parquet.NullValue().Level(0, 0, i))
		default:
			row = append(row, parquet.ValueOf(v).Level(0, 1, i))
		}
	}
	t.row1[0] = row
	_, err := t.w.WriteRows(t.row1)
	return err
}

func (t *parquetTable) end(Tally) error { return t.w.Close() }
