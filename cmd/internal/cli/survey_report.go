package cli

import (
	"fmt"
	"io"
	"path/filepath"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/figure"
	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
)

// surveyReportOptions are the flags of survey report.
type surveyReportOptions struct {
	store  storeFlags
	folder string
	figure figure.Options
}

func newSurveyReport(a *app) *cobra.Command {
	o := &surveyReportOptions{}
	cmd := &cobra.Command{
		Use:   "report",
		Short: "Write what a survey came to into a folder, to be handed on",
		Long: `report writes three files into a folder: summary.txt, which is what survey status
prints and below it the data sets whose E changes at a false discovery rate of 5 %;
table.csv, every column of every data set; and the picture of survey figure. Files
of these names are replaced.`,
		Example: `  onebarrier survey report --store results.sqlite --output report`,
		Args:    atMost(0, ""),
		RunE:    func(cmd *cobra.Command, _ []string) error { return a.surveyReport(cmd, o) },
	}
	addStore(cmd, &o.store, true)
	cmd.Flags().StringVar(&o.folder, "output", "", "write into this `folder`")
	oneOf(cmd, &o.figure.Format, "figure-format", "of the picture (default svg)", "svg", "png", "pdf")
	return cmd
}

func (a *app) surveyReport(cmd *cobra.Command, o *surveyReportOptions) error {
	if err := o.store.check(cmd); err != nil {
		return err
	}
	if o.folder == "" {
		return usagef("write --output report", "%s needs the name of a folder", cmd.CommandPath())
	}
	s, err := o.store.open(cmd)
	if err != nil {
		return err
	}
	defer s.Close()
	if err := writable(o.folder); err != nil {
		return err
	}
	ctx := cmd.Context()
	status, err := statusOf(ctx, s)
	if err != nil {
		return err
	}
	paths := []string{filepath.Join(o.folder, "summary.txt"), filepath.Join(o.folder, "table.csv")}
	err = replaceFile(paths[0], func(w io.Writer) error {
		if err := status.write(w); err != nil {
			return err
		}
		if _, err := fmt.Fprintf(w, "\ndata sets whose E changes at a false discovery rate of 5 %%\n"); err != nil {
			return err
		}
		return s.WriteTable(ctx, w, "text", survey.TableOptions{MaxQ: 0.05, Sort: "q_value"}, report.Text{})
	})
	if err != nil {
		return err
	}
	err = replaceFile(paths[1], func(w io.Writer) error {
		return s.WriteTable(ctx, w, "csv", survey.TableOptions{}, report.Text{})
	})
	if err != nil {
		return err
	}
	picture, err := a.drawSurvey(ctx, s, o.folder, o.figure)
	if err != nil {
		return err
	}
	for _, path := range append(paths, picture) {
		if _, err := fmt.Fprintln(a.out, path); err != nil {
			return err
		}
	}
	return nil
}
