package cli

import (
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"onebarrier/cmd/internal/report"
)

// readingFlags decide what is read of a file and which rows are kept.
var readingFlags = append([]string{"assume"}, recordedFlags...)

// flagsGiven lists those of the named flags that were given, as words that give
// them again. --leave-out names a line of a single file by its number alone, and is
// left to the caller.
func flagsGiven(cmd *cobra.Command, names []string) []string {
	var words []string
	for _, name := range names {
		f := cmd.Flags().Lookup(name)
		if f == nil || !f.Changed || name == "leave-out" {
			continue
		}
		if f.Value.Type() == "bool" {
			words = append(words, "--"+name)
			continue
		}
		for _, v := range valuesOf(f) {
			words = append(words, "--"+name, v)
		}
	}
	return words
}

// valuesOf are the values of a flag that may be repeated, else its one value.
func valuesOf(f *pflag.Flag) []string {
	if s, ok := f.Value.(pflag.SliceValue); ok {
		return s.GetSlice()
	}
	return []string{f.Value.String()}
}

// nextCommand is the command line that assesses what inspect showed first, quoted
// for a shell: its files, what chose the rows, and what chooses one of several
// tables and data sets.
func nextCommand(cmd *cobra.Command, files []string, o *reading, sheet, set string) string {
	words := []string{"onebarrier", "assess"}
	for _, f := range files {
		if strings.HasPrefix(f, "-") && f != "-" {
			f = "./" + f
		}
		words = append(words, f)
	}
	words = append(words, flagsGiven(cmd, readingFlags)...)
	if sheet != "" && !cmd.Flags().Changed("sheet") {
		words = append(words, "--sheet", sheet)
	}
	if set != "" && !cmd.Flags().Changed("dataset") {
		words = append(words, "--dataset", set)
	}
	var out []string
	for _, p := range o.leaveOut {
		switch {
		case len(files) > 1:
			out = append(out, p.String())
		case p.file == "" || fileNamed(p.file, files) != "":
			out = append(out, place{line: p.line}.String())
		}
	}
	if len(out) > 0 {
		words = append(words, "--leave-out", strings.Join(out, ","))
	}
	for i, w := range words {
		words[i] = report.ShellWord(w)
	}
	return strings.Join(words, " ")
}
