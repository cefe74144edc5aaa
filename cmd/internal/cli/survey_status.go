package cli

import (
	"cmp"
	"context"
	"fmt"
	"io"
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
		Example: `  onebarrier survey status --store results.sqlite
  onebarrier survey status --store results.sqlite --json`,
		Args: atMost(0, ""),
		RunE: func(cmd *cobra.Command, _ []string) error {
			s, err := o.open(cmd)
			if err != nil {
				return err
			}
			defer s.Close()
			status, err := statusOf(cmd.Context(), s)
			if err != nil {
				return err
			}
			if a.json {
				return report.JSON(a.out, status.document())
			}
			return status.write(a.out)
		},
	}
	addStore(cmd, o, true)
	a.addJSON(cmd)
	return cmd
}

// surveyStatus is what a store holds, counted.
type surveyStatus struct {
	path           string
	number         int   // of the settings in use
	kept           []int // numbers of all settings
	settings       survey.Settings
	shards         []survey.Shard
	running        []survey.Running
	sets, files    int
	states, errors map[string]int          // by verdict, by error code
	examples       map[string][]survey.Row // the first of each error code
	tally          survey.Tally
	standing       survey.Standing
}

func statusOf(ctx context.Context, s *survey.Store) (*surveyStatus, error) {
	st := &surveyStatus{path: s.Path(), number: s.Number(), settings: s.Settings(),
		states: map[string]int{}, errors: map[string]int{}, examples: map[string][]survey.Row{}}
	all, err := s.AllSettings()
	if err != nil {
		return nil, err
	}
	st.kept = slices.Sorted(maps.Keys(all))
	if st.shards, err = s.Shards(); err != nil {
		return nil, err
	}
	if st.running, err = s.Running(); err != nil {
		return nil, err
	}
	const shown = 3 // examples of each error
	last := ""
	st.tally, err = s.Table(ctx, survey.TableOptions{}, func(r *survey.Row) error {
		st.sets++
		if r.SourceFile != last {
			st.files, last = st.files+1, r.SourceFile
		}
		if r.ErrorCode == "" {
			st.states[r.State]++
			return nil
		}
		st.errors[r.ErrorCode]++
		if e := st.examples[r.ErrorCode]; len(e) < shown {
			st.examples[r.ErrorCode] = append(e, *r)
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	st.standing, err = s.Standing(ctx)
	return st, err
}

// codes lists the error codes, the most frequent first.
func (s *surveyStatus) codes() []string {
	return slices.SortedFunc(maps.Keys(s.errors), func(x, y string) int {
		return cmp.Or(s.errors[y]-s.errors[x], strings.Compare(x, y))
	})
}

func (s *surveyStatus) write(w io.Writer) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %s of %s\n", s.path, manyOf(s.sets, "data set"), manyOf(s.files, "file"))
	if len(s.kept) > 1 {
		fmt.Fprintf(&b, "settings %d of %s; --settings NUMBER shows others\n", s.number, strings.Trim(strings.ReplaceAll(fmt.Sprint(s.kept), " ", ", "), "[]"))
	}
	var settings []string
	for _, name := range slices.Sorted(maps.Keys(s.settings)) {
		settings = append(settings, name+" "+s.settings[name])
	}
	for _, l := range report.Wrap("settings: "+strings.Join(settings, "; "), 80) {
		fmt.Fprintln(&b, l)
	}
	for _, l := range partLines(s.shards) {
		fmt.Fprintln(&b, l)
	}
	for _, r := range s.running {
		fmt.Fprintf(&b, "survey run is at work on it: %v\n", r)
	}
	for _, sentence := range s.standing.Sentences() {
		for _, l := range report.Wrap(sentence, 80) {
			fmt.Fprintln(&b, l)
		}
	}
	if len(s.states) > 0 {
		b.WriteString("\nverdicts, at 5 % for each data set by itself\n")
		for _, state := range diagnostics.States {
			if c := s.states[string(state)]; c > 0 {
				fmt.Fprintf(&b, "  %7d  %s\n", c, state)
			}
		}
	}
	if s.tally.Testable > 0 {
		b.WriteString("\nat a false discovery rate of 5 %, over ")
		fmt.Fprintf(&b, "%s that can be tested\n", manyOf(s.tally.Testable, "data set"))
		fmt.Fprintf(&b, "  %7d  E changes: survey table --max-q 0.05\n", s.tally.Found)
		fmt.Fprintf(&b, "  %7d  by more than a prefactor explains: survey table --max-q-band 0.05\n", s.tally.FoundBand)
	}
	if len(s.errors) > 0 {
		b.WriteString("\ncould not be used\n")
		for _, code := range s.codes() {
			fmt.Fprintf(&b, "  %7d  %s\n", s.errors[code], code)
			for _, r := range s.examples[code] {
				for _, l := range report.Wrap(placeOf(&r)+": "+oneLine(r.Error), 80-11) {
					fmt.Fprintf(&b, "           %s\n", l)
				}
			}
			if more := s.errors[code] - len(s.examples[code]); more > 0 {
				fmt.Fprintf(&b, "           and %d more\n", more)
			}
		}
		store := report.ShellWord(s.path)
		fmt.Fprintf(&b, "next: onebarrier survey table --store %s --state failed   prints all of them\n", store)
		fmt.Fprintf(&b, "      onebarrier survey show FILE --store %s   every problem of one\n", store)
	}
	_, err := fmt.Fprint(w, b.String())
	return err
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
