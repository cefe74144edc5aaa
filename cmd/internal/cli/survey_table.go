package cli

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
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
filter. There are two: q_value for the test that E does not change, q_band for
the test that it changes by no more than a usual prefactor explains.

Which data sets have more than one barrier at a false discovery rate of 10 %?
--max-q-band 0.1 answers it: of the data sets that it lists no more than 10 % are
expected to have one barrier with a usual prefactor. Verdicts answer for each data
set by itself: at 5 % each, 1000 data sets of one barrier give up to 50 verdicts
of curvature.

csv, parquet and jsonl have every column; in csv a number that is not
known is NA, and an apostrophe stands before names that a spreadsheet would
compute. Of a survey that is not complete q is over what there is: text says so,
jsonl has complete false, csv and parquet a warning on stderr.

--compensation asks instead whether ln A goes with E. Their estimates always do,
by arithmetic: both come from one line, extended to 1/T = 0. The test is
therefore made at the harmonic mean temperature, where the errors of E and of ln k
are not correlated (Krug, Hunter and Grieger, J. Phys. Chem. 80 (1976) 2335, 2341).
Data sets with a warning that makes T or k doubtful, such as kelvin-like-celsius,
are left out and counted; the data set of most influence is named. Curved data
sets are used unless --state leaves them out.`,
		Example: `  onebarrier survey table --store results.sqlite
  onebarrier survey table --store results.sqlite --max-q 0.05 --sort points
  onebarrier survey table --store results.sqlite --max-q-band 10% --sort q_band
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
	f.Var(share{&o.rows.MaxQ}, "max-q", "only data sets whose q_value is not above this `share`, such as 0.05 or 5%: E changes")
	f.Var(share{&o.rows.MaxQBand}, "max-q-band", "only data sets whose q_band is not above this `share`: more than a prefactor explains")
	f.StringSliceVar(&o.rows.Without, "without-warning", nil, "leave out data sets with any of these `codes` in the column warnings, such as kelvin-like-celsius")
	f.IntVar(&o.rows.MinPoints, "min-points", 0, "only data sets with this `number` of points or more")
	f.StringVar(&o.rows.Sort, "sort", "", "order by this `column`, or heading of the table (N, ΔE or dE, q), unknown values last (default: as read)")
	f.BoolVar(&o.rows.Descending, "descending", false, "largest first, with --sort")
	f.BoolVar(&o.compensation, "compensation", false, "test whether ln A goes with E, in place of the table")
	completeWith(cmd, "format", survey.TableFormats...)
	completeWith(cmd, "state", survey.TableStates()...)
	completeList(cmd, "without-warning", warningCodes()...)
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
	if o.format != "text" { // text says it itself
		standing, err := s.Standing(cmd.Context())
		if err != nil {
			return err
		}
		for _, sentence := range standing.Sentences() {
			a.warn("%s", sentence)
		}
	}
	if o.output == "" {
		return write(a.out)
	}
	return replaceFile(o.output, write)
}

// warningCodes are those that the column warnings may hold.
func warningCodes() []string {
	var codes []string
	for _, e := range diagnostics.Catalogue() {
		if e.Severity != diagnostics.Info {
			codes = append(codes, e.Code)
		}
	}
	return codes
}

// share is the value of a flag that takes a share: 0.1 or 10%.
type share struct{ value *float64 }

func (s share) String() string {
	if s.value == nil || *s.value == 0 {
		return ""
	}
	return strconv.FormatFloat(*s.value, 'g', -1, 64)
}
func (s share) Type() string { return "share" }
func (s share) Set(text string) error {
	number, percent := strings.CutSuffix(strings.TrimSpace(text), "%")
	x, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
	if percent {
		x /= 100
	}
	if err != nil || !(x > 0 && x <= 1) {
		return fmt.Errorf("%s is not a share; give a number above 0, up to 1, such as 0.1 or 10%%", text)
	}
	*s.value = x
	return nil
}

// check refuses what can be refused before the store is read.
func (o *surveyTableOptions) check(a *app, cmd *cobra.Command) error {
	given := cmd.Flags().Changed
	for _, state := range o.rows.States {
		if !slices.Contains(survey.TableStates(), state) {
			return unknownName("verdict", state, survey.TableStates(), "use "+strings.Join(survey.TableStates(), ", "))
		}
	}
	for _, code := range o.rows.Without {
		if !slices.Contains(warningCodes(), code) {
			return unknownName("warning", code, warningCodes(), "onebarrier explain lists them; the column warnings of --format csv holds those of each data set")
		}
	}
	if columns := (survey.Row{}).Columns(); o.rows.Sort != "" && !slices.Contains(columns, survey.SortColumn(o.rows.Sort)) {
		return unknownName("column", o.rows.Sort, columns, nearColumns(o.rows.Sort, columns)+"the columns are "+strings.Join(columns, ", "))
	}
	switch {
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

// nearColumns asks for the columns whose names hold a word, such as change.
func nearColumns(word string, columns []string) string {
	var near []string
	for _, c := range columns {
		if len(word) > 1 && strings.Contains(c, strings.ToLower(word)) {
			near = append(near, c)
		}
	}
	if len(near) == 0 || len(near) > 4 {
		return ""
	}
	return "did you mean " + strings.Join(near, " or ") + "? "
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
