package cli

import (
	"fmt"
	"path/filepath"
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

// places is the value of --leave-out: LINE or FILE:LINE, separated by commas.
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
		p, ok := parsePlace(text)
		if !ok {
			text += "," // the name of a file may hold commas
			continue
		}
		*v.all = append(*v.all, p)
		text = ""
	}
	if text = strings.TrimSuffix(text, ","); text != "" {
		return fmt.Errorf("%q is no line; write its number, or FILE:LINE where several files are named", text)
	}
	return nil
}

func parsePlace(s string) (place, bool) {
	file, line := "", s
	if i := strings.LastIndexByte(s, ':'); i > 0 {
		file, line = s[:i], s[i+1:]
	}
	n, err := strconv.Atoi(strings.TrimSpace(line))
	return place{file, n}, err == nil && n >= 1
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
