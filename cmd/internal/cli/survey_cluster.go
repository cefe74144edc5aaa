package cli

import (
	"errors"
	"fmt"
	"os"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
)

func newSurveyMerge(a *app) *cobra.Command {
	o := &storeFlags{}
	cmd := &cobra.Command{
		Use:   "merge PART...",
		Short: "Join the stores of the parts of a survey into one",
		Long: `merge copies what survey run --shard K/N has stored in PART... into one store, whose
table is that of the same survey in one piece. Parts know how many they are: those
that are missing or not finished are named, and the exit code is 4 until every
part is there. Parts of other settings, and parts that did not read the same data,
are refused. It may be interrupted and given again, with the same parts or others.`,
		Example: `  onebarrier survey merge --store results.sqlite part1.sqlite part2.sqlite
  onebarrier survey merge --store all.sqlite all.sqlite.parts/*-of-64.sqlite`,
		Args:              atLeast(1, "PART"),
		RunE:              func(cmd *cobra.Command, args []string) error { return a.mergeSurvey(cmd, o, args) },
		ValidArgsFunction: completeFiles(-1),
	}
	addStore(cmd, o, false)
	return cmd
}

func (a *app) mergeSurvey(cmd *cobra.Command, o *storeFlags, parts []string) error {
	if err := o.check(cmd); err != nil {
		return err
	}
	m, err := survey.Merge(cmd.Context(), o.path, parts)
	if err != nil {
		return err
	}
	whole := "complete"
	if !m.Complete() {
		whole = "missing: " + numbers(m.Missing)
	}
	failed := ""
	if m.Failed > 0 {
		failed = fmt.Sprintf(", %d of them could not be used", m.Failed)
	}
	_, err = fmt.Fprintf(a.out, "%s: %s%s\n%d of %s, %s\nnext: onebarrier survey table --store %s\n",
		o.path, manyOf(m.Sets, "data set"), failed, m.Shards-len(m.Missing), manyOf(m.Shards, "part"), whole, report.ShellWord(o.path))
	if err != nil {
		return err
	}
	if m.Complete() {
		for _, e := range m.Unread { // what it holds is not needed
			a.warn("%v", e)
		}
		return nil
	}
	const most = 20
	all := slices.Clone(m.Unread)
	for _, x := range m.Missing {
		all = append(all, errors.New(x.String()))
	}
	if len(all) > most {
		all = append(all[:most], fmt.Errorf("and %d more", len(all)-most))
	}
	return errors.Join(append(all, &partialError{len(m.Missing), m.Shards, "parts"})...)
}

// numbers lists parts as sbatch --array takes them: 1,3-5.
func numbers(missing []survey.Missing) string {
	var list []string
	for i := 0; i < len(missing); {
		j := i
		for j+1 < len(missing) && missing[j+1].K == missing[j].K+1 {
			j++
		}
		text := strconv.Itoa(missing[i].K)
		if j > i {
			text += "-" + strconv.Itoa(missing[j].K)
		}
		list = append(list, text)
		i = j + 1
	}
	return strings.Join(list, ",")
}

// partLines says of the parts in a store how far they are, one by one where they are
// few.
func partLines(shards []survey.Shard) (lines []string) {
	const few = 4
	for len(shards) > 0 {
		n := shards[0].N
		same := slices.IndexFunc(shards, func(h survey.Shard) bool { return h.N != n })
		if same < 0 {
			same = len(shards)
		}
		done := map[int]bool{}
		for _, h := range shards[:same] {
			done[h.K] = h.Done
			what := "all data sets"
			if n > 1 {
				what = fmt.Sprintf("part %d of %d", h.K, n)
			}
			switch {
			case same > few:
			case h.Done:
				lines = append(lines, fmt.Sprintf("%s: complete, %s", what, manyOf(h.Sets, "data set")))
			default:
				lines = append(lines, what+": not complete; the same survey run goes on")
			}
		}
		if same > few {
			var missing []survey.Missing
			for k := 1; k <= n; k++ {
				if !done[k] {
					missing = append(missing, survey.Missing{K: k, N: n})
				}
			}
			line := fmt.Sprintf("%d of %d parts: complete", n-len(missing), n)
			if len(missing) > 0 {
				line += "; not there, or not complete: " + numbers(missing)
			}
			lines = append(lines, line)
		}
		shards = shards[same:]
	}
	return lines
}

// shardOf is the part that --shard names, or that of a task of a Slurm array; else all.
func (a *app) shardOf(flag string, getenv func(string) string) (k, n int, err error) {
	if flag != "" {
		if k, n, err = survey.ParseShard(flag); err != nil {
			return 0, 0, usagef("write K/N with K from 1 to N, such as 3/64", "--shard: %v", err)
		}
		return k, n, nil
	}
	k, n, ok, err := survey.ShardOfTask(getenv)
	switch {
	case err != nil:
		return 0, 0, usagef("", "%v", err)
	case !ok:
		return 1, 1, nil
	}
	a.warn("part %d of %d, that of this task of a Slurm array; --shard 1/1 takes all", k, n)
	return k, n, nil
}

// slurmOptions are the flags of survey slurm beside those of survey run.
type slurmOptions struct {
	run     surveyOptions
	tasks   int
	cpus    int
	program string
}

func newSurveySlurm(a *app) *cobra.Command {
	o := &slurmOptions{run: newSurveyOptions()}
	cmd := &cobra.Command{
		Use:   "slurm PATH...",
		Short: "Print a script that runs a survey as jobs of Slurm",
		Long: `slurm prints a script for bash that submits two jobs: an array whose tasks each run
one part of the survey into a store of its own, in the folder STORE.parts, and a
job that merges the parts into STORE as soon as all tasks have ended. Nothing is
submitted before the script is run, and all that runs stands in it.

Options of sbatch, such as --partition and --time, are given to the script. When
tasks failed or were killed, run the script again: what is finished is not done
again. The flags of survey run are handed to the tasks. Paths are taken from the
present folder, which every node must see under the same name; so is the program.`,
		Example: `  onebarrier survey slurm archive --store results.sqlite --tasks 64 > survey.sh
  onebarrier survey slurm archive --store results.sqlite --tasks 8 --cpus 4`,
		Args:              atLeast(1, "PATH"),
		RunE:              func(cmd *cobra.Command, args []string) error { return a.slurmScript(cmd, o, args) },
		ValidArgsFunction: completeFiles(-1),
	}
	f := cmd.Flags()
	addStore(cmd, &o.run.store, false)
	f.IntVar(&o.tasks, "tasks", 0, "`number` of parts, each a task; many clusters allow up to 1000")
	f.IntVar(&o.cpus, "cpus", 1, "processors of each task")
	f.StringVar(&o.program, "program", "", "`path` of this program on the cluster (default: where it is now)")
	group(f, "jobs", "store", "tasks", "cpus", "program")
	addSurveyInput(cmd, &o.run)
	// --cpus says it.
	if err := f.MarkHidden("workers"); err != nil {
		panic(err) // the flag does not exist: a bug
	}
	return cmd
}

func (a *app) slurmScript(cmd *cobra.Command, o *slurmOptions, paths []string) error {
	switch {
	case o.tasks < 1 || o.tasks > survey.MostShards:
		return usagef("write --tasks 64, for example", "survey slurm needs the number of tasks, from 1 to %d", survey.MostShards)
	case o.cpus < 1:
		return usagef("", "--cpus: a task needs 1 processor or more")
	case cmd.Flags().Changed("workers"):
		return usagef("write --cpus", "--workers of a task are its processors")
	}
	if err := o.run.store.check(cmd); err != nil {
		return err
	}
	if err := o.run.check(paths); err != nil {
		return err
	}
	s := survey.Slurm{Program: o.program, Store: o.run.store.path, Tasks: o.tasks, CPUs: o.cpus, Flags: taskFlags(cmd), Paths: paths}
	var err error
	if s.Folder, err = os.Getwd(); err != nil {
		return fmt.Errorf("the present folder is not known: %w; change into one", err)
	}
	if s.Program == "" {
		if s.Program, err = os.Executable(); err != nil {
			return fmt.Errorf("the place of this program is not known: %w; name it with --program", err)
		}
		if strings.Contains(s.Program, "go-build") {
			a.warn("go run makes a program that is gone when it ends; go build one, or name one with --program")
		}
	}
	return s.Write(a.out)
}

// ofTask are flags that the script gives to each task itself.
var ofTask = []string{"store", "tasks", "cpus", "program", "workers"}

// taskFlags lists the flags for survey run as words that give them again.
func taskFlags(cmd *cobra.Command) []string {
	var names []string
	cmd.LocalNonPersistentFlags().VisitAll(func(f *pflag.Flag) {
		if !slices.Contains(ofTask, f.Name) {
			names = append(names, f.Name)
		}
	})
	words := flagsGiven(cmd, names)
	for _, p := range valuesOf(cmd.Flags().Lookup("leave-out")) {
		words = append(words, "--leave-out", p)
	}
	return words
}

// newSurveyOptions are the defaults of a survey.
func newSurveyOptions() surveyOptions {
	o := surveyOptions{assess: assessOptions{assess: diagnostics.DefaultOptions()}, nulls: diagnostics.NullsSequential}
	o.assess.assess.Resamples = surveyResamples
	return o
}
