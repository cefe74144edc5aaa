package cli

import (
	"errors"
	"strconv"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/survey"
)

func newSurvey(a *app) *cobra.Command {
	cmd := &cobra.Command{
		Use:   "survey COMMAND",
		Short: "Assess every data set of an archive, and keep the results in one file",
		Long: `survey assesses many data sets: those of files, folders, long tables with a column
dataset, and workbooks, each by itself. The results are kept in a store, one
SQLite file with a row and the whole assessment of each. A data set or file that
cannot be used is a row with its error. A run that was stopped or killed goes on
where it was when the same command is given again.`,
		Example: `  onebarrier survey run rates.csv second.csv --store results.sqlite
  onebarrier survey run . --store results.sqlite --dry-run`,
		Args: cobra.ArbitraryArgs, // refused below, with a suggestion
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 0 {
				return cmd.Help()
			}
			var names []string
			for _, c := range cmd.Commands() {
				names = append(names, c.Name())
			}
			return unknownName("command of survey", args[0], names, "onebarrier survey --help lists them")
		},
	}
	cmd.AddCommand(newSurveyRun(a), newSurveyShow(a), newSurveyStatus(a), newSurveyMerge(a), newSurveySlurm(a), newSurveyTable(a), newSurveyFigure(a), newSurveyReport(a))
	return cmd
}

// storeFlags name a store and whose results in it are meant.
type storeFlags struct {
	path     string
	settings int
}

// addStore gives a command the flag --store. where reading: also --settings.
func addStore(cmd *cobra.Command, o *storeFlags, reading bool) {
	cmd.Flags().StringVar(&o.path, "store", "", "`file` that holds the results, such as results.sqlite")
	if reading {
		cmd.Flags().IntVar(&o.settings, "settings", 0, "`number` of the settings whose results are meant, where the store keeps several (default the last)")
	}
}

// check refuses a command without a store.
func (o *storeFlags) check(cmd *cobra.Command) error {
	if o.path == "" {
		return usagef("write --store results.sqlite", "%s needs the name of a store", cmd.CommandPath())
	}
	return nil
}

// open opens the store for reading.
func (o *storeFlags) open(cmd *cobra.Command) (*survey.Store, error) {
	if err := o.check(cmd); err != nil {
		return nil, err
	}
	s, err := survey.OpenSettings(o.path, o.settings)
	return s, ofStore(err)
}

// ofStore makes wrong settings wrong usage.
func ofStore(err error) error {
	var other *survey.SettingsError
	if errors.As(err, &other) {
		return usagef("", "%v", err)
	}
	return err
}

// manyOf writes "1 file", "2 files".
func manyOf(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return strconv.Itoa(n) + " " + what + "s"
}
