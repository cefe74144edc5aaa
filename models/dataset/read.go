package dataset

import (
	"errors"
	"io"
)

// Read reads every data set of one table. name is the file name as the user gave
// it, "-" for standard input. Where the file cannot be used the error is a
// Problems.
func Read(name string, r io.Reader, opt Options) ([]*Set, error) {
	return nil, errors.New("dataset: reading is not built yet")
}
