package cli

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/survey"
)

// surveyTableOptions are the flags of survey table.
type surveyTableOptions struct {
	store        storeFlags
	format       string
	output       string
	rows         survey.TableOptions
	compensation bool
}

func newSurveyTable(a *app) *cobra.Command {
	o := &surveyTableOptions{format: "text"}
	cmd := &cobra.Command{
		Use:   "table",
		Short: "Print one row for each data set of a survey",
		Long: `table prints one row for each data set of a store: its verdict, the change of E with
its interval, and q, the false discovery share of Benjamini and Hochberg (1995).
q is computed over all data sets of the store that can be tested, before any
filter. csv, parquet and jsonl have every column; in csv a number that is not
known is NA, and an apostrophe stands before names that a spreadsheet would
compute.

--compensation asks instead whether ln A goes with E. Their estimates always do,
by arithmetic: both come from one line, extended to 1/T = 0. The test is
therefore made at the harmonic mean temperature, where the errors of E and of ln k
are not correlated (Krug, Hunter and Grieger, J. Phys. Chem. 80 (1976) 2335, 2341).`,
		Example: `  onebarrier survey table --store results.sqlite
  onebarrier survey table --store results.sqlite --max-q 0.05 --sort points
  onebarrier survey table --store results.sqlite --format csv --output out.csv
  onebarrier survey table --store results.sqlite --compensation`,
		Args: atMost(0, ""),
		RunE: func(cmd *cobra.Command, _ []string) error { return a.surveyTable(cmd, o) },
	}
	f := cmd.Flags()
	addStore(cmd, &o.store, true)
	f.Var(&choice{&o.format, survey.TableFormats}, "format", "of the table")
	f.StringVar(&o.output, "output", "", "write to this `file`, replaced whole or not at all")
	f.StringSliceVar(&o.rows.States, "state", nil, "only these `verdicts`; failed: those that could not be used")
	f.Float64Var(&o.rows.MaxQ, "max-q", 0, "only data sets whose q_value is not above this `share`")
	f.IntVar(&o.rows.MinPoints, "min-points", 0, "only data sets with this `number` of points or more")
	f.StringVar(&o.rows.Sort, "sort", "", "order by this `column`, unknown values last (default: as read)")
	f.BoolVar(&o.rows.Descending, "descending", false, "largest first, with --sort")
	f.BoolVar(&o.compensation, "compensation", false, "test whether ln A goes with E, in place of the table")
	completeWith(cmd, "format", survey.TableFormats...)
	completeWith(cmd, "state", survey.TableStates()...)
	completeWith(cmd, "sort", survey.Row{}.Columns()...)
	return cmd
}

func (a *app) surveyTable(cmd *cobra.Command, o *surveyTableOptions) error {
	if err := o.check(a, cmd); err != nil {
		return err
	}
	s, err := o.store.open(cmd)
	if err != nil {
		return err
	}
	defer s.Close()
	write := func(w io.Writer) error {
		if o.compensation {
			return s.WriteCompensation(cmd.Context(), w, o.format, o.rows, a.text())
		}
		return s.WriteTable(cmd.Context(), w, o.format, o.rows, a.text())
	}
	if o.output == "" {
		return write(a.out)
	}
	return replaceFile(o.output, write)
}

// check refuses what can be refused before the store is read.
func (o *surveyTableOptions) check(a *app, cmd *cobra.Command) error {
	given := cmd.Flags().Changed
	for _, state := range o.rows.States {
		if !slices.Contains(survey.TableStates(), state) {
			return unknownName("verdict", state, survey.TableStates(), "use "+strings.Join(survey.TableStates(), ", "))
		}
	}
	if columns := (survey.Row{}).Columns(); o.rows.Sort != "" && !slices.Contains(columns, o.rows.Sort) {
		return unknownName("column", o.rows.Sort, columns, "the columns are "+strings.Join(columns, ", "))
	}
	switch {
	case given("max-q") && !(o.rows.MaxQ > 0 && o.rows.MaxQ <= 1):
		return usagef("give a number above 0, up to 1", "--max-q: %g is not a share", o.rows.MaxQ)
	case o.rows.MinPoints < 0:
		return usagef("give 0 or more", "--min-points: %d is not a number of points", o.rows.MinPoints)
	case o.rows.Descending && o.rows.Sort == "":
		return usagef("give --sort COLUMN too", "--descending turns the order of a column, and none is named")
	case o.compensation && given("sort"):
		return usagef("leave one out", "--compensation prints no rows that --sort could order")
	case o.compensation && o.format != "text" && o.format != "jsonl":
		return usagef("use text or jsonl", "--compensation has no form %s", o.format)
	case o.format == "parquet" && o.output == "" && isTerminal(a.out):
		return usagef("give --output FILE", "Parquet is not text, and is not written to a terminal")
	}
	return nil
}

// replaceFile writes a file under a temporary name, opened before the work, and moves
// it into place: the file is whole, or as it was.
func replaceFile(name string, write func(io.Writer) error) (err error) {
	if info, err := os.Stat(name); err == nil && info.IsDir() {
		return usagef("name a file in it", "--output: %s is a folder", name)
	}
	f, err := os.CreateTemp(filepath.Dir(name), "."+filepath.Base(name)+".*")
	if err != nil {
		return fmt.Errorf("--output: %w; name a file in a folder that can be written to", err)
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(f.Name()))
		}
	}()
	if err = write(f); err != nil {
		return errors.Join(err, f.Close())
	}
	if err = f.Chmod(0o644); err != nil {
		return errors.Join(err, f.Close())
	}
	if err = f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), name)
}
