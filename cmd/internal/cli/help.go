package cli

import (
	"fmt"
	"io"
	"strings"
	"unicode/utf8"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"onebarrier/cmd/internal/report"
)

const (
	helpWidth  = 80
	helpIndent = 28 // what a flag does begins here
	groupKey   = "group"
)

// group puts flags of a command under a heading of its help.
func group(f *pflag.FlagSet, heading string, names ...string) {
	for _, name := range names {
		if err := f.SetAnnotation(name, groupKey, []string{heading}); err != nil {
			panic(err) // the flag does not exist: a bug of the caller
		}
	}
}

// printHelp prints what a command does, how it is used, and its flags in groups,
// within 80 columns.
func printHelp(w io.Writer, cmd *cobra.Command) error {
	var b strings.Builder
	long := cmd.Long
	if long == "" {
		long = cmd.Name() + ": " + cmd.Short
	}
	for _, l := range report.Wrap(long, helpWidth) {
		fmt.Fprintln(&b, l)
	}
	fmt.Fprintf(&b, "\nuse it as\n  %s\n", cmd.UseLine())
	if cmd.HasAvailableSubCommands() {
		b.WriteString("\ncommands\n")
		for _, c := range cmd.Commands() {
			if c.IsAvailableCommand() || c.Name() == "help" {
				entry(&b, 14, c.Name(), c.Short)
			}
		}
	}
	if cmd.HasExample() {
		fmt.Fprintf(&b, "\nexamples\n%s\n", cmd.Example)
	}
	// Flags in the order in which they were defined, under the heading of each.
	var headings []string
	flags := map[string][]*pflag.Flag{}
	collect := func(f *pflag.Flag) {
		heading := "other flags"
		if g := f.Annotations[groupKey]; len(g) > 0 {
			heading = g[0]
		}
		if len(flags[heading]) == 0 {
			headings = append(headings, heading)
		}
		flags[heading] = append(flags[heading], f)
	}
	cmd.Flags().SortFlags = false
	cmd.LocalFlags().VisitAll(collect)
	cmd.InheritedFlags().VisitAll(collect)
	for _, h := range headings {
		fmt.Fprintf(&b, "\n%s\n", h)
		for _, f := range flags[h] {
			value, usage := pflag.UnquoteUsage(f)
			name := "--" + f.Name
			if value != "" {
				name += " " + value
			}
			switch f.DefValue {
			case "", "0", "false", "[]":
			default:
				usage += " (default " + strings.Trim(f.DefValue, "[]") + ")"
			}
			entry(&b, helpIndent, name, usage)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// entry prints a name and what it stands for, on the next line where the name is
// long.
func entry(b *strings.Builder, indent int, name, text string) {
	name = "  " + name
	lines := report.Wrap(text, helpWidth-indent)
	if n := utf8.RuneCountInString(name); n > indent-2 {
		fmt.Fprintln(b, name)
	} else {
		fmt.Fprintln(b, name+strings.Repeat(" ", indent-n)+lines[0])
		lines = lines[1:]
	}
	for _, l := range lines {
		fmt.Fprintln(b, strings.Repeat(" ", indent)+l)
	}
}
