package cli

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
)

func newSurveyStatus(a *app) *cobra.Command {
	o := &storeFlags{}
	cmd := &cobra.Command{
		Use:   "status",
		Short: "Print what of a survey is done, and what failed why",
		Long: `status prints the settings of a store, how many data sets are in it, their verdicts,
how many are curved at a false discovery rate of 5 %, and the errors with the first
files and lines that have them. It says where a survey is not complete, and how
many data sets have the same data as another.`,
		Example: `  onebarrier survey status --store results.sqlite`,
		Args:    atMost(0, ""),
		RunE: func(cmd *cobra.Command, _ []string) error {
			return a.surveyStatus(cmd, o)
		},
	}
	addStore(cmd, o, true)
	return cmd
}

func (a *app) surveyStatus(cmd *cobra.Command, o *storeFlags) error {
	s, err := o.open(cmd)
	if err != nil {
		return err
	}
	defer s.Close()
	all, err := s.AllSettings()
	if err != nil {
		return err
	}
	shards, err := s.Shards()
	if err != nil {
		return err
	}
	const shown = 3 // examples of each error
	states, errors := map[string]int{}, map[string]int{}
	examples := map[string][]survey.Row{}
	n, files, last := 0, 0, ""
	tally, err := s.Table(cmd.Context(), survey.TableOptions{}, func(r *survey.Row) error {
		n++
		if r.SourceFile != last {
			files, last = files+1, r.SourceFile
		}
		if r.ErrorCode == "" {
			states[r.State]++
			return nil
		}
		errors[r.ErrorCode]++
		if e := examples[r.ErrorCode]; len(e) < shown {
			examples[r.ErrorCode] = append(e, *r)
		}
		return nil
	})
	if err != nil {
		return err
	}
	standing, err := s.Standing(cmd.Context())
	if err != nil {
		return err
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %s of %s\n", o.path, manyOf(n, "data set"), manyOf(files, "file"))
	if len(all) > 1 {
		fmt.Fprintf(&b, "settings %d of %s; --settings NUMBER shows others\n", s.Number(), keptSettings(all))
	}
	var settings []string
	for _, name := range slices.Sorted(maps.Keys(s.Settings())) {
		settings = append(settings, name+" "+s.Settings()[name])
	}
	for _, l := range report.Wrap("settings: "+strings.Join(settings, "; "), 80) {
		fmt.Fprintln(&b, l)
	}
	for _, l := range partLines(shards) {
		fmt.Fprintln(&b, l)
	}
	for _, sentence := range standing.Sentences() {
		for _, l := range report.Wrap(sentence, 80) {
			fmt.Fprintln(&b, l)
		}
	}
	if len(states) > 0 {
		b.WriteString("\nverdicts, at 5 % for each data set by itself\n")
		for _, state := range diagnostics.States {
			if c := states[string(state)]; c > 0 {
				fmt.Fprintf(&b, "  %7d  %s\n", c, state)
			}
		}
	}
	if tally.Testable > 0 {
		b.WriteString("\nat a false discovery rate of 5 %, over ")
		fmt.Fprintf(&b, "%s that can be tested\n", manyOf(tally.Testable, "data set"))
		fmt.Fprintf(&b, "  %7d  E changes: survey table --max-q 0.05\n", tally.Found)
		fmt.Fprintf(&b, "  %7d  by more than a prefactor explains: survey table --max-q-band 0.05\n", tally.FoundBand)
	}
	if len(errors) > 0 {
		b.WriteString("\ncould not be used\n")
		codes := slices.SortedFunc(maps.Keys(errors), func(x, y string) int {
			if d := errors[y] - errors[x]; d != 0 {
				return d
			}
			return strings.Compare(x, y)
		})
		for _, code := range codes {
			fmt.Fprintf(&b, "  %7d  %s\n", errors[code], code)
			for _, r := range examples[code] {
				for _, l := range report.Wrap(placeOf(&r)+": "+oneLine(r.Error), 80-11) {
					fmt.Fprintf(&b, "           %s\n", l)
				}
			}
			if more := errors[code] - len(examples[code]); more > 0 {
				fmt.Fprintf(&b, "           and %d more\n", more)
			}
		}
		store := report.ShellWord(o.path)
		fmt.Fprintf(&b, "next: onebarrier survey table --store %s --state failed   prints all of them\n", store)
		fmt.Fprintf(&b, "      onebarrier survey show FILE --store %s   every problem of one\n", store)
	}
	_, err = fmt.Fprint(a.out, b.String())
	return err
}

func keptSettings(all map[int]survey.Settings) string {
	var n []string
	for _, i := range slices.Sorted(maps.Keys(all)) {
		n = append(n, fmt.Sprint(i))
	}
	return strings.Join(n, ", ")
}

// placeOf says where a row comes from: file[sheet]:line, data set "name".
func placeOf(r *survey.Row) string {
	s := oneLine(r.SourceFile)
	if r.Sheet != "" {
		s += "[" + oneLine(r.Sheet) + "]"
	}
	if r.ErrorRow > 0 {
		s += fmt.Sprintf(":%d", r.ErrorRow)
	}
	if r.Dataset != "" {
		s += fmt.Sprintf(", data set %q", shortened(r.Dataset))
	}
	return s
}

// oneLine makes a text of a file harmless for a terminal.
func oneLine(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f || r >= 0x80 && r < 0xa0 {
			return ' '
		}
		return r
	}, shortened(s))
}

func shortened(s string) string {
	const most = 300
	if r := []rune(s); len(r) > most {
		return string(r[:most]) + "…"
	}
	return s
}
