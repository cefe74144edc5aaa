package cli

import (
	"fmt"

	"github.com/spf13/cobra"
)

// exactly, atLeast and atMost count the arguments of a command.
func exactly(n int, what string) cobra.PositionalArgs { return counted(n, n, what) }
func atLeast(n int, what string) cobra.PositionalArgs { return counted(n, -1, what) }
func atMost(n int, what string) cobra.PositionalArgs  { return counted(0, n, what) }

func counted(least, most int, what string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		see := fmt.Sprintf("use it as: %s", cmd.UseLine())
		switch n := len(args); {
		case n < least:
			return usagef(see, "%s needs %s", cmd.Name(), what)
		case most == 0 && n > 0:
			return usagef(see, "%s takes no argument, has %q", cmd.Name(), args[0])
		case most >= 0 && n > most:
			return usagef(see, "%s takes one %s, has %d", cmd.Name(), what, n)
		}
		return nil
	}
}

// completeFiles lets the shell offer files for up to n arguments, -1 for any
// number.
func completeFiles(n int) cobra.CompletionFunc {
	return func(_ *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
		if n >= 0 && len(args) >= n {
			return nil, cobra.ShellCompDirectiveNoFileComp
		}
		return nil, cobra.ShellCompDirectiveDefault
	}
}

// completeWords offers words for the one argument of a command.
func completeWords(words func() []string) cobra.CompletionFunc {
	return func(_ *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
		if len(args) > 0 {
			return nil, cobra.ShellCompDirectiveNoFileComp
		}
		return words(), cobra.ShellCompDirectiveNoFileComp
	}
}
