package cli

import (
	"fmt"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// place is a line of a file; file is "" where only one is named.
type place struct {
	file string
	line int
}

func (p place) String() string {
	if p.file == "" {
		return strconv.Itoa(p.line)
	}
	return p.file + ":" + strconv.Itoa(p.line)
}

// places is the value of --leave-out: LINE, FIRST..LAST or FILE: and one of them,
// separated by commas.
type places struct{ all *[]place }

func (v places) String() string { return strings.Join(v.GetSlice(), ",") }
func (v places) Type() string   { return "lines" }

// GetSlice, Append and Replace make it a pflag.SliceValue.
func (v places) GetSlice() []string {
	var out []string
	for _, p := range *v.all {
		out = append(out, p.String())
	}
	return out
}
func (v places) Append(s string) error { return v.Set(s) }
func (v places) Replace(all []string) error {
	*v.all = nil
	for _, s := range all {
		if err := v.Set(s); err != nil {
			return err
		}
	}
	return nil
}

func (v places) Set(s string) error {
	text := ""
	for _, part := range strings.Split(s, ",") {
		if text += part; text == "" {
			continue
		}
		ps, ok := parsePlaces(text)
		if !ok {
			text += "," // the name of a file may hold commas
			continue
		}
		*v.all = append(*v.all, ps...)
		text = ""
	}
	if text = strings.TrimSuffix(text, ","); reHyphens.MatchString(text) {
		return fmt.Errorf("%q is no line; write a range of lines as %s", text, strings.NewReplacer("-", "..", "–", "..").Replace(text))
	}
	if text = strings.TrimSuffix(text, ","); text != "" {
		return fmt.Errorf("%q is no line; write its number, a range such as 20..22, or FILE:LINE where several files are named", text)
	}
	return nil
}

// reHyphens finds a range of lines written with a hyphen.
var reHyphens = regexp.MustCompile(`^(?:.*:)?\s*\d+\s*[-–]\s*\d+$`)

// parsePlaces reads a line, or a range of them.
func parsePlaces(s string) ([]place, bool) {
	const most = 10_000 // lines that a range may hold
	file, lines := "", s
	if i := strings.LastIndexByte(s, ':'); i > 0 {
		file, lines = s[:i], s[i+1:]
	}
	from, to, isRange := strings.Cut(lines, "..")
	if !isRange {
		to = from
	}
	first, err1 := strconv.Atoi(strings.TrimSpace(from))
	last, err2 := strconv.Atoi(strings.TrimSpace(to))
	if err1 != nil || err2 != nil || first < 1 || last < first || last-first >= most {
		return nil, false
	}
	var ps []place
	for n := first; n <= last; n++ {
		ps = append(ps, place{file, n})
	}
	return ps, true
}

// linesOf gives the lines to leave out of one of several files. A file is named
// as on the command line, or without its folder where that tells it from the
// others.
func linesOf(all []place, file string, files []string) []int {
	var lines []int
	for _, p := range all {
		if p.file == "" || fileNamed(p.file, files) == file {
			lines = append(lines, p.line)
		}
	}
	return lines
}

// fileNamed is the one of several files that a name means, "" if none or several.
func fileNamed(name string, files []string) string {
	if slices.Contains(files, name) {
		return name
	}
	found := ""
	for _, f := range files {
		if filepath.Base(f) == name {
			if found != "" {
				return ""
			}
			found = f
		}
	}
	return found
}

// checkPlaces refuses lines that do not say, or cannot say, in which file they are.
func checkPlaces(all []place, files []string) error {
	for _, p := range all {
		switch {
		case p.file == "" && len(files) > 1:
			return usagef(fmt.Sprintf("write --leave-out %s:%d", files[0], p.line),
				"--leave-out %d does not say in which of %d files the line is", p.line, len(files))
		case p.file != "" && fileNamed(p.file, files) == "":
			return usagef("name it as on the command line", "--leave-out %s: no such file is named, or several are", p)
		}
	}
	return nil
}
