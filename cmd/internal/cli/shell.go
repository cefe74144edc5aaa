package cli

import (
	"fmt"

	"github.com/spf13/cobra"
)

var shells = []string{"bash", "zsh", "fish", "powershell"}

func newCompletion(a *app) *cobra.Command {
	return &cobra.Command{
		Use:   "completion SHELL",
		Short: "Print the script that lets a shell complete commands, flags and their values",
		Long: `completion prints a script for bash, zsh, fish or powershell. Load it once to try
it, or from the shell's start-up file to keep it.`,
		Example: `  onebarrier completion bash > onebarrier.bash
  onebarrier completion fish > onebarrier.fish`,
		Args: exactly(1, "SHELL"),
		RunE: func(cmd *cobra.Command, args []string) error {
			root := cmd.Root()
			switch args[0] {
			case "bash":
				return root.GenBashCompletionV2(a.out, true)
			case "zsh":
				return root.GenZshCompletion(a.out)
			case "fish":
				return root.GenFishCompletion(a.out, true)
			case "powershell":
				return root.GenPowerShellCompletionWithDesc(a.out)
			}
			return unknownName("shell", args[0], shells, "use bash, zsh, fish or powershell")
		},
		ValidArgsFunction: completeWords(func() []string { return shells }),
	}
}

func newHelp() *cobra.Command {
	return &cobra.Command{
		Use:     "help [COMMAND]",
		Short:   "Print the help of a command",
		Example: "  onebarrier help assess",
		Args:    atMost(1, "COMMAND"),
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 0 {
				return cmd.Root().Help()
			}
			for _, c := range cmd.Root().Commands() {
				if c.Name() == args[0] {
					return c.Help()
				}
			}
			return unknownName("command", args[0], commandNames(cmd), "onebarrier --help lists the commands")
		},
		ValidArgsFunction: func(cmd *cobra.Command, args []string, toComplete string) ([]string, cobra.ShellCompDirective) {
			return completeWords(func() []string { return commandNames(cmd) })(cmd, args, toComplete)
		},
	}
}

func newVersion(a *app) *cobra.Command {
	return &cobra.Command{
		Use:     "version",
		Short:   "Print the version",
		Example: "  onebarrier version",
		Args:    atMost(0, ""),
		RunE: func(*cobra.Command, []string) error {
			_, err := fmt.Fprintln(a.out, "onebarrier", version())
			return err
		},
	}
}
