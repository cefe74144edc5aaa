package dataset

import (
	"io"
	"os"
)

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

// ReadFile reads every data set of the table in a file.
func ReadFile(name string, opt Options) ([]*Set, error) {
	f, err := os.Open(name)
	if err != nil {
		return nil, Problems{problem(codeReadFailed, name, 0, "", "the file cannot be opened: "+cause(err))}
	}
	defer f.Close()
	return Read(name, f, opt)
}

// cause is an error of the operating system without the name of the file.
func cause(err error) string {
	if e, ok := err.(*os.PathError); ok {
		return e.Err.Error()
	}
	return err.Error()
}
