package cli

import (
	"errors"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/workbook"
	"onebarrier/models/dataset"
)

// inspectOptions are the flags of inspect.
type inspectOptions struct {
	read reading
	tidy string
}

func newInspect(a *app) *cobra.Command {
	o := &inspectOptions{}
	cmd := &cobra.Command{
		Use:   "inspect FILE...",
		Short: "Show what each column and row was taken for",
		Long: `inspect prints what each column was taken for, its unit and level, the range in
kelvin, and which rows are left out and why, for every sheet of a workbook that
holds a table. Nothing is fitted.

--tidy writes every row as understood under canonical headings, with the file and
line it came from and why it is left out. assess gives the same result from that
table as from the original with the same flags; what cannot be the same is the
name of the file, its sum, what is said about its columns and how they were read,
and the flags on record.`,
		Example: `  onebarrier inspect rates.csv
  onebarrier inspect rates.csv --tidy tidy.csv
  onebarrier inspect rates.csv second.csv --pool
  onebarrier inspect - --json < rates.csv`,
		Args: atLeast(1, "FILE"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.runInspect(cmd, args, o)
		},
		ValidArgsFunction: completeFiles(-1),
	}
	addSelection(cmd, &o.read)
	addPool(cmd, &o.read)
	cmd.Flags().StringVar(&o.tidy, "tidy", "", "write the rows as understood to this `file`, under canonical headings")
	a.addJSON(cmd)
	return cmd
}

// runInspect reads every file: one that cannot be read is a record beside the
// others, and the exit code says so.
func (a *app) runInspect(cmd *cobra.Command, files []string, o *inspectOptions) error {
	ctx := cmd.Context()
	if o.read.pool {
		return a.inspectPooled(cmd, files, o)
	}
	if o.tidy != "" && len(files) > 1 {
		return usagef("give one file, or join them with --pool", "--tidy writes one table, but %d files are named", len(files))
	}
	if err := checkPlaces(o.read.leaveOut, files); err != nil {
		return err
	}
	doc := report.Inspection{Schema: report.InspectSchema, Tool: tool(), Files: []report.InspectedFile{}, Problems: []report.Problem{}}
	var problems dataset.Problems
	var sets []*dataset.Set
	failed, all := 0, 0 // tables
	for _, name := range files {
		tables, content, err := a.readTables(ctx, name, o.read.of(name, files))
		var ps dataset.Problems
		switch {
		case errors.As(err, &ps):
			tables = []workbook.Result{{Problems: ps}}
		case err != nil:
			return err
		}
		if o.tidy != "" && len(tables) > 1 {
			return usagef("choose one with --sheet", "--tidy writes one table, but %d sheets of %s hold one", len(tables), name)
		}
		for _, t := range tables {
			all++
			if len(t.Problems) > 0 {
				failed++
				problems = append(problems, t.Problems...)
				continue
			}
			sets = t.Sets
			doc.Files = append(doc.Files, report.NewInspectedFile(name, t.Sheet, content, t.Sets))
			if doc.Next == "" {
				set := ""
				if len(sets) > 1 {
					set = sets[0].Name
				}
				doc.Next = nextCommand(cmd, []string{name}, &o.read, t.Sheet, set)
			}
		}
	}
	if failed == all {
		return problems
	}
	if o.tidy != "" {
		if err := writeTidy(o.tidy, sets); err != nil {
			return err
		}
	}
	if failed > 0 {
		doc.Problems = problemsOf(problems)
		a.complain(problems)
	}
	err := a.writeInspection(doc)
	if err == nil && failed > 0 {
		what := "files"
		if all > len(files) {
			what = "sheets and files"
			if len(files) == 1 {
				what = "sheets"
			}
		}
		err = &partialError{failed, all, what}
	}
	return err
}

// inspectPooled shows several files as the one data set that they make.
func (a *app) inspectPooled(cmd *cobra.Command, files []string, o *inspectOptions) error {
	set, err := a.readOne(cmd.Context(), files, o.read)
	if err != nil {
		return err
	}
	if o.tidy != "" {
		if err := writeTidy(o.tidy, []*dataset.Set{set}); err != nil {
			return err
		}
	}
	return a.writeInspection(report.Inspection{
		Schema: report.InspectSchema, Tool: tool(), Problems: []report.Problem{},
		Files: []report.InspectedFile{report.NewPooledFile(set)},
		Next:  nextCommand(cmd, files, &o.read, "", ""),
	})
}

func (a *app) writeInspection(doc report.Inspection) error {
	if a.json {
		return report.JSON(a.out, doc)
	}
	return report.WriteInspection(a.out, doc, a.text())
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
	if errors.Is(err, os.ErrNotExist) {
		return usagef("make the folder, or name a file in one that is there", "--tidy: there is no folder %s", filepath.Dir(name))
	}
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	return dataset.Tidy(f, &all)
}
