package cli

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

func newSurveyShow(a *app) *cobra.Command {
	o := &storeFlags{}
	file := ""
	cmd := &cobra.Command{
		Use:   "show NAME",
		Short: "Print the assessment of one data set of a survey",
		Long: `show prints what assess prints for one data set, from the store. NAME is the name of
the data set, its set_id in the table, or its file; --file tells sets of one name
apart. Of a data set or file that could not be used it prints every problem. Before
a NAME that begins with a dash write --.

null_draws among the settings of the document (--json) says whether the tests drew
as many nulls as those of assess do.`,
		Example: `  onebarrier survey show 'reaction 7' --store results.sqlite
  onebarrier survey show rates --store results.sqlite --json`,
		Args: exactly(1, "NAME"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.showSet(cmd, o, args[0], file)
		},
	}
	addStore(cmd, o, true)
	cmd.Flags().StringVar(&file, "file", "", "the data set of this source `file`")
	cmd.SetFlagErrorFunc(func(cmd *cobra.Command, err error) error {
		var unknown *pflag.NotExistError
		if errors.As(err, &unknown) && unknown.GetSpecifiedShortnames() != "" {
			return usagef("before a name that begins with a dash write --: onebarrier survey show --store FILE -- NAME", "show has no flag -%s", unknown.GetSpecifiedShortnames())
		}
		return flagError(cmd, err)
	})
	a.addJSON(cmd)
	return cmd
}

func (a *app) showSet(cmd *cobra.Command, o *storeFlags, name, file string) error {
	s, err := o.open(cmd)
	if err != nil {
		return err
	}
	defer s.Close()
	found, err := s.Find(cmd.Context(), name)
	if err != nil {
		return err
	}
	var rows []survey.Row
	for _, r := range found {
		if file == "" || survey.SameFile(r.SourceFile, file) {
			rows = append(rows, r)
		}
	}
	problem := dataset.Problem{Code: "dataset-unknown", File: o.path}
	switch {
	case len(rows) == 0:
		problem.Message, problem.Cure = fmt.Sprintf("there is no data set or file %q", name), "survey table lists them"
		return dataset.Problems{problem}
	case len(rows) > 1:
		var all []string
		for i, r := range rows {
			if i == 5 {
				all = append(all, fmt.Sprintf("and %d more", len(rows)-5))
				break
			}
			place := r.SourceFile
			if r.Sheet != "" {
				place += "[" + r.Sheet + "]"
			}
			all = append(all, fmt.Sprintf("%s in %s", r.SetID, place))
		}
		problem.Code, problem.Message, problem.Cure = "several-datasets", fmt.Sprintf("%d data sets have this name: %s", len(rows), strings.Join(all, ", ")), "give the id of one, or --file"
		return dataset.Problems{problem}
	}
	row := rows[0]
	if row.ErrorCode != "" {
		document, err := s.Assessment(row.SetID)
		if err != nil {
			return err
		}
		if ps := survey.ProblemsOf(document); len(ps) > 0 {
			return ps
		}
		// A store of before: the first problem is in the row.
		p := dataset.Problem{Code: row.ErrorCode, File: row.SourceFile, Sheet: row.Sheet, Message: row.Error}
		if row.ErrorRow > 0 {
			p.Row = row.ErrorRow
		}
		return dataset.Problems{p}
	}
	document, err := s.Assessment(row.SetID)
	if err != nil {
		return err
	}
	if a.json {
		var b bytes.Buffer
		if err := json.Indent(&b, document, "", "  "); err != nil {
			return err
		}
		_, err := a.out.Write(b.Bytes())
		return err
	}
	var result diagnostics.Assessment
	if err := json.Unmarshal(document, &result); err != nil {
		return err
	}
	if err := report.WriteAssessment(a.out, &result, nil, a.text()); err != nil {
		return err
	}
	return a.noteNulls(&result)
}

// noteNulls says why a p is not to the digit that of assess.
func (a *app) noteNulls(result *diagnostics.Assessment) error {
	if result.Settings.NullDraws != diagnostics.NullsSequential {
		return nil
	}
	note := fmt.Sprintf("note: from a survey, with %d resamples and seed %d. Draws of the nulls of its tests ended once p was plainly not small (sequential): such a p is exact, but coarser, and may differ from that of assess within chance. survey run --null-draws full draws as many as assess.",
		result.Settings.Resamples, result.Settings.Seed)
	_, err := fmt.Fprintf(a.out, "\n%s\n", strings.Join(report.Wrap(note, a.text().Columns()), "\n"))
	return err
}
