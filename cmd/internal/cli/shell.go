package cli

import (
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"
)

var shells = []string{"bash", "zsh", "fish", "powershell"}

func newCompletion(a *app) *cobra.Command {
	return &cobra.Command{
		Use:   "completion SHELL",
		Short: "Print the script that lets a shell complete commands, flags and their values",
		Long: `completion prints a script for bash, zsh, fish or powershell. Load it once to try
it, or from the shell's start-up file to keep it; bash does so with
source <(onebarrier completion bash), and needs no other package.`,
		Example: `  onebarrier completion bash > onebarrier.bash
  onebarrier completion fish > onebarrier.fish`,
		Args: exactly(1, "SHELL"),
		RunE: func(cmd *cobra.Command, args []string) error {
			root := cmd.Root()
			switch args[0] {
			case "bash":
				return bashCompletion(root, a.out)
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

// bashCompletion writes the script for bash. As it is generated it asks the package
// bash-completion for the words of the line, and without it complains at every key: here
// it finds them itself.
func bashCompletion(root *cobra.Command, w io.Writer) error {
	const borrowed = `_get_comp_words_by_ref "$@" cur prev words cword`
	var b strings.Builder
	if err := root.GenBashCompletionV2(&b, true); err != nil {
		return err
	}
	script := strings.Replace(b.String(), borrowed, "__onebarrier_words", 1)
	if script == b.String() {
		return fmt.Errorf("the script for bash is not as expected")
	}
	_, err := io.WriteString(w, script+bashWords)
	return err
}

// bashWords sets words, cword, cur and prev from what bash has split at = and : too.
const bashWords = `
# The words of the line, split at blanks alone: bash splits at = and : too.
__onebarrier_words() {
    local i w rest=$COMP_LINE
    words=() cword=0
    for ((i = 0; i < ${#COMP_WORDS[@]}; i++)); do
        w=${COMP_WORDS[i]}
        if ((i > 0)) && [[ $rest != [[:blank:]]* ]] && [[ $w == [=:]* || ${COMP_WORDS[i-1]} == *[=:] ]]; then
            words[${#words[@]}-1]+=$w
        else
            words+=("$w")
        fi
        rest=${rest#"${rest%%[![:blank:]]*}"}
        rest=${rest#"$w"}
        ((i == COMP_CWORD)) && cword=$((${#words[@]}-1))
    done
    cur=${words[cword]} prev=
    ((cword > 0)) && prev=${words[cword-1]}
    return 0
}
`

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
