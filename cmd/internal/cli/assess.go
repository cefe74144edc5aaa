package cli

import (
	"context"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"onebarrier/bootstrap"
	"onebarrier/cmd/internal/figure"
	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/fit"
)

// assessOptions are the flags of assess.
type assessOptions struct {
	read       reading
	assess     diagnostics.Options
	errorModel string
	models     string
	expect     []string
	figures    string
	figure     figure.Options
	local      bool // a table of E between neighbouring temperatures
	influence  bool // tables of what points and errors of T do to the verdict
}

func newAssess(a *app) *cobra.Command {
	o := &assessOptions{assess: diagnostics.DefaultOptions()}
	cmd := &cobra.Command{
		Use:   "assess FILE...",
		Short: "Tell whether one barrier describes the data, and what to publish",
		Long: `assess reads one data set, fits the candidate curves, tests for curvature and
prints the verdict, what to publish and with what uncertainty, the ranking of
the candidates and every finding with its cure. FILE is a table with one column
of temperatures and one of rate constants, as text or in a sheet of a workbook
(.xlsx); - reads standard input. Several files are assessed as one with --pool:
they must hold the same rate quantity, in units of one dimension; data set, rows
and temperatures are chosen in each file before they are joined.

Further columns serve, where there are: u(k) and u(T) weigh the points, source
tells laboratories apart, dataset divides the file, and order, the order of the
runs, shows whether k drifted while it was measured.`,
		Example: `  onebarrier assess rates.csv
  onebarrier assess rates.csv --figures figures --figure-format pdf
  onebarrier assess rates.csv --t-max 330K --resamples 999 --seed 7
  onebarrier assess rates.csv --error-model relative --energy-unit kcal/mol
  onebarrier assess - --json < rates.csv
  onebarrier assess rates.csv second.csv --pool --leave-out second.csv:7
  onebarrier assess rates.csv --quiet --expect straight-within,unresolved`,
		Args: atLeast(1, "FILE"),
		RunE: func(cmd *cobra.Command, args []string) error {
			o.assess.Selection = selection(cmd)
			o.asked(cmd)
			for _, name := range []string{"figure-format", "y", "x"} {
				if cmd.Flags().Changed(name) && o.figures == "" {
					return usagef("give --figures FOLDER too", "--%s is for pictures, and none are asked for", name)
				}
			}
			if len(args) > 1 && !o.read.pool {
				return usagef("--pool joins them into one; inspect shows each; or give one at a time",
					"assess takes one data set, and %d files are named", len(args))
			}
			return a.runAssess(cmd.Context(), args, o)
		},
		ValidArgsFunction: completeFiles(-1),
	}
	f := cmd.Flags()
	addSelection(cmd, &o.read)
	addPool(cmd, &o.read)
	addJudging(cmd, o)
	f.BoolVar(&o.local, "local-energies", false, "print E between neighbouring temperatures too")
	f.BoolVar(&o.influence, "influence", false, "print the test without each temperature and point too, and what errors of T do")
	f.StringVar(&o.figures, "figures", "", "write the pictures into this `folder`")
	oneOf(cmd, &o.figure.Format, "figure-format", "of the pictures (default svg)", "svg", "png", "pdf")
	oneOf(cmd, &o.figure.Y, "y", "logarithm on the y axis (default ln)", "ln", "lg")
	oneOf(cmd, &o.figure.X, "x", "x axis (default 1000/T)", "1000/T", "10000/T", "1/kT")
	f.StringSliceVar(&o.expect, "expect", nil, "exit with code 5 unless the verdict is one of these `codes`")
	a.addJSON(cmd)
	group(f, "what is published", "local-energies", "influence")
	group(f, "pictures", "figures", "figure-format", "y", "x")
	group(f, "for scripts", "json", "expect")
	completeList(cmd, "expect", stateNames()...)
	return cmd
}

// asked notes which settings the user gave, whatever their value.
func (o *assessOptions) asked(cmd *cobra.Command) {
	o.assess.KeepResamples = cmd.Flags().Changed("resamples")
	o.assess.KeepEnergyUnit = cmd.Flags().Changed("energy-unit")
}

// oneOf gives a command a flag that takes one of a few words.
func oneOf(cmd *cobra.Command, value *string, name, usage string, words ...string) {
	cmd.Flags().Var(&choice{value, words}, name, usage)
	completeWith(cmd, name, words...)
}

// addJudging gives a command the flags that say how data sets are judged.
func addJudging(cmd *cobra.Command, o *assessOptions) {
	f := cmd.Flags()
	d := &o.assess
	oneOf(cmd, &o.errorModel, "error-model", "what is assumed about the errors; by default the stated uncertainties decide", words(fit.ErrorModels)...)
	oneOf(cmd, &d.Replicates, "replicates", "how points at one temperature count", diagnostics.ReplicatesWays...)
	oneOf(cmd, &d.Sources, "sources", "each source with an offset of its own in ln k, or all as one", diagnostics.SourcesWays...)
	f.Var(band{&d.PrefactorBand}, "prefactor-band", "exponents of T that a usual prefactor gives")
	f.StringVar(&d.Tolerance, "tolerance", d.Tolerance, "`change` of E too small to matter, such as 0.5kJ/mol or 5% (default 5%, at least 0.5kJ/mol)")
	f.StringVar(&d.ThermometerError, "thermometer-error", d.ThermometerError, "what the thermometer may be wrong by, by `shape` (default u(T), or offset=0.5K,gain=0.5K,bow=0.1K)")
	f.Float64Var(&d.Confidence, "confidence", d.Confidence, "of every interval")
	oneOf(cmd, &d.Criterion, "criterion", "ranks the candidates", diagnostics.Criteria...)
	f.StringVar(&o.models, "models", "", "candidates: `names` of curves or forms separated by commas; +NAME adds to the defaults, all takes every curve of the catalogue")
	f.IntVar(&d.Resamples, "resamples", d.Resamples, "of the bootstrap, 0 for none")
	oneOf(cmd, &d.Scheme, "scheme", "of the bootstrap; by default the error model decides", words(bootstrap.Schemes)...)
	f.StringSliceVar(&d.Intervals, "intervals", d.Intervals, "bootstrap `methods`: bootstrap-t, percentile, bca")
	f.Uint64Var(&d.Seed, "seed", d.Seed, "of every random number")
	f.IntVar(&d.Workers, "workers", d.Workers, "processors to use, 0 for all; does not change the result")
	f.Var(temperature{&d.ReferenceTemperature}, "reference-temperature", "at which k is published (default 298.15K where measured, else near the middle of the data)")
	oneOf(cmd, &d.EnergyUnit, "energy-unit", "of all energies; given, it decides the form of what is published too, unless --publish does", diagnostics.EnergyUnits...)
	oneOf(cmd, &d.PublishStyle, "publish", "form of what is to be published; by default the unit of k decides", diagnostics.PublishStyles...)
	group(f, "how the data are judged", "error-model", "replicates", "sources", "prefactor-band", "tolerance", "thermometer-error", "confidence", "criterion", "models")
	group(f, "bootstrap", "resamples", "scheme", "intervals", "seed", "workers")
	group(f, "what is published", "reference-temperature", "energy-unit", "publish")
	names := models.Names()
	offers := append(slices.Clone(names), "all")
	for _, n := range names {
		offers = append(offers, "+"+n)
	}
	completeList(cmd, "models", offers...)
	completeList(cmd, "intervals", words(bootstrap.Methods)...)
	completeWith(cmd, "thermometer-error", "offset=0.5K,gain=0.5K,bow=0.1K", "bow=0.02K")
	completeWith(cmd, "tolerance", "0.5kJ/mol", "1kJ/mol", "5%")
}

func (a *app) runAssess(ctx context.Context, files []string, o *assessOptions) error {
	if err := o.complete(); err != nil {
		return err
	}
	if o.figures != "" {
		if err := writable(o.figures); err != nil {
			return err
		}
	}
	o.read.AllowNonPositiveK = o.assess.ErrorModel.InK()
	set, err := a.readOne(ctx, files, o.read)
	if err != nil {
		return err
	}
	o.assess.Version = version()
	done := a.trackProgress(&o.assess)
	result, err := interruptible(ctx, func() (*diagnostics.Assessment, error) {
		return diagnostics.Assess(ctx, set, o.assess)
	})
	done()
	if err != nil {
		return err
	}
	var pictures []string
	if o.figures != "" {
		if pictures, err = figure.Write(o.figures, result, o.figure); err != nil {
			return err
		}
	}
	if a.json {
		for _, f := range result.Findings {
			if f.Severity != diagnostics.Info {
				a.warn("%s: %s: %s", f.Severity, f.Code, join(f.Message, f.Cure))
			}
		}
		err = report.JSON(a.out, result)
	} else {
		t := a.text()
		t.LocalEnergies, t.Influence = o.local, o.influence
		err = report.WriteAssessment(a.out, result, pictures, t)
	}
	if err != nil {
		return err
	}
	if len(o.expect) > 0 && !slices.Contains(o.expect, string(result.Verdict.State)) {
		return &expectError{result.Verdict.State, o.expect}
	}
	return nil
}

// complete turns flags that are words into what the library takes, and refuses
// what can be refused before anything is read.
func (o *assessOptions) complete() error {
	o.assess.ErrorModel = fit.ErrorModel(o.errorModel)
	curves, err := models.Select(o.models)
	if err != nil {
		for _, name := range strings.Split(o.models, ",") {
			name = strings.TrimPrefix(strings.TrimSpace(name), "+")
			if _, err := models.Lookup(name); err != nil {
				return unknownName("curve or form", name, models.Names(), "onebarrier models lists them")
			}
		}
		return usagef("onebarrier models lists the curves", "--models: %v", err)
	}
	if o.models != "" {
		o.assess.Models = curves
	}
	for _, code := range o.expect {
		if !slices.Contains(diagnostics.States, diagnostics.State(code)) {
			return unknownName("verdict", code, stateNames(), "use "+strings.Join(stateNames(), ", "))
		}
	}
	if err := o.assess.Check(); err != nil {
		return usagef("", "%s", strings.TrimPrefix(err.Error(), "diagnostics: "))
	}
	return nil
}

func stateNames() []string { return words(diagnostics.States) }

// words turns named strings into plain ones.
func words[S ~string](named []S) []string {
	out := make([]string, len(named))
	for i, s := range named {
		out[i] = string(s)
	}
	return out
}

// writable makes a folder and sees that files can be written there, before the
// long work starts.
func writable(dir string) error {
	if at, err := os.Stat(dir); err == nil && !at.IsDir() {
		return fmt.Errorf("the folder for pictures cannot be made: %s is a file; name a folder, which is made where there is none", dir)
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return fmt.Errorf("the folder for pictures cannot be made: %w", err)
	}
	f, err := os.CreateTemp(dir, ".onebarrier-*")
	if err != nil {
		return fmt.Errorf("pictures cannot be written: %w", err)
	}
	f.Close()
	return os.Remove(f.Name())
}

// trackProgress shows on a terminal how far the bootstrap is. The function that
// it returns clears the line.
func (a *app) trackProgress(o *diagnostics.Options) func() {
	if a.progress == nil || a.quiet {
		return func() {}
	}
	p := &progress{w: a.progress}
	o.Progress = p.show
	return p.clear
}

// progress writes over one line of a terminal, at most ten times a second.
type progress struct {
	w    io.Writer
	last time.Time
	used bool
}

func (p *progress) show(done, total int) {
	now := time.Now()
	if total == 0 || now.Sub(p.last) < 100*time.Millisecond {
		return
	}
	p.last, p.used = now, true
	fmt.Fprintf(p.w, "\rresampling %3d %%", 100*done/total)
}

func (p *progress) clear() {
	if p.used {
		fmt.Fprint(p.w, "\r\x1b[K")
	}
}

// interruptible runs work that looks at ctx only now and then, and leaves it behind
// when ctx ends: a fit of many points is not waited for. A panic of the work is one
// of the caller.
func interruptible[T any](ctx context.Context, work func() (T, error)) (T, error) {
	type outcome struct {
		result   T
		err      error
		panicked any
	}
	done := make(chan outcome, 1)
	go func() {
		var o outcome
		defer func() {
			o.panicked = recover()
			done <- o
		}()
		o.result, o.err = work()
	}()
	select {
	case o := <-done:
		if o.panicked != nil {
			panic(o.panicked)
		}
		return o.result, o.err
	case <-ctx.Done():
		var none T
		return none, ctx.Err()
	}
}
