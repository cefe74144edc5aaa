package cli

import (
	"errors"
	"fmt"
	"maps"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
)

// surveyResamples is the default of a survey: shares to a few per cent, for many sets.
const surveyResamples = 999

// surveyOptions are the flags of survey run.
type surveyOptions struct {
	store            storeFlags
	assess           assessOptions
	include, exclude []string
	dryRun, again    bool
	shard            string
	nulls            string // diagnostics.NullsSequential or NullsFull
}

func newSurveyRun(a *app) *cobra.Command {
	o := newSurveyOptions()
	cmd := &cobra.Command{
		Use:   "run PATH...",
		Short: "Assess every data set of files and folders",
		Long: `run assesses every data set of PATH: a file, a folder with all that lies below it,
or a pattern such as 'data/*.csv'. It reads text tables and workbooks (.xlsx,
every sheet); a table with a column dataset holds as many sets as that has names,
and each column of a different rate constant is a set of its own. What is in the
store already, with the same data, is not done again.

A file onebarrier-columns.csv settles the headings of the files of its folder and
below: a line files,heading,role,unit,level, and one for each heading, such as
*.csv,temp,temperature,degC, or 1987/*.txt,err,u(k),s^-1,2.

The exit code is 4 where some data sets or files could not be used; survey status
tells why.`,
		Example: `  onebarrier survey run archive --store results.sqlite
  onebarrier survey run archive --store results.sqlite --dry-run
  onebarrier survey run archive --store part3.sqlite --shard 3/64`,
		Args: atLeast(1, "PATH"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.runSurvey(cmd, args, &o)
		},
		ValidArgsFunction: completeFiles(-1),
	}
	f := cmd.Flags()
	addStore(cmd, &o.store, false)
	addSurveyInput(cmd, &o)
	a.addJSON(cmd)
	f.BoolVar(&o.dryRun, "dry-run", false, "only read, and count data sets and errors; no store is needed")
	f.StringVar(&o.shard, "shard", "", "take `part` K of N, such as 3/64, into a store of its own; by default that of a task of a Slurm array")
	group(f, surveyFiles, "store", "dry-run", "shard")
	group(f, "for scripts", "json")
	return cmd
}

// surveyFiles heads flags in the help.
const surveyFiles = "what is read, and where the results are kept"

// addSurveyInput gives a command the flags that say what a survey reads and how it
// judges.
func addSurveyInput(cmd *cobra.Command, o *surveyOptions) {
	f := cmd.Flags()
	f.StringArrayVar(&o.include, "include", nil, "of folders, read only files that match this `pattern`, such as '*.csv' (repeat for more)")
	f.StringArrayVar(&o.exclude, "exclude", nil, "of folders, pass over what matches this `pattern`, such as 'old/*' (repeat for more)")
	f.BoolVar(&o.again, "again", false, "keep results of other settings in the store beside the new ones")
	group(f, surveyFiles, "include", "exclude", "again")
	addSelection(cmd, &o.assess.read)
	addJudging(cmd, &o.assess)
	oneOf(cmd, &o.nulls, "null-draws", "of the tests: sequential ends them once p is plainly not small, full draws as many as assess", diagnostics.NullsSequential, diagnostics.NullsFull)
	group(f, "how the data are judged", "null-draws")
}

// unsettling are flags that do not decide a result.
var unsettling = []string{"store", "include", "exclude", "dry-run", "again", "shard", "workers", "quiet", "color", "json"}

// surveySettings are the flags that decide the results, and the version.
func surveySettings(cmd *cobra.Command) survey.Settings {
	s := survey.Settings{"program": version()}
	cmd.Flags().VisitAll(func(f *pflag.Flag) {
		if slices.Contains(unsettling, f.Name) {
			return
		}
		if values := valuesOf(f); f.Value.String() != f.DefValue {
			slices.Sort(values)
			s[f.Name] = strings.Join(values, ", ")
		}
	})
	for _, name := range []string{"resamples", "seed"} { // said even where they are the default
		s[name] = cmd.Flags().Lookup(name).Value.String()
	}
	return s
}

// check refuses what can be refused before anything is read.
func (o *surveyOptions) check(paths []string) error {
	if err := o.assess.complete(); err != nil {
		return err
	}
	for _, p := range o.assess.read.leaveOut {
		if p.file == "" {
			return usagef("write --leave-out FILE:LINE", "--leave-out %d does not say in which file the line is", p.line)
		}
	}
	if slices.Contains(paths, "-") {
		return usagef("write it to a file first", "a survey does not read standard input")
	}
	return nil
}

func (a *app) runSurvey(cmd *cobra.Command, paths []string, o *surveyOptions) error {
	if err := o.check(paths); err != nil {
		return err
	}
	k, n, err := a.shardOf(o.shard, os.Getenv)
	if err != nil {
		return err
	}
	o.assess.asked(cmd)
	judge := o.assess.assess
	judge.Selection, judge.Version = selection(cmd), version()
	o.assess.read.AllowNonPositiveK = judge.ErrorModel.InK()
	opt := survey.Options{
		Paths: paths, Include: o.include, Exclude: o.exclude, Sheet: o.assess.read.sheet,
		Read: o.assess.read.Options, Assess: judge, FullNulls: o.nulls == diagnostics.NullsFull, Workers: judge.Workers, K: k, N: n,
	}
	var others []survey.Running
	opt.Others = func(at []survey.Running) {
		others = at
		for _, r := range at {
			a.warn("another survey run is at work on %s (%v); both go on and store what they finish, but what both find is assessed twice; stop one of them, or give this one other files or a store of its own", o.store.path, r)
		}
	}
	if places := o.assess.read.leaveOut; len(places) > 0 {
		opt.LeaveOut = func(file string, all []string) []int { return linesOf(places, file, all) }
	}
	if err := opt.Check(); err != nil {
		return usagef("", "%v", err)
	}
	var store *survey.Store
	if !o.dryRun {
		if err := o.store.check(cmd); err != nil {
			return err
		}
		create := survey.Create
		if o.again {
			create = survey.CreateAgain
		}
		if store, err = create(o.store.path, surveySettings(cmd)); err != nil {
			return ofStore(err)
		}
		defer store.Close()
	}
	clear := a.surveyProgress(&opt)
	sum, err := survey.Run(cmd.Context(), store, opt)
	clear()
	var pattern *survey.PatternError
	if errors.As(err, &pattern) {
		return usagef("", "%v", err)
	}
	var standing survey.Standing
	if store != nil {
		if err == nil {
			standing, err = store.Standing(cmd.Context())
		}
		err = errors.Join(err, store.Close())
	}
	if err != nil {
		if sum != nil && store != nil && cmd.Context().Err() != nil {
			a.warn("%d of the data sets found so far are in %s; the same command goes on with the others", sum.Known+sum.Stored, o.store.path)
		}
		return err
	}
	if a.json {
		err = report.JSON(a.out, newSurveyRunDocument(sum, o, k, n, others, standing))
	} else {
		err = a.writeSurvey(sum, o, k, n, standing)
	}
	if err != nil {
		return err
	}
	if sum.Failed > 0 {
		return &partialError{sum.Failed, sum.Mine, "data sets"}
	}
	return nil
}

// writeSurvey says what a run did.
func (a *app) writeSurvey(sum *survey.Summary, o *surveyOptions, k, n int, standing survey.Standing) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s in %s", manyOf(sum.Mine, "data set"), manyOf(sum.Files, "file"))
	if n > 1 {
		fmt.Fprintf(&b, ", part %d of %d (of %d)", k, n, sum.Sets)
	}
	b.WriteString("\n")
	if len(sum.Skipped) > 0 {
		var why []string
		for _, w := range slices.Sorted(maps.Keys(sum.Skipped)) {
			why = append(why, fmt.Sprintf("%d %s", sum.Skipped[w], w))
		}
		fmt.Fprintf(&b, "passed over: %s\n", strings.Join(why, ", "))
	}
	if !o.dryRun {
		fmt.Fprintf(&b, "stored now: %d; in the store before: %d\n", sum.Stored, sum.Known)
		if sum.Removed > 0 {
			fmt.Fprintf(&b, "removed: %d that are no longer in the files\n", sum.Removed)
		}
	}
	if sum.Failed > 0 {
		fmt.Fprintf(&b, "could not be used: %d\n", sum.Failed)
		for _, code := range sum.ErrorCodes() {
			fmt.Fprintf(&b, "  %5d  %s\n", sum.Errors[code], code)
		}
	}
	if standing.Copies > 0 {
		standing.Missing = "" // of other parts: not known here
		for _, s := range standing.Sentences() {
			for _, l := range report.Wrap(s, 80) {
				fmt.Fprintln(&b, l)
			}
		}
	}
	if !o.dryRun {
		store := report.ShellWord(o.store.path)
		fmt.Fprintf(&b, "next: onebarrier survey table --store %s\n", store)
		if sum.Failed > 0 {
			fmt.Fprintf(&b, "      onebarrier survey status --store %s   tells what failed and why\n", store)
		}
	}
	_, err := fmt.Fprint(a.out, b.String())
	return err
}

// surveyProgress shows on a terminal how far a survey is, how fast it goes and how
// long it takes still. The function that it returns clears the line.
func (a *app) surveyProgress(opt *survey.Options) func() {
	if a.progress == nil || a.quiet {
		return func() {}
	}
	opt.Progress = func(p survey.Progress) {
		s := p.Elapsed.Seconds()
		left := ""
		if p.Read > 0.01 && s > 2 {
			d := time.Duration(s*(1/p.Read-1)) * time.Second
			left = ", about " + d.Round(time.Second).String() + " left"
		}
		fmt.Fprintf(a.progress, "\r\x1b[K%d data sets, %d assessed, %.0f a second, %.0f %% read%s", p.Sets, p.Assessed, float64(p.Assessed)/max(s, 0.1), 100*p.Read, left)
	}
	return func() { fmt.Fprint(a.progress, "\r\x1b[K") }
}
