// Package cli holds the commands. Each is a constructor, a struct of options and
// a run function; Main runs one command line in-process.
package cli

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"runtime/debug"
	"slices"
	"strings"
	"syscall"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
	"golang.org/x/term"

	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
)

// app is what every command works with.
type app struct {
	in       io.Reader
	out      io.Writer
	err      io.Writer
	json     bool
	quiet    bool
	colour   string
	progress io.Writer // stderr where it is a terminal, else nil
	failed   error     // of printing help, which has no other way to report it
}

// Main runs one command line and returns its exit code. On an error stdout stays
// empty, or holds one problems document with --json.
func Main(ctx context.Context, args []string, in io.Reader, out, errOut io.Writer) int {
	ctx, stop := withSignals(ctx)
	defer stop()
	a := &app{in: in, out: out, err: errOut, colour: "auto"}
	if isTerminal(errOut) {
		a.progress = errOut
	}
	root := newRoot(a)
	root.SetArgs(args)
	root.SetIn(in)
	root.SetOut(out)
	root.SetErr(errOut)
	err := guard(errOut, func() error { return root.ExecuteContext(ctx) })
	if err == nil {
		err = a.failed
	}
	// Whatever a command made of it, a signal is why the work ended.
	var sig *signalError
	if err != nil && errors.As(context.Cause(ctx), &sig) {
		err = sig
	}
	return a.finish(err, a.json || is[*usageError](err) && asksJSON(args))
}

// guard turns a panic into an error: one line, and the trace only for those who
// ask with ONEBARRIER_DEBUG.
func guard(errOut io.Writer, run func() error) (err error) {
	defer func() {
		if v := recover(); v != nil {
			if os.Getenv("ONEBARRIER_DEBUG") != "" {
				fmt.Fprintf(errOut, "%s", debug.Stack())
			}
			err = &panicError{firstLine(v)}
		}
	}()
	return run()
}

// firstLine keeps a panic that carries a trace in its text to one line.
func firstLine(v any) string {
	s, _, _ := strings.Cut(strings.TrimSpace(fmt.Sprint(v)), "\n")
	return s
}

// finish reports an error and returns the exit code.
func (a *app) finish(err error, asJSON bool) int {
	code := exitCode(err)
	if err == nil {
		return code
	}
	a.complain(err)
	if asJSON && code >= exitFailed && code <= exitData {
		doc := report.Problems{Schema: report.ProblemsSchema, Problems: problemsOf(err)}
		if err := report.JSON(a.out, doc); err != nil {
			fmt.Fprintf(a.err, "onebarrier: %v\n", err)
		}
	}
	return code
}

// complain prints an error on stderr, each of its lines under the program's name.
// On a terminal they are wrapped, with the cure on a line of its own.
func (a *app) complain(err error) {
	if isTerminal(a.err) {
		for _, line := range wrapError(err, widthOf(a.err)) {
			fmt.Fprintln(a.err, line)
		}
		return
	}
	for _, line := range strings.Split(err.Error(), "\n") {
		fmt.Fprintf(a.err, "onebarrier: %s\n", line)
	}
}

// asksJSON looks for --json in a command line that could not be read as a whole.
func asksJSON(args []string) bool {
	end := slices.Index(args, "--")
	if end < 0 {
		end = len(args)
	}
	return slices.Contains(args[:end], "--json") || slices.Contains(args[:end], "--json=true")
}

// withSignals cancels the context at SIGINT and SIGTERM, with the signal as the
// cause. A second signal ends the program at once.
func withSignals(ctx context.Context) (context.Context, func()) {
	ctx, cancel := context.WithCancelCause(ctx)
	ch := make(chan os.Signal, 1)
	signal.Notify(ch, os.Interrupt, syscall.SIGTERM)
	done := make(chan struct{})
	go func() {
		select {
		case s := <-ch:
			signal.Stop(ch)
			cancel(&signalError{s})
		case <-done:
		}
	}()
	return ctx, func() {
		signal.Stop(ch)
		close(done)
		cancel(nil)
	}
}

func newRoot(a *app) *cobra.Command {
	root := &cobra.Command{
		Use:   "onebarrier COMMAND",
		Short: "Tell whether rate constants at several temperatures have one barrier",
		Long: `onebarrier reads rate constants measured at several temperatures and tells
whether one barrier describes them, whether the data could have told, what to
publish and with what uncertainty.`,
		Example: `  onebarrier inspect rates.csv
  onebarrier assess rates.csv
  onebarrier assess rates.csv --figures figures
  onebarrier explain unresolved`,
		Version:       version(),
		SilenceErrors: true,
		SilenceUsage:  true,
		Args:          cobra.ArbitraryArgs, // refused below, with a suggestion
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 0 {
				return cmd.Help()
			}
			return unknownName("command", args[0], commandNames(cmd), "onebarrier --help lists the commands")
		},
		PersistentPreRunE: func(cmd *cobra.Command, _ []string) error { return takenForValue(cmd) },
		CompletionOptions: cobra.CompletionOptions{DisableDefaultCmd: true},
	}
	root.SetVersionTemplate("onebarrier {{.Version}}\n")
	root.SetFlagErrorFunc(flagError)
	root.SetHelpFunc(func(cmd *cobra.Command, _ []string) { a.failed = printHelp(a.out, cmd) })
	root.PersistentFlags().BoolVar(&a.quiet, "quiet", false, "no progress and no warnings on stderr")
	root.PersistentFlags().Var(&choice{&a.colour, []string{"auto", "always", "never"}}, "color", "colour in text")
	completeWith(root, "color", "auto", "always", "never")
	root.AddCommand(newAssess(a), newInspect(a), newModels(a), newExplain(a), newSurvey(a), newSchema(a), newCompletion(a), newVersion(a))
	root.SetHelpCommand(newHelp())
	return root
}

func commandNames(cmd *cobra.Command) []string {
	var names []string
	for _, c := range cmd.Root().Commands() {
		if !c.Hidden {
			names = append(names, c.Name())
		}
	}
	return names
}

// addJSON gives a command the flag --json.
func (a *app) addJSON(cmd *cobra.Command) {
	cmd.Flags().BoolVar(&a.json, "json", false, "print one JSON document")
}

// flagError puts what is wrong with a flag into a sentence with a cure.
func flagError(cmd *cobra.Command, err error) error {
	var unknown *pflag.NotExistError
	var invalid *pflag.InvalidValueError
	var noValue *pflag.ValueRequiredError
	see := fmt.Sprintf("%s --help lists the flags", cmd.CommandPath())
	// In "survey tabel --store s" the command is mistyped, not the flag.
	if words := cmd.Flags().Args(); cmd.HasSubCommands() && len(words) > 0 {
		return cmd.RunE(cmd, words)
	}
	switch {
	case errors.As(err, &unknown):
		name, dash := unknown.GetSpecifiedName(), "--"
		if short := unknown.GetSpecifiedShortnames(); short != "" { // -json
			name, dash = short, "-"
		}
		var names []string
		add := func(f *pflag.Flag) { names = append(names, f.Name) }
		cmd.Flags().VisitAll(add)
		cmd.InheritedFlags().VisitAll(add)
		if s := closest(name, names); s != "" {
			see = fmt.Sprintf("did you mean --%s?", s)
		}
		return usagef(see, "%s has no flag %s%s", cmd.Name(), dash, name)
	case errors.As(err, &noValue):
		return needsValue(noValue.GetFlag())
	case errors.As(err, &invalid):
		f := invalid.GetFlag()
		cause := errors.Unwrap(invalid)
		what := map[string]string{"int": "a whole number", "uint64": "a whole number, 0 or more", "float64": "a number", "bool": "true or false", "intSlice": "a list of whole numbers such as 3,7"}[f.Value.Type()]
		if what != "" {
			return usagef("", "--%s: %q is not %s", f.Name, invalid.GetValue(), what)
		}
		return usagef("", "--%s: %v", f.Name, cause)
	}
	return usagef(see, "%v", err)
}

// needsValue says that a flag stands without its value.
func needsValue(f *pflag.Flag) error {
	value, _ := pflag.UnquoteUsage(f)
	return usagef(fmt.Sprintf("write --%s %s", f.Name, strings.ToUpper(value)), "--%s needs a value", f.Name)
}

// takenForValue refuses a flag that was taken for the value of the one before it: in
// --figures --json the folder was forgotten.
func takenForValue(cmd *cobra.Command) error {
	var err error
	cmd.Flags().Visit(func(f *pflag.Flag) {
		name, isFlag := strings.CutPrefix(f.Value.String(), "--")
		name, _, _ = strings.Cut(name, "=")
		if isFlag && err == nil && cmd.Flags().Lookup(name) != nil {
			err = needsValue(f)
		}
	})
	return err
}

// text says how to lay out text on stdout.
func (a *app) text() report.Text {
	t := report.Text{}
	f, ok := a.out.(*os.File)
	terminal := ok && term.IsTerminal(int(f.Fd()))
	if terminal {
		if w, _, err := term.GetSize(int(f.Fd())); err == nil {
			t.Width = w
		}
	}
	switch a.colour {
	case "always":
		t.Colour = true
	case "auto":
		// https://no-color.org: a value that is not empty asks for no colour.
		t.Colour = terminal && os.Getenv("NO_COLOR") == "" && os.Getenv("TERM") != "dumb"
	}
	return t
}

func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

// warn prints a message on stderr, wrapped, unless the user wants quiet.
func (a *app) warn(format string, args ...any) {
	if a.quiet {
		return
	}
	for i, l := range report.Wrap("onebarrier: "+fmt.Sprintf(format, args...), widthOf(a.err)-2) {
		if i > 0 {
			l = "  " + l
		}
		fmt.Fprintln(a.err, l)
	}
}

// widthOf is the width of a terminal, 80 for anything else.
func widthOf(w io.Writer) int {
	if f, ok := w.(*os.File); ok {
		if n, _, err := term.GetSize(int(f.Fd())); err == nil && n >= 40 {
			return n
		}
	}
	return 80
}

// tool names this program in documents.
func tool() diagnostics.Tool { return diagnostics.Tool{Name: "onebarrier", Version: version()} }

// version is the module's version as the build recorded it.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok || info.Main.Version == "" {
		return "(devel)"
	}
	return info.Main.Version
}
