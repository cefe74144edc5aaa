package cli

import (
	"bytes"
	"context"
	"errors"
	"io"
	"io/fs"
	"os"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"onebarrier/cmd/internal/workbook"
	"onebarrier/models/dataset"
)

// reading is what a user says about a file.
type reading struct {
	dataset.Options
	sheet    string  // of a workbook: name, or number from 1
	leaveOut []place // what Options.LeaveOut is for each file
	pool     bool
}

// of is what was said about one of several files.
func (o reading) of(file string, files []string) reading {
	o.LeaveOut = linesOf(o.leaveOut, file, files)
	o.WhereMet = len(files) == 1
	return o
}

// addSelection gives a command the flags that say how to read a file and which
// rows to keep.
func addSelection(cmd *cobra.Command, o *reading) {
	f := cmd.Flags()
	f.StringVar(&o.Dataset, "dataset", "", "keep the rows of the data set with this `name`")
	f.StringVar(&o.DatasetBy, "dataset-by", "", "make a data set of every value in the column with this `heading`, such as pH")
	f.StringVar(&o.sheet, "sheet", "", "read the sheet of a workbook with this `name`, or number from 1")
	f.Var(column{&o.Columns}, "column", "take a column for a role, such as 'k=k_obs/s^-1' (repeat for more)")
	f.Var(pairs{&o.Assume}, "assume", "settle what is ambiguous, such as T=degC or error=2")
	f.Var(&choice{&o.Decimal, []string{"comma", "point"}}, "decimal", "decimal mark of the file")
	f.StringArrayVar(&o.Where, "where", nil, "keep rows that meet a `condition`, such as 'source!=Lab3' (repeat for more)")
	f.Var(places{&o.leaveOut}, "leave-out", "leave out these `lines`, such as 7,20..22; FILE:LINE where several files are named")
	f.Var(temperature{&o.TMin}, "t-min", "leave out rows below this temperature, such as 195K or 25degC")
	f.Var(temperature{&o.TMax}, "t-max", "leave out rows above this temperature")
	group(f, "how the file is read", "sheet", "column", "assume", "decimal")
	group(f, "which rows are used", "dataset", "dataset-by", "where", "leave-out", "t-min", "t-max")
	completeWith(cmd, "decimal", "comma", "point")
	completeWith(cmd, "column", "temperature=", "k=", "source=", "dataset=", "order=")
	completeWith(cmd, "assume", "T=K", "T=degC", "T=degF", "log=lg", "log=ln", "k=rate", "k=repeats", "factor=times", "factor=unit", "error=1", "error=2", "error=sd,n=3", "n=3")
}

// addPool gives a command the flag that joins files.
func addPool(cmd *cobra.Command, o *reading) {
	cmd.Flags().BoolVar(&o.pool, "pool", false, "join the files into one data set; a row without a source has the name of its file")
	group(cmd.Flags(), "which rows are used", "pool")
}

// selectionFlags are those that leave rows out.
var selectionFlags = []string{"dataset", "dataset-by", "where", "leave-out", "t-min", "t-max", "pool"}

// recordedFlags decide what is read; assumptions are recorded by the reader.
var recordedFlags = append([]string{"sheet", "column", "decimal"}, selectionFlags...)

// selection lists the flags that chose columns and rows, as the user may repeat them.
func selection(cmd *cobra.Command) []string {
	var used []string
	cmd.Flags().Visit(func(f *pflag.Flag) {
		if !slices.Contains(recordedFlags, f.Name) {
			return
		}
		if f.Name == "pool" {
			used = append(used, "--pool")
			return
		}
		values := valuesOf(f)
		if f.Name == "leave-out" {
			values = []string{strings.Join(values, ",")}
		}
		for _, v := range values {
			used = append(used, "--"+f.Name+"="+v)
		}
	})
	return used
}

// readTables reads every table of one file, "-" for standard input, and the bytes it
// holds: a text is one table, a workbook has one in each of its sheets. A file that
// cannot be opened is a problem like any other.
func (a *app) readTables(ctx context.Context, name string, o reading) ([]workbook.Result, []byte, error) {
	content, err := a.readAll(ctx, name)
	if err != nil {
		return nil, nil, err
	}
	if workbook.Is(content) {
		o.WhereMet = o.WhereMet && o.sheet != "" // another sheet may meet it
		tables, err := interruptible(ctx, func() ([]workbook.Result, error) {
			return workbook.ReadAll(name, content, o.sheet, o.Options)
		})
		return tables, content, err
	}
	if o.sheet != "" {
		return nil, content, dataset.Problems{{Code: "sheet-unknown", File: name,
			Message: "--sheet " + o.sheet + ": a text table has no sheets", Cure: "leave out --sheet"}}
	}
	sets, err := dataset.Read(name, bytes.NewReader(content), o.Options)
	return []workbook.Result{{Sets: sets}}, content, err
}

// readOne reads the one data set of each file, and pools several.
func (a *app) readOne(ctx context.Context, files []string, o reading) (*dataset.Set, error) {
	if err := checkPlaces(o.leaveOut, files); err != nil {
		return nil, err
	}
	var sets []*dataset.Set
	var problems dataset.Problems
	for _, name := range files {
		tables, _, err := a.readTables(ctx, name, o.of(name, files))
		var set *dataset.Set
		if err == nil {
			set, err = oneSet(name, tables)
		}
		var ps dataset.Problems
		switch {
		case errors.As(err, &ps):
			problems = append(problems, ps...)
		case err != nil:
			return nil, err
		}
		sets = append(sets, set)
	}
	if len(problems) > 0 {
		return nil, problems
	}
	set, err := dataset.Pool(sets)
	if err == nil && !a.json { // with --json every warning of the result goes to stderr
		for _, n := range set.Notices {
			if n.Code == "column-varies" { // the rows may not belong together: before the answer
				a.warn("warning: %s: %s", n.Code, join(n.Message, n.Cure))
			}
		}
	}
	return set, err
}

// readAll reads a file as a whole. Reading from a pipe or a terminal can wait for
// ever, so it does not hold up an interrupt.
func (a *app) readAll(ctx context.Context, name string) ([]byte, error) {
	type result struct {
		content []byte
		err     error
	}
	done := make(chan result, 1)
	go func() {
		var r result
		if name == "-" {
			r.content, r.err = io.ReadAll(a.in)
		} else {
			r.content, r.err = os.ReadFile(name)
		}
		done <- r
	}()
	select {
	case <-ctx.Done():
		return nil, context.Cause(ctx)
	case r := <-done:
		if r.err == nil {
			return r.content, nil
		}
		p := dataset.Problem{Code: "read-failed", File: name, Message: r.err.Error()}
		var pe *fs.PathError
		if errors.As(r.err, &pe) {
			p.Message, p.Cure = pe.Err.Error(), "give the name of a table that can be read"
		}
		if errors.Is(r.err, fs.ErrNotExist) {
			p.Message, p.Cure = "there is no such file", "check the name and the folder"
		}
		return nil, dataset.Problems{p}
	}
}

// oneSet picks the data set to assess.
func oneSet(name string, tables []workbook.Result) (*dataset.Set, error) {
	sets, err := workbook.One(name, tables)
	if err != nil {
		return nil, err
	}
	if len(sets) == 1 {
		return sets[0], nil
	}
	const most = 20
	names := make([]string, 0, len(sets))
	for i, s := range sets {
		if i == most {
			names = append(names, "and "+strconv.Itoa(len(sets)-most)+" more")
			break
		}
		names = append(names, strconv.Quote(s.Name))
	}
	return nil, dataset.Problems{{Code: "several-datasets", File: name,
		Message: strconv.Itoa(len(sets)) + " data sets: " + strings.Join(names, ", "),
		Cure:    "choose one with --dataset NAME"}}
}
