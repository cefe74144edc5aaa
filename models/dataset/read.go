package dataset

import "io"

// Read reads every data set of one table. name is the file name as the user gave
// it, "-" for standard input. Where the file cannot be used the error is a
// Problems.
func Read(name string, r io.Reader, opt Options) ([]*Set, error) {
	data, err := io.ReadAll(r)
	if err != nil {
		return nil, Problems{problem(codeReadFailed, name, 0, "", err.Error())}
	}
	t, err := ParseTable(name, data)
	if err != nil {
		return nil, err
	}
	return t.Sets(opt)
}
