package cli

import (
	"context"
	"fmt"
	"path/filepath"
	"strconv"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/figure"
	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
)

// surveyFigureOptions are the flags of survey figure.
type surveyFigureOptions struct {
	store  storeFlags
	folder string
	figure figure.Options
}

func newSurveyFigure(a *app) *cobra.Command {
	o := &surveyFigureOptions{}
	cmd := &cobra.Command{
		Use:   "figure",
		Short: "Draw an overview of a survey",
		Long: `figure draws one picture of a store: the change of E of every data set with its
interval, in order; a histogram of the p-values; how many data sets have each
verdict, how many are curved at a false discovery rate of 5 %, and how many could
not be used and why. Of more than 240 data sets
several share a bar.`,
		Example: `  onebarrier survey figure --store results.sqlite
  onebarrier survey figure --store results.sqlite --figure-format pdf`,
		Args: atMost(0, ""),
		RunE: func(cmd *cobra.Command, _ []string) error { return a.surveyFigure(cmd, o) },
	}
	addStore(cmd, &o.store, true)
	cmd.Flags().StringVar(&o.folder, "figures", ".", "write the picture into this `folder`")
	formats := []string{"svg", "png", "pdf"}
	cmd.Flags().Var(&choice{&o.figure.Format, formats}, "figure-format", "of the picture (default svg)")
	completeWith(cmd, "figure-format", formats...)
	return cmd
}

func (a *app) surveyFigure(cmd *cobra.Command, o *surveyFigureOptions) error {
	s, err := o.store.open(cmd)
	if err != nil {
		return err
	}
	defer s.Close()
	if err := writable(o.folder); err != nil {
		return err
	}
	path, err := a.drawSurvey(cmd.Context(), s, o.folder, o.figure)
	if err != nil {
		return err
	}
	_, err = fmt.Fprintln(a.out, path)
	return err
}

// drawSurvey writes the picture of a store into a folder and returns its path.
func (a *app) drawSurvey(ctx context.Context, s *survey.Store, folder string, opt figure.Options) (path string, err error) {
	var sets []figure.SurveySet
	_, err = s.Table(ctx, survey.TableOptions{}, func(r *survey.Row) error {
		name := r.Dataset
		if name == "" {
			name = r.SourceFile
		}
		sets = append(sets, figure.SurveySet{
			Name: report.Shorten(name, figure.SurveyName), State: r.State, ErrorCode: r.ErrorCode,
			Change: r.EChange, Lower: r.EChangeLower, Upper: r.EChangeUpper, P: r.PValue, Q: r.QValue, QBand: r.QBand,
		})
		return nil
	})
	if err != nil {
		return "", err
	}
	confidence, err := strconv.ParseFloat(s.Confidence(), 64)
	if err != nil {
		return "", fmt.Errorf("the store %s has the confidence %q, which is no number", s.Path(), s.Confidence())
	}
	d, err := figure.NewSurvey(sets, confidence)
	if err != nil {
		return "", err
	}
	standing, err := s.Standing(ctx)
	if err != nil {
		return "", err
	}
	d.Incomplete = !standing.Complete()
	for _, sentence := range standing.Sentences() {
		a.warn("%s", sentence)
	}
	return figure.WriteSurvey(folder, filepath.Base(s.Path()), d, opt)
}
