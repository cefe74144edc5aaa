package cli

import (
	"context"
	"errors"
	"os"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/report"
	"onebarrier/models/dataset"
)

// inspectOptions are the flags of inspect.
type inspectOptions struct {
	read dataset.Options
	tidy string
}

func newInspect(a *app) *cobra.Command {
	o := &inspectOptions{}
	cmd := &cobra.Command{
		Use:   "inspect FILE...",
		Short: "Show what each column and row was taken for",
		Long: `inspect prints what each column was taken for, its unit and level, the range in
kelvin, and which rows are left out and why. Nothing is fitted.`,
		Example: `  onebarrier inspect rates.csv
  onebarrier inspect rates.csv --tidy tidy.csv
  onebarrier inspect - --json < rates.csv`,
		Args: atLeast(1, "FILE"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.runInspect(cmd.Context(), args, o)
		},
		ValidArgsFunction: completeFiles(-1),
	}
	addSelection(cmd, &o.read)
	cmd.Flags().StringVar(&o.tidy, "tidy", "", "write the rows as understood to this `file`, under canonical headings")
	a.addJSON(cmd)
	return cmd
}

// runInspect reads every file: one that cannot be read is a record beside the
// others, and the exit code says so.
func (a *app) runInspect(ctx context.Context, files []string, o *inspectOptions) error {
	if o.tidy != "" && len(files) > 1 {
		return usagef("give one file", "--tidy writes one table, but %d files are named", len(files))
	}
	doc := report.Inspection{Schema: report.InspectSchema, Tool: tool(), Files: []report.InspectedFile{}, Problems: []report.Problem{}}
	var all dataset.Problems
	var sets []*dataset.Set
	failed := 0
	for _, name := range files {
		read, content, err := a.readSets(ctx, name, o.read)
		var ps dataset.Problems
		switch {
		case errors.As(err, &ps):
			failed++
			all = append(all, ps...)
			continue
		case err != nil:
			return err
		}
		sets = read
		doc.Files = append(doc.Files, report.NewInspectedFile(name, content, read))
	}
	if failed == len(files) {
		return all
	}
	if o.tidy != "" {
		if err := writeTidy(o.tidy, sets); err != nil {
			return err
		}
	}
	if failed > 0 {
		doc.Problems = problemsOf(all)
		a.complain(all)
	}
	var err error
	if a.json {
		err = report.JSON(a.out, doc)
	} else {
		err = report.WriteInspection(a.out, doc, a.text())
	}
	if err == nil && failed > 0 {
		err = &partialError{failed, len(files)}
	}
	return err
}

// writeTidy writes the table to a file that is not there yet: rates that someone
// measured are not overwritten.
func writeTidy(name string, sets []*dataset.Set) (err error) {
	all := *sets[0]
	all.Points = nil
	for _, s := range sets {
		if s.Quantity.Unit != all.Quantity.Unit || s.Quantity.Symbol != all.Quantity.Symbol {
			return usagef("choose one with --dataset NAME", "--tidy writes one rate quantity, but the data sets hold several")
		}
		all.Points = append(all.Points, s.Points...)
	}
	f, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if errors.Is(err, os.ErrExist) {
		return usagef("name a new file", "--tidy: %s exists and is not overwritten", name)
	}
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	return dataset.Tidy(f, &all)
}
